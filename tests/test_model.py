"""The finished model as a user holds it: shapes, signs, ranges, intervals."""

import numpy as np
import pytest

from fitter.errors import ExtrapolationWarning, OperatingPointError
from fitter.gate_charge import OperatingPoint
from fitter.part import Quantity

N_CHANNEL, P_CHANNEL = "cargo_80v", "camper_van_p40v"
CAPACITANCES = ("ciss", "coss", "crss")


@pytest.fixture
def model(fitted, demo):
    return fitted(demo)


@pytest.fixture(scope="module")
def n_channel(fitted):
    return fitted(N_CHANNEL)


@pytest.fixture(scope="module")
def p_channel(fitted):
    return fitted(P_CHANNEL)


def at_test_point(model):
    """The stated gate-charge condition with the part's signs."""
    p = model.test_point()
    return {"vdd": model.sign * p.v_dd, "i_d": model.sign * p.i_d, "v_gs": model.sign * p.v_gs}


# Capacitances


@pytest.mark.parametrize("quantity", CAPACITANCES)
@pytest.mark.parametrize("shape", [(), (1,), (7,), (3, 4)])
def test_capacitance_has_the_shape_of_the_voltage(n_channel, quantity, shape):
    assert getattr(n_channel, quantity)(np.full(shape, 10.0)).shape == shape


@pytest.mark.parametrize("quantity", CAPACITANCES)
def test_capacitance_of_an_array_is_that_of_its_elements(n_channel, quantity):
    v = [0.0, 0.3, 12.0, 80.0]
    c = getattr(n_channel, quantity)
    np.testing.assert_array_equal(c(v), [float(c(x)) for x in v])


def test_capacitances_stand_in_their_order(model):
    """Crss = Cgd is part of both Ciss = Cgs + Cgd and Coss = Cds + Cgd."""
    v = model.sign * np.geomspace(0.1, model.part.v_ds_max, 50)
    assert np.all(model.crss(v) > 0.0)
    assert np.all(model.ciss(v) > model.crss(v))
    assert np.all(model.coss(v) > model.crss(v))


def test_capacitances_fall_with_voltage(model):
    # A superjunction part's Crss rises again from some hundred volts on.
    rises = "cr_gd" in model.parameters
    v = model.sign * np.geomspace(0.1, 80.0 if rises else model.part.v_ds_max, 200)
    for quantity in CAPACITANCES:
        assert np.all(np.diff(getattr(model, quantity)(v)) <= 0.0), quantity
    if rises:
        assert model.crss(0.9 * model.part.v_ds_max) > 1.1 * model.crss(130.0)


def test_capacitance_of_a_p_channel_part_belongs_to_negative_voltages(p_channel):
    (curve,) = p_channel.part.curves_of(Quantity.CRSS)
    inner = curve.x > 1.0
    np.testing.assert_allclose(p_channel.crss(-curve.x[inner]), curve.y[inner], rtol=0.2)


# Channel


def test_drain_current_broadcasts(n_channel):
    assert n_channel.drain_current(np.linspace(0.0, 10.0, 5)[:, None], np.linspace(0.0, 20.0, 7)).shape == (5, 7)
    assert n_channel.drain_current([4.0, 5.0, 6.0], 10.0).shape == (3,)
    assert n_channel.drain_current(5.0, 10.0).shape == ()


def test_drain_current_of_a_grid_is_that_of_its_elements(n_channel):
    grid = n_channel.drain_current(np.array([[4.0], [5.0]]), [0.1, 10.0])
    single = [[float(n_channel.drain_current(g, d)) for d in (0.1, 10.0)] for g in (4.0, 5.0)]
    np.testing.assert_allclose(grid, single, rtol=1e-12)


def test_drain_current_flows_with_the_channels_sign(model):
    assert model.sign * float(model.drain_current(model.sign * 10.0, model.sign * 1.0)) > 0.0


def test_drain_current_is_zero_without_a_drain_voltage(model):
    assert float(model.drain_current(model.sign * 10.0, 0.0)) == 0.0


def test_drain_current_reverses_with_the_drain_voltage(model):
    assert model.sign * float(model.drain_current(model.sign * 10.0, model.sign * -0.5)) < 0.0


