"""The fit: exact derivatives, recovery of known parameters, choice of form, mis-clicks, and what it says of itself.

The curves below are drawn with the model's own equations, so the true parameters are known; the parts are invented.
"""

from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from conftest import ROOT

from fitter.errors import FitError
from fitter.fitting import observations
from fitter.fitting.blocks import PathBlock, model_space
from fitter.fitting.fit import fit
from fitter.fitting.forms import corrected_akaike, fit_capacitances
from fitter.fitting.solve import solve
from fitter.fitting.space import derivatives
from fitter.gate_charge import OperatingPoint, gate_charge_curve
from fitter.models.channel import threshold_voltage
from fitter.models.transistor import Transistor
from fitter.models.types import scalar
from fitter.part import (
    Axis,
    Curve,
    Part,
    Quantity,
    Stated,
    StatedGateCharge,
    StatedOnResistance,
    StatedThreshold,
    StatedValues,
)
from fitter.pipeline import fit_part
from fitter.reader import read_part

CAPACITANCES = (Quantity.CISS, Quantity.COSS, Quantity.CRSS)
POINT = OperatingPoint(v_dd=40.0, i_d=30.0, v_gs=10.0)

PLAIN = {
    "c_gs": 2e-9, "s_gs": 0.1, "c_ch": 5e-10, "c_acc": 8e-10,
    "c0_gd": 8e-10, "phi_gd": 0.8, "m_gd": 0.5, "cf_gd": 1e-11,
    "c0_ds": 3e-9, "phi_ds": 0.7, "m_ds": 0.45, "cf_ds": 5e-11,
    "v_th": 3.0, "k": 40.0, "w": 0.15, "alpha": 1.6, "lambda": 0.002, "r_s": 1e-3, "r_d": 2e-3,
}  # fmt: skip
SHIELDED = {
    **PLAIN, "s1_gd": 0.8, "vs1_gd": 15.0, "ws1_gd": 0.15, "s1_ds": 0.9, "vs1_ds": 20.0, "ws1_ds": 0.2,
}  # fmt: skip
TRUTHS = {"plain": PLAIN, "shielded": SHIELDED}
CHANNEL = ("v_th", "k", "w", "alpha", "lambda", "r_s", "r_d")


def linear(start, end):
    return Axis(scale="linear", start=start, end=end)


def log(start, end):
    return Axis(scale="log", start=start, end=end)


def curve(quantity, x, y, axes, name="", **conditions):
    """A curve as the reader would give it; its points stand from line 2 on."""
    name = name or str(quantity)
    return Curve(
        quantity=quantity, name=name, file=f"{name}.csv", x=np.asarray(x), y=np.asarray(y),
        lines=np.arange(len(x)) + 2, x_column="x", y_column="y", x_axis=axes[0], y_axis=axes[1],
        point_error=0.003, axis_error=0.003, x_unit="V", y_unit="A", **conditions,
    )  # fmt: skip


def capacitance_curves(truth, v_ds):
    t = Transistor.from_values(truth)
    axes = log(0.1, 100.0), log(1e-12, 1e-8)
    return tuple(
        curve(quantity, v_ds, evaluate(v_ds), axes)
        for quantity, evaluate in zip(CAPACITANCES, (t.c_iss, t.c_oss, t.c_rss), strict=True)
    )


def transfer_curve(truth, v_gs):
    t = Transistor.from_values(truth)
    return curve(
        Quantity.TRANSFER, v_gs, t.i_d(v_gs, 10.0), (linear(0.0, 8.0), linear(0.0, 200.0)), v_ds=10.0, t_j=25.0
    )


def output_curve(truth, v_gs):
    v_ds = np.linspace(0.05, 3.0, 20)
    i_d = Transistor.from_values(truth).i_d(v_gs, v_ds)
    axes = linear(0.0, 3.0), linear(0.0, 200.0)
    return curve(Quantity.OUTPUT, v_ds, i_d, axes, f"output {v_gs:g} V", v_gs=v_gs, t_j=25.0)


def charge_curve(truth):
    walk = gate_charge_curve(Transistor.from_values(truth), POINT)
    some = np.linspace(1, walk.q_g.size - 1, 45).astype(int)
    axes = linear(0.0, 60e-9), linear(0.0, 10.0)
    return curve(
        Quantity.GATE_CHARGE, walk.q_g[some], walk.v_gs[some], axes,
        v_dd=POINT.v_dd, i_d=POINT.i_d, load="current",
    )  # fmt: skip


