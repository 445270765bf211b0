"""RDS(on) and VGS(th) over the junction temperature."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fitter.inspection.finding import Comparison, ratio
from fitter.inspection.reading import read_at, typical
from fitter.models.temperature import KELVIN
from fitter.part import Curve, Part
from fitter.units import engineering, si_factor

__all__ = ["range_of", "resistance_at_25", "resistance_rise", "threshold_at_25", "threshold_drift"]

#: Coldest and hottest junction of a datasheet's figures [degC].
_COLDEST, _HOTTEST = -80.0, 260.0
#: RDS(on) at 150 C over 25 C: superjunction 2.3 to 2.4, silicon carbide 1.2 to 1.9 (datasheets);
#: and room on both sides.
_LEAST_RISE, _MOST_RISE = 1.0, 3.2
#: dVGS(th)/dT over ten datasheets: -2.6 to -10 mV/C; and room on both sides [V/C].
_LEAST_DRIFT, _MOST_DRIFT = -1e-3, -16e-3
#: RDS(on) max over typ is up to 1.3, VGS(th) max over min up to 2.
_RESISTANCE, _RATIO, _THRESHOLD = 1.5, 1.15, 1.5


def range_of(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Temperatures are a junction's, and 25 C is among them."""
    low, high = float(curve.x[0]), float(curve.x[-1])
    narrow = 60.0 / max(high - low, 1e-9)
    lacks = 0.0 if low <= 25.0 + 10.0 and high >= 25.0 - 10.0 else 1.5
    kelvin = _COLDEST + KELVIN < low < 25.0 + KELVIN and 25.0 + KELVIN < high < _HOTTEST + KELVIN
    yield Comparison(
        rule="temperatures",
        curve=curve,
        at=0 if -low > high else curve.x.size - 1,
        off=max(low / _COLDEST, high / _HOTTEST, min(narrow, 4.0) if narrow > 1.0 else 0.0, lacks, 0.0),
        says=f"temperatures run from {low:.3g} to {high:.3g} C",
        remedy=f"subtract {KELVIN:g} from all temperatures: they are in kelvin"
        if kelvin
        else "look at the temperature axis, and at the columns' order",
        severity="stop" if kelvin else "doubtful",
    )


def _at_25(curve: Curve, expected: float, limit: float, what: str, stated: str = "") -> Iterator[Comparison]:
    read = read_at(curve, 25.0)
    if read is None or read <= 0.0:
        return
    yield Comparison(
        rule="at 25 C",
        curve=curve,
        off=ratio(read / expected, 1.0 / limit, limit),
        says=f"at 25 C the curve is {read / expected:.3g} times {what}",
        remedy="look at the y axis, its column's unit, and the table's row",
        stated=stated,
    )


def resistance_at_25(part: Part, curve: Curve) -> Iterator[Comparison]:
    """At 25 C a ratio is one, a resistance the stated RDS(on)."""
    if not curve.y_unit:
        yield from _at_25(curve, 1.0, _RATIO, "one, which a ratio to 25 C is there")
        return
    group = part.stated.on_resistance
    stated = None if group is None else typical(group.r_ds_on)
    if not stated:
        return
    read, unit = read_at(curve, 25.0), curve.y_column.rpartition("_")[2]
    figure = 0.0 if read is None else read / si_factor(unit, curve.y_unit)
    if (
        read is not None
        and 1.0 / _RATIO < figure < _RATIO
        and ratio(read / stated, 1.0 / _RESISTANCE, _RESISTANCE) > 1.0
    ):
        yield Comparison(
            rule="at 25 C",
            curve=curve,
            off=2.0,
            says=f"at 25 C the curve is {figure:.3g} {unit}, as a ratio to 25 C would be, and RDS(on) is stated as "
            f"{engineering(stated, 'ohm', 4)}",
            remedy=f"name the column rds_on_ratio instead of {curve.y_column}",
            severity="stop",
            stated="on_resistance.r_ds_on",
        )
        return
    yield from _at_25(
        curve, stated, _RESISTANCE, f"the stated RDS(on) of {engineering(stated, 'ohm', 4)}", "on_resistance.r_ds_on"
    )


def threshold_at_25(part: Part, curve: Curve) -> Iterator[Comparison]:
    """At 25 C the curve shows the stated VGS(th)."""
    group = part.stated.threshold
    stated = None if group is None else typical(group.v_gs_th)
    if stated:
        yield from _at_25(curve, stated, _THRESHOLD, f"the stated VGS(th) of {stated:g} V", "threshold.v_gs_th")


def resistance_rise(part: Part, curve: Curve) -> Iterator[Comparison]:
    """RDS(on) is larger hot than at 25 C."""
    hot, cold = float(curve.y[-1]), read_at(curve, 25.0)
    if not cold or cold <= 0.0 or hot <= 0.0 or curve.x[-1] < 100.0:
        return
    factor = hot / cold
    middle, half = 0.5 * np.log(_LEAST_RISE * _MOST_RISE), 0.5 * np.log(_MOST_RISE / _LEAST_RISE)
    yield Comparison(
        rule="resistance rise",
        curve=curve,
        at=curve.x.size - 1,
        off=float(abs(np.log(factor) - middle) / half),
        says=f"RDS(on) at {curve.x[-1]:.3g} C is {factor:.3g} times that at 25 C; published are 1.2 to 2.4 at 150 C",
        remedy="look at the axes and the columns' order",
    )


def threshold_drift(part: Part, curve: Curve) -> Iterator[Comparison]:
    """VGS(th) falls by some millivolts per degree."""
    span = float(curve.x[-1] - curve.x[0])
    if span <= 0.0:
        return
    slope = float(curve.y[-1] - curve.y[0]) / span
    middle, half = 0.5 * (_LEAST_DRIFT + _MOST_DRIFT), 0.5 * (_LEAST_DRIFT - _MOST_DRIFT)
    error = 4.0 * curve.point_error * curve.y_axis.length / span
    yield Comparison(
        rule="threshold drift",
        curve=curve,
        at=curve.x.size - 1,
        off=min(abs(slope - middle) / (half + error), 4.0),
        says=f"VGS(th) changes by {slope * 1e3:.3g} mV/C; published are -2.6 to -10",
        remedy="look at the axes and the columns' order",
    )
