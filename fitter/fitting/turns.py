"""Fits in turn: what is known at 25 degC leads, and the temperature laws follow it to the hot curves.

A hot curve tells the laws, and not the channel at 25 degC: what the laws cannot follow would bend it.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from fitter.fitting.blocks import Block, model_space
from fitter.fitting.solve import Solution, solve
from fitter.fitting.space import Values
from fitter.models.temperature import TEMPERATURE
from fitter.models.types import scalar

__all__ = ["solve_in_turn"]

_LAWS = frozenset(d.name for d in TEMPERATURE.values())


def solve_in_turn(
    blocks: Sequence[Block],
    free: Sequence[str],
    fixed: Mapping[str, float],
    start: Values,
    *,
    rough: bool,
    evaluations: int | None = None,
) -> Solution:
    """Fit everything but the temperature laws, then the laws with all else as it was found.

    Parameters
    ----------
    blocks : sequence of Block
        Data and priors.
    free : sequence of str
        Free parameters of the model.
    fixed : mapping of str to float
        Fixed ones [SI].
    start, rough, evaluations
        As for `solve`.

    Returns
    -------
    Solution
        Of both fits together.
    """
    laws = [name for name in free if name in _LAWS]
    hot = [block for block in blocks if not _LAWS.isdisjoint(block.parameters)]
    leading = [block for block in blocks if _LAWS.isdisjoint(block.parameters)]
    known = {name: value for name, value in fixed.items() if not hot or name not in _LAWS}
    space = model_space([name for name in free if name not in _LAWS], known, leading)
    solution = solve(leading, space, start, rough=rough, evaluations=evaluations)
    if not hot:
        return solution
    shifts = {name for block in leading for name in block.nuisances}
    found = {name: scalar(value) for name, value in solution.values.items() if name not in shifts}
    found |= {name: value for name, value in fixed.items() if name in _LAWS}
    return solution.followed_by(solve(hot, model_space(laws, found, hot), start, rough=rough, evaluations=evaluations))
