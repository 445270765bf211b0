"""The channel, its temperature laws and the body diode: published numbers, inverses, and independent solutions."""

import math
from dataclasses import fields, replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.constants import physical_constants
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from fitter.errors import OperatingPointError
from fitter.models.channel import (
    Channel,
    channel_current,
    conductances,
    drain_voltage,
    gate_voltage,
    on_resistance,
    terminal_current,
    threshold_voltage,
    transconductance,
)
from fitter.models.diode import (
    BodyDiode,
    forward_current,
    forward_voltage,
    recovery,
    saturation_current,
    series_resistance,
    thermal_voltage,
    transit_time_from_charge,
    transit_time_from_time,
)
from fitter.models.roots import increasing_root
from fitter.models.smooth import inverse_softplus, logistic, softplus
from fitter.models.temperature import TEMPERATURE, TemperatureLaws, channel_at
from fitter.models.transistor import Transistor

STEP = 1e-30
EXAMPLES = settings(derandomize=True, deadline=None, max_examples=100)
K_OVER_Q = physical_constants["Boltzmann constant in eV/K"][0]

POWER = Channel(v_th=3.0, k=120.0, w=0.09, alpha=1.3, lam=0.004, r_s=1.2e-3, r_d=3.1e-3)


def ideal(**changes):
    """A square law with a sharp threshold and no resistances."""
    return replace(Channel(v_th=3.0, k=100.0, w=0.01, lam=0.0, r_s=0.0, r_d=0.0), **changes)


def logarithmic(lower, upper):
    """Numbers spread evenly over their logarithm."""
    return st.floats(math.log(lower), math.log(upper)).map(math.exp)


def or_zero(numbers):
    return st.one_of(st.just(0.0), numbers)


def channels(v_th=(-5.0, 8.0), w=2.0, most_ohms=100.0):
    return st.builds(
        Channel,
        v_th=st.floats(*v_th),
        k=logarithmic(1e-2, 1e4),
        w=logarithmic(0.05, w),
        alpha=st.one_of(st.just(1.0), logarithmic(0.5, 10.0)),
        lam=or_zero(logarithmic(1e-4, 1.0)),
        r_s=or_zero(logarithmic(1e-5, most_ohms)),
        r_d=or_zero(logarithmic(1e-5, most_ohms)),
    )


def law(v_gs, v_ds, c):
    """The channel's equation, written a second time: in reverse, source and drain change places."""
    if v_ds < 0.0:
        return -law(v_gs - v_ds, -v_ds, c)
    source, drain = (c.w * np.logaddexp(0.0, (x - c.v_th) / c.w) for x in (v_gs, v_gs - c.alpha * v_ds))
    return 0.5 * c.k * (source - drain) * (source + drain) * (1.0 + c.lam * v_ds)


def solved(v_gs, v_ds, c):
    """Current of the channel behind its resistances, by Brent's method."""

    def excess(i):
        return i - law(v_gs - i * c.r_s, v_ds - i * (c.r_s + c.r_d), c)

    return brentq(excess, *sorted((0.0, 1.001 * law(v_gs, v_ds, c))), xtol=1e-300, rtol=1e-14, maxiter=1000)


def slope(function, x, h):
    """Central difference."""
    return float(function(x + h) - function(x - h)) / (2.0 * h)


# Published numbers


def test_saturated_transistor_carries_the_published_current():
    # Berkeley EE105, discussion 5: p-channel, VS 4 V, VG 2 V, VD 1 V, VT -0.8 V, kp 100 uA/V^2, W/L 5: |ID| = 360 uA.
    v_s, v_g, v_d, v_t, k = 4.0, 2.0, 1.0, -0.8, 100e-6 * 5
    c = ideal(v_th=-v_t, k=k)
    assert float(terminal_current(v_s - v_g, v_s - v_d, c)) == pytest.approx(360e-6, rel=1e-9)


def test_transconductance_does_not_fall_into_the_factor_of_two_trap():
    # The factor-of-two trap: gm = sqrt(2 K ID) with ID = K VOV^2/2. 1.3 S at 3.4 A: K = 248.5 mA/V^2, VOV = 5.23 V.
    c = ideal(k=0.2485)
    assert float(transconductance(3.4, 50.0, c)) == pytest.approx(1.3, abs=5e-4)


