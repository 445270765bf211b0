"""The model file: what is loaded computes what was saved, and whatever is wrong with a file is said."""

from __future__ import annotations

import copy
import json
import math
import os
import subprocess
import sys
from contextlib import suppress
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from conftest import DEMO_PARTS
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st

from fitter.errors import FitterError, ModelFileError, OutputError
from fitter.interface import Model, load_model
from fitter.writers.model_file import FORMAT, FORMAT_VERSION, model_from_text, model_text

ROOT = Path(__file__).resolve().parents[1]


@pytest.fixture(scope="session")
def whole(fitted):
    """A model file as data."""
    return json.loads(model_text(fitted("camper_van_p40v")))


def load(text):
    return model_from_text(text, Model)


def refused(text):
    """The message for a text that is no model file."""
    with pytest.raises(ModelFileError) as caught:
        load(text)
    message = str(caught.value)
    assert message
    assert len(message) < 300
    return message


def edited(data, path, value):
    """The text of a model file with one node replaced."""
    data = copy.deepcopy(data)
    node = data
    for key in path[:-1]:
        node = node[key]
    assert path[-1] in node if isinstance(node, dict) else len(node) > path[-1]
    node[path[-1]] = value
    return json.dumps(data)


def dropped(data, path):
    """The text of a model file with one node left out."""
    data = copy.deepcopy(data)
    node = data
    for key in path[:-1]:
        node = node[key]
    del node[path[-1]]
    return json.dumps(data)


# There and back


@pytest.fixture(scope="module", params=[(name, used) for name in DEMO_PARTS for used in (False, True)], ids=str)
def pair(request, fitted):
    """A model and what comes back of it from its file."""
    model = fitted(*request.param)
    return model, load(model_text(model))


def test_parameters_come_back(pair):
    saved, loaded = pair
    assert dict(loaded.parameters) == dict(saved.parameters)
    assert list(loaded.parameters) == list(saved.parameters)


def test_capacitances_come_back(pair):
    saved, loaded = pair
    v_ds = saved.sign * np.linspace(0.0, saved.part.v_ds_max, 50)
    for name in ("ciss", "coss", "crss"):
        np.testing.assert_array_equal(getattr(loaded, name)(v_ds), getattr(saved, name)(v_ds))


def test_currents_come_back_at_any_temperature(pair):
    saved, loaded = pair
    v_gs, v_ds = saved.sign * np.linspace(0.0, 10.0, 20), saved.sign * np.array([[0.5], [5.0]])
    for t_j in (25.0, saved.validity.t_j[0], saved.validity.t_j[-1]):
        np.testing.assert_array_equal(loaded.drain_current(v_gs, v_ds, t_j), saved.drain_current(v_gs, v_ds, t_j))


@pytest.mark.parametrize("load_kind", ["current", "resistive"])
def test_gate_charge_comes_back(pair, load_kind):
    saved, loaded = pair
    p = saved.test_point()
    ours, theirs = (m.gate_charge(p.v_dd, p.i_d, p.v_gs, load_kind) for m in pair)
    for name in ("q_g", "v_gs", "v_ds", "i_d", "total", "q_gs", "q_gd", "v_plateau"):
        np.testing.assert_array_equal(getattr(theirs, name), getattr(ours, name))
    assert loaded.test_point() == p


def test_intervals_come_back(pair):
    saved, loaded = pair
    p = saved.test_point()
    ours, theirs = (m.gate_charge_intervals(p.v_dd, p.i_d, p.v_gs) for m in pair)
    assert theirs == ours
    for name in ("ciss", "coss", "crss"):
        v_ds = saved.sign * np.array([1.0, 10.0])
        np.testing.assert_array_equal(loaded.band(name, v_ds), saved.band(name, v_ds))


def test_the_subcircuit_comes_back_word_for_word(pair):
    saved, loaded = pair
    assert loaded.subcircuit() == saved.subcircuit()
    hottest = saved.validity.t_j[-1]
    assert loaded.subcircuit(hottest) == saved.subcircuit(hottest)


def test_everything_else_that_is_stored_comes_back(pair):
    saved, loaded = pair
    for name in ("checks", "notices", "statistics", "trials", "validity", "used_gate_charge", "version"):
        assert getattr(loaded, name) == getattr(saved, name), name
    assert dict(loaded.correlations) == dict(saved.correlations)
    assert loaded.part == replace(saved.part, curves=())


