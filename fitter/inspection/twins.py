"""Curves that are there twice: the same points, or the same conditions with other points."""

from __future__ import annotations

from dataclasses import replace
from itertools import combinations

import numpy as np

from fitter.inspection.finding import Finding
from fitter.inspection.mending import contradiction
from fitter.inspection.reading import PART_FILE, log_error, x_where
from fitter.part import Curve, Part, Quantity

__all__ = ["judge"]

#: The conditions that tell curves of a quantity apart, as keys of the part file, the likeliest slip first.
_KEYS = {
    Quantity.CISS: "vgs_V",
    Quantity.COSS: "vgs_V",
    Quantity.CRSS: "vgs_V",
    Quantity.TRANSFER: "tj_C (25 where it is not given) or vds_V",
    Quantity.OUTPUT: "vgs_V or tj_C (25 where it is not given)",
    Quantity.GATE_CHARGE: "vdd_V or id_A (those of stated.gate_charge where they are not given)",
    Quantity.BODY_DIODE: "tj_C (25 where it is not given) or vgs_V",
    Quantity.RDS_ON_TEMPERATURE: "id_A or vgs_V (those of stated.on_resistance where they are not given)",
    Quantity.VGS_TH_TEMPERATURE: "id_A (that of stated.threshold where it is not given)",
}
#: Two clickings of one curve lie this many times their reading errors apart, as a root mean square: up to 1.9 on eight
#: physically described parts, up to 2.5 where a gate charge bends sharply between its points.
_APART, _BENT = 2.2, 3.0
#: Of so many twins it is tried which of the two is the odd one.
_MOST_TRIED = 6


def judge(part: Part) -> tuple[list[Finding], Part]:
    """Find curves with the same points or the same conditions.

    Parameters
    ----------
    part : Part
        As read.

    Returns
    -------
    findings : list of Finding
        One for each such pair.
    part : Part
        Without the odd one of each doubtful pair, which would contradict everything.
    """
    findings: list[Finding] = []
    left_out: set[str] = set()
    for first, second in combinations(part.curves, 2):
        if {first.name, second.name} & left_out:
            continue
        alike = first.quantity is second.quantity and _conditions(first) == _conditions(second)
        same = _same_points(first, second)
        if not alike and not same:
            continue
        if alike and not same and (apart := _apart(first, second)) <= _limit(first):
            findings.append(_clicked_twice(first, second))
            continue
        odd, sure = second, False
        if len(left_out) < _MOST_TRIED and not (same and alike):
            odd, sure = _odd(part, first, second)
        left_out.add(odd.name)
        part = _without(part, odd)
        findings.append(
            _copied(first, second, alike, odd, sure) if same else _mixed_up(first, second, apart, odd, sure)
        )
    return findings, part


def _without(part: Part, curve: Curve) -> Part:
    return replace(part, curves=tuple(c for c in part.curves if c.name != curve.name))


def _odd(part: Part, first: Curve, second: Curve) -> tuple[Curve, bool]:
    """The one of the two without which the others agree better, and whether it makes a difference."""
    left = [contradiction(_without(part, curve)) for curve in (first, second)]
    return (first, True) if left[0] < left[1] - 1.0 else (second, left[1] < left[0] - 1.0)


def _conditions(curve: Curve) -> tuple[object, ...]:
    return curve.v_gs, curve.v_ds, curve.t_j, curve.v_dd, curve.i_d, curve.load


def _same_points(first: Curve, second: Curve) -> bool:
    return (
        first.x.shape == second.x.shape
        and (first.x_unit, first.y_unit) == (second.x_unit, second.y_unit)
        # The same figure in another unit differs by rounding.
        and np.allclose(first.x, second.x, rtol=1e-9, atol=0.0)
        and np.allclose(first.y, second.y, rtol=1e-9, atol=0.0)
    )


def _copied(first: Curve, second: Curve, alike: bool, odd: Curve, sure: bool) -> Finding:
    if alike:
        remedy = "remove one of the two [[curve]] entries"
    elif sure:
        remedy = f"click {odd.name} again, or mend its conditions: it contradicts other data"
    else:
        remedy = "click the one that holds the other's points again, or mend its conditions"
    return Finding(
        rule="same points",
        severity="doubtful",
        topic=f"{first.name}, {second.name}",
        file=second.file,
        line=int(second.lines[0]),
        found=f"{second.name} has the very same points as {first.name} in {first.file}",
        remedy=remedy,
    )


def _clicked_twice(first: Curve, second: Curve) -> Finding:
    return Finding(
        rule="same conditions",
        severity="note",
        topic=f"{first.name}, {second.name}",
        file=PART_FILE,
        found=f"{first.file} and {second.file} are entered with the same conditions and agree within their reading "
        "errors",
        remedy=f"both count; if they are two curves, mend {_KEYS[first.quantity]}",
    )


def _mixed_up(first: Curve, second: Curve, apart: float, odd: Curve, sure: bool) -> Finding:
    far = "have no range in common" if np.isinf(apart) else f"lie {apart:.2g} times their reading errors apart"
    which = f": likely {odd.name} ({odd.file}), which contradicts other data" if sure else _hint(first, second)
    return Finding(
        rule="same conditions",
        severity="doubtful",
        topic=f"{first.name}, {second.name}",
        file=PART_FILE,
        found=f"{first.file} and {second.file} are entered with the same conditions, but {far}",
        remedy=f"mend {_KEYS[first.quantity]} of one of the two{which}",
    )


def _limit(curve: Curve) -> float:
    return _BENT if curve.quantity is Quantity.GATE_CHARGE else _APART


def _apart(first: Curve, second: Curve) -> float:
    """Distance of two curves in reading errors, as a root mean square; infinite where none lies beside the other."""
    beside = (first.x >= second.x[0]) & (first.x <= second.x[-1])
    if not np.any(beside):
        return np.inf
    with np.errstate(all="ignore"):
        x, y, error = first.x[beside], np.log(np.maximum(first.y[beside], 1e-300)), log_error(first)[beside]
        other = np.log(np.maximum(np.interp(x, second.x, second.y), 1e-300))
        off = (y - other) / np.hypot(error, np.interp(x, second.x, log_error(second)))
    return float(np.sqrt(np.mean(off**2)))


def _hint(first: Curve, second: Curve) -> str:
    """Which of the two has the higher temperature or gate voltage, as far as the points show it."""
    if first.quantity in (Quantity.TRANSFER, Quantity.BODY_DIODE):
        level = 0.1 * min(float(np.max(first.y)), float(np.max(second.y)))
        begins = [x_where(c, level) for c in (first, second)]
        if begins[0] is None or begins[1] is None:
            return ""
        hot = first if begins[0] < begins[1] else second
        return f": {hot.name} ({hot.file}) begins at a lower voltage, as the hotter one does"
    if first.quantity is Quantity.OUTPUT:
        more = first if np.max(first.y) > np.max(second.y) else second
        return f": {more.name} ({more.file}) carries more, as the one with more VGS does"
    return ""
