"""How sure a figure is that follows from the parameters: its 95 % interval, correlations carried through.

Propagation of uncertainty: JCGM 100:2008 (GUM), with the exact derivatives.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fitter.fitting.space import ParameterSpace, Values, derivatives
from fitter.models.types import Numbers

__all__ = ["COVERAGE_FACTOR", "Estimate", "Figures", "ends", "intervals", "standard_errors"]

Array = NDArray[np.float64]
#: A function of the parameters that returns figures along its last axis.
Figures = Callable[[Values], Numbers]

#: Standard deviations on either side of a 95 % interval of a normal distribution.
COVERAGE_FACTOR = 1.96


@dataclass(frozen=True, kw_only=True)
class Estimate:
    """A space, the point a fit ended at, and the covariance of its coordinates.

    Parameters
    ----------
    space : ParameterSpace
        Of n free parameters.
    coordinates : ndarray, shape (n,)
        The point.
    covariance : ndarray, shape (n, n)
        Its covariance.
    """

    space: ParameterSpace
    coordinates: Array
    covariance: Array

    @property
    def values(self) -> Values:
        """SI values of all parameters by name."""
        return self.space.values(self.coordinates)


def _slopes(figures: Figures, estimate: Estimate) -> Array:
    """Derivatives of m figures by the coordinates, shape (n, m)."""
    return derivatives(figures, estimate.space, estimate.coordinates, estimate.space.names)


def _end(slope: Array, estimate: Estimate, sign: float) -> Array:
    """Coordinates at one end of a figure's 95 % interval.

    Of all points inside the bounds that lie 1.96 standard deviations off, the one where the figure, to first order, is
    the lowest or highest. Without bounds in the way that is a step along covariance times slope; a coordinate that
    would go past its bound stays on it, and the others go on from where they are then to be expected.
    """
    lower, upper = estimate.space.bounds()
    room = np.stack([lower, upper]) - estimate.coordinates
    covariance, step, held = estimate.covariance, np.zeros(slope.size), np.zeros(slope.size, dtype=bool)
    while True:
        mean, rest, left = np.zeros(slope.size), covariance, COVERAGE_FACTOR**2
        if held.any():
            gain = np.linalg.solve(covariance[np.ix_(held, held)], covariance[held]).T
            mean = gain @ step[held]
            rest = covariance - gain @ covariance[held]
            left -= float(step[held] @ np.linalg.solve(covariance[np.ix_(held, held)], step[held]))
        moved = np.where(held, 0.0, rest @ slope)
        size = float(slope @ moved)
        along = moved * (sign * np.sqrt(max(left, 0.0) / size)) if size > 0.0 else 0.0
        step = np.where(held, step, mean + along)
        beyond = np.where(held, 0.0, np.maximum(room[0] - step, step - room[1]) / np.sqrt(np.diag(covariance) + 1e-300))
        worst = int(np.argmax(beyond)) if beyond.size else 0
        if not beyond.size or beyond[worst] <= 1e-9:
            return np.clip(estimate.coordinates + step, lower, upper)
        held[worst] = True
        step[worst] = np.clip(step[worst], *room[:, worst])


def standard_errors(figures: Figures, estimate: Estimate) -> Array:
    """Standard errors of figures, to first order.

    Parameters
    ----------
    figures : callable
        Returns m figures.
    estimate : Estimate
        The fitted parameters.

    Returns
    -------
    ndarray, shape (m,)
        In the figures' units.
    """
    slopes = _slopes(figures, estimate)
    return np.asarray(np.sqrt(np.maximum(np.sum(slopes * (estimate.covariance @ slopes), axis=0), 0.0)))


def ends(figure: Figures, estimate: Estimate) -> tuple[Values, Values]:
    """Parameters at the two ends of one figure's 95 % interval.

    Parameters
    ----------
    figure : callable
        Returns one figure.
    estimate : Estimate
        The fitted parameters.

    Returns
    -------
    low, high : mapping of str to value
        Moved along the direction in which the figure varies most for its probability.
    """
    slope = _slopes(figure, estimate)[:, 0]
    low, high = (estimate.space.values(_end(slope, estimate, sign)) for sign in (-1.0, 1.0))
    return low, high


def intervals(figures: Figures, estimate: Estimate) -> tuple[Array, Array, Array]:
    """Values and 95 % intervals of figures.

    Each figure is computed again with the parameters moved by 1.96 standard deviations along the direction in which it
    varies most for its probability (covariance times gradient), up and down, as far as bounds let them: where the
    figure bends, so does its interval. Where it bends back so far that it moves the wrong way, its slope says how far
    that end lies off.

    Parameters
    ----------
    figures : callable
        Returns m figures.
    estimate : Estimate
        The fitted parameters.

    Returns
    -------
    value, low, high : ndarray, shape (m,)
        low <= value <= high.
    """
    value = np.real(figures(estimate.values))
    slopes = _slopes(figures, estimate)
    reached = [value]
    for sign in (-1.0, 1.0):
        points = np.stack([_end(slope, estimate, sign) for slope in slopes.T], axis=-1)
        # Row j holds the parameters moved for figure j; only that figure is taken from it.
        at = figures(estimate.space.values(points[:, :, None]))
        end = np.diagonal(np.broadcast_to(at, (value.size, value.size)))
        # Where a figure bends back beyond itself, the straight line says how far it may lie off to that side.
        straight = value + np.sum(slopes * (points - estimate.coordinates[:, None]), axis=0)
        reached += [end, np.where(sign * (end - value) < 0.0, straight, end)]
    both = np.array(reached)
    return value, both.min(axis=0), both.max(axis=0)