def test_drain_current_at_another_temperature_is_another_one(n_channel):
    assert float(n_channel.drain_current(10.0, 0.1, t_j=150.0)) < 0.8 * float(n_channel.drain_current(10.0, 0.1))


@pytest.mark.parametrize("beyond", [1.0, 30.0])
def test_temperature_above_the_digitized_ones_is_an_extrapolation(model, beyond):
    high = model.validity.t_j[-1]
    with pytest.warns(ExtrapolationWarning, match="C lies outside the digitized .* C: the temperature laws extra"):
        model.drain_current(model.sign * 5.0, model.sign * 10.0, t_j=high + beyond)


def test_temperature_below_the_digitized_ones_is_an_extrapolation(model):
    with pytest.warns(ExtrapolationWarning):
        model.gate_charge(**at_test_point(model), t_j=model.validity.t_j[0] - 1.0)


def test_digitized_temperatures_are_no_extrapolation(model):
    for t_j in (model.validity.t_j[0], 25.0, 100.0, model.validity.t_j[-1]):
        assert model.extrapolation(t_j) == ""
        model.drain_current(model.sign * 5.0, model.sign * 10.0, t_j=t_j)  # a warning would be an error


def test_digitized_temperatures_are_those_of_the_curves(model):
    hot = max(c.t_j for c in model.part.curves_of(Quantity.TRANSFER))
    low, high = model.validity.t_j
    assert low < 0.0 < hot <= high


@pytest.mark.parametrize("t_j", [-300.0, float("nan")])
@pytest.mark.filterwarnings("ignore::fitter.errors.ExtrapolationWarning")
def test_what_is_no_temperature_is_refused(n_channel, t_j):
    with pytest.raises(OperatingPointError, match="is no junction temperature"):
        n_channel.drain_current(5.0, 10.0, t_j=t_j)


# Where the temperature does not matter


def transfer_v_ds(model):
    """VDS of the transfer curves, with the channel's sign."""
    return model.sign * model.part.curves_of(Quantity.TRANSFER)[0].v_ds


@pytest.mark.parametrize("share", [None, 0.5])
def test_zero_temperature_coefficient_lies_where_the_two_transfer_curves_cross(model, share):
    v_ds = transfer_v_ds(model) if share is None else model.sign * share * model.part.v_ds_max
    v_gs, i_d = model.zero_temperature_coefficient(None if share is None else v_ds)
    cold, hot = (float(model.drain_current(v_gs, v_ds, t_j=t)) for t in (25.0, model.validity.t_j[-1]))
    assert cold == pytest.approx(hot, rel=1e-4)
    assert i_d == pytest.approx(cold, rel=1e-6)


def test_hot_transfer_curve_leads_below_the_crossing_and_lags_above_it(model):
    v_gs, _ = model.zero_temperature_coefficient()
    v_ds, hottest = transfer_v_ds(model), model.validity.t_j[-1]
    for factor, leads in ((0.97, True), (1.03, False)):
        cold, hot = (abs(float(model.drain_current(factor * v_gs, v_ds, t_j=t))) for t in (25.0, hottest))
        assert (hot > cold) is leads


def test_zero_temperature_coefficient_has_the_channels_signs(p_channel, n_channel):
    assert all(x < 0.0 for x in p_channel.zero_temperature_coefficient())
    assert all(x > 0.0 for x in n_channel.zero_temperature_coefficient())


# Gate charge


def test_gate_charge_curve_runs_from_nothing_to_the_final_voltage(model):
    curve = model.gate_charge(**at_test_point(model))
    assert curve.q_g.shape == curve.v_gs.shape == curve.v_ds.shape == curve.i_d.shape == (300,)
    assert (curve.q_g[0], curve.v_gs[0]) == pytest.approx((0.0, 0.0), abs=1e-6)
    assert float(curve.v_gs[-1]) == pytest.approx(at_test_point(model)["v_gs"], rel=1e-9)
    assert curve.total == float(curve.q_g[-1])


def test_gate_charge_rises_along_its_curve(model):
    assert np.all(np.diff(model.gate_charge(**at_test_point(model)).q_g) > 0.0)


