"""What a slip makes of a curve, and what undoes it: scaling, exchanging, an axis divided or directed otherwise."""

from __future__ import annotations

from dataclasses import replace
from typing import Literal

import numpy as np

from fitter.inspection.reading import column_factors
from fitter.part import Axis, Curve

__all__ = [
    "Along",
    "exchange_columns",
    "exchange_curves",
    "mirror",
    "redivide",
    "relabel",
    "reread",
    "scale",
    "scale_axis",
    "scale_points",
    "with_data_of",
]

Along = Literal["x", "y"]


def scale_points(curve: Curve, along: Along, factor: float) -> Curve:
    """The curve with its points multiplied along x or y, its axes as they are."""
    return replace(curve, x=curve.x * factor) if along == "x" else replace(curve, y=curve.y * factor)


def scale_axis(curve: Curve, along: Along, factor: float) -> Curve:
    """The curve with an axis' ends multiplied, its points as they are."""
    if along == "x":
        return replace(curve, x_axis=_scaled(curve.x_axis, factor))
    return replace(curve, y_axis=_scaled(curve.y_axis, factor))


def _scaled(axis: Axis, factor: float) -> Axis:
    return replace(axis, start=axis.start * factor, end=axis.end * factor)


def scale(curve: Curve, along: Along, factor: float) -> Curve:
    """The curve with points and axis multiplied along x or y."""
    return scale_axis(scale_points(curve, along, factor), along, factor)


def exchange_columns(curve: Curve, *, axes: bool) -> Curve:
    """The curve with the figures of its two columns exchanged, units staying where they are; with its axes or not."""
    fx, fy = column_factors(curve)
    x, y = curve.y / fy * fx, curve.x / fx * fy
    order = np.argsort(x, kind="stable")
    turned = replace(curve, x=x[order], y=y[order], lines=curve.lines[order])
    if not axes:
        return turned
    return replace(turned, x_axis=_scaled(curve.y_axis, fx / fy), y_axis=_scaled(curve.x_axis, fy / fx))


def exchange_curves(first: Curve, second: Curve) -> tuple[Curve, Curve]:
    """Two curves with their files' figures and axes exchanged, each keeping its name and conditions."""
    return with_data_of(first, second), with_data_of(second, first)


def with_data_of(curve: Curve, source: Curve) -> Curve:
    """The curve with another one's figures and axes, read in its own units."""
    fx, fy = (own / other for own, other in zip(column_factors(curve), column_factors(source), strict=True))
    return replace(
        curve,
        x=source.x * fx,
        y=source.y * fy,
        lines=source.lines,
        x_axis=_scaled(source.x_axis, fx),
        y_axis=_scaled(source.y_axis, fy),
        point_error=source.point_error,
        axis_error=source.axis_error,
    )


def redivide(curve: Curve, along: Along) -> Curve | None:
    """The curve with an axis divided the other way, points staying where they lie on the page; None where none can be.

    On an axis from a to b the place u of a point is (v - a)/(b - a) where it is linear, ln(v/a)/ln(b/a) where it is
    logarithmic.
    """
    axis, values = (curve.x_axis, curve.x) if along == "x" else (curve.y_axis, curve.y)
    a, b = axis.start, axis.end
    if a <= 0.0 or not axis.printed:
        return None
    if axis.scale == "linear":
        place = (values - a) / (b - a)
        if np.any((place < -0.1) | (place > 1.1)):
            return None
        values, axis = a * (b / a) ** place, replace(axis, scale="log")
    else:
        if np.any(values <= 0.0):
            return None
        values, axis = a + (b - a) * np.log(values / a) / np.log(b / a), replace(axis, scale="linear")
    return replace(curve, x=values, x_axis=axis) if along == "x" else replace(curve, y=values, y_axis=axis)


def reread(curve: Curve, along: Along) -> Curve | None:
    """The curve with its points read as its axis is declared, where they were read as if it were divided otherwise."""
    declared = curve.x_axis if along == "x" else curve.y_axis
    other = relabel(curve, along)
    turned = None if other is None else redivide(other, along)
    if turned is None:
        return None
    return replace(turned, x_axis=declared) if along == "x" else replace(turned, y_axis=declared)


def mirror(curve: Curve, along: Along) -> Curve | None:
    """The curve with an axis counted from its other end; None where a point has no place on it.

    A point at the value v of an axis from a to b is then at a + b - v where it is linear, at a b/v where it is
    logarithmic.
    """
    axis, values = (curve.x_axis, curve.x) if along == "x" else (curve.y_axis, curve.y)
    if axis.scale == "linear":
        values = axis.start + axis.end - values
    elif np.all(values > 0.0):
        values = axis.start * axis.end / values
    else:
        return None
    if along == "y":
        return replace(curve, y=values)
    order = np.argsort(values, kind="stable")
    return replace(curve, x=values[order], y=curve.y[order], lines=curve.lines[order])


def relabel(curve: Curve, along: Along) -> Curve | None:
    """The curve with an axis declared the other way, its points as they are; None where it cannot be logarithmic."""
    axis, values = (curve.x_axis, curve.x) if along == "x" else (curve.y_axis, curve.y)
    if axis.scale == "linear" and (axis.start <= 0.0 or np.any(values <= 0.0)):
        return None
    axis = replace(axis, scale="log" if axis.scale == "linear" else "linear")
    return replace(curve, x_axis=axis) if along == "x" else replace(curve, y_axis=axis)
