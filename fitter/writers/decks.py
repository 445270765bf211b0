"""Ready-to-run circuits that repeat with the subcircuit what a datasheet measures, each with the values to expect."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from fitter.errors import OperatingPointError
from fitter.model import FittedModel
from fitter.models.diode import TRANSIT_TIME, forward_voltage, recovery
from fitter.models.temperature import REFERENCE
from fitter.models.types import scalar
from fitter.version import VERSION
from fitter.writers.netlist import subcircuit
from fitter.writers.netlist_frame import RINGING
from fitter.writers.netlist_text import comment, number, statement

__all__ = ["Deck", "deck_files", "decks"]

_FREQUENCY = 1e6
#: Gate current of the gate-charge test [A]: small, as the standard wants it.
_GATE_CURRENT = 1e-3
#: Gate resistor of the double pulse [ohm].
_GATE_RESISTOR = 5.0
#: Inductance of the loop through the free-wheel diode [H].
_LOOP = 5e-9
_CAUTION = (
    "Typical values are no limits; safe operating area, avalanche and short circuit are not modelled. Such circuits "
    "carry hazardous voltage: verify on the bench."
)


@dataclass(frozen=True, kw_only=True)
class Deck:
    """A circuit and what it should show.

    Parameters
    ----------
    name : str
        File name without its ending.
    text : str
        The whole circuit.
    expected : dict of str to float
        By the name of the measurement in the circuit, what it should come to.
    """

    name: str
    text: str
    expected: dict[str, float]


def deck_files(model: FittedModel, t_j: float = REFERENCE) -> dict[str, str]:
    """The circuits and the subcircuit they include, by file name.

    Parameters
    ----------
    model : FittedModel
        The model.
    t_j : float
        Junction temperature [degC].

    Returns
    -------
    dict of str to str
    """
    files = {f"{model.part.name}.lib": subcircuit(model, t_j)}
    return files | {f"{deck.name}.cir": deck.text for deck in decks(model, t_j)}


def decks(model: FittedModel, t_j: float = REFERENCE) -> tuple[Deck, ...]:
    """Circuits for C-V, transfer, output, gate charge, diode recovery and a clamped inductive double pulse.

    Parameters
    ----------
    model : FittedModel
        The model.
    t_j : float
        Junction temperature [degC].

    Returns
    -------
    tuple of Deck
        Without the recovery where the model has no body diode that stores charge, and without what the stated
        gate-charge test cannot be run with.

    Raises
    ------
    OperatingPointError
        Where the model knows nothing of that temperature.
    """
    model.transistor(t_j)
    makers: Sequence[Callable[[_Bench], Deck | None]] = (
        _capacitance, _transfer, _output, _gate_charge, _recovery, _double_pulse
    )  # fmt: skip
    bench = _Bench(model=model, t_j=t_j)
    found = []
    for make in makers:
        try:
            found.append(make(bench))
        except OperatingPointError:
            continue  # what the stated test cannot be run with, the others still can
    return tuple(deck for deck in found if deck is not None)


@dataclass(frozen=True, kw_only=True)
class _Bench:
    """The device under test, and words for its polarity."""

    model: FittedModel
    t_j: float

    @property
    def device(self) -> str:
        return self.model.part.name

    def volts(self, value: float) -> float:
        """A voltage or current with the sign of the channel."""
        return self.model.sign * value

    def pair(self, plus: str, minus: str) -> str:
        """Two nodes, exchanged for a p-channel part."""
        return f"{plus} {minus}" if self.model.sign > 0.0 else f"{minus} {plus}"

    def deck(
        self, name: str, title: str, look: str, circuit: Sequence[str], analysis: Sequence[str],
        measurements: Sequence[tuple[str, str, float, str]],
    ) -> Deck:  # fmt: skip
        """Put a circuit together; each measurement is its name, its statement, the value to expect, and its unit."""
        lines = [
            comment(f"{self.device}: {title}"),
            comment(f"Written by fetwright {VERSION}. Tj {self.t_j:g} C. {_CAUTION}"), comment(),
            comment(look), comment(), comment("Expected"),
            *(comment(f"  {n} = {value:.4g} {unit}".rstrip()) for n, _, value, unit in measurements),
            f".INCLUDE {self.device}.lib",
            ".OPTIONS ABSTOL=1e-9", *circuit, *analysis,
            *(f".MEASURE {statement}" for _, statement, _, _ in measurements), ".END",
        ]  # fmt: skip
        return Deck(name=name, text="\n".join(lines) + "\n", expected={n: value for n, _, value, _ in measurements})


def _capacitance(bench: _Bench) -> Deck:
    m = bench.model
    table = m.part.stated.capacitance
    v = bench.volts(table.v_ds if table is not None else 0.5 * m.part.v_ds_max)
    name = bench.device
    circuit = [
        comment("Drain driven: its current is that of Coss, the gate's that of Crss"),
        f"VDA da 0 DC {number(v)} AC 1", "VGA ga 0 0", f"XA da ga 0 {name}",
        comment("Gate driven: its current is that of Ciss"),
        f"VDB db 0 DC {number(v)}", "VGB gb 0 DC 0 AC 1", f"XB db gb 0 {name}",
        comment("Each current charges 1 nF, whatever the frequency: there 1 V is 1 nF"),
        *(line for what, nodes, of in (("coss", "coss 0", "VDA"), ("crss", "0 crss", "VGA"), ("ciss", "ciss 0", "VGB"))
          for line in (f"F{what} {nodes} {of} 1", f"C{what} {what} 0 1n", f"R{what} {what} 0 1G")),
    ]  # fmt: skip
    at = number(_FREQUENCY)
    measurements = [
        (f"{what}_nf", f"AC {what}_nf FIND v({what}) AT={at}", float(c(v)) * 1e9, "")
        for what, c in (("ciss", m.ciss), ("coss", m.coss), ("crss", m.crss))
    ]
    lead = "" if m.part.package.r_g is None else " The internal gate resistance and the leads are in it."
    return bench.deck(
        "capacitance", f"Ciss, Coss and Crss at VDS {v:g} V, VGS 0", f"Small-signal currents at 1 MHz.{lead}", circuit,
        [f".AC LIN 3 {number(0.9e6)} {number(1.1e6)}"], measurements,
    )  # fmt: skip


def _transfer(bench: _Bench) -> Deck:
    m = bench.model
    curves = [c for c in m.part.curves if c.quantity == "transfer" and c.v_ds is not None]
    v_ds = bench.volts(curves[0].v_ds if curves and curves[0].v_ds else 10.0)
    point = m.test_point()
    top = bench.volts(point.v_gs)
    plateau = min(_gate_voltage(m, point.i_d, abs(v_ds), bench.t_j), 0.9 * point.v_gs)
    levels = [bench.volts(round(x, 2)) for x in (plateau, 0.5 * (plateau + scalar(_threshold(m, bench.t_j))))]
    measurements = [
        (f"id_{i}", f"DC id_{i} FIND i(VD) AT={number(v)}", -float(m.drain_current(v, v_ds, bench.t_j)),
         f"A at VGS {v:g} V")
        for i, v in enumerate(levels, 1)
    ]  # fmt: skip
    circuit = [f"VD d 0 {number(v_ds)}", "VG g 0 0", f"X1 d g 0 {bench.device}"]
    return bench.deck(
        "transfer", f"ID over VGS at VDS {v_ds:g} V", "i(VD) is minus the drain current; see it on a log axis, too.",
        circuit, [f".DC VG 0 {number(top)} {number(top / 500)}"], measurements,
    )  # fmt: skip


def _threshold(m: FittedModel, t_j: float) -> float:
    return scalar(m.transistor(t_j).channel.v_th)


def _gate_voltage(m: FittedModel, i_d: float, v_ds: float, t_j: float) -> float:
    """VGS, as a magnitude, at which the channel carries a current."""
    grid = np.linspace(0.0, m.part.v_gs_max, 4001)
    return float(np.interp(i_d, np.abs(m.drain_current(m.sign * grid, m.sign * v_ds, t_j)), grid))


def _output(bench: _Bench) -> Deck:
    m = bench.model
    point = m.test_point()
    v_gs = bench.volts(point.v_gs)
    r_on = abs(1e-3 / float(m.drain_current(v_gs, bench.volts(1e-3), bench.t_j)))
    v_full = bench.volts(round(1.5 * point.i_d * r_on, 3))
    measurements = [
        ("id_full", f"DC id_full FIND i(VD) AT={number(v_full)}", -float(m.drain_current(v_gs, v_full, bench.t_j)),
         f"A at VDS {v_full:g} V"),
    ]  # fmt: skip
    circuit = [f"VG g 0 {number(v_gs)}", "VD d 0 0", f"X1 d g 0 {bench.device}"]
    sweep = bench.volts(round(4.0 * point.i_d * r_on, 3))
    return bench.deck(
        "output", f"ID over VDS at VGS {v_gs:g} V",
        "i(VD) is minus the drain current; its slope at the origin is 1/RDS(on). Change VG to see the saturation.",
        circuit, [f".DC VD 0 {number(sweep)} {number(sweep / 500)}"], measurements,
    )  # fmt: skip


def _gate_charge(bench: _Bench) -> Deck:
    m = bench.model
    p = m.test_point()
    curve = m.gate_charge(p.v_dd, p.i_d, p.v_gs, p.load, bench.t_j)
    duration = curve.total / _GATE_CURRENT
    start, end = 0.02 * duration, 1.1 * duration
    if p.load == "current":
        load = [
            f"IL {bench.pair('vdd', 'd')} {number(p.i_d)}", ".MODEL clampdiode D(IS=1e-9 N=0.5)",
            f"DCLAMP {bench.pair('d', 'vdd')} clampdiode",
        ]  # fmt: skip
    else:
        load = [f"RL vdd d {number(p.v_dd / p.i_d)}"]
    circuit = [
        f"VDD vdd 0 {number(bench.volts(p.v_dd))}", *load,
        comment(f"The gate current of {_GATE_CURRENT * 1e3:g} mA makes 1 us of 1 nC, from {start * 1e6:.4g} us on"),
        f"IG {bench.pair('0', 'g')} PULSE(0 {number(_GATE_CURRENT)} {number(start)} 1n 1n 1 2)", "RLEAK g 0 1e9",
        "CSTRAY d 0 10p",
        f"X1 d g 0 {bench.device}",
    ]  # fmt: skip
    on_plateau = curve.q_gs + 0.4 * curve.q_gd
    v_mid = float(np.interp(on_plateau, curve.q_g, curve.v_gs))
    crossing = "RISE=1" if m.sign > 0 else "FALL=1"
    measurements = [
        ("t_end", f"TRAN t_end WHEN v(g)={number(bench.volts(p.v_gs))} {crossing}", start + duration,
         f"s: QG = {curve.total * 1e9:.4g} nC"),
        ("v_plateau", f"TRAN v_plateau FIND v(g) AT={number(start + on_plateau / _GATE_CURRENT)}", v_mid, "V"),
    ]  # fmt: skip
    return bench.deck(
        "gate_charge", f"gate charge at VDD {bench.volts(p.v_dd):g} V, ID {bench.volts(p.i_d):g} A",
        "Look at v(g) over time, and at v(d): the plateau lasts while v(d) falls.",
        circuit, [f".TRAN {number(duration / 2000)} {number(end)} 0 {number(duration / 2000)}"], measurements,
    )  # fmt: skip


def _recovery(bench: _Bench) -> Deck | None:
    m = bench.model
    t = m.transistor(bench.t_j)
    transit_time = scalar(m.estimate.values.get(TRANSIT_TIME.name, 0.0))
    if t.diode is None or transit_time <= 0.0:
        return None
    table, p = m.part.stated.body_diode, m.test_point()
    i_f = table.i_f if table is not None and table.i_f else p.i_d
    di_dt = table.di_dt if table is not None and table.di_dt else 1e8
    _, t_rr = recovery(transit_time, i_f, di_dt)
    drop = scalar(forward_voltage(i_f, t.diode, bench.t_j))
    supply = 0.5 * p.v_dd
    inductance = (supply + drop) / di_dt
    # Once the diode has snapped off, the inductance charges Coss; its current goes on rising until VDS has reached the
    # supply. L I^2/2 grows by what the supply gives less what Coss stores.
    gained = supply * scalar(t.q_oss(supply)) - scalar(t.e_oss(supply))
    peak = math.sqrt((di_dt * t_rr) ** 2 + 2.0 * gained / inductance)
    fall, begin, s = i_f / di_dt, 10.0 * transit_time, m.sign
    step = [(0.0, -drop), (begin, -drop), (begin + 1e-9, supply)]
    circuit = [
        comment("The supply first holds the forward current, then steps up and drives it down"),
        statement("VDD vdd 0 PWL(" + " ".join(f"{number(at)} {number(s * v)}" for at, v in step) + ")"),
        f"L1 vdd d {number(inductance)} IC={number(-s * i_f)}", "VG g 0 0", f"X1 d g 0 {bench.device}",
    ]  # fmt: skip
    most = "MAX" if s > 0.0 else "MIN"
    measurements = [("i_peak", f"TRAN i_peak {most} i(L1)", s * peak, "A")]
    end, grain = begin + fall + 20.0 * t_rr, number(min(fall, t_rr) / 500.0)
    return bench.deck(
        "diode_recovery", f"body-diode recovery from {i_f:g} A at {di_dt * 1e-6:g} A/us",
        "i(L1) falls through zero and beyond while the stored charge flows out. It peaks where v(d) has risen to the "
        "supply; the ringing after that is of L1 with Coss. The charge up to the peak is the diode's and that of Coss: "
        "where a stated QRR holds both, it is too large.",
        circuit, [f".TRAN {grain} {number(end)} 0 {grain} UIC"], measurements,
    )  # fmt: skip


def _double_pulse(bench: _Bench) -> Deck | None:
    m = bench.model
    p = m.test_point()
    r_g = _GATE_RESISTOR + (m.part.package.r_g or 0.0)
    switch = max(40.0 * r_g * float(m.ciss(bench.volts(p.v_dd))), 0.3e-6)
    t_on, gap = 20.0 * switch, 6.0 * switch
    inductance = p.v_dd * t_on / p.i_d
    delay, edge = 1e-7, 1e-8
    times = [0.0, edge, t_on, t_on + edge, t_on + gap, t_on + gap + edge, t_on + 2 * gap, t_on + 2 * gap + edge]
    levels = [0, 1, 1, 0, 0, 1, 1, 0]
    steps = [f"+ {number(t + delay)} {number(bench.volts(p.v_gs) * x)}" for t, x in zip(times, levels, strict=True)]
    end = times[-1] + gap + delay
    circuit = [
        f"VDD vdd 0 {number(bench.volts(p.v_dd))}", f"L1 vdd d {number(inductance)} IC=0",
        ".MODEL wheeldiode D(IS=1e-12 RS=2m CJO=200p)", f"DWHEEL {bench.pair('d', 'clamp')} wheeldiode",
        comment("The loop that commutates; without it rounding noise of L1 in the clamped node may stop a run"),
        f"LLOOP clamp vdd {number(_LOOP)}", f"RLOOP clamp vdd {number(_LOOP / RINGING)}",
        "VDRIVE in 0 PWL(0 0", *steps, "+ )", f"RGATE in g {number(_GATE_RESISTOR)}", f"X1 d g 0 {bench.device}",
    ]  # fmt: skip
    on = abs(float(m.drain_current(bench.volts(p.v_gs), bench.volts(1e-3), bench.t_j)) / 1e-3)
    at = delay + t_on - 2 * edge
    # The on-state drop takes a little of the supply from the inductance.
    tau = inductance * on
    current = p.v_dd * on * (1.0 - math.exp(-(at - delay) / tau))
    measurements = [
        ("i_load", f"TRAN i_load FIND i(L1) AT={number(at)}", bench.volts(current), "A at the end of the first pulse"),
    ]  # fmt: skip
    return bench.deck(
        "double_pulse", f"clamped inductive double pulse at {bench.volts(p.v_dd):g} V, {bench.volts(p.i_d):g} A",
        "The first pulse brings the inductance to the load current, the second switches it. Look at v(g), v(d) and "
        "i(L1): at turn-on the plateau of v(g) coincides with the fall of v(d), at turn-off with its rise.",
        circuit, [f".TRAN {number(switch / 20)} {number(end)}"], measurements,
    )  # fmt: skip
