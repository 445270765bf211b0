"""Reading a digitized curve at a condition, with the error that the reading errors give it."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from fitter.part import Axis, Curve, Part, Quantity, Stated

__all__ = ["PART_FILE", "coordinates", "first_curve", "log_error", "read_at", "typical"]

Array = NDArray[np.float64]

PART_FILE = "part.toml"


def first_curve(part: Part, quantity: Quantity) -> Curve | None:
    """The first curve of a quantity at 25 degC; None where there is none."""
    return next((c for c in part.curves_of(quantity) if c.t_j in (None, 25.0)), None)


def typical(stated: Stated | None) -> float | None:
    """A stated typical value, or the middle between its limits; None where nothing is stated."""
    if stated is None:
        return None
    if stated.typ is not None:
        return stated.typ
    if stated.min is not None and stated.max is not None:
        return 0.5 * (stated.min + stated.max)
    return None


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
