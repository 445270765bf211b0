"""Each group of data predicted from the others: on data of which the model is the truth, spoiled ones, and too few."""

from __future__ import annotations

import csv
import re
import shutil
import sys
from collections import Counter
from dataclasses import fields, replace

import numpy as np
import pytest
from conftest import ROOT
from redigitize import exact, inside, redigitize

from fitter import pipeline
from fitter.assembly import assemble
from fitter.cli import main
from fitter.comparison import compare
from fitter.fitting.fit import fit
from fitter.interface import Model
from fitter.leave_out import leave_out
from fitter.part import Quantity, Stated, StatedCapacitance, StatedValues
from fitter.writers.tables import left_out_frame

NAME = "camper_van_p40v"
SEED = 1
COLUMNS = [
    "left_out",
    "quantity",
    "unit",
    "condition",
    "given",
    "predicted",
    "predicted_low",
    "predicted_high",
    "deviation_percent",
    "sigmas",
]
GATE_CHARGE = ("qg", "qgs", "qgd", "v_plateau")
#: Table values by the comparison's name: group and field in `fitter.part`.
TABLE = {
    "ciss": ("capacitance", "c_iss"), "coss": ("capacitance", "c_oss"), "crss": ("capacitance", "c_rss"),
    "gfs": ("transconductance", "g_fs"), "qoss": ("output_charge", "q_oss"), "eoss": ("output_charge", "e_oss"),
    "coss_er": ("output_charge", "c_oss_er"), "coss_tr": ("output_charge", "c_oss_tr"),
    "vsd": ("body_diode", "v_sd"), "qrr": ("body_diode", "q_rr"), "trr": ("body_diode", "t_rr"),
    "qgs": ("gate_charge", "q_gs"),
}  # fmt: skip
#: What is left of a part where only its capacitances and its 25 C channel are wanted.
COLD = ("ciss", "coss", "crss", "transfer 25 C")


def state(part, quantity, value):
    """The part with one typical table value exchanged."""
    group, name = TABLE[quantity]
    table = replace(getattr(part.stated, group), **{name: Stated(typ=value)})
    return replace(part, stated=replace(part.stated, **{group: table}))


@pytest.fixture(scope="module")
def truth(fitted):
    return inside(fitted(NAME, use_gate_charge=True).estimate.values)


@pytest.fixture(scope="module")
def self_made(fitted, truth):
    """``self_made(seed)``: a part all of whose curves and table values come from the model."""

    def make(seed):
        part = redigitize(fitted(NAME, use_gate_charge=True).part, truth, seed)
        rng = np.random.default_rng(1000 + seed)
        for check in compare(part, exact(truth), (), False):
            if check.quantity in TABLE and check.quantity != "qgs":
                part = state(part, check.quantity, check.fitted * (1.0 + 0.02 * rng.normal()))
        return part

    return make


def lean(part, *more, table=None):
    """Capacitances and the 25 C transfer curve, and whatever else is named."""
    curves = tuple(curve for curve in part.curves if curve.name in (*COLD, *more))
    return replace(part, curves=curves, stated=table or StatedValues())


@pytest.fixture(scope="module")
def whole(self_made):
    """Part, fit and predictions of a part with everything."""
    part = self_made(SEED)
    result = fit(part, use_gate_charge=True)
    return part, result, leave_out(part, result)


@pytest.fixture(scope="module")
def rows(whole):
    return whole[2]


def row_of(rows, left_out, quantity=None):
    (row,) = [r for r in rows if r.left_out == left_out and quantity in (None, r.quantity)]
    return row


def predicted(part, use_gate_charge=False):
    return leave_out(part, fit(part, use_gate_charge=use_gate_charge))


# Everything is left out


def test_each_curve_is_left_out_once(whole):
    part, _, rows = whole
    curves = [c.name for c in part.curves if c.quantity is not Quantity.GATE_CHARGE]
    counted = Counter(row.left_out for row in rows)
    assert {name: counted[name] for name in curves} == dict.fromkeys(curves, 1)


def test_each_table_value_that_the_fit_sees_or_could_check_is_left_out_once(whole):
    part, result, rows = whole
    stated = [c.quantity for c in compare(part, result.estimate, (), False)]
    # QRR is what the transit time was solved for.
    wanted = [f"{q} (table)" for q in stated if q not in (*GATE_CHARGE, "qrr")]
    counted = Counter(row.left_out for row in rows)
    assert {name: counted[name] for name in wanted} == dict.fromkeys(wanted, 1)


def test_the_gate_charge_is_left_out_as_a_whole(rows):
    assert [row.quantity for row in rows if row.left_out == "gate charge"] == list(GATE_CHARGE)


def test_nothing_else_is_left_out(whole):
    part, result, rows = whole
    curves = {c.name for c in part.curves if c.quantity is not Quantity.GATE_CHARGE}
    tables = {f"{c.quantity} (table)" for c in compare(part, result.estimate, (), False)}
    assert {row.left_out for row in rows} <= curves | tables | {"gate charge"}


