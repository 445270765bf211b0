"""Gate charge: the reading on straight lines, the facts of the trade on predicted curves, and the errors."""

import re
from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq

from fitter.errors import OperatingPointError
from fitter.gate_charge import GateChargeReading, OperatingPoint, gate_charge_curve, read_gate_charge
from fitter.models.transistor import Transistor

LOADS = ("current", "resistive")
READINGS = ("total", "q_gs", "q_gd", "v_plateau")
STEP = 1e-30

# Three transistors, invented; orders of magnitude are those of the kind of part.
TRENCH = {
    "c_gs": 2.0e-9, "c_ch": 0.5e-9, "c_acc": 1.2e-9,
    "c0_gd": 1.0e-9, "phi_gd": 0.8, "m_gd": 0.5, "cf_gd": 5e-12,
    "c0_ds": 2.0e-9, "phi_ds": 0.8, "m_ds": 0.5, "cf_ds": 1e-11,
    "v_th": 3.0, "k": 100.0, "w": 0.1, "lambda": 0.0, "r_s": 1e-3, "r_d": 3e-3,
}  # fmt: skip
SUPERJUNCTION = {
    "c_gs": 2.4e-9, "c_ch": 0.4e-9, "c_acc": 2.6e-9,
    "c0_gd": 1.5e-9, "phi_gd": 0.9, "m_gd": 0.6, "cf_gd": 2e-12, "s1_gd": 0.98, "vs1_gd": 12.0, "ws1_gd": 0.3,
    "c0_ds": 9.0e-9, "phi_ds": 0.8, "m_ds": 0.4, "cf_ds": 2e-11, "s1_ds": 0.97, "vs1_ds": 20.0, "ws1_ds": 0.2,
    "v_th": 3.8, "k": 25.0, "w": 0.09, "lambda": 0.0, "r_s": 5e-3, "r_d": 55e-3,
}  # fmt: skip
CARBIDE = {
    "c_gs": 1.8e-9, "c_ch": 0.3e-9, "c_acc": 1.1e-9,
    "c0_gd": 0.6e-9, "phi_gd": 2.0, "m_gd": 0.6, "cf_gd": 1e-12, "s1_gd": 0.8, "vs1_gd": 25.0, "ws1_gd": 0.4,
    "c0_ds": 1.5e-9, "phi_ds": 2.5, "m_ds": 0.5, "cf_ds": 1e-11,
    "v_th": 4.5, "k": 4.0, "w": 0.25, "lambda": 0.0, "r_s": 20e-3, "r_d": 15e-3,
}  # fmt: skip
PARTS = [
    pytest.param(Transistor.from_values(TRENCH), OperatingPoint(v_dd=40.0, i_d=40.0, v_gs=10.0), id="trench"),
    pytest.param(Transistor.from_values(SUPERJUNCTION), OperatingPoint(v_dd=400.0, i_d=20.0, v_gs=10.0), id="650 V"),
    pytest.param(Transistor.from_values(CARBIDE), OperatingPoint(v_dd=800.0, i_d=20.0, v_gs=18.0), id="1200 V"),
]
each_part = pytest.mark.parametrize(("transistor", "point"), PARTS)
each_load = pytest.mark.parametrize("load", LOADS)


def carrying_voltage(transistor, i_d, v_ds):
    """Terminal gate voltage at which the transistor carries a current."""
    return brentq(lambda v: float(transistor.i_d(v, v_ds)) - i_d, 0.0, 50.0, xtol=1e-12)


def on_state_voltage(transistor, point):
    """Terminal drain voltage at which the transistor carries the load's current with the gate at its end."""
    return brentq(lambda v: float(transistor.i_d(point.v_gs, v)) - point.i_d, 0.0, point.v_dd, xtol=1e-12)


def inner_voltages(transistor, curve):
    """Voltages behind the series resistances."""
    r_s, r_d = transistor.channel.r_s, transistor.channel.r_d
    return curve.v_gs - curve.i_d * r_s, curve.v_ds - curve.i_d * (r_s + r_d)


# The reading, on straight lines


def lines(q_gs, q_gd, total, v_plateau, v_gs, points=60):
    """A curve of three straight lines, all through sampled corners."""
    corners = [0.0, q_gs, q_gs + q_gd, total]
    legs = [np.linspace(a, b, points, endpoint=False) for a, b in pairwise(corners)]
    q = np.append(np.concatenate(legs), total)
    return q, np.interp(q, corners, [0.0, v_plateau, v_plateau, v_gs])


