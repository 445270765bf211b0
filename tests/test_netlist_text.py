"""The subcircuit's text: what stands in it, in a form that every simulator reads the same way."""

from __future__ import annotations

import math
import re
from dataclasses import replace
from itertools import pairwise

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fitter.errors import ExtrapolationWarning, OperatingPointError, OutputError
from fitter.interface import Model
from fitter.part import Package
from fitter.version import VERSION
from fitter.writers.model_file import model_from_text, model_text
from fitter.writers.netlist import subcircuit
from fitter.writers.netlist_text import comment, harmless, number, signed, statement

LETTERS = "RCLVEFGDX"
fuzz = settings(max_examples=200, deadline=None, derandomize=True)


@pytest.fixture
def model(fitted, demo):
    return fitted(demo)


@pytest.fixture
def text(model):
    return model.subcircuit()


def statements(text):
    """The statements with their continued lines joined, without comments."""
    lines = [line for line in text.splitlines() if not line.startswith("*")]
    return re.sub(r"\n\+ ", " ", "\n".join(lines)).splitlines()


def elements(text):
    """Name and nodes of each element between .SUBCKT and .ENDS."""
    found = []
    for line in statements(text):
        words = line.split()
        if words[0][0].upper() in LETTERS:
            found.append((words[0], words[1:3]))
    return found


def comments(text):
    """The comment as running text."""
    lines = [line[1:].strip() for line in text.splitlines() if line.startswith("*")]
    return " ".join(" ".join(lines).split())


# Its frame


def test_the_nodes_are_drain_gate_source(model, text):
    (line,) = [line for line in statements(text) if line.upper().startswith(".SUBCKT")]
    assert line.split() == [".SUBCKT", model.part.name, "drain", "gate", "source"]


def test_it_ends_with_its_own_name(model, text):
    assert text.endswith(f"\n.ENDS {model.part.name}\n")
    assert text.upper().count(".ENDS") == 1


def test_only_comments_stand_above_it(text):
    above = text[: text.index(".SUBCKT")]
    assert above
    assert all(line.startswith("*") for line in above.splitlines())


def test_another_name_names_both_ends(model):
    text = subcircuit(model, name="Other_1")
    assert ".SUBCKT Other_1 drain gate source\n" in text
    assert text.endswith(".ENDS Other_1\n")


@pytest.mark.parametrize("name", ["", "a b", "9a", "a\n.control", "a" * 33, "\u00e4", "a;b", "a.b", "a-b", "*"])
def test_a_name_that_cannot_name_a_subcircuit_is_refused(fitted, name):
    with pytest.raises(OutputError, match="cannot name a subcircuit"):
        subcircuit(fitted("cargo_80v"), name=name)


# Its form


def test_lines_are_below_80_characters(text):
    assert max(map(len, text.splitlines())) < 80


def test_every_line_is_a_comment_a_statement_or_a_continuation(text):
    for line in text.splitlines():
        assert re.match(rf"\*|\+ |\.(SUBCKT|ENDS|MODEL) |[{LETTERS}][A-Z0-9]+ ", line), line


def test_a_continuation_follows_a_statement(text):
    lines = text.splitlines()
    for before, line in pairwise(lines):
        if line.startswith("+"):
            assert not before.startswith("*")


def test_it_is_plain_ascii_without_tabs(text):
    assert text.isascii()
    assert all(line.isprintable() for line in text.split("\n"))


def test_there_are_no_empty_lines(text):
    assert "" not in text.removesuffix("\n").split("\n")


def expressions(text):
    return re.findall(r"\{([^{}]*)\}", "\n".join(statements(text)))


def test_expressions_use_only_functions_that_all_simulators_spell_alike(text):
    found = expressions(text)
    assert len(found) >= 3
    for expression in found:
        functions = set(re.findall(r"([A-Za-z_]\w*)\s*\(", expression)) - {"V"}
        assert functions <= {"min", "max", "abs", "exp", "log"}
        without_functions = re.sub(r"[A-Za-z_]\w*\s*\(", "(", re.sub(r"V\(\w+,\w+\)", "1", expression))
        assert re.fullmatch(r"[-+*/(), 0-9.e]*", without_functions), without_functions


