"""The rules of the inspection: each is silent on an invented part's clean data and speaks where they are made wrong."""

import dataclasses
from dataclasses import replace

import device_scenarios
import numpy as np
import pytest
from conftest import DEMO_PARTS
from digitization import write_part_folder
from test_inspection_mutations import demo_part, with_curves

from fitter.inspection import Finding, inspect
from fitter.inspection.finding import ratio
from fitter.inspection.rules import comparisons
from fitter.inspection.transforms import exchange_curves, mirror, redivide, relabel, scale, scale_axis, scale_points
from fitter.part import Quantity, Stated
from fitter.reader import read_part


def named(part, name):
    return next(c for c in part.curves if c.name == name)


def scaled(name, along, factor, change=scale_points):
    return lambda part: with_curves(part, change(named(part, name), along, factor))


def shaped(name, change):
    """Replaces the curve's y by a function of x and y, each as a share of its largest."""

    def changed(part):
        curve = named(part, name)
        x, y = curve.x / curve.x.max(), curve.y / curve.y.max()
        return with_curves(part, replace(curve, y=change(x, y) * curve.y.max()))

    return changed


def only(name, keep):
    """Keeps the points for which a function of x and y, each as a share of its largest, is true."""

    def changed(part):
        curve = named(part, name)
        kept = keep(curve.x / curve.x.max(), curve.y / curve.y.max())
        return with_curves(part, replace(curve, x=curve.x[kept], y=curve.y[kept], lines=curve.lines[kept]))

    return changed


def exchanged(first, second):
    return lambda part: with_curves(part, *exchange_curves(named(part, first), named(part, second)))


def other_division(name, along):
    return lambda part: with_curves(part, redivide(named(part, name), along))


def declared(name, along):
    """Only the axis' scale is entered wrong."""
    return lambda part: with_curves(part, relabel(named(part, name), along))


def stated(group, **values):
    """Other table values; a number stands for a typical one, a condition stays a number."""

    def changed(part):
        old = getattr(part.stated, group)
        conditions = {f.name for f in dataclasses.fields(old) if isinstance(getattr(old, f.name), float)}
        new = {k: v if k in conditions or isinstance(v, Stated) else Stated(typ=v) for k, v in values.items()}
        return replace(part, stated=replace(part.stated, **{group: replace(old, **new)}))

    return changed


def contradictions(part):
    """Rule and first curve of every contradiction, whatever explains it."""
    return {(c.rule, c.curve.name) for curve in part.curves for c in comparisons(part, curve) if c.contradicts}