def test_overdrive_does_not_fall_into_the_factor_of_two_trap():
    # As above: 1.3 S at 3.4 A: K = 248.5 mA/V^2, VOV = 5.23 V.
    c = ideal(k=0.2485)
    assert float(gate_voltage(3.4, 50.0, c)) - 3.0 == pytest.approx(5.23, abs=5e-3)


def test_bounds_of_the_thresholds_coefficient_hold_the_published_ones():
    # dVTH/dT over ten datasheets -2.6 to -10 mV/C.
    definition = TEMPERATURE["a"]
    assert definition.lower < -10e-3
    assert definition.upper > -2.6e-3


@pytest.mark.parametrize("ratio", [1.2, 1.9, 2.3, 2.4])
def test_bounds_of_the_temperature_laws_hold_the_published_rise_of_the_on_resistance(ratio):
    # RDS(on) at 150 C over 25 C: superjunction 2.3 to 2.4, silicon carbide 1.2 to 1.9.
    c = Channel(v_th=3.5, k=50.0, w=0.1, lam=0.0, r_s=0.0, r_d=0.1)

    def rise(exponent):
        hot = channel_at(150.0, c, TemperatureLaws(a=-6e-3, b=1.0, c=exponent))
        return float(on_resistance(10.0, 10.0, hot) / on_resistance(10.0, 10.0, c))

    assert rise(TEMPERATURE["c"].lower) < ratio < rise(TEMPERATURE["c"].upper)


# Regions of the square law


@pytest.mark.parametrize("v_ds", [0.05, 0.8, 1.7])
def test_triode_region_is_the_square_laws(v_ds):
    # K [(VGS - VTH) VDS - VDS^2/2]
    assert float(channel_current(5.0, v_ds, ideal())) == pytest.approx(100.0 * (2.0 * v_ds - v_ds**2 / 2.0), rel=1e-9)


@pytest.mark.parametrize("v_ds", [2.2, 10.0, 800.0])
def test_saturation_is_the_square_laws_with_channel_length_modulation(v_ds):
    # K/2 (VGS - VTH)^2 (1 + lambda VDS)
    expected = 50.0 * 2.0**2 * (1.0 + 0.01 * v_ds)
    assert float(channel_current(5.0, v_ds, ideal(lam=0.01))) == pytest.approx(expected, rel=1e-6)


def test_a_decade_of_current_below_threshold_takes_kt_over_q_times_its_slope_factor():
    # w = 2 n kT/q: n kT/q ln 10 a decade, 59.2 mV for n = 1 at 25 C (arithmetic).
    c = ideal(w=2.0 * K_OVER_Q * 298.15)
    low, high = 2.2, 2.2 + 59.16e-3
    assert float(channel_current(high, 5.0, c) / channel_current(low, 5.0, c)) == pytest.approx(10.0, rel=1e-3)


def test_on_resistance_is_the_sum_of_the_resistances_and_the_channels():
    # RS + RD + 1/(K VOV) far inside the triode region (arithmetic), with VOV less the drop over RS.
    c = ideal(r_s=2e-3, r_d=5e-3)
    assert float(on_resistance(0.1, 10.0, c)) == pytest.approx(7e-3 + 1.0 / (100.0 * 7.0), rel=1e-3)


def test_resistance_of_the_source_carries_mobility_reduction():
    # K/(1 + theta VOV) is theta/K in series, exactly, for small VDS (arithmetic).
    theta, k, overdrive = 0.08, 100.0, np.array([1.0, 3.0, 7.0])
    conductance = k / (1.0 + theta * overdrive) * overdrive
    c = ideal(r_s=theta / k)
    np.testing.assert_allclose(terminal_current(3.0 + overdrive, 1e-4, c) / 1e-4, conductance, rtol=1e-3)


# The terminal current