@pytest.mark.parametrize("sign", ["^", "**", "?", "<", ">", "&", "|", "==", "!"])
def test_expressions_have_no_power_and_no_condition(text, sign):
    assert sign not in "\n".join(statements(text))


def test_expressions_have_balanced_parentheses(text):
    for line in statements(text):
        depth = 0
        for character in line:
            depth += {"(": 1, ")": -1}.get(character, 0)
            assert depth >= 0
        assert depth == 0
        assert line.count("{") == line.count("}")


def test_no_statement_has_a_word_that_is_no_number(text):
    assert not re.search(r"\b(nan|inf|none|true|false)\b", "\n".join(statements(text)), re.IGNORECASE)


def test_element_names_are_unique_regardless_of_case(text):
    names = [name.lower() for name, _ in elements(text)]
    assert len(names) > 10
    assert len(set(names)) == len(names)


def test_no_model_has_the_name_of_an_element_regardless_of_case(text):
    models = [line.split()[1].lower() for line in statements(text) if line.upper().startswith(".MODEL")]
    assert models
    assert len(set(models)) == len(models)
    assert not set(models) & {name.lower() for name, _ in elements(text)}


def test_no_element_name_is_also_a_node(text):
    nodes = {node.lower() for _, pair in elements(text) for node in pair}
    assert not nodes & {name.lower() for name, _ in elements(text)}


def test_every_node_is_connected_twice(text):
    ends = [node for _, pair in elements(text) for node in pair]
    for node in set(ends) - {"drain", "gate", "source", "0"}:
        assert ends.count(node) >= 2, node


def test_every_voltage_is_between_nodes_that_there_are(text):
    nodes = {node for _, pair in elements(text) for node in pair}
    for pair in re.findall(r"V\((\w+),(\w+)\)", "\n".join(statements(text))):
        assert set(pair) <= nodes


def test_the_same_model_gives_the_same_text(model, text):
    assert model.subcircuit() == text
    assert model_from_text(model_text(model), Model).subcircuit() == text


# What stands above it


def test_the_header_names_part_and_version(model, text):
    above = comments(text)
    assert f"{model.part.name}: {model.part.channel}-channel power MOSFET, nodes drain gate source" in above
    assert f"Fitted by fetwright {VERSION}" in above
    assert model.part.notes.replace("\N{MINUS SIGN}", "-") in above


def test_the_header_has_neither_date_nor_place(text):
    assert not re.search(r"\b20\d\d-\d\d|\d\d:\d\d|/home|/root|/tmp", text)


def test_the_header_names_what_was_fitted(model, text):
    above = comments(text)
    fitted_to = above[above.index("Fitted to") : above.index("Range of validity")]
    names = {point.curve for point in model.points}
    assert names
    for name in names:
        assert name in fitted_to
    for check in model.checks:
        if check.used_in_fit and check.quantity in ("vgs_th", "rds_on"):
            assert f"{check.quantity} at {check.condition}" in fitted_to


@pytest.mark.parametrize("used, said", [(False, "not fitted"), (True, "fitted, and no check of the model any more")])
def test_the_header_says_whether_the_gate_charge_was_fitted(fitted, used, said):
    assert f"the gate charge: {said}" in comments(fitted("camper_van_p40v", used).subcircuit())


def test_the_header_names_the_range_of_validity(model, text):
    above, sign = comments(text), model.sign
    known = model.validity
    for label, ends, unit in (
        ("VDS of the capacitances", known.capacitance_v_ds, "V"),
        ("VDS of the current", known.current_v_ds, "V"),
        ("VGS", known.v_gs, "V"),
        ("ID", known.i_d, "A"),
    ):
        assert f"- {label}: {sign * ends[0]:.4g} to {sign * ends[1]:.4g} {unit}" in above
    assert f"Tj: digitized at {known.t_j[0]:g} to {known.t_j[1]:g} C; this subcircuit is for 25 C" in above


def test_the_header_leaves_out_ranges_that_are_not_known(fitted):
    model = fitted("cargo_80v")
    model = replace(model, validity=replace(model.validity, current_v_ds=None))
    assert "VDS of the current" not in model.subcircuit()