def test_the_figure_of_a_curve_is_the_mean_of_its_points(whole):
    part, _, rows = whole
    (curve,) = part.curves_of(Quantity.COSS)
    row = row_of(rows, "coss")
    assert (row.condition, row.unit) == ("mean", "F")
    assert row.given == pytest.approx(np.exp(np.mean(np.log(curve.y))))


def test_the_figure_of_a_table_value_is_what_the_table_says(whole):
    part, _, rows = whole
    row = row_of(rows, "rds_on (table)")
    assert (row.given, row.unit) == (part.stated.on_resistance.r_ds_on.typ, "ohm")
    assert row.condition == "VGS -10 V, ID -30 A"


# On data of which the model is the truth


def test_nothing_of_the_models_own_stands_out(rows):
    far = {(row.left_out, row.quantity): row.sigmas for row in rows if row.sigmas is not None and abs(row.sigmas) >= 4}
    assert far == {}


def test_most_of_the_models_own_lies_within_two_sigmas(rows):
    sigmas = np.array([row.sigmas for row in rows if row.sigmas is not None])
    assert sigmas.size > 15
    assert np.mean(np.abs(sigmas) < 2.0) > 0.8


def test_a_parameter_that_is_driven_onto_its_bound_makes_no_prediction_sure(self_made):
    # Without RDS(on)(Tj) the hot transfer curve hardly tells rd_exponent, and the fit ends on one of its bounds.
    part = self_made(7)
    table = StatedValues(threshold=part.stated.threshold, on_resistance=part.stated.on_resistance)
    row = row_of(predicted(lean(part, "transfer 150 C", "rds_on(Tj)", table=table)), "rds_on(Tj)")
    assert row.sigmas is None or abs(row.sigmas) < 4.0


def test_predictions_lie_in_their_intervals(rows):
    known = [row for row in rows if row.predicted is not None]
    assert [row.left_out for row in known if not row.low <= row.predicted <= row.high] == []


def test_most_intervals_have_a_width(rows):
    known = [row for row in rows if row.predicted is not None]
    # The recovery follows from the table alone.
    assert [row.left_out for row in known if row.quantity != "trr" and not row.low < row.high] == []


# What is spoiled stands out


@pytest.fixture(scope="module")
def cold(whole):
    """The 25 C part of it, with the table's capacitances, threshold and on-resistance, and the gate charge."""
    part = whole[0]
    stated = part.stated
    table = StatedValues(
        capacitance=stated.capacitance, threshold=stated.threshold, on_resistance=stated.on_resistance,
        gate_charge=stated.gate_charge,
    )  # fmt: skip
    return lean(part, "output 4 V", table=table)


def scaled(part, name, factor):
    """The part with one curve's y multiplied."""
    return replace(part, curves=tuple(replace(c, y=c.y * factor) if c.name == name else c for c in part.curves))


@pytest.fixture(scope="module")
def cold_rows(cold):
    return predicted(cold)


@pytest.mark.parametrize("name", ["ciss", "transfer 25 C"])
def test_a_curve_that_is_right_does_not_stand_out(cold_rows, name):
    assert abs(row_of(cold_rows, name).sigmas) < 3.0


def test_a_curve_that_is_a_third_too_high_stands_out(cold):
    assert row_of(predicted(scaled(cold, "ciss", 1.3)), "ciss").sigmas > 3.0


def test_a_table_value_that_is_a_third_too_low_stands_out_to_the_other_side(cold):
    spoiled = state(lean(cold, table=cold.stated), "qgs", cold.stated.gate_charge.q_gs.typ / 1.3)
    assert row_of(predicted(spoiled), "gate charge", "qgs").sigmas < -3.0


# What the others do not tell


@pytest.fixture(scope="module")
def bare_model(whole):
    """Capacitances and one transfer and body-diode curve, nothing else."""
    part = lean(whole[0], "body diode 25 C")
    result = fit(part)
    return assemble(part, result, Model, leave_out(part, result))


@pytest.fixture(scope="module")
def bare(bare_model):
    return {row.left_out: row for row in bare_model.left_out}


@pytest.mark.parametrize("name", ["ciss", "coss", "transfer 25 C", "body diode 25 C"])
def test_what_the_others_do_not_tell_is_not_predicted(bare, name):
    row = bare[name]
    assert row.given > 0.0
    assert (row.predicted, row.low, row.high, row.sigmas) == (None, None, None, None)


def test_without_a_gate_charge_none_is_predicted(bare):
    assert "gate charge" not in bare


@pytest.fixture(scope="module", params=[1.0, 1.2])
def from_table(request, whole):
    """How far the stated Ciss is off, and the row of the left-out curve."""
    (curve,) = whole[0].curves_of(Quantity.CISS)
    v_ds = 0.5 * whole[0].v_ds_max
    c_iss = Stated(typ=request.param * float(np.interp(v_ds, curve.x, curve.y)))
    part = lean(whole[0], table=StatedValues(capacitance=StatedCapacitance(v_ds=v_ds, c_iss=c_iss)))
    return request.param, row_of(predicted(part), "ciss")


