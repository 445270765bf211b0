"""Which comparisons are drawn from a curve, by its quantity."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace

import numpy as np

from fitter.inspection import axes, body_diode, capacitances, gate_charge, level, output, temperature, transfer
from fitter.inspection.finding import Comparison
from fitter.part import Curve, Part, Quantity

__all__ = ["comparisons"]

_Rule = Callable[[Part, Curve], Iterator[Comparison]]

_ANY: tuple[_Rule, ...] = (axes.inside, axes.corner, axes.division, axes.leaves, axes.same_figure, level.range_of)
_CAPACITANCE: tuple[_Rule, ...] = (
    capacitances.table,
    capacitances.table_reach,
    capacitances.rating,
    capacitances.definitions,
    capacitances.rising,
    capacitances.readable,
)
_RULES: dict[Quantity, tuple[_Rule, ...]] = {
    Quantity.CISS: (*_CAPACITANCE, gate_charge.first_leg),
    Quantity.COSS: (*_CAPACITANCE, capacitances.stated_charge),
    Quantity.CRSS: _CAPACITANCE,
    Quantity.TRANSFER: (
        transfer.rising,
        transfer.threshold,
        transfer.current_at_plateau,
        transfer.transconductance,
        transfer.on_resistance,
        transfer.currents,
        transfer.same_gain,
        transfer.hot_and_cold,
        transfer.crossing,
        output.transfer,
        gate_charge.transfer,
    ),
    Quantity.OUTPUT: (
        transfer.rising,
        output.order,
        output.conductance,
        output.on_resistance,
        output.transfer,
        output.output_currents,
    ),
    Quantity.GATE_CHARGE: (
        gate_charge.rising,
        gate_charge.start,
        gate_charge.from_zero,
        gate_charge.total,
        gate_charge.end,
        gate_charge.plateau,
        gate_charge.transfer,
        gate_charge.first_leg,
    ),
    Quantity.BODY_DIODE: (
        transfer.rising,
        body_diode.voltage,
        body_diode.current,
        body_diode.currents,
        body_diode.drift,
        body_diode.slope,
    ),
    Quantity.RDS_ON_TEMPERATURE: (
        temperature.range_of,
        temperature.resistance_at_25,
        temperature.resistance_rise,
    ),
    Quantity.VGS_TH_TEMPERATURE: (
        temperature.range_of,
        temperature.threshold_at_25,
        temperature.threshold_drift,
    ),
}


def comparisons(part: Part, curve: Curve) -> list[Comparison]:
    """Every comparison that the curve takes part in.

    Parameters
    ----------
    part : Part
        The curve's part, with the curve in it.
    curve : Curve
        One of its curves.

    Returns
    -------
    list of Comparison
        Contradictions and agreements; a comparison of two curves is drawn from either of them alike.
    """
    # Points of any kind come here: what cannot be worked out is a contradiction, and no reason to stop.
    with np.errstate(all="ignore"):
        drawn = [c for rule in (*_ANY, *_RULES[curve.quantity]) for c in rule(part, curve)]
    return [c if c.off == c.off else replace(c, off=np.inf) for c in drawn]