#: Rule, the curve it is about, the demo part, what is made wrong.
COMPARED = [
    ("outside x axis", "coss", "cargo_80v", scaled("coss", "x", 10.0)),
    ("outside y axis", "coss", "cargo_80v", scaled("coss", "y", 1000.0)),
    ("one corner along x", "ciss", "cargo_80v", only("ciss", lambda x, y: x < 0.1)),
    ("one corner along y", "gate charge", "cargo_80v", scaled("gate charge", "y", 0.1)),
    ("ends early", "output 5 V", "cargo_80v", only("output 5 V", lambda x, y: x < 0.2)),
    ("another x axis", "output 5 V", "cargo_80v", scaled("output 5 V", "x", 10.0, scale)),
    ("another y axis", "transfer 150 C", "wall_box_650v", scaled("transfer 150 C", "y", 0.1, scale_axis)),
    ("another y division", "crss", "wall_box_650v", other_division("crss", "y")),
    ("off table", "crss", "wall_box_650v", scaled("crss", "y", 2.0)),
    ("off table", "coss", "camper_van_p40v", stated("capacitance", c_oss=300e-12)),
    ("reach", "ciss", "cargo_80v", only("ciss", lambda x, y: x < 0.2)),
    ("beyond rating", "ciss", "cargo_80v", scaled("ciss", "x", 10.0, scale)),
    ("beyond rating", "output 5 V", "cargo_80v", scaled("output 5 V", "x", 1000.0, scale)),
    ("definition", "coss", "ferry_charger_1200v", scaled("coss", "y", 0.01)),
    ("rising", "ciss", "ferry_charger_1200v", shaped("ciss", lambda x, y: y * (1.0 + (x > 0.9)))),
    ("Qoss", "coss", "cargo_80v", stated("output_charge", q_oss=30e-9)),
    ("Eoss", "coss", "cargo_80v", stated("output_charge", e_oss=5e-6)),
    ("monotone", "transfer 25 C", "cargo_80v", shaped("transfer 25 C", lambda x, y: y * (1.0 - 0.7 * (x > 0.98)))),
    ("monotone", "gate charge", "cargo_80v", shaped("gate charge", lambda x, y: np.where(x > 0.9, 0.5, y))),
    ("threshold", "transfer 25 C", "wall_box_650v", stated("threshold", v_gs_th=12.0)),
    ("threshold", "transfer 25 C", "ferry_charger_1200v", scaled("transfer 25 C", "x", 0.1)),
    ("current at plateau", "transfer 25 C", "cargo_80v", scaled("transfer 25 C", "y", 10.0)),
    ("transconductance", "transfer 25 C", "cargo_80v", stated("transconductance", g_fs=10.0)),
    ("on resistance", "transfer 25 C", "cargo_80v", stated("on_resistance", r_ds_on=3.2e-6)),
    ("on resistance", "transfer 25 C", "cargo_80v", stated("on_resistance", r_ds_on=3.2)),
    ("on resistance", "output 10 V", "camper_van_p40v", scaled("output 10 V", "y", 0.5)),
    ("currents", "transfer 25 C", "cargo_80v", scaled("transfer 25 C", "y", 0.1)),
    ("currents", "output 10 V", "cargo_80v", scaled("output 10 V", "y", 1000.0)),
    ("currents", "body diode 25 C", "cargo_80v", scaled("body diode 25 C", "y", 10.0)),
    ("gate rating", "transfer 150 C", "cargo_80v", scaled("transfer 150 C", "x", 10.0)),
    ("same gain", "transfer 150 C", "wall_box_650v", scaled("transfer 150 C", "y", 10.0)),
    ("hot and cold", "transfer 150 C", "wall_box_650v", exchanged("transfer 25 C", "transfer 150 C")),
    (
        "crossing",
        "transfer 150 C",
        "cargo_80v",
        shaped("transfer 150 C", lambda x, y: y * np.where(x > 0.95, 3.0, np.where(x > 0.8, 0.5, 1.0))),
    ),
    ("order", "output 6 V", "cargo_80v", exchanged("output 5 V", "output 6 V")),
    ("conductance", "output 10 V", "cargo_80v", scaled("output 10 V", "x", 0.1, scale)),
    ("transfer and output", "output 4.5 V", "cargo_80v", scaled("output 4.5 V", "y", 5.0)),
    ("start", "gate charge", "cargo_80v", shaped("gate charge", lambda x, y: np.maximum(2.0 * y - 1.0, 0.0))),
    ("total", "gate charge", "ferry_charger_1200v", stated("gate_charge", q_g=30e-9)),
    ("end", "gate charge", "cargo_80v", scaled("gate charge", "y", 10.0)),
    ("plateau", "gate charge", "cargo_80v", stated("gate_charge", v_plateau=7.0)),
    ("plateau and transfer", "gate charge", "cargo_80v", scaled("transfer 25 C", "x", 2.0)),
    ("first leg", "gate charge", "cargo_80v", scaled("gate charge", "x", 2.0)),
    ("forward voltage", "body diode 25 C", "cargo_80v", stated("body_diode", v_sd=1.3)),
    ("forward current", "body diode 25 C", "cargo_80v", stated("body_diode", v_sd=0.6)),
    ("junction voltage", "body diode 150 C", "cargo_80v", scaled("body diode 150 C", "x", 100.0)),
    ("drift", "body diode 150 C", "cargo_80v", exchanged("body diode 25 C", "body diode 150 C")),
    ("junction law", "body diode 25 C", "cargo_80v", shaped("body diode 25 C", lambda x, y: y**3)),
    ("range", "transfer 25 C", "cargo_80v", shaped("transfer 25 C", lambda x, y: 0.6 + 0.4 * y)),
    ("range", "crss", "wall_box_650v", shaped("crss", lambda x, y: 0.9 + 0.1 * y)),
    ("spread along x", "crss", "wall_box_650v", declared("crss", "x")),
    ("spread along y", "body diode 25 C", "camper_van_p40v", declared("body diode 25 C", "y")),
    ("temperatures", "rds_on(Tj)", "cargo_80v", scaled("rds_on(Tj)", "x", 10.0)),
    ("at 25 C", "rds_on(Tj)", "cargo_80v", scaled("rds_on(Tj)", "y", 1.3)),
    ("at 25 C", "rds_on(Tj)", "ferry_charger_1200v", scaled("rds_on(Tj)", "y", 10.0)),
    ("at 25 C", "vgs_th(Tj)", "cargo_80v", stated("threshold", v_gs_th=1.5)),
    ("resistance rise", "rds_on(Tj)", "cargo_80v", shaped("rds_on(Tj)", lambda x, y: y[::-1])),
    ("threshold drift", "vgs_th(Tj)", "cargo_80v", shaped("vgs_th(Tj)", lambda x, y: y[::-1])),
]  # fmt: skip