# JESD24-2's reading, on three straight lines (arithmetic): slope 1/(2 nF) to 4 V, flat for 12 nC, then slope 1/(4 nF):
# QGS 8, QGD 12, QG(10 V) 44 nC; line 2 meets Q = 0 at -1 V.
THREE_LINES = {"q_gs": 8e-9, "q_gd": 12e-9, "total": 44e-9, "v_plateau": 4.0}


def test_slopes_of_the_three_lines_are_those_of_the_published_check():
    q, v = lines(**THREE_LINES, v_gs=10.0)
    assert (v[1] - v[0]) / (q[1] - q[0]) == pytest.approx(1.0 / 2e-9)
    assert (v[-1] - v[-2]) / (q[-1] - q[-2]) == pytest.approx(1.0 / 4e-9)


@pytest.mark.parametrize("name", READINGS)
def test_reading_of_three_straight_lines(name):
    reading = read_gate_charge(*lines(**THREE_LINES, v_gs=10.0), 3.0)
    assert float(getattr(reading, name)) == pytest.approx(THREE_LINES[name], rel=1e-9)


def test_line_2_of_three_straight_lines_meets_no_charge_at_minus_one_volt():
    reading = read_gate_charge(*lines(**THREE_LINES, v_gs=10.0), 3.0)
    end_of_plateau = float(reading.q_gs + reading.q_gd)
    slope = (10.0 - float(reading.v_plateau)) / (float(reading.total) - end_of_plateau)
    assert float(reading.v_plateau) - slope * end_of_plateau == pytest.approx(-1.0, abs=1e-9)


@pytest.mark.parametrize("v_th", [1.0, 2.5, 3.9])
def test_threshold_anywhere_on_line_1_gives_the_same_reading(v_th):
    reading = read_gate_charge(*lines(**THREE_LINES, v_gs=10.0), v_th)
    assert float(reading.q_gs) == pytest.approx(8e-9, rel=1e-9)


@pytest.mark.parametrize("window", [0.05, 0.1, 0.2])
def test_reading_with_a_window_of_three_straight_lines(window):
    reading = read_gate_charge(*lines(**THREE_LINES, v_gs=10.0), 3.0, window=window)
    assert float(reading.v_plateau) == pytest.approx(4.0, abs=1e-9)
    assert float(reading.q_gs) == pytest.approx(8e-9, rel=1e-9)
    assert float(reading.q_gd) == pytest.approx(12e-9, rel=1e-9)


def test_reading_with_a_window_of_clicked_lines():
    # Reading errors of 1/500 of either axis; a window finds the plateau that single steps do not.
    random = np.random.default_rng(7)
    q, v = lines(**THREE_LINES, v_gs=10.0, points=12)
    q = np.sort(q + random.normal(0.0, 44e-9 / 500.0, q.size))
    v = v + random.normal(0.0, 10.0 / 500.0, v.size)
    reading = read_gate_charge(q, v, 3.0, window=0.1)
    assert float(reading.v_plateau) == pytest.approx(4.0, abs=0.05)
    assert float(reading.q_gs) == pytest.approx(8e-9, rel=0.03)
    assert float(reading.q_gd) == pytest.approx(12e-9, rel=0.05)


def test_reading_does_not_depend_on_how_points_are_spread():
    transistor, point = PARTS[0].values
    curve = gate_charge_curve(transistor, point)
    even = np.linspace(0.0, curve.total, 3000)
    reading = read_gate_charge(even, np.interp(even, curve.q_g, curve.v_gs), transistor.channel.v_th)
    assert float(reading.q_gs) == pytest.approx(curve.q_gs, rel=0.01)
    assert float(reading.q_gd) == pytest.approx(curve.q_gd, rel=0.01)


def test_lines_lean_to_no_side_where_points_are_denser():
    # The last leg bends at 8.5 V; one curve has ten times the points above it.
    corners, volts = [0.0, 8e-9, 20e-9, 38e-9, 50e-9], [0.0, 4.0, 4.0, 8.5, 10.0]
    even = np.linspace(0.0, 50e-9, 2001)
    dense = np.concatenate([even[even < 38e-9], np.linspace(38e-9, 50e-9, 4800)])
    one, other = (read_gate_charge(q, np.interp(q, corners, volts), 3.0) for q in (even, dense))
    assert float(other.q_gd) == pytest.approx(float(one.q_gd), rel=5e-3)


