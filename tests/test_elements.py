"""The element form in ngspice and gnucap: the same text in both, and the tool's own curves come out of it."""

import re
import subprocess
from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest
from simulators import ngspice, required

from fitter.models.diode import forward_voltage
from fitter.part import Package
from fitter.writers.elements import element_subcircuit

pytestmark = pytest.mark.simulator

OPTIONS = ".options ABSTOL=1e-9\n"
#: Nearly ideal: it clamps at a few millivolts above its supply.
CLAMP = ".model clamp D(IS=1e-9 N=0.5)\n"
SUFFIXES = {"": 1.0, "Meg": 1e6, "G": 1e9, "T": 1e12, "K": 1e3, "m": 1e-3, "u": 1e-6, "n": 1e-9, "p": 1e-12, "f": 1e-15}
FIGURE = re.compile(r"(?P<digits>[-+.0-9]+(?:E[-+]?\d+)?)(?P<suffix>[A-Za-z]*)")


def figure(word):
    """A number as gnucap prints it."""
    digits, suffix = FIGURE.fullmatch(word).group("digits", "suffix")
    return float(digits) * SUFFIXES[suffix]


def gnucap(deck, folder, *, analysis, columns, timeout=120):
    """Run a deck's analysis in gnucap and return what it prints.

    Parameters
    ----------
    deck : str
        Circuit without analysis and ``.end``.
    folder : Path
        Where the deck's own files lie.
    analysis : str
        A command such as ``tran 1n 1u``.
    columns : sequence of str
        What to print, such as ``v(gate)`` or, for the imaginary part, ``ii(vd)``.
    timeout : float
        Seconds.

    Returns
    -------
    ndarray, shape (n, 1 + columns)
        The scale (time, frequency or the swept source), then the columns.
    """
    kind = analysis.split()[0]
    start = "" if kind == "dc" else ".print op v(g)\n.op\n"
    commands = f".options numdgt=9\n{start}.print {kind} {' '.join(columns)}\n.{analysis}\n.end\n"
    (folder / "deck.ckt").write_text(deck.rstrip() + "\n" + commands, encoding="ascii")
    command = [required("gnucap"), "-b", "deck.ckt"]
    result = subprocess.run(command, cwd=folder, capture_output=True, text=True, timeout=timeout, check=False)
    said = result.stdout[result.stdout.rindex("\n#") :].splitlines()[2:] if "\n#" in result.stdout else []
    # Whatever it has to say between or after the rows is a complaint.
    rows = [line.split() for line in said if line.strip()]
    complaints = [row for row in rows if len(row) != 1 + len(columns)]
    assert rows, result.stdout[-2000:]
    assert not complaints, result.stdout[-2000:]
    assert not result.stderr.strip(), result.stderr[-2000:]
    return np.array([[figure(word) for word in row] for row in rows])


@pytest.fixture
def model(fitted, demo):
    return fitted(demo, True)


def bare(model):
    """The model without package: a measuring bridge subtracts gate resistance and leads, too."""
    return replace(model, part=replace(model.part, package=Package()))


def with_values(model, **changes):
    """The model with other parameters; those set to None are left out."""
    values = {name: value for name, value in (model.estimate.values | changes).items() if value is not None}
    return replace(model, estimate=SimpleNamespace(values=values))


def plain(model):
    """The model with both capacitances in the plain form."""
    shields = [f"{field}{n}_{suffix}" for field in ("s", "vs", "ws") for n in (1, 2) for suffix in ("gd", "ds")]
    return with_values(model, **dict.fromkeys(shields))


def write(model, folder, t_j=25.0):
    (folder / "part.lib").write_text(element_subcircuit(model, t_j), encoding="ascii")
    return f"test\n.include part.lib\n{OPTIONS}"


def swapped(model, first, second):
    """Two nodes in the order that suits the channel's polarity."""
    return f"{first} {second}" if model.sign > 0 else f"{second} {first}"


def capacitances(simulator, model, folder, v_ds):
    """Ciss, Coss and Crss at 1 MHz, from two copies of the transistor, one driven at the drain, one at the gate."""
    name, omega = model.part.name, 2e6 * np.pi
    deck = (
        write(model, folder)
        + f"Vd d 0 DC {v_ds} AC 1\nVg g 0 DC 0\nX1 d g 0 {name}\n"
        + f"Ve e 0 DC {v_ds}\nVh h 0 DC 0 AC 1\nX2 e h 0 {name}\n"
    )
    if simulator == "ngspice":
        row = ngspice(deck + ".ac lin 1 1e6 1e6\n", folder, columns=["i(vg)", "i(vd)", "i(vh)"])[0, [2, 4, 6]]
    else:
        row = gnucap(deck, folder, analysis="ac 1e6", columns=["ii(vg)", "ii(vd)", "ii(vh)"])[0, 1:]
    c_rss, c_oss, c_iss = np.abs(row) / omega
    return c_iss, c_oss, c_rss


SIMULATORS = pytest.mark.parametrize("simulator", ["ngspice", "gnucap"])