@pytest.mark.parametrize(("rule", "curve", "demo_name", "wrong"), COMPARED)
def test_comparison(rule, curve, demo_name, wrong):
    part = demo_part(demo_name)
    assert (rule, curve) not in contradictions(part)
    assert (rule, curve) in contradictions(wrong(part))


def misclick(part):
    curve = named(part, "ciss")
    y = curve.y.copy()
    y[10] *= 10.0
    return with_curves(part, replace(curve, y=y))


#: Rule, topic, what is made wrong in the 80 V part.
FOUND = [
    ("order", "stated.threshold.vgs_th", stated("threshold", v_gs_th=Stated(min=3.0, typ=2.9))),
    ("charge sum", "qg", stated("gate_charge", q_gs=60e-9)),
    ("plateau", "v_plateau", stated("gate_charge", v_plateau=11.0)),
    ("plateau above threshold", "v_plateau", stated("gate_charge", v_plateau=2.8)),
    ("crss below qgd", "qgd", stated("gate_charge", q_gd=0.5e-9)),
    ("first leg", "qgs", stated("gate_charge", q_gs=1.83e-9)),
    ("co order", "coss_er, coss_tr", stated("output_charge", c_oss_er=2790e-12, c_oss_tr=2040e-12)),
    ("co order", "coss_er, coss", stated("output_charge", c_oss_er=500e-12)),
    ("co definition", "qoss", stated("output_charge", q_oss=50e-9)),
    ("co definition", "eoss", stated("output_charge", e_oss=0.5e-6)),
    ("rating", "stated.gate_charge vdd", stated("gate_charge", v_dd=100.0)),
    ("rating", "part.vds_max_V", lambda part: replace(part, v_ds_max=800.0)),
    ("rating", "part.vds_max_V", lambda part: replace(part, v_ds_max=8.0)),
    ("rating", "part.vgs_max_V", lambda part: replace(part, v_gs_max=200.0)),
    ("rating", "part.vgs_max_V", lambda part: replace(part, v_gs_max=2.0)),
    ("stated current", "stated.on_resistance.id", stated("on_resistance", i_d=500.0)),
    ("supply", "stated.gate_charge vdd", stated("gate_charge", v_dd=4.0)),
    ("gate-charge test", "gate charge, stated.gate_charge", stated("gate_charge", v_dd=6.0)),
    ("drive", "stated.on_resistance vgs", stated("on_resistance", v_gs=1.0)),
    ("threshold current", "stated.threshold id", stated("threshold", i_d=25.0)),
    ("level", "ciss", shaped("ciss", lambda x, y: np.full_like(y, 0.5))),
    ("level", "body diode 25 C", shaped("body diode 25 C", lambda x, y: np.full_like(y, 0.5))),
    ("few points", "transfer 25 C", only("transfer 25 C", lambda x, y: np.arange(x.size) % 6 == 0)),
    ("gap", "coss", only("coss", lambda x, y: (y > 0.6) | (y < 0.1))),
    ("mis-click", "ciss", misclick),
]


@pytest.mark.parametrize(("rule", "topic", "wrong"), FOUND)
def test_finding(rule, topic, wrong):
    part = demo_part("cargo_80v")
    assert (rule, topic) not in {(f.rule, f.topic) for f in inspect(part)}
    found = [f for f in inspect(wrong(part)) if (f.rule, f.topic) == (rule, topic)]
    assert [f.severity for f in found] == ["doubtful"]


def test_misclick_names_its_line_and_the_decade():
    part = demo_part("cargo_80v")
    (found,) = (f for f in inspect(misclick(part)) if f.rule == "mis-click")
    assert found.line == named(part, "ciss").lines[10]
    assert "divide its y by 10" in found.remedy