def test_line_2_is_drawn_through_the_upper_half_of_the_way_to_the_end():
    # Above 7 V, half-way from 4 V to 10 V, 1/(4 nF): extended to 4 V it meets 36 - 12 = 24 nC, less QGS 8 (arithmetic).
    corners, volts = [0.0, 8e-9, 20e-9, 36e-9, 48e-9], [0.0, 4.0, 4.0, 7.0, 10.0]
    q = np.linspace(0.0, 48e-9, 961)
    reading = read_gate_charge(q, np.interp(q, corners, volts), 3.0)
    assert float(reading.q_gd) == pytest.approx(16e-9, rel=1e-3)


def test_reading_scales_with_charge():
    q, v = lines(**THREE_LINES, v_gs=10.0)
    once, thrice = read_gate_charge(q, v, 3.0), read_gate_charge(3.0 * q, v, 3.0)
    assert float(thrice.q_gs) == pytest.approx(3.0 * float(once.q_gs))
    assert float(thrice.q_gd) == pytest.approx(3.0 * float(once.q_gd))
    assert float(thrice.v_plateau) == float(once.v_plateau)


def test_readings_of_many_curves_at_once():
    pairs = [lines(**THREE_LINES, v_gs=10.0), lines(5e-9, 20e-9, 60e-9, 5.0, 12.0)]
    reading = read_gate_charge(*(np.array(x) for x in zip(*pairs, strict=True)), np.array([3.0, 3.0]))
    np.testing.assert_allclose(reading.q_gs, [8e-9, 5e-9])
    np.testing.assert_allclose(reading.q_gd, [12e-9, 20e-9])
    np.testing.assert_allclose(reading.v_plateau, [4.0, 5.0])


def test_without_points_below_threshold_there_is_no_line_1():
    q, v = lines(**THREE_LINES, v_gs=10.0)
    kept = v > 3.2
    reading = read_gate_charge(q[kept], v[kept], 3.0)
    assert np.isnan(float(reading.q_gs))
    assert np.isnan(float(reading.q_gd))
    assert float(reading.total) == pytest.approx(44e-9)


# Published datasheet values

# Datasheets (Ciss pF; QG/QGS/QGD nC at VGS 10 V; plateau V): IPW65R045C7 4340; 93/23/30; 5.4 (ratio 0.981).
# IPA60R120P7 1544; 36/8/11; 5.2 (0.996). BSC093N04LS 1400; 18/4.9/2.0; 3.5 (1.000). Last leg's slope over Ciss:
# 2.00, 2.29, 1.22.
DATASHEETS = [
    pytest.param(4340e-12, (93e-9, 23e-9, 30e-9), 5.4, 400.0, 2.00, 0.5e-9, id="IPW65R045C7"),
    pytest.param(1544e-12, (36e-9, 8e-9, 11e-9), 5.2, 400.0, 2.29, 0.5e-9, id="IPA60R120P7"),
    pytest.param(1400e-12, (18e-9, 4.9e-9, 2.0e-9), 3.5, 20.0, 1.22, 0.05e-9, id="BSC093N04LS"),
]
each_datasheet = pytest.mark.parametrize(("c_iss", "charges", "v_plateau", "v_dd", "last", "rounding"), DATASHEETS)


def from_datasheet(c_iss, charges, v_plateau, v_dd, last):
    """Predicted curve of a transistor with a datasheet's Ciss, plateau, QGD and last leg; the rest is invented.

    What the last leg's slope has more than Ciss is half the channel's, half the accumulated surface's.
    """
    c_f, more = 0.002 * c_iss, 0.5 * (last - 1.0) * c_iss
    values = TRENCH | {
        "c_ch": more, "c_acc": more + c_f, "phi_gd": 0.5, "m_gd": 0.9, "cf_gd": c_f,
        "k": 2000.0, "w": 0.05, "v_th": v_plateau - 0.1, "r_s": 0.0, "r_d": 0.0,
    }  # fmt: skip

    def curve(c_0):
        one = Transistor.from_values(values | {"c0_gd": c_0})
        one = replace(one, c_gs=c_iss - float(one.c_rss(v_dd)))
        return gate_charge_curve(one, OperatingPoint(v_dd=v_dd, i_d=10.0, v_gs=10.0))

    return curve(brentq(lambda c_0: curve(c_0).q_gd - charges[2], 1e-12, 1e-7, xtol=1e-18))


