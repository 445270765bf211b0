"""Ready-to-run circuits: what their text says, that ngspice runs them as they are, and what they measure there."""

from __future__ import annotations

import math
import re
import subprocess
import sys
from dataclasses import replace

import numpy as np
import pytest
from conftest import DEMO_PARTS
from simulators import required

from fitter.cli import main
from fitter.errors import ExtrapolationWarning, OperatingPointError
from fitter.interface import load_model
from fitter.writers.decks import deck_files, decks

NAMES = ("capacitance", "transfer", "output", "gate_charge", "diode_recovery", "double_pulse")
#: How far a measurement may be off what is expected, relative. In the capacitances are the leads and the resistance of
#: the gate; the recovery's peak is worked out for a diode that snaps off at once.
TOLERANCES = {
    "capacitance": 0.015, "transfer": 0.005, "output": 0.005, "gate_charge": 0.01, "diode_recovery": 0.03,
    "double_pulse": 0.005,
}  # fmt: skip
P_CHANNEL = "camper_van_p40v"
HOT = 125.0


@pytest.fixture(scope="module")
def model_of(fitted):
    """The model of a demo part with the gate charge fitted."""
    return lambda name: fitted(name, use_gate_charge=True)


def deck_of(model, name, t_j=25.0):
    (deck,) = [deck for deck in decks(model, t_j) if deck.name == name]
    return deck


def comments(deck):
    """The comment as one flowing text."""
    return re.sub(r"\s+", " ", " ".join(x.lstrip("* ") for x in deck.text.splitlines() if x.startswith("*")))


def measured(model, folder, name, t_j=25.0):
    """Run one circuit as a user does, and return what it measures."""
    for file, text in deck_files(model, t_j).items():
        (folder / file).write_text(text, encoding="ascii")
    command = [required("ngspice"), "-b", f"{name}.cir"]
    done = subprocess.run(
        command, cwd=folder, stdin=subprocess.DEVNULL, capture_output=True, text=True, timeout=120, check=False
    )
    said = done.stdout + done.stderr
    assert done.returncode == 0, said[-2000:]
    assert not re.search(r"warning|error|singular|too small|failed|aborted", said, re.IGNORECASE), said[-2000:]
    return {key: float(value) for key, value in re.findall(r"^(\w+)\s+=\s+(\S+)", said, re.MULTILINE)}


def agree(model, folder, name, t_j=25.0):
    found, expected = measured(model, folder, name, t_j), deck_of(model, name, t_j).expected
    assert {key: found.get(key) for key in expected} == pytest.approx(expected, rel=TOLERANCES[name])


# In ngspice


@pytest.mark.simulator
@pytest.mark.parametrize("name", NAMES)
@pytest.mark.parametrize("part", DEMO_PARTS)
def test_each_circuit_runs_and_measures_what_it_says_to_expect(model_of, tmp_path, part, name):
    agree(model_of(part), tmp_path, name)


@pytest.mark.simulator
@pytest.mark.parametrize("name", NAMES)
def test_each_circuit_measures_what_it_says_to_expect_of_a_hot_part(model_of, tmp_path, name):
    agree(model_of("cargo_80v"), tmp_path, name, HOT)


@pytest.mark.simulator
def test_gate_charge_with_a_resistive_load_is_measured_as_expected(model_of, tmp_path):
    model = model_of("cargo_80v")
    table = replace(model.part.stated.gate_charge, load="resistive")
    part = replace(model.part, stated=replace(model.part.stated, gate_charge=table))
    resistive = replace(model, part=part)
    assert re.search(r"^RL vdd d ", deck_of(resistive, "gate_charge").text, re.MULTILINE)
    agree(resistive, tmp_path, "gate_charge")


@pytest.mark.simulator
def test_circuits_of_a_part_with_nothing_in_its_table_measure_what_they_say_to_expect(model_of, tmp_path):
    model = model_of("cargo_80v")
    bare = replace(model, part=replace(model.part, stated=type(model.part.stated)()))
    for name in ("capacitance", "gate_charge", "double_pulse"):
        agree(bare, tmp_path, name)


# What is expected


def test_there_is_a_circuit_for_each_thing_that_a_datasheet_measures(model_of, demo):
    assert tuple(deck.name for deck in decks(model_of(demo))) == NAMES


