"""What every form of the subcircuit has around its channel and charges: its name, leads, nodes, and the body diode."""

from __future__ import annotations

import re
from dataclasses import dataclass

import numpy as np

from fitter.errors import OutputError
from fitter.model import FittedModel
from fitter.models.diode import TRANSIT_TIME, saturation_current, series_resistance, thermal_voltage
from fitter.models.temperature import KELVIN
from fitter.models.transistor import Transistor
from fitter.writers.netlist_text import comment, number, scalar, statement

__all__ = ["DELAY", "NOMINAL", "RINGING", "Frame", "Lead", "Nodes", "body_diode", "frame"]

#: Time by which a charge's current lags behind it [s]: far below any switching time, yet enough to damp the numerical
#: oscillation of the trapezoidal rule at a capacitor that a voltage source drives. As a resistance in series with a
#: capacitance of 1 nF it is 100 milliohms.
DELAY = 100e-12
#: Resistances below this [ohm] are left out: a conductance this large drowns all others in rounding noise.
_LEAST_RESISTANCE = 1e-7
#: Inductances below this [H] are left out: with the smallest capacitances they ring beyond every time step.
_LEAST_INDUCTANCE = 1e-15

#: Inductance over the resistance beside it [s]. A lead of a power package is no inductance above some hundred
#: megahertz; as one it rings there with the transistor's capacitances, with hardly a loss, and time steps collapse.
RINGING = 5e-10

#: Nominal temperature of circuit simulators [degC].
NOMINAL = 27.0
#: Least saturation current of a diode's card [A]: simulators raise a smaller one to a floor of their own. It is written
#: as this, behind a voltage source that shifts the exponential back: IS exp(V/(N kT/q)) = IS' exp((V - V0)/(N kT/q)).
_LEAST_CURRENT = 1e-14
#: Resistance beside the diode [ohm], above that of most leakages: without it a blocking diode behind such a source
#: leaves operating points to a simulator's rounding.
_LEAKAGE = 1e9
#: Differs from every element's name, also without regard to case.
_DIODE_MODEL = "bodyjunction"

_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]{0,31}")


@dataclass(frozen=True)
class Lead:
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
        """One line for each element; a resistor beside an inductance damps what rings at gigahertz."""
        lines, node = [], self.terminal
        for name, end, value in self._parts:
            lines.append(f"{name} {node} {end} {number(value)}")
            if name.startswith("L"):
                lines.append(f"R{name} {node} {end} {number(value / RINGING)}")
            node = end
        return lines


@dataclass(frozen=True)
class Nodes:
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
        """Drain, gate."""
        return self._pair(self.drain, self.gate)

    @property
    def gate_source(self) -> tuple[str, str]:
        """Gate, source."""
        return self._pair(self.gate, self.source)

    @property
    def drain_source(self) -> tuple[str, str]:
        """Drain, source."""
        return self._pair(self.drain, self.source)

    @property
    def v_dg(self) -> str:
        """Drain-gate voltage, as an expression."""
        return _voltage(self.drain_gate)

    @property
    def v_gs(self) -> str:
        """Gate-source voltage, as an expression."""
        return _voltage(self.gate_source)

    @property
    def v_ds(self) -> str:
        """Drain-source voltage, as an expression."""
        return _voltage(self.drain_source)


def _voltage(pair: tuple[str, str]) -> str:
    return f"V({pair[0]},{pair[1]})"


@dataclass(frozen=True, kw_only=True)
class Frame:
    """A subcircuit without its channel and charges.

    Parameters
    ----------
    name : str
        The subcircuit's name.
    transistor : Transistor
        The equations at the junction temperature.
    share : float
        Share of RS and RD that lies in the body diode's way, too.
    leads : tuple of Lead
        Drain, gate, source.
    nodes, junction : Nodes
        Inner nodes of the channel and of the gate's charges; those of the body's junction.
    """

    name: str
    transistor: Transistor
    share: float
    leads: tuple[Lead, Lead, Lead]
    nodes: Nodes
    junction: Nodes

    def lead_elements(self) -> list[str]:
        """The leads' elements under a comment, one line each."""
        return [comment("Leads"), *(line for lead in self.leads for line in lead.elements())]