@each_datasheet
def test_predicted_first_leg_takes_the_printed_charge(c_iss, charges, v_plateau, v_dd, last, rounding):
    # First leg: QGS / Vplateau = Ciss(VDD).
    curve = from_datasheet(c_iss, charges, v_plateau, v_dd, last)
    assert curve.v_plateau == pytest.approx(v_plateau, abs=0.02)
    assert curve.q_gs == pytest.approx(charges[1], abs=rounding)


@each_datasheet
def test_predicted_last_leg_takes_the_printed_charge(c_iss, charges, v_plateau, v_dd, last, rounding):
    # With the last leg's slope over Ciss, and QGD as printed, the total is the printed one.
    curve = from_datasheet(c_iss, charges, v_plateau, v_dd, last)
    assert curve.q_gd == pytest.approx(charges[2], rel=1e-3)
    assert curve.total == pytest.approx(charges[0], abs=rounding + 0.01 * charges[0])


@each_datasheet
def test_reading_of_lines_through_printed_values_gives_them_back(c_iss, charges, v_plateau, v_dd, last, rounding):
    total, q_gs, q_gd = charges
    reading = read_gate_charge(*lines(q_gs, q_gd, total, v_plateau, 10.0), 0.5 * v_plateau)
    assert float(reading.q_gs) == pytest.approx(q_gs)
    assert float(reading.q_gd) == pytest.approx(q_gd)
    slope_over_c_iss = (total - float(reading.q_gs + reading.q_gd)) / (10.0 - float(reading.v_plateau)) / c_iss
    assert slope_over_c_iss == pytest.approx(last, abs=0.01)


def test_switching_charge_of_lines_through_printed_values_is_the_printed_one():
    # QSW = QGS - QG(th) + QGD: BSC093N04LS 4.9 - 2.3 + 2.0 = 4.6 nC, as printed.
    q, v = lines(4.9e-9, 2.0e-9, 18e-9, 3.5, 10.0)
    v_th = float(np.interp(2.3e-9, q, v))
    reading = read_gate_charge(q, v, v_th)
    assert float(reading.q_gs - np.interp(v_th, v[:60], q[:60]) + reading.q_gd) == pytest.approx(4.6e-9, rel=1e-9)


@each_part
@each_load
def test_charge_at_threshold_is_near_input_capacitance_times_threshold(transistor, point, load):
    # QG(th) = Ciss VTH nearly: over 16 Texas Instruments datasheets the ratio has mean 0.986, standard deviation 0.081,
    # range 0.84 to 1.13.
    curve = gate_charge_curve(transistor, replace(point, load=load))
    v_th = transistor.channel.v_th
    ratio = float(np.interp(v_th, curve.v_gs, curve.q_g)) / float(transistor.c_iss(point.v_dd) * v_th)
    assert 0.84 < ratio < 1.13


@each_part
def test_charge_on_the_plateau_is_above_the_capacitance_at_the_supply_times_it(transistor, point):
    # Crss at one voltage times VDD is always below QGD: factors 1.1 to 20 over some forty datasheets.
    curve = gate_charge_curve(transistor, point)
    assert 1.1 < curve.q_gd / float(transistor.c_rss(point.v_dd) * point.v_dd) < 20.0


# Facts of the trade (common practice, no source)


@each_part
@each_load
def test_plateau_rises_with_the_load_current(transistor, point, load):
    plateaus = [
        gate_charge_curve(transistor, replace(point, i_d=share * point.i_d, load=load)).v_plateau
        for share in (0.25, 0.5, 1.0, 1.5)
    ]
    assert np.all(np.diff(plateaus) > 0.01)


@each_part
@each_load
def test_plateau_lies_above_the_threshold(transistor, point, load):
    assert gate_charge_curve(transistor, replace(point, load=load)).v_plateau > transistor.channel.v_th


@each_part
def test_plateau_is_the_gate_voltage_that_carries_the_load_current(transistor, point):
    curve = gate_charge_curve(transistor, point)
    assert curve.v_plateau == pytest.approx(carrying_voltage(transistor, point.i_d, point.v_dd), abs=1e-3)


@each_part
def test_plateau_of_a_resistive_load_lies_a_little_lower(transistor, point):
    # There the current rises while VDS falls, and is nowhere above that of the other load.
    full = gate_charge_curve(transistor, point).v_plateau
    rising = gate_charge_curve(transistor, replace(point, load="resistive")).v_plateau
    assert 0.9 * full < rising < full


