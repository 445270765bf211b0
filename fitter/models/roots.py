"""Roots of many increasing functions at once."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from fitter.models.types import Numbers, Value

__all__ = ["carries_derivatives", "increasing_root", "lifted_root", "without_derivatives"]

_MOST_STEPS = 200
#: A step this small relative to the root is the last one: the error behind a Newton step is about its square.
_NEWTON, _BISECTION = 1e-8, 1e-13

Function = Callable[[Numbers], tuple[Numbers, Numbers]]


def increasing_root(function: Function, start: Numbers, lower: Numbers, upper: Numbers) -> NDArray[np.float64]:
    """Root of each of many increasing functions, by Newton's method kept inside a shrinking bracket.

    Parameters
    ----------
    function : callable
        Takes the array of arguments, returns values and slopes, element by element.
    start, lower, upper : array_like of float
        First guess and bracket; they broadcast to the shape of the result.

    Returns
    -------
    ndarray of float
        Where the function crosses zero, to about 1e-13 of itself; the bracket's end where it does not cross inside.
    """
    x, low, high = (np.array(a, dtype=float) for a in np.broadcast_arrays(start, lower, upper))
    before = last = np.full((), np.inf)
    done = np.zeros((), dtype=bool)
    for _ in range(_MOST_STEPS):
        value, slope = function(x)
        low = np.where(value < 0.0, x, low)
        high = np.where(value > 0.0, x, high)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            new = x - value / slope
            # Over a bend Newton's method can go to and fro between two points for ever, both inside the bracket.
            inside = (new >= low) & (new <= high) & (np.abs(new - x) <= 0.5 * before)
        new = np.where(inside, new, 0.5 * (low + high))
        new = np.where(value == 0.0, x, new)
        before, last = last, np.abs(new - x)
        settled = last <= np.where(inside, _NEWTON, _BISECTION) * np.abs(new) + 1e-300
        x = np.where(done, x, new)
        done = done | settled
        if done.all():
            break
    return x


def carries_derivatives(*values: Numbers) -> bool:
    """Whether any of the values is complex, that is, carries a derivative in its imaginary part."""
    return any(np.iscomplexobj(value) for value in values)


def without_derivatives(value: Value) -> Numbers:
    """Real part of a value; of a complex one with a row for each derivative, the first row only.

    Those rows differ in their imaginary parts alone (`fitter.fitting.space.derivatives`): an implicit equation need be
    solved once for all of them.

    Examples
    --------
    >>> without_derivatives(np.array([[2.0 + 1e-30j], [2.0 + 0.0j]]))
    array([[2.]])
    """
    value = np.asarray(value)
    if value.dtype.kind != "c":
        return value
    return value.real[:1] if value.ndim > 1 else value.real


def lifted_root(function: Function, root: Numbers) -> Numbers:
    """A root of the real function as the root of the complex one: one Newton step from it.

    The step is exact to first order (implicit function theorem), so the imaginary part is the root's derivative.

    Parameters
    ----------
    function : callable
        The function with its complex parameters.
    root : array_like
        Root of its real part.

    Returns
    -------
    ndarray of complex
    """
    value, slope = function(root)
    return root - value / slope