def test_a_root_is_found_where_newton_steps_go_to_and_fro_for_ever():
    # From 1 to the left of the root of sign(x) sqrt|x|, a Newton step leads to 1 to the right of it, and back.
    def function(x):
        off = x - np.array([0.3, 0.5])
        return np.sign(off) * np.sqrt(np.abs(off)), 0.5 / np.sqrt(np.maximum(np.abs(off), 1e-300))

    found = increasing_root(function, np.array([1.3, 1.5]), np.full(2, -2.0), np.full(2, 2.0))
    np.testing.assert_allclose(found, [0.3, 0.5], rtol=1e-12)


@EXAMPLES
@given(channels(), st.floats(-10.0, 20.0), logarithmic(1e-3, 1500.0), st.sampled_from([-1.0, 1.0]))
def test_terminal_current_solves_its_equation(c, v_gs, v_ds, sign):
    found = float(terminal_current(v_gs, sign * v_ds, c))
    assert found == pytest.approx(solved(v_gs, sign * v_ds, c), rel=1e-9, abs=1e-300)


@EXAMPLES
@given(channels(), st.floats(-30.0, 30.0), st.floats(-2000.0, 2000.0))
def test_channel_is_passive(c, v_gs, v_ds):
    assert float(terminal_current(v_gs, v_ds, c)) * v_ds >= 0.0


@EXAMPLES
@given(channels(), st.floats(-10.0, 20.0), st.floats(1e-3, 100.0))
def test_channel_is_the_same_with_source_and_drain_exchanged(c, v_gs, v_ds):
    exchanged = replace(c, r_s=c.r_d, r_d=c.r_s)
    backwards = float(terminal_current(v_gs - v_ds, -v_ds, exchanged))
    assert backwards == pytest.approx(-float(terminal_current(v_gs, v_ds, c)), rel=1e-9, abs=1e-300)


@EXAMPLES
@given(channels(), st.floats(-10.0, 20.0))
def test_no_current_without_drain_voltage(c, v_gs):
    assert float(terminal_current(v_gs, 0.0, c)) == 0.0


@pytest.mark.parametrize("v_gs", [2.0, 3.0, 10.0])
def test_current_and_its_slope_pass_through_no_drain_voltage_without_a_step(v_gs):
    h = 1e-5
    below, above = (float(terminal_current(v_gs, sign * h, POWER)) for sign in (-1.0, 1.0))
    assert above == pytest.approx(-below, rel=1e-3)
    conductance = float(terminal_current(v_gs, np.asarray(STEP * 1j), POWER).imag) / STEP
    assert above / h == pytest.approx(conductance, rel=1e-3)


def test_current_passes_through_threshold_without_a_step_or_a_kink():
    v_gs = 3.0 + np.linspace(-0.5, 0.5, 2001)
    g_m = np.diff(terminal_current(v_gs, 10.0, POWER)) / np.diff(v_gs)
    # dgm/dVGS is K at the most, where the square law is reached, and never negative but for the drop over RS.
    bend = np.diff(g_m) / 0.0005
    assert np.all(g_m > 0.0)
    assert np.all(bend > 0.0)
    assert np.all(bend < 1.06 * POWER.k)


def test_current_rises_with_either_voltage():
    v_gs, v_ds = np.linspace(0.0, 12.0, 121)[:, None], np.linspace(-3.0, 60.0, 127)
    i_d = terminal_current(v_gs, v_ds, POWER)
    assert np.all(np.diff(i_d, axis=1) > 0.0)
    assert np.all(np.diff(i_d[:, v_ds > 0.0], axis=0) > 0.0)


def test_resistances_lower_the_current():
    bare = replace(POWER, r_s=0.0, r_d=0.0)
    v_ds = np.array([-1.0, 0.1, 1.0, 20.0])
    assert np.all(np.abs(terminal_current(8.0, v_ds, POWER)) < np.abs(terminal_current(8.0, v_ds, bare)))


def test_without_resistances_the_terminals_are_the_inner_nodes():
    bare = replace(POWER, r_s=0.0, r_d=0.0)
    v_ds = np.array([-5.0, 0.1, 3.0, 60.0])
    np.testing.assert_allclose(terminal_current(5.0, v_ds, bare), channel_current(5.0, v_ds, bare), rtol=1e-12)