def test_gate_charge_begins_at_the_supply_and_ends_at_the_on_state(model):
    where = at_test_point(model)
    curve = model.gate_charge(**where)
    assert float(curve.v_ds[0]) == pytest.approx(where["vdd"], rel=1e-3)
    on = float(curve.v_ds[-1])
    assert float(model.drain_current(where["v_gs"], on)) == pytest.approx(where["i_d"], rel=1e-6)


def test_legs_of_the_gate_charge_lie_within_the_total(model):
    curve = model.gate_charge(**at_test_point(model))
    assert curve.q_gs > 0.0
    assert curve.q_gd > 0.0
    assert curve.q_gs + curve.q_gd < curve.total


def test_plateau_lies_between_threshold_and_final_voltage(model):
    curve = model.gate_charge(**at_test_point(model))
    v_th = model.parameters["v_th"].value
    assert v_th < model.sign * curve.v_plateau < abs(at_test_point(model)["v_gs"])


def test_gate_charge_of_a_p_channel_part_has_negative_voltages_and_currents(p_channel):
    curve = p_channel.gate_charge(vdd=-20.0, i_d=-30.0, v_gs=-10.0)
    assert np.all(curve.v_gs <= 0.0)
    assert np.all(curve.v_ds <= 0.0)
    assert np.all(curve.i_d <= 0.0)
    assert curve.v_plateau < 0.0
    assert min(curve.total, curve.q_gs, curve.q_gd) > 0.0


def test_magnitudes_do_for_a_p_channel_part(p_channel):
    signed, bare = p_channel.gate_charge(-20.0, -30.0, -10.0), p_channel.gate_charge(20.0, 30.0, 10.0)
    np.testing.assert_array_equal(signed.q_g, bare.q_g)
    np.testing.assert_array_equal(signed.v_gs, bare.v_gs)


def test_plateau_rises_with_the_load_current(model):
    """The plateau lies above the threshold by what the load current needs (common practice, no source)."""
    where = at_test_point(model)
    low, high = (model.gate_charge(**{**where, "i_d": f * where["i_d"]}).v_plateau for f in (0.5, 1.5))
    assert abs(high) > abs(low)


def test_resistive_load_draws_its_current_from_the_supply(model):
    where = at_test_point(model)
    curve = model.gate_charge(**where, load="resistive")
    expected = where["i_d"] * (1.0 - curve.v_ds / where["vdd"])
    np.testing.assert_allclose(curve.i_d, expected, rtol=1e-6, atol=1e-6 * abs(where["i_d"]))


def test_current_that_the_channel_cannot_carry_is_refused(model):
    where = at_test_point(model)
    with pytest.raises(OperatingPointError, match="the channel does not carry the load's"):
        model.gate_charge(**{**where, "v_gs": 0.2 * where["v_gs"]})


@pytest.mark.parametrize(
    "point, message",
    [
        ((0.0, 1.0, 10.0, "current"), "VDD = 0 makes no gate-charge test"),
        ((40.0, float("nan"), 10.0, "current"), "ID = nan makes no gate-charge test"),
        ((40.0, 1.0, float("inf"), "current"), "VGS = inf makes no gate-charge test"),
        ((40.0, 1.0, 10.0, "inductive"), "load 'inductive' is not known; it is 'current' or 'resistive'"),
    ],
)
def test_point_that_is_no_test_is_refused(n_channel, point, message):
    with pytest.raises(OperatingPointError, match=message):
        n_channel.gate_charge(*point)


def test_stated_condition_is_the_test_point(p_channel):
    assert p_channel.test_point() == OperatingPoint(v_dd=20.0, i_d=30.0, v_gs=10.0, load="current")


# Intervals


@pytest.fixture
def intervals(model):
    return model.gate_charge_intervals(**at_test_point(model))


def test_intervals_hold_their_values(intervals):
    assert list(intervals) == ["qg", "qgs", "qgd", "v_plateau"]
    for name, found in intervals.items():
        assert found.low <= found.value <= found.high, name
        assert found.low < found.high, name


def test_intervals_are_about_the_figures_of_the_curve(model, intervals):
    curve = model.gate_charge(**at_test_point(model))
    figures = {"qg": curve.total, "qgs": curve.q_gs, "qgd": curve.q_gd, "v_plateau": curve.v_plateau}
    assert {name: found.value for name, found in intervals.items()} == pytest.approx(figures)