@each_part
@each_load
def test_drain_current_begins_at_the_threshold(transistor, point, load):
    curve = gate_charge_curve(transistor, replace(point, load=load))
    below = curve.v_gs < transistor.channel.v_th - 2.5 * transistor.channel.w
    assert np.any(below)
    assert np.all(curve.i_d[below] < 0.01 * point.i_d)


@each_part
def test_drain_voltage_falls_once_the_current_has_reached_the_loads(transistor, point):
    curve = gate_charge_curve(transistor, point)
    rising = curve.i_d < (1.0 - 1e-9) * point.i_d
    np.testing.assert_allclose(curve.v_ds[rising], point.v_dd, rtol=1e-12)
    np.testing.assert_allclose(curve.i_d[~rising], point.i_d, rtol=1e-9)
    assert curve.v_ds[~rising][0] == pytest.approx(point.v_dd)
    assert np.all(np.diff(curve.v_ds[~rising]) < 0.0)


@each_part
def test_plateau_ends_when_the_drain_voltage_has_reached_its_on_state_value(transistor, point):
    curve, on_state = gate_charge_curve(transistor, point), on_state_voltage(transistor, point)
    at_start, at_end = np.interp([1.05 * curve.q_gs, curve.q_gs + curve.q_gd], curve.q_g, curve.v_ds)
    assert at_start > 0.5 * point.v_dd
    assert on_state < at_end < on_state + 0.02 * point.v_dd


@each_part
def test_drain_voltage_ends_at_its_on_state_value(transistor, point):
    curve = gate_charge_curve(transistor, point)
    assert curve.v_ds[-1] == pytest.approx(on_state_voltage(transistor, point), rel=1e-8)


@each_part
def test_drain_voltage_falls_at_gate_current_over_gate_drain_capacitance(transistor, point):
    # During the plateau the gate current is constant, so dVDS/dt = IG/Cgd(VDG).
    curve = gate_charge_curve(transistor, point)
    inner_v_gs, inner_v_ds = inner_voltages(transistor, curve)
    falling = (curve.i_d > 0.999 * point.i_d) & (inner_v_ds > 2.5 * inner_v_gs)
    assert np.count_nonzero(falling) > 30
    q, v_ds = curve.q_g[falling], curve.v_ds[falling]
    v_dg = (inner_v_ds - inner_v_gs)[falling]
    middle = 0.5 * (v_dg[:-1] + v_dg[1:])
    np.testing.assert_allclose(-np.diff(v_ds) / np.diff(q), 1.0 / transistor.c_gd(middle), rtol=0.01)


@each_part
def test_drain_voltage_falls_ever_more_slowly(transistor, point):
    # The voltage falls ever more slowly towards low VDS, because Cgd grows there; until the gate passes the drain.
    curve = gate_charge_curve(transistor, point)
    inner_v_gs, inner_v_ds = inner_voltages(transistor, curve)
    falling = (curve.i_d > 0.999 * point.i_d) & (inner_v_ds > inner_v_gs)
    rate = -np.diff(curve.v_ds[falling]) / np.diff(curve.q_g[falling])
    assert rate.size > 50
    assert np.all(np.diff(rate)[1:] < 0.0)


# The curve


@each_part
@each_load
def test_curve_has_300_points_from_no_charge_to_the_final_gate_voltage(transistor, point, load):
    curve = gate_charge_curve(transistor, replace(point, load=load))
    assert curve.q_g.shape == curve.v_gs.shape == curve.v_ds.shape == curve.i_d.shape == (300,)
    assert curve.q_g[0] == 0.0
    assert curve.v_gs[0] == pytest.approx(0.0, abs=1e-9)
    assert curve.v_ds[0] == pytest.approx(point.v_dd)
    assert curve.v_gs[-1] == pytest.approx(point.v_gs, rel=1e-9)
    assert curve.total == curve.q_g[-1]


@each_part
@each_load
def test_transistor_carries_the_current_at_every_point(transistor, point, load):
    curve = gate_charge_curve(transistor, replace(point, load=load))
    np.testing.assert_allclose(transistor.i_d(curve.v_gs, curve.v_ds), curve.i_d, rtol=1e-7)


@each_part
def test_curve_of_a_resistive_load_keeps_to_the_load_line(transistor, point):
    curve = gate_charge_curve(transistor, replace(point, load="resistive"))
    np.testing.assert_allclose(curve.v_ds + curve.i_d * point.v_dd / point.i_d, point.v_dd, rtol=1e-10)


