"""The fit of a whole part: capacitances, channel, then everything together."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from fitter.errors import FitError
from fitter.fitting import observations, start_values
from fitter.fitting.assumptions import GateAssumption, assumed_space
from fitter.fitting.blocks import Block, model_space
from fitter.fitting.forms import CapacitanceFit, FormTrial, fit_capacitances
from fitter.fitting.intervals import Estimate
from fitter.fitting.outliers import Outlier, set_aside
from fitter.fitting.solve import Solution, solve
from fitter.fitting.space import ParameterSpace, Values
from fitter.models.channel import CHANNEL
from fitter.models.types import scalar
from fitter.part import Part, Quantity

__all__ = ["BlockStatistics", "FitResult", "fit"]

Array = NDArray[np.float64]

#: How often standard deviations are widened by the misfit and the fit repeated.
_WIDENINGS = 2
#: How much farther from its points the transfer curve may come to lie for the sake of output curves.
_WORSE = 1.25
#: Factors on the output curves' standard deviations that are tried for that.
_OUTPUT_WIDENINGS = (1.0, 4.0, 12.0, 36.0, 100.0)


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
        Factor on the standard deviations because the model's form does not quite fit.
    """

    name: str
    points: int
    unused: int
    chi_square: float
    freedom: float
    inflation: float


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
    channel = _fit_channel(part)
    start: Values = {**_found(capacitances), **_found(channel)}
    blocks: list[Block] = [*capacitances.blocks, *channel.blocks]
    free = [*capacitances.free, *channel.free]
    fixed = {**capacitances.fixed, **channel.fixed}
    outliers = [*capacitances.outliers, *channel.outliers]
    if use_gate_charge:
        charge_blocks = observations.gate_charge_blocks(part)
        if not charge_blocks:
            raise FitError(
                "there are no gate-charge data to fit: digitize a gate_charge curve or state qg, qgs and qgd, or fit "
                "without --use-gate-charge"
            )
        start = GateAssumption.of(part).start({**fixed, **start})
        free += ["c_ch", "c_acc"]
        if part.curves_of(Quantity.GATE_CHARGE) and "lambda" in fixed:
            # The slope of the plateau determines it.
            fixed.pop("lambda")
            free.append("lambda")
        rough = solve(
            [*blocks, *charge_blocks], model_space(free, fixed, [*blocks, *charge_blocks]), start, robust=True
        )
        marked, found = set_aside(rough)
        by_name = {block.name: block for block in marked}
        blocks += [by_name[block.name] for block in charge_blocks]
        outliers += [o for o in found if o.curve in {block.name for block in charge_blocks}]
        start = rough.values
    else:
        # They stand in no residual; what is assumed of them is added after the fit.
        fixed |= {"c_ch": 0.0, "c_acc": 1e-12}
    space = model_space(free, fixed, blocks)
    solution, statistics = _widened(blocks, space, start)
    result = _result(solution, free, fixed)
    if not use_gate_charge:
        result = assumed_space(GateAssumption.of(part), *result)
    return FitResult(
        estimate=Estimate(space=result[0], coordinates=result[1], covariance=result[2]),
        on_bound=tuple(n for n, at in zip(space.names, solution.on_bound, strict=True) if at and n in free),
        solution=solution, trials=capacitances.trials, statistics=statistics, outliers=tuple(outliers),
        used_gate_charge=use_gate_charge,
    )  # fmt: skip


@dataclass(frozen=True, kw_only=True)
class _Stage:
    """What one stage of the fit hands on."""

    blocks: tuple[Block, ...]
    free: tuple[str, ...]
    fixed: Mapping[str, float]
    outliers: tuple[Outlier, ...]
    solution: Solution


