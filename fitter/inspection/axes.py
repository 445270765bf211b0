"""Any curve against its printed axes, and these against the axes of the other curves in the same figure."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from fitter.inspection.finding import Comparison
from fitter.inspection.reading import CAPACITANCES, as_printed, coordinates, sisters
from fitter.part import Axis, Curve, Part, Quantity

__all__ = ["corner", "division", "inside", "leaves", "same_figure"]

Array = NDArray[np.float64]

#: Points may lie outside a printed axis by this share of it: reading errors of four standard deviations and more.
_OUTSIDE = 0.02
#: Up to this share of its points outside is a matter of single points.
_MANY = 0.2
#: A curve covers at least this share of the axis that it is printed on (common practice, no source).
_COVERS = 0.2
#: Figures of one part with axes this far apart, as a factor, are not one figure.
_FIGURE = 4.0
#: Output curves and body diodes are drawn up to where they leave the figure, at its right or at its top: they come
#: past the middle of one axis (common practice, no source).
_LEAVES = 0.5
_LEAVING = (Quantity.OUTPUT, Quantity.BODY_DIODE)
#: Output curves may leave the figure early; capacitances are level on axes of many decades.
_FREE = {(Quantity.OUTPUT, "x"), *((c, "y") for c in CAPACITANCES)}
#: Nobody prints an output curve that lies on the axis: at its highest it is well over a line's width above it. Where a
#: body diode's current axis is linear, the voltage hardly changes along the curve.
_LEAST = {Quantity.OUTPUT: 0.02, Quantity.BODY_DIODE: 0.1}
#: Half of a curve's points lie near the middle of their range on an axis divided as it was when they were clicked, and
#: crowd at one end of it divided the other way; the two differ enough from this factor between the ends on.
_TELLING, _MIDDLE, _ASIDE = 30.0, 0.2, 0.36


def _places(values: Array, axis: Axis) -> Array:
    start = math.log(axis.start) if axis.scale == "log" else axis.start
    return np.asarray((coordinates(values, axis) - start) / axis.length)


def _along(curve: Curve) -> tuple[tuple[Literal["x", "y"], Array, Axis], ...]:
    return ("x", curve.x, curve.x_axis), ("y", curve.y, curve.y_axis)


def inside(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Points lie on the printed axes."""
    for name, values, axis in _along(curve):
        if not axis.printed:
            continue
        place = np.nan_to_num(_places(values, axis), nan=-1.0)
        outside = np.flatnonzero((place < -_OUTSIDE) | (place > 1.0 + _OUTSIDE))
        worst = int(outside[np.argmax(np.abs(place[outside] - 0.5))]) if outside.size else 0
        yield Comparison(
            rule=f"outside {name} axis",
            curve=curve,
            at=worst,
            off=outside.size / (_MANY * values.size) if outside.size > _MANY * values.size else 0.0,
            says=f"{outside.size} of {values.size} points lie outside the {name} axis of "
            f"{as_printed(curve, name, axis.start)} to {as_printed(curve, name, axis.end)}"
            + (f", the farthest at {as_printed(curve, name, values[worst])}" if outside.size else ""),
            remedy="look at the axis' from, to and scale, and at the column's unit",
        )


def corner(part: Part, curve: Curve) -> Iterator[Comparison]:
    """A curve is not confined to one end of its axes."""
    for name, values, axis in _along(curve):
        place = _places(values, axis)
        place = place[np.isfinite(place)]
        if not axis.printed or (curve.quantity, name) in _FREE or place.size < 2:
            continue
        # Level curves lie anywhere on a y axis, but a linear one is chosen to fit the highest point.
        level = name == "y" and axis.scale == "linear"
        covered = float(np.max(place) if level else np.ptp(place))
        least = _LEAST.get(curve.quantity, _COVERS)
        yield Comparison(
            rule=f"one corner along {name}",
            curve=curve,
            off=min(least / max(covered, 1e-9), 4.0) if covered < least else 0.0,
            says=f"the points {'reach' if level else 'cover'} {100.0 * max(covered, 0.0):.2g} % of the {name} axis",
            remedy="click the whole curve, or look at the axis' from, to and scale",
        )


def leaves(part: Part, curve: Curve) -> Iterator[Comparison]:
    """An output curve or body diode is drawn up to the right or the upper edge of its figure."""
    if curve.quantity not in _LEAVING or not (curve.x_axis.printed and curve.y_axis.printed):
        return
    places = [_places(curve.x, curve.x_axis), _places(curve.y, curve.y_axis)]
    covered = max(float(np.ptp(place)) for place in places)
    yield Comparison(
        rule="ends early",
        curve=curve,
        at=curve.x.size - 1,
        off=min(_LEAVES / max(covered, 1e-9), 4.0) if covered < _LEAVES else 0.0,
        says=f"the curve covers at most {100.0 * covered:.2g} % of its axes: it reaches neither the right nor the top",
        remedy="click the whole curve, or look at the axes' from, to and scale",
    )


def division(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Clicks are spread along a curve as its axes are divided."""
    for name, values, axis in _along(curve):
        low, high = float(np.min(values)), float(np.max(values))
        # Where an axis could be divided either way, and the points tell the two apart.
        if not axis.printed or axis.start <= 0.0 or low <= 0.0 or values.size < 7 or high < _TELLING * low:
            continue
        middle = float(np.median(values))
        linear, log = (middle - low) / (high - low), math.log(middle / low) / math.log(high / low)
        own, other = (log, linear) if axis.scale == "log" else (linear, log)
        yield Comparison(
            rule=f"spread along {name}",
            curve=curve,
            at=values.size // 2,
            off=abs(own - 0.5) / _ASIDE if abs(other - 0.5) < _MIDDLE else 0.0,
            says=f"half of the points lie within {100.0 * min(own, 1.0 - own):.2g} % of their range along its "
            f"{axis.scale} {name} axis",
            remedy="look at the axis' scale",
        )


def same_figure(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Curves that datasheets print into one figure have the same axes."""
    for name in ("x", "y"):
        own = curve.x_axis if name == "x" else curve.y_axis
        apart, divided = [], []
        for other in sisters(part, curve):
            axis = other.x_axis if name == "x" else other.y_axis
            divided.append(axis.scale)
            if own.printed and axis.printed and own.scale == axis.scale and own.end * axis.end > 0.0:
                ends = [math.log(own.end / axis.end)]
                if own.scale == "log":
                    ends.append(math.log(own.start / axis.start))
                apart.append(max(ends, key=abs))
        if divided:
            yield Comparison(
                rule=f"another {name} division",
                curve=curve,
                off=0.0 if own.scale in divided else 1.2,
                says=f"its {name} axis is {own.scale}, that of the curves printed with it {divided[0]}",
                remedy="look at the axis' scale, unless they are from two figures",
                severity="note",
            )
        if apart:
            middle = sorted(apart, key=abs)[(len(apart) - 1) // 2]
            yield Comparison(
                rule=f"another {name} axis",
                curve=curve,
                off=min(abs(middle) / math.log(_FIGURE), 2.0),
                says=f"its {name} axis is {math.exp(middle):.3g} times that of the curves printed with it",
                remedy="look at the axis' from and to, unless they are from two figures",
                severity="note",
            )
