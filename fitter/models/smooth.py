"""Smooth steps between two regions: the softplus function and its derivatives."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from fitter.models.types import Numbers

__all__ = ["exp", "inverse_softplus", "log1p", "logistic", "softplus", "softplus_and_slope"]


def _first_order(value: Numbers, slope: Numbers, z: Numbers) -> Numbers:
    """A function's value and slope at Re z as its value at z, to first order in Im z."""
    result = np.empty(z.shape, dtype=complex)
    result.real = value
    result.imag = slope * z.imag
    return result


def log1p(z: Numbers) -> Numbers:
    """ln(1 + z), for a complex z to first order in its imaginary part, which carries a derivative.

    numpy's own loses all digits of a small complex argument.

    Examples
    --------
    >>> complex(log1p(np.asarray(1e-20 + 1e-30j)))
    (1e-20+1e-30j)
    """
    z = np.asarray(z)
    value = np.log1p(z.real)
    return _first_order(value, 1.0 / (1.0 + z.real), z) if z.dtype.kind == "c" else np.asarray(value)


def exp(z: Numbers) -> Numbers:
    """The exponential, for a complex z to first order in its imaginary part: numpy's own takes ten times as long.

    Examples
    --------
    >>> complex(exp(np.asarray(0.0 + 1e-30j)))
    (1+1e-30j)
    """
    z = np.asarray(z)
    value = np.exp(z.real)
    return _first_order(value, value, z) if z.dtype.kind == "c" else np.asarray(value)


def softplus(x: ArrayLike, w: ArrayLike) -> Numbers:
    """Softplus w ln(1 + exp(x/w)).

    Parameters
    ----------
    x : array_like
        Variable, real or complex.
    w : array_like
        Width of the bend, positive, in the unit of x.

    Returns
    -------
    ndarray
        Tends to x for x >> w and to 0 for x << -w.

    Examples
    --------
    >>> float(softplus(0.0, 2.0) / np.log(4.0))
    1.0
    """
    return softplus_and_slope(x, w)[0]


def logistic(x: ArrayLike, w: ArrayLike) -> Numbers:
    """Derivative of the softplus by x: 1/(1 + exp(-x/w)).

    Parameters
    ----------
    x, w : array_like
        As for `softplus`.

    Returns
    -------
    ndarray
        Between 0 and 1.

    Examples
    --------
    >>> float(logistic(0.0, 1.0)), float(logistic(-1e6, 1.0))
    (0.5, 0.0)
    """
    return softplus_and_slope(x, w)[1]


def softplus_and_slope(x: ArrayLike, w: ArrayLike) -> tuple[Numbers, Numbers]:
    """Both `softplus` and `logistic`, for the price of one, in a form that cannot overflow.

    For complex arguments to first order in their imaginary parts.

    Parameters
    ----------
    x, w : array_like
        As for `softplus`.

    Returns
    -------
    value, slope : ndarray

    Examples
    --------
    >>> value, slope = softplus_and_slope(0.3, 0.1)
    >>> bool(value == softplus(0.3, 0.1)), bool(slope == logistic(0.3, 0.1))
    (True, True)
    """
    w = np.asarray(w)
    t = np.asarray(x) / w
    over = np.logaddexp(0.0, t.real)
    slope = np.exp(t.real - over)
    if t.dtype.kind != "c":
        return np.asarray(w * over), np.asarray(slope)
    return w * _first_order(over, slope, t), _first_order(slope, slope * (1.0 - slope), t)


def inverse_softplus(y: ArrayLike, w: ArrayLike) -> Numbers:
    """The x at which the softplus is y: x = y + w ln(1 - exp(-y/w)).

    Parameters
    ----------
    y : array_like
        Positive, in the unit of x.
    w : array_like
        As for `softplus`.

    Returns
    -------
    ndarray

    Examples
    --------
    >>> round(float(inverse_softplus(softplus(-0.3, 0.1), 0.1)), 12)
    -0.3
    """
    y, w = np.asarray(y), np.asarray(w)
    return np.asarray(y + w * np.log(-np.expm1(-y / w)))
