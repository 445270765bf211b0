"""Stated against fitted: the verdicts, what the fit saw, and the leg of the gate charge that is off."""

from dataclasses import replace

import pytest

from fitter.comparison import Comparison, compare, explain_gate_charge, explain_recovery
from fitter.part import Stated, StatedBodyDiode, StatedCapacitance, StatedGateCharge, StatedValues

PART = "camper_van_p40v"


@pytest.fixture(scope="module")
def model(fitted):
    return fitted(PART)


@pytest.fixture(scope="module")
def ciss(model):
    """Ciss at 20 V with its 95 % interval, low and high."""
    (row,) = compared(model, capacitance=StatedCapacitance(v_ds=20.0, c_iss=Stated(typ=1.0)))
    return row


def compared(model, **stated):
    """The rows of a comparison of the model with made-up table values."""
    return compare(replace(model.part, stated=StatedValues(**stated)), model.estimate, (), False)


def against(model, stated):
    """The one row of made-up figures for Ciss at 20 V."""
    (row,) = compared(model, capacitance=StatedCapacitance(v_ds=20.0, c_iss=stated))
    return row


# Verdicts


def test_typical_value_inside_the_interval_agrees(model, ciss):
    assert against(model, Stated(typ=0.5 * (ciss.fitted + ciss.high))).verdict == "agrees"


@pytest.mark.parametrize("factor", [0.96, 1.04])
def test_typical_value_within_five_percent_agrees_outside_the_interval_too(model, ciss, factor):
    row = against(model, Stated(typ=ciss.fitted * factor))
    assert ciss.high < 1.04 * ciss.fitted  # the interval is the narrower of the two here
    assert row.verdict == "agrees"


@pytest.mark.parametrize("factor", [0.9, 1.1])
def test_typical_value_ten_percent_off_differs(model, ciss, factor):
    assert against(model, Stated(typ=ciss.fitted * factor)).verdict == "differs"


def test_typical_value_ten_percent_off_agrees_where_the_interval_holds_it(model):
    """The assumed on-state capacitance makes the predicted total charge uncertain."""
    predicted = model.gate_charge_intervals(-20.0, -30.0, -10.0)["qg"]
    assert predicted.high > 1.12 * predicted.value
    table = StatedGateCharge(v_dd=20.0, i_d=30.0, v_gs=10.0, q_g=Stated(typ=1.1 * predicted.value))
    (found,) = compared(model, gate_charge=table)
    assert found.verdict == "agrees"


def test_fitted_value_above_a_stated_max_is_outside_the_limit(model, ciss):
    assert against(model, Stated(max=0.999 * ciss.fitted)).verdict == "outside limit"


def test_fitted_value_below_a_stated_min_is_outside_the_limit(model, ciss):
    assert against(model, Stated(min=1.001 * ciss.fitted)).verdict == "outside limit"


def test_limit_counts_before_the_typical_value(model, ciss):
    assert against(model, Stated(typ=ciss.fitted, max=0.999 * ciss.fitted)).verdict == "outside limit"


def test_limits_alone_that_hold_are_no_typ(model, ciss):
    row = against(model, Stated(min=0.5 * ciss.fitted, max=2.0 * ciss.fitted))
    assert (row.verdict, row.deviation) == ("no typ", None)


def test_deviation_is_fitted_over_typical_less_one(model, ciss):
    assert against(model, Stated(typ=0.8 * ciss.fitted)).deviation == pytest.approx(0.25)


def test_operating_point_that_the_channel_does_not_reach_is_not_determined(model):
    table = StatedGateCharge(v_dd=20.0, i_d=30.0, v_gs=1.0, q_g=Stated(typ=5e-8), q_gd=Stated(max=1e-8))
    rows = compared(model, gate_charge=table)
    assert [(r.quantity, r.verdict) for r in rows] == [("qg", "not determined"), ("qgd", "not determined")]
    assert all((r.fitted, r.low, r.high, r.deviation) == (None, None, None, None) for r in rows)


def test_forward_voltage_without_a_body_diode_is_not_determined(model):
    names = ("is_d", "n_d", "r_dio", "eg_d", "rdio_exponent", "tt_d")
    space = model.estimate.space
    keep = [i for i, name in enumerate(space.names) if name not in names]
    bare = replace(
        model.estimate,
        space=replace(
            space,
            free=tuple(space.free[i] for i in keep),
            fixed={n: x for n, x in space.fixed.items() if n not in names},
        ),
        coordinates=model.estimate.coordinates[keep],
        covariance=model.estimate.covariance[keep][:, keep],
    )
    stated = StatedValues(body_diode=StatedBodyDiode(i_s=30.0, v_sd=Stated(typ=0.87)))
    (row,) = compare(replace(model.part, stated=stated), bare, (), False)
    assert (row.fitted, row.verdict) == (None, "not determined")