def test_the_table_stands_in_for_a_capacitance_curve_that_is_left_out(from_table):
    factor, row = from_table
    assert row.predicted == pytest.approx(factor * row.given, rel=0.05)


def test_a_prediction_from_the_table_is_as_sure_as_the_table(from_table):
    _, row = from_table
    # A table's capacitance has a standard error of 3 %.
    assert np.log(row.high / row.low) / (2 * 1.96) == pytest.approx(0.03, rel=0.3)


# The table


@pytest.fixture(scope="module")
def model(whole):
    part, result, rows = whole
    return assemble(part, result, Model, rows)


@pytest.fixture(scope="module")
def frame(model):
    return left_out_frame(model).set_index("left_out", drop=False)


def test_the_table_has_a_row_for_each_figure(frame, rows):
    assert list(frame.columns) == COLUMNS
    assert list(frame["left_out"]) == [row.left_out for row in rows]


@pytest.mark.parametrize(
    "name, unit, factor",
    [("coss", "pF", 1e12), ("rds_on (table)", "mohm", 1e3), ("output 4 V", "A", -1.0), ("vgs_th (table)", "V", -1.0)],
)
def test_figures_are_in_the_datasheets_units_and_signs(frame, rows, name, unit, factor):
    assert frame.loc[name, "unit"] == unit
    assert frame.loc[name, "given"] == pytest.approx(factor * row_of(rows, name).given)


def test_voltages_and_currents_of_a_p_channel_part_are_negative(frame):
    signed = frame[frame["unit"].isin(["V", "A"]) & ~frame["quantity"].isin(["body_diode"])]
    assert len(signed) > 8
    assert (signed["given"] < 0.0).all()
    assert (signed["predicted"].dropna() < 0.0).all()


def test_an_interval_runs_from_low_to_high_with_either_sign(frame):
    known = frame.dropna(subset=["predicted"])
    assert (known["predicted_low"] <= known["predicted"]).all()
    assert (known["predicted"] <= known["predicted_high"]).all()


def test_the_deviation_is_that_of_the_prediction_from_what_is_given(frame):
    known = frame.dropna(subset=["predicted"])
    off = 100.0 * (known["predicted"] / known["given"] - 1.0)
    np.testing.assert_allclose(known["deviation_percent"], off, rtol=1e-9, atol=1e-9)


def test_what_is_not_predicted_has_empty_cells(bare_model):
    table = left_out_frame(bare_model).set_index("left_out")
    assert (
        table.loc["ciss", ["predicted", "predicted_low", "predicted_high", "deviation_percent", "sigmas"]].isna().all()
    )


def test_the_record_holds_what_the_table_shows(rows):
    names = {f.name for f in fields(rows[0])}
    assert names == {"left_out", "quantity", "condition", "unit", "given", "predicted", "low", "high", "sigmas"}


# The command


def folder_with_little(target):
    """Capacitances, the 25 C transfer curve and the gate-charge table."""
    source = ROOT / "digitized_curves" / NAME
    head, *entries = re.split(r"(?=^\[\[curve\]\]|^\[stated)", (source / "part.toml").read_text("utf-8"), flags=re.M)
    wanted = r'"(ciss|coss|crss)"|transfer_25C|^\[stated\.gate_charge\]'
    target.mkdir()
    (target / "part.toml").write_text(head + "".join(e for e in entries if re.search(wanted, e)), "utf-8")
    for name in ("capacitance.csv", "transfer_25C.csv"):
        shutil.copy(source / name, target)
    return target


@pytest.fixture
def run(monkeypatch, capsys):
    monkeypatch.setattr(pipeline, "sheet_files", lambda model: {"sheet.png": b"drawn elsewhere"})

    def call(*arguments):
        monkeypatch.setattr(sys, "argv", ["fetwright", *map(str, arguments)])
        with pytest.raises(SystemExit) as stopped:
            main()
        said = capsys.readouterr()
        assert said.err == ""
        assert (stopped.value.code or 0) == 0
        return said.out

    return call


def test_the_file_comes_where_it_is_asked_for_and_goes_where_it_is_not(run, tmp_path):
    folder = folder_with_little(tmp_path / "part")
    file = folder / "model" / "left_out.csv"
    said = run("fit", folder, "--leave-out")
    header, *lines = csv.reader(file.read_text().splitlines())
    assert header == COLUMNS
    assert [line[0] for line in lines] == ["ciss", "coss", "crss", "transfer 25 C", *["gate charge"] * 4]
    assert "left_out.csv" in said
    assert re.search(r"^ *coss +coss .* not determined by the others", said, re.M)
    said = run("fit", folder)
    assert not file.exists()
    assert "left_out.csv" not in said