def frame(model: FittedModel, t: Transistor, t_j: float, name: str | None = None) -> Frame:
    """The frame of a model's subcircuit.

    Parameters
    ----------
    model : FittedModel
        The model.
    t : Transistor
        Its equations at the junction temperature.
    t_j : float
        Junction temperature [degC].
    name : str, optional
        The subcircuit's name; the part's name by default.

    Returns
    -------
    Frame

    Raises
    ------
    OutputError
        Where the name cannot name a subcircuit.
    """
    name = model.part.name if name is None else name
    if not _NAME.fullmatch(name):
        raise OutputError(
            f"{name!r} cannot name a subcircuit: "
            "it takes a letter, then letters, digits and underscores, 32 characters at the most"
        )
    package = model.part.package
    share = _share_of_diode(t, t_j)
    drain = Lead("drain", package.l_d, scalar(t.channel.r_d), share)
    gate = Lead("gate", package.l_g, package.r_g)
    source = Lead("source", package.l_s, scalar(t.channel.r_s), share)
    p_channel = model.part.channel == "p"
    return Frame(
        name=name,
        transistor=t,
        share=share,
        leads=(drain, gate, source),
        nodes=Nodes(drain.inner, gate.inner, source.inner, p_channel),
        junction=Nodes(drain.core, gate.inner, source.core, p_channel),
    )


def _share_of_diode(t: Transistor, t_j: float) -> float:
    """Share of RS and RD that lies in the body diode's way, too: as much as its own resistance has room for.

    The body's junction, diode and charge, sits behind some resistance: right behind an inductance its charge would
    ring with no loss, and a diode without charge would end in a node without capacitance, at which simulators stall.
    """
    series = scalar(t.channel.r_s) + scalar(t.channel.r_d)
    if t.diode is None or series <= 0.0:
        return 1.0
    return min(1.0, scalar(series_resistance(t_j, t.diode)) / series)


def body_diode(model: FittedModel, frame: Frame, t_j: float) -> list[str]:
    """The body diode; its depletion charge is Cds, its own model stores only TT I.

    Parameters
    ----------
    model : FittedModel
        Where the transit time stands.
    frame : Frame
        The subcircuit's frame.
    t_j : float
        Junction temperature [degC].

    Returns
    -------
    list of str
        Statements; empty where the model has no body diode.
    """
    t, (cathode, anode) = frame.transistor, frame.junction.drain_source
    if t.diode is None:
        return []
    # The diode's law at t_j, for a simulator that runs at its own nominal temperature.
    n = scalar(t.diode.n) * (t_j + KELVIN) / (NOMINAL + KELVIN)
    i_s = scalar(saturation_current(t_j, t.diode))
    before = frame.share * (scalar(t.channel.r_s) + scalar(t.channel.r_d))
    beyond = scalar(series_resistance(t_j, t.diode)) - before
    # What is left of a difference by rounding must not become a conductance.
    r_s = beyond if beyond >= _LEAST_RESISTANCE else 0.0
    transit_time = scalar(model.estimate.values.get(TRANSIT_TIME.name, 0.0))
    shift = []
    if 0.0 < i_s < _LEAST_CURRENT:
        v_0 = n * float(thermal_voltage(NOMINAL)) * float(np.log(_LEAST_CURRENT / i_s))
        shift, anode, i_s = [f"VBODY {anode} body {number(v_0)}"], "body", _LEAST_CURRENT
    card = f".MODEL {_DIODE_MODEL} D(IS={number(i_s)} N={number(n)} RS={number(r_s)} TT={number(transit_time)} CJO=0)"
    return [
        comment(f"Body diode at {t_j:g} C; leave the simulator's temperature at {NOMINAL:g} C"),
        statement(card),
        *shift,
        f"DBODY {anode} {cathode} {_DIODE_MODEL}",
        f"RBODY {anode} {cathode} {number(_LEAKAGE)}",
    ]
