"""The emitted subcircuit in ngspice: accepted without a warning, and the tool's own curves come out of it."""

from dataclasses import replace

import numpy as np
import pytest
from simulators import ngspice

from fitter.models.diode import forward_voltage
from fitter.part import Package
from fitter.writers.elements import element_subcircuit
from fitter.writers.netlist import subcircuit

pytestmark = pytest.mark.simulator

#: Circuits of amperes need it; see the subcircuit's header.
OPTIONS = ".options ABSTOL=1e-9\n"
#: Nearly ideal: it clamps at a few millivolts above its supply.
CLAMP = ".model clamp D(IS=1e-9 N=0.1)\n"


@pytest.fixture
def model(fitted, demo):
    return fitted(demo, True)


def bare(model):
    """The model without package: a measuring bridge subtracts gate resistance and leads, too."""
    return replace(model, part=replace(model.part, package=Package()))


def write(model, folder):
    (folder / "part.lib").write_text(model.subcircuit(), encoding="ascii")
    return f"test\n.include part.lib\n{OPTIONS}"


def swapped(model, first, second):
    """Two nodes in the order that suits the channel's polarity."""
    return f"{first} {second}" if model.sign > 0 else f"{second} {first}"


@pytest.mark.parametrize("share", [0.01, 0.1, 0.4, 0.9])
def test_capacitances_at_one_megahertz(model, tmp_path, share):
    v_ds = model.sign * share * model.part.v_ds_max
    begin, name, omega = write(bare(model), tmp_path), model.part.name, 2e6 * np.pi
    drive = f"Vd d 0 DC {v_ds} AC 1\nVg g 0 0\nX1 d g 0 {name}\n.ac lin 1 1e6 1e6\n"
    row = ngspice(begin + drive, tmp_path, columns=["i(vg)", "i(vd)"])[0]
    c_rss, c_oss = abs(row[2]) / omega, abs(row[4]) / omega
    drive = f"Vd d 0 DC {v_ds}\nVg g 0 DC 0 AC 1\nX1 d g 0 {name}\n.ac lin 1 1e6 1e6\n"
    c_iss = abs(ngspice(begin + drive, tmp_path, columns=["i(vg)"])[0][2]) / omega
    assert c_rss == pytest.approx(float(model.crss(v_ds)), rel=0.005)
    assert c_oss == pytest.approx(float(model.coss(v_ds)), rel=0.005)
    assert c_iss == pytest.approx(float(model.ciss(v_ds)), rel=0.005)


def test_transfer_and_output(model, tmp_path):
    s, name = model.sign, model.part.name
    begin, v_gs = write(model, tmp_path), s * model.test_point().v_gs
    for v_ds in (s * 10.0, s * 0.5):
        sweep = f".dc Vg {0.3 * v_gs} {v_gs} {v_gs / 40}\n"
        rows = ngspice(f"{begin}Vd d 0 {v_ds}\nVg g 0 0\nX1 d g 0 {name}\n{sweep}", tmp_path, columns=["i(vd)"])
        expected = model.drain_current(rows[:, 0], v_ds)
        carried = np.abs(expected) > 1e-6 * np.abs(expected).max()
        np.testing.assert_allclose(-rows[carried, 1], expected[carried], rtol=0.005, atol=1e-6)


@pytest.mark.parametrize("load", ["current", "resistive"])
def test_gate_charge_by_a_constant_gate_current(model, tmp_path, load):
    s, p = model.sign, model.test_point()
    expected = model.gate_charge(s * p.v_dd, s * p.i_d, s * p.v_gs, load)
    i_g = 1e-3
    duration = expected.total / i_g
    start = duration / 50
    if load == "current":
        source = f"Iload {swapped(model, 'vdd', 'd')} {p.i_d}\nDclamp {swapped(model, 'd', 'vdd')} clamp\n"
    else:
        source = f"Rload vdd d {p.v_dd / p.i_d}\n"
    deck = (
        write(bare(model), tmp_path) + CLAMP + f"Vdd vdd 0 {s * p.v_dd}\n" + source
        + f"Ig {swapped(model, '0', 'g')} PULSE(0 {i_g} {start} 1n 1n 1 2)\nRleak g 0 1e9\n"
        + f"X1 d g 0 {model.part.name}\n.tran {duration / 1000} {duration + start} 0 {duration / 1000}\n"
    )  # fmt: skip
    rows = ngspice(deck, tmp_path, columns=["v(g)"])
    charge, v_gs = (rows[:, 0] - start) * i_g, s * rows[:, 1]
    levels = np.linspace(0.1, 0.97, 60) * p.v_gs
    found = np.interp(levels, np.maximum.accumulate(v_gs), charge)
    wanted = np.interp(levels, np.abs(expected.v_gs), expected.q_g)
    np.testing.assert_allclose(found, wanted, rtol=0.005, atol=0.0005 * expected.total)


