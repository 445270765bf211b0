"""The Python interface: what is public, the model's methods, the plots, and the sheet."""

from __future__ import annotations

import struct
import subprocess
import sys
from collections.abc import Mapping
from dataclasses import FrozenInstanceError, replace
from pathlib import Path

import matplotlib as mpl
import matplotlib.pyplot as plt
import numpy as np
import pandas as pd
import pytest
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

import fitter
from fitter.models.channel import on_resistance, threshold_voltage
from fitter.part import Quantity
from fitter.sheet import draw_sheet, sheet_files

ROOT = Path(__file__).resolve().parents[1]
PLOTS = (
    *("plot_body_diode", "plot_capacitances", "plot_gate_charge", "plot_on_resistance", "plot_output"),
    *("plot_residuals", "plot_threshold", "plot_transfer"),
)
ERRORS = ("FitError", "ModelFileError", "OperatingPointError", "OutputError", "PartFolderError")


@pytest.fixture(autouse=True)
def closed_figures():
    """No display is needed, and no figure stays open."""
    with mpl.rc_context({"backend": "Agg"}):
        yield
        plt.close("all")


@pytest.fixture
def model(fitted):
    return fitted("cargo_80v")


@pytest.fixture
def p_channel(fitted):
    return fitted("camper_van_p40v")


@pytest.fixture
def loaded(model, tmp_path):
    model.save(tmp_path / "model.json")
    return fitter.load_model(tmp_path / "model.json")


# What is public


def test_the_public_names():
    assert set(fitter.__all__) == {
        *("read_part", "inspect", "fit_part", "load_model", "Model", "FitterError", "ExtrapolationWarning"),
        *ERRORS,
        *PLOTS,
    }


def test_every_public_name_is_there_and_documented():
    for name in fitter.__all__:
        assert getattr(fitter, name).__doc__, name


def test_dir_shows_the_public_names():
    assert set(fitter.__all__) <= set(dir(fitter))


def test_a_name_that_is_not_there_is_an_attribute_error():
    with pytest.raises(AttributeError, match="no_such_name"):
        _ = fitter.no_such_name


@pytest.mark.parametrize("name", ERRORS)
def test_every_error_is_a_fitter_error(name):
    assert issubclass(getattr(fitter, name), fitter.FitterError)


def test_importing_the_package_imports_nothing_heavy():
    code = "import sys, fitter; print(sorted({'numpy', 'scipy', 'lmfit', 'pandas', 'matplotlib'} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=True)
    assert done.stdout == "[]\n"


def test_a_star_import_gives_the_public_names():
    names = {}
    exec("from fitter import *", names)
    assert set(fitter.__all__) <= set(names)


# From part to model


def test_a_part_is_read_from_a_text_or_a_path():
    folder = ROOT / "digitized_curves" / "cargo_80v"
    assert fitter.read_part(str(folder)).digests == fitter.read_part(folder).digests


def test_a_folder_that_is_not_there_raises_a_fitter_error(tmp_path):
    with pytest.raises(fitter.FitterError):
        fitter.read_part(str(tmp_path / "absent"))


def test_inspect_returns_findings_that_can_be_shown():
    findings = fitter.inspect(fitter.read_part(ROOT / "digitized_curves" / "cargo_80v"))
    assert all(
        isinstance(str(finding), str) and finding.severity in ("stop", "doubtful", "note") for finding in findings
    )


def test_a_fit_gives_a_model(model):
    assert isinstance(model, fitter.Model)


def test_a_model_is_saved_and_loaded_by_a_text_or_a_path(model, tmp_path):
    model.save(str(tmp_path / "model.json"))
    for path in (tmp_path / "model.json", str(tmp_path / "model.json")):
        loaded = fitter.load_model(path)
        assert isinstance(loaded, fitter.Model)
        assert loaded.subcircuit() == model.subcircuit()


def test_a_model_cannot_be_changed(model):
    with pytest.raises(FrozenInstanceError):
        model.version = "mine"


def test_parameters_are_a_mapping_of_values_in_si(model):
    assert isinstance(model.parameters, Mapping)
    k = model.parameters["v_th"]
    assert (k.unit, k.origin) == ("V", "fitted")
    assert 2.0 < k.value < 5.0
    assert 0.0 < k.stderr < 1.0


