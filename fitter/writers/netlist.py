"""The model as a subcircuit for circuit simulators, written with expressions.

Charges enter as charges, so that none is lost over a cycle: a controlled voltage source holds Q(V)/Cunit over a linear
capacitor Cunit, a zero-volt source senses its current, and a current-controlled source returns that current between the
real nodes.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

from fitter.errors import OutputError
from fitter.model import FittedModel
from fitter.models.diode import TRANSIT_TIME, saturation_current, series_resistance
from fitter.models.temperature import KELVIN, REFERENCE
from fitter.models.transistor import Transistor
from fitter.writers.expressions import (
    channel_current,
    drain_source_charge,
    gate_drain_charge,
    gate_source_charge,
)
from fitter.writers.netlist_header import header
from fitter.writers.netlist_text import comment, number, scalar, statement

__all__ = ["subcircuit"]

#: Capacitance over which a charge becomes a voltage [F]: over it the charges of power transistors are some volts.
_UNIT = 1e-9
#: Time by which a charge's current lags behind it [s]: far below any switching time, yet enough to damp the numerical
#: oscillation of the trapezoidal rule at a capacitor that a voltage source drives. As a resistance in series with a
#: capacitance of 1 nF it is 20 milliohms.
_DELAY = 20e-12
#: Resistances below this [ohm] are left out: a conductance this large drowns all others in rounding noise.
_LEAST_RESISTANCE = 1e-7
#: Inductances below this [H] are left out: with the smallest capacitances they ring beyond every time step.
_LEAST_INDUCTANCE = 1e-15

#: Nominal temperature of circuit simulators [degC].
_NOMINAL = 27.0
#: Differs from every element's name, also without regard to case.
_DIODE_MODEL = "bodyjunction"

_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]{0,31}")


def subcircuit(model: FittedModel, t_j: float = REFERENCE, name: str | None = None) -> str:
    """A subcircuit with the nodes drain, gate, source.

    Parameters
    ----------
    model : FittedModel
        The model.
    t_j : float
        Junction temperature [degC].
    name : str, optional
        The subcircuit's name: a letter, then letters, digits and underscores, at most 32; the part's name by default.

    Returns
    -------
    str
        The whole text of a library file. The same model gives the same text.

    Raises
    ------
    OperatingPointError
        Where the model knows nothing of that temperature.
    OutputError
        Where the name cannot name a subcircuit, or a parameter is no finite number.
    """
    name = model.part.name if name is None else name
    if not _NAME.fullmatch(name):
        raise OutputError(
            f"{name!r} cannot name a subcircuit: "
            "it takes a letter, then letters, digits and underscores, 32 characters at the most"
        )
    t = model.transistor(t_j)
    package = model.part.package
    share = _share_of_diode(t, t_j)
    drain = _Lead("drain", package.l_d, scalar(t.channel.r_d), share)
    gate = _Lead("gate", package.l_g, package.r_g)
    source = _Lead("source", package.l_s, scalar(t.channel.r_s), share)
    p_channel = model.part.channel == "p"
    nodes = _Nodes(drain.inner, gate.inner, source.inner, p_channel)
    junction = _Nodes(drain.core, gate.inner, source.core, p_channel)
    lines = [
        header(model, t_j, name),
        f".SUBCKT {name} drain gate source",
        comment("Leads"),
        *drain.elements(),
        *gate.elements(),
        *source.elements(),
        comment("Channel"),
        *_channel(t, nodes),
        comment(f"Charges, in volts over {number(_UNIT)} F, and the currents that change them"),
        *_charge("GD", nodes.drain_gate, gate_drain_charge(t, nodes.v_dg, _UNIT)),
        *_charge("GS", nodes.gate_source, gate_source_charge(t, nodes.v_gs, _UNIT)),
        *_charge("DS", junction.drain_source, drain_source_charge(t, junction.v_ds, _UNIT)),
        *_body_diode(model, t, t_j, share, junction),
        f".ENDS {name}",
    ]
    return "\n".join(lines) + "\n"


def _share_of_diode(t: Transistor, t_j: float) -> float:
    """Share of RS and RD that lies in the body diode's way, too: as much as its own resistance has room for.

    The body's junction, diode and charge, sits behind some resistance: right behind an inductance its charge would
    ring with no loss, and a diode without charge would end in a node without capacitance, at which simulators stall.
    """
    series = scalar(t.channel.r_s) + scalar(t.channel.r_d)
    if t.diode is None or series <= 0.0:
        return 1.0
    return min(1.0, scalar(series_resistance(t_j, t.diode)) / series)


@dataclass(frozen=True)
class _Lead:
    """From a terminal to its inner node: an inductance [H], then a resistance [ohm]; either may be absent.

    The body's junction is at the core, a share of the resistance behind the inductance.
    """

    terminal: str
    inductance: float | None
    resistance: float | None
    share: float = 1.0

    @property
    def _parts(self) -> list[tuple[str, str, float]]:
        """Element, node behind it, value; from the terminal inwards, without those too small to matter."""
        letter, whole = self.terminal[0].upper(), self.resistance or 0.0
        outer, rest = self.share * whole, (1.0 - self.share) * whole
        parts = [
            (f"L{letter}", f"{self.terminal}_lead", self.inductance or 0.0, _LEAST_INDUCTANCE),
            (f"R{letter}", f"{self.terminal}_core", outer, _LEAST_RESISTANCE),
            (f"R{letter}C", f"{self.terminal}_in", rest, _LEAST_RESISTANCE),
        ]
        return [(name, node, value) for name, node, value, least in parts if value >= least]

    @property
    def inner(self) -> str:
        """The node of the channel and of the gate's charges; the terminal itself where nothing lies between."""
        return self._parts[-1][1] if self._parts else self.terminal

    @property
    def core(self) -> str:
        """The node of the body's junction."""
        before = [node for name, node, _ in self._parts if not name.endswith("C")]
        return before[-1] if before else self.terminal

    def elements(self) -> list[str]:
        """One line for each element."""
        lines, node = [], self.terminal
        for name, end, value in self._parts:
            lines.append(f"{name} {node} {end} {number(value)}")
            node = end
        return lines


