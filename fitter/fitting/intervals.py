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


def _gradient(figures: Figures, estimate: Estimate) -> tuple[Array, Array]:
    """Covariance times gradient, shape (n, m), and standard errors, shape (m,), of m figures."""
    slopes = derivatives(figures, estimate.space, estimate.coordinates, estimate.space.names)
    moved = estimate.covariance @ slopes
    return moved, np.sqrt(np.maximum(np.sum(slopes * moved, axis=0), 0.0))


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
    return _gradient(figures, estimate)[1]


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
    moved, sigma = _gradient(figure, estimate)
    step = COVERAGE_FACTOR * moved[:, 0] / max(float(sigma[0]), 1e-300)
    lower, upper = estimate.space.bounds()
    points = (np.clip(estimate.coordinates + sign * step, lower, upper) for sign in (-1.0, 1.0))
    low, high = (estimate.space.values(point) for point in points)
    return low, high


def intervals(figures: Figures, estimate: Estimate) -> tuple[Array, Array, Array]:
    """Values and 95 % intervals of figures.

    Each figure is computed again with the parameters moved by 1.96 standard deviations along the direction in which it
    varies most for its probability (covariance times gradient), up and down: where the figure bends, so does its
    interval.

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
    moved, sigma = _gradient(figures, estimate)
    step = COVERAGE_FACTOR * moved / np.where(sigma > 0.0, sigma, 1.0)
    lower, upper = estimate.space.bounds()
    ends = []
    for sign in (-1.0, 1.0):
        points = np.clip(estimate.coordinates[:, None] + sign * step, lower[:, None], upper[:, None])
        # Row j holds the parameters moved for figure j; only that figure is taken from it.
        at = figures(estimate.space.values(points[:, :, None]))
        ends.append(np.diagonal(np.broadcast_to(at, (value.size, value.size))))
    both = np.array([value, *ends])
    return value, both.min(axis=0), both.max(axis=0)
