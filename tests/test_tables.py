"""The tables: columns, units and signs as a datasheet prints them, against what was entered and what was fitted."""

from __future__ import annotations

import csv
import io
import json
import re
import tomllib
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from part_folders import TRANSFER, make_folder

from fitter import pipeline
from fitter.errors import ModelFileError, PartFolderError
from fitter.interface import Model
from fitter.part import Quantity, StatedGateCharge
from fitter.reader import read_part
from fitter.writers.model_file import model_from_text, model_text
from fitter.writers.tables import csv_text, gate_charge_frame

P_CHANNEL = "camper_van_p40v"

#: SI per unit, by hand.
SI = {"pF": 1e-12, "nC": 1e-9, "uJ": 1e-6, "V": 1.0, "A": 1.0, "S": 1.0, "mohm": 1e-3, "ns": 1e-9}
UNITS = {
    "qg": "nC", "qgs": "nC", "qgd": "nC", "v_plateau": "V", "ciss": "pF", "coss": "pF", "crss": "pF", "vgs_th": "V",
    "rds_on": "mohm", "gfs": "S", "qoss": "nC", "eoss": "uJ", "coss_er": "pF", "coss_tr": "pF", "vsd": "V",
    "qrr": "nC", "trr": "ns",
}  # fmt: skip
SIGNED = ("v_plateau", "vgs_th", "vsd")
COLUMNS = {
    "parameters.csv": "name,value,stderr,unit,origin",
    "checks.csv": (
        "quantity,unit,condition,stated_min,stated_typ,stated_max,fitted,fitted_low,fitted_high,deviation_percent,"
        "used_in_fit,verdict"
    ),
    "curves.csv": "curve,x,x_unit,y,y_unit,fitted,residual",
    "gate_charge.csv": "qg_nC,vgs_V,vds_V,id_A",
}


@pytest.fixture(autouse=True)
def no_sheet(monkeypatch):
    """No time is spent on drawing."""
    monkeypatch.setattr(pipeline, "sheet_files", lambda model: {})


def texts_of(model):
    return {name: data.decode() for name, data in pipeline.output_files(model).items() if name.endswith(".csv")}


def rows_of(text):
    return list(csv.DictReader(io.StringIO(text)))


def number(cell):
    return None if cell == "" else float(cell)


@pytest.fixture
def model(fitted, demo):
    return fitted(demo)


@pytest.fixture
def tables(fitted, demo):
    """The rows of each table of a demo part, by file name."""
    return {name: rows_of(text) for name, text in texts_of(fitted(demo)).items()}


@pytest.fixture
def entered(demo_folder):
    """The part file as it was typed."""
    return tomllib.loads((demo_folder / "part.toml").read_text("utf-8"))


def stated_values(entered):
    """What is stated, by quantity: the unit it was typed in, and what was typed."""
    found = {}
    for group, table in entered["stated"].items():
        for key, value in table.items():
            name, _, unit = key.rpartition("_")
            if name in UNITS and (group, name) != ("capacitance", "vds"):
                found[name] = (unit, value if isinstance(value, dict) else {"typ": value})
    return found


# Form


@pytest.mark.parametrize("name", COLUMNS)
def test_the_columns(fitted, name):
    assert texts_of(fitted("cargo_80v"))[name].splitlines()[0] == COLUMNS[name]


def test_every_row_is_as_long_as_the_header(model):
    for name, text in texts_of(model).items():
        header, *rows = csv.reader(io.StringIO(text))
        assert rows
        assert {len(row) for row in rows} == {len(header)}, name


def test_lines_end_as_on_every_system(model):
    for text in texts_of(model).values():
        assert text.endswith("\n")
        assert "\r" not in text


def test_no_cell_is_a_number_that_is_none(model):
    for text in texts_of(model).values():
        cells = {cell.lower() for row in csv.reader(io.StringIO(text)) for cell in row}
        assert not cells & {"nan", "inf", "-inf", "none"}


def test_numbers_have_ten_digits(fitted):
    frame = gate_charge_frame(fitted("cargo_80v").gate_charge(40.0, 50.0, 10.0))
    _, *rows = csv.reader(io.StringIO(csv_text(frame)))
    digits = [len(re.sub(r"e.*|[-.]", "", cell).lstrip("0")) for row in rows for cell in row]
    assert max(digits) == 10


def test_the_same_model_gives_the_same_tables(model):
    assert texts_of(model) == texts_of(model)


