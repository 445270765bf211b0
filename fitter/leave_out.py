"""Real checks of a fit: each group of data left out in turn, and predicted by the fit to all the others."""

from __future__ import annotations

import math
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from fitter.comparison import Comparison, compare, digitized_reading
from fitter.fitting import observations
from fitter.fitting.assumptions import GATE_CHARGE_ONLY, GateAssumption, assumed_space
from fitter.fitting.blocks import EXPECTED, READ, TABLE, Block, PathBlock, PointsBlock, ScalarBlock, model_space
from fitter.fitting.fit import FitResult
from fitter.fitting.intervals import COVERAGE_FACTOR, Estimate, intervals
from fitter.fitting.observations import STATED_ERROR, TABLE_ERROR
from fitter.fitting.solve import solve
from fitter.fitting.space import ParameterSpace, Values
from fitter.fitting.stages import UNSEEN_CHANNEL
from fitter.fitting.turns import solve_in_turn
from fitter.models.types import Numbers, scalar
from fitter.part import Curve, Part, Quantity, Stated

__all__ = ["MEAN", "LeftOut", "leave_out"]

Array = NDArray[np.float64]

#: Variance of a coordinate on which none of the data left depends.
_UNSEEN = 1e6
#: A prediction whose 95 % interval reaches farther than this factor either way predicts nothing.
_PREDICTS_NOTHING = 3.0
#: Condition of a curve's row: its mean over the points.
MEAN = "mean"
_GATE_CHARGE = ("qg", "qgs", "qgd", "v_plateau")


@dataclass(frozen=True, kw_only=True)
class LeftOut:
    """One figure that was left out and predicted, in SI and n-channel polarity.

    Parameters
    ----------
    left_out : str
        What the fit did not see: a curve, a table value, or the gate charge.
    quantity, condition : str
        The figure; for a curve its mean over the points, geometric on a log axis.
    unit : str
        SI unit.
    given : float
        What the data say.
    predicted, low, high : float or None
        What the others predict, with its 95 % interval; None where they do not determine it.
    sigmas : float or None
        Given less predicted, in standard deviations of the two together.
    """

    left_out: str
    quantity: str
    condition: str
    unit: str
    given: float
    predicted: float | None
    low: float | None
    high: float | None
    sigmas: float | None


def leave_out(part: Part, result: FitResult) -> tuple[LeftOut, ...]:
    """Leave out each group of data in turn and predict it from the rest.

    The fit is repeated without the group, in the forms and with the widenings of the whole fit. What the fit did not
    see anyway is predicted by the fit as it is.

    Parameters
    ----------
    part : Part
        The data.
    result : FitResult
        Their fit.

    Returns
    -------
    tuple of LeftOut
        Curves, table values, gate charge.
    """
    blocks = result.solution.blocks
    charge = [b for b in blocks if _is_gate_charge(b)]
    rows: list[LeftOut] = []
    for block in blocks:
        if block in charge or block.name.endswith((EXPECTED, READ)):
            continue
        estimate = _without(part, result, [b for b in blocks if b.name in (block.name, block.name + READ)])
        if isinstance(block, ScalarBlock):
            wanted = block.name.removesuffix(TABLE)
            rows += _table_rows(part, estimate, block.name, (wanted,))
        elif isinstance(block, PointsBlock):
            rows.append(_curve_row(next(c for c in part.curves if c.name == block.name), block, estimate))
    rows += _gate_charge_rows(part, _without(part, result, charge) if charge else result.estimate)
    told = {row.quantity for row in rows if row.condition != MEAN}
    names = [name for name in _quantities(part, result.estimate) if name not in (*told, *_GATE_CHARGE)]
    for name in names:
        rows += _table_rows(part, result.estimate, f"{name}{TABLE}", (name,))
    return tuple(rows)


def _is_gate_charge(block: Block) -> bool:
    return isinstance(block, PathBlock) or block.name.startswith(("q_g", "v_plateau", "s_gs"))


def _quantities(part: Part, estimate: Estimate) -> list[str]:
    """Stated quantities that the fit does not see; those solved for exactly predict nothing."""
    return [c.quantity for c in compare(part, estimate, (), False) if not c.used_in_fit]


