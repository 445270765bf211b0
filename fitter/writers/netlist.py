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
from fitter.models.temperature import REFERENCE
from fitter.writers.netlist_header import header
from fitter.writers.netlist_text import comment, number

__all__ = ["subcircuit"]

#: Capacitance over which a charge becomes a voltage [F]: with it, the charges of power transistors are volts.
_UNIT = 1e-9
#: Resistances below this [ohm] are left out: a simulator's conductance of 1/R would drown all others in rounding noise.
_LEAST_RESISTANCE = 1e-7
#: Inductances below this [H] are left out, for the like reason.
_LEAST_INDUCTANCE = 1e-15

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
    leads = _Leads(
        drain=_Lead("drain", package.l_d, scalar(transistor.channel.r_d)),
        gate=_Lead("gate", package.l_g, package.r_g),
        source=_Lead("source", package.l_s, scalar(transistor.channel.r_s)),
    )
    nodes = _Nodes(leads.drain.inner, leads.gate.inner, leads.source.inner, model.part.channel == "p")
    blocks = [
        comment("Leads: inductances, and resistances up to the inner nodes"),
        *leads.drain.elements(),
        *leads.gate.elements(),
        *leads.source.elements(),
        comment("Channel"),
        *_channel(transistor, nodes),
        comment(f"Charges: volts on {number(_UNIT)} F, their currents returned"),
        *_gate_drain(transistor, nodes),
        *_gate_source(transistor, nodes),
        *_drain_source(transistor, nodes),
    ]
    body = [f".SUBCKT {name} drain gate source", *blocks, f".ENDS {name}"]
    return "\n".join([header(model, t_j, name), *body]) + "\n"


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