# Curves


@pytest.mark.parametrize("name", ["ciss", "coss", "crss"])
@pytest.mark.parametrize("shape", [(), (1,), (5,), (2, 3)])
def test_capacitances_have_the_shape_of_their_voltage(model, name, shape):
    v_ds = np.full(shape, 40.0)
    found = getattr(model, name)(v_ds)
    assert isinstance(found, np.ndarray)
    assert found.shape == shape
    assert found.dtype == float


@pytest.mark.parametrize("name, farad", [("ciss", 4250e-12), ("coss", 632e-12), ("crss", 22e-12)])
def test_capacitances_are_in_farad(model, name, farad):
    assert float(getattr(model, name)(40.0)) == pytest.approx(farad, rel=0.1)


def test_capacitances_take_lists(model):
    np.testing.assert_array_equal(model.ciss([1, 10]), model.ciss(np.array([1.0, 10.0])))


def test_capacitances_of_a_p_channel_part_take_negative_voltages(p_channel):
    assert float(p_channel.ciss(-20.0)) == pytest.approx(3100e-12, rel=0.1)
    assert float(p_channel.crss(-20.0)) == pytest.approx(185e-12, rel=0.1)


def test_the_drain_current_broadcasts(model):
    found = model.drain_current(np.linspace(0.0, 10.0, 4)[:, None], [1.0, 2.0, 3.0])
    assert found.shape == (4, 3)
    assert float(found[1, 2]) == float(model.drain_current(10.0 / 3.0, 3.0))


def test_the_drain_current_follows_temperature(model):
    cold, hot = (float(model.drain_current(10.0, 0.2, t_j=t_j)) for t_j in (25.0, 125.0))
    assert 0.3 * cold < hot < 0.9 * cold


def test_the_drain_current_of_a_p_channel_part_is_negative(p_channel):
    assert float(p_channel.drain_current(-10.0, -1.0)) < -10.0
    assert abs(float(p_channel.drain_current(0.0, -20.0))) < 1e-3


def test_a_temperature_beyond_the_data_warns(model):
    with pytest.warns(fitter.ExtrapolationWarning, match="300 C"):
        model.drain_current(10.0, 1.0, t_j=300.0)


def test_the_warning_points_at_the_callers_line(model):
    with pytest.warns(fitter.ExtrapolationWarning) as caught:
        model.drain_current(10.0, 1.0, t_j=300.0)
    assert caught[0].filename == __file__


@pytest.mark.parametrize("load", ["current", "resistive"])
def test_a_gate_charge_curve_has_arrays_and_numbers(model, load):
    curve = model.gate_charge(vdd=40.0, i_d=50.0, v_gs=10.0, load=load, t_j=25.0)
    assert curve.v_gs.shape == curve.q_g.shape == curve.v_ds.shape == curve.i_d.shape
    assert curve.q_g.ndim == 1
    for name in ("total", "q_gs", "q_gd", "v_plateau"):
        assert isinstance(getattr(curve, name), float)
    assert curve.total == pytest.approx(68e-9, rel=0.1)
    assert 0.0 < curve.q_gs < curve.q_gs + curve.q_gd < curve.total
    assert curve.v_plateau == pytest.approx(4.5, rel=0.1)


def test_a_gate_charge_curve_is_of_a_current_load_at_25_c_unless_told(model):
    assert model.gate_charge(40.0, 50.0, 10.0).total == model.gate_charge(40.0, 50.0, 10.0, "current", 25.0).total


def test_gate_charge_of_a_p_channel_part_takes_its_signs_or_magnitudes(p_channel):
    signed, plain = p_channel.gate_charge(-20.0, -30.0, -10.0), p_channel.gate_charge(20.0, 30.0, 10.0)
    np.testing.assert_array_equal(signed.v_gs, plain.v_gs)
    assert signed.total == plain.total > 0.0
    assert signed.v_plateau < 0.0
    assert signed.v_gs[-1] == pytest.approx(-10.0)
    assert signed.v_ds[0] == pytest.approx(-20.0)


