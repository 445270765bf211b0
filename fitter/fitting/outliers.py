"""Mis-clicked points: found by a robust first pass, named, and left aside, never in silence."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from fitter.fitting.blocks import Block, PathBlock, PointsBlock
from fitter.fitting.solve import Solution

__all__ = ["Outlier", "set_aside"]

Array = NDArray[np.float64]

#: Points beyond this many standard deviations are mis-clicks.
LIMIT = 4.0
#: Standard deviation of a residual less the mean of its neighbours, where all three scatter by one.
_SCATTER = 1.5**0.5
#: Curves with fewer points have no neighbours to judge by.
_FEWEST = 6
#: Never set aside more than this share of a curve: then it is the model that is wrong, or the whole curve.
_MOST = 0.2


@dataclass(frozen=True, kw_only=True)
class Outlier:
    """A point that the fit leaves aside.

    Parameters
    ----------
    curve : str
        Name of its curve.
    index : int
        Its place among the curve's points.
    sigmas : float
        Its distance from the robust fit in standard deviations.
    """

    curve: str
    index: int
    sigmas: float


def set_aside(solution: Solution) -> tuple[tuple[Block, ...], tuple[Outlier, ...]]:
    """Mark the points that lie far off a robust fit.

    A mis-click is far off the fit and far off its neighbours, too: where the model's form does not quite fit, residuals
    are large but come in runs. Far is 4 standard deviations, or 4 times what is usual from point to point on the
    same curve. The farthest goes first, then its neighbours are judged without it.

    Parameters
    ----------
    solution : Solution
        Of a robust pass.

    Returns
    -------
    blocks : tuple of Block
        The same blocks, such points marked as not used.
    outliers : tuple of Outlier
        What was marked.
    """
    blocks: list[Block] = []
    found: list[Outlier] = []
    values = solution.values
    for block in solution.blocks:
        blocks.append(block)
        if not isinstance(block, PointsBlock | PathBlock) or block.points < _FEWEST:
            continue
        residuals = np.real(block.deviations(values))
        far = _far_off(residuals, block.used.copy())
        if far:
            used = block.used.copy()
            used[far] = False
            blocks[-1] = replace(block, used=used)
            found += [Outlier(curve=block.name, index=i, sigmas=float(residuals[i])) for i in sorted(far)]
    return tuple(blocks), tuple(found)


def _far_off(residuals: Array, used: NDArray[np.bool_]) -> list[int]:
    """Indices of the mis-clicks of one curve; none where there are so many that the model must be wrong instead."""
    far: list[int] = []
    while True:
        left = np.flatnonzero(used)
        off = _off_neighbours(residuals[left])
        usual = max(_SCATTER, 1.4826 * float(np.median(np.abs(off))))
        suspicious = (np.abs(residuals[left]) > LIMIT) & (np.abs(off) > LIMIT * usual)
        if not suspicious.any():
            return far
        worst = int(left[np.argmax(np.where(suspicious, np.abs(off), 0.0))])
        far.append(worst)
        used[worst] = False
        if len(far) > _MOST * residuals.size:
            return []


def _off_neighbours(residuals: Array) -> Array:
    """Each residual less the mean of its two neighbours; at the ends less the straight line through the next two."""
    off = np.empty_like(residuals)
    off[1:-1] = residuals[1:-1] - 0.5 * (residuals[:-2] + residuals[2:])
    off[0] = residuals[0] - (2.0 * residuals[1] - residuals[2])
    off[-1] = residuals[-1] - (2.0 * residuals[-2] - residuals[-3])
    return off
