"""Curves that are level where no transistor's is: constants, columns exchanged, points clicked along a frame."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from fitter.inspection.finding import Comparison, Finding
from fitter.part import Curve, Part, Quantity

__all__ = ["judge", "range_of"]

#: The largest value over the smallest of any digitized curve is more than this: Coss and Crss at least halve from the
#: lowest VDS to the highest, currents grow by an order of magnitude, VGS from near zero (common practice, no source).
_LEAST = {
    Quantity.COSS: 1.2,
    Quantity.CRSS: 1.2,
    Quantity.TRANSFER: 2.0,
    Quantity.BODY_DIODE: 2.0,
    Quantity.GATE_CHARGE: 2.0,
}
#: That is asked of capacitances only where they are given over this range of VDS, as a factor.
_RANGE = 4.0
#: Curves that carry the fit: without them it means nothing.
_NEEDED = (Quantity.COSS, Quantity.CRSS, Quantity.TRANSFER)
_CAPACITANCES = (Quantity.COSS, Quantity.CRSS)
_FEW = 3


def judge(part: Part) -> tuple[list[Finding], Part]:
    """Find constants: no hand clicks the same figure at every point.

    Parameters
    ----------
    part : Part
        As read.

    Returns
    -------
    findings : list of Finding
        One for each such curve.
    part : Part
        Without them: whatever else they contradict says nothing more.
    """
    found = {c.name: _finding(c) for c in part.curves if c.y.size >= _FEW and float(np.ptp(c.y)) == 0.0}
    return [*found.values()], replace(part, curves=tuple(c for c in part.curves if c.name not in found))


def _asks_range(curve: Curve) -> bool:
    wide = curve.quantity not in _CAPACITANCES or float(curve.x[-1]) > _RANGE * float(curve.x[0])
    return curve.quantity in _LEAST and wide


def _finding(curve: Curve) -> Finding:
    return Finding(
        rule="level",
        severity="stop" if curve.quantity in _NEEDED else "doubtful",
        topic=curve.name,
        file=curve.file,
        line=int(curve.lines[0]),
        found=f"{curve.y_column} is the same at all {curve.y.size} points",
        remedy=f"click the curve again: does {curve.y_column} hold another column's figures, or the line of a frame?",
    )


def range_of(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Coss and Crss fall, currents and VGS rise by more than a little along their curves."""
    low, high = float(np.min(curve.y)), float(np.max(curve.y))
    if not _asks_range(curve) or low <= 0.0:
        return
    least = _LEAST[curve.quantity]
    yield Comparison(
        rule="range",
        curve=curve,
        off=min(np.log(least) / max(np.log(high / low), 1e-3), 4.0) if high < least * low else 0.0,
        says=f"the largest {curve.y_column} is {high / low:.3g} times the smallest",
        remedy="click the whole curve, and look at the columns' order",
        severity="stop" if curve.quantity in _NEEDED else "doubtful",
    )