@pytest.mark.parametrize("form", [subcircuit, element_subcircuit], ids=["expressions", "elements"])
def test_charges_return_their_energy_over_a_cycle(model, tmp_path, form):
    """From off to off again, at the same voltages: what the charges took up they have given back."""
    s, p = model.sign, model.test_point()
    t_switch = 40 * (5.0 + (model.part.package.r_g or 0.0)) * float(model.ciss(s * p.v_dd))
    period = 12 * t_switch
    text = form(bare(model))
    (tmp_path / "part.lib").write_text(text, encoding="ascii")
    deck = (
        f"test\n.include part.lib\n{OPTIONS}"
        + f"Vdd vdd 0 {s * p.v_dd}\nRload vdd d {p.v_dd / p.i_d}\nRgate in g 5\nX1 d g 0 {model.part.name}\n"
        + f"Vdrive in 0 PULSE(0 {s * p.v_gs} {period / 4} 1n 1n {period / 4} {period})\n"
        + f".tran {t_switch / 200} {period} 0 {t_switch / 200}\n"
    )  # fmt: skip
    inner = "v(x1.drain_core)", "v(x1.drain_in)", "v(x1.source_core)", "v(x1.source_in)"
    given = [name for name in inner if name.split(".")[1][:-1] in text.split()]
    # Linear capacitors beside them return their energy without being looked at.
    currents = [f"i(v.x1.vq{name})" for name in ("gd", "gs", "gsb", "ds") if f"\nVQ{name.upper()} " in text]
    rows = ngspice(deck, tmp_path, columns=["v(d)", "v(g)", "i(vdd)", *currents, *given])
    time, v_d, v_g, i_dd = rows[:, :4].T
    at = dict(zip([*currents, *given], rows[:, 4:].T, strict=True))
    i_gd, i_gs, i_gsb, i_ds = (at.get(f"i(v.x1.vq{name})", 0.0) for name in ("gd", "gs", "gsb", "ds"))
    drain_core = at.get("v(x1.drain_core)", v_d)
    drain_in = at.get("v(x1.drain_in)", drain_core)
    source_core = at.get("v(x1.source_core)", 0.0 * v_d)
    source_in = at.get("v(x1.source_in)", source_core)
    # The currents are in n-channel polarity, as the voltages that drive them.
    power = s * ((drain_in - v_g) * i_gd + (v_g - source_in) * (i_gs + i_gsb) + (drain_core - source_core) * i_ds)
    supplied = np.trapezoid(-s * p.v_dd * i_dd, time)
    assert supplied > 0.0
    stored = np.max(np.abs(np.cumsum(power[1:] * np.diff(time))))
    assert stored > 1e-3 * supplied / 100
    assert abs(np.trapezoid(power, time)) < 0.005 * supplied


def test_reverse_conduction_with_the_channel_on_and_off(model, tmp_path):
    s, p = model.sign, model.test_point()
    current = 0.5 * p.i_d
    drops = []
    for v_gs in (0.0, p.v_gs):
        deck = (
            write(bare(model), tmp_path)
            + f"Vg g 0 {s * v_gs}\nIr {swapped(model, 'd', '0')} {current}\nX1 d g 0 {model.part.name}\n.op\n"
        )  # fmt: skip
        drops.append(-s * ngspice(deck, tmp_path, columns=["v(d)"])[0, -1])
    diode = model.transistor().diode
    assert drops[0] == pytest.approx(float(forward_voltage(current, diode)), rel=0.02)
    on = current / -float(s * model.drain_current(s * p.v_gs, -s * 1e-3)) * 1e-3
    assert drops[1] == pytest.approx(on, rel=0.1)
    assert drops[1] < drops[0]
