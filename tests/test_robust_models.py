"""For every whole transistor: charge and capacitance agree, nothing jumps, no energy comes from nothing."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.special import expit
from test_gate_charge import inner_voltages, reachable
from test_models_capacitance import junctions, logarithmic
from test_models_channel import channels

from fitter.gate_charge import gate_charge_curve
from fitter.models.channel import channel_current
from fitter.models.temperature import TEMPERATURE, TemperatureLaws
from fitter.models.transistor import Transistor

STEP = 1e-30
EXAMPLES = settings(derandomize=True, deadline=None, max_examples=80)
FEW = settings(derandomize=True, deadline=None, max_examples=40)
#: Largest voltages between the nodes, beyond the ratings of every part.
MOST_V_GS, MOST_V_DS = 40.0, 2000.0

any_v_gs = st.floats(-MOST_V_GS, MOST_V_GS)
any_v_ds = st.one_of(st.floats(-2.0, 2.0), st.floats(-MOST_V_DS, MOST_V_DS))
temperatures = st.floats(-55.0, 175.0)


def transistors(most_ohms=1.0, may_rise=True):
    """Any transistor within the bounds of its parameters, with temperature laws."""
    laws = {field: st.floats(d.lower, d.upper) for field, d in TEMPERATURE.items()}
    return st.builds(
        Transistor,
        c_gs=logarithmic(1e-12, 1e-7),
        c_ch=st.one_of(st.just(0.0), logarithmic(1e-13, 1e-8)),
        c_acc=logarithmic(1e-12, 1e-7),
        s_gs=st.one_of(st.just(0.0), st.floats(0.0, 0.8)),
        gate_drain=junctions(most_s=0.999, may_rise=may_rise),
        drain_source=junctions(most_s=0.999, may_rise=may_rise),
        channel=channels(most_ohms=most_ohms),
        laws=st.builds(TemperatureLaws, **laws),
    )


def c_gs(t, v_gs):
    """Gate-source capacitance, written a second time."""
    end = max(t.channel.v_th, 5.0 * t.channel.w)
    # The depleting voltage follows VGS, and stays behind where the channel forms.
    depleting = np.where(v_gs > 0.0, expit((end - v_gs) / t.channel.w), 1.0)
    v = t.channel.w * (np.logaddexp(0.0, end / t.channel.w) - np.logaddexp(0.0, (end - v_gs) / t.channel.w))
    over_body = depleting / np.sqrt(1.0 + np.where(v_gs > 0.0, v, 0.0) / 2.0)
    return t.c_gs * (1.0 - t.s_gs + t.s_gs * over_body) + t.c_ch * expit((v_gs - t.channel.v_th) / t.channel.w)


def slope(law, v):
    return law(np.asarray(v) + STEP * 1j).imag / STEP


def terminal_charges(t, v_gs, v_ds):
    """Charges that have flowed into gate and drain."""
    q_gd = t.q_gd(v_ds - v_gs)
    return t.q_gs(v_gs) - q_gd, t.q_ds(v_ds) + q_gd


# Charge and capacitance


@EXAMPLES
@given(transistors(), any_v_gs, any_v_ds)
def test_each_charge_has_its_capacitance_as_its_slope(t, v_gs, v_ds):
    v_dg = v_ds - v_gs
    assert float(slope(t.q_gs, v_gs)) == pytest.approx(float(c_gs(t, v_gs)), rel=1e-9)
    assert float(slope(t.q_ds, v_ds)) == pytest.approx(float(t.c_ds(v_ds)), rel=1e-9)
    # At no voltage Cgd has a step, and its charge the slopes of both sides.
    if v_dg != 0.0:
        assert float(slope(t.q_gd, v_dg)) == pytest.approx(float(t.c_gd(v_dg)), rel=1e-9)


@EXAMPLES
@given(transistors())
def test_each_capacitance_is_above_zero_at_every_voltage(t):
    v = np.concatenate([-np.geomspace(1e-6, MOST_V_DS, 100)[::-1], [0.0], np.geomspace(1e-6, MOST_V_DS, 300)])
    for law in (t.c_gd, t.c_ds, lambda v: slope(t.q_gs, v)):
        assert np.all(law(v) > 0.0)
    for law in (t.c_iss, t.c_oss, t.c_rss):
        assert np.all(law(v[v >= 0.0]) > 0.0)


@EXAMPLES
@given(transistors(may_rise=False), any_v_ds, logarithmic(1e-9, 1.0))
def test_each_charge_rises_without_a_step_across_any_voltage(t, v, h):
    # Also across zero, where the laws of either side meet. A rise lies between the ends' capacitances times the step.
    for at in (v, 0.0, -0.5 * h):
        ends = np.array([at, at + h])
        width = ends[1] - ends[0]
        for charge, capacitance in ((t.q_gd, t.c_gd), (t.q_ds, t.c_ds), (t.q_gs, lambda v: c_gs(t, v))):
            (first, last), c = charge(ends), capacitance(np.array([ends[0], ends[1], -1e-12, 0.0, 1e-12]))
            near = c if ends[0] <= 0.0 <= ends[1] else c[:2]
            digits = 1e-14 * max(abs(first), abs(last)) + 1e-15 * (np.max(c) * (abs(v) + MOST_V_DS))
            assert 0.9999 * np.min(near) * width - digits <= last - first <= 1.0001 * np.max(near) * width + digits


@EXAMPLES
@given(transistors(), any_v_gs, any_v_ds)
def test_gate_and_drain_move_each_others_charge_alike(t, v_gs, v_ds):
    # dQG/dVDS = dQD/dVGS: without it a loop of voltages could give energy away.
    by_drain = terminal_charges(t, np.asarray(v_gs), np.asarray(v_ds + STEP * 1j))[0].imag / STEP
    by_gate = terminal_charges(t, np.asarray(v_gs + STEP * 1j), np.asarray(v_ds))[1].imag / STEP
    assert float(by_drain) == pytest.approx(float(by_gate), rel=1e-9)
    assert float(by_drain) < 0.0


# The terminal current


@EXAMPLES
@given(transistors(most_ohms=100.0), any_v_gs, any_v_ds.filter(lambda v: abs(v) > 1e-3), temperatures)
def test_terminal_current_solves_its_equation_at_every_temperature(t, v_gs, v_ds, t_j):
    hot = t.at(t_j)
    c, i_d = hot.channel, float(hot.i_d(v_gs, v_ds))
    carried = float(channel_current(v_gs - i_d * c.r_s, v_ds - i_d * (c.r_s + c.r_d), c))
    # What the channel carries reacts to the last digit of the voltage that the resistances leave it.
    stiffness = abs(float(slope(lambda v: channel_current(v_gs - i_d * c.r_s, v, c), v_ds - i_d * (c.r_s + c.r_d))))
    stiffness += abs(float(slope(lambda v: channel_current(v, v_ds - i_d * (c.r_s + c.r_d), c), v_gs - i_d * c.r_s)))
    digits = 1e-15 * stiffness * (abs(v_gs) + abs(v_ds))
    assert i_d == pytest.approx(carried, rel=1e-9, abs=digits + 1e-300)


@EXAMPLES
@given(transistors(most_ohms=100.0), any_v_gs, any_v_ds, temperatures)
def test_channel_never_delivers_energy_at_any_temperature(t, v_gs, v_ds, t_j):
    assert float(t.at(t_j).i_d(v_gs, v_ds)) * v_ds >= 0.0


@EXAMPLES
@given(transistors(), st.floats(-5.0, 20.0), st.floats(-20.0, 60.0), logarithmic(1e-6, 1e-2), st.booleans())
def test_terminal_current_has_no_step_across_any_voltage(t, v_gs, v_ds, h, by_gate):
    # Over a step the current moves as far as its slopes at the ends say; across VDS = 0, too.
    for at in (v_ds, -0.4 * h):
        steps = np.linspace(0.0, h, 9)

        def current(v, at=at):
            return t.i_d(v_gs + v, at + h) if by_gate else t.i_d(v_gs, at + v)

        i_d, slopes = current(steps), slope(current, steps)
        digits = 1e-12 * np.max(np.abs(i_d)) + 1e-11 * np.max(np.abs(slopes)) + 1e-300
        moved = np.diff(i_d)
        lower, upper = np.minimum(slopes[1:], slopes[:-1]), np.maximum(slopes[1:], slopes[:-1])
        assert np.all(moved >= (lower - 0.1 * np.abs(lower)) * h / 8.0 - digits)
        assert np.all(moved <= (upper + 0.1 * np.abs(upper)) * h / 8.0 + digits)


# Energy


def loop(draws, points=4001):
    """A smooth closed loop of VGS and VDS, through both signs of VDS and VDG."""
    t = np.linspace(0.0, 2.0 * np.pi, points)
    (gate, gate_2, gate_3), (drain, drain_2, drain_3), phase = draws
    v_gs = 5.0 + gate * np.sin(t) + gate_2 * np.sin(2.0 * t + phase) + gate_3 * np.cos(3.0 * t)
    v_ds = drain * (1.0 + np.cos(t)) + drain_2 * np.sin(3.0 * t) + drain_3 * np.sin(2.0 * t - phase)
    return v_gs, v_ds


loops = st.tuples(
    st.tuples(st.floats(1.0, 15.0), st.floats(-5.0, 5.0), st.floats(-3.0, 3.0)),
    st.tuples(logarithmic(1.0, 800.0), st.floats(-5.0, 5.0), st.floats(-5.0, 5.0)),
    st.floats(-3.0, 3.0),
).map(loop)


def energies(v_gs, v_ds, q_g, q_d):
    """Energy into the terminals over each step of a path."""
    gate = 0.5 * (v_gs[1:] + v_gs[:-1]) * np.diff(q_g)
    drain = 0.5 * (v_ds[1:] + v_ds[:-1]) * np.diff(q_d)
    return gate + drain


@FEW
@given(transistors(), loops)
def test_capacitances_return_all_energy_and_charge_of_a_closed_loop(t, path):
    v_gs, v_ds = path
    q_g, q_d = terminal_charges(t, v_gs, v_ds)
    taken = energies(v_gs, v_ds, q_g, q_d)
    # What is left is the error of 4000 straight pieces.
    assert abs(np.sum(taken)) < 2e-4 * np.sum(np.abs(taken))
    assert q_g[-1] == pytest.approx(q_g[0], abs=1e-12 * np.max(np.abs(q_g)))
    assert q_d[-1] == pytest.approx(q_d[0], abs=1e-12 * np.max(np.abs(q_d)))


@FEW
@given(transistors(), any_v_gs, any_v_ds)
def test_capacitances_hold_no_less_energy_than_none_at_any_voltages(t, v_gs, v_ds):
    # From no voltage straight to the two: what went in could otherwise be had for nothing on the way back.
    share = np.linspace(0.0, 1.0, 2001) ** 2
    q_g, q_d = terminal_charges(t, share * v_gs, share * v_ds)
    held = np.cumsum(energies(share * v_gs, share * v_ds, q_g, q_d))
    assert np.all(held >= -1e-9 * held[-1] - 1e-30)
    assert held[-1] >= 0.0


@FEW
@given(transistors(), loops, logarithmic(1e-9, 1.0), temperatures)
def test_whole_device_takes_energy_over_a_closed_loop_of_any_duration(t, path, duration, t_j):
    hot = t.at(t_j)
    v_gs, v_ds = (v[::10] for v in path)
    i_d = hot.i_d(v_gs, v_ds)
    flowed = np.concatenate([[0.0], np.cumsum(0.5 * (i_d[1:] + i_d[:-1]) * duration / (i_d.size - 1))])
    q_g, q_d = terminal_charges(hot, v_gs, v_ds)
    stored, taken = energies(v_gs, v_ds, q_g, q_d), energies(v_gs, v_ds, q_g, q_d + flowed)
    assert np.sum(taken) >= -5e-3 * np.sum(np.abs(stored))
    # Without its charges, at every single step where VDS keeps its sign.
    lost = energies(v_gs, v_ds, np.zeros_like(v_gs), flowed)
    assert np.all(lost[v_ds[1:] * v_ds[:-1] > 0.0] >= 0.0)


# The gate-charge path


def charge_along(t, v_gs, v_ds, pieces=200):
    """Charge into the gate over a path of straight legs, from the capacitances by the midpoint rule."""
    share = (np.arange(pieces) + 0.5) / pieces
    total = 0.0
    for v_gs_1, v_gs_2, v_ds_1, v_ds_2 in zip(v_gs[:-1], v_gs[1:], v_ds[:-1], v_ds[1:], strict=True):
        # Where the leg passes VDG = 0, Cgd has a step: that is a corner of its own.
        v_dg_1, v_dg_2 = v_ds_1 - v_gs_1, v_ds_2 - v_gs_2
        corners = [0.0, v_dg_1 / (v_dg_1 - v_dg_2), 1.0] if v_dg_1 * v_dg_2 < 0.0 else [0.0, 1.0]
        for begin, end in pairwise(corners):
            at = begin + (end - begin) * share
            gate, gate_drain = v_gs_1 + at * (v_gs_2 - v_gs_1), v_dg_1 + at * (v_dg_2 - v_dg_1)
            rate = c_gs(t, gate) * (v_gs_2 - v_gs_1) - t.c_gd(gate_drain) * (v_dg_2 - v_dg_1)
            total += float(np.sum(rate)) * (end - begin) / pieces
    return total


@FEW
@given(reachable())
def test_charge_on_the_way_up_is_the_charge_on_the_way_down(test):
    t, point = test
    v_gs, v_ds = inner_voltages(t, gate_charge_curve(t, point))
    up, down = charge_along(t, v_gs, v_ds, 20), charge_along(t, v_gs[::-1], v_ds[::-1], 20)
    assert up == pytest.approx(-down, rel=1e-9)
    assert up > 0.0


@FEW
@given(reachable())
def test_each_stretch_of_the_curve_has_the_charge_of_its_capacitances(test):
    t, point = test
    curve = gate_charge_curve(t, point)
    v_gs, v_ds = inner_voltages(t, curve)
    for begin, end in ((0, 40), (40, 85), (85, 200), (200, 299)):
        expected = charge_along(t, v_gs[begin : end + 1], v_ds[begin : end + 1], 20)
        found = curve.q_g[end] - curve.q_g[begin]
        assert found == pytest.approx(expected, rel=2e-3, abs=1e-6 * curve.total)


@FEW
@given(reachable(), st.booleans())
def test_charge_is_the_same_whichever_way_the_voltages_go(test, gate_first):
    t, point = test
    curve = gate_charge_curve(t, point)
    v_gs, v_ds = (v[[0, -1]] for v in inner_voltages(t, curve))
    corner = (v_gs[1], v_ds[0]) if gate_first else (v_gs[0], v_ds[1])
    # In legs that are finer towards no VDG, where Cgd bends.
    share = np.concatenate([1.0 - np.geomspace(1.0, 1e-7, 120), [1.0]])
    legs = []
    for (a, b), (c, d) in (((v_gs[0], v_ds[0]), corner), (corner, (v_gs[1], v_ds[1]))):
        legs.append((a + share * (c - a), b + share * (d - b)))
    walked = sum(charge_along(t, *leg) for leg in legs)
    assert walked == pytest.approx(curve.total, rel=2e-3)


@FEW
@given(reachable())
def test_up_with_one_load_and_down_with_the_other_returns_all_charge(test):
    t, point = test
    curve = gate_charge_curve(t, replace(point, load="current"))
    v_ds_end, i_d_end = float(curve.v_ds[-1]), float(curve.i_d[-1])
    # The resistor that carries the same current at the end, from the same supply.
    resistive = replace(point, load="resistive", i_d=i_d_end * point.v_dd / (point.v_dd - v_ds_end))
    other = gate_charge_curve(t, resistive)
    assert float(other.v_ds[-1]) == pytest.approx(v_ds_end, rel=1e-6)
    assert other.total == pytest.approx(curve.total, rel=1e-7)


@EXAMPLES
@given(reachable(), st.floats(0.05, 1.0))
def test_a_test_that_ends_earlier_has_less_charge_on_the_same_path(test, share):
    t, point = test
    curve = gate_charge_curve(t, point)
    earlier = replace(point, v_gs=curve.v_plateau + (point.v_gs - curve.v_plateau) * share + 0.2)
    if earlier.v_gs >= point.v_gs:
        return
    total = gate_charge_curve(t, earlier).total
    assert total < curve.total
    at = int(np.searchsorted(curve.v_gs, earlier.v_gs))
    # Between its neighbours on the longer path.
    assert curve.q_g[at - 1] * (1.0 - 1e-9) <= total <= curve.q_g[at] * (1.0 + 1e-9)