@pytest.mark.parametrize(
    ("name", "at", "along", "factor", "remedy"),
    [
        ("coss", 15, "y", 10.0, "divide its y by 10"),
        ("transfer 25 C", 15, "y", 0.1, "multiply its y by 10"),
        ("gate charge", 20, "y", 0.1, "multiply its y by 10"),
        ("ciss", 30, "y", 0.01, "multiply its y by 100"),
    ],
)
def test_a_decade_slip_of_one_click_is_one_finding(name, at, along, factor, remedy):
    """What the point spoils besides, such as the order of a curve or its straight line, is not reported again."""
    part = demo_part("cargo_80v")
    curve = named(part, name)
    values = getattr(curve, along).copy()
    values[at] *= factor
    (found,) = inspect(with_curves(part, replace(curve, **{along: values})))
    assert (found.rule, found.line) == ("mis-click", curve.lines[at])
    assert remedy in found.remedy


def test_a_decade_slip_along_x_names_x():
    part = demo_part("wall_box_650v")
    curve = named(part, "coss")
    x = curve.x.copy()
    x[15] *= 10.0
    order = np.argsort(x, kind="stable")
    wrong = replace(curve, x=x[order], y=curve.y[order], lines=curve.lines[order])
    (found,) = (f for f in inspect(with_curves(part, wrong)) if f.severity != "note")
    assert (found.rule, found.line) == ("mis-click", curve.lines[15])
    assert "divide its x by 10" in found.remedy


def test_rows_of_the_table_in_each_others_places():
    values = demo_part("cargo_80v").stated.capacitance
    part = stated("capacitance", c_iss=values.c_rss, c_rss=values.c_iss)(demo_part("cargo_80v"))
    (found,) = inspect(part)
    assert found.rule == "table exchange"
    assert "exchange stated.capacitance.ciss and stated.capacitance.crss" in found.remedy


def test_a_table_slip_is_not_reported_by_every_rule_that_it_breaks():
    """Ten times the threshold lies above the plateau and the gate drive, too."""
    (found,) = inspect(stated("threshold", v_gs_th=29.0)(demo_part("cargo_80v")))
    assert "divide stated.threshold.vgs_th by 10" in found.remedy


def test_exchanged_effective_capacitances_are_one_finding():
    part = stated("output_charge", c_oss_er=2790e-12, c_oss_tr=2040e-12)(demo_part("cargo_80v"))
    (found,) = inspect(part)
    assert "exchange coss_er_pF and coss_tr_pF" in found.remedy


@pytest.mark.parametrize("name", ["cargo_80v", "wall_box_650v"])
def test_exchanged_gate_charges_are_named(name):
    part = demo_part(name)
    table = part.stated.gate_charge
    exchanged = stated("gate_charge", q_gs=table.q_gd, q_gd=table.q_gs)(part)
    (found,) = [f for f in inspect(exchanged) if f.rule == "charges exchanged"]
    assert (found.severity, found.topic, found.remedy) == ("doubtful", "qgs, qgd", "exchange qgs_nC and qgd_nC")


def test_a_charge_with_its_point_in_the_wrong_place():
    found = [f for f in inspect(stated("gate_charge", q_gd=147e-9)(demo_part("cargo_80v"))) if f.rule == "charge sum"]
    assert ["QGD = 14.7 nC or QG = 680 nC would fit" in f.remedy for f in found] == [True]


@pytest.mark.parametrize("name", DEMO_PARTS)
def test_demo_parts_are_in_order(name):
    assert [str(f) for f in inspect(demo_part(name)) if f.severity != "note"] == []


def test_rise_of_crss_is_only_a_note():
    (found,) = inspect(demo_part("wall_box_650v"))
    assert (found.rule, found.severity, found.topic) == ("rising", "note", "crss")


@pytest.mark.parametrize("scenario", device_scenarios.ALL)
def test_clean_folders_are_in_order(scenario, tmp_path):
    for seed in range(6):
        part = read_part(write_part_folder(device_scenarios.ALL[scenario](), tmp_path / str(seed), seed))
        assert [str(f) for f in inspect(part) if f.severity != "note"] == [], seed