V_DS = np.geomspace(0.1, 80.0, 36)
V_GS = np.linspace(2.6, 6.0, 25)


def drawn_part(truth, *, v_ds=V_DS, v_gs=V_GS, outputs=(4.0, 5.0, 10.0), charge=False, stated=None):
    """A part whose curves are the model's own, without any reading error."""
    curves = (*capacitance_curves(truth, v_ds), transfer_curve(truth, v_gs))
    curves += tuple(output_curve(truth, v) for v in outputs)
    curves += (charge_curve(truth),) if charge else ()
    stated = StatedValues() if stated is None else stated
    return Part(name="DRAWN", channel="n", v_ds_max=80.0, v_gs_max=20.0, curves=curves, stated=stated)


def clicked(part, seed):
    """The same part with the reading errors that its curves claim."""
    rng = np.random.default_rng(seed)

    def off(axis, values, c):
        shift = rng.normal(0.0, 1.0, values.size) * c.point_error + rng.normal() * c.axis_error
        place = observations.to_axis(values, axis) + shift * axis.length
        return observations.from_axis(place, axis)

    return replace(
        part, curves=tuple(replace(c, x=off(c.x_axis, c.x, c), y=off(c.y_axis, c.y, c)) for c in part.curves)
    )


@cache
def demo_part(name):
    return read_part(ROOT / "digitized_curves" / name)


def lean(part):
    """Its capacitances and the transfer curve at 25 C alone: fitted in a second."""
    kept = tuple(
        c for c in part.curves if c.quantity in CAPACITANCES or (c.quantity is Quantity.TRANSFER and c.t_j == 25.0)
    )
    return replace(part, curves=kept)


# Derivatives

STEP = 3e-4
#: Share of the largest derivative of a block that the difference of two residuals may be off by.
ROUNDING = 2e-6


def every_block(part):
    """The blocks of all curves, and those of the table values that stand in for missing ones."""
    bare = replace(part, curves=())
    return {
        block.name: block
        for each in (bare, part)
        for collect in (
            observations.capacitance_blocks, observations.channel_blocks, observations.hot_blocks,
            observations.body_diode_blocks, observations.gate_charge_blocks,
        )
        for block in collect(each)
    }  # fmt: skip


def off_bounds(values):
    """Values by name; lambda and c_ch off their bounds of 0, below which the model has no meaning."""
    inside = {**values, "lambda": max(values["lambda"], 2e-3), "c_ch": max(values["c_ch"], 0.1 * values["c_gs"])}
    return {name: scalar(value) for name, value in inside.items()}


def derivatives_both_ways(block, values):
    """Exact derivatives of a block's residuals and central differences, each of shape (parameters, residuals)."""
    free = [name for name in block.parameters if name in values]
    assert free
    space = model_space(free, {n: x for n, x in values.items() if n not in free}, [block])
    point = space.coordinates({**values, **dict.fromkeys(block.nuisances, 0.3)})
    exact = derivatives(block.residuals, space, point, space.names)

    def residuals(at):
        return np.real(block.residuals(space.values(at)))

    rows = [(residuals(point + s) - residuals(point - s)) / (2.0 * STEP) for s in STEP * np.eye(point.size)]
    return exact, np.array(rows)


#: How many blocks of a kind there are at the least, and which.
KINDS = {
    "curves": (15, lambda b: "(table)" not in b.name and not isinstance(b, PathBlock)),
    "tables": (10, lambda b: "(table)" in b.name),
    "gate charge": (1, lambda b: isinstance(b, PathBlock)),
}


@pytest.mark.parametrize("kind", KINDS)
def test_derivatives_are_those_of_finite_differences(fitted, demo, kind):
    values = off_bounds(fitted(demo).estimate.values)
    least, belongs = KINDS[kind]
    blocks = [block for block in every_block(demo_part(demo)).values() if belongs(block)]
    assert len(blocks) >= least
    for block in blocks:
        exact, differences = derivatives_both_ways(block, values)
        off = np.abs(exact - differences)
        if kind == "gate charge":
            # Two points at the most: beyond a corner of the path a point is as near to one stretch as to the other.
            off = np.sort(off, axis=1)[:, :-2]
        allowed = 1e-4 * np.abs(exact).max(axis=1, keepdims=True) + ROUNDING * np.abs(exact).max()
        assert np.all(off <= allowed), block.name