@EXAMPLES
@given(channels(), st.floats(-5.0, 200.0), st.floats(-100.0, 100.0).filter(lambda v: abs(v) > 1e-3))
def test_conductances_are_the_derivatives_of_the_current(c, widths, v_ds):
    # The side with the higher voltage lies so many widths of the bend above threshold.
    v_gs = c.v_th + widths * c.w + min(v_ds, 0.0)
    current, g_m, g_ds = (float(x) for x in conductances(v_gs, v_ds, c))
    by_gate = float(channel_current(np.asarray(v_gs + STEP * 1j), v_ds, c).imag) / STEP
    by_drain = float(channel_current(v_gs, np.asarray(v_ds + STEP * 1j), c).imag) / STEP
    assert current == pytest.approx(float(channel_current(v_gs, v_ds, c)), rel=1e-9)
    # Each is a difference, of as many digits as the other leaves it.
    assert g_m == pytest.approx(by_gate, rel=1e-6, abs=1e-12 * abs(g_ds))
    assert g_ds == pytest.approx(by_drain, rel=1e-6, abs=1e-12 * abs(g_m))


# Inverses


@EXAMPLES
@given(channels(), logarithmic(1e-6, 300.0), logarithmic(1e-2, 1500.0))
def test_channel_carries_the_current_at_its_gate_voltage(c, i_d, v_ds):
    assert float(channel_current(gate_voltage(i_d, v_ds, c), v_ds, c)) == pytest.approx(i_d, rel=1e-9)


@EXAMPLES
@given(channels(v_th=(1.5, 8.0), w=0.15, most_ohms=1.0), logarithmic(1e-5, 1e-2))
def test_diode_connected_transistor_carries_the_current_at_its_threshold_voltage(c, i_d):
    v = threshold_voltage(i_d, c)
    assert float(terminal_current(v, v, c)) == pytest.approx(i_d, rel=1e-9)


@EXAMPLES
@given(channels(v_th=(1.0, 5.0), most_ohms=0.1), st.floats(1.0, 10.0), st.floats(0.02, 0.9))
def test_transistor_carries_the_current_at_its_drain_voltage(c, overdrive, share):
    v_gs = c.v_th + overdrive
    i_d = share * float(terminal_current(v_gs, 50.0, c))
    v_ds = drain_voltage(i_d, v_gs, c)
    assert float(terminal_current(v_gs, v_ds, c)) == pytest.approx(i_d, rel=1e-9)


def test_on_resistance_is_drain_voltage_over_current():
    i_d, v_gs = np.array([1.0, 20.0, 80.0]), 10.0
    v_ds = np.array([brentq(lambda v, i=i: solved(v_gs, v, POWER) - i, 1e-6, 10.0, xtol=1e-14) for i in i_d])
    np.testing.assert_allclose(on_resistance(i_d, v_gs, POWER), v_ds / i_d, rtol=1e-8)


def test_drain_voltage_of_a_current_that_the_channel_does_not_carry_is_no_number():
    assert np.isnan(float(drain_voltage(60.0, 4.0, ideal())))


@pytest.mark.parametrize("v_gs", [0.0, 1.0, 2.55, 4.5])
def test_drain_voltage_below_threshold_is_no_number(v_gs):
    c = Channel(v_th=5.5, k=0.9, w=0.11, lam=0.0, r_s=0.0, r_d=0.0)
    assert np.isnan(float(drain_voltage(0.034, v_gs, c)))


@EXAMPLES
@given(channels(v_th=(1.0, 5.0), w=0.3, most_ohms=0.1), st.floats(0.5, 6.0), st.floats(5.0, 100.0))
def test_transconductance_is_the_slope_of_the_terminal_current(c, overdrive, v_ds):
    v_gs = c.v_th + overdrive
    i_d = float(terminal_current(v_gs, v_ds, c))
    expected = slope(lambda v: terminal_current(v, v_ds, c), v_gs, 1e-4)
    assert float(transconductance(i_d, v_ds, c)) == pytest.approx(expected, rel=2e-5)


