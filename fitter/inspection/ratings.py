"""Figures that much else is measured by: the two ratings, and the currents that the table is stated at."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

from fitter.inspection.finding import Finding
from fitter.inspection.reading import CAPACITANCES, PART_FILE
from fitter.part import Part, Quantity
from fitter.units import engineering

__all__ = ["judge"]

#: The highest of all test voltages and ends of curves over the rated VDS is 0.4 to 1 on most datasheets, a sixth where
#: Coss is drawn up to 100 V of 600 V; over the rated VGS a quarter or more (common practice, no source).
_LEAST_VDS, _LEAST_VGS = 0.12, 0.15
#: No gate withstands more: silicon 8 to 30 V, silicon carbide and gallium nitride less (common practice, no source).
_MOST_VGS = 60.0
#: Above the rating by this much are a test condition, and the end of a curve on an axis that runs on.
_ABOVE_STATED, _ABOVE_CURVE = 1.05, 2.0
#: Where the highest voltage lies once the rating is mended, as a share of it.
_LEAST_MENDED = 0.2
#: The largest stated current over the next one: within a factor of two or three on most datasheets; smaller ones are
#: common, for the body diode above all (common practice, no source).
_FAR_CURRENT, _ENOUGH_CURRENTS = 6.0, 3


@dataclass(frozen=True)
class _Shown:
    """A voltage that the part folder shows, and the most that it may be over the rating."""

    what: str
    value: float
    most: float


def judge(part: Part) -> tuple[list[Finding], Part]:
    """Find ratings and stated currents that have their point in the wrong place.

    Parameters
    ----------
    part : Part
        As read.

    Returns
    -------
    findings : list of Finding
        At most one for each rating, and one for the currents.
    part : Part
        With these figures as they would be then, so that no curve is blamed for them.
    """
    drain, v_ds_max = _rating("vds_max_V", part.v_ds_max, _drain_voltages(part), _LEAST_VDS, math.inf)
    gate, v_gs_max = _rating("vgs_max_V", part.v_gs_max, _gate_voltages(part), _LEAST_VGS, _MOST_VGS)
    current, part = _currents(replace(part, v_ds_max=v_ds_max, v_gs_max=v_gs_max))
    return [f for f in (drain, gate, current) if f is not None], part


def _rating(key: str, rated: float, shown: list[_Shown], least: float, most: float) -> tuple[Finding | None, float]:
    """The finding about a rating, and the rating as it would be then."""
    high = max(shown, key=lambda s: s.value, default=None)
    if high is None or high.value <= 0.0:
        return None, rated
    above = sum(s.value > s.most * rated for s in shown)
    # One voltage above the rating is a slip of its own; more than half of them are the rating's.
    too_low = len(shown) > 1 and 2 * above > len(shown)
    if not too_low and high.value >= least * rated and rated <= most:
        return None, rated
    verb, sign = ("multiply", 1) if too_low else ("divide", -1)
    powers = [p for p in (1, 2, 3) if _LEAST_MENDED <= high.value / (rated * 10.0 ** (sign * p)) <= high.most]
    mended = rated * 10.0 ** (sign * powers[0]) if powers else rated
    remedy = (
        f"{verb} {key} by {10 ** powers[0]}; then {_says(high, mended)}" if powers else f"look at both, {key} first"
    )
    finding = Finding(
        rule="rating",
        severity="doubtful",
        topic=f"part.{key}",
        file=PART_FILE,
        found=f"{_says(high, rated)}; it is the highest such voltage in this folder",
        remedy=remedy,
    )
    return finding, mended


def _says(high: _Shown, rated: float) -> str:
    return f"{high.what}, {high.value:.3g} V, is {high.value / rated:.3g} times the rated {rated:.4g} V"


def _drain_voltages(part: Part) -> list[_Shown]:
    s = part.stated
    stated = [("the gate-charge test's VDD", s.gate_charge.v_dd)] if s.gate_charge else []
    stated += [("the capacitances' VDS", s.capacitance.v_ds)] if s.capacitance else []
    stated += [("the output charge's VDS", s.output_charge.v_ds)] if s.output_charge else []
    curves = [(f"the end of {c.name}", float(c.x[-1])) for c in part.curves if c.quantity in CAPACITANCES]
    return [_Shown(*x, _ABOVE_STATED) for x in stated] + [_Shown(*x, _ABOVE_CURVE) for x in curves]


def _gate_voltages(part: Part) -> list[_Shown]:
    s = part.stated
    stated = [("the gate-charge test's VGS", s.gate_charge.v_gs)] if s.gate_charge else []
    stated += [("VGS of RDS(on)", s.on_resistance.v_gs)] if s.on_resistance else []
    curves = [(f"the end of {c.name}", float(c.x[-1])) for c in part.curves_of(Quantity.TRANSFER)]
    curves += [(f"the end of {c.name}", float(c.y.max())) for c in part.curves_of(Quantity.GATE_CHARGE)]
    return [_Shown(*x, _ABOVE_STATED) for x in stated] + [_Shown(*x, _ABOVE_STATED) for x in curves]


def _currents(part: Part) -> tuple[Finding | None, Part]:
    """A stated current that is many times every other one: RDS(on), gate charge and gfs are tested at like currents."""
    found = [
        (group, name, current)
        for group, name in (
            ("gate_charge", "i_d"),
            ("on_resistance", "i_d"),
            ("transconductance", "i_d"),
            ("body_diode", "i_s"),
        )
        if (current := getattr(getattr(part.stated, group), name, None)) is not None
    ]
    if len(found) < _ENOUGH_CURRENTS:
        return None, part
    *_, (_, _, second), (group, name, highest) = sorted(found, key=lambda item: item[2])
    if highest < _FAR_CURRENT * second:
        return None, part
    power = round(math.log10(highest / second))
    key = f"stated.{group}.{name.replace('_', '')}"
    says = f"{key} is {{}}, {{:.3g}} times the largest of the table's other currents, {engineering(second, 'A')}"
    mended = highest / 10.0**power
    finding = Finding(
        rule="stated current",
        severity="doubtful",
        topic=key,
        file=PART_FILE,
        found=says.format(engineering(highest, "A"), highest / second),
        remedy=f"divide {key} by {10**power}; then {says.format(engineering(mended, 'A'), mended / second)}",
    )
    changed = replace(getattr(part.stated, group), **{name: mended})
    return finding, replace(part, stated=replace(part.stated, **{group: changed}))