def _without(part: Part, result: FitResult, gone: Collection[Block]) -> Estimate:
    """The fit to all blocks but some."""
    blocks = [b for b in result.solution.blocks if b not in gone]
    blocks += _stand_ins(part, {b.name for b in gone})
    before = result.solution.values
    own = [d.name for d in result.estimate.space.free if d.name in result.solution.space.names]
    fixed = dict(result.estimate.space.fixed)
    gate_charge_gone = any(_is_gate_charge(b) for b in gone)
    if gate_charge_gone:
        own = [name for name in own if name not in GATE_CHARGE_ONLY]
        fixed |= GATE_CHARGE_ONLY
    elif not result.used_gate_charge:
        fixed |= GATE_CHARGE_ONLY
    outputs = any(b.group == Quantity.OUTPUT for b in blocks)
    sloping = outputs or any(b.group == Quantity.GATE_CHARGE for b in blocks)
    resistance = sloping or any(b.name == "rds_on (table)" for b in blocks)
    for name, told in (("alpha", outputs), ("lambda", sloping), ("r_d", resistance)):
        if name in own and not told:
            own.remove(name)
            fixed[name] = UNSEEN_CHANNEL[name]
    seen = {name for b in blocks for name in b.parameters}
    unseen = [name for name in own if name not in seen]
    fitted = [name for name in own if name in seen]
    held = {**fixed, **{name: scalar(before[name]) for name in unseen}}
    if any(b.group == Quantity.TRANSFER for b in gone):
        # Without it hot curves may be all that is left to tell the channel.
        solution = solve(blocks, model_space(fitted, held, blocks), before, rough=True)
    else:
        solution = solve_in_turn(blocks, fitted, held, before, rough=True)
    space = solution.space
    # What only this fit drove onto a bound is not known for that.
    bounded = {n for n, at in zip(result.solution.space.names, result.solution.on_bound, strict=True) if at}
    solution = replace(solution, on_bound=solution.on_bound & np.array([name in bounded for name in space.names]))
    keep = [i for i, name in enumerate(space.names) if name in fitted]
    covariance = solution.covariance[np.ix_(keep, keep)]
    return _with_unseen(
        part, space, solution.coordinates[keep], covariance, keep, unseen, held,
        assumed=gate_charge_gone or not result.used_gate_charge,
    )  # fmt: skip


def _with_unseen(
    part: Part,
    space: ParameterSpace,
    coordinates: Array,
    covariance: Array,
    keep: Sequence[int],
    unseen: Sequence[str],
    held: Mapping[str, float],
    *,
    assumed: bool,
) -> Estimate:
    """An estimate in which the parameters that nothing left depends on are open, and the assumed ones assumed."""
    lost = model_space(unseen, {}, ())
    wide = ParameterSpace(
        free=(*(space.free[i] for i in keep), *lost.free),
        fixed={name: value for name, value in held.items() if name not in unseen},
    )
    wider = np.zeros((len(wide.free), len(wide.free)))
    wider[: len(keep), : len(keep)] = covariance
    wider[range(len(keep), len(wide.free)), range(len(keep), len(wide.free))] = _UNSEEN
    every = np.concatenate([coordinates, lost.coordinates(held)])
    parts = assumed_space(GateAssumption.of(part), wide, every, wider) if assumed else (wide, every, wider)
    return Estimate(space=parts[0], coordinates=parts[1], covariance=parts[2])


def _stand_ins(part: Part, gone: Collection[str]) -> list[Block]:
    """Table values that take the place of a capacitance curve."""
    rest = replace(part, curves=tuple(c for c in part.curves if c.name not in gone))
    present = {b.name for b in observations.capacitance_blocks(part)}
    return [b for b in observations.capacitance_blocks(rest) if b.name not in present]


def _table_rows(part: Part, estimate: Estimate, left_out: str, names: Sequence[str]) -> list[LeftOut]:
    """Rows for stated typical values."""
    return [
        _row(left_out, c, c.stated.typ, STATED_ERROR.get(c.quantity, TABLE_ERROR["capacitance"]))
        for c in compare(part, estimate, (), False)
        if c.quantity in names and c.stated.typ
    ]