# parameters.csv


def test_parameters_are_those_of_the_model_in_si(model, tables):
    rows = tables["parameters.csv"]
    assert [row["name"] for row in rows] == list(model.parameters)
    for row in rows:
        p = model.parameters[row["name"]]
        assert float(row["value"]) == pytest.approx(p.value, rel=1e-9)
        assert number(row["stderr"]) == (None if p.stderr is None else pytest.approx(p.stderr, rel=1e-9))
        assert (row["unit"], row["origin"]) == (p.unit, p.origin)


def test_parameters_of_the_package_are_those_that_were_typed(entered, tables):
    rows = {row["name"]: row for row in tables["parameters.csv"]}
    for name, unit, si in (("r_g", "ohm", 1.0), ("l_g", "H", 1e-9), ("l_d", "H", 1e-9), ("l_s", "H", 1e-9)):
        typed = entered["package"][name.replace("_", "") + ("_ohm" if si == 1.0 else "_nH")]
        assert float(rows[name]["value"]) == pytest.approx(typed * si, rel=1e-9)
        assert (rows[name]["unit"], rows[name]["origin"], rows[name]["stderr"]) == (unit, "fixed", "")


def test_units_are_si_without_prefix(tables):
    assert {row["unit"] for row in tables["parameters.csv"]} <= {
        *("", "F", "V", "A", "S", "ohm", "H", "s", "A/V^2", "V/K", "1/V", "1/K")
    }


# checks.csv


def test_there_is_a_row_for_each_stated_value(entered, tables):
    assert sorted(row["quantity"] for row in tables["checks.csv"]) == sorted(stated_values(entered))


def test_stated_values_are_those_that_were_typed(entered, tables):
    typed = stated_values(entered)
    for row in tables["checks.csv"]:
        unit, value = typed[row["quantity"]]
        assert row["unit"] == unit == UNITS[row["quantity"]]
        for end in ("min", "typ", "max"):
            stated = number(row[f"stated_{end}"])
            assert stated == (pytest.approx(value[end], rel=1e-9) if end in value else None), row


def test_fitted_values_are_those_of_the_model_in_si(model, tables):
    for row, check in zip(tables["checks.csv"], model.checks, strict=True):
        assert row["quantity"] == check.quantity
        si = SI[row["unit"]] * (model.sign if check.quantity in SIGNED else 1.0)
        assert float(row["fitted"]) * si == pytest.approx(check.fitted, rel=1e-9)
        assert sorted(float(row[key]) * si for key in ("fitted_low", "fitted_high")) == pytest.approx(
            sorted([check.low, check.high]), rel=1e-9
        )


def test_the_interval_is_in_rising_order(tables):
    for row in tables["checks.csv"]:
        low, value, high = (float(row[key]) for key in ("fitted_low", "fitted", "fitted_high"))
        assert low <= value * (1.0 + 1e-9 * np.sign(value))
        assert value <= high * (1.0 + 1e-9 * np.sign(high))


def test_the_deviation_is_in_percent_of_the_typical_value(tables):
    for row in tables["checks.csv"]:
        expected = 100.0 * (float(row["fitted"]) / float(row["stated_typ"]) - 1.0)
        assert float(row["deviation_percent"]) == pytest.approx(expected, abs=1e-6)


def test_verdicts_follow_from_the_figures(tables):
    for row in tables["checks.csv"]:
        low, value, high = (float(row[key]) for key in ("fitted_low", "fitted", "fitted_high"))
        typ, limits = float(row["stated_typ"]), (number(row["stated_min"]), number(row["stated_max"]))
        size = abs(value)
        if (limits[0] is not None and size < abs(limits[0])) or (limits[1] is not None and size > abs(limits[1])):
            expected = "outside limit"
        else:
            expected = "agrees" if low <= typ <= high or abs(value - typ) <= 0.05 * abs(typ) else "differs"
        assert row["verdict"] == expected, row


def test_used_in_fit_is_yes_or_no(model, tables):
    assert [row["used_in_fit"] for row in tables["checks.csv"]] == [
        "yes" if check.used_in_fit else "no" for check in model.checks
    ]


def test_the_gate_charge_table_is_marked_where_it_was_fitted(fitted):
    for used, mark in ((False, "no"), (True, "yes")):
        rows = rows_of(csv_text(fitted(P_CHANNEL, used).checks_frame()))
        assert {row["used_in_fit"] for row in rows if row["quantity"] in ("qg", "qgs", "qgd", "v_plateau")} == {mark}