READINGS = {
    "terminal current in triode": lambda c: terminal_current(8.0, 0.2, c),
    "terminal current in saturation": lambda c: terminal_current(5.0, 30.0, c),
    "terminal current in reverse": lambda c: terminal_current(5.0, -0.5, c),
    "gate voltage": lambda c: gate_voltage(20.0, 30.0, c),
    "threshold voltage": lambda c: threshold_voltage(1e-3, c),
    "drain voltage": lambda c: drain_voltage(20.0, 8.0, c),
    "on-resistance": lambda c: on_resistance(20.0, 8.0, c),
    "transconductance": lambda c: transconductance(20.0, 30.0, c),
}


@pytest.mark.parametrize("reading", READINGS.values(), ids=READINGS.keys())
@pytest.mark.parametrize("name", [f.name for f in fields(Channel)])
def test_imaginary_part_is_the_derivative_by_a_parameter(reading, name):
    at = getattr(POWER, name)
    derivative = float(reading(replace(POWER, **{name: at + STEP * 1j})).imag) / STEP
    difference = slope(lambda x: reading(replace(POWER, **{name: x})), at, 1e-4 * at)
    assert derivative == pytest.approx(difference, rel=1e-5, abs=1e-8 * abs(float(reading(POWER)) / at))


@pytest.mark.parametrize("reading", READINGS.values(), ids=READINGS.keys())
def test_parameters_broadcast(reading):
    k = np.array([[60.0], [240.0]])
    many = reading(replace(POWER, k=k))
    np.testing.assert_allclose(many[:, 0], [float(reading(replace(POWER, k=x))) for x in k[:, 0]], rtol=1e-10)


# Smooth steps


@pytest.mark.parametrize(("x", "expected"), [(-1e300, 0.0), (-50.0, 0.0), (50.0, 50.0), (1e300, 1e300)])
def test_softplus_tends_to_its_straight_lines(x, expected):
    assert float(softplus(x, 0.05)) == pytest.approx(expected, rel=1e-12, abs=1e-300)


@pytest.mark.parametrize(("x", "expected"), [(-1e300, 0.0), (-50.0, 0.0), (0.0, 0.5), (50.0, 1.0), (1e300, 1.0)])
def test_logistic_tends_to_nothing_and_to_one(x, expected):
    assert float(logistic(x, 0.05)) == pytest.approx(expected, rel=1e-12, abs=1e-300)


@EXAMPLES
@given(st.floats(-30.0, 30.0), logarithmic(0.05, 2.0))
def test_logistic_is_the_slope_of_the_softplus(x, w):
    derivative = float(softplus(np.asarray(x + STEP * 1j), w).imag) / STEP
    assert float(logistic(x, w)) == pytest.approx(derivative, rel=1e-12)


@EXAMPLES
@given(st.floats(-30.0, 300.0), logarithmic(0.05, 2.0))
def test_softplus_has_an_inverse(x, w):
    assert float(inverse_softplus(softplus(x, w), w)) == pytest.approx(x, rel=1e-9, abs=1e-9)


# Temperature

LAWS = TemperatureLaws(a=-6.5e-3, b=1.6, c=2.2)


@pytest.mark.parametrize("alpha", [1.0, 1.7, 4.0])
def test_channel_saturates_at_the_overdrive_over_alpha(alpha):
    c = ideal(alpha=alpha)
    knee, v_ds = 2.0 / alpha, np.array([0.5, 0.98, 1.02, 30.0])
    current = channel_current(5.0, v_ds * knee, c)
    assert current[2:] == pytest.approx(0.5 * 100.0 * 2.0**2)
    # Half way the square law has three quarters of the saturated current.
    assert float(current[0]) == pytest.approx(0.75 * float(current[3]), rel=1e-4)
    assert float(current[1]) < float(current[2])


@pytest.mark.parametrize("alpha", [1.0, 3.0])
def test_a_closed_gate_lets_reverse_current_through_once_the_drain_is_a_threshold_below_it(alpha):
    c = ideal(alpha=alpha)
    assert abs(float(channel_current(0.0, -2.8, c))) < 1e-6
    assert float(channel_current(0.0, -3.5, c)) < -10.0