@pytest.mark.parametrize(
    "arguments", [(40.0, 50.0, 10.0, "inductive"), (40.0, 1e6, 10.0), (0.0, 50.0, 10.0), (40.0, float("nan"), 10.0)]
)
def test_an_operating_point_that_cannot_be_raises_a_fitter_error(model, arguments):
    with pytest.raises(fitter.OperatingPointError):
        model.gate_charge(*arguments)


def test_intervals_hold_their_value(model):
    for interval in model.gate_charge_intervals(40.0, 50.0, 10.0).values():
        assert interval.low < interval.value < interval.high


# Frames


@pytest.mark.parametrize("name", ["to_frame", "checks_frame", "curves_frame"])
def test_tables_are_data_frames(model, name):
    frame = getattr(model, name)()
    assert isinstance(frame, pd.DataFrame)
    assert len(frame) > 10


def test_the_parameter_frame(model):
    frame = model.to_frame()
    assert list(frame.columns) == ["name", "value", "stderr", "unit", "origin"]
    assert list(frame["name"]) == list(model.parameters)
    assert frame["value"].dtype == frame["stderr"].dtype == float


def test_a_loaded_model_has_the_same_frames_but_no_points(model, loaded):
    pd.testing.assert_frame_equal(loaded.to_frame(), model.to_frame())
    pd.testing.assert_frame_equal(loaded.checks_frame(), model.checks_frame())
    assert loaded.curves_frame().empty


# Plots


@pytest.mark.parametrize("name", PLOTS)
def test_a_plot_draws_into_the_axes_it_is_given(model, name):
    figure, ax = plt.subplots()
    assert getattr(fitter, name)(model, ax=ax) is ax
    assert ax.lines
    assert figure.axes == [ax]


@pytest.mark.parametrize("name", PLOTS)
def test_a_plot_makes_its_own_axes_where_none_are_given(model, name):
    ax = getattr(fitter, name)(model)
    assert isinstance(ax, Axes)
    assert ax.lines
    assert plt.get_fignums() == []


@pytest.mark.parametrize("name", PLOTS)
def test_a_plot_has_a_title_and_labels(model, name):
    ax = getattr(fitter, name)(model, None)
    assert ax.get_title(loc="left")
    assert ax.get_ylabel()
    assert ax.get_xlabel() or [label.get_text() for label in ax.get_xticklabels()]


@pytest.mark.parametrize("name", PLOTS)
def test_a_plot_of_a_p_channel_part_can_be_drawn(p_channel, name):
    ax = getattr(fitter, name)(p_channel)
    ax.figure.canvas.draw()
    assert ax.lines


@pytest.mark.parametrize("name", PLOTS)
def test_a_plot_of_a_loaded_model_can_be_drawn(loaded, name):
    ax = getattr(fitter, name)(loaded)
    ax.figure.canvas.draw()
    assert isinstance(ax, Axes)


def labels_of(ax):
    return [line.get_label() for line in ax.lines if not line.get_label().startswith("_")]


def test_capacitances_are_drawn_in_picofarad_on_log_axes(model):
    ax = fitter.plot_capacitances(model)
    assert (ax.get_xscale(), ax.get_yscale()) == ("log", "log")
    assert "pF" in ax.get_ylabel()
    assert labels_of(ax) == ["Ciss", "Coss", "Crss"]
    x, y = next(line for line in ax.lines if line.get_label() == "Ciss").get_data()
    np.testing.assert_allclose(y, model.ciss(x) * 1e12)


def test_the_transfer_plot_is_linear_unless_told(model):
    assert fitter.plot_transfer(model).get_yscale() == "linear"
    assert fitter.plot_transfer(model, scale="log").get_yscale() == "log"


def test_the_transfer_plot_has_a_line_for_each_temperature(model):
    assert sorted(labels_of(fitter.plot_transfer(model))) == [
        "150 \N{DEGREE SIGN}C",
        "25 \N{DEGREE SIGN}C",
        "\N{MINUS SIGN}40 \N{DEGREE SIGN}C",
    ]