def test_what_is_not_determined_has_empty_cells(fitted):
    model = fitted("cargo_80v")
    check = replace(model.checks[0], fitted=None, low=None, high=None, verdict="not determined")
    (row,) = rows_of(csv_text(replace(model, checks=(check,)).checks_frame()))
    assert [row[key] for key in ("fitted", "fitted_low", "fitted_high", "deviation_percent")] == [""] * 4
    assert row["verdict"] == "not determined"


def test_a_model_without_stated_values_has_a_header_only(fitted):
    model = replace(fitted("cargo_80v"), checks=())
    assert csv_text(model.checks_frame()) == COLUMNS["checks.csv"] + "\n"


def test_conditions_of_a_p_channel_part_have_its_signs(fitted):
    rows = {row["quantity"]: row for row in rows_of(csv_text(fitted(P_CHANNEL).checks_frame()))}
    assert rows["qg"]["condition"] == "VDD -20 V, ID -30 A, VGS -10 V"
    assert "-0.25 mA" in rows["vgs_th"]["condition"]
    assert rows["ciss"]["condition"].startswith("VDS -20 V")


def test_figures_of_a_p_channel_part_have_its_signs(fitted):
    for row in rows_of(csv_text(fitted(P_CHANNEL).checks_frame())):
        sign = -1.0 if row["quantity"] in SIGNED else 1.0
        for key in ("stated_typ", "fitted", "fitted_low", "fitted_high"):
            assert sign * float(row[key]) > 0.0, row


# curves.csv


def digitized(folder, curve):
    """The points of a curve as they stand in its file."""
    with (folder / curve.file).open(encoding="utf-8", newline="") as f:
        rows = list(csv.DictReader(f))
    return sorted(
        (float(row[curve.x_column]), float(row[curve.y_column])) for row in rows if row[curve.y_column].strip()
    )


def points_of(tables, curve):
    rows = [row for row in tables["curves.csv"] if row["curve"] == curve.name]
    return sorted((float(row["x"]), float(row["y"])) for row in rows)


def fitted_curves(model):
    names = {point.curve for point in model.points}
    return [curve for curve in model.part.curves if curve.name in names]


def test_points_are_those_that_were_digitized(model, demo_folder, tables):
    curves = [curve for curve in fitted_curves(model) if curve.quantity is not Quantity.BODY_DIODE]
    assert len(curves) > 5
    for curve in curves:
        np.testing.assert_allclose(points_of(tables, curve), digitized(demo_folder, curve), rtol=1e-9)


def test_points_of_the_body_diode_are_those_that_were_digitized(model, demo_folder, tables):
    curves = [curve for curve in fitted_curves(model) if curve.quantity is Quantity.BODY_DIODE]
    assert curves
    for curve in curves:
        np.testing.assert_allclose(points_of(tables, curve), digitized(demo_folder, curve), rtol=1e-9)


def test_units_of_the_points_are_those_of_the_file(model, tables):
    for curve in fitted_curves(model):
        units = {(row["x_unit"], row["y_unit"]) for row in tables["curves.csv"] if row["curve"] == curve.name}
        assert units == {(curve.x_column.rpartition("_")[2], curve.y_column.rpartition("_")[2])}


def test_curves_stand_in_the_order_of_the_part_file(model, tables):
    shown = list(dict.fromkeys(row["curve"] for row in tables["curves.csv"]))
    assert shown == [curve.name for curve in fitted_curves(model)]


def test_fitted_capacitances_are_those_of_the_model_at_these_points(model, tables):
    for name in ("ciss", "coss", "crss"):
        rows = [row for row in tables["curves.csv"] if row["curve"] == name]
        x = np.array([float(row["x"]) for row in rows])
        shown = np.array([float(row["fitted"]) for row in rows])
        np.testing.assert_allclose(shown, getattr(model, name)(x) * 1e12, rtol=0.05)


def test_fitted_points_lie_on_the_side_of_their_curve(tables):
    for row in tables["curves.csv"]:
        assert float(row["fitted"]) * float(row["y"]) >= 0.0 or abs(float(row["residual"])) < 5.0, row


def test_a_point_that_is_met_has_a_small_residual(model, tables):
    residuals = np.array([float(row["residual"]) for row in tables["curves.csv"] if row["curve"] == "ciss"])
    assert 0.2 < np.sqrt(np.mean(residuals**2)) < 3.0


