"""Smooth steps between two regions: the softplus function and its derivatives."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from fitter.models.types import Numbers

__all__ = ["inverse_softplus", "log1p", "logistic", "softplus", "softplus_and_slope"]


def _minus_magnitude(t: Numbers) -> Numbers:
    """-|t|, as an analytic function on either side of Re t = 0."""
    return np.where(t.real > 0.0, -t, t)


def log1p(z: Numbers) -> Numbers:
    """ln(1 + z), for a complex z to first order in its imaginary part, which carries a derivative.

    numpy's own loses all digits of a small complex argument.

    Examples
    --------
    >>> complex(log1p(np.asarray(1e-20 + 1e-30j)))
    (1e-20+1e-30j)
    """
    z = np.asarray(z)
    if z.dtype.kind != "c":
        return np.asarray(np.log1p(z))
    result = np.empty(z.shape, dtype=complex)
    result.real = np.log1p(z.real)
    result.imag = z.imag / (1.0 + z.real)
    return result


def softplus(x: ArrayLike, w: ArrayLike) -> Numbers:
    """Softplus w ln(1 + exp(x/w)), in the form that cannot overflow.

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
    x, w = np.asarray(x), np.asarray(w)
    return np.asarray(np.where(x.real > 0.0, x, 0.0) + w * log1p(np.exp(_minus_magnitude(x / w))))


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
    t = np.asarray(x) / np.asarray(w)
    e = np.exp(_minus_magnitude(t))
    return np.where(t.real > 0.0, 1.0, e) / (1.0 + e)


def softplus_and_slope(x: ArrayLike, w: ArrayLike) -> tuple[Numbers, Numbers]:
    """Both `softplus` and `logistic`, for the price of one exponential.

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
    x = np.asarray(x)
    t = x / np.asarray(w)
    above = t.real > 0.0
    e = np.exp(np.where(above, -t, t))
    return np.where(above, x, 0.0) + w * log1p(e), np.where(above, 1.0, e) / (1.0 + e)


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