@each_part
@each_load
def test_charge_is_the_integral_of_the_capacitances_along_the_curve(transistor, point, load):
    curve = gate_charge_curve(transistor, replace(point, load=load))
    inner_v_gs, inner_v_ds = inner_voltages(transistor, curve)

    def step(charge, v):
        # Fifty steps of the capacitance, the slope of the charge, between neighbouring points.
        v = np.interp(np.linspace(0.0, 299.0, 299 * 50 + 1), np.arange(300.0), v)
        middle = 0.5 * (v[:-1] + v[1:])
        return np.sum(charge(middle + STEP * 1j).imag / STEP * np.diff(v))

    total = step(transistor.q_gs, inner_v_gs) - step(transistor.q_gd, inner_v_ds - inner_v_gs)
    assert curve.total == pytest.approx(total, rel=1e-4)


@each_part
def test_charge_at_the_end_does_not_depend_on_the_path(transistor, point):
    # QG = Qgs(VGS') + Qgd(VDD) - Qgd(VDS' - VGS'): the resistive load that carries the same current at the end.
    r_s, r_d = transistor.channel.r_s, transistor.channel.r_d
    v_ds = on_state_voltage(transistor, point)
    load_resistance = (point.v_dd - v_ds) / point.i_d
    same_end = replace(point, i_d=point.v_dd / load_resistance, load="resistive")
    by_current, by_resistor = gate_charge_curve(transistor, point), gate_charge_curve(transistor, same_end)
    inner_v_gs, inner_v_ds = point.v_gs - point.i_d * r_s, v_ds - point.i_d * (r_s + r_d)
    expected = transistor.q_gs(inner_v_gs) + transistor.q_gd(point.v_dd) - transistor.q_gd(inner_v_ds - inner_v_gs)
    assert by_current.total == pytest.approx(float(expected), rel=1e-9)
    assert by_resistor.total == pytest.approx(float(expected), rel=1e-9)


def test_reading_of_a_nearly_ideal_transistor_is_the_closed_form():
    # A sharp threshold, no resistances, a channel of micro-ohms: the three legs are all capacitance (arithmetic).
    values = TRENCH | {"w": 0.05, "k": 1e5, "r_s": 0.0, "r_d": 0.0, "phi_gd": 5.0}
    transistor, point = Transistor.from_values(values), OperatingPoint(v_dd=60.0, i_d=12500.0, v_gs=10.0)
    v_p = 3.0 + np.sqrt(2.0 * 12500.0 / 1e5)
    c_ch, c_acc, v_th = 0.5e-9, 1.2e-9, 3.0
    first = 2.0e-9 * v_p + float(transistor.q_gd(60.0) - transistor.q_gd(60.0 - v_p))
    through = float(transistor.q_gd(60.0 - v_p)) + c_acc * v_p + c_ch * (v_p - v_th)
    curve = gate_charge_curve(transistor, point)
    assert curve.v_plateau == pytest.approx(v_p, abs=1e-3)
    assert curve.q_gs == pytest.approx(first, rel=0.005)
    assert curve.q_gd == pytest.approx(through, rel=0.03)


def logarithmic(lower, upper):
    """Numbers spread evenly over their logarithm."""
    return st.floats(np.log(lower), np.log(upper)).map(lambda x: float(np.exp(x)))


@st.composite
def reachable(draw):
    """A transistor that is off at VGS = 0, and an operating point that it reaches."""
    c, w, v_th = draw(logarithmic(1e-10, 1e-8)), draw(logarithmic(0.05, 0.25)), draw(st.floats(2.0, 6.0))
    k, overdrive, v_dd = draw(logarithmic(0.1, 1000.0)), draw(st.floats(0.2, 4.0)), draw(logarithmic(10.0, 1000.0))
    i_d, share = 0.5 * k * overdrive**2, st.floats(0.0, 1.0)
    values = {
        "c_gs": c, "s_gs": 0.8 * draw(share), "c_ch": c * draw(share), "c_acc": c * draw(st.floats(0.1, 1.0)),
        "c0_gd": c * draw(st.floats(0.1, 1.0)), "phi_gd": draw(logarithmic(0.3, 5.0)),
        "m_gd": draw(st.floats(0.3, 0.8)), "cf_gd": 1e-3 * c * draw(share),
        "c0_ds": c, "phi_ds": 0.8, "m_ds": 0.5, "cf_ds": 0.0,
        "v_th": v_th, "k": k, "w": w, "alpha": draw(st.floats(0.7, 4.0)),
        "lambda": draw(st.one_of(st.just(0.0), logarithmic(1e-4, 0.02))),
        "r_s": min(0.02 * v_dd, 1.0) * draw(share) / i_d, "r_d": 0.2 * v_dd * draw(share) / i_d,
    }  # fmt: skip
    for n in range(1, draw(st.integers(0, 2)) + 1):
        values |= {f"s{n}_gd": draw(share), f"vs{n}_gd": draw(logarithmic(1.0, v_dd))}
        values |= {f"ws{n}_gd": draw(logarithmic(0.03, 3.0))}
    v_gs = v_th + overdrive + i_d * values["r_s"] + draw(st.floats(1.0, 8.0))
    return Transistor.from_values(values), OperatingPoint(
        v_dd=v_dd, i_d=i_d, v_gs=v_gs, load=draw(st.sampled_from(LOADS))
    )