def test_a_loaded_model_has_no_points(fitted):
    model = replace(fitted("cargo_80v"), points=())
    assert csv_text(model.curves_frame()) == COLUMNS["curves.csv"] + "\n"


# gate_charge.csv


def test_the_gate_charge_curve_is_the_one_at_the_stated_condition(model, entered, tables):
    stated = entered["stated"]["gate_charge"]
    curve = model.gate_charge(stated["vdd_V"], stated["id_A"], stated["vgs_V"], stated["load"])
    for column, si in (("qg_nC", curve.q_g * 1e9), ("vgs_V", curve.v_gs), ("vds_V", curve.v_ds), ("id_A", curve.i_d)):
        shown = [float(row[column]) for row in tables["gate_charge.csv"]]
        np.testing.assert_allclose(shown, si, rtol=1e-9)


def test_the_gate_charge_curve_begins_and_ends_at_the_test(model, entered, tables):
    stated, rows = entered["stated"]["gate_charge"], tables["gate_charge.csv"]
    first, last = ({key: float(cell) for key, cell in rows[k].items()} for k in (0, -1))
    assert first["qg_nC"] == pytest.approx(0.0, abs=1e-9)
    assert first["vgs_V"] == pytest.approx(0.0, abs=1e-6)
    assert first["vds_V"] == pytest.approx(stated["vdd_V"])
    assert last["vgs_V"] == pytest.approx(stated["vgs_V"])
    assert last["id_A"] == pytest.approx(stated["id_A"], rel=0.01)
    total = next(float(row["fitted"]) for row in tables["checks.csv"] if row["quantity"] == "qg")
    assert last["qg_nC"] == pytest.approx(total, rel=1e-6)


def test_the_charge_rises(tables):
    assert np.all(np.diff([float(row["qg_nC"]) for row in tables["gate_charge.csv"]]) >= 0.0)


def test_no_voltage_or_current_has_the_wrong_sign(model, tables):
    for row in tables["gate_charge.csv"]:
        assert all(model.sign * float(row[key]) >= -1e-6 for key in ("vgs_V", "vds_V", "id_A"))


def test_a_condition_that_the_model_cannot_reach_leaves_a_header_only(fitted):
    model = fitted("cargo_80v")
    table = StatedGateCharge(v_dd=40.0, i_d=1e6, v_gs=10.0)
    model = replace(model, part=replace(model.part, stated=replace(model.part.stated, gate_charge=table)))
    assert texts_of(model)["gate_charge.csv"] == COLUMNS["gate_charge.csv"] + "\n"


# Spreadsheets


def no_formula(texts):
    """No cell of these tables begins as a formula does; negative numbers may begin with their sign."""
    cells = [cell for text in texts for row in csv.reader(io.StringIO(text)) for cell in row]
    assert cells
    for cell in cells:
        assert not re.match(r"[=+@\t\r]", cell), cell
        if cell.startswith("-"):
            float(cell)


@pytest.mark.parametrize("begin", ["=", "+", "-", "@"])
def test_notes_do_not_become_a_formula(fitted, begin):
    model = fitted(P_CHANNEL)
    model = replace(model, part=replace(model.part, notes=f"{begin}HYPERLINK(1)"))
    no_formula(texts_of(model).values())


@pytest.mark.parametrize("begin", ["=", "+", "-", "@"])
def test_file_names_do_not_become_a_formula(tmp_path, begin):
    name = f"{begin}1+1.csv"
    folder = make_folder(tmp_path / "part", {"transfer.csv": name}, files={name: TRANSFER})
    try:
        part = read_part(folder)
    except PartFolderError:
        return
    no_formula([csv_text(pd.DataFrame({"curve": [curve.name for curve in part.curves]}))])


@pytest.mark.parametrize("begin", ["=", "+", "-", "@"])
def test_texts_of_a_model_file_from_elsewhere_do_not_become_a_formula(fitted, begin):
    data = json.loads(model_text(fitted(P_CHANNEL)))
    data["checks"][0]["condition"] = f"{begin}HYPERLINK(1)"
    data["parameters"]["k"]["unit"] = f"{begin}HYPERLINK(1)"
    try:
        model = model_from_text(json.dumps(data), Model)
    except ModelFileError:
        return
    no_formula([csv_text(model.checks_frame()), csv_text(model.to_frame())])
