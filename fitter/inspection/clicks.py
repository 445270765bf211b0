"""Every curve by itself: its points, its axes, mis-clicks."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from fitter.inspection.finding import Finding
from fitter.inspection.reading import CAPACITANCES, as_printed, coordinates
from fitter.part import Curve, Part, Quantity

__all__ = ["judge"]

Array = NDArray[np.float64]

#: Fewer points than this make a poor curve.
_FEW = {Quantity.CISS: 8, Quantity.COSS: 8, Quantity.CRSS: 8, Quantity.TRANSFER: 5}
#: Between two points a curve whose integral counts crosses less than this share of its y axis (common practice, no
#: source).
_GAP = 0.25
_INTEGRALS = (*CAPACITANCES, Quantity.GATE_CHARGE)
#: A point this many standard deviations off the line through its neighbours is a mis-click.
_FAR = 8.0
#: A point this near to the line, as a share of the axis, lies on it.
_NEAR = 0.02
#: At most this share of a curve's points are single slips.
_MISCLICKED = 0.1


def judge(part: Part) -> tuple[list[Finding], Part]:
    """Find what is wrong with each curve's points.

    Parameters
    ----------
    part : Part
        As read.

    Returns
    -------
    findings : list of Finding
        Few points, gaps, mis-clicks.
    part : Part
        Without the mis-clicked points, which would spoil other comparisons.
    """
    findings: list[Finding] = []
    curves: list[Curve] = []
    for curve in part.curves:
        off = [*_misclicks(curve)]
        kept = ~np.isin(curve.lines, [finding.line or 0 for finding in off])
        # Many of them are no mis-clicks but a curve of another shape.
        if off and np.count_nonzero(~kept) <= max(1, _MISCLICKED * kept.size):
            curve = replace(curve, x=curve.x[kept], y=curve.y[kept], lines=curve.lines[kept])
        findings += [*_spread(curve), *_gaps(curve), *off]
        curves.append(curve)
    return findings, replace(part, curves=tuple(curves))


def _spread(curve: Curve) -> Iterator[Finding]:
    few = _FEW.get(curve.quantity, 4)
    if curve.x.size < few:
        yield Finding(
            rule="few points",
            severity="doubtful",
            topic=curve.name,
            file=curve.file,
            found=f"only {curve.x.size} points",
            remedy=f"click {few} at the least, more where the curve is steep",
        )


def _gaps(curve: Curve) -> Iterator[Finding]:
    """A gap where the curve is steep: there interpolation says least, and charges are integrals."""
    x, y = coordinates(curve.x, curve.x_axis), coordinates(curve.y, curve.y_axis)
    good = np.isfinite(x) & np.isfinite(y)
    if curve.quantity not in _INTEGRALS or np.count_nonzero(good) < 3:
        return
    across = np.diff(x[good]) / curve.x_axis.length
    up = np.abs(np.diff(y[good])) / curve.y_axis.length
    # Where clicks lie so close along x that they may have been sorted in another order, a step is no gap.
    up[across < 4.0 * np.sqrt(2.0) * curve.point_error] = 0.0
    widest = int(np.argmax(np.hypot(across, up) * (up > 0.0)))
    if up[widest] > _GAP and np.hypot(across[widest], up[widest]) > 3.0 * float(np.median(np.hypot(across, up))):
        yield Finding(
            rule="gap",
            severity="doubtful",
            topic=curve.name,
            file=curve.file,
            line=int(curve.lines[good][widest]),
            found=f"between {as_printed(curve, 'x', curve.x[good][widest])} and "
            f"{as_printed(curve, 'x', curve.x[good][widest + 1])} the curve crosses "
            f"{100.0 * up[widest]:.0f} % of its y axis without a point",
            remedy="click more points there",
        )


def _misclicks(curve: Curve) -> Iterator[Finding]:
    """Points that lie far off the straight line between their neighbours, in the axes' own coordinates."""
    if curve.x.size < 7:
        return
    x, y = coordinates(curve.x, curve.x_axis), coordinates(curve.y, curve.y_axis)
    good = np.isfinite(x) & np.isfinite(y)
    x, y, lines = x[good] / curve.x_axis.length, y[good] / curve.y_axis.length, curve.lines[good]
    if x.size < 7:
        return
    off = _off_line(x, y, curve.point_error)
    usual = max(1.0, 1.4826 * float(np.median(np.abs(off))))
    far = np.flatnonzero(np.abs(off) > _FAR * usual)
    # A mis-click throws its neighbours off the line as well: only the farthest of a run is named.
    for i in far:
        near = off[max(i - 2, 0) : i + 3]
        if np.abs(off[i]) < np.max(np.abs(near)):
            continue
        yield Finding(
            rule="mis-click",
            severity="doubtful",
            topic=curve.name,
            file=curve.file,
            line=int(lines[i]),
            found=f"the point ({as_printed(curve, 'x', curve.x[good][i])}, {as_printed(curve, 'y', curve.y[good][i])}) "
            f"lies {abs(off[i]):.0f} standard deviations off its neighbours",
            remedy=_slip(x, y, int(i), curve) or "look at the point again",
        )


def _slip(x: Array, y: Array, i: int, curve: Curve) -> str:
    """Names a decade slip where it would put the point back on the line."""
    others = np.delete(np.arange(x.size), i)
    expected = float(np.interp(x[i], x[others], y[others])) * curve.y_axis.length
    found = float(y[i]) * curve.y_axis.length
    factor = float(np.exp(found - expected)) if curve.y_axis.scale == "log" else found / expected if expected else 1.0
    for power in (-2, -1, 1, 2):
        if factor > 0.0 and abs(np.log(factor / 10.0**power)) < 0.35:
            return f"a decade slip: {'divide' if power > 0 else 'multiply'} its y by {10 ** abs(power)}"
        # The same along x: where the point would lie on the line then.
        step = power * np.log(10.0) / curve.x_axis.length
        place = x[i] - step if curve.x_axis.scale == "log" else x[i] / 10.0**power
        if x[0] <= place <= x[-1] and abs(y[i] - float(np.interp(place, x[others], y[others]))) < _NEAR:
            return f"a decade slip: {'divide' if power > 0 else 'multiply'} its x by {10 ** abs(power)}"
    return ""


def _off_line(x: Array, y: Array, sigma: float) -> Array:
    """Distance of each point from the line through the neighbours' means, in its standard deviations."""
    off = np.zeros_like(y)
    for i in range(1, x.size - 1):
        left, right = max(i - 1, 0), min(i + 1, x.size - 1)
        step = x[right] - x[left]
        share = 0.5 if step <= 1e-9 else min(max((x[i] - x[left]) / step, 0.0), 1.0)
        slope = (y[right] - y[left]) / max(step, sigma)
        bend = 0.35 * abs(y[right] - y[left])  # how far a smooth curve may bend between neighbours
        width = np.hypot(1.3 * sigma * np.hypot(1.0, min(abs(slope), 30.0)), bend)
        off[i] = (y[i] - (y[left] + share * (y[right] - y[left]))) / width
    return off
