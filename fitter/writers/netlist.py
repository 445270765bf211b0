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
from fitter.models.diode import saturation_current, series_resistance
from fitter.models.temperature import KELVIN, REFERENCE
from fitter.models.transistor import Transistor
from fitter.models.types import scalar
from fitter.writers import expressions
from fitter.writers.netlist_header import header
from fitter.writers.netlist_text import comment, number, statement

__all__ = ["subcircuit"]

#: Capacitance over which a charge becomes a voltage [F]: with it, the charges of power transistors are volts.
_UNIT = 1e-9
#: Resistances below this [ohm] are left out: a simulator's conductance of 1/R would drown all others in rounding noise.
_LEAST_RESISTANCE = 1e-7
#: Inductances below this [H] are left out, for the like reason.
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
        Where the name is none.
    """
    name = model.part.name if name is None else name
    if not _NAME.fullmatch(name):
        raise OutputError(
            f"{name!r} cannot name a subcircuit; "
            "it takes a letter, then letters, digits and underscores, 32 characters at the most"
        )
    transistor = model.transistor(t_j)
    package = model.part.package
    drain = _Lead("drain", package.l_d, scalar(transistor.channel.r_d))
    gate = _Lead("gate", package.l_g, package.r_g)
    source = _Lead("source", package.l_s, scalar(transistor.channel.r_s))
    nodes = _Nodes(drain.inner, gate.inner, source.inner, model.part.channel == "p")
    volts = f"volts on {number(_UNIT)} F, their currents returned"
    body = [
        f".SUBCKT {name} drain gate source",
        comment("Leads: inductances, and resistances up to the inner nodes"),
        *drain.elements(), *gate.elements(), *source.elements(),
        comment("Channel"),
        _channel(transistor, nodes),
        comment(f"Charges: {volts}"),
        *_charge("gd", expressions.gate_drain_charge(transistor, nodes.v_dg, _UNIT), nodes.drain, nodes.gate, nodes),
        *_charge("gs", expressions.gate_source_charge(transistor, nodes.v_gs, _UNIT), nodes.gate, nodes.source, nodes),
        *_charge("ds", expressions.drain_source_charge(transistor, nodes.v_ds, _UNIT), nodes.drain, nodes.source, nodes),
        *_body_diode(model, transistor, t_j, drain.outer, source.outer),
        f".ENDS {name}",
    ]  # fmt: skip
    return "\n".join([header(model, t_j, name), *body]) + "\n"


@dataclass(frozen=True)
class _Nodes:
    """The inner nodes, and the voltages between them as expressions in n-channel polarity."""

    drain: str
    gate: str
    source: str
    reversed: bool

    def _between(self, first: str, second: str) -> str:
        return f"V({second},{first})" if self.reversed else f"V({first},{second})"

    @property
    def v_gs(self) -> str:
        return self._between(self.gate, self.source)

    @property
    def v_dg(self) -> str:
        return self._between(self.drain, self.gate)

    @property
    def v_gd(self) -> str:
        return self._between(self.gate, self.drain)

    @property
    def v_ds(self) -> str:
        return self._between(self.drain, self.source)

    def directed(self, first: str, second: str) -> tuple[str, str]:
        """Two nodes in the order in which an n-channel part's current would flow through them."""
        return (second, first) if self.reversed else (first, second)


def _channel(t: Transistor, nodes: _Nodes) -> str:
    """The channel's current as a controlled source from drain to source."""
    start, end = nodes.directed(nodes.drain, nodes.source)
    current = expressions.channel_current(t.channel, nodes.v_gs, nodes.v_gd, nodes.v_ds)
    return statement(f"Gch {start} {end} VALUE={{ {current} }}")


def _charge(name: str, volts: str, first: str, second: str, nodes: _Nodes) -> list[str]:
    """A charge between two nodes: Q/Cunit as a voltage over Cunit, its current sensed and returned."""
    start, end = nodes.directed(first, second)
    return [
        statement(f"Eq{name} q{name} 0 VALUE={{ {volts} }}"),
        f"Cq{name} q{name} s{name} {number(_UNIT)}",
        f"Vq{name} s{name} 0 0",
        f"Fq{name} {start} {end} Vq{name} 1",
    ]


def _body_diode(model: FittedModel, t: Transistor, t_j: float, drain: str, source: str) -> list[str]:
    """The body diode outside the channel's resistances; its depletion charge is Cds, its own model stores only TT I."""
    if t.diode is None:
        return []
    # The diode's law at t_j, for a simulator that runs at its own nominal temperature.
    n = scalar(t.diode.n) * (t_j + KELVIN) / (_NOMINAL + KELVIN)
    i_s, r_s = scalar(saturation_current(t_j, t.diode)), scalar(series_resistance(t_j, t.diode))
    tt = scalar(model.estimate.values.get("tt_d", 0.0))
    anode, cathode = (drain, source) if model.part.channel == "p" else (source, drain)
    card = f".MODEL {_DIODE_MODEL} D(IS={number(i_s)} N={number(n)} RS={number(r_s)} TT={number(tt)} CJO=0)"
    return [
        comment(f"Body diode at {t_j:g} C; leave the simulator's temperature at {_NOMINAL:g} C"),
        statement(card),
        f"Dbody {anode} {cathode} {_DIODE_MODEL}",
    ]


@dataclass(frozen=True)
class _Lead:
    """What lies between a terminal and its inner node: an inductance [H], then a resistance [ohm]; either may be absent."""

    terminal: str
    inductance: float | None
    resistance: float | None

    @property
    def _has_inductance(self) -> bool:
        return self.inductance is not None and self.inductance >= _LEAST_INDUCTANCE

    @property
    def _has_resistance(self) -> bool:
        return self.resistance is not None and self.resistance >= _LEAST_RESISTANCE

    @property
    def inner(self) -> str:
        """The inner node, which is the terminal itself where nothing lies between."""
        return f"{self.terminal}_in" if self._has_inductance or self._has_resistance else self.terminal

    @property
    def outer(self) -> str:
        """The node between inductance and resistance: the package's leads carry all current, RD and RS the channel's."""
        if self._has_inductance and self._has_resistance:
            return f"{self.terminal}_lead"
        return self.inner if self._has_inductance else self.terminal

    def elements(self) -> list[str]:
        """One line for each element."""
        lines, node = [], self.terminal
        if self._has_inductance:
            end = f"{self.terminal}_lead" if self._has_resistance else self.inner
            lines.append(f"L{self.terminal} {node} {end} {number(self.inductance or 0.0)}")
            node = end
        if self._has_resistance:
            lines.append(f"R{self.terminal} {node} {self.inner} {number(self.resistance or 0.0)}")
        return lines