def test_expected_capacitances_are_the_models(model_of, demo):
    model = model_of(demo)
    v = model.sign * model.part.stated.capacitance.v_ds
    expected = deck_of(model, "capacitance").expected
    assert expected["ciss_nf"] == pytest.approx(1e9 * float(model.ciss(v)))
    assert expected["coss_nf"] == pytest.approx(1e9 * float(model.coss(v)))
    assert expected["crss_nf"] == pytest.approx(1e9 * float(model.crss(v)))


def test_expected_gate_charge_is_the_models(model_of, demo):
    model = model_of(demo)
    p = model.test_point()
    deck = deck_of(model, "gate_charge")
    (begin,) = re.findall(r"1 us of 1 nC, from (\S+) us on", comments(deck))
    total = (deck.expected["t_end"] - 1e-6 * float(begin)) * 1e-3
    curve = model.gate_charge(p.v_dd, p.i_d, p.v_gs)
    assert total == pytest.approx(curve.total, rel=1e-4)


def test_expected_plateau_lies_in_the_interval_of_the_models(model_of, demo):
    model = model_of(demo)
    p = model.test_point()
    plateau = model.gate_charge_intervals(p.v_dd, p.i_d, p.v_gs)["v_plateau"]
    expected = deck_of(model, "gate_charge").expected["v_plateau"]
    assert expected == pytest.approx(plateau.value, rel=0.02)


def test_expected_output_current_is_half_more_than_the_tests(model_of, demo):
    model = model_of(demo)
    expected = deck_of(model, "output").expected["id_full"]
    assert abs(expected) == pytest.approx(1.5 * model.test_point().i_d, rel=0.03)


def test_expected_transfer_current_is_the_tests(model_of, demo):
    model = model_of(demo)
    expected = deck_of(model, "transfer").expected["id_1"]
    assert abs(expected) == pytest.approx(model.test_point().i_d, rel=0.02)


def test_expected_load_current_is_a_little_below_the_tests(model_of, demo):
    model = model_of(demo)
    expected = deck_of(model, "double_pulse").expected["i_load"]
    assert 0.97 * model.test_point().i_d < abs(expected) < model.test_point().i_d


def test_a_hot_part_is_expected_to_have_another_plateau(model_of):
    model = model_of("cargo_80v")
    cold, hot = (deck_of(model, "gate_charge", t_j).expected["v_plateau"] for t_j in (25.0, HOT))
    p = model.test_point()
    moved = [model.gate_charge(p.v_dd, p.i_d, p.v_gs, t_j=t_j).v_plateau for t_j in (25.0, HOT)]
    assert hot - cold == pytest.approx(moved[1] - moved[0], rel=0.02)
    assert abs(hot - cold) > 0.05


def test_the_capacitances_do_not_follow_the_temperature(model_of):
    model = model_of("cargo_80v")
    assert deck_of(model, "capacitance", HOT).expected == deck_of(model, "capacitance").expected


def test_a_temperature_the_model_knows_nothing_of_is_refused(model_of):
    with pytest.warns(ExtrapolationWarning), pytest.raises(OperatingPointError):
        decks(model_of("cargo_80v"), -400.0)


def without(model, *names):
    """The model with some parameters gone."""
    space = model.estimate.space
    keep = [i for i, d in enumerate(space.free) if d.name not in names]
    smaller = replace(
        space, free=tuple(space.free[i] for i in keep), fixed={k: v for k, v in space.fixed.items() if k not in names}
    )
    estimate = replace(
        model.estimate, space=smaller, coordinates=model.estimate.coordinates[keep],
        covariance=model.estimate.covariance[np.ix_(keep, keep)],
    )  # fmt: skip
    return replace(model, estimate=estimate)


@pytest.mark.parametrize(
    "names", [("tt_d",), ("is_d", "n_d", "r_dio", "eg_d", "rdio_exponent", "tt_d")], ids=["no charge", "no diode"]
)
def test_without_a_body_diode_that_stores_charge_there_is_no_recovery_to_look_at(model_of, names):
    bare = without(model_of("cargo_80v"), *names)
    assert [deck.name for deck in decks(bare)] == [name for name in NAMES if name != "diode_recovery"]


# The text


@pytest.mark.parametrize("name", NAMES)
def test_the_subcircuit_is_included_by_its_name_alone(model_of, demo, name):
    model = model_of(demo)
    included = re.findall(r"^\.INCLUDE (.*)$", deck_of(model, name).text, re.MULTILINE)
    assert included == [f"{model.part.name}.lib"]


