"""The capacitances together, and which form each of Cgd and Cds needs: the data decide, by AICc.

C. M. Hurvich and C.-L. Tsai, Biometrika 76 (1989) 297.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fitter.errors import FitError
from fitter.fitting import observations
from fitter.fitting.blocks import Block, model_space
from fitter.fitting.outliers import set_aside
from fitter.fitting.search import lowest
from fitter.fitting.solve import solve
from fitter.fitting.stages import Stage
from fitter.fitting.start_values import (
    gate_source_start,
    junction_start,
    rise_voltage,
    shield_starts,
    sized,
    sorted_curve,
    two_shield_starts,
)
from fitter.models.capacitance import (
    DRAIN_SOURCE,
    GATE_DRAIN,
    MOST_SHIELDS,
    Junction,
    capacitance,
    junction_from,
    junction_names,
)
from fitter.models.types import scalar
from fitter.parameters import ParameterDefinition
from fitter.part import Part, Quantity, Stated

__all__ = ["CapacitanceFit", "FormTrial", "corrected_akaike", "fit_capacitances"]

Array = NDArray[np.float64]

#: How many starts are followed, of all those that would suit a curve.
_FOLLOWED = 36

_TOO_FEW = "too few capacitance data: digitize ciss, coss and crss, or two of them and state the third's table value"


@dataclass(frozen=True, kw_only=True)
class FormTrial:
    """One form of one capacitance, and how well it did on its curve.

    Parameters
    ----------
    capacitance : str
        ``gate-drain`` or ``drain-source``.
    shields : int
        0 for the plain form.
    rises : bool
        Whether some capacitance comes with high voltage.
    parameters, points : int
        How many of each.
    chi_square : float
        Sum of squared residuals, by the robust measure that mis-clicks hardly move.
    aicc : float
        Akaike's criterion, corrected for few points; the lowest wins.
    chosen : bool
        Whether it won.
    """

    capacitance: str
    shields: int
    rises: bool = False
    parameters: int
    points: int
    chi_square: float
    aicc: float
    chosen: bool = False


@dataclass(frozen=True, kw_only=True)
class CapacitanceFit(Stage):
    """The capacitances' fit in the forms that won.

    Parameters
    ----------
    trials : tuple of FormTrial
        All forms tried.
    """

    trials: tuple[FormTrial, ...]


def corrected_akaike(chi_square: float, parameters: int, points: int) -> float:
    """AICc of a least-squares fit with known standard deviations: chi^2 + 2k + 2k(k+1)/(n-k-1).

    Parameters
    ----------
    chi_square : float
        Sum of squared residuals in standard deviations.
    parameters, points : int
        k and n.

    Returns
    -------
    float
        Infinite where the points cannot carry the parameters.

    Examples
    --------
    >>> corrected_akaike(20.0, 4, 25)
    30.0
    """
    spare = points - parameters - 1
    if spare <= 0:
        return float("inf")
    return chi_square + 2.0 * parameters + 2.0 * parameters * (parameters + 1) / spare


def fit_capacitances(part: Part) -> CapacitanceFit:
    """Fit Ciss, Coss and Crss together, as Cgs, Cgd and Cds.

    Cgd's form is chosen on Crss, Cds' on Coss over it; then all three curves are fitted together.

    Parameters
    ----------
    part : Part
        With the three curves, or two and the third's table value.

    Returns
    -------
    CapacitanceFit

    Raises
    ------
    FitError
        Where too little is given, or the points cannot carry even the plain form.
    """
    blocks = observations.capacitance_blocks(part)
    iss, oss, rss = (sorted_curve(part.curves_of(q)) for q in (Quantity.CISS, Quantity.COSS, Quantity.CRSS))
    table = part.stated.capacitance
    fixed: dict[str, float] = {}

    if rss is not None:
        gate_drain = _choose("gate-drain", GATE_DRAIN, rss, _named(blocks, "crss", "phi_gd"), {}, may_rise=True)
        fixed = gate_drain.fixed
    else:
        if iss is None or table is None:
            raise FitError(_TOO_FEW)
        # What Ciss falls by is what Cgd falls by.
        rest = iss[1] - float(np.min(iss[1])) + _figure(table.c_rss)
        gate_drain = _plain(GATE_DRAIN, (iss[0], rest))
    c_gd = junction_from(GATE_DRAIN, gate_drain.values)

    if oss is not None:
        below = capacitance(oss[0], c_gd)
        rest = np.maximum(oss[1] - below, 0.02 * oss[1])
        drain_source = _choose(
            "drain-source", DRAIN_SOURCE, (oss[0], rest), _named(blocks, "coss", "phi_ds"), gate_drain.values
        )
    else:
        if table is None:
            raise FitError(_TOO_FEW)
        drain_source = _one_point(table.v_ds, _figure(table.c_oss), c_gd)
        fixed |= drain_source.fixed

    if iss is not None:
        gate_source = gate_source_start(*iss, c_gd)
    elif table is not None:
        gate_source = {"c_gs": _figure(table.c_iss)}
    else:
        raise FitError(_TOO_FEW)

    free = ("c_gs", *gate_drain.free, *drain_source.free)
    start = {**gate_source, **gate_drain.values, **drain_source.values}
    rough = solve(blocks, model_space(free, fixed, blocks), start, robust=True, rough=True)
    marked, outliers = set_aside(rough)
    points = sum(b.used_points for b in marked)
    if points <= len(free):
        raise FitError(f"{points} points of capacitance are too few for a model of {len(free)} parameters")
    solution = solve(marked, model_space(free, fixed, marked), rough.values, rough=True)
    return CapacitanceFit(
        blocks=marked, free=free, fixed=fixed, solution=solution, outliers=outliers,
        trials=gate_drain.trials + drain_source.trials,
    )  # fmt: skip


def _named(blocks: Sequence[Block], *begin: str) -> list[Block]:
    return [block for block in blocks if block.name.startswith(begin)]


def _figure(stated: Stated | None) -> float:
    figure = None if stated is None else stated.typ or stated.max or stated.min
    if figure is None:
        raise FitError(_TOO_FEW)
    return figure


@dataclass(frozen=True, kw_only=True)
class _Chosen:
    """One junction in the form that suits it: all its values, and which are free."""

    values: Mapping[str, float]
    free: tuple[str, ...]
    trials: tuple[FormTrial, ...] = ()

    @property
    def fixed(self) -> dict[str, float]:
        """Those that are not."""
        return {name: value for name, value in self.values.items() if name not in self.free}


def _plain(definitions: Mapping[str, ParameterDefinition], points: tuple[Array, Array]) -> _Chosen:
    values = {definitions[f].name: x for f, x in junction_start(*points).items()}
    return _Chosen(values=values, free=junction_names(definitions, 0))


def _one_point(v_ds: float, c_oss: float, c_gd: Junction) -> _Chosen:
    """Cds from one table value: an abrupt junction of 0.7 V whose size alone is free."""
    c = max(c_oss - float(capacitance(v_ds, c_gd)), 0.05 * c_oss)
    values = {"c_0": c * np.sqrt(1.0 + v_ds / 0.7), "phi": 0.7, "m": 0.5, "c_f": 0.0}
    return _Chosen(values={DRAIN_SOURCE[f].name: float(x) for f, x in values.items()}, free=(DRAIN_SOURCE["c_0"].name,))


def _choose(
    name: str,
    definitions: Mapping[str, ParameterDefinition],
    points: tuple[Array, Array],
    blocks: Sequence[Block],
    others: Mapping[str, float],
    may_rise: bool = False,
) -> _Chosen:
    """Fit one junction to its own curve in every form, and take the one with the lowest AICc."""
    ends = _followed(name, definitions, points, blocks, others)
    if not ends:
        least = len(junction_names(definitions, 0))
        n = sum(block.points for block in blocks)
        raise FitError(f"{n} points of {blocks[0].name} are too few for a model of {least} parameters")
    v_r = rise_voltage(*points) if may_rise else None
    if v_r is not None:
        rise = {definitions["v_r"].name: v_r}
        ends += _followed(name, definitions, points, blocks, others, rise, min(trial.aicc for trial, _ in ends))
    trial, values = min(ends, key=lambda end: end[0].aicc)
    if trial.shields > 1:
        values = _ordered(definitions, values)
    trials = tuple(FormTrial(**{**vars(t), "chosen": t is trial}) for t, _ in ends)
    return _Chosen(values=values, free=junction_names(definitions, trial.shields, trial.rises), trials=trials)


def _followed(
    name: str,
    definitions: Mapping[str, ParameterDefinition],
    points: tuple[Array, Array],
    blocks: Sequence[Block],
    others: Mapping[str, float],
    rise: Mapping[str, float] | None = None,
    best: float = np.inf,
) -> list[tuple[FormTrial, dict[str, float]]]:
    """One junction in the forms of 0, 1, 2 ... shields, with or without a rise, as long as one may beat the best."""
    fields, fixed = {d.name: f for f, d in definitions.items()}, dict(rise or {})
    n = sum(block.points for block in blocks)
    ends: list[tuple[FormTrial, dict[str, float]]] = []
    for shields in range(MOST_SHIELDS + 1):
        free = junction_names(definitions, shields, bool(fixed))
        # A form that would lose even if it met every point need not be tried.
        if corrected_akaike(0.0, len(free), n) >= best:
            break
        if shields == 0:
            starts = [junction_start(*points)]
        elif shields == 1:
            starts = shield_starts(*points)
        else:
            starts = two_shield_starts({fields[name]: x for name, x in ends[-1][1].items()}, *points)
        risen = {fields[name]: x for name, x in fixed.items()}
        good = sized([{**start, **risen} for start in starts], *points)[:_FOLLOWED]
        named = [{definitions[f].name: x for f, x in start.items()} for start in good]
        values, cost = lowest(blocks, model_space(free, {**others, **fixed}, blocks), named)
        trial = FormTrial(
            capacitance=name, shields=shields, rises=bool(fixed), parameters=len(free), points=n,
            chi_square=2.0 * cost, aicc=corrected_akaike(2.0 * cost, len(free), n),
        )  # fmt: skip
        ends.append((trial, fixed | {name: scalar(values[name]) for name in free}))
        best = min(best, trial.aicc)
    return ends


def _ordered(definitions: Mapping[str, ParameterDefinition], values: Mapping[str, float]) -> dict[str, float]:
    """The same two shields in the order of voltage over the cube root of their width: either order says the same.

    It tells two shields apart that lie at about the same voltage, and two of about the same width.
    """
    name = {field: d.name for field, d in definitions.items()}
    result = dict(values)
    first, second = (values[name[f"v_{n}"]] / np.cbrt(values[name[f"w_{n}"]]) for n in (1, 2))
    if first >= second:
        return result
    # Shares of all cells: the second shield's is of what the first one left.
    low, high = values[name["s_1"]], (1.0 - values[name["s_1"]]) * values[name["s_2"]]
    result[name["s_1"]], result[name["s_2"]] = high, low / max(1.0 - high, 1e-12)
    for letter in "vw":
        one, other = name[f"{letter}_1"], name[f"{letter}_2"]
        result[one], result[other] = values[other], values[one]
    return result