def test_saving_what_was_loaded_gives_the_same_text(pair):
    saved, loaded = pair
    assert model_text(loaded) == model_text(saved)


def test_the_digests_of_the_input_are_stored(fitted, whole):
    part = fitted("camper_van_p40v").part
    assert set(whole["part"]["digests"]) == {"part.toml", *(curve.file for curve in part.curves)}
    assert all(len(digest) == 64 and int(digest, 16) for digest in whole["part"]["digests"].values())


def test_the_file_says_what_it_is(whole):
    assert (whole["format"], whole["format_version"]) == (FORMAT, FORMAT_VERSION)


def test_the_file_is_plain_ascii_and_strict_json(fitted):
    text = model_text(fitted("cargo_80v"))
    assert text.isascii()
    assert text.endswith("\n")

    def no_constants(name):
        raise AssertionError(f"{name} is no JSON")

    json.loads(text, parse_constant=no_constants)


def test_notes_in_any_script_come_back(fitted):
    model = fitted("camper_van_p40v")
    notes = 'f\u00fcr 48 V \u2014 "quoted" \\ \u65e5\u672c\u8a9e'
    model = replace(model, part=replace(model.part, notes=notes))
    assert load(model_text(model)).part.notes == notes


def test_save_and_load(fitted, tmp_path):
    model = fitted("camper_van_p40v")
    model.save(tmp_path / "model.json")
    assert load_model(tmp_path / "model.json").subcircuit() == model.subcircuit()
    assert (tmp_path / "model.json").read_text("ascii") == model_text(model)


def test_save_where_nothing_can_be_written(fitted, tmp_path):
    with pytest.raises(OutputError, match="cannot be written"):
        fitted("camper_van_p40v").save(tmp_path / "absent" / "model.json")


# Damaged files


def test_the_data_that_are_damaged_below_are_whole(whole):
    assert isinstance(load(json.dumps(whole)), Model)


@pytest.mark.parametrize("text", ["", " ", "{", "nonsense", "\ufeff{}", "{'a': 1}", '{"format": NaN', "\0"])
def test_what_is_not_json_is_refused(text):
    assert "JSON" in refused(text)


@pytest.mark.parametrize("text", ["null", "true", "1", "[]", '"model"', "{}", '{"format": null}', '{"format": "x"}'])
def test_json_that_is_no_model_is_refused(text):
    assert "format" in refused(text)


@pytest.mark.parametrize("share", [0.001, 0.1, 0.5, 0.9, 0.9999])
def test_a_truncated_file_is_refused(whole, share):
    text = json.dumps(whole)
    assert "JSON" in refused(text[: int(share * len(text))])


@pytest.mark.parametrize("version", [0, 2, -1, 1.5, "1", None, True, [], 10**30])
def test_another_format_version_is_refused(whole, version):
    assert "version" in refused(edited(whole, ["format_version"], version))


def test_each_key_at_the_top_is_needed(whole):
    for key in whole:
        assert key.removeprefix("format_") in refused(dropped(whole, [key]))


@pytest.mark.parametrize(
    "path",
    [
        ["part", "name"],
        ["part", "channel"],
        ["part", "v_ds_max"],
        ["parameters", "k", "value"],
        ["parameters", "k", "unit"],
        ["estimate", "free"],
        ["estimate", "coordinates"],
        ["estimate", "covariance"],
        ["estimate", "coordinates", 0],
        ["estimate", "covariance", 0],
        ["estimate", "covariance", 0, 0],
        ["estimate", "free", 0],
        ["checks", 0, "verdict"],
    ],
    ids=str,
)
def test_a_missing_key_is_refused(whole, path):
    refused(dropped(whole, path))


@pytest.mark.parametrize("path", [[], ["part"], ["parameters", "k"], ["checks", 0], ["validity"]], ids=str)
def test_an_unknown_key_is_refused(whole, path):
    data = copy.deepcopy(whole)
    node = data
    for key in path:
        node = node[key]
    node["surprise"] = 1
    assert "surprise" in refused(json.dumps(data))


NUMBERS = [
    ["part", "v_ds_max"],
    ["part", "package", "r_g"],
    ["part", "stated", "gate_charge", "q_g", "typ"],
    ["parameters", "k", "value"],
    ["parameters", "k", "stderr"],
    ["estimate", "coordinates", 0],
    ["estimate", "covariance", 0, 0],
    ["estimate", "assumption", "v_dd"],
    ["correlations", 0, "coefficient"],
    ["statistics", 0, "misfit"],
    ["checks", 0, "fitted"],
    ["validity", "i_d", 0],
]