def test_bend_at_threshold_follows_its_own_exponent():
    hot = channel_at(150.0, POWER, replace(LAWS, d=1.5))
    assert float(hot.w) == pytest.approx(0.09 * (423.15 / 298.15) ** 1.5)


def test_channel_at_the_reference_temperature_is_the_channel():
    same = channel_at(25.0, POWER, LAWS)
    assert [float(getattr(same, f.name)) for f in fields(Channel)] == [getattr(POWER, f.name) for f in fields(Channel)]


@pytest.mark.parametrize("t_j", [-40.0, 75.0, 150.0])
def test_each_parameter_follows_its_own_law(t_j):
    hot, ratio = channel_at(t_j, POWER, LAWS), (t_j + 273.15) / 298.15
    assert float(hot.v_th) == pytest.approx(3.0 - 6.5e-3 * (t_j - 25.0))
    assert float(hot.k) == pytest.approx(120.0 / ratio**1.6)
    assert float(hot.r_d) == pytest.approx(3.1e-3 * ratio**2.2)
    assert float(hot.w) == pytest.approx(0.09 * ratio)
    assert float(hot.lam) == 0.004


def test_mobility_reduction_theta_does_not_follow_temperature():
    # RS carries theta/K, so RS K stays.
    hot = channel_at(150.0, POWER, LAWS)
    assert float(hot.r_s * hot.k) == pytest.approx(POWER.r_s * POWER.k)


def test_transfer_curves_at_two_temperatures_cross():
    # Below the crossing the hot part carries more, above it less (common practice, no source).
    hot, v_gs = channel_at(150.0, POWER, LAWS), np.array([3.2, 10.0])
    ratio = terminal_current(v_gs, 20.0, hot) / terminal_current(v_gs, 20.0, POWER)
    assert ratio[0] > 1.0 > ratio[1]


def test_decade_below_threshold_widens_with_absolute_temperature():
    def decade(c):
        v_gs = [brentq(lambda v, i=i: math.log(float(channel_current(v, 5.0, c)) / i), 0.0, 5.0) for i in (1e-6, 1e-5)]
        return v_gs[1] - v_gs[0]

    assert decade(channel_at(125.0, POWER, LAWS)) / decade(POWER) == pytest.approx(398.15 / 298.15, rel=1e-3)


def test_temperatures_broadcast():
    t_j = np.array([[-40.0], [25.0], [150.0]])
    many = terminal_current(6.0, np.array([0.1, 10.0]), channel_at(t_j, POWER, LAWS))
    for row, t in enumerate(t_j[:, 0]):
        one = terminal_current(6.0, np.array([0.1, 10.0]), channel_at(t, POWER, LAWS))
        np.testing.assert_allclose(many[row], one, rtol=1e-12)


@pytest.fixture
def transistor():
    values = {
        "c_gs": 2e-9, "c_ch": 5e-10, "c_acc": 1.4e-9,
        "c0_gd": 1e-9, "phi_gd": 0.8, "m_gd": 0.5, "cf_gd": 5e-12,
        "c0_ds": 2e-9, "phi_ds": 0.7, "m_ds": 0.4, "cf_ds": 1e-11,
        "v_th": 3.0, "k": 120.0, "w": 0.09, "alpha": 1.3, "lambda": 0.004, "r_s": 1.2e-3, "r_d": 3.1e-3,
    }  # fmt: skip
    return Transistor.from_values(values)


def test_transistor_takes_its_channel_to_another_temperature(transistor):
    hot = replace(transistor, laws=LAWS).at(125.0)
    expected = terminal_current(6.0, 0.5, channel_at(125.0, POWER, LAWS))
    assert float(hot.i_d(6.0, 0.5)) == pytest.approx(float(expected), rel=1e-12)


def test_transistor_without_temperature_laws_is_known_at_the_reference_temperature(transistor):
    assert transistor.at(25.0) is transistor


def test_transistor_without_temperature_laws_says_what_to_digitize(transistor):
    with pytest.raises(OperatingPointError, match="digitize a transfer curve at a second temperature"):
        transistor.at(100.0)