def _row(left_out: str, c: Comparison, given: float, relative_error: float) -> LeftOut:
    error = abs(given) * relative_error
    row = _judged(left_out, c.quantity, c.condition, c.unit, given, error, c.fitted, c.low, c.high)
    if row.predicted is None or row.low is None or row.high is None:
        return row
    return _unpredicted(row) if _nothing(row.predicted, row.low, row.high) else row


def _judged(
    left_out: str,
    quantity: str,
    condition: str,
    unit: str,
    given: float,
    error: float,
    predicted: float | None,
    low: float | None,
    high: float | None,
) -> LeftOut:
    sigmas = None
    if predicted is None or low is None or high is None or not np.isfinite([predicted, low, high]).all():
        predicted = low = high = None
    else:
        # Towards the given value the interval has a width of its own.
        side = (high - predicted if given > predicted else predicted - low) / COVERAGE_FACTOR
        sigmas = (given - predicted) / math.hypot(error, side)
    return LeftOut(
        left_out=left_out, quantity=quantity, condition=condition, unit=unit, given=given, predicted=predicted,
        low=low, high=high, sigmas=sigmas,
    )  # fmt: skip


def _nothing(predicted: float, low: float, high: float) -> bool:
    small, middle, large = sorted((abs(low), abs(predicted), abs(high)))
    return large > _PREDICTS_NOTHING * middle or middle > _PREDICTS_NOTHING * small


def _curve_row(curve: Curve, block: PointsBlock, estimate: Estimate) -> LeftOut:
    """A curve by its mean in the coordinate of its y axis: there its common errors are simplest."""
    used = block.used

    def mean(values: Values) -> Numbers:
        return np.asarray(np.mean(block.fitted(values)[..., used], axis=-1, keepdims=True))

    quiet = replace(block, shift_x=0.0, shift_y=0.0)
    slope = np.real(quiet.curve(estimate.values)[1])[used]
    count = max(int(np.count_nonzero(used)), 1)
    independent = np.hypot(block.sigma_y[used], slope * block.sigma_x[used])
    error = block.inflation * math.sqrt(
        block.shift_y**2 + (float(np.mean(slope)) * block.shift_x) ** 2 + float(np.sum(independent**2)) / count**2
    )
    value, low, high = (float(x[0]) for x in intervals(mean, estimate))
    given = float(np.mean(block.y[used]))
    row = _judged(curve.name, str(curve.quantity), MEAN, curve.y_unit, given, error, value, low, high)
    if curve.y_axis.scale == "linear":
        return _unpredicted(row) if row.predicted is None or _nothing(value, low, high) else row
    ends = [None if x is None else math.exp(x) for x in (row.predicted, row.low, row.high)]
    row = replace(row, given=math.exp(given), predicted=ends[0], low=ends[1], high=ends[2])
    return _unpredicted(row) if _nothing(math.exp(value), math.exp(low), math.exp(high)) else row


def _unpredicted(row: LeftOut) -> LeftOut:
    return replace(row, predicted=None, low=None, high=None, sigmas=None)


def _gate_charge_rows(part: Part, estimate: Estimate) -> list[LeftOut]:
    """The stated gate-charge values; for those not stated, what the digitized curve reads."""
    table = part.stated.gate_charge
    curves = part.curves_of(Quantity.GATE_CHARGE)
    if table is None:
        return []
    if curves:
        read = digitized_reading(curves[0], scalar(estimate.values["v_th"]))
        if curves[0].v_dd == table.v_dd and curves[0].i_d == table.i_d:
            # QG is left alone: it depends on where the curve ends.
            table = replace(
                table,
                q_gs=table.q_gs or Stated(typ=float(read.q_gs)),
                q_gd=table.q_gd or Stated(typ=float(read.q_gd)),
                v_plateau=table.v_plateau or Stated(typ=float(read.v_plateau)),
            )
    stated = replace(part, stated=replace(part.stated, gate_charge=table))
    return _table_rows(stated, estimate, "gate charge", _GATE_CHARGE)
