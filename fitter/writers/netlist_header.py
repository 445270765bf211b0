"""What stands above a subcircuit: what it was made from, where it holds, what to mind."""

from __future__ import annotations

from fitter.fitting.blocks import EXPECTED, READ, TABLE
from fitter.model import FittedModel
from fitter.models.temperature import REFERENCE
from fitter.version import VERSION
from fitter.writers.netlist_text import comment

__all__ = ["header"]

_ABSTOL = (
    "Circuits of amperes need ABSTOL=1e-9 among the simulator's options. At the usual default of 1e-12 A the "
    "rounding noise of "
    "milliohm resistors at tens of volts exceeds the tolerance, and the time step collapses, with any transistor model."
)

_CLAMPED = (
    "A clamp diode right across a large inductance may stop a run, with any transistor model: at short time steps the "
    "rounding noise of L I/h volts appears in the clamped node. Give the diode's leg the nanohenries that it really "
    "has, and a resistor of L/0.5 ns beside them."
)

_DAMPED = (
    "Beside each lead inductance lies a resistor of L/0.5 ns: above some 300 MHz the leads damp rather than ring. That "
    "is for the simulator's sake; real leads may damp less."
)

_CAUTIONS = (
    "The model follows typical curves. Typical values are no limits: parts scatter around them, and ratings are "
    "in the datasheet.",
    "Safe operating area, avalanche, short circuit and self-heating are not in it.",
    "Such circuits store energy and carry voltages that injure or kill, also after they are switched off. "
    "A simulation shows neither that a circuit is safe nor that it works: verify on the bench.",
    "Local codes and licensed practice come first.",
)


def header(model: FittedModel, t_j: float, name: str) -> str:
    """Comment lines above a subcircuit.

    Parameters
    ----------
    model : FittedModel
        What the subcircuit is written from.
    t_j : float
        Junction temperature of the subcircuit [degC].
    name : str
        The subcircuit's name.

    Returns
    -------
    str
        Without a line end after the last line.
    """
    sections = (
        _title(model, name),
        _fitted_to(model),
        _validity(model, t_j),
        _parameters(model),
        [comment("Simulator"), _item(_ABSTOL), _item(_CLAMPED), *([_item(_DAMPED)] if _has_leads(model) else [])],
        [comment("Cautions"), *(_item(text) for text in _CAUTIONS)],
    )
    return f"\n{comment()}\n".join("\n".join(lines) for lines in sections)


def _has_leads(model: FittedModel) -> bool:
    package = model.part.package
    return any(x for x in (package.l_g, package.l_d, package.l_s))


def _item(text: str) -> str:
    return comment(f"- {text}", indent="  ")


def _title(model: FittedModel, name: str) -> list[str]:
    part = model.part
    lines = [
        comment(f"{name}: {part.channel}-channel power MOSFET, nodes drain gate source"),
        comment(f"Part {part.name}, rated VDS {_figure(model, part.v_ds_max)} V, VGS {part.v_gs_max:g} V"),
        comment(f"Fitted by fetwright {model.version or VERSION}, written by fetwright {VERSION}"),
    ]
    return lines + ([comment(f"Notes: {part.notes}", indent="  ")] if part.notes.strip() else [])


def _fitted_to(model: FittedModel) -> list[str]:
    blocks = [s.name for s in model.statistics]
    curves = [name for name in blocks if not name.endswith((TABLE, EXPECTED, READ))]
    tables = [name.removesuffix(TABLE) for name in blocks if name.endswith(TABLE)]
    lines = [comment("Fitted to"), _item(f"curves: {', '.join(curves) or 'none'}")]
    lines.append(_item(f"table values: {'; '.join(_with_condition(model, t) for t in tables) or 'none'}"))
    if model.used_gate_charge:
        lines.append(_item("the gate charge: fitted, and no check of the model any more"))
    else:
        lines.append(_item("the gate charge: not fitted; c_acc, c_ch and s_gs, which only it shows, are assumed"))
    if model.transistor().diode is None:
        lines.append(
            _item("the body diode is not modelled: reverse current flows in the channel only, when that is on")
        )
    elif "tt_d" not in model.parameters:
        lines.append(_item("the body diode stores no charge: neither QRR nor tRR is stated"))
    return lines


def _with_condition(model: FittedModel, quantity: str) -> str:
    conditions = [check.condition for check in model.checks if check.quantity == quantity]
    return f"{quantity} at {conditions[0]}" if conditions else quantity


def _validity(model: FittedModel, t_j: float) -> list[str]:
    known = model.validity
    ranges = (
        ("VDS of the capacitances", "V", known.capacitance_v_ds),
        ("VDS of the current", "V", known.current_v_ds),
        ("VGS", "V", known.v_gs),
        ("ID", "A", known.i_d),
    )
    lines = [comment("Range of validity: what was digitized; beyond it the equations extrapolate")]
    lines += [
        _item(f"{what}: {_figure(model, ends[0])} to {_figure(model, ends[-1])} {unit}")
        for what, unit, ends in ranges
        if ends is not None
    ]
    low, high = known.t_j[0], known.t_j[-1]
    digitized = f"{low:g} C" if low == high else f"{low:g} to {high:g} C"
    extrapolated = ", an extrapolation" if model.extrapolation(t_j) else ""
    text = f"Tj: digitized at {digitized}; this subcircuit is for {t_j:g} C{extrapolated}"
    return [*lines, _item(f"{text}, whatever the simulator's temperature")]


def _figure(model: FittedModel, value: float) -> str:
    """A voltage or current with the signs of the part's datasheet."""
    return f"{model.sign * value + 0.0:.4g}"


def _parameters(model: FittedModel) -> list[str]:
    """The parameter set in SI, at the reference temperature and in n-channel polarity."""
    polarity = ", in n-channel polarity" if model.part.channel == "p" else ""
    lines = [comment(f"Parameters in SI at {REFERENCE:g} C{polarity}")]
    for p in model.parameters.values():
        value = " ".join(f"{p.value:.6g} {p.unit}".split())
        lines.append(comment(f"{p.name} = {value} ({p.origin}): {p.meaning}", indent="  "))
    return lines
