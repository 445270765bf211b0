"""How well each block of data is met, and by how much its standard deviations want widening."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fitter.fitting.blocks import ScalarBlock
from fitter.fitting.solve import Solution

__all__ = ["BlockStatistics", "block_statistics", "widening"]


Array = NDArray[np.float64]


@dataclass(frozen=True, kw_only=True)
class BlockStatistics:
    """How well the fit meets one block of data.

    Parameters
    ----------
    name : str
        The block's name.
    points, unused : int
        Number of data, and how many of them were left aside.
    chi_square : float
        Sum of squared residuals at the reading errors given.
    freedom : float
        Degrees of freedom left to the block.
    inflation : float
        Factor on the standard deviations in the fit.
    misfit : float
        How many times their reading errors the group's points lie off, root mean square; about 1 where the form fits.
    """

    name: str
    points: int
    unused: int
    chi_square: float
    freedom: float
    inflation: float
    misfit: float


#: No misfit runs longer than this correlation from point to point says.
_LONGEST_RUN = 0.9


def _run_length(mean_square: float, products: Array) -> float:
    """How many points of a misfit say as much as one, from residuals' products with their neighbours.

    Clicks scatter from point to point, but where a form does not fit, residuals come in runs: with a correlation of rho
    from point to point, (1 + rho)/(1 - rho) of them count as one (an autoregressive process of first order).

    Parameters
    ----------
    mean_square : float
        Of the residuals, in reading errors: what is above 1 is misfit.
    products : ndarray
        Products of neighbouring residuals, in reading errors.
    """
    if mean_square <= 1.0 or not products.size:
        return 1.0
    # Residuals that know nothing of their neighbours have a mean product this far off zero: that is no run.
    chance = mean_square / math.sqrt(products.size)
    rho = min(max(float(np.mean(products)) - chance, 0.0) / (mean_square - 1.0), _LONGEST_RUN)
    return (1.0 + rho) / (1.0 - rho)


def block_statistics(solution: Solution) -> tuple[BlockStatistics, ...]:
    """Misfit of each block; curves of one group share a widening, or the worst would be weighed down ever more."""
    taken = solution.leverage()
    chi_square: dict[str, float] = {}
    freedom: dict[str, float] = {}
    together: dict[str, tuple[float, float]] = {}
    products: dict[str, list[Array]] = {}
    for block in solution.blocks:
        residuals = solution.residuals[block.name][: block.points] * block.inflation
        chi_square[block.name] = float(np.sum(residuals**2))
        if not isinstance(block, ScalarBlock):
            used = residuals[block.used]
            products.setdefault(block.group, []).append(used[1:] * used[:-1])
        freedom[block.name] = max(block.used_points - taken[block.name], 0.0)
        c, f = together.get(block.group, (0.0, 0.0))
        together[block.group] = c + chi_square[block.name], f + freedom[block.name]
    result = []
    for block in solution.blocks:
        c, f = together[block.group]
        # A single table value says nothing of its own scatter.
        inflation = 1.0
        if f >= 1.0 and block.group:
            run = _run_length(c / f, np.concatenate(products[block.group]))
            inflation = math.sqrt(1.0 + max(c / f - 1.0, 0.0) * run)
        misfit = float(np.sqrt(c / max(f, 1.0)))
        inflation = block.inflation if block.held else inflation
        result.append(
            BlockStatistics(
                name=block.name, points=block.points, unused=block.points - block.used_points,
                chi_square=chi_square[block.name], freedom=freedom[block.name], inflation=inflation, misfit=misfit,
            )
        )  # fmt: skip
    return tuple(result)


def widening(solution: Solution, group: str) -> float:
    """By how much a group's standard deviations would have to be widened for its misfit; 1 where it is not there."""
    names = {block.name for block in solution.blocks if block.group == group}
    return max((s.inflation for s in block_statistics(solution) if s.name in names), default=1.0)
