"""Reading a digitized curve at a condition, with the error that the reading errors give it."""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import NDArray

from fitter.part import Axis, Curve, Part, Quantity, Stated
from fitter.units import si_factor

__all__ = [
    "CAPACITANCES",
    "PART_FILE",
    "column_factors",
    "coordinates",
    "as_printed",
    "error_at",
    "extreme_before",
    "first_curve",
    "is_cold",
    "log_error",
    "read_at",
    "sisters",
    "smallest_readable",
    "square_root_line",
    "typical",
    "x_where",
]

Array = NDArray[np.float64]

PART_FILE = "part.toml"
CAPACITANCES = (Quantity.CISS, Quantity.COSS, Quantity.CRSS)


def is_cold(curve: Curve) -> bool:
    """Whether the curve is one at 25 degC, the temperature of the table values."""
    return curve.t_j is None or curve.t_j == 25.0


def first_curve(part: Part, quantity: Quantity) -> Curve | None:
    """The first curve of a quantity at 25 degC; None where there is none."""
    return next((c for c in part.curves_of(quantity) if is_cold(c)), None)


def sisters(part: Part, curve: Curve) -> tuple[Curve, ...]:
    """The other curves that a datasheet prints into the same figure."""
    same = CAPACITANCES if curve.quantity in CAPACITANCES else (curve.quantity,)
    return tuple(c for c in part.curves if c.quantity in same and c.name != curve.name)


def typical(stated: Stated | None) -> float | None:
    """A stated typical value, or the middle between its limits; None where nothing is stated."""
    if stated is None:
        return None
    if stated.typ is not None:
        return stated.typ
    if stated.min is not None and stated.max is not None:
        return 0.5 * (stated.min + stated.max)
    return None


def column_factors(curve: Curve) -> tuple[float, float]:
    """Factors from the units of the two columns to SI."""
    units = ((curve.x_column, curve.x_unit), (curve.y_column, curve.y_unit))
    fx, fy = (si_factor(column.rpartition("_")[2], base) if base else 1.0 for column, base in units)
    return fx, fy


def as_printed(curve: Curve, along: Literal["x", "y"], value: float) -> str:
    """A figure of a curve in its column's own unit, as it stands in the file but for a p-channel part's sign."""
    column, base = (curve.x_column, curve.x_unit) if along == "x" else (curve.y_column, curve.y_unit)
    factor = column_factors(curve)[0 if along == "x" else 1]
    figure = np.format_float_positional(float(f"{value / factor:.4g}"), trim="-")
    return f"{figure} {column.rpartition('_')[2] if base else ''}".strip()


def coordinates(values: Array, axis: Axis) -> Array:
    """Values in the axis' own coordinate: their logarithm on a log axis; not-a-number where there is none."""
    if axis.scale == "linear":
        return values
    return np.log(np.where(values > 0.0, values, np.nan))


def read_at(curve: Curve, x: float) -> float | None:
    """The curve at x, interpolated as its axes are divided; None outside its points by more than a tenth of them."""
    xs, at = coordinates(curve.x, curve.x_axis), x
    if curve.x_axis.scale == "log":
        if x <= 0.0:
            return None
        at = float(np.log(x))
    positive = bool(np.all(curve.y > 0.0))
    ys = np.log(curve.y) if positive else curve.y
    good = np.isfinite(xs)
    xs, ys = xs[good], ys[good]
    if xs.size < 2:
        return None
    slack = 0.05 * curve.x_axis.length
    if at < xs[0] - slack or at > xs[-1] + slack:
        return None
    y = float(np.interp(at, xs, ys))
    return float(np.exp(y)) if positive else y


def x_where(curve: Curve, y: float) -> float | None:
    """Where a rising curve first reaches y; None outside its points."""
    rising = np.maximum.accumulate(curve.y)
    if not rising[0] <= y <= rising[-1]:
        return None
    if curve.y_axis.scale == "log" and rising[0] > 0.0:
        return float(np.interp(np.log(y), np.log(rising), curve.x))
    return float(np.interp(y, rising, curve.x))


def log_error(curve: Curve) -> Array:
    """Standard deviation of ln y at every point from all reading errors, those along x by the curve's local slope."""
    share = np.hypot(curve.point_error, curve.axis_error)
    safe = np.maximum(curve.y, 1e-300)
    along_y = share * curve.y_axis.length / (1.0 if curve.y_axis.scale == "log" else safe)
    x = coordinates(curve.x, curve.x_axis)
    good = np.isfinite(x)
    slope = np.zeros_like(curve.y)
    if np.count_nonzero(good) >= 3:
        # Over a wide window: neighbouring clicks may stand in the wrong order.
        xs, ys = x[good], np.log(safe[good])
        reach = max(1, xs.size // 10)
        low = np.clip(np.arange(xs.size) - reach, 0, xs.size - 1)
        high = np.clip(np.arange(xs.size) + reach, 0, xs.size - 1)
        step = np.maximum(xs[high] - xs[low], 1e-3 * curve.x_axis.length)
        slope[good] = (ys[high] - ys[low]) / step
    return np.asarray(np.hypot(along_y, slope * share * curve.x_axis.length))


def extreme_before(curve: Curve, values: Array) -> tuple[NDArray[np.intp], NDArray[np.bool_]]:
    """The point with the largest of `values` to the left of each point, and whether there is one.

    Only points farther to the left than reading errors explain: closer ones may have been clicked in any order.
    """
    x = np.nan_to_num(coordinates(curve.x, curve.x_axis), nan=-np.inf)
    # Four standard deviations of the difference of two points.
    count = np.searchsorted(x, x - 4.0 * np.sqrt(2.0) * curve.point_error * curve.x_axis.length)
    largest = np.maximum.accumulate(np.where(values >= np.maximum.accumulate(values), np.arange(values.size), 0))
    return largest[np.maximum(count - 1, 0)], count > 0


def smallest_readable(curve: Curve) -> float:
    """The smallest y that a click tells from zero, ten reading errors of a linear axis; zero on a log axis."""
    share = float(np.hypot(curve.point_error, curve.axis_error))
    return 0.0 if curve.y_axis.scale == "log" else 10.0 * share * curve.y_axis.length


def error_at(curve: Curve, x: float) -> float:
    """Standard deviation of ln y where the curve is read at x."""
    return float(np.interp(x, curve.x, log_error(curve)))


def square_root_line(curve: Curve) -> tuple[float, float] | None:
    """Threshold [V] and gain K [A/V^2] of the straight line of sqrt(2 ID) over VGS; None where there is none."""
    top = float(np.max(curve.y))
    middle = (curve.y > 0.05 * top) & (curve.y < 0.6 * top)
    x, y = curve.x[middle], np.sqrt(2.0 * curve.y[middle])
    spread = float(np.sum((x - x.mean()) ** 2)) if x.size >= 2 else 0.0
    if spread <= 0.0:
        return None
    slope = float(np.sum((x - x.mean()) * (y - y.mean()))) / spread
    return (float(x.mean()) - float(y.mean()) / slope, slope**2) if slope > 0.0 else None