def test_nothing_stated_gives_no_rows(model):
    assert compared(model) == ()


def test_every_row_lies_inside_its_interval(fitted, demo):
    rows = [c for c in fitted(demo).checks if c.fitted is not None]
    assert len(rows) >= 16
    assert all(c.low <= c.fitted <= c.high for c in rows)


# What the fit saw

GATE_CHARGE = ("qg", "qgs", "qgd", "v_plateau")


def used(model):
    return {c.quantity for c in model.checks if c.used_in_fit}


def test_default_fit_keeps_the_gate_charge_as_a_check(model):
    assert used(model) == {"vgs_th", "rds_on", "qrr"}


def test_fit_of_the_gate_charge_marks_its_table_as_used(fitted):
    assert used(fitted(PART, True)) == {"vgs_th", "rds_on", "qrr", *GATE_CHARGE}


def test_capacitance_table_is_used_only_where_its_curve_is_missing(model):
    table = StatedCapacitance(v_ds=20.0, c_iss=Stated(typ=3e-9), c_oss=Stated(typ=5e-10))
    part = replace(model.part, stated=StatedValues(capacitance=table))
    rows = compare(part, model.estimate, ("ciss (table)", "coss"), False)
    assert {r.quantity: r.used_in_fit for r in rows} == {"ciss": True, "coss": False}


def test_limit_alone_is_never_used_in_a_fit(model):
    table = StatedCapacitance(v_ds=20.0, c_iss=Stated(max=4e-9))
    part = replace(model.part, stated=StatedValues(capacitance=table))
    (row,) = compare(part, model.estimate, ("ciss (table)",), False)
    assert not row.used_in_fit


# Where the gate charge is off


def row(quantity, typ, fitted, verdict="differs", **more):
    """A made-up row; charges in nC."""
    unit = {"trr": "s"}.get(quantity, "C")
    figures = {"stated": Stated(typ=typ), "fitted": fitted, "low": fitted, "high": fitted, "used_in_fit": False}
    return Comparison(**{"quantity": quantity, "unit": unit, "condition": "", "verdict": verdict, **figures, **more})


LEGS = {
    "before the plateau": ((60.0, 20.0, 10.0), (50.0, 10.0, 10.0), "Ciss times the plateau voltage"),
    "on the plateau": ((60.0, 10.0, 20.0), (50.0, 10.0, 10.0), "the integral of Crss"),
    "after the plateau": ((60.0, 10.0, 10.0), (50.0, 10.0, 10.0), "the on-state input capacitance"),
}


@pytest.mark.parametrize("leg", LEGS)
def test_gate_charge_that_is_off_is_explained_by_the_leg_that_is_off_most(leg):
    stated, fitted, meaning = LEGS[leg]
    (notice,) = explain_gate_charge([row(*each) for each in zip(("qg", "qgs", "qgd"), stated, fitted, strict=True)])
    assert notice.topic == "qg"
    assert notice.text.startswith(f"QG is off by -17 %, most of it {leg} (-17 % of QG): that leg is {meaning}")


def test_only_the_leg_after_the_plateau_points_to_fitting_the_gate_charge():
    texts = {
        leg: explain_gate_charge([row(*each) for each in zip(("qg", "qgs", "qgd"), *figures[:2], strict=True)])[0].text
        for leg, figures in LEGS.items()
    }
    assert [leg for leg, text in texts.items() if "--use-gate-charge" in text] == ["after the plateau"]


def test_leg_after_the_plateau_is_what_the_other_two_leave_of_the_total():
    (notice,) = explain_gate_charge([row("qg", 60.0, 50.0), row("qgs", 10.0, 10.0), row("qgd", 10.0, 16.0)])
    assert "most of it after the plateau (-27 % of QG)" in notice.text  # 24 nC for 40 nC, of 60 nC


def test_gate_charge_too_high_is_said_with_a_plus():
    (notice,) = explain_gate_charge([row("qg", 50.0, 60.0), row("qgs", 10.0, 10.0), row("qgd", 10.0, 21.0)])
    assert notice.text.startswith("QG is off by +20 %, most of it on the plateau (+22 % of QG)")


def test_without_stated_legs_the_leg_is_not_named():
    (notice,) = explain_gate_charge([row("qg", 60.0, 50.0)])
    assert notice.text == "QG is off by -17 %; with QGS and QGD stated, too, the leg could be named"