def test_interval_of_a_p_channel_plateau_is_negative(p_channel):
    found = p_channel.gate_charge_intervals(-20.0, -30.0, -10.0)["v_plateau"]
    assert found.low < found.value < found.high < 0.0


def test_fitted_gate_charge_is_surer_than_the_predicted_one(fitted):
    predicted, known = (
        fitted(P_CHANNEL, use).gate_charge_intervals(-20.0, -30.0, -10.0)["qg"] for use in (False, True)
    )
    assert known.high - known.low < 0.5 * (predicted.high - predicted.low)


@pytest.mark.parametrize("quantity", CAPACITANCES)
def test_band_holds_the_curve(model, quantity):
    v = model.sign * np.geomspace(0.1, model.part.v_ds_max, 40)
    low, high = model.band(quantity, v)
    assert low.shape == high.shape == v.shape
    assert np.all(low < high)
    c = getattr(model, quantity)(v)
    assert np.all((low <= c) & (c <= high))


def test_points_lie_near_the_curves(model):
    """Nine in ten within four standard deviations of their reading errors."""
    for quantity in CAPACITANCES:
        points = [p for p in model.points if p.curve == quantity and p.used]
        assert np.mean([abs(p.residual) < 4.0 for p in points]) > 0.9, quantity


# Beyond what is known


def test_stated_test_is_not_beyond_anything(model):
    assert model.beyond(**at_test_point(model)) == ()


def test_supply_above_the_rating_is_said(n_channel):
    assert n_channel.beyond(81.0, 50.0, 10.0) == ("VDD = 81 V lies above the rated 80 V",)


def test_gate_voltage_above_the_rating_is_said(n_channel):
    assert n_channel.beyond(40.0, 50.0, 21.0) == ("VGS = 21 V lies above the rated 20 V",)


def test_current_above_the_digitized_curves_is_said(n_channel):
    (text,) = n_channel.beyond(40.0, 300.0, 10.0)
    assert text.startswith("ID = 300 A lies above 250 A, where the digitized curves of the channel end")


def test_supply_within_the_rating_above_the_digitized_curves_is_said(fitted):
    (text,) = fitted("ferry_charger_1200v").beyond(1100.0, 30.0, 18.0)
    assert text.startswith("VDD = 1100 V lies above 975.5 V, where the digitized curves of the capacitances end")


def test_point_just_beyond_the_last_click_is_no_extrapolation(n_channel):
    last = n_channel.validity.i_d[-1]
    assert n_channel.beyond(40.0, 1.01 * last, 10.0) == ()


def test_signs_do_not_matter_to_what_lies_beyond(p_channel):
    assert p_channel.beyond(-41.0, -30.0, -10.0) == p_channel.beyond(41.0, 30.0, 10.0)
    assert p_channel.beyond(-41.0, -30.0, -10.0) == ("VDD = 41 V lies above the rated 40 V",)


def test_everything_beyond_is_said_at_once(n_channel):
    assert len(n_channel.beyond(100.0, 1000.0, 25.0)) == 3


# The parameter table


def test_parameters_are_those_of_the_transistor(model):
    transistor = model.transistor()
    assert model.parameters["c_gs"].value == pytest.approx(float(np.real(transistor.c_gs)))
    assert model.parameters["v_th"].value == pytest.approx(float(np.real(transistor.channel.v_th)))


def test_assumed_parameters_say_what_is_assumed(model):
    for name in ("c_ch", "c_acc"):
        row = model.parameters[name]
        assert row.origin == "assumed"
        assert row.note.startswith("shows on no curve at VGS = 0")


def test_correlations_are_between_minus_one_and_one(model):
    assert model.correlations
    assert all(-1.0 - 1e-9 <= r <= 1.0 + 1e-9 for r in model.correlations.values())


def test_every_point_of_a_fitted_curve_is_kept_beside_the_fitted_value(model):
    for curve in model.part.curves:
        assert len([p for p in model.points if p.curve == curve.name]) in (0, curve.x.size)
    assert {p.curve for p in model.points} >= {"ciss", "coss", "crss", "transfer 25 C"}