def test_findings_say_what_the_comparison_would_then_be():
    part = demo_part("cargo_80v")
    (found,) = inspect(scaled("coss", "y", 1000.0, scale)(part))
    assert (found.rule, found.severity, found.topic, found.file) == ("slip", "stop", "coss", "coss.csv")
    assert found.line is not None
    assert "divide the y values by 1000" in found.remedy
    assert "the column should be coss_fF" not in found.remedy
    wrong, right = found.found, found.remedy.partition("; then ")[2]
    assert "is 1.01e+03 times the stated Qoss" in wrong
    assert "is 1.01 times the stated Qoss" in right


def test_a_unit_slip_names_the_column():
    part = demo_part("cargo_80v")
    (found,) = inspect(scaled("ciss", "y", 1e-3, scale)(part))
    assert "the column should be ciss_nF, not ciss_pF" in found.remedy


@pytest.mark.parametrize(("factor", "remedy"), [(10.0, "divide vds_max_V by 10"), (0.01, "multiply vds_max_V by 100")])
def test_no_curve_is_blamed_for_a_rating(factor, remedy):
    for name in DEMO_PARTS:
        part = demo_part(name)
        (found,) = (f for f in inspect(replace(part, v_ds_max=factor * part.v_ds_max)) if f.severity != "note")
        assert found.topic == "part.vds_max_V"
        assert remedy in found.remedy


@pytest.mark.parametrize("name", ["coss", "crss", "transfer 25 C"])
def test_a_constant_that_the_fit_needs_stops_it(name):
    part = shaped(name, lambda x, y: np.full_like(y, 0.5))(demo_part("cargo_80v"))
    (found,) = (f for f in inspect(part) if f.severity != "note")
    assert (found.rule, found.severity, found.topic) == ("level", "stop", name)
    assert "the same at all" in found.found


def with_conditions_of(part, name, other):
    """A curve entered with the conditions of another one of its quantity."""
    same = named(part, other)
    return with_curves(part, replace(named(part, name), t_j=same.t_j, v_gs=same.v_gs, v_ds=same.v_ds))


@pytest.mark.parametrize(
    ("demo_name", "name", "other", "key"),
    [
        ("cargo_80v", "transfer 150 C", "transfer 25 C", "tj_C"),
        ("wall_box_650v", "transfer 150 C", "transfer 25 C", "tj_C"),
        ("cargo_80v", "output 5 V", "output 6 V", "vgs_V"),
        ("ferry_charger_1200v", "output 18 V", "output 7 V", "vgs_V"),
        ("camper_van_p40v", "body diode 150 C", "body diode 25 C", "tj_C"),
    ],
)
def test_two_curves_with_the_same_conditions(demo_name, name, other, key):
    part = with_conditions_of(demo_part(demo_name), name, other)
    (found,) = (f for f in inspect(part) if f.severity != "note")
    assert (found.rule, found.severity, found.file) == ("same conditions", "doubtful", "part.toml")
    assert set(found.topic.split(", ")) == {name, other}
    assert f"mend {key}" in found.remedy
    assert named(part, name).file in found.remedy


def test_one_curve_clicked_twice_is_a_note(tmp_path):
    first, second = (read_part(write_part_folder(device_scenarios.shielded_80v(), tmp_path / s, int(s))) for s in "34")
    again = replace(named(second, "transfer 25 C"), name="transfer 25 C (2)")
    (found,) = inspect(replace(first, curves=(*first.curves, again)))
    assert (found.rule, found.severity) == ("same conditions", "note")


@pytest.mark.parametrize(("name", "other"), [("transfer 150 C", "transfer 25 C"), ("crss", "coss"), ("ciss", "coss")])
def test_points_of_another_curve(name, other):
    part = demo_part("cargo_80v")
    source = named(part, other)
    copied = replace(named(part, name), x=source.x, y=source.y, lines=source.lines)
    (found,) = (f for f in inspect(with_curves(part, copied)) if f.severity != "note")
    assert (found.rule, found.severity) == ("same points", "doubtful")
    assert set(found.topic.split(", ")) == {name, other}


def test_either_axis_may_be_the_reversed_one():
    part = demo_part("cargo_80v")
    (found,) = inspect(with_curves(part, mirror(named(part, "body diode 150 C"), "x")))
    assert "its x axis was calibrated from the wrong end" in found.remedy
    assert "or its y axis was calibrated from the wrong end" in found.remedy or found.remedy.startswith("its y axis")


