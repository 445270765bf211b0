"""The model as a subcircuit without any expression, for simulators that take none.

Only resistors, capacitors, inductors, voltage sources, controlled sources of constant gain, diodes and one level-1
transistor.
"""

from __future__ import annotations

from fitter.model import FittedModel
from fitter.models.temperature import REFERENCE
from fitter.models.transistor import Transistor
from fitter.writers.element_charges import gate_source_charge, junction_charge, shared, split
from fitter.writers.element_laws import ElementAccuracy, element_accuracy
from fitter.writers.netlist_frame import NOMINAL, Nodes, body_diode, frame
from fitter.writers.netlist_header import header
from fitter.writers.netlist_text import comment, number, scalar, statement

__all__ = ["ElementAccuracy", "element_accuracy", "element_subcircuit"]

#: Name of the transistor's model.
_CHANNEL_MODEL = "squarelaw"
#: Above this many widths of the bend at threshold the square of the softplus is that of its argument to 0.5 %.
_SMOOTH = 5.0
#: How far the transistor's own body lies below its source [V], so that its junctions never conduct. A copy of the
#: source's voltage drives it: a voltage source between the two leaves the body hanging, and solvers stumble over that.
_BODY_BIAS = 20.0
#: Resistance beside the channel [ohm], far above that of any leakage. Without it nothing but the milliohms of the leads
#: holds the inner drain while the channel blocks, and solvers stumble over their own rounding.
_LEAKAGE = 1e10


def element_subcircuit(model: FittedModel, t_j: float = REFERENCE, name: str | None = None) -> str:
    """A subcircuit with the nodes drain, gate, source, without expressions.

    It lacks the smooth threshold of the channel, and nothing else.

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
        comment(),
        *_form(model, t),
        f".SUBCKT {around.name} drain gate source",
        *around.lead_elements(),
        *shared(),
        comment("Channel"),
        *_channel(t, nodes),
        comment("Gate-drain charge"),
        *junction_charge("GD", nodes.drain_gate, t.gate_drain, scalar(t.c_acc)),
        comment("Gate-source charge"),
        *gate_source_charge("GS", nodes.gate_source, t),
        comment("Drain-source charge"),
        *junction_charge("DS", junction.drain_source, t.drain_source, scalar(t.c_ds(0.0))),
        *body_diode(model, around, t_j),
        f".ENDS {around.name}",
    ]
    return "\n".join(lines) + "\n"


def _form(model: FittedModel, t: Transistor) -> list[str]:
    """What to know of this form."""
    accuracy = element_accuracy(model)
    v_th, w = model.sign * scalar(t.channel.v_th), scalar(t.channel.w)
    low, high = accuracy.v_ds
    said = (
        "no expressions: linear elements, controlled sources of constant gain, diodes, one level-1 transistor",
        f"its diodes are meant for the simulator's nominal temperature of {NOMINAL:g} C: leave the temperature there",
        f"the channel has a sharp threshold where the model has a smooth one: below VTH = {v_th:.4g} V no current "
        f"flows, and up to {_SMOOTH * w:.2g} V above it the current is less than the model's",
        f"Ciss, Coss and Crss from {low:g} V to {high:g} V are off from the model's equations by "
        f"{_percent(accuracy.rms)} % rms, {_percent(accuracy.largest)} % at the most, by the circuit's own laws",
    )
    return [comment("Element form"), *(comment(f"- {text}", indent="  ") for text in said)]


def _percent(share: float) -> str:
    return f"{100.0 * share:.2g}"


def _channel(t: Transistor, nodes: Nodes) -> list[str]:
    """The channel between the inner drain and source, with its body apart.

    The transistor has alpha VDS across it: alpha - 1 times the positive part of VDS is added to its drain, and as much
    of the negative part to its source.
    """
    c, sign, kind = t.channel, *((-1.0, "PMOS") if nodes.p_channel else (1.0, "NMOS"))
    alpha = scalar(c.alpha)
    v_th, k, lam = (number(x) for x in (sign * scalar(c.v_th), scalar(c.k), scalar(c.lam) / alpha))
    lines, drain, source = [], nodes.drain, nodes.source
    if alpha != 1.0:
        parts, above, below = split("CH", nodes.drain_source)
        drain, source, more = "mdrain", "msource", number(sign * (alpha - 1.0))
        lines = [
            *parts,
            f"EMD {drain} {nodes.drain} {above[0]} {above[1]} {more}",
            f"EMS {source} {nodes.source} {below[1]} {below[0]} {more}",
        ]
    return [
        *lines,
        statement(f".MODEL {_CHANNEL_MODEL} {kind}(LEVEL=1 VTO={v_th} KP={k} LAMBDA={lam})"),
        f"VBULK low 0 {number(-sign * _BODY_BIAS)}",
        f"EBULK bulk low {nodes.source} 0 1",
        f"MCH {drain} {nodes.gate} {source} bulk {_CHANNEL_MODEL} L=1e-06 W=1e-06",
        f"RCH {nodes.drain} {nodes.source} {number(_LEAKAGE)}",
    ]