# Recovery of known parameters

CASES = {
    "capacitances": (lambda t: capacitance_curves(t, V_DS), lambda n: n.endswith(("_gd", "_ds")) or n == "c_gs"),
    "channel": (
        lambda t: (transfer_curve(t, V_GS), *(output_curve(t, v) for v in (4.0, 5.0, 10.0))),
        lambda n: n in CHANNEL,
    ),
    "gate charge": (lambda t: (charge_curve(t),), lambda n: n in ("c_gs", "c_ch", "c_acc")),
    "everything": (lambda t: drawn_part(t, charge=True).curves, lambda _: True),
}  # fmt: skip


@cache
def recovered(case, form, factor):
    """Fit of the model's own curves, each free parameter started at its true value times the factor."""
    truth = TRUTHS[form]
    draw, is_free = CASES[case]
    free = tuple(name for name in truth if is_free(name))
    blocks = [observations.curve_block(c) for c in draw(truth)]
    space = model_space(free, {n: x for n, x in truth.items() if n not in free}, blocks)
    return free, solve(blocks, space, {name: factor * truth[name] for name in free})


@pytest.mark.parametrize("factor", [3.0, 1.0 / 3.0])
@pytest.mark.parametrize("form", TRUTHS)
@pytest.mark.parametrize("case", CASES)
def test_known_parameters_are_recovered(case, form, factor):
    free, solution = recovered(case, form, factor)
    truth = TRUTHS[form]
    assert solution.converged
    # Between the 300 points of its path a gate-charge curve is straight: the last digits are the chords'.
    relative = 1e-6 if case in ("capacitances", "channel") else 5e-4
    assert {n: scalar(solution.values[n]) for n in free} == pytest.approx({n: truth[n] for n in free}, rel=relative)


@pytest.mark.parametrize("form", TRUTHS)
@pytest.mark.parametrize("case", CASES)
def test_two_starts_lead_to_the_same_minimum(case, form):
    (_, high), (_, low) = recovered(case, form, 3.0), recovered(case, form, 1.0 / 3.0)
    assert high.chi_square == pytest.approx(low.chi_square, rel=1e-4, abs=1e-12)
    np.testing.assert_allclose(high.coordinates, low.coordinates, rtol=1e-5, atol=1e-5)


@pytest.mark.parametrize("form", TRUTHS)
def test_whole_fit_recovers_the_gate_charge_of_its_own_curves(form):
    truth = TRUTHS[form]
    result = fit(drawn_part(truth, charge=True), use_gate_charge=True)
    true, found = (
        gate_charge_curve(Transistor.from_values(v), POINT).reading for v in (truth, result.estimate.values)
    )  # fmt: skip
    for name in ("total", "q_gs", "q_gd", "v_plateau"):
        assert float(getattr(found, name)) == pytest.approx(float(getattr(true, name)), rel=3e-3), name


# Choice of form


def chosen(result):
    return {t.capacitance: t.shields for t in result.trials if t.chosen}


@pytest.mark.parametrize("seed", range(2))
def test_plain_data_get_the_plain_form(seed):
    assert chosen(fit_capacitances(clicked(drawn_part(PLAIN), seed))) == {"gate-drain": 0, "drain-source": 0}


@pytest.mark.parametrize("seed", range(2))
def test_shielded_data_get_a_shielded_form(seed):
    found = chosen(fit_capacitances(clicked(drawn_part(SHIELDED), seed)))
    assert min(found.values()) >= 1


@pytest.mark.parametrize("points", range(5, 14, 2))
def test_no_form_has_more_parameters_than_its_points_carry(points):
    result = fit_capacitances(drawn_part(SHIELDED, v_ds=np.geomspace(0.1, 80.0, points)))
    assert result.trials
    assert all(t.parameters < points for t in result.trials)
    assert all(np.isfinite(t.aicc) for t in result.trials)


def test_the_winning_form_is_the_one_of_the_lowest_criterion():
    trials = fit_capacitances(clicked(drawn_part(SHIELDED), 0)).trials
    for name in ("gate-drain", "drain-source"):
        tried = [t for t in trials if t.capacitance == name]
        assert [t.shields for t in tried if t.chosen] == [min(tried, key=lambda t: t.aicc).shields]
        assert all(t.aicc == corrected_akaike(t.chi_square, t.parameters, t.points) for t in tried)


