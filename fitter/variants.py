"""Weak and strong variants of a model, from the limits that a datasheet states: slow and fast switching corners.

A weak part has the highest threshold, on-resistance, capacitances and gate charge that are stated, a strong one the
lowest. What no limit is stated for stays typical. The variants are corners of the table, not of the process: nothing
says that a part with one value at its limit has the others there, too.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Generic, Literal, TypeVar

import numpy as np
from scipy.optimize import brentq

from fitter.comparison import compare
from fitter.errors import OperatingPointError
from fitter.fitting.intervals import Estimate
from fitter.fitting.space import ParameterSpace
from fitter.gate_charge import OperatingPoint, gate_charge_curve
from fitter.model import FittedModel
from fitter.models.channel import on_resistance, threshold_voltage
from fitter.models.transistor import Transistor
from fitter.models.types import scalar
from fitter.part import Stated

__all__ = ["LimitRow", "Variant", "variants"]

Model = TypeVar("Model", bound=FittedModel)
Kind = Literal["weak", "strong"]

#: How often threshold and on-resistance are set in turn.
_ROUNDS = 6
#: A value this near its limit counts as on it.
_SLACK = 1e-5
#: Farthest that gain and resistances are scaled to meet RDS(on).
_FARTHEST = 30.0
_GATE_DRAIN = ("c_acc", "c0_gd", "cf_gd")
_GATE_SOURCE = ("c_gs", "c_ch")
_DRAIN_SOURCE = ("c0_ds", "cf_ds")


@dataclass(frozen=True, kw_only=True)
class LimitRow:
    """One stated quantity of a variant, in SI and n-channel polarity.

    Parameters
    ----------
    quantity, unit, condition : str
        As in `fitter.comparison.Comparison`.
    stated : Stated
        As printed.
    value : float or None
        Of the variant; None where the model does not determine it.
    moved : bool
        Whether the variant was made from this limit; otherwise the quantity only follows from the others.
    met : bool or None
        Whether the value lies within the stated limits; None where there is none on either side.
    """

    quantity: str
    unit: str
    condition: str
    stated: Stated
    value: float | None
    moved: bool
    met: bool | None


@dataclass(frozen=True, kw_only=True)
class Variant(Generic[Model]):
    """A corner of the stated limits.

    Parameters
    ----------
    kind : {"weak", "strong"}
        Slow or fast.
    model : FittedModel
        With the variant's parameters, without uncertainties.
    rows : tuple of LimitRow
        Every stated quantity.
    """

    kind: Kind
    model: Model
    rows: tuple[LimitRow, ...]


def variants(model: Model) -> tuple[Variant[Model], ...]:
    """The weak and the strong variant of a model.

    Threshold: VTH is shifted. RDS(on): 1/K, RS and RD are scaled together. Crss: Cgd and Cacc are scaled. Ciss and QG:
    Cgs and Cch are scaled as far as the tighter of the two allows. Coss: Cds is scaled.

    Parameters
    ----------
    model : FittedModel
        The typical model.

    Returns
    -------
    tuple of Variant
        Weak, strong.
    """
    return _variant(model, "weak"), _variant(model, "strong")


def _variant(model: Model, kind: Kind) -> Variant[Model]:
    values = {name: scalar(value) for name, value in model.estimate.values.items()}
    moved = _moved(model, values, kind)
    estimate = Estimate(
        space=ParameterSpace(free=(), fixed=values), coordinates=np.zeros(0), covariance=np.zeros((0, 0))
    )
    checks = compare(model.part, estimate, (), False)
    parameters = {
        name: replace(p, value=values.get(name, p.value), stderr=None) for name, p in model.parameters.items()
    }
    rows = tuple(
        LimitRow(
            quantity=c.quantity, unit=c.unit, condition=c.condition, stated=c.stated, value=c.fitted,
            moved=c.quantity in moved, met=_met(c.stated, c.fitted),
        )
        for c in checks
    )  # fmt: skip
    return Variant(kind=kind, model=replace(model, estimate=estimate, parameters=parameters, checks=checks), rows=rows)


def _met(stated: Stated, value: float | None) -> bool | None:
    if value is None or (stated.min is None and stated.max is None):
        return None
    low = stated.min is None or value >= stated.min * (1.0 - _SLACK)
    return low and (stated.max is None or value <= stated.max * (1.0 + _SLACK))


def _limit(stated: Stated | None, kind: Kind) -> float | None:
    return None if stated is None else stated.max if kind == "weak" else stated.min


def _moved(model: FittedModel, values: dict[str, float], kind: Kind) -> set[str]:
    """Move the values to a corner; returns the quantities whose limits did it."""
    stated, moved = model.part.stated, set()
    threshold, on = stated.threshold, stated.on_resistance
    v_limit = None if threshold is None else _limit(threshold.v_gs_th, kind)
    r_limit = None if on is None else _limit(on.r_ds_on, kind)
    # Each moves the other a little.
    for _ in range(_ROUNDS):
        if threshold is not None and v_limit is not None:
            values["v_th"] += v_limit - scalar(threshold_voltage(threshold.i_d, _transistor(values).channel))
            moved.add("vgs_th")
        if on is not None and r_limit is not None and _scale_resistance(values, on.i_d, on.v_gs, r_limit):
            moved.add("rds_on")
    return moved | _scale_capacitances(model, values, kind)


def _transistor(values: Mapping[str, float]) -> Transistor:
    return Transistor.from_values(values)


def _scale_resistance(values: dict[str, float], i_d: float, v_gs: float, limit: float) -> bool:
    """Scale 1/K, RS and RD so that RDS(on) is at its limit; False where no factor within reason does it."""

    def scaled(factor: float) -> dict[str, float]:
        return {
            **values, "k": values["k"] / factor, "r_s": values["r_s"] * factor, "r_d": values["r_d"] * factor
        }  # fmt: skip

    def excess(logarithm: float) -> float:
        channel = _transistor(scaled(float(np.exp(logarithm)))).channel
        value = scalar(on_resistance(i_d, v_gs, channel))
        return float(np.log(value / limit)) if np.isfinite(value) and value > 0.0 else float(np.log(_FARTHEST))

    ends = -np.log(_FARTHEST), np.log(_FARTHEST)
    if excess(ends[0]) > 0.0 or excess(ends[1]) < 0.0:
        return False
    values.update(scaled(float(np.exp(brentq(excess, *ends, xtol=1e-12)))))
    return True


def _scale_capacitances(model: FittedModel, values: dict[str, float], kind: Kind) -> set[str]:
    table, charge = model.part.stated.capacitance, model.part.stated.gate_charge
    moved: set[str] = set()
    v = 0.0 if table is None else table.v_ds

    def scale(names: tuple[str, ...], factor: float) -> None:
        values.update({name: values[name] * factor for name in names})

    if table is not None and (limit := _limit(table.c_rss, kind)) is not None:
        scale(_GATE_DRAIN, limit / scalar(_transistor(values).c_rss(v)))
        moved.add("crss")
    # Charge and capacitance are linear in Cgs and Cch: each limit allows some factor, and the tighter one counts.
    allowed: dict[str, float] = {}
    t = _transistor(values)
    if table is not None and (limit := _limit(table.c_iss, kind)) is not None:
        allowed["ciss"] = (limit - scalar(t.c_rss(v))) / values["c_gs"]
    if charge is not None and (limit := _limit(charge.q_g, kind)) is not None:
        point = OperatingPoint(v_dd=charge.v_dd, i_d=charge.i_d, v_gs=charge.v_gs, load=charge.load)
        without = _transistor({**values, "c_gs": 1e-18, "c_ch": 0.0})
        try:
            rest = float(gate_charge_curve(without, point).total)
            allowed["qg"] = (limit - rest) / (float(gate_charge_curve(t, point).total) - rest)
        except OperatingPointError:
            pass  # so weak a channel never carries the test's current
    if allowed:
        tighter = min(allowed, key=lambda name: allowed[name] if kind == "weak" else -allowed[name])
        scale(_GATE_SOURCE, max(allowed[tighter], 0.05))
        moved.add(tighter)
    if table is not None and (limit := _limit(table.c_oss, kind)) is not None:
        t = _transistor(values)
        scale(_DRAIN_SOURCE, max((limit - scalar(t.c_rss(v))) / scalar(t.c_ds(v)), 0.05))
        moved.add("coss")
    return moved