def test_the_file_that_is_included_is_the_subcircuit(model_of, demo):
    model = model_of(demo)
    assert deck_files(model)[f"{model.part.name}.lib"] == model.subcircuit()


def test_the_hot_file_that_is_included_is_the_hot_subcircuit(model_of):
    model = model_of("cargo_80v")
    assert deck_files(model, HOT)["CB80N4.lib"] == model.subcircuit(t_j=HOT)


def test_the_files_bear_the_circuits_names(model_of):
    assert set(deck_files(model_of("cargo_80v"))) == {"CB80N4.lib", *(f"{name}.cir" for name in NAMES)}


@pytest.mark.parametrize("name", NAMES)
def test_every_expected_value_stands_in_the_comment(model_of, demo, name):
    deck = deck_of(model_of(demo), name)
    assert deck.expected
    for key, value in deck.expected.items():
        (said,) = re.findall(rf"\b{key} = (\S+)", comments(deck))
        assert float(said.rstrip(":")) == pytest.approx(value, rel=6e-4)


@pytest.mark.parametrize("name", NAMES)
def test_each_expected_value_is_measured_once(model_of, demo, name):
    deck = deck_of(model_of(demo), name)
    assert sorted(re.findall(r"^\.MEASURE (?:AC|DC|TRAN) (\w+) ", deck.text, re.MULTILINE)) == sorted(deck.expected)


@pytest.mark.parametrize(
    "name, words",
    [
        ("capacitance", ["1 MHz", "Small-signal currents"]),
        ("transfer", ["i(VD) is minus the drain current", "log axis"]),
        ("output", ["i(VD)", "1/RDS(on)"]),
        ("gate_charge", ["Look at v(g)", "v(d)", "plateau"]),
        ("diode_recovery", ["i(L1) falls through zero", "ringing"]),
        ("double_pulse", ["Look at v(g), v(d) and i(L1)", "turn-on", "turn-off"]),
    ],
)
def test_the_comment_says_what_to_look_at(model_of, name, words):
    said = comments(deck_of(model_of("cargo_80v"), name))
    assert [word for word in words if word not in said] == []


@pytest.mark.parametrize("name", NAMES)
def test_the_comment_warns_of_what_is_not_modelled(model_of, demo, name):
    said = comments(deck_of(model_of(demo), name))
    for words in ("Typical values are no limits", "safe operating area", "hazardous voltage", "verify on the bench"):
        assert words in said


@pytest.mark.parametrize("t_j, said", [(25.0, "Tj 25 C."), (HOT, "Tj 125 C.")])
def test_the_comment_names_the_temperature(model_of, t_j, said):
    for deck in decks(model_of("cargo_80v"), t_j):
        assert said in comments(deck)


@pytest.mark.parametrize("name", NAMES)
def test_the_simulators_current_tolerance_is_set(model_of, demo, name):
    assert ".OPTIONS ABSTOL=1e-9" in deck_of(model_of(demo), name).text.splitlines()


@pytest.mark.parametrize("name", NAMES)
def test_lines_are_short(model_of, demo, name):
    assert [line for line in deck_of(model_of(demo), name).text.splitlines() if len(line) >= 80] == []


@pytest.mark.parametrize("name", NAMES)
def test_the_first_line_is_a_title_and_the_last_ends_the_circuit(model_of, demo, name):
    model = model_of(demo)
    lines = deck_of(model, name).text.splitlines()
    assert lines[0].startswith(f"* {model.part.name}: ")
    assert lines[-1] == ".END"


# A p-channel part


@pytest.mark.parametrize("name", ["capacitance", "output", "gate_charge", "double_pulse"])
def test_supplies_and_gate_of_a_p_channel_part_are_negative(model_of, name):
    text = deck_of(model_of(P_CHANNEL), name).text
    levels = re.findall(r"^(?:VDD vdd 0|VDA da 0 DC|VDB db 0 DC|VG g 0) (\S+)", text, re.MULTILINE)
    assert levels
    assert all(float(level) < 0.0 for level in levels)


@pytest.mark.parametrize(
    "name, key, sign",
    [
        ("transfer", "id_1", 1.0),
        ("output", "id_full", 1.0),
        ("gate_charge", "v_plateau", -1.0),
        ("gate_charge", "t_end", 1.0),
        ("diode_recovery", "i_peak", -1.0),
        ("double_pulse", "i_load", -1.0),
    ],
)
def test_what_a_p_channel_part_is_expected_to_show_has_its_sign(model_of, name, key, sign):
    assert math.copysign(1.0, deck_of(model_of(P_CHANNEL), name).expected[key]) == sign


