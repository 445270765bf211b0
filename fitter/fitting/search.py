"""Many starts followed downhill at once: which of them leads to the lowest minimum.

Levenberg-Marquardt with the damping of each start on its own (D. W. Marquardt, SIAM J. Appl. Math. 11 (1963) 431),
and bounds that hold the coordinates which run into them. All starts share one evaluation of the residuals, which
costs little more than that of a single one; the worse ones are dropped on the way.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from fitter.fitting.blocks import Block, PointsBlock
from fitter.fitting.solve import ROBUST_SCALE
from fitter.fitting.space import STEP, ParameterSpace, Values

__all__ = ["lowest"]

Array = NDArray[np.float64]

#: Damping at the start, and what a step that leads down or up makes of it.
_DAMPING, _DOWN, _UP = 1e-2, 0.2, 5.0
#: Keeps a coordinate that nothing depends on where it is.
_LEAST_CURVATURE = 1e-9
#: Steps, and how many of the starts are followed after them.
_ROUNDS = ((4, 18), (6, 9), (10, 5))
#: Most steps of those that are left, and by what share of its cost the lowest must still fall in four of them.
_LAST_STEPS, _SETTLED = 60, 1e-5


def lowest(blocks: Sequence[Block], space: ParameterSpace, starts: Sequence[Values]) -> tuple[Values, float]:
    """The lowest minimum of the robust cost that any of the starts leads to.

    Parameters
    ----------
    blocks : sequence of Block
        Data and priors.
    space : ParameterSpace
        Free and fixed parameters, nuisance parameters among the free ones.
    starts : sequence of mapping of str to float
        Start values [SI] of the free parameters; nuisance parameters may be absent and start at 0.

    Returns
    -------
    values : mapping of str to float
        Where it is [SI].
    cost : float
        Robust cost there, as `Solution.cost`.
    """
    shifts = {name: 0.0 for block in blocks for name in block.nuisances}
    quick = [replace(b, looks=0) if isinstance(b, PointsBlock) else b for b in blocks]
    descent = _Descent.begin(quick, space, np.array([space.coordinates({**shifts, **start}) for start in starts]))
    for steps, kept in _ROUNDS:
        if len(descent.at) > kept:
            for _ in range(steps):
                descent = descent.step()
            descent = descent.only(np.argsort(descent.cost, kind="stable")[:kept])
    descent = _Descent.begin(blocks, space, descent.at)
    before = np.inf
    for done in range(_LAST_STEPS):
        descent = descent.step()
        if done % 4 == 3:
            now = float(np.min(descent.cost))
            if before - now <= _SETTLED * now:
                break
            before = now
    best = int(np.argmin(descent.cost))
    return space.values(descent.at[best]), float(descent.cost[best])


@dataclass(frozen=True, kw_only=True)
class _Descent:
    """Where k starts have got to: coordinates (k, n), cost (k,), its gradient (k, n) and curvature (k, n, n)."""

    blocks: Sequence[Block]
    space: ParameterSpace
    at: Array
    cost: Array
    gradient: Array
    curvature: Array
    damping: Array

    @classmethod
    def begin(cls, blocks: Sequence[Block], space: ParameterSpace, at: Array) -> _Descent:
        cost, gradient, curvature = _quadratic(blocks, space, at)
        return cls(
            blocks=blocks, space=space, at=at, cost=cost, gradient=gradient, curvature=curvature,
            damping=np.full(len(at), _DAMPING),
        )  # fmt: skip

    def only(self, which: NDArray[np.intp]) -> _Descent:
        """The descent of some of the starts."""
        return _Descent(
            blocks=self.blocks, space=self.space, at=self.at[which], cost=self.cost[which],
            gradient=self.gradient[which], curvature=self.curvature[which], damping=self.damping[which],
        )  # fmt: skip

    def step(self) -> _Descent:
        """One damped step of every start; one that leads up is taken back."""
        lower, upper = self.space.bounds()
        # A coordinate that is pushed against its bound stays there.
        stuck = ((self.at <= lower) & (self.gradient > 0.0)) | ((self.at >= upper) & (self.gradient < 0.0))
        matrix = np.where(stuck[:, :, None] | stuck[:, None, :], 0.0, self.curvature)
        i = np.arange(lower.size)
        matrix[:, i, i] = self.curvature[:, i, i] * (1.0 + self.damping[:, None]) + _LEAST_CURVATURE
        move = np.linalg.solve(matrix, np.where(stuck, 0.0, -self.gradient)[..., None])[..., 0]
        at = np.clip(self.at + move, lower, upper)
        cost, gradient, curvature = _quadratic(self.blocks, self.space, at)
        better = cost < self.cost
        return _Descent(
            blocks=self.blocks, space=self.space,
            at=np.where(better[:, None], at, self.at),
            cost=np.where(better, cost, self.cost),
            gradient=np.where(better[:, None], gradient, self.gradient),
            curvature=np.where(better[:, None, None], curvature, self.curvature),
            damping=self.damping * np.where(better, _DOWN, _UP),
        )  # fmt: skip


def _quadratic(blocks: Sequence[Block], space: ParameterSpace, at: Array) -> tuple[Array, Array, Array]:
    """Robust cost at k points, shape (k,), infinite where there is none, its gradient (k, n) and J'J (k, n, n)."""
    k, n = at.shape
    # For each point as many rows as coordinates, each with an imaginary step along its own.
    stepped = (at[:, None, :] + 1j * STEP * np.eye(n)).reshape(k * n, n)
    values = space.values(stepped.T[:, :, None])
    cost, gradient, curvature = np.zeros(k), np.zeros((k, n)), np.zeros((k, n, n))
    for block in blocks:
        rows = np.asarray(block.residuals(values))
        rows = np.broadcast_to(rows, (k * n, rows.shape[-1])).reshape(k, n, -1)
        sound = np.all(np.isfinite(rows), axis=(1, 2))
        rows = np.where(sound[:, None, None], rows, 0.0)
        residual, slope = rows[:, 0].real, rows.imag / STEP
        root = np.sqrt(1.0 + (residual / ROBUST_SCALE) ** 2)
        cost += np.where(sound, ROBUST_SCALE**2 * np.sum(root - 1.0, axis=-1), np.inf)
        weighed = slope / root[:, None, :]
        gradient += (weighed @ residual[:, :, None])[..., 0]
        curvature += weighed @ np.swapaxes(slope, 1, 2)
    return cost, gradient, curvature