def test_ratings_have_the_signs_of_the_datasheet(fitted):
    assert "rated VDS -40 V, VGS 20 V" in comments(fitted("camper_van_p40v").subcircuit())
    assert "rated VDS 80 V, VGS 20 V" in comments(fitted("cargo_80v").subcircuit())


def test_the_header_lists_every_parameter(model, text):
    above = comments(text)
    for p in model.parameters.values():
        shown = " ".join(f"{p.value:.6g} {p.unit}".split())
        assert f"{p.name} = {shown} ({p.origin}): {p.meaning}" in above


@pytest.mark.parametrize(
    "words",
    [
        "ABSTOL=1e-9",
        "Typical values are no limits",
        "Safe operating area, avalanche, short circuit and self-heating are not in it",
        "injure or kill, also after they are switched off",
        "verify on the bench",
        "Local codes and licensed practice come first",
    ],
)
def test_the_header_cautions(text, words):
    assert words in comments(text)


# Temperature


def test_another_temperature_is_named(model):
    text = model.subcircuit(t_j=100.0)
    assert "this subcircuit is for 100 C," in comments(text)
    assert "an extrapolation" not in comments(text)


def test_another_temperature_changes_the_circuit(model, text):
    assert statements(model.subcircuit(t_j=100.0)) != statements(text)


def test_an_extrapolation_warns_and_says_so(model):
    with pytest.warns(ExtrapolationWarning, match="300 C"):
        text = model.subcircuit(t_j=300.0)
    assert "this subcircuit is for 300 C, an extrapolation" in comments(text)


@pytest.mark.parametrize("t_j", [-300.0, math.nan, math.inf])
@pytest.mark.filterwarnings("ignore::fitter.errors.ExtrapolationWarning")
def test_what_is_no_temperature_is_refused(fitted, t_j):
    with pytest.raises(OperatingPointError):
        fitted("cargo_80v").subcircuit(t_j=t_j)


# Package and body diode


def packaged(model, **values):
    return replace(model, part=replace(model.part, package=Package(**values)))


@pytest.mark.parametrize(
    "element, terminal, name", [("LD", "drain", "l_d"), ("LG", "gate", "l_g"), ("LS", "source", "l_s")]
)
def test_lead_inductances_are_at_their_terminals(model, text, element, terminal, name):
    (line,) = [line for line in statements(text) if line.startswith(f"{element} ")]
    _, node, _, value = line.split()
    assert node == terminal
    assert float(value) == pytest.approx(getattr(model.part.package, name), rel=1e-9)


def test_the_gate_resistance_is_behind_its_inductance(model, text):
    found = {line.split()[0]: line.split() for line in statements(text)}
    assert found["RG"][1] == found["LG"][2]
    assert float(found["RG"][3]) == pytest.approx(model.part.package.r_g, rel=1e-9)


def test_series_resistances_are_those_of_the_model(model, text):
    for terminal, name in (("D", "r_d"), ("S", "r_s")):
        values = [float(line.split()[3]) for line in statements(text) if re.match(rf"R{terminal}C? ", line)]
        assert sum(values) == pytest.approx(model.parameters[name].value, rel=1e-6)


def test_without_package_there_are_no_leads(model):
    names = [name for name, _ in elements(packaged(model).subcircuit())]
    assert not [name for name in names if name.startswith("L")]
    assert "RG" not in names


def test_one_package_element_alone(model):
    names = [name for name, _ in elements(packaged(model, l_s=2e-9).subcircuit())]
    assert [name for name in names if name.startswith("L")] == ["LS"]


def test_a_value_that_is_not_finite_is_refused(fitted):
    with pytest.raises(OutputError, match="no simulator takes"):
        packaged(fitted("cargo_80v"), r_g=math.inf).subcircuit()


def test_the_body_diode_points_from_source_to_drain(model, text):
    (line,) = [line for line in statements(text) if line.startswith("D")]
    anode, cathode = line.split()[1:3]
    # A saturation current too small for simulators is shifted by a voltage source in front of the anode.
    shift = [line.split() for line in statements(text) if line.startswith("VBODY")]
    anode = shift[0][1] if shift else anode
    ends = ("source", "drain") if model.part.channel == "n" else ("drain", "source")
    assert (anode.partition("_")[0], cathode.partition("_")[0]) == ends