def _fit_channel(part: Part) -> _Stage:
    """The channel alone, led by the transfer curve: that is what sets the plateau.

    Where the square law fits all curves, output curves count in full. Where it does not (carriers that reach their
    saturation velocity, say), they count as much as can be without the transfer curve being met much worse for it.
    """
    blocks = observations.channel_blocks(part)
    outputs = [block for block in blocks if block.group == Quantity.OUTPUT]
    leading = [block for block in blocks if block.group != Quantity.OUTPUT]
    begin = start_values.channel_start(part)
    start: Values = {CHANNEL[field].name: value for field, value in begin.items()}
    fixed = {"lambda": 0.0}
    if "rds_on (table)" not in {block.name for block in blocks}:
        fixed["r_d"] = 0.0
    free = tuple(d.name for d in CHANNEL.values() if d.name not in fixed)
    rough = solve(leading, model_space(free, fixed, leading), start, robust=True)
    marked, outliers = set_aside(rough)
    solution = solve(marked, model_space(free, fixed, marked), rough.values)
    if not outputs:
        return _Stage(blocks=marked, free=free, fixed=fixed, outliers=outliers, solution=solution)

    allowed = _WORSE * _widening(solution, Quantity.TRANSFER)
    free = tuple(d.name for d in CHANNEL.values())
    start = {**solution.values, "lambda": 1e-3}
    every = (*marked, *outputs)
    rough = solve(every, model_space(free, {}, every), start, robust=True)
    marked, outliers = set_aside(rough)
    start = rough.values
    for weight in _OUTPUT_WIDENINGS:
        weighed = tuple(replace(b, inflation=weight) if b.group == Quantity.OUTPUT else b for b in marked)
        solution = solve(weighed, model_space(free, {}, weighed), start)
        found = _widening(solution, Quantity.TRANSFER)
        if found <= allowed:
            break
        start = solution.values
    if weight > 1.0:
        # The balance between the two kinds of curve stays as it was found, or each would give way to the other in turn.
        factors = {Quantity.TRANSFER: found, Quantity.OUTPUT: weight * found}
        weighed = tuple(
            replace(b, inflation=factors[Quantity(b.group)], held=True) if b.group in factors else b for b in weighed
        )
    return _Stage(blocks=weighed, free=free, fixed={}, outliers=outliers, solution=solution)


def _widening(solution: Solution, group: str) -> float:
    """By how much a group's standard deviations would have to be widened for its misfit."""
    names = {block.name for block in solution.blocks if block.group == group}
    return max(s.inflation for s in _statistics(solution) if s.name in names)


def _found(stage: CapacitanceFit | _Stage) -> dict[str, float]:
    """Values that a stage found, nuisance parameters included, without its stand-ins for what it did not see."""
    return {name: scalar(stage.solution.values[name]) for name in stage.solution.space.names}


def _widened(
    blocks: Sequence[Block], space: ParameterSpace, start: Values
) -> tuple[Solution, tuple[BlockStatistics, ...]]:
    """Least squares, repeated with standard deviations widened where a curve's misfit exceeds its reading errors."""
    solution = solve(blocks, space, start)
    for _ in range(_WIDENINGS):
        widths = {s.name: s.inflation for s in _statistics(solution)}
        widened = [replace(b, inflation=widths[b.name]) for b in blocks]
        solution = solve(widened, space, solution.values)
    return solution, _statistics(solution)


def _statistics(solution: Solution) -> tuple[BlockStatistics, ...]:
    """Misfit of each block; curves of one group share a widening, or the worst would be weighed down ever more."""
    taken = solution.leverage()
    chi_square: dict[str, float] = {}
    freedom: dict[str, float] = {}
    together: dict[str, tuple[float, float]] = {}
    for block in solution.blocks:
        chi_square[block.name] = float(np.sum(solution.residuals[block.name][: block.points] ** 2)) * block.inflation**2
        freedom[block.name] = max(block.used_points - taken[block.name], 0.0)
        c, f = together.get(block.group, (0.0, 0.0))
        together[block.group] = c + chi_square[block.name], f + freedom[block.name]
    result = []
    for block in solution.blocks:
        c, f = together[block.group]
        # A single table value says nothing of its own scatter.
        inflation = float(np.sqrt(max(1.0, c / f))) if f >= 1.0 and block.group else 1.0
        inflation = block.inflation if block.held else inflation
        result.append(
            BlockStatistics(
                name=block.name, points=block.points, unused=block.points - block.used_points,
                chi_square=chi_square[block.name], freedom=freedom[block.name], inflation=inflation,
            )
        )  # fmt: skip
    return tuple(result)


def _result(solution: Solution, free: Sequence[str], fixed: Mapping[str, float]) -> tuple[ParameterSpace, Array, Array]:
    """The model's own parameters out of a solution, nuisance parameters dropped."""
    keep = [i for i, name in enumerate(solution.space.names) if name in free]
    space = ParameterSpace(free=tuple(solution.space.free[i] for i in keep), fixed=fixed)
    return space, solution.coordinates[keep], solution.covariance[np.ix_(keep, keep)]