def test_a_condition_that_is_off_is_named_beside_the_curves():
    """A tenth of the VDS at which the capacitances are stated, or ten times that of all their points."""
    (found,) = inspect(stated("capacitance", v_ds=4.0)(demo_part("cargo_80v")))
    assert "divide the x values by 10" in found.remedy
    assert "multiply stated.capacitance.vds by 10" in found.remedy


def test_output_charges_at_another_voltage():
    part = demo_part("cargo_80v")
    (found,) = inspect(stated("output_charge", v_ds=4.0)(part))
    assert "multiply stated.output_charge.vds by 10" in found.remedy
    found = [f for f in inspect(stated("output_charge", v_ds=20.0)(part)) if f.rule == "co definition"]
    assert [f.topic for f in found] == ["qoss", "eoss"]
    assert all("40.1 V would fit all four" in f.remedy for f in found)


def test_two_slips_are_both_named():
    part = scaled("coss", "y", 10.0, scale)(demo_part("cargo_80v"))
    part = scaled("gate charge", "x", 1000.0, scale)(part)
    assert {(f.rule, f.topic) for f in inspect(part) if f.severity != "note"} == {
        ("slip", "coss"),
        ("slip", "gate charge"),
    }


def test_what_data_cannot_tell_apart_is_said_both_ways():
    """Ten times the table's Crss may be the table's slip or the curve's."""
    part = stated("capacitance", c_rss=220e-12)(demo_part("cargo_80v"))
    remedies = [f.remedy for f in inspect(part) if "crss" in f.topic]
    assert any("multiply the y values by 10" in r and "divide stated.capacitance.crss by 10" in r for r in remedies)


def test_axes_of_another_figure_alone_never_stop():
    """A flat Ciss with its VDS a tenth: nothing but its sisters' axes speaks against it."""
    part = scaled("ciss", "x", 0.1, scale)(demo_part("ferry_charger_1200v"))
    part = replace(part, stated=replace(part.stated, capacitance=None))
    (found,) = (f for f in inspect(part) if f.topic == "ciss")
    assert found.severity == "doubtful"
    assert "multiply the x values by 10" in found.remedy
    assert "unless the curves are from two figures" in found.remedy


def test_a_factor_of_two_has_causes_of_its_own():
    part = scaled("crss", "y", 2.0)(demo_part("cargo_80v"))
    (found,) = (f for f in inspect(part) if f.rule == "off table")
    assert found.severity == "doubtful"
    assert "factor of two" in found.remedy


def without(part, *, axes=False, table=False, quantities=()):
    """The part with less in it."""
    curves = [c for c in part.curves if c.quantity not in quantities]
    if axes:
        curves = [
            replace(c, x_axis=replace(c.x_axis, printed=False), y_axis=replace(c.y_axis, printed=False)) for c in curves
        ]
    groups = {f.name: None for f in dataclasses.fields(part.stated)} if table else {}
    return replace(part, curves=tuple(curves), stated=replace(part.stated, **groups))


@pytest.mark.parametrize("name", DEMO_PARTS)
@pytest.mark.parametrize("less", [{"axes": True}, {"table": True}, *({"quantities": (q,)} for q in Quantity)], ids=str)
def test_parts_with_less_in_them_are_in_order_too(name, less):
    assert [str(f) for f in inspect(without(demo_part(name), **less)) if f.severity != "note"] == []


def odd_points(kind, n):
    generator = np.random.default_rng([n, 7])
    x = np.sort(generator.uniform(-1.0, 3.0, n)) if kind == "random" else np.full(n, 1.0)
    y = {"random": generator.normal(0.0, 1.0, n), "level": np.ones(n), "zero": np.zeros(n), "below": -np.ones(n)}[kind]
    return x, y


@pytest.mark.parametrize("kind", ["random", "level", "zero", "below"])
@pytest.mark.parametrize("n", [1, 3, 12])
def test_odd_points_are_judged_without_a_crash(kind, n):
    """Whatever the reader lets pass: the inspection says something, or nothing, but does not fail."""
    part = demo_part("cargo_80v")
    x, y = odd_points(kind, n)
    for curve in {c.quantity: c for c in part.curves}.values():
        odd = replace(curve, x=x * curve.x.max(), y=y * curve.y.max(), lines=np.arange(2, n + 2))
        found = inspect(with_curves(part, odd))
        assert any(curve.name in f.topic.split(", ") for f in found), curve.name
        assert all(isinstance(f, Finding) and "nan" not in f.remedy for f in found)