@pytest.mark.parametrize("seed", range(3))
def test_two_shields_at_about_the_same_voltage_keep_their_names(seed):
    """The wider one lies a tenth higher."""
    two = SHIELDED | {"s1_gd": 0.6, "vs1_gd": 20.0, "ws1_gd": 0.05, "s2_gd": 0.98, "vs2_gd": 22.0, "ws2_gd": 0.4}
    result = fit_capacitances(clicked(drawn_part(two), seed))
    assert chosen(result)["gate-drain"] == 2
    values = result.solution.values
    assert values["ws1_gd"] < values["ws2_gd"]


def risen(result):
    return {t.capacitance for t in result.trials if t.chosen and t.rises}


@pytest.mark.parametrize("seed", range(2))
def test_a_rise_of_crss_at_high_voltage_is_followed(seed):
    true = SHIELDED | {"s1_gd": 1.0, "cf_gd": 5e-12, "cr_gd": 1e-11, "vr_gd": 80.0}
    result = fit_capacitances(clicked(drawn_part(true), seed))
    assert risen(result) == {"gate-drain"}
    assert result.fixed == {"vr_gd": pytest.approx(80.0, rel=0.15)}
    v = np.array([60.0, 80.0])
    found, expected = (Transistor.from_values({**PLAIN, **x}).c_rss(v) for x in (result.solution.values, true))
    np.testing.assert_allclose(found, expected, rtol=0.05)


@pytest.mark.parametrize("form", [PLAIN, SHIELDED], ids=["plain", "shielded"])
def test_a_curve_that_only_falls_gets_no_rise(form):
    result = fit_capacitances(clicked(drawn_part(form), 0))
    assert not any(t.rises for t in result.trials)
    assert "cr_gd" not in result.solution.values


def test_a_mis_clicked_point_at_the_end_of_crss_is_no_rise():
    part = clicked(drawn_part(SHIELDED), 0)
    (crss,) = part.curves_of(Quantity.CRSS)
    crss.y[np.argmax(crss.x)] *= 10.0
    result = fit_capacitances(part)
    assert not any(t.rises for t in result.trials)
    assert [o.curve for o in result.outliers] == ["crss"]


def test_too_few_points_for_the_plain_form_stop_the_fit():
    with pytest.raises(FitError, match="too few for a model of 4 parameters"):
        fit_capacitances(drawn_part(PLAIN, v_ds=np.geomspace(0.1, 80.0, 4)))


# What the fit says of its parameters


@pytest.fixture(scope="module")
def without_floor():
    """A part whose Crss falls a little faster than a junction can: the constant part would have to be negative."""
    return fit_part(drawn_part({**PLAIN, "cf_gd": -1e-11}, outputs=()))


def test_parameter_on_its_bound_is_said_so_in_its_row(without_floor):
    row = without_floor.parameters["cf_gd"]
    assert (row.origin, row.stderr, row.value) == ("fixed", None, 0.0)
    assert row.note == "ended on its bound of 0 F"


def test_parameter_on_its_bound_is_said_so_in_a_notice(without_floor):
    assert "cf_gd ended on its bound of 0 F" in [n.text for n in without_floor.notices]


def test_parameter_inside_its_bounds_is_fitted_and_has_a_standard_error(without_floor):
    row = without_floor.parameters["m_gd"]
    assert (row.origin, row.note) == ("fitted", "")
    assert 0.0 < row.stderr < 0.1


@pytest.fixture(scope="module")
def far_above_threshold():
    """A part whose transfer curve begins two volts above the threshold: the bend there shows nowhere."""
    return fit_part(drawn_part(PLAIN, v_gs=np.linspace(5.0, 6.5, 15), outputs=()))


def test_parameter_that_the_data_leave_open_is_not_determined(far_above_threshold):
    assert far_above_threshold.parameters["w"].origin == "not determined"


def test_parameter_that_the_data_leave_open_is_named_in_a_notice(far_above_threshold):
    (text,) = [n.text for n in far_above_threshold.notices if "the stated VGS(th)" in n.text]
    assert "w" in text.replace(",", " ").split()
    assert " open " in text


def test_stated_threshold_determines_what_the_transfer_curve_leaves_open():
    stated = StatedValues(threshold=StatedThreshold(i_d=250e-6, v_gs_th=Stated(typ=2.42)))
    model = fit_part(drawn_part(PLAIN, v_gs=np.linspace(5.0, 6.5, 15), outputs=(), stated=stated))
    assert model.parameters["w"].origin == "fitted"


