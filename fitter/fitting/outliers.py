"""Mis-clicked points: found by a robust first pass, named, and left aside, never in silence."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from fitter.fitting.blocks import Block, PathBlock, PointsBlock
from fitter.fitting.solve import Solution

__all__ = ["Outlier", "set_aside"]

#: Residuals beyond this many standard deviations, in units of what is usual on the same curve, are mis-clicks.
LIMIT = 4.0
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

    A point is far off beyond 4 standard deviations, where the curve's other points scatter as their reading errors say;
    where they scatter more, because the model's form does not quite fit, beyond 4 times that.

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
    for block in solution.blocks:
        blocks.append(block)
        if not isinstance(block, PointsBlock | PathBlock):
            continue
        residuals = solution.residuals[block.name][: block.points]
        usual = max(1.0, 1.4826 * float(np.median(np.abs(residuals))))
        far = np.flatnonzero(np.abs(residuals) > LIMIT * usual)
        # Systematic misfit comes in runs: a mis-click stands out from its neighbours, too.
        far = np.array([i for i in far if _stands_out(residuals, int(i), LIMIT * usual)], dtype=int)
        if far.size == 0 or far.size > _MOST * block.points:
            continue
        used = block.used.copy()
        used[far] = False
        blocks[-1] = replace(block, used=used)
        found += [Outlier(curve=block.name, index=int(i), sigmas=float(residuals[i])) for i in far]
    return tuple(blocks), tuple(found)


def _stands_out(residuals: np.ndarray, i: int, limit: float) -> bool:
    near = np.delete(residuals[max(i - 2, 0) : i + 3], min(i, 2))
    return bool(np.abs(residuals[i] - np.median(near)) > 0.75 * limit)

