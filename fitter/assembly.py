"""From a finished fit to the finished model: parameter table, correlations, checks, notices."""

from __future__ import annotations

import math
from collections.abc import Collection, Mapping, Sequence
from itertools import combinations
from typing import TypeVar

import numpy as np
from numpy.typing import ArrayLike

from fitter.comparison import compare, explain_gate_charge, explain_recovery
from fitter.fitting.blocks import PathBlock, PointsBlock
from fitter.fitting.determination import OPEN, led_by_expectation, spreads, undetermined
from fitter.fitting.fit import FitResult
from fitter.fitting.intervals import standard_errors
from fitter.fitting.observations import from_axis
from fitter.leave_out import LeftOut
from fitter.model import CurveRow, FittedModel, Validity
from fitter.models.temperature import REFERENCE
from fitter.models.transistor import DEFINITIONS
from fitter.models.types import scalar
from fitter.parameters import Origin, Parameter
from fitter.part import Curve, Notice, Part, Quantity
from fitter.version import VERSION

__all__ = ["assemble"]

Model = TypeVar("Model", bound=FittedModel)

#: A misfit of more than this many times the reading errors is worth a notice.
_WORTH_SAYING = 1.5
#: A current that lambda raises by more than this share at VDD is worth a notice, where no curve reaches that far.
_DRAWN_OUT = 0.2

_PACKAGE = {
    "r_g": ("ohm", "internal gate resistance"),
    "l_g": ("H", "inductance of the gate lead"),
    "l_d": ("H", "inductance of the drain lead"),
    "l_s": ("H", "inductance of the source lead, shared by gate loop and power loop"),
}


def assemble(part: Part, result: FitResult, kind: type[Model], left_out: Sequence[LeftOut] = ()) -> Model:
    """Put a finished model together.

    Parameters
    ----------
    part : Part
        What was fitted.
    result : FitResult
        The fit.
    kind : type
        `FittedModel` or a class derived from it.
    left_out : sequence of LeftOut
        Each group of data predicted from the others, if that was asked for.

    Returns
    -------
    FittedModel
        Of that class.
    """
    parameters = _parameters(part, result)
    blocks = [block.name for block in result.solution.blocks]
    checks = compare(part, result.estimate, blocks, result.used_gate_charge)
    return kind(
        part=part,
        parameters=parameters,
        estimate=result.estimate,
        correlations=_correlations(result, parameters),
        statistics=result.statistics,
        trials=result.trials,
        checks=checks,
        points=_points(part, result),
        notices=(
            *part.notices,
            *_notices(part, result, parameters),
            *explain_gate_charge(checks),
            *explain_recovery(checks),
        ),
        used_gate_charge=result.used_gate_charge,
        left_out=tuple(left_out),
        validity=_validity(part, {b.name for b in result.solution.blocks}),
        version=VERSION,
    )


def _parameters(part: Part, result: FitResult) -> dict[str, Parameter]:
    estimate = result.estimate
    values, spread, led = estimate.values, spreads(estimate), led_by_expectation(result.solution, estimate)
    free = {d.name: math.sqrt(v) for d, v in zip(estimate.space.free, np.diag(estimate.covariance), strict=True)}
    table: dict[str, Parameter] = {}
    for name, d in DEFINITIONS.items():
        if name not in values:
            continue
        value = scalar(values[name])
        origin: Origin = "fitted"
        stderr: float | None = None
        note = ""
        if name == "s_gs" and not result.used_gate_charge:
            origin, note, stderr = "assumed", _WHY_ASSUMED[name], free[name] * d.typical
        elif name in free:
            # On a log scale the coordinate's error is relative to the value.
            stderr = free[name] * (value if d.scale == "log" else d.typical)
            if name in result.on_bound:
                origin, stderr = "fixed", None
                note = f"ended on its bound of {value:.3g} {d.unit}".rstrip()
            elif spread[name] > OPEN:
                origin, note = "not determined", "the data leave it open within a factor of ten or more"
            elif name in led:
                origin, note = "not determined", "what is expected of it tells as much as the data"
        elif name in estimate.space.fixed:
            origin = _FIXED_AS.get(name, "assumed")
            note = _WHY_FIXED.get(name, "no curve given shows it")
        else:
            origin, note = "assumed", _WHY_ASSUMED[name]
            stderr = float(standard_errors(lambda v, name=name: np.reshape(v[name], (-1, 1)), estimate)[0])  # type: ignore[misc]
        table[name] = Parameter(
            name=name, value=value, stderr=stderr, unit=d.unit, origin=origin, meaning=d.meaning, note=note
        )
    for name, (unit, meaning) in _PACKAGE.items():
        given = getattr(part.package, name)
        if given is not None:
            table[name] = Parameter(
                name=name,
                value=given,
                stderr=None,
                unit=unit,
                origin="fixed",
                meaning=meaning,
                note="as given",
            )
    return table


_FIXED_AS: dict[str, Origin] = {"lambda": "fixed", "vr_gd": "fixed"}
_WHY_FIXED = {
    "alpha": "only output curves show it; taken as 2, which is typical",
    "lambda": "one transfer curve does not show it; output curves or a fitted gate-charge curve do",
    "vr_gd": "the highest digitized VDS of crss",
    "r_d": "is taken as 0: the stated RDS(on), or an output curve at low VDS, would tell",
}
_WHY_ASSUMED = {
    "c_ch": "shows on no curve at VGS = 0; the on-state input capacitance is taken as 1.5 (1.0 to 2.3) Ciss(VDD)",
    "s_gs": "shows on no curve at VGS = 0; taken so that QGS is about 0.97 (0.93 to 1) of Ciss times the plateau",
    "c_acc": "shows on no curve at VGS = 0; taken as Crss at the lowest digitized VDS",
}