# Mis-clicked points

SPOILED = "camper_van_p40v"


def spoiled(part, quantity, slip, share=0.5):
    """One point, at a share of a curve's points, slipped by a decade, or by a fifth of the printed axis."""
    (good,) = part.curves_of(quantity)
    k, y = int(share * good.x.size), good.y.copy()
    if slip == "decade":
        # Downwards where a tenfold value would lie off the page.
        y[k] *= 0.1 if quantity is Quantity.TRANSFER else 10.0
    else:
        axis = good.y_axis
        y[k] = observations.from_axis(observations.to_axis(y[k], axis) + 0.2 * axis.length, axis)
    curves = tuple(replace(c, y=y) if c is good else c for c in part.curves)
    return replace(part, curves=curves), f"{good.file}:{good.lines[k]}: a point of {good.name} lies "


@cache
def lean_model(name=SPOILED):
    return fit_part(lean(demo_part(name)))


@cache
def spoiled_model(quantity, slip):
    part, begin = spoiled(lean(demo_part(SPOILED)), quantity, slip)
    return fit_part(part), begin


def charges(model):
    """QG, QGS and QGD [C] at the stated condition."""
    p = model.test_point()
    curve = model.gate_charge(p.v_dd, p.i_d, p.v_gs)
    return {"QG": curve.total, "QGS": curve.q_gs, "QGD": curve.q_gd}


MIS_CLICKS = [(q, slip) for q in (*CAPACITANCES, Quantity.TRANSFER) for slip in ("decade", "fifth of the axis")]


def test_no_point_of_well_clicked_curves_is_set_aside():
    assert not [n for n in lean_model().notices if "left aside" in n.text]


@pytest.mark.parametrize("quantity, slip", MIS_CLICKS)
def test_mis_clicked_point_is_set_aside_and_named_with_file_and_line(quantity, slip):
    model, begin = spoiled_model(quantity, slip)
    (text,) = [n.text for n in model.notices if "left aside" in n.text]
    assert text.startswith(begin)


@pytest.mark.parametrize("quantity, slip", MIS_CLICKS)
def test_mis_clicked_point_hardly_moves_the_gate_charge(quantity, slip):
    model, _ = spoiled_model(quantity, slip)
    assert charges(model) == pytest.approx(charges(lean_model()), rel=0.01)


@pytest.mark.parametrize("quantity, share", [(Quantity.COSS, 0.5), (Quantity.CRSS, 0.25)])
def test_mis_clicked_point_hardly_moves_the_gate_charge_of_a_part_on_a_linear_axis(quantity, share):
    """Where VDS reads to a quarter of a volt only, Crss at low VDS is the least sure of all."""
    part, _ = spoiled(lean(demo_part("cargo_80v")), quantity, "decade", share)
    assert charges(fit_part(part)) == pytest.approx(charges(lean_model("cargo_80v")), rel=0.01)


# What cannot be fitted

#: So few points that only the plain form is tried: these fits end early.
FEW = np.geomspace(0.1, 80.0, 7)


def test_part_without_a_transfer_curve_is_refused_with_what_to_give():
    part = drawn_part(PLAIN, v_ds=FEW)
    with pytest.raises(FitError, match="no transfer curve at 25 C: give one with tj_C = 25"):
        fit(replace(part, curves=part.curves[:3]))


def test_hot_transfer_curve_alone_is_no_transfer_curve():
    part = drawn_part(PLAIN, v_ds=FEW, outputs=())
    with pytest.raises(FitError, match="no transfer curve at 25 C"):
        fit(replace(part, curves=(*part.curves[:3], replace(part.curves[3], t_j=150.0))))


def test_exchanged_columns_of_the_transfer_curve_are_guessed():
    part = drawn_part(PLAIN, v_ds=FEW, outputs=())
    falling = replace(part.curves[3], y=part.curves[3].y[::-1])
    with pytest.raises(FitError, match="transfer: ID does not rise with VGS; are the columns exchanged"):
        fit(replace(part, curves=(*part.curves[:3], falling)))


def test_gate_charge_cannot_be_fitted_without_gate_charge_data():
    with pytest.raises(FitError, match="no gate-charge data to fit: digitize a gate_charge curve or state qg"):
        fit(drawn_part(PLAIN, v_ds=FEW, outputs=()), use_gate_charge=True)