def test_ratio_counts_in_limits():
    assert ratio(3.0, 0.5, 3.0) == pytest.approx(1.0)
    assert ratio(9.0, 0.5, 3.0) == pytest.approx(2.0)
    assert ratio(0.25, 0.5, 3.0) == pytest.approx(2.0)
    assert ratio(-1.0, 0.5, 3.0) > 1.0


def test_names_of_the_rules_under_test_are_all_there_are():
    """No rule without a test: every rule that speaks on some mutated part is in the table above."""
    spoken = {rule for rule, *_ in COMPARED}
    for _, _, name, wrong in COMPARED:
        spoken |= {rule for rule, _ in contradictions(wrong(demo_part(name)))}
    tested = {rule for rule, *_ in COMPARED}
    assert {rule.replace(" x ", " y ") for rule in spoken} == {rule.replace(" x ", " y ") for rule in tested}


def test_temperatures_in_kelvin_stop_the_fit(fitted):
    part = fitted("cargo_80v").part
    hot = tuple(replace(c, x=c.x + 273.15) if c.name == "rds_on(Tj)" else c for c in part.curves)
    found = [f for f in inspect(replace(part, curves=hot)) if f.severity == "stop"]
    assert [f.topic for f in found] == ["rds_on(Tj)"]
    assert "subtract 273.15" in found[0].remedy


def test_ratio_in_a_column_of_ohms_stops_the_fit(fitted):
    part = fitted("cargo_80v").part
    curve = next(c for c in part.curves if c.name == "rds_on(Tj)")
    assert not curve.y_unit
    renamed = replace(curve, y=curve.y * 1e-3, y_unit="ohm", y_column="rds_on_mohm")
    curves = tuple(renamed if c is curve else c for c in part.curves)
    found = [f for f in inspect(replace(part, curves=curves)) if f.severity == "stop"]
    assert any("rds_on_ratio" in f.remedy for f in found)


ODD = (0.0, -1.0, np.nan, np.inf, 1e300, 1e-300)


def odd_curves(curve):
    for value in ODD:
        yield replace(curve, x=np.full_like(curve.x, value))
        yield replace(curve, y=np.full_like(curve.y, value))
        yield replace(curve, y=np.where(np.arange(curve.y.size) == 3, value, curve.y))
        yield replace(curve, axis_error=value)
    yield replace(curve, x=curve.x[:0], y=curve.y[:0], lines=curve.lines[:0])
    yield replace(curve, x_axis=replace(curve.x_axis, end=curve.x_axis.start))


@pytest.mark.parametrize(
    "name", ["coss", "transfer 25 C", "output 5 V", "gate charge", "body diode 25 C", "rds_on(Tj)"]
)
def test_parts_made_by_hand_are_judged_without_a_crash(name):
    part = demo_part("cargo_80v")
    for odd in odd_curves(named(part, name)):
        assert all(isinstance(f, Finding) for f in inspect(with_curves(part, odd)))


@pytest.mark.parametrize("group", [f.name for f in dataclasses.fields(demo_part("cargo_80v").stated)])
def test_tables_made_by_hand_are_judged_without_a_crash(group):
    part = demo_part("cargo_80v")
    values = getattr(part.stated, group)
    for field in dataclasses.fields(values):
        old = getattr(values, field.name)
        for value in ODD if isinstance(old, float | Stated) else ():
            new = replace(values, **{field.name: Stated(typ=value) if isinstance(old, Stated) else value})
            found = inspect(replace(part, stated=replace(part.stated, **{group: new})))
            assert all(isinstance(f, Finding) for f in found)


def test_what_no_rule_can_work_with_stops_the_fit():
    part = demo_part("cargo_80v")
    empty = replace(named(part, "coss"), x=np.array([]), y=np.array([]), lines=np.array([], dtype=np.int64))
    (found,) = (f for f in inspect(with_curves(part, empty)) if f.severity != "note")
    assert (found.rule, found.severity, found.topic) == ("soundness", "stop", "coss")
    (found,) = inspect(replace(part, v_ds_max=0.0))
    assert (found.rule, found.topic) == ("soundness", "part.vds_max_V")
