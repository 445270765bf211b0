"""What to digitize next: by how much each curve or table value that is not given yet would narrow the intervals.

A figure's variance after one more observation follows from the information matrix alone: what the new points would
read does not matter, only how they depend on the parameters and how well they would be clicked.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from fitter.errors import OperatingPointError
from fitter.fitting import observations
from fitter.fitting.blocks import Block, PathBlock, PointsBlock, ScalarBlock
from fitter.fitting.fit import FitResult
from fitter.fitting.intervals import COVERAGE_FACTOR, Estimate
from fitter.fitting.space import ParameterSpace, Values, derivatives
from fitter.gate_charge import OperatingPoint, gate_charge_curve
from fitter.models.channel import on_resistance, threshold_voltage
from fitter.models.transistor import DEFINITIONS, Transistor
from fitter.models.types import Numbers, scalar
from fitter.part import (
    Axis,
    Curve,
    Part,
    Quantity,
    Stated,
    StatedGateCharge,
    StatedOnResistance,
    StatedThreshold,
    StatedValues,
)

__all__ = ["FIGURES", "Prospect", "Prospects", "prospects"]

Array = NDArray[np.float64]

#: The figures whose intervals are looked at.
FIGURES = ("qg", "qgd", "v_plateau", "eoss")
#: The usual reading errors, as a share of an axis' length.
_POINT = _AXIS = 0.003
#: Points of a capacitance curve, of any other curve, and decades of a capacitance curve's VDS axis.
_MANY, _SOME, _DECADES = 35, 25, 3.0
#: A curve that would narrow the intervals by less than this is not worth clicking a second time.
_WORTH_A_SECOND_TIME = 0.02
#: Parameters that are fixed where nothing given shows them and that one more curve may free, and how far off they may
#: be taken to be: 1-sigma of their coordinates, 0.01 1/V, 1 mohm, a factor of 2.
_FREED = {"lambda": 1.0, "r_d": 1.0, "alpha": 0.7}
#: A threshold's usual test current [A].
_THRESHOLD_CURRENT = 250e-6


@dataclass(frozen=True, kw_only=True)
class Prospect:
    """What one more curve or table value would do.

    Parameters
    ----------
    what : str
        The curve or table value.
    widths : mapping of str to float
        Half of each figure's 95 % interval, relative to the figure, if it were given.
    gain : float
        Mean logarithm of the factors by which the intervals would shrink.
    """

    what: str
    widths: Mapping[str, float]
    gain: float


@dataclass(frozen=True, kw_only=True)
class Prospects:
    """What to digitize next.

    Parameters
    ----------
    now : mapping of str to float
        Half of each figure's 95 % interval as things are, relative to the figure.
    missing, again : tuple of Prospect
        What is not given yet, and what is given and would be worth clicking a second time; best first.
    """

    now: Mapping[str, float]
    missing: tuple[Prospect, ...]
    again: tuple[Prospect, ...]


def prospects(part: Part, result: FitResult, point: OperatingPoint) -> Prospects:
    """Rank what could be given in addition by how much it would narrow QG, QGD, the plateau and Eoss.

    Parameters
    ----------
    part : Part
        What is given.
    result : FitResult
        Its fit.
    point : OperatingPoint
        Where the gate charge matters; Eoss is taken at its VDD.

    Returns
    -------
    Prospects
    """
    estimate = result.estimate

    def figures(values: Values) -> Numbers:
        t = Transistor.from_values(values)
        reading = gate_charge_curve(t, point).reading
        every = (reading.total, reading.q_gd, reading.v_plateau, t.e_oss(point.v_dd))
        flat = [np.reshape(np.log(x), (-1,)) for x in every]
        size = max(f.size for f in flat)
        stacked = np.stack([np.broadcast_to(f, (size,)) for f in flat], axis=-1)
        return stacked if size > 1 else stacked[0]

    slopes = derivatives(figures, estimate.space, estimate.coordinates, estimate.space.names)
    now = _widths(slopes, estimate.covariance)

    def prospect(what: str, blocks: Sequence[Block]) -> Prospect:
        covariance = estimate.covariance
        for block in blocks:
            covariance = _with_block(block, estimate, covariance)
        then = _widths(slopes, covariance)
        gain = np.mean([np.log(max(now[n], 1e-12) / max(then[n], 1e-12)) for n in FIGURES])
        return Prospect(what=what, widths=then, gain=float(gain))

    missing = [prospect(what, blocks) for what, blocks in _missing(part, result, point)]
    again = [prospect(b.name, [b]) for b in result.solution.blocks if isinstance(b, PointsBlock | PathBlock)]
    worth_it = [p for p in again if p.gain > _WORTH_A_SECOND_TIME]
    return Prospects(now=now, missing=_ranked(missing), again=_ranked(worth_it))


def _ranked(found: Sequence[Prospect]) -> tuple[Prospect, ...]:
    return tuple(sorted(found, key=lambda p: -p.gain))


def _widths(slopes: Array, covariance: Array) -> dict[str, float]:
    sigma = np.sqrt(np.maximum(np.sum(slopes * (covariance @ slopes), axis=0), 0.0))
    return {name: float(COVERAGE_FACTOR * s) for name, s in zip(FIGURES, sigma, strict=True)}


def _with_block(block: Block, estimate: Estimate, covariance: Array) -> Array:
    """Covariance of the parameters once a block is observed, too.

    Its common errors are unknown, and so are parameters that are fixed as long as nothing like it is given.
    """
    space = estimate.space
    freed = [name for name in _FREED if name in space.fixed and name in block.parameters]
    fixed = {name: value for name, value in space.fixed.items() if name not in freed}
    further = (*(DEFINITIONS[name] for name in freed), *block.nuisance_definitions)
    wider = ParameterSpace(free=(*space.free, *further), fixed=fixed, complete=space.complete)
    start = {**dict.fromkeys(block.nuisances, 0.0), **space.fixed}
    at = np.concatenate([estimate.coordinates, ParameterSpace(free=further).coordinates(start)])
    rows = derivatives(block.residuals, wider, at, wider.names).T[: block.points]
    by_parameters, by_further = rows[:, : len(space.free)], rows[:, len(space.free) :]
    by_further = by_further * np.array([_FREED.get(d.name, 1.0) for d in further])
    moved = by_parameters @ covariance
    spread = np.eye(block.points) + by_further @ by_further.T + moved @ by_parameters.T
    return np.asarray(covariance - moved.T @ np.linalg.solve(spread, moved))


def _missing(part: Part, result: FitResult, point: OperatingPoint) -> Iterator[tuple[str, list[Block]]]:
    """What the fit could use and does not have: curves and table values as the model would give them."""
    t = Transistor.from_values({name: scalar(x) for name, x in result.estimate.values.items()})
    low = part.v_ds_max / 10.0**_DECADES
    v_ds = np.geomspace(low, part.v_ds_max, _MANY)
    for quantity, capacitance in ((Quantity.CISS, t.c_iss), (Quantity.COSS, t.c_oss), (Quantity.CRSS, t.c_rss)):
        if not part.curves_of(quantity):
            yield f"{quantity} curve", [_clicked(quantity, v_ds, np.real(capacitance(v_ds)), "log")]
    if not part.curves_of(Quantity.OUTPUT):
        # One firmly on, one that saturates at the test's current.
        for v_gs in (point.v_gs, scalar(gate_charge_curve(t, point).reading.v_plateau)):
            v_ds = np.linspace(0.0, min(3.0, part.v_ds_max), _SOME)
            i_d = np.real(t.i_d(v_gs, v_ds))
            on_page = i_d <= 4.0 * point.i_d
            curve = _clicked(Quantity.OUTPUT, v_ds[on_page], i_d[on_page], "linear", v_gs=v_gs, t_j=25.0)
            yield f"output curve at VGS {v_gs:.2g} V", [curve]
    stated = part.stated
    if not part.curves_of(Quantity.GATE_CHARGE):
        path = gate_charge_curve(t, point)
        q_g = np.linspace(0.0, path.total, _SOME)
        curve = _clicked(
            Quantity.GATE_CHARGE, q_g, np.interp(q_g, path.q_g, path.v_gs), "linear",
            v_dd=point.v_dd, i_d=point.i_d, load=point.load,
        )  # fmt: skip
        yield "gate_charge curve", [curve]
        empty = StatedGateCharge(v_dd=point.v_dd, i_d=point.i_d, v_gs=point.v_gs, load=point.load)
        given = stated.gate_charge or empty
        for name, before, table in (
            ("qg", given.q_g, replace(empty, q_g=Stated(typ=path.total))),
            ("qgs", given.q_gs, replace(empty, q_gs=Stated(typ=path.q_gs))),
            ("qgd", given.q_gd, replace(empty, q_gd=Stated(typ=path.q_gd))),
            ("v_plateau", given.v_plateau, replace(empty, v_plateau=Stated(typ=path.v_plateau))),
        ):
            if before is None or before.typ is None:
                alone = replace(part, curves=(), stated=StatedValues(gate_charge=table))
                yield f"{name} in the table", observations.gate_charge_blocks(alone)
    if stated.threshold is None or stated.threshold.v_gs_th is None:
        v_th = Stated(typ=scalar(threshold_voltage(_THRESHOLD_CURRENT, t.channel)))
        threshold = StatedThreshold(i_d=_THRESHOLD_CURRENT, v_gs_th=v_th)
        yield "vgs_th in the table", _channel_table(part, StatedValues(threshold=threshold))
    if stated.on_resistance is None or stated.on_resistance.r_ds_on is None:
        try:
            r_on = Stated(typ=scalar(on_resistance(point.i_d, point.v_gs, t.channel)))
        except OperatingPointError:
            return
        on = StatedOnResistance(v_gs=point.v_gs, i_d=point.i_d, r_ds_on=r_on)
        yield "rds_on in the table", _channel_table(part, StatedValues(on_resistance=on))


def _channel_table(part: Part, stated: StatedValues) -> list[Block]:
    blocks = observations.channel_blocks(replace(part, curves=(), stated=stated))
    return [b for b in blocks if isinstance(b, ScalarBlock)]


def _clicked(quantity: Quantity, x: Array, y: Array, scale: str, **conditions: object) -> Block:
    """The block of a curve as it would be clicked, on axes that just hold it."""
    logarithmic = scale == "log"

    def axis(values: Array) -> Axis:
        low, high = float(np.min(values)), float(np.max(values))
        return Axis(scale="log" if logarithmic else "linear", start=low if logarithmic else min(low, 0.0), end=high)

    curve = Curve(
        quantity=quantity, name=f"next {quantity}", file="", x=x, y=y, lines=np.arange(x.size), x_column="",
        y_column="", x_axis=axis(x), y_axis=axis(y), point_error=_POINT, axis_error=_AXIS, x_unit="", y_unit="",
        **conditions,  # type: ignore[arg-type]
    )  # fmt: skip
    return observations.curve_block(curve)
