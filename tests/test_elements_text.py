"""The element form's text: which elements it uses, how they are named, what its header says."""

import re

import numpy as np
import pytest

from fitter.errors import OutputError
from fitter.models.diode import saturation_current, thermal_voltage
from fitter.writers import element_laws
from fitter.writers.elements import element_accuracy, element_subcircuit
from fitter.writers.netlist import subcircuit

#: How many words each kind of element has, its name included, when its value is a constant.
WORDS = {"C": 4, "D": 4, "E": 6, "F": 5, "G": 6, "L": 4, "M": 8, "R": 4, "V": 4}
#: How many of them are nodes.
NODES = {"C": 2, "D": 2, "E": 4, "F": 2, "G": 4, "L": 2, "M": 4, "R": 2, "V": 2}


@pytest.fixture
def model(fitted, demo):
    return fitted(demo, True)


def statements(text):
    """Statements without comments, continued lines joined, as words."""
    lines = [line for line in text.splitlines() if not line.startswith("*")]
    return [line.split() for line in "\n".join(lines).replace("\n+", " ").splitlines()]


def elements(text):
    return [words for words in statements(text) if not words[0].startswith(".")]


def models(text):
    return {words[1]: words[2:] for words in statements(text) if words[0] == ".MODEL"}


def test_no_expressions(model):
    text = element_subcircuit(model)
    for words in elements(text):
        assert len(words) == WORDS[words[0][0]], words
        if words[0][0] in "CEFGLRV":
            assert np.isfinite(float(words[-1])), words
    assert {card[0].split("(")[0] for card in models(text).values()} <= {"D", "NMOS", "PMOS"}
    assert all("LEVEL=1" in card[0] for card in models(text).values() if "MOS" in card[0])
    body = "\n".join(" ".join(words) for words in statements(text))
    assert not re.search(r"[{}'\"]|VALUE|POLY|PARAM", body, re.IGNORECASE)


def test_lines_are_short_and_plain(model):
    text = element_subcircuit(model)
    assert text.isascii()
    assert max(len(line) for line in text.splitlines()) < 80


def test_names_are_unique_and_models_come_first(model):
    text = element_subcircuit(model)
    names = [words[0].lower() for words in elements(text)] + [name.lower() for name in models(text)]
    assert len(set(names)) == len(names)
    declared = set()
    for words in statements(text):
        if words[0] == ".MODEL":
            declared.add(words[1])
        elif words[0][0] in "DM":
            assert words[NODES[words[0][0]] + 1] in declared, words


def test_no_node_hangs(model):
    used = [node for words in elements(element_subcircuit(model)) for node in words[1 : NODES[words[0][0]] + 1]]
    ends = {"drain", "gate", "source", "0"}
    assert ends <= set(used)
    alone = {node for node in used if used.count(node) < 2} - ends
    assert not alone


def test_the_same_model_gives_the_same_text(model):
    assert element_subcircuit(model) == element_subcircuit(model, 25.0, model.part.name)


def test_name(fitted):
    model = fitted("camper_van_p40v", True)
    assert "\n.SUBCKT mine drain gate source\n" in element_subcircuit(model, name="mine")
    with pytest.raises(OutputError, match="cannot name a subcircuit"):
        element_subcircuit(model, name="1 .control")


def test_accuracy_stands_in_the_header(model):
    accuracy = element_accuracy(model)
    assert 0.0 < accuracy.rms <= accuracy.largest < 1e-5
    assert accuracy.v_ds == (0.1, model.part.v_ds_max)
    text = element_subcircuit(model)
    head = " ".join(line.lstrip("* ") for line in text[: text.index(".SUBCKT")].splitlines())
    assert f"by {100 * accuracy.rms:.2g} % rms, {100 * accuracy.largest:.2g} % at the most" in head


def test_accuracy_follows_the_circuits(fitted, monkeypatch):
    model = fitted("cargo_80v", True)
    # A bend that is cut off where it still bends, and a split of 26 mV, are bad ones.
    monkeypatch.setattr(element_laws, "BEND_LIMIT", 4.0)
    assert 0.01 < element_accuracy(model).largest < 0.5
    monkeypatch.undo()
    monkeypatch.setattr(element_laws, "_SPLIT_WIDTH", 0.026)
    assert 0.001 < element_accuracy(model).largest < 0.5


def test_polarity(model):
    card = models(element_subcircuit(model))["squarelaw"]
    kind, v_to = ("PMOS", -1.0) if model.part.channel == "p" else ("NMOS", 1.0)
    assert card[0].startswith(kind)
    v_th = float(model.transistor().channel.v_th)
    assert float(re.search(r"VTO=(\S+)", " ".join(card))[1]) == pytest.approx(v_to * v_th)


def test_body_diode_of_a_wide_gap(fitted):
    """Its saturation current is below what simulators take; a voltage source makes up for a larger one."""
    model = fitted("ferry_charger_1200v", True)
    own = float(saturation_current(25.0, model.transistor().diode))
    assert own < 1e-28
    text = element_subcircuit(model)
    card = " ".join(models(text)["bodyjunction"])
    i_s, n = (float(re.search(rf"\b{key}=([^\s)]+)", card)[1]) for key in ("IS", "N"))
    (shift,) = [float(words[-1]) for words in elements(text) if words[0] == "VBODY"]
    assert i_s == pytest.approx(1e-14)
    # The same current at 2.5 V as the diode without the source.
    v_t = n * float(thermal_voltage(27.0))
    assert i_s * np.exp((2.5 - shift) / v_t) == pytest.approx(own * np.exp(2.5 / v_t), rel=1e-6)


@pytest.mark.parametrize("form", [subcircuit, element_subcircuit])
def test_no_resistance_is_a_rounding_error(model, form):
    low, high = model.validity.t_j[0], model.validity.t_j[-1]
    for t_j in np.linspace(np.ceil(low), np.floor(high), 12):
        text = form(model, float(t_j))
        r_s = float(re.search(r"RS=([^\s)]+)", " ".join(models(text)["bodyjunction"]))[1])
        rest = [float(words[-1]) for words in elements(text) if words[0][0] == "R" and words[0] not in ("RCH",)]
        assert r_s == 0.0 or r_s >= 1e-7
        assert min(rest) >= 1e-7