@pytest.mark.parametrize("path", NUMBERS, ids=str)
@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf, "1", "nan", True, [1.0], {}, {"value": 1.0}], ids=str)
def test_what_is_no_finite_number_is_refused(whole, path, value):
    refused(edited(whole, path, value))


def test_a_number_too_large_for_a_computer_is_refused(whole):
    for path in NUMBERS:
        refused(edited(whole, path, 10**400))


@pytest.mark.parametrize("coefficient", [1.01, -1.01, 1e300])
def test_a_correlation_out_of_range_is_refused(whole, coefficient):
    refused(edited(whole, ["correlations", 0, "coefficient"], coefficient))


@pytest.mark.parametrize("name", ["nonsense", ""])
def test_a_correlation_of_an_unknown_parameter_is_refused(whole, name):
    refused(edited(whole, ["correlations", 0, "first"], name))


def test_a_covariance_that_is_not_symmetric_is_refused(whole):
    value = whole["estimate"]["covariance"][0][1]
    assert "symmetric" in refused(edited(whole, ["estimate", "covariance", 0, 1], value + 1.0))


def test_a_negative_variance_is_refused(whole):
    assert "variance" in refused(edited(whole, ["estimate", "covariance", 0, 0], -1.0))


def test_a_covariance_that_implies_correlations_above_one_is_refused(whole):
    data = copy.deepcopy(whole)
    covariance = data["estimate"]["covariance"]
    covariance[0][1] = covariance[1][0] = 3.0 * math.sqrt(covariance[0][0] * covariance[1][1])
    refused(json.dumps(data))


def test_a_coordinate_out_of_bounds_is_refused(whole):
    assert "bounds" in refused(edited(whole, ["estimate", "coordinates", 0], 700.0))


def test_a_free_parameter_that_is_named_twice_is_refused(whole):
    first = whole["estimate"]["free"][0]
    assert "once" in refused(edited(whole, ["estimate", "free", 1], first))


def test_an_unknown_parameter_is_refused(whole):
    assert "nonsense" in refused(edited(whole, ["estimate", "free", 0], "nonsense"))
    data = copy.deepcopy(whole)
    data["estimate"]["fixed"]["nonsense"] = 1.0
    assert "nonsense" in refused(json.dumps(data))


def test_a_table_that_says_another_value_than_the_estimate_is_refused(whole):
    value = whole["parameters"]["k"]["value"]
    assert "parameters.k" in refused(edited(whole, ["parameters", "k", "value"], 1.01 * value))


def test_a_table_that_says_another_name_than_its_key_is_refused(whole):
    refused(edited(whole, ["parameters", "k", "name"], "w"))


@pytest.mark.parametrize(
    "path, value",
    [
        (["part", "channel"], "x"),
        (["part", "stated", "gate_charge", "load"], "inductive"),
        (["checks", 0, "verdict"], "perfect"),
        (["parameters", "k", "origin"], "guessed"),
        (["used_gate_charge"], 1),
        (["statistics", 0, "points"], 1.5),
        (["notices"], "none"),
        (["parameters"], []),
        (["checks"], {}),
        (["validity", "t_j"], 25.0),
    ],
    ids=str,
)
def test_a_value_of_the_wrong_kind_is_refused_and_its_place_named(whole, path, value):
    assert path[-1] in refused(edited(whole, path, value))


@pytest.mark.parametrize("ends", [[], [1.0], [1.0, 2.0, 3.0], [2.0, 1.0]], ids=str)
def test_a_range_without_a_lower_and_an_upper_end_is_refused(whole, ends):
    for key in whole["validity"]:
        refused(edited(whole, ["validity", key], ends))


def test_a_check_of_an_unknown_quantity_is_refused(whole):
    refused(edited(whole, ["checks", 0, "quantity"], "=1+1"))


@pytest.mark.parametrize("value", [0.0, -40.0])
def test_a_rating_that_is_not_positive_is_refused(whole, value):
    refused(edited(whole, ["part", "v_ds_max"], value))


def test_a_negative_package_element_is_refused(whole):
    for key in ("r_g", "l_g", "l_d", "l_s"):
        refused(edited(whole, ["part", "package", key], -1e-9))