@pytest.mark.parametrize("name, key, sign", [("transfer", "id_1", -1.0), ("double_pulse", "i_load", 1.0)])
def test_what_an_n_channel_part_is_expected_to_show_has_its_sign(model_of, name, key, sign):
    assert math.copysign(1.0, deck_of(model_of("cargo_80v"), name).expected[key]) == sign


def test_the_title_of_a_p_channel_circuit_has_the_datasheets_signs(model_of):
    assert "gate charge at VDD -20 V, ID -30 A" in comments(deck_of(model_of(P_CHANNEL), "gate_charge"))


# The command


@pytest.fixture(scope="module")
def model_json(model_of, tmp_path_factory):
    path = tmp_path_factory.mktemp("models") / "model.json"
    model_of("cargo_80v").save(path)
    return path


@pytest.fixture
def run(monkeypatch, capsys):
    """``run("decks", path)``: exit status, what it says, and what it complains of."""

    def call(*arguments):
        monkeypatch.setattr(sys, "argv", ["fetwright", *map(str, arguments)])
        with pytest.raises(SystemExit) as stopped:
            main()
        said = capsys.readouterr()
        return stopped.value.code or 0, said.out, said.err

    return call


def contents(folder):
    return {path.name: path.read_bytes() for path in folder.iterdir()}


def test_the_command_writes_the_files_and_names_them(run, model_json, tmp_path):
    status, out, err = run("decks", model_json, "--out", tmp_path / "mine")
    assert (status, err) == (0, "")
    assert set(out.splitlines()) == {str(path) for path in (tmp_path / "mine").iterdir()}
    expected = deck_files(load_model(model_json))
    assert contents(tmp_path / "mine") == {name: text.encode() for name, text in expected.items()}


def test_the_command_writes_the_files_for_another_temperature(run, model_json, tmp_path):
    status, _, err = run("decks", model_json, "--out", tmp_path / "mine", "--tj", HOT)
    assert (status, err) == (0, "")
    expected = deck_files(load_model(model_json), HOT)
    assert contents(tmp_path / "mine") == {name: text.encode() for name, text in expected.items()}


def test_the_command_writes_the_same_bytes_twice(run, model_json, tmp_path):
    for folder in ("first", "second", "second"):
        assert run("decks", model_json, "--out", tmp_path / folder)[0] == 0
    assert contents(tmp_path / "first") == contents(tmp_path / "second")


def test_the_command_replaces_its_own_files(run, model_json, tmp_path):
    run("decks", model_json, "--out", tmp_path / "mine")
    status, _, err = run("decks", model_json, "--out", tmp_path / "mine", "--tj", HOT)
    assert (status, err) == (0, "")
    expected = deck_files(load_model(model_json), HOT)
    assert contents(tmp_path / "mine") == {name: text.encode() for name, text in expected.items()}


def test_the_command_leaves_the_users_files_alone(run, model_json, tmp_path):
    (tmp_path / "mine.cir").write_text("my own circuit")
    assert run("decks", model_json, "--out", tmp_path)[0] == 0
    assert (tmp_path / "mine.cir").read_text() == "my own circuit"
    assert (tmp_path / "gate_charge.cir").exists()


def test_the_command_says_once_that_it_extrapolates(run, model_json, tmp_path):
    status, _, err = run("decks", model_json, "--out", tmp_path / "mine", "--tj", "300")
    assert status == 0
    (line,) = err.splitlines()
    assert line.startswith("fetwright: note: ")
    assert "300 C" in line


def test_the_command_refuses_what_is_no_temperature(run, model_json, tmp_path):
    status, out, err = run("decks", model_json, "--out", tmp_path / "mine", "--tj", "-300")
    assert (status, out) == (2, "")
    assert err.startswith("fetwright: ")
    assert list(tmp_path.iterdir()) == []


def test_the_command_refuses_what_is_no_model(run, tmp_path):
    (tmp_path / "model.json").write_text("{}")
    status, out, _ = run("decks", tmp_path / "model.json", "--out", tmp_path / "mine")
    assert (status, out) == (2, "")
    assert not (tmp_path / "mine").exists()