def test_the_body_diode_has_one_model_with_positive_values(text):
    (card,) = [line for line in statements(text) if line.startswith(".MODEL")]
    (diode,) = [line for line in statements(text) if line.startswith("D")]
    assert card.split()[1] == diode.split()[3]
    values = dict(re.findall(r"(\w+)=([-+.0-9e]+)", card))
    assert float(values["IS"]) > 0.0
    assert float(values["N"]) > 0.5
    assert float(values["RS"]) >= 0.0
    assert float(values["TT"]) > 0.0


# Texts from elsewhere


@pytest.mark.parametrize("end", ["\n", "\r", "\r\n", "\v", "\f", "\x1c", "\x85", "\u2028", "\u2029", "\0"], ids=ascii)
def test_notes_cannot_leave_the_comment(fitted, end):
    model = fitted("cargo_80v")
    hostile = f"harmless{end}.control{end}shell rm -rf x{end}.endc{end}R99 drain gate 1{end}+ more"
    text = replace(model, part=replace(model.part, notes=hostile)).subcircuit()
    plain = replace(model, part=replace(model.part, notes="")).subcircuit()
    assert statements(text) == statements(plain)
    assert all(line.startswith("*") for line in text[: text.index(".SUBCKT")].splitlines())
    assert ".control" not in text
    assert text.isascii()
    assert max(map(len, text.split("\n"))) < 80


@pytest.mark.parametrize("notes", ["a\\", "a {b} [c]", '"quoted" `shell` $(x) $y', "#!/bin/sh", "<tag> & more"])
def test_notes_lose_what_a_simulator_could_take_for_more_than_text(fitted, notes):
    model = fitted("cargo_80v")
    text = replace(model, part=replace(model.part, notes=notes)).subcircuit()
    (line,) = [line for line in text.splitlines() if line.startswith("* Notes: ")]
    assert not re.search(r'[\\{}\[\]"`$#<>&|!~]', line)


def test_long_notes_are_wrapped(fitted):
    model = fitted("cargo_80v")
    text = replace(model, part=replace(model.part, notes="word " * 200 + "x" * 300)).subcircuit()
    assert max(map(len, text.splitlines())) < 80
    assert comments(text).count("word") == 200


@fuzz
@given(st.text(max_size=300))
def test_any_text_stays_in_its_comment(text):
    for line in comment(text, indent="  ").split("\n"):
        assert line.startswith("*")
        assert len(line) < 80
        assert line.isascii()
        assert line.isprintable()


@fuzz
@given(st.text(max_size=100))
def test_text_made_harmless_once_is_harmless(text):
    assert harmless(harmless(text)) == harmless(text)


@fuzz
@given(st.text(alphabet=".abcde +-", max_size=40))
def test_no_word_of_a_harmless_text_looks_like_a_command(text):
    assert not re.search(r"(^|\s)\.[a-z]", harmless(text))


@fuzz
@given(st.lists(st.text(alphabet="abcV(),.0123456789+-*/", min_size=1, max_size=30), min_size=1, max_size=60))
def test_a_statement_that_is_cut_keeps_its_words(words):
    text = "R1 " + " ".join(words)
    lines = statement(text).split("\n")
    assert all(line.startswith("+ ") for line in lines[1:])
    assert max(map(len, lines)) < 80
    assert " ".join([lines[0], *(line[2:] for line in lines[1:])]) == text


@fuzz
@given(st.floats(-1e300, 1e300))
def test_a_number_is_one_word_with_ten_digits(value):
    word = number(value)
    assert re.fullmatch(r"-?\d+(\.\d+)?(e[-+]\d+)?", word)
    assert float(word) == pytest.approx(value, rel=1e-9)


@fuzz
@given(st.floats(-1e300, 1e300))
def test_a_signed_number_continues_a_sum(value):
    sign, word = signed(value).split()
    assert float(f"{sign}{word}") == pytest.approx(value, rel=1e-9)