@SIMULATORS
@pytest.mark.parametrize("form", ["plain", "as fitted"])
def test_capacitances_at_one_megahertz(model, tmp_path, simulator, form):
    # Shields are as exact as junctions.
    model = bare(plain(model) if form == "plain" else model)
    for share in (0.01, 0.03, 0.1, 0.2, 0.4, 0.9):
        v_ds = model.sign * share * model.part.v_ds_max
        found = capacitances(simulator, model, tmp_path, v_ds)
        own = [float(curve(v_ds)) for curve in (model.ciss, model.coss, model.crss)]
        np.testing.assert_allclose(found, own, rtol=0.001, err_msg=f"Ciss, Coss, Crss at {v_ds} V")


def transfer(simulator, model, folder, v_ds, v_gs):
    deck = f"{write(model, folder)}Vd d 0 {v_ds}\nVg g 0 0\nX1 d g 0 {model.part.name}\n"
    sweep = f"dc Vg {v_gs[0]:.6g} {v_gs[-1]:.6g} {v_gs[1] - v_gs[0]:.6g}"
    if simulator == "ngspice":
        return ngspice(f"{deck}.{sweep}\n", folder, columns=["i(vd)"])
    return gnucap(deck, folder, analysis=sweep, columns=["i(vd)"])


@SIMULATORS
def test_transfer_and_output_above_threshold(model, tmp_path, simulator):
    s, channel = model.sign, model.transistor().channel
    # The element form's threshold is sharp, at both ends of the channel: from five widths above it on, the smooth one
    # makes no difference.
    end = 1.5 * model.test_point().v_gs
    for v_ds, above in ((s * 10.0, 0.0), (s * 0.5, 0.5)):
        begin = float(channel.v_th + 5.0 * channel.w) + above
        rows = transfer(simulator, model, tmp_path, v_ds, s * np.linspace(begin, end, 30))
        assert len(rows) >= 29
        np.testing.assert_allclose(-rows[:, 1], model.drain_current(rows[:, 0], v_ds), rtol=0.02)


@SIMULATORS
def test_body_diode(model, tmp_path, simulator):
    s, diode = model.sign, model.transistor().diode
    # The resistor only keeps the drain from hanging in the air before the diode conducts.
    deck = (
        f"{write(model, tmp_path)}Vg g 0 {-s * 5.0}\nIr {swapped(model, 'd', '0')} 1\nRair d 0 1e6\n"
        f"X1 d g 0 {model.part.name}\n"
    )
    i_d = model.test_point().i_d
    sweep = f"dc Ir {0.1 * i_d:.6g} {i_d:.6g} {0.1 * i_d:.6g}"
    if simulator == "ngspice":
        rows = ngspice(f"{deck}.{sweep}\n", tmp_path, columns=["v(d)"])
    else:
        rows = gnucap(deck, tmp_path, analysis=sweep, columns=["v(d)"])
    assert len(rows) >= 9
    np.testing.assert_allclose(-s * rows[:, 1], forward_voltage(rows[:, 0], diode), rtol=0.005)


@SIMULATORS
@pytest.mark.parametrize("form", ["plain", "as fitted"])
def test_gate_charge_by_a_constant_gate_current(model, tmp_path, simulator, form):
    model = bare(plain(model) if form == "plain" else model)
    s, p = model.sign, model.test_point()
    expected = model.gate_charge(s * p.v_dd, s * p.i_d, s * p.v_gs)
    i_g = 1e-3
    duration = expected.total / i_g
    start = duration / 50
    deck = (
        write(model, tmp_path) + CLAMP + f"Vdd vdd 0 {s * p.v_dd}\n"
        + f"Iload {swapped(model, 'vdd', 'd')} {p.i_d}\nDclamp {swapped(model, 'd', 'vdd')} clamp\n"
        + f"Ig {swapped(model, '0', 'g')} PULSE(0 {i_g} {start} 1n 1n 1 2)\nRleak g 0 1e7\n"
        + f"X1 d g 0 {model.part.name}\n"
    )  # fmt: skip
    step = duration / (1000 if simulator == "ngspice" else 4000)
    analysis = f"tran {step} {duration + start} 0 {step}"
    if simulator == "ngspice":
        rows = ngspice(f"{deck}.{analysis}\n", tmp_path, columns=["v(g)"])
    else:
        rows = gnucap(deck, tmp_path, analysis=analysis, columns=["v(g)"])
    charge, v_gs = (rows[:, 0] - start) * i_g, s * rows[:, 1]
    levels = np.linspace(0.1, 0.97, 60) * p.v_gs
    found = np.interp(levels, np.maximum.accumulate(v_gs), charge)
    wanted = np.interp(levels, np.abs(expected.v_gs), expected.q_g)
    close = np.isclose(found, wanted, rtol=0.01, atol=0.002 * expected.total)
    # On the plateau some millivolts, which the sharp threshold costs, are a long way in charge.
    at_same_charge = np.interp(wanted, charge, v_gs)
    assert np.all(close | np.isclose(at_same_charge, levels, rtol=0.002))
    assert np.max(np.abs(found - wanted)) < 0.02 * expected.total