EXAMPLES = settings(derandomize=True, deadline=None, max_examples=100)


@EXAMPLES
@given(reachable())
def test_curve_is_monotone(test):
    transistor, point = test
    curve = gate_charge_curve(transistor, point)
    assert np.all(np.diff(curve.q_g) > 0.0)
    assert np.all(np.diff(curve.v_gs) >= -1e-12 * point.v_gs)
    assert np.all(np.diff(curve.v_ds) <= 1e-12 * point.v_dd)
    assert np.all(np.diff(curve.i_d) >= -1e-9 * point.i_d)


@EXAMPLES
@given(reachable())
def test_reading_orders_the_charges(test):
    transistor, point = test
    curve = gate_charge_curve(transistor, point)
    assert 0.0 < curve.q_gs < curve.total
    assert 0.0 < curve.q_gd < curve.total
    assert curve.q_gs + curve.q_gd < curve.total
    assert 0.0 < curve.v_plateau < point.v_gs


@EXAMPLES
@given(reachable())
def test_charge_at_the_end_is_that_of_the_inner_end_voltages(test):
    transistor, point = test
    curve = gate_charge_curve(transistor, point)
    inner_v_gs, inner_v_ds = (float(v[-1]) for v in inner_voltages(transistor, curve))
    q_gd = transistor.q_gd(point.v_dd) - transistor.q_gd(inner_v_ds - inner_v_gs)
    assert curve.total == pytest.approx(float(transistor.q_gs(inner_v_gs) + q_gd), rel=1e-9)


# Many curves, and derivatives


@each_load
def test_many_curves_at_once_are_those_of_one_at_a_time(load):
    point = OperatingPoint(v_dd=40.0, i_d=40.0, v_gs=10.0, load=load)
    v_th, c0_gd = np.array([[2.5], [3.5]]), np.array([[0.5e-9], [1.5e-9]])
    many = gate_charge_curve(Transistor.from_values(TRENCH | {"v_th": v_th, "c0_gd": c0_gd}), point)
    assert many.q_g.shape == (2, 300)
    for row in range(2):
        values = TRENCH | {"v_th": v_th[row, 0], "c0_gd": c0_gd[row, 0]}
        one = gate_charge_curve(Transistor.from_values(values), point)
        np.testing.assert_allclose(many.q_g[row], one.q_g, rtol=1e-9)
        for name in READINGS:
            assert getattr(many.reading, name)[row] == pytest.approx(float(getattr(one.reading, name)), rel=1e-9)


# lambda is above zero: at zero the plateau is flat to the last digit, and any of its points the flattest.
SLOPING = TRENCH | {"lambda": 0.01}
MOVING = tuple(name for name in SLOPING if not name.endswith("_ds"))


def reading_of(load, **changes) -> GateChargeReading:
    point = OperatingPoint(v_dd=40.0, i_d=40.0, v_gs=10.0, load=load)
    return gate_charge_curve(Transistor.from_values(SLOPING | changes), point).reading


def derivatives(load, parameter, name):
    """Derivative of a reading by a parameter, complex and as a central difference, and the size that counts."""
    at = SLOPING[parameter]
    h = 1e-5 * at
    exact = float(getattr(reading_of(load, **{parameter: at + STEP * 1j}), name).imag) / STEP
    above, below = (float(getattr(reading_of(load, **{parameter: at + x}), name)) for x in (h, -h))
    return exact, (above - below) / (2.0 * h), abs(above) / at