@pytest.mark.parametrize("name", ["cargo_80v", "wall_box_650v", "camper_van_p40v"])
def test_the_zero_temperature_coefficient_lies_on_the_lines_of_both_temperatures(fitted, name):
    ax = fitter.plot_transfer(fitted(name))
    (mark,) = [line for line in ax.lines if line.get_marker() == "+"]
    (v_gs,), (i_d,) = mark.get_data()
    hottest = max(int(label.split()[0]) for label in labels_of(ax) if label[0].isdigit())
    for t_j in (25, hottest):
        (line,) = [x for x in ax.lines if x.get_label() == f"{t_j} \N{DEGREE SIGN}C"]
        assert np.interp(v_gs, *line.get_data()) == pytest.approx(i_d, rel=0.02)


def test_the_gate_charge_plot_shows_predicted_digitized_and_stated(model):
    assert labels_of(fitter.plot_gate_charge(model)) == ["predicted", "digitized", "stated"]


def test_the_gate_charge_plot_says_where_it_was_fitted(fitted):
    assert labels_of(fitter.plot_gate_charge(fitted("camper_van_p40v", True)))[0] == "fitted"


def test_a_gate_charge_that_cannot_be_reached_is_said_in_the_plot(model):
    stated = replace(model.part.stated, gate_charge=replace(model.part.stated.gate_charge, i_d=2000.0))
    ax = fitter.plot_gate_charge(replace(model, part=replace(model.part, stated=stated)))
    assert any("does not carry" in text.get_text() for text in ax.texts)


@pytest.mark.parametrize("name", ["plot_body_diode", "plot_on_resistance", "plot_output", "plot_threshold"])
def test_a_plot_of_what_was_not_digitized_is_empty(loaded, name):
    assert not getattr(fitter, name)(loaded).lines


def curve_of(model, quantity):
    (curve,) = model.part.curves_of(quantity)
    return curve


def test_a_normalised_on_resistance_is_drawn_over_its_value_at_25_degrees(model):
    curve = curve_of(model, Quantity.RDS_ON_TEMPERATURE)
    assert curve.y_unit == ""
    ax = fitter.plot_on_resistance(model)
    assert ax.get_ylabel() == "RDS(on) / RDS(on) at 25 \N{DEGREE SIGN}C"
    line, points = ax.lines
    assert np.interp(25.0, *line.get_data()) == pytest.approx(1.0, abs=1e-3)
    np.testing.assert_array_equal(points.get_data(), [curve.x, curve.y])


def test_an_on_resistance_in_ohms_is_drawn_in_milliohms(fitted):
    model = fitted("ferry_charger_1200v")
    curve = curve_of(model, Quantity.RDS_ON_TEMPERATURE)
    assert curve.y_unit == "ohm"
    ax = fitter.plot_on_resistance(model)
    assert ax.get_ylabel() == "RDS(on) / m\N{GREEK CAPITAL LETTER OMEGA}"
    line, points = ax.lines
    t_j, drawn = line.get_data()
    hot = model.transistor(t_j[-1]).channel
    assert drawn[-1] == pytest.approx(1e3 * float(on_resistance(curve.i_d, curve.v_gs, hot)))
    np.testing.assert_array_equal(points.get_data(), [curve.x, 1e3 * curve.y])


def with_two_curves(model, quantity, **changed):
    """The model with a second curve of that quantity, a copy of its own but for what is changed."""
    curve = curve_of(model, quantity)
    part = replace(model.part, curves=(*model.part.curves, replace(curve, name="second", **changed)))
    points = tuple(replace(p, curve="second") for p in model.points if p.curve == curve.name)
    return replace(model, part=part, points=model.points + points)


def test_a_normalised_on_resistance_beside_one_in_ohms_is_drawn_in_milliohms(fitted):
    model = with_two_curves(fitted("ferry_charger_1200v"), Quantity.RDS_ON_TEMPERATURE, y_unit="")
    ax = fitter.plot_on_resistance(model)
    assert ax.get_ylabel() == "RDS(on) / m\N{GREEK CAPITAL LETTER OMEGA}"
    ohms, _, normalised, points = (line.get_ydata() for line in ax.lines)
    np.testing.assert_array_equal(normalised, ohms)
    curve = model.part.curves[-1]
    cold = float(on_resistance(curve.i_d, curve.v_gs, model.transistor().channel))
    np.testing.assert_allclose(points, 1e3 * cold * curve.y)