@dataclass(frozen=True)
class _Nodes:
    """The inner nodes.

    Pairs of nodes, and voltages, are in n-channel polarity: for a p-channel part each pair is exchanged, which reverses
    the voltage that controls an element and the current that it carries.
    """

    drain: str
    gate: str
    source: str
    p_channel: bool

    def _pair(self, plus: str, minus: str) -> tuple[str, str]:
        return (minus, plus) if self.p_channel else (plus, minus)

    @property
    def drain_gate(self) -> tuple[str, str]:
        return self._pair(self.drain, self.gate)

    @property
    def gate_source(self) -> tuple[str, str]:
        return self._pair(self.gate, self.source)

    @property
    def drain_source(self) -> tuple[str, str]:
        return self._pair(self.drain, self.source)

    @property
    def v_dg(self) -> str:
        return _voltage(self.drain_gate)

    @property
    def v_gs(self) -> str:
        return _voltage(self.gate_source)

    @property
    def v_ds(self) -> str:
        return _voltage(self.drain_source)

    @property
    def v_gd(self) -> str:
        plus, minus = self.drain_gate
        return _voltage((minus, plus))


def _voltage(pair: tuple[str, str]) -> str:
    return f"V({pair[0]},{pair[1]})"


def _channel(t: Transistor, nodes: _Nodes) -> list[str]:
    """The channel between the inner drain and source."""
    current = channel_current(t.channel, nodes.v_gs, nodes.v_gd, nodes.v_ds)
    plus, minus = nodes.drain_source
    return [statement(f"GCH {plus} {minus} VALUE={{{current}}}")]


def _charge(name: str, pair: tuple[str, str], expression: str) -> list[str]:
    """A charge between two nodes, from its expression in volts over the unit capacitance."""
    (held, damped, sensed), (plus, minus) = (f"{letter}{name}".lower() for letter in "qri"), pair
    return [
        statement(f"EQ{name} {held} 0 VALUE={{{expression}}}"),
        f"CQ{name} {held} {damped} {number(_UNIT)}",
        f"RQ{name} {damped} {sensed} {number(_DELAY / _UNIT)}",
        f"VQ{name} {sensed} 0 0",
        f"FQ{name} {plus} {minus} VQ{name} 1",
    ]


def _body_diode(model: FittedModel, t: Transistor, t_j: float, share: float, junction: _Nodes) -> list[str]:
    """The body diode; its depletion charge is Cds, its own model stores only TT I."""
    if t.diode is None:
        return []
    # The diode's law at t_j, for a simulator that runs at its own nominal temperature.
    n = scalar(t.diode.n) * (t_j + KELVIN) / (_NOMINAL + KELVIN)
    i_s = scalar(saturation_current(t_j, t.diode))
    before = share * (scalar(t.channel.r_s) + scalar(t.channel.r_d))
    r_s = max(scalar(series_resistance(t_j, t.diode)) - before, 0.0)
    transit_time = scalar(model.estimate.values.get(TRANSIT_TIME.name, 0.0))
    cathode, anode = junction.drain_source
    card = f".MODEL {_DIODE_MODEL} D(IS={number(i_s)} N={number(n)} RS={number(r_s)} TT={number(transit_time)} CJO=0)"
    return [
        comment(f"Body diode at {t_j:g} C; leave the simulator's temperature at {_NOMINAL:g} C"),
        statement(card),
        f"DBODY {anode} {cathode} {_DIODE_MODEL}",
    ]