@each_load
@pytest.mark.parametrize("parameter", MOVING)
@pytest.mark.parametrize("name", ["total", "v_plateau"])
def test_imaginary_part_of_total_and_plateau_is_the_derivative(load, parameter, name):
    exact, difference, size = derivatives(load, parameter, name)
    assert exact == pytest.approx(difference, rel=1e-5, abs=1e-8 * size)


@each_load
@pytest.mark.parametrize("parameter", MOVING)
@pytest.mark.parametrize("name", ["q_gs", "q_gd"])
def test_imaginary_part_of_the_legs_is_nearly_the_derivative(load, parameter, name):
    exact, difference, size = derivatives(load, parameter, name)
    assert exact == pytest.approx(difference, rel=1e-2, abs=2e-3 * size)


@each_load
@pytest.mark.parametrize("name", ["q_gs", "q_gd"])
def test_imaginary_part_of_the_legs_is_the_derivative(load, name):
    found = np.array([derivatives(load, parameter, name) for parameter in MOVING])
    np.testing.assert_array_less(np.abs(found[:, 0] - found[:, 1]), 1e-5 * np.abs(found[:, 1]) + 1e-7 * found[:, 2])


# Operating points that cannot be


@pytest.mark.parametrize("field", ["v_dd", "i_d", "v_gs"])
@pytest.mark.parametrize("value", [0.0, -5.0, float("nan")])
def test_conditions_must_be_above_zero(field, value):
    transistor, point = PARTS[0].values
    with pytest.raises(OperatingPointError, match="VDD, ID and VGS of a gate-charge test must all be above zero"):
        gate_charge_curve(transistor, replace(point, **{field: value}))


@each_part
@pytest.mark.parametrize("margin", [0.0, 0.5])
def test_load_current_that_the_channel_does_not_carry_names_the_gate_voltage_it_takes(transistor, point, margin):
    needed = carrying_voltage(transistor, point.i_d, point.v_dd)
    with pytest.raises(OperatingPointError, match="does not carry the load's") as caught:
        gate_charge_curve(transistor, replace(point, v_gs=needed - 1e-6 - margin))
    message = str(caught.value)
    assert f"{point.i_d:g} A at VGS = {needed - 1e-6 - margin:g} V" in message
    assert float(re.search(r"that takes ([\d.]+) V", message)[1]) == pytest.approx(needed, rel=0.005)


@each_part
def test_gate_voltage_just_above_the_plateau_is_enough(transistor, point):
    needed = carrying_voltage(transistor, point.i_d, point.v_dd)
    curve = gate_charge_curve(transistor, replace(point, v_gs=needed + 0.01))
    assert curve.v_gs[-1] == pytest.approx(needed + 0.01, rel=1e-9)


def test_resistive_load_with_a_gate_that_never_turns_the_channel_on():
    transistor, point = PARTS[0].values
    with pytest.raises(OperatingPointError, match="does not carry 1 % of the load's"):
        gate_charge_curve(transistor, replace(point, v_gs=2.0, load="resistive"))


def test_supply_below_the_drop_over_the_resistances():
    transistor = Transistor.from_values(TRENCH | {"r_d": 2.0})
    with pytest.raises(OperatingPointError, match="VDD = 40 V is less than ID = 40 A drops over the transistor's own"):
        gate_charge_curve(transistor, OperatingPoint(v_dd=40.0, i_d=40.0, v_gs=10.0))


@pytest.mark.parametrize("i_d", [0.1, 0.15, 0.2])
def test_legs_do_not_jump_where_the_plateau_lies_below_the_threshold(i_d):
    transistor = Transistor.from_values(TRENCH)
    curves = [gate_charge_curve(transistor, OperatingPoint(v_dd=40.0, i_d=x, v_gs=10.0)) for x in (i_d, 0.5)]
    assert curves[0].v_plateau < TRENCH["v_th"]
    # The first leg is Ciss times the plateau voltage, whatever the current.
    legs = [curve.q_gs / curve.v_plateau for curve in curves]
    assert legs[0] == pytest.approx(legs[1], rel=0.03)


def test_channel_that_conducts_without_a_gate_voltage():
    transistor = Transistor.from_values(TRENCH | {"v_th": -2.0})
    with pytest.raises(OperatingPointError, match="conducts at VGS = 0 already"):
        gate_charge_curve(transistor, OperatingPoint(v_dd=40.0, i_d=40.0, v_gs=10.0))
