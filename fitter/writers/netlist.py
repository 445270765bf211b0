"""The model as a subcircuit for circuit simulators, written with expressions.

Charges enter as charges, so that none is lost over a cycle: a controlled voltage source holds Q(V)/Cunit over a linear
capacitor Cunit, a zero-volt source senses its current, and a current-controlled source returns that current between the
real nodes.
"""

from __future__ import annotations

from typing import Any

from fitter.model import FittedModel
from fitter.models.temperature import REFERENCE
from fitter.models.transistor import Transistor
from fitter.variants import Variant
from fitter.writers.expressions import (
    channel_current,
    drain_source_charge,
    gate_drain_charge,
    gate_source_charge,
)
from fitter.writers.netlist_frame import DELAY, Nodes, body_diode, frame
from fitter.writers.netlist_header import header
from fitter.writers.netlist_text import comment, number, statement

__all__ = ["subcircuit", "variant_subcircuit"]

#: Capacitance over which a charge becomes a voltage [F]: over it the charges of power transistors are some volts.
_UNIT = 1e-9
#: As much of a part's name as leaves room for that of a variant.
_LONGEST_STEM = 25


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
    t = model.transistor(t_j)
    around = frame(model, t, t_j, name)
    nodes, junction = around.nodes, around.junction
    lines = [
        header(model, t_j, around.name),
        f".SUBCKT {around.name} drain gate source",
        *around.lead_elements(),
        comment("Channel"),
        *_channel(t, nodes),
        comment(f"Charges, in volts over {number(_UNIT)} F, and the currents that change them"),
        *_charge("GD", nodes.drain_gate, gate_drain_charge(t, nodes.v_dg, _UNIT)),
        *_charge("GS", nodes.gate_source, gate_source_charge(t, nodes.v_gs, _UNIT)),
        *_charge("DS", junction.drain_source, drain_source_charge(t, junction.v_ds, _UNIT)),
        *body_diode(model, around, t_j),
        f".ENDS {around.name}",
    ]
    return "\n".join(lines) + "\n"


def _channel(t: Transistor, nodes: Nodes) -> list[str]:
    """The channel between the inner drain and source."""
    current = channel_current(t.channel, nodes.v_gs, nodes.v_ds)
    plus, minus = nodes.drain_source
    return [statement(f"GCH {plus} {minus} VALUE={{{current}}}")]


def _charge(name: str, pair: tuple[str, str], expression: str) -> list[str]:
    """A charge between two nodes, from its expression in volts over the unit capacitance."""
    (held, damped, sensed), (plus, minus) = (f"{letter}{name}".lower() for letter in "qri"), pair
    return [
        statement(f"EQ{name} {held} 0 VALUE={{{expression}}}"),
        f"CQ{name} {held} {damped} {number(_UNIT)}",
        f"RQ{name} {damped} {sensed} {number(DELAY / _UNIT)}",
        f"VQ{name} {sensed} 0 0",
        f"FQ{name} {plus} {minus} VQ{name} 1",
    ]


def variant_subcircuit(variant: Variant[Any]) -> str:
    """The subcircuit of a weak or strong variant, under the part's name and the kind.

    Parameters
    ----------
    variant : Variant
        As from `fitter.variants.variants`.

    Returns
    -------
    str
    """
    moved = [row.quantity for row in variant.rows if row.moved]
    rest = [row.quantity for row in variant.rows if not row.moved and row.met is None]
    speed = "slow" if variant.kind == "weak" else "fast"
    name = f"{variant.model.part.name[:_LONGEST_STEM]}_{variant.kind}"
    lines = [
        comment(f"{variant.kind} variant of {variant.model.part.name}, a {speed} corner of the stated limits"),
        comment(f"- at a stated limit: {', '.join(moved) or 'nothing'}", indent="  "),
        comment(f"- without a stated limit, as it follows from the rest: {', '.join(rest) or 'nothing'}", indent="  "),
        comment(),
    ]
    return "\n".join(lines) + "\n" + subcircuit(variant.model, name=name)