def _correlations(result: FitResult, parameters: Mapping[str, Parameter]) -> dict[tuple[str, str], float]:
    names = result.estimate.space.names
    sigma = np.sqrt(np.diag(result.estimate.covariance))
    found = {}
    for i, j in combinations(range(len(names)), 2):
        if names[i] in parameters and names[j] in parameters and sigma[i] > 0.0 and sigma[j] > 0.0:
            found[names[i], names[j]] = float(result.estimate.covariance[i, j] / (sigma[i] * sigma[j]))
    return found


def _points(part: Part, result: FitResult) -> tuple[CurveRow, ...]:
    """Every digitized point of the curves that were fitted beside the fitted value."""
    blocks = {b.name: b for b in result.solution.blocks if isinstance(b, PointsBlock | PathBlock)}
    values = result.solution.values
    rows: list[CurveRow] = []
    for curve in part.curves:
        block = blocks.get(curve.name)
        if block is None:
            continue
        fitted = np.real(from_axis(block.fitted(values), curve.y_axis))
        residuals = np.real(block.deviations(values))
        rows += [
            CurveRow(curve=curve.name, x=float(x), y=float(y), fitted=float(f), residual=float(r), used=bool(u))
            for x, y, f, r, u in zip(curve.x, curve.y, fitted, residuals, block.used, strict=True)
        ]
    return tuple(rows)


def _notices(part: Part, result: FitResult, parameters: Mapping[str, Parameter]) -> list[Notice]:
    worth_saying = [p for p in parameters.values() if "bound" in p.note or (p.note and p.name == "r_d")]
    said = [(p.name, f"{p.name} {p.note}") for p in worth_saying]
    open_ones = [p.name for p in parameters.values() if p.origin in ("fitted", "not determined")]
    said += [(u.names[0], u.text) for u in undetermined(result.estimate, open_ones)]
    said += _drawn_out(part, parameters)
    curves = {c.name: c for c in part.curves}
    said += [(o.curve, _left_aside(curves[o.curve], o.index, o.sigmas)) for o in result.outliers]
    for group in dict.fromkeys(b.group for b in result.solution.blocks if b.group):
        names = [b.name for b in result.solution.blocks if b.group == group]
        misfit = max(s.misfit for s in result.statistics if s.name in names)
        if misfit > _WORTH_SAYING:
            misses = f"the model's form misses the points by {misfit:.1f} times their reading errors"
            said.append((group, f"{', '.join(names)}: {misses}; the intervals are widened by that"))
    fitted = {b.name for b in result.solution.blocks}
    aside = [c.name for c in part.curves if c.name not in fitted and c.quantity is not Quantity.GATE_CHARGE]
    if aside:
        said.append(("curves", f"read but not fitted: {', '.join(aside)}"))
    if not result.solution.converged:
        said.append(("fit", "the fit stopped before it reached its tolerance; do not trust it unseen"))
    return [Notice(topic=topic, text=text) for topic, text in said]


def _drawn_out(part: Part, parameters: Mapping[str, Parameter]) -> list[tuple[str, str]]:
    """Where the rise of the current with VDS is drawn out far beyond the curves that show it."""
    v_dd, seen = part.supply, part.highest_v_ds
    rise = parameters["lambda"].value * v_dd
    if rise < _DRAWN_OUT or seen >= v_dd:
        return []
    how = f"digitized up to {seen:.3g} V and drawn out to {v_dd:.3g} V, adds {100.0 * rise:.0f} % to it there"
    return [("lambda", f"the rise of ID with VDS, {how}: a real drift zone ends that rise earlier")]


def _left_aside(curve: Curve, index: int, sigmas: float) -> str:
    where = f"{curve.file}:{curve.lines[index]}: a point of {curve.name}"
    return f"{where} lies {abs(sigmas):.1f} standard deviations off; it was left aside: look at it again"


def _validity(part: Part, fitted: Collection[str]) -> Validity:
    curves = [curve for curve in part.curves if curve.name in fitted]

    def of(*quantities: Quantity) -> list[Curve]:
        return [curve for curve in curves if curve.quantity in quantities]

    transfer, output, gate = of(Quantity.TRANSFER), of(Quantity.OUTPUT), of(Quantity.GATE_CHARGE)
    over_t_j = of(Quantity.RDS_ON_TEMPERATURE, Quantity.VGS_TH_TEMPERATURE)
    temperatures = [REFERENCE, *(c.t_j for c in (*transfer, *output) if c.t_j is not None)]
    temperatures += [float(t) for c in over_t_j for t in c.x[[0, -1]]]
    return Validity(
        capacitance_v_ds=_ends(*(c.x for c in of(Quantity.CISS, Quantity.COSS, Quantity.CRSS))),
        current_v_ds=_ends(*([c.v_ds] for c in transfer if c.v_ds is not None), *(c.x for c in output)),
        v_gs=_ends(*(c.x for c in transfer), *([c.v_gs] for c in output if c.v_gs is not None), *(c.y for c in gate)),
        i_d=_ends(*(c.y for c in (*transfer, *output))),
        t_j=(min(temperatures), max(temperatures)),
    )


def _ends(*stretches: ArrayLike) -> tuple[float, float] | None:
    """Lowest and highest of all values; None where there are none."""
    values = [np.asarray(stretch, dtype=float) for stretch in stretches]
    return (min(float(v.min()) for v in values), max(float(v.max()) for v in values)) if values else None