# Texts that would leave their place


@pytest.mark.parametrize(
    "name",
    [
        *("", "a b", "9a", "a-b", "a.b", "_a", "\u00c4", "a" * 33, "a;b", "a\n", "a\nR1 1 0 1", "x\n.control\n"),
        *("a\r", "a\u2028b", "a\0", "a/../b", "../a", "*", "a{b}", None, 5, ["a"]),
    ],
    ids=repr,
)
def test_a_name_that_cannot_name_a_subcircuit_is_refused(whole, name):
    refused(edited(whole, ["part", "name"], name))


@pytest.mark.parametrize(
    "path",
    [
        ["part", "notes"],
        ["version"],
        ["parameters", "k", "meaning"],
        ["parameters", "k", "unit"],
        ["statistics", 0, "name"],
        ["checks", 7, "condition"],
        ["checks", 7, "quantity"],
        ["notices", 0, "text"],
    ],
    ids=str,
)
@pytest.mark.parametrize("end", ["\n", "\r", "\r\n", "\v", "\f", "\x1c", "\x85", "\u2028", "\u2029"], ids=ascii)
def test_no_text_adds_a_line_to_the_subcircuit(whole, path, end):
    text = edited(whole, path, f"begin{end}.control{end}shell rm{end}.endc{end}R99 a b 1")
    try:
        netlist = load(text).subcircuit()
    except ModelFileError:
        return
    said, _, circuit = netlist.partition(".SUBCKT")
    assert all(line.startswith("*") for line in said.splitlines())
    assert ".control" not in netlist
    assert "R99" not in circuit


@pytest.mark.parametrize("notes", ["\ud800", "a" * 100_000])
def test_a_text_that_cannot_be_written_is_refused_or_written_all_the_same(whole, notes, tmp_path):
    try:
        model = load(edited(whole, ["part", "notes"], notes))
    except ModelFileError:
        return
    model.save(tmp_path / "model.json")
    assert model.subcircuit().encode("ascii")


# Files that are no text, too large, too deep


def test_errors_name_the_file(tmp_path):
    path = tmp_path / "mine.json"
    path.write_text("{")
    with pytest.raises(ModelFileError, match=r"mine\.json.*JSON"):
        load_model(path)


def test_a_missing_file_is_refused(tmp_path):
    with pytest.raises(ModelFileError, match=r"mine\.json.*no such file"):
        load_model(tmp_path / "mine.json")


def test_a_folder_is_refused(tmp_path):
    with pytest.raises(ModelFileError):
        load_model(tmp_path)


@pytest.mark.parametrize("data", [b"\xff\xfe{\x00}\x00", b"\x89PNG\r\n\x1a\n", bytes(range(256)), b"\x00" * 1000])
def test_bytes_that_are_no_text_are_refused(tmp_path, data):
    (tmp_path / "model.json").write_bytes(data)
    with pytest.raises(ModelFileError):
        load_model(tmp_path / "model.json")


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="the system has no named pipes")
def test_a_pipe_is_refused_and_not_waited_for(tmp_path):
    os.mkfifo(tmp_path / "model.json")
    with pytest.raises(ModelFileError):
        load_model(tmp_path / "model.json")


def test_a_file_that_is_too_large_is_refused(whole, tmp_path):
    (tmp_path / "model.json").write_text(json.dumps(whole) + " " * 5_000_000)
    with pytest.raises(ModelFileError, match="at most"):
        load_model(tmp_path / "model.json")


@pytest.mark.skipif(sys.platform != "linux", reason="a process's memory is limited the Linux way")
def test_a_huge_file_is_refused_without_reading_all_of_it(tmp_path):
    path = tmp_path / "model.json"
    with path.open("wb") as f:
        f.truncate(8 * 2**30)
    code = (
        "import resource, sys\n"
        "from fitter.errors import ModelFileError\n"
        "from fitter.interface import load_model\n"
        "resource.setrlimit(resource.RLIMIT_AS, (4 * 2**30, 4 * 2**30))\n"
        "try:\n    load_model(sys.argv[1])\nexcept ModelFileError:\n    print('refused')\n"
    )
    env = {**os.environ, "PYTHONPATH": str(ROOT), "OPENBLAS_NUM_THREADS": "1"}
    done = subprocess.run(
        [sys.executable, "-c", code, str(path)], env=env, capture_output=True, text=True, timeout=60, check=False
    )
    assert done.stdout == "refused\n", done.stderr[-300:]