@pytest.mark.parametrize("missing", CAPACITANCES)
def test_missing_capacitance_without_its_table_value_is_refused(missing):
    part = drawn_part(PLAIN)
    with pytest.raises(FitError, match="too few capacitance data: digitize ciss, coss and crss"):
        fit_capacitances(replace(part, curves=tuple(c for c in part.curves if c.quantity is not missing)))


# Gate charge from the table


def test_stated_charges_are_fitted_where_no_curve_is_digitized():
    reading = gate_charge_curve(Transistor.from_values(PLAIN), POINT).reading
    charges = {"q_g": reading.total, "q_gs": reading.q_gs, "q_gd": reading.q_gd, "v_plateau": reading.v_plateau}
    stated = StatedValues(
        gate_charge=StatedGateCharge(
            v_dd=POINT.v_dd, i_d=POINT.i_d, v_gs=POINT.v_gs,
            **{name: Stated(typ=float(value)) for name, value in charges.items()},
        ),
        on_resistance=StatedOnResistance(v_gs=10.0, i_d=30.0, r_ds_on=Stated(typ=6.7e-3)),
    )  # fmt: skip
    result = fit(drawn_part(PLAIN, outputs=(), stated=stated), use_gate_charge=True)
    found = gate_charge_curve(Transistor.from_values(result.estimate.values), POINT).reading
    assert float(found.total) == pytest.approx(float(reading.total), rel=2e-3)
    assert {"c_ch", "c_acc"} <= set(result.estimate.space.names)


# The same again


def test_same_input_twice_gives_the_same_bits():
    first, second = lean_model().estimate, fit(lean(read_part(ROOT / "digitized_curves" / SPOILED))).estimate
    assert first.space.names == second.space.names
    assert first.coordinates.tobytes() == second.coordinates.tobytes()
    assert first.covariance.tobytes() == second.covariance.tobytes()


# VGS(th) at 25 degC, read off its curve over the junction temperature


def with_threshold_curve(change):
    part = read_part(ROOT / "digitized_curves" / "cargo_80v")
    (old,) = part.curves_of(Quantity.VGS_TH_TEMPERATURE)
    x, y = change(old.x.copy(), old.y.copy())
    new = replace(old, x=x, y=y, lines=np.arange(x.size) + 2)
    return replace(part, curves=tuple(new if c is old else c for c in part.curves))


def read_thresholds(part):
    return [(b.stated, b.sigma) for b in observations.channel_blocks(part) if b.name == "vgs_th(Tj) (read)"]


def test_threshold_at_25_degrees_is_read_off_its_curve():
    part = with_threshold_curve(lambda t_j, v: (t_j, 2.9 - 0.007 * (t_j - 25.0)))
    ((stated, sigma),) = read_thresholds(part)
    assert stated == pytest.approx(2.9, abs=1e-12)
    (curve,) = part.curves_of(Quantity.VGS_TH_TEMPERATURE)
    along_x, along_y = 0.007 * curve.x_axis.length, curve.y_axis.length
    assert sigma == pytest.approx(np.hypot(curve.point_error, curve.axis_error) * np.hypot(along_x, along_y))


def test_a_mis_clicked_point_near_25_degrees_hardly_moves_what_is_read():
    def slipped(t_j, v):
        v[np.argmin(np.abs(t_j - 25.0))] *= 10.0
        return t_j, v

    ((stated, sigma),) = read_thresholds(with_threshold_curve(lambda t_j, v: (t_j, v)))
    ((moved, _),) = read_thresholds(with_threshold_curve(slipped))
    assert abs(moved - stated) < sigma


def test_a_curve_that_begins_above_25_degrees_tells_nothing_there():
    assert read_thresholds(with_threshold_curve(lambda t_j, v: (t_j[t_j > 30.0], v[t_j > 30.0]))) == []


def test_the_fitted_threshold_follows_its_curve(fitted):
    model = fitted("ferry_charger_1200v")
    (curve,) = model.part.curves_of(Quantity.VGS_TH_TEMPERATURE)
    near = float(np.interp(25.0, curve.x, curve.y))
    ((_, sigma),) = read_thresholds(model.part)
    assert threshold_voltage(curve.i_d, model.transistor().channel) == pytest.approx(near, abs=2.0 * sigma)
