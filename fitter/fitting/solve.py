"""The least-squares fit: lmfit on scaled coordinates with exact derivatives, and what it says of the parameters."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import lmfit
import numpy as np
from numpy.typing import NDArray
from scipy.special import erfcx

from fitter.errors import FitError, OperatingPointError
from fitter.fitting.blocks import Block
from fitter.fitting.space import ParameterSpace, Values, derivatives

__all__ = ["ROBUST_SCALE", "Solution", "solve"]

Array = NDArray[np.float64]

#: A coordinate nearer to a bound than this many of its own standard errors, the others held, sits on it.
_ON_BOUND = 0.02
_MOST_EVALUATIONS = 400
_NOWHERE = 1e6
#: Information added to every scaled coordinate: where the data give none, the variance comes out huge, not zero.
_LEAST_INFORMATION = 1e-12
#: A coordinate on its bound moves by no more than this share of the way to the other one, 1-sigma.
_FARTHEST = 0.25
#: Residuals up to about this many standard deviations count by their square in a robust pass, too.
ROBUST_SCALE = 3.0
#: Relative change of cost and coordinates that ends a fit; a look that only prepares the next fit takes the second.
_TOLERANCE, _ROUGH_TOLERANCE = 1e-7, 1e-4


@dataclass(frozen=True, kw_only=True)
class Solution:
    """The end of a least-squares fit.

    Parameters
    ----------
    space : ParameterSpace
        Its free parameters, nuisance parameters included.
    coordinates : ndarray, shape (n,)
        Where it ended.
    blocks : tuple of Block
        What it saw.
    residuals : mapping of str to ndarray
        Residuals of each block in standard deviations, priors included.
    jacobian : ndarray, shape (rows, n)
        Derivatives of all residuals by the coordinates.
    on_bound : ndarray of bool, shape (n,)
        Which coordinates sit on a bound.
    chi_square : float
        Sum of squared residuals.
    cost : float
        What was minimised: half of `chi_square`, or its robust counterpart.
    converged : bool
        Whether the fit reached its tolerance.
    followers : tuple of str
        Parameters of a second fit in which all the others were held; none in a single fit.
    """

    space: ParameterSpace
    coordinates: Array
    blocks: tuple[Block, ...]
    residuals: Mapping[str, Array]
    jacobian: Array
    on_bound: NDArray[np.bool_]
    chi_square: float
    cost: float
    converged: bool
    followers: tuple[str, ...] = ()

    def followed_by(self, second: Solution) -> Solution:
        """Both this fit and a second one, in which this one's parameters were held.

        Parameters
        ----------
        second : Solution
            With other free parameters and other blocks.

        Returns
        -------
        Solution
            Its covariance carries what is uncertain in the first fit on to the second one's parameters.
        """
        moved = {*self.space.names, *second.space.names}
        every = {**second.space.fixed, **self.space.fixed}
        fixed = {name: value for name, value in every.items() if name not in moved}
        space = replace(self.space, free=(*self.space.free, *second.space.free), fixed=fixed)
        coordinates = np.concatenate([self.coordinates, second.coordinates])
        blocks = (*self.blocks, *second.blocks)
        return Solution(
            space=space,
            coordinates=coordinates,
            blocks=blocks,
            residuals={**self.residuals, **second.residuals},
            jacobian=_jacobian(blocks, space, coordinates),
            on_bound=np.concatenate([self.on_bound, second.on_bound]),
            chi_square=self.chi_square + second.chi_square,
            cost=self.cost + second.cost,
            converged=self.converged and second.converged,
            followers=second.space.names,
        )

    def _second(self) -> tuple[int, int]:
        """Row and column at which a second fit begins."""
        names = set(self.followers)
        second = sum(self.residuals[b.name].size for b in self.blocks if not names.isdisjoint(b.parameters))
        return len(self.jacobian) - second, len(self.space.free) - len(names)

    @property
    def values(self) -> Values:
        """SI values of all parameters by name."""
        return self.space.values(self.coordinates)

    @property
    def covariance(self) -> Array:
        """Covariance of the coordinates, shape (n, n).

        Directions that the data leave open have a huge variance. A coordinate on its bound can only move inwards, and
        varies as much as the part of its distribution that lies there; the others move with it.
        """
        row, column = self._second()
        residuals = np.concatenate(list(self.residuals.values()))
        room = self._room()
        first = _inverse(self.jacobian[:row, :column], residuals[:row], room[:column])
        if not self.followers:
            return first
        result = np.zeros((room.size, room.size))
        result[:column, :column] = first
        by_first, by_second = self.jacobian[row:, :column], self.jacobian[row:, column:]
        own = _inverse(by_second, residuals[row:], room[column:])
        # By how much the second fit's parameters move with the first one's.
        moves = -own @ by_second.T @ by_first
        result[column:, :column] = moves @ first
        result[:column, column:] = result[column:, :column].T
        result[column:, column:] = own + moves @ first @ moves.T
        return result

    def _room(self) -> Array:
        """How far each coordinate on a bound can move, downwards if below zero; not-a-number for the others."""
        lower, upper = self.space.bounds()
        inwards = np.where(self.coordinates - lower < upper - self.coordinates, upper - lower, lower - upper)
        return np.where(self.on_bound, inwards, np.nan)

    def leverage(self) -> Mapping[str, float]:
        """How many parameters' worth of freedom each block's data took: the trace of its part of the hat matrix."""
        row, column = self._second()
        parts = [self.jacobian[:row, :column][:, ~self.on_bound[:column]]]
        parts += [self.jacobian[row:, column:][:, ~self.on_bound[column:]]] if self.followers else []
        hat = np.concatenate([np.sum(np.linalg.qr(part)[0] ** 2, axis=1) for part in parts])
        taken, row = {}, 0
        for block in self.blocks:
            rows = self.residuals[block.name].size
            taken[block.name] = float(np.sum(hat[row : row + block.points]))
            row += rows
        return taken


def _inverse(jacobian: Array, residuals: Array, room: Array) -> Array:
    """Covariance that derivatives give; of what is on a bound, that of a normal distribution cut off there.

    Parameters
    ----------
    jacobian : ndarray, shape (rows, n)
        Derivatives of the residuals.
    residuals : ndarray, shape (rows,)
        They tell how far beyond its bound a coordinate would lie without it.
    room : ndarray, shape (n,)
        As from `Solution._room`.

    Returns
    -------
    ndarray, shape (n, n)
    """
    information = jacobian.T @ jacobian
    # Scaled to a unit diagonal first: the information spans many decades otherwise.
    seen = np.diag(information)
    scale = np.sqrt(np.where(seen > 0.0, seen, 1.0))
    scaled = information / np.outer(scale, scale) + _LEAST_INFORMATION * np.eye(scale.size)
    on, off = np.flatnonzero(~np.isnan(room)), np.flatnonzero(np.isnan(room))
    result = np.zeros_like(scaled)
    inner = np.linalg.inv(scaled[np.ix_(off, off)])
    if on.size:
        # By how much the others move with what is on a bound, and how far that reaches.
        moves = -inner @ scaled[np.ix_(off, on)]
        left = scaled[np.ix_(on, on)] + scaled[np.ix_(on, off)] @ moves
        bound = np.linalg.inv(left + _LEAST_INFORMATION * np.eye(on.size))
        sigma = np.sqrt(np.diag(bound))
        beyond = bound @ (jacobian[:, on].T @ residuals / scale[on]) * np.sign(room[on]) / sigma
        reach = np.minimum(_cut_off(np.maximum(beyond, 0.0)), _FARTHEST * np.abs(room[on]) * scale[on] / sigma)
        bound *= np.outer(reach, reach)
        result[np.ix_(on, on)] = bound
        result[np.ix_(off, on)] = moves @ bound
        result[np.ix_(on, off)] = result[np.ix_(off, on)].T
        inner = inner + moves @ bound @ moves.T
    result[np.ix_(off, off)] = inner
    # Rounding makes an inverse a little lopsided.
    return np.asarray(0.5 * (result + result.T) / np.outer(scale, scale))


def _cut_off(a: Array) -> Array:
    """Root mean square of what of a normal distribution lies beyond `a` standard deviations, measured from there."""
    hazard = np.sqrt(2.0 / np.pi) / erfcx(a / np.sqrt(2.0))
    far = np.maximum(a, 1.0)
    # Far out the exact form is a small difference of large numbers.
    return np.sqrt(np.where(a > 30.0, 2.0 / far**2, 1.0 + a * a - a * hazard))


def solve(
    blocks: Sequence[Block],
    space: ParameterSpace,
    start: Values,
    *,
    robust: bool = False,
    rough: bool = False,
    evaluations: int | None = None,
) -> Solution:
    """Fit the free parameters to the blocks.

    Parameters
    ----------
    blocks : sequence of Block
        Data and priors.
    space : ParameterSpace
        Free and fixed parameters; nuisance parameters of the blocks are among the free ones.
    start : mapping of str to float
        Start values [SI] of the free parameters; nuisance parameters may be absent and start at 0.
    robust : bool
        Whether far-off points count by their distance instead of its square (soft L1), for a first pass.
    rough : bool
        Whether a tolerance of 1e-4 will do, for a fit from which only another one starts.
    evaluations : int, optional
        How often the residuals may be computed; 400 times by default.

    Returns
    -------
    Solution

    Raises
    ------
    FitError
        Where a residual at the start is not a finite number.
    """
    blocks = tuple(blocks)
    lower, upper = space.bounds()
    rows = sum(block.points + len(block.nuisances) for block in blocks)
    names = [f"u{i}" for i in range(len(space.free))]
    parameters = lmfit.Parameters()
    # A start on a bound has nowhere to go for a method that stays strictly inside.
    margin = 1e-4 * np.minimum(1.0, upper - lower)
    start = {**{name: 0.0 for block in blocks for name in block.nuisances}, **start}
    begin = np.clip(space.coordinates(start), lower + margin, upper - margin)
    for name, value, low, high in zip(names, begin, lower, upper, strict=True):
        parameters.add(name, value=value, min=low, max=high)

    def coordinates(current: lmfit.Parameters) -> Array:
        return np.array([current[name].value for name in names])

    def residual(current: lmfit.Parameters) -> Array:
        values = space.values(coordinates(current))
        try:
            every = np.concatenate([np.real(block.residuals(values)) for block in blocks])
        except OperatingPointError:
            every = np.full(rows, np.nan)
        # A step to where the channel cannot carry the test's current, or numbers overflow: so bad that it is taken
        # back.
        return every if np.all(np.isfinite(every)) else np.full(rows, _NOWHERE)

    def jacobian(current: lmfit.Parameters) -> Array:
        return _jacobian(blocks, space, coordinates(current))

    if np.all(residual(parameters) == _NOWHERE):
        raise FitError(
            "the fit cannot begin: at its start values the channel does not carry the gate-charge test's current"
        )
    tolerance = _ROUGH_TOLERANCE if rough else _TOLERANCE
    with np.errstate(invalid="ignore", divide="ignore"):  # of lmfit's own covariance, which is not used
        result = lmfit.Minimizer(residual, parameters, max_nfev=evaluations or _MOST_EVALUATIONS).minimize(
            method="least_squares", jac=jacobian, x_scale="jac", ftol=tolerance, xtol=tolerance, gtol=tolerance,
            loss="soft_l1" if robust else "linear", f_scale=ROBUST_SCALE,
        )  # fmt: skip
    found = coordinates(result.params)
    slopes = _jacobian(blocks, space, found)
    near = _ON_BOUND / np.sqrt(np.maximum(np.sum(slopes**2, axis=0), 1e-300))
    near = np.minimum(near, 1e-3 * (upper - lower))
    at_lower, at_upper = found - lower < near, upper - found < near
    # The method stays strictly inside; what has come this near belongs on the bound.
    found = np.where(at_lower, lower, np.where(at_upper, upper, found))
    values = space.values(found)
    by_block = {block.name: np.real(block.residuals(values)) for block in blocks}
    every = np.concatenate(list(by_block.values()))
    return Solution(
        space=space,
        coordinates=found,
        blocks=blocks,
        residuals=by_block,
        jacobian=slopes,
        on_bound=at_lower | at_upper,
        chi_square=float(sum(np.sum(r**2) for r in by_block.values())),
        cost=_robust_cost(every) if robust else 0.5 * float(np.sum(every**2)),
        converged=bool(result.success and not result.aborted),
    )


def _robust_cost(residuals: Array) -> float:
    """Half the sum of the soft L1 measure, as scipy.optimize.least_squares defines it."""
    return float(np.sum(ROBUST_SCALE**2 * (np.sqrt(1.0 + (residuals / ROBUST_SCALE) ** 2) - 1.0)))


def _jacobian(blocks: Sequence[Block], space: ParameterSpace, coordinates: Array) -> Array:
    """Derivatives of all residuals by all coordinates, block by block: most depend on few of them."""
    place = {name: i for i, name in enumerate(space.names)}
    parts = []
    for block in blocks:
        names = tuple(name for name in block.parameters if name in place)
        by_names = derivatives(block.residuals, space, coordinates, names)
        part = np.zeros((by_names.shape[1], len(place)))
        part[:, [place[name] for name in names]] = by_names.T
        parts.append(part)
    return np.concatenate(parts)