@pytest.mark.parametrize("quantity", ["qgs", "qgd"])
def test_one_stated_leg_alone_is_named_and_the_rest_is_not_guessed(quantity):
    (notice,) = explain_gate_charge([row("qg", 60.0, 50.0), row(quantity, 10.0, 12.0)])
    assert "after the plateau" not in notice.text
    assert {"qgs": "before the plateau", "qgd": "on the plateau"}[quantity] in notice.text


def test_gate_charge_that_agrees_needs_no_explanation():
    assert explain_gate_charge([row("qg", 50.0, 51.0, "agrees"), row("qgs", 10.0, 20.0)]) == ()


def test_gate_charge_without_a_typical_value_needs_no_explanation():
    limits = replace(row("qg", 50.0, 60.0), stated=Stated(max=55.0), verdict="outside limit")
    assert explain_gate_charge([limits, row("qgs", 10.0, 20.0)]) == ()


def test_silicon_carbide_part_is_explained_by_its_on_state_capacitance(fitted):
    (text,) = [n.text for n in fitted("ferry_charger_1200v").notices if n.topic == "qg"]
    assert "most of it after the plateau" in text


# Recovery


def test_recovery_that_one_transit_time_cannot_meet_names_what_is_off():
    rows = [row("qrr", 4.0, 4.0, "agrees", used_in_fit=True), row("trr", 40.0, 30.0)]
    (notice,) = explain_recovery(rows)
    assert notice.text.startswith(
        "one transit time cannot meet both: qrr is met, trr of the exported diode is off by -25 %"
    )


def test_recovery_that_is_met_needs_no_explanation():
    rows = [row("qrr", 4.0, 4.0, "agrees", used_in_fit=True), row("trr", 40.0, 39.0, "agrees")]
    assert explain_recovery(rows) == ()


def test_transit_time_is_solved_for_the_stated_charge(fitted, demo):
    rows = {c.quantity: c for c in fitted(demo).checks}
    assert rows["qrr"].used_in_fit
    assert rows["qrr"].fitted == pytest.approx(rows["qrr"].stated.typ)
    assert not rows["trr"].used_in_fit


# Output charge. Definitions of the effective output capacitances: Eoss = Co(er) V^2/2 and Qoss = Co(tr) V.


@pytest.fixture
def output(fitted, demo):
    """Fitted Qoss, Eoss, Co(er), Co(tr), and the voltage they belong to."""
    model = fitted(demo)
    rows = {c.quantity: c.fitted for c in model.checks}
    return model, rows, model.part.stated.output_charge.v_ds


def test_output_charge_is_the_time_related_capacitance_times_the_voltage(output):
    _, rows, v = output
    assert rows["qoss"] == pytest.approx(rows["coss_tr"] * v)


def test_output_energy_is_the_energy_related_capacitance_times_half_the_voltage_squared(output):
    _, rows, v = output
    assert rows["eoss"] == pytest.approx(rows["coss_er"] * v**2 / 2.0)


def test_effective_output_capacitances_stand_in_their_order(output):
    """Order (mathematics): Co(tr) >= Co(er) >= Coss(V) where Coss falls."""
    model, rows, v = output
    assert rows["coss_tr"] >= rows["coss_er"] >= float(model.coss(model.sign * v))


# Signs of a p-channel part


@pytest.mark.parametrize(
    "quantity, condition",
    [
        ("qg", "VDD -20 V, ID -30 A, VGS -10 V"),
        ("ciss", "VDS -20 V, VGS 0"),
        ("vgs_th", "ID -0.25 mA, VDS = VGS"),
        ("rds_on", "VGS -10 V, ID -30 A"),
        ("gfs", "VDS -10 V, ID -30 A"),
        ("qoss", "VDS 0 to -20 V"),
        ("vsd", "IS -30 A"),
        ("qrr", "IF -30 A, dI/dt 100 A/us"),
    ],
)
def test_conditions_of_a_p_channel_part_are_printed_with_its_signs(model, quantity, condition):
    assert {c.quantity: c.condition for c in model.checks}[quantity] == condition


def test_conditions_of_an_n_channel_part_have_no_signs(fitted):
    assert not [c.condition for c in fitted("cargo_80v").checks if "-" in c.condition]


def test_figures_of_a_p_channel_part_are_of_n_channel_polarity(model):
    assert all(c.fitted > 0.0 and c.stated.typ > 0.0 for c in model.checks if c.stated.typ is not None)


def test_resistive_load_is_named_in_the_condition(model):
    table = StatedGateCharge(v_dd=20.0, i_d=30.0, v_gs=10.0, load="resistive", q_g=Stated(typ=5e-8))
    (found,) = compared(model, gate_charge=table)
    assert found.condition == "VDD -20 V, ID -30 A, VGS -10 V, resistive load"
