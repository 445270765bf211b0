"""The fit of a whole part: capacitances, channel, then everything together."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from fitter.fitting.assumptions import GATE_CHARGE_ONLY, GateAssumption, assumed_space
from fitter.fitting.blocks import Block
from fitter.fitting.forms import FormTrial, fit_capacitances
from fitter.fitting.intervals import Estimate
from fitter.fitting.misfit import BlockStatistics, block_statistics
from fitter.fitting.outliers import Outlier
from fitter.fitting.solve import Solution
from fitter.fitting.space import ParameterSpace, Values
from fitter.fitting.stages import (
    Stage,
    fit_body_diode,
    fit_channel,
    fit_gate_charge,
    fit_temperature,
    recovery_transit_time,
)
from fitter.fitting.turns import solve_in_turn
from fitter.models.diode import TRANSIT_TIME
from fitter.models.types import scalar
from fitter.part import Part

__all__ = ["FitResult", "fit"]

Array = NDArray[np.float64]


#: Evaluations of the two joint fits.
_FIRST_LOOK, _LAST_LOOK = 200, 60


@dataclass(frozen=True, kw_only=True)
class FitResult:
    """A finished fit.

    Parameters
    ----------
    estimate : Estimate
        The model's own parameters and their covariance, with what is assumed; nuisance parameters dropped.
    on_bound : tuple of str
        Parameters that ended on a bound.
    solution : Solution
        The last least-squares fit, nuisance parameters included.
    trials : tuple of FormTrial
        The forms that were tried.
    statistics : tuple of BlockStatistics
        One for each block of data.
    outliers : tuple of Outlier
        Points left aside.
    used_gate_charge : bool
        Whether gate-charge data were fitted.
    """

    estimate: Estimate
    on_bound: tuple[str, ...]
    solution: Solution
    trials: tuple[FormTrial, ...]
    statistics: tuple[BlockStatistics, ...]
    outliers: tuple[Outlier, ...]
    used_gate_charge: bool


def fit(part: Part, *, use_gate_charge: bool = False) -> FitResult:
    """Fit the model to a part's curves and table values.

    Parameters
    ----------
    part : Part
        The data.
    use_gate_charge : bool
        Fit the gate-charge data, too, instead of keeping them as a check.

    Returns
    -------
    FitResult

    Raises
    ------
    FitError
        Where the data cannot carry a fit.
    """
    capacitances = fit_capacitances(part)
    channel = fit_channel(part)
    stages: list[Stage | None] = [capacitances, channel, fit_temperature(part, channel), fit_body_diode(part)]
    done = [stage for stage in stages if stage is not None]
    start: Values = {name: value for stage in done for name, value in _found(stage).items()}
    blocks: list[Block] = [block for stage in done for block in stage.blocks]
    free = [name for stage in done for name in stage.free]
    fixed = {name: value for stage in done for name, value in stage.fixed.items()}
    outliers = [outlier for stage in done for outlier in stage.outliers]
    if use_gate_charge:
        charge = fit_gate_charge(part, {**fixed, **start}, ["lambda"] if "lambda" in fixed else [])
        start = {**start, **_found(charge)}
        blocks += charge.blocks
        free += charge.free
        fixed = {name: value for name, value in fixed.items() if name not in charge.free}
        outliers += charge.outliers
    else:
        # They stand in no residual; what is assumed of them is added after the fit.
        fixed |= GATE_CHARGE_ONLY
    solution, statistics = _widened(blocks, free, fixed, start, [stage.solution for stage in done])
    result = _result(solution, free, fixed)
    recovery = recovery_transit_time(part)
    if recovery is not None and "is_d" in free:
        result = _with_transit_time(result, *recovery)
    if not use_gate_charge:
        result = assumed_space(GateAssumption.of(part), *result)
    return FitResult(
        estimate=Estimate(space=result[0], coordinates=result[1], covariance=result[2]),
        on_bound=tuple(n for n, at in zip(solution.space.names, solution.on_bound, strict=True) if at and n in free),
        solution=solution, trials=capacitances.trials, statistics=statistics, outliers=tuple(outliers),
        used_gate_charge=use_gate_charge,
    )  # fmt: skip


def _found(stage: Stage) -> dict[str, float]:
    """Values that a stage found, nuisance parameters included, without its stand-ins for what it did not see."""
    return {name: scalar(stage.solution.values[name]) for name in stage.solution.space.names}


def _widened(
    blocks: Sequence[Block],
    free: Sequence[str],
    fixed: Mapping[str, float],
    start: Values,
    before: Sequence[Solution],
) -> tuple[Solution, tuple[BlockStatistics, ...]]:
    """Least squares with standard deviations widened by the misfit that earlier fits left, and again by its own."""
    statistics = tuple(s for solution in before for s in block_statistics(solution))
    for last in (False, True):
        widths = {s.name: s.inflation for s in statistics}
        widened = [b if b.held else replace(b, inflation=widths.get(b.name, 1.0)) for b in blocks]
        looks = _LAST_LOOK if last else _FIRST_LOOK
        solution = solve_in_turn(widened, free, fixed, start, rough=not last, evaluations=looks)
        if last and not solution.converged:
            # Along a flat valley with a bound in it steps stay small; the looser tolerance is met there all the same.
            solution = solve_in_turn(widened, free, fixed, solution.values, rough=True)
        start, statistics = solution.values, block_statistics(solution)
    return solution, statistics


def _with_transit_time(
    result: tuple[ParameterSpace, Array, Array], value: float, standard_error: float
) -> tuple[ParameterSpace, Array, Array]:
    """Add the body diode's transit time, which nothing else depends on."""
    space, coordinates, covariance = result
    n = coordinates.size
    wider = np.zeros((n + 1, n + 1))
    wider[:n, :n] = covariance
    wider[n, n] = (standard_error / TRANSIT_TIME.typical) ** 2
    space = replace(space, free=(*space.free, TRANSIT_TIME))
    return space, np.append(coordinates, value / TRANSIT_TIME.typical), wider


def _result(solution: Solution, free: Sequence[str], fixed: Mapping[str, float]) -> tuple[ParameterSpace, Array, Array]:
    """The model's own parameters out of a solution, nuisance parameters dropped."""
    keep = [i for i, name in enumerate(solution.space.names) if name in free]
    space = ParameterSpace(free=tuple(solution.space.free[i] for i in keep), fixed=fixed)
    return space, solution.coordinates[keep], solution.covariance[np.ix_(keep, keep)]