@pytest.mark.parametrize("t_j", [-273.15, -400.0, math.nan, math.inf])
def test_no_temperature_below_absolute_zero(transistor, t_j):
    with pytest.raises(OperatingPointError, match="is no junction temperature"):
        replace(transistor, laws=LAWS).at(t_j)


# The body diode

DIODE = BodyDiode(i_s=4e-12, n=1.1, r=2.5e-3, e_g=1.12, r_exponent=0.8)


def diodes():
    return st.builds(
        BodyDiode,
        i_s=logarithmic(1e-40, 1e-6),
        n=st.floats(0.9, 4.0),
        r=or_zero(logarithmic(1e-4, 1.0)),
        e_g=st.floats(0.5, 3.3),
        r_exponent=st.floats(-2.0, 4.0),
    )


def test_thermal_voltage_is_boltzmanns_constant_over_the_elementary_charge():
    assert float(thermal_voltage(150.0)) == pytest.approx(K_OVER_Q * 423.15, rel=1e-9)


@EXAMPLES
@given(diodes(), logarithmic(1e-6, 1e3), st.floats(-55.0, 175.0))
def test_forward_current_and_voltage_are_each_others_inverse(d, i, t_j):
    assert float(forward_current(forward_voltage(i, d, t_j), d, t_j)) == pytest.approx(i, rel=1e-9)


@EXAMPLES
@given(diodes(), st.floats(0.0, 2.5), st.floats(-55.0, 175.0))
def test_forward_current_solves_the_diodes_equation(d, v, t_j):
    # I = IS [exp((V - I Rdio)/(N kT/q)) - 1]
    i = float(forward_current(v, d, t_j))
    i_s, width = float(saturation_current(t_j, d)), d.n * K_OVER_Q * (t_j + 273.15)
    junction = v - i * float(series_resistance(t_j, d))
    # Through the voltage: the exponential turns a last digit of V/(N kT/q), up to some hundreds, into many.
    assert width * math.log1p(i / i_s) == pytest.approx(junction, rel=1e-9, abs=1e-12)


def test_no_voltage_no_current():
    assert float(forward_current(0.0, DIODE)) == 0.0
    assert float(forward_voltage(0.0, DIODE)) == 0.0


def test_decade_of_forward_current_takes_the_emission_coefficient_times_kt_over_q():
    # N kT/q ln 10 a decade: 1.1 times 59.16 mV at 25 C (arithmetic).
    d = replace(DIODE, r=0.0)
    rise = float(forward_voltage(1e-2, d) - forward_voltage(1e-3, d))
    assert rise == pytest.approx(1.1 * 59.16e-3, rel=1e-4)


def test_diodes_parameters_are_given_at_the_reference_temperature():
    assert float(saturation_current(25.0, DIODE)) == DIODE.i_s
    assert float(series_resistance(25.0, DIODE)) == DIODE.r


@pytest.mark.parametrize("n", [1.0, 1.8])
@pytest.mark.parametrize("t_j", [25.0, 125.0])
def test_forward_voltage_falls_with_temperature_as_the_junctions_physics_says(n, t_j):
    # With IS^N rising as T^3 exp(-q Eg/kT), dV/dT at constant current is (V - Eg - 3 kT/q)/T (arithmetic).
    d, kelvin = BodyDiode(i_s=1e-9 if n > 1.5 else 1e-13, n=n, r=0.0, e_g=1.12), t_j + 273.15
    v = float(forward_voltage(1.0, d, t_j))
    expected = (v - 1.12 - 3.0 * K_OVER_Q * kelvin) / kelvin
    assert slope(lambda t: forward_voltage(1.0, d, t), t_j, 0.01) == pytest.approx(expected, rel=1e-5)


def test_forward_voltage_rises_with_temperature_where_the_resistance_rules():
    d = replace(DIODE, r=0.05, r_exponent=2.0)
    assert float(forward_voltage(100.0, d, 150.0)) > float(forward_voltage(100.0, d, 25.0))