def test_the_threshold_is_drawn_at_its_current(model):
    curve = curve_of(model, Quantity.VGS_TH_TEMPERATURE)
    ax = fitter.plot_threshold(model)
    line, points = ax.lines
    t_j, drawn = line.get_data()
    assert drawn[0] == pytest.approx(float(threshold_voltage(curve.i_d, model.transistor(t_j[0]).channel)))
    np.testing.assert_array_equal(points.get_data(), [curve.x, curve.y])


def test_plots_over_the_temperature_name_the_condition(model, p_channel):
    assert [text.get_text() for text in fitter.plot_on_resistance(model).texts] == ["10 V, 50 A"]
    assert [text.get_text() for text in fitter.plot_threshold(p_channel).texts] == ["\N{MINUS SIGN}250 uA"]
    ax = fitter.plot_threshold(with_two_curves(model, Quantity.VGS_TH_TEMPERATURE, i_d=1e-3))
    assert [text.get_text() for text in ax.get_legend().get_texts()] == ["250 uA", "1 mA"]


def test_output_curves_at_another_temperature_alone_are_drawn_there(model):
    hot = tuple(replace(c, t_j=150.0) if c.quantity is Quantity.OUTPUT else c for c in model.part.curves)
    ax = fitter.plot_output(replace(model, part=replace(model.part, curves=hot)))
    assert ax.get_title(loc="left") == "Output, 150 \N{DEGREE SIGN}C"
    v_ds, i_d = ax.lines[0].get_data()
    np.testing.assert_allclose(i_d, model.drain_current(10.0, v_ds, t_j=150.0))


def test_a_log_axis_of_few_decades_labels_2_and_5_too(model, p_channel):
    def labels(model):
        ax = fitter.plot_capacitances(model)
        return [ax.yaxis.get_minor_formatter()(y, None) for y in (200.0, 500.0)]

    assert labels(model) == ["", ""]
    assert labels(p_channel) == ["200", "500"]


def test_plots_show_magnitudes_with_a_minus_sign_for_a_p_channel_part(p_channel):
    for name in ("plot_capacitances", "plot_transfer", "plot_output"):
        ax = getattr(fitter, name)(p_channel)
        assert ax.get_xlabel().startswith("\N{MINUS SIGN}V")
        assert min(ax.get_xlim()) > -1.0
    ax = fitter.plot_threshold(p_channel)
    assert ax.get_ylabel().startswith("\N{MINUS SIGN}V")
    assert min(ax.get_ylim()) > 0.0


# Sheet


@pytest.fixture(scope="module")
def sheet(fitted):
    return sheet_files(fitted("cargo_80v"))


def test_the_sheet_is_a_png_and_a_pdf(sheet):
    assert set(sheet) == {"sheet.png", "sheet.pdf"}
    assert sheet["sheet.png"].startswith(b"\x89PNG\r\n\x1a\n")
    assert sheet["sheet.pdf"].startswith(b"%PDF-1.")
    assert sheet["sheet.pdf"].rstrip().endswith(b"%%EOF")


def test_the_png_is_of_the_shape_of_a4(sheet):
    width, height = struct.unpack(">II", sheet["sheet.png"][16:24])
    assert height / width == pytest.approx(297.0 / 210.0, rel=0.003)
    assert width > 1000


def test_the_pdf_is_one_page_of_a4(sheet):
    (box,) = [part.split(b"]")[0] for part in sheet["sheet.pdf"].split(b"/MediaBox")[1:]]
    _, _, width, height = map(float, box.strip(b" [").split())
    assert (width / 72 * 25.4, height / 72 * 25.4) == pytest.approx((210.0, 297.0), abs=0.5)


def test_the_sheet_has_no_date_and_no_maker(sheet):
    assert not any(word in sheet["sheet.pdf"] for word in (b"CreationDate", b"ModDate", b"/Producer", b"/Creator"))
    assert b"tEXt" not in sheet["sheet.png"][:400]


def test_the_sheet_is_the_same_again_whatever_the_users_settings(fitted, sheet):
    with mpl.rc_context({"font.size": 30, "lines.linewidth": 9, "axes.facecolor": "red", "savefig.dpi": 10}):
        assert sheet_files(fitted("cargo_80v")) == sheet


