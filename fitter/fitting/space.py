"""The space a fit moves in: which parameters are free, how each is scaled, and what follows from them."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from fitter.models.types import Numbers, Value, scalar
from fitter.parameters import ParameterDefinition

__all__ = ["STEP", "ParameterSpace", "Values", "derivatives"]

Values = Mapping[str, Value]
Array = NDArray[np.float64]

#: Imaginary step: far below rounding, so that its square vanishes and the derivative is exact.
STEP = 1e-30


@dataclass(frozen=True, kw_only=True)
class ParameterSpace:
    """Free parameters with their scales, fixed ones with their values, and those that follow from both.

    Parameters
    ----------
    free : tuple of ParameterDefinition
        What a fit moves. A coordinate is ln(value/1 SI) on a log scale and value/typical on a linear one.
    fixed : mapping of str to float
        Parameters that stay as they are [SI].
    complete : callable, optional
        Takes all values and returns them with what follows from them added.
    """

    free: tuple[ParameterDefinition, ...]
    fixed: Mapping[str, float] = field(default_factory=dict)
    complete: Callable[[Values], Values] | None = None

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the free parameters, in the order of the coordinates."""
        return tuple(definition.name for definition in self.free)

    def coordinates(self, values: Values) -> Array:
        """Coordinates, shape (n,), of SI values by name, moved inside the bounds."""
        return np.array([
            min(max(_coordinate(scalar(values[d.name]), d), lower), upper)
            for d, lower, upper in zip(self.free, *self.bounds(), strict=True)
        ])  # fmt: skip

    def bounds(self) -> tuple[Array, Array]:
        """Lower and upper bounds of the coordinates, each of shape (n,)."""
        lower = np.array([_coordinate(d.lower, d) for d in self.free])
        upper = np.array([_coordinate(d.upper, d) for d in self.free])
        return lower, upper

    def values(self, coordinates: Numbers) -> Values:
        """SI values by name, fixed and following ones included.

        Parameters
        ----------
        coordinates : ndarray, shape (n,) or (n, k, 1)
            One point, or k points at once; real or complex.
        """
        moved: dict[str, Value] = {
            d.name: np.exp(u) if d.scale == "log" else u * d.typical
            for d, u in zip(self.free, coordinates, strict=True)
        }
        every: Values = {**self.fixed, **moved}
        return every if self.complete is None else self.complete(every)


def _coordinate(value: float, d: ParameterDefinition) -> float:
    if d.scale == "linear":
        return value / d.typical
    return float(np.log(max(value, 1e-300)))


def derivatives(
    function: Callable[[Values], Numbers], space: ParameterSpace, coordinates: Array, names: tuple[str, ...]
) -> Array:
    """Exact derivatives of a function of the parameters by some of the coordinates.

    Each coordinate gets an imaginary part of 1e-30 in a row of its own; the imaginary part of the result is then the
    derivative, without a difference of nearly equal numbers (W. Squire and G. Trapp, SIAM Rev. 40 (1998) 110).

    Parameters
    ----------
    function : callable
        Takes values by name, each a number or of shape (k, 1); returns shape (k, m) then, (m,) for numbers.
    space : ParameterSpace
        Where the coordinates live.
    coordinates : ndarray, shape (n,)
        The point.
    names : tuple of str
        The k free parameters by which to differentiate; by the others the derivative is not asked for.

    Returns
    -------
    ndarray, shape (k, m)
    """
    place = {name: i for i, name in enumerate(space.names)}
    points: list[Numbers] = [np.asarray(u) for u in coordinates]
    for row, name in enumerate(names):
        column = np.full((len(names), 1), coordinates[place[name]], dtype=complex)
        column[row, 0] += 1j * STEP
        points[place[name]] = column
    every = space.values(points)  # type: ignore[arg-type]
    result = np.imag(function(every)) / STEP
    return np.asarray(np.broadcast_to(result, (len(names), result.shape[-1])))