@pytest.mark.parametrize("name", [f.name for f in fields(BodyDiode)])
@pytest.mark.parametrize("of", [forward_voltage, forward_current], ids=["voltage", "current"])
def test_imaginary_part_is_the_derivative_by_a_diodes_parameter(name, of):
    at, x = getattr(DIODE, name), 10.0 if of is forward_voltage else 0.8
    derivative = float(of(x, replace(DIODE, **{name: at + STEP * 1j}), 100.0).imag) / STEP
    difference = slope(lambda y: of(x, replace(DIODE, **{name: y}), 100.0), at, 1e-5 * at)
    assert derivative == pytest.approx(difference, rel=1e-6)


# Reverse recovery

RECOVERIES = [
    pytest.param(37e-9, 20.0, 1e8, id="silicon"),
    pytest.param(150e-9, 30.0, 3e8, id="superjunction"),
    pytest.param(8e-9, 20.0, 1e9, id="silicon carbide"),
    pytest.param(2e-6, 5.0, 1e8, id="longer than the fall of the current"),
]


@pytest.mark.parametrize(("transit_time", "i_f", "di_dt"), RECOVERIES)
def test_recovery_is_that_of_an_integrated_charge_control_equation(transit_time, i_f, di_dt):
    # dQ/dt = I - Q/TT with the terminal current I = IF - (dI/dt) t, from the steady state Q = IF TT; over when Q is 0.
    def run_out(t, y):
        return y[0]

    run_out.terminal, run_out.direction = True, -1.0
    whole = i_f * transit_time
    end = 10.0 * (i_f / di_dt + transit_time)
    path = solve_ivp(
        lambda t, y: [(i_f - di_dt * t) - y[0] / transit_time], (0.0, end), [whole],
        events=run_out, rtol=1e-10, atol=1e-12 * whole, max_step=end / 200.0,
    )  # fmt: skip
    after = path.t_events[0][0] - i_f / di_dt
    charge, time = recovery(transit_time, i_f, di_dt)
    assert time == pytest.approx(after, rel=1e-6)
    # The reverse current is a triangle from its zero on.
    assert charge == pytest.approx(di_dt * after * after / 2.0, rel=1e-6)


@pytest.mark.parametrize(("transit_time", "i_f", "di_dt"), RECOVERIES)
def test_transit_time_comes_back_from_the_charge_it_gives(transit_time, i_f, di_dt):
    charge, _ = recovery(transit_time, i_f, di_dt)
    assert transit_time_from_charge(charge, i_f, di_dt) == pytest.approx(transit_time, rel=1e-9)


@pytest.mark.parametrize(("transit_time", "i_f", "di_dt"), RECOVERIES)
def test_transit_time_comes_back_from_the_time_it_gives(transit_time, i_f, di_dt):
    _, time = recovery(transit_time, i_f, di_dt)
    assert transit_time_from_time(time, i_f, di_dt) == pytest.approx(transit_time, rel=1e-9)


@EXAMPLES
@given(logarithmic(1e-10, 1e-6), logarithmic(0.1, 200.0), logarithmic(1e7, 1e10))
def test_recovered_charge_is_less_than_the_stored_one(transit_time, i_f, di_dt):
    charge, time = recovery(transit_time, i_f, di_dt)
    assert 0.0 < charge < i_f * transit_time
    assert 0.0 < time <= transit_time * (1.0 + 1e-9)


@EXAMPLES
@given(logarithmic(1e-9, 1e-5), logarithmic(0.5, 200.0), logarithmic(1e7, 1e10))
def test_stated_charge_is_predicted_by_the_transit_time_taken_from_it(q_rr, i_f, di_dt):
    charge, _ = recovery(transit_time_from_charge(q_rr, i_f, di_dt), i_f, di_dt)
    assert charge == pytest.approx(q_rr, rel=1e-4)


def test_threshold_voltage_behind_a_large_resistance_solves_its_equation():
    c = Channel(v_th=6.2, k=588.0, w=1.88, lam=0.0, r_s=0.002, r_d=0.85)
    v = float(threshold_voltage(0.05, c))
    assert v > 0.05 * 0.852
    assert float(terminal_current(v, v, c)) == pytest.approx(0.05, rel=1e-9)