def test_drawing_the_sheet_leaves_the_users_settings(fitted):
    with mpl.rc_context({"font.size": 30}):
        draw_sheet(fitted("cargo_80v"))
        assert mpl.rcParams["font.size"] == 30


def texts_of(figure):
    return " ".join(artist.get_text() for artist in figure.get_children() if hasattr(artist, "get_text"))


def test_the_sheet_names_part_parameters_checks_and_cautions(model):
    figure = draw_sheet(model)
    assert isinstance(figure, Figure)
    shown = texts_of(figure)
    for word in ("CB80N4", model.part.notes, "CAUTION", "Verify on the bench", *model.parameters):
        assert word in shown
    for check in model.checks:
        assert check.quantity in shown


def titles_of(figure):
    """Titles of the plots, the words before any condition, row by row."""
    rows = {}
    for ax in figure.axes:
        title = ax.get_title(loc="left").partition(" at ")[0].partition(",")[0]
        rows.setdefault(ax.get_position().y0, []).append(title)
    return list(rows.values())


def test_the_sheet_of_a_part_that_gives_everything_shows_everything(model):
    assert titles_of(draw_sheet(model)) == [
        ["Capacitances", "Gate charge", "Transfer"],
        ["Transfer", "Output", "Body diode", "On-resistance", "Threshold"],
        ["Residuals"],
    ]


@pytest.mark.parametrize(
    "left_out,second_row",
    [
        ((), ["Transfer", "Output", "Body diode", "On-resistance", "Threshold"]),
        ((Quantity.BODY_DIODE, Quantity.OUTPUT), ["Transfer", "On-resistance", "Threshold"]),
        ((Quantity.BODY_DIODE, Quantity.OUTPUT, Quantity.RDS_ON_TEMPERATURE), ["Transfer", "Transfer", "Threshold"]),
        (
            (Quantity.BODY_DIODE, Quantity.OUTPUT, Quantity.RDS_ON_TEMPERATURE, Quantity.VGS_TH_TEMPERATURE),
            ["Transfer", "Transfer"],
        ),
    ],
)
def test_the_sheet_shows_only_what_the_part_gives(model, left_out, second_row):
    curves = tuple(c for c in model.part.curves if c.quantity not in left_out)
    assert titles_of(draw_sheet(replace(model, part=replace(model.part, curves=curves))))[1] == second_row


@pytest.mark.parametrize("demo", ["cargo_80v", "camper_van_p40v", "ferry_charger_1200v", "wall_box_650v"])
def test_no_text_of_a_table_runs_into_the_next_or_off_the_page(fitted, monkeypatch, demo):
    figure = draw_sheet(fitted(demo))
    renderer = FigureCanvasAgg(figure).get_renderer()
    lines = {}

    def note(pen, x, y, text, font, angle):
        width, *_ = renderer.get_text_width_height_descent(text, font, False)
        lines.setdefault(y, []).append((x, x + width))

    monkeypatch.setattr(renderer, "draw_text", note)
    (texts,) = [artist for artist in figure.artists if hasattr(artist, "get_text")]
    texts.draw(renderer)
    assert len(lines) > 30
    for stretches in lines.values():
        ends = [0.0, *(end for _, end in sorted(stretches))]
        starts = [*(start for start, _ in sorted(stretches)), 0.97 * renderer.width]
        assert min(start - end for end, start in zip(ends, starts, strict=True)) > 3.0


def test_the_sheet_of_a_loaded_model_can_be_drawn(loaded):
    assert "CB80N4" in texts_of(draw_sheet(loaded))


@pytest.mark.parametrize(
    "notes", ["costs $5, or $6 a piece", "r_{on} ^2 \\alpha % #", "x" * 2000, "\u65e5\u672c\u8a9e"]
)
def test_notes_of_any_kind_are_drawn_as_they_are_and_without_a_warning(model, notes):
    figure = draw_sheet(replace(model, part=replace(model.part, notes=notes)))
    for ax in figure.axes:
        ax.remove()
    figure.draw_without_rendering()