@pytest.mark.parametrize("depth", [50, 500, 900, 950, 980, 1000, 5000, 100_000])
@pytest.mark.parametrize("begin, end", [("[", "]"), ('{"a":', "}")])
def test_deep_nesting_is_refused(whole, depth, begin, end):
    deep = begin * depth + "1" + end * depth
    refused(deep)
    refused(json.dumps(whole).replace('"notes": "', f'"notes": {deep}, "more": "', 1))
    refused(json.dumps({**whole, "format_version": "HERE"}).replace('"HERE"', deep))


def test_very_many_items_are_refused(whole):
    refused(edited(whole, ["estimate", "free"], ["k"] * 50_000))
    refused(edited(whole, ["notices"], [whole["notices"][0]] * 30_000))


# Any one node


def nodes(data, path=()):
    """The paths of all nodes below the root."""
    items = data.items() if isinstance(data, dict) else enumerate(data) if isinstance(data, list) else ()
    for key, value in items:
        yield (*path, key)
        yield from nodes(value, (*path, key))


class Damage:
    """A model file with one node dropped or replaced, wherever two numbers say."""

    def __init__(self, whole):
        self.whole = whole
        self.text = json.dumps(whole)
        # By the key at the top: most of a file are correlations, the least of its risks.
        self.places = [[path for path in nodes(whole) if path[0] == key] for key in whole]

    def path(self, top, below):
        paths = self.places[top % len(self.places)]
        return paths[below % len(paths)]

    def replaced(self, top, below, value):
        return edited(self.whole, self.path(top, below), value)

    def dropped(self, top, below):
        return dropped(self.whole, self.path(top, below))


@pytest.fixture(scope="session")
def damage(whole):
    return Damage(whole)


values = st.one_of(
    st.sampled_from([None, True, False, 0, 1, -1, 2, "", "k", "=1+1", "\u2028", [], {}, [[]], [None], {"a": 1}]),
    st.sampled_from([0.0, -0.0, 1e-320, 1e-300, 1e300, -1e300, 1.7e308, math.nan, math.inf, 2**63, 10**300]),
    st.floats(),
    st.text(max_size=10),
)
fuzz = settings(max_examples=100, deadline=None, derandomize=True, suppress_health_check=list(HealthCheck))
somewhere = given(top=st.integers(0, 50), below=st.integers(0, 10**6), value=values)


def model_or_none(text):
    """The model, or None where the text is refused."""
    with suppress(ModelFileError):
        return load(text)
    return None


@fuzz
@somewhere
def test_any_one_node_replaced_gives_a_model_or_an_error(damage, top, below, value):
    model = model_or_none(damage.replaced(top, below, value))
    assert model is None or isinstance(model, Model)


@fuzz
@given(top=st.integers(0, 50), below=st.integers(0, 10**6))
def test_any_one_node_dropped_gives_a_model_or_an_error(damage, top, below):
    model = model_or_none(damage.dropped(top, below))
    assert model is None or isinstance(model, Model)


@pytest.mark.filterwarnings("ignore::fitter.errors.ExtrapolationWarning")
@fuzz
@somewhere
def test_whatever_is_loaded_can_be_used_or_says_why_not(damage, top, below, value):
    model = model_or_none(damage.replaced(top, below, value))
    if model is None:
        return
    # Each raises nothing, or an error that is meant for the user.
    for use in (
        model.subcircuit,
        model.to_frame,
        model.checks_frame,
        lambda: model.beyond(20.0, 30.0, 10.0),
        lambda: model.extrapolation(100.0),
        lambda: model.ciss(1.0),
        lambda: model_text(model),
    ):
        with suppress(FitterError):
            use()


@fuzz
@given(text=st.text(max_size=200) | st.text(alphabet='[]{}",:0123456789.eE+-truefalsn ', max_size=200))
@example(text="1" * 5000)
@example(text='"\\ud800"')
def test_any_text_is_a_model_or_an_error(text):
    refused(text)


@fuzz
@given(at=st.integers(0, 10**7), character=st.sampled_from('0123456789.eE+-"{}[],: nN\\'))
def test_any_one_character_changed_gives_a_model_or_an_error(damage, at, character):
    text = damage.text
    at %= len(text)
    model = model_or_none(text[:at] + character + text[at + 1 :])
    assert model is None or isinstance(model, Model)
