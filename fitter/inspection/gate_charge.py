"""The gate-charge curve against the table, the transfer curve and the capacitances."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fitter.inspection.finding import Comparison, ratio
from fitter.inspection.reading import extreme_before, first_curve, is_cold, read_at, typical
from fitter.inspection.transfer import largest_current
from fitter.part import Curve, Part, Quantity
from fitter.units import engineering

__all__ = ["end", "first_leg", "from_zero", "plateau", "rising", "start", "total", "transfer"]

#: QG max over typ is 1.2 to 1.5 (common practice, no source); typical curve and typical value differ by less.
_LEAST_TOTAL, _MOST_TOTAL = 0.75, 1.35
#: QG(th) over Ciss VTH: mean 0.986, standard deviation 0.081 over 16 datasheets, range 0.84 to 1.13; four of these
#: standard deviations about the mean.
_LEAST_LEG, _MOST_LEG = 0.66, 1.31
#: The plateau is printed to two digits, and read off the figure's line.
_PLATEAU = 1.2
#: Farthest below 0 that a click may lie, as a share of the largest VGS.
_BELOW_ZERO = 0.08


def rising(part: Part, curve: Curve) -> Iterator[Comparison]:
    """VGS only rises."""
    highest, there = extreme_before(curve, curve.y)
    fall = np.where(there, curve.y[highest] - curve.y, 0.0)
    worst = int(np.argmax(fall))
    yield Comparison(
        rule="monotone",
        curve=curve,
        at=worst,
        off=float(fall[worst]) / ((8.0 * curve.point_error + 0.01) * curve.y_axis.length),
        says=f"VGS falls by {fall[worst]:.2g} V; it only rises",
        remedy="look at the point again",
    )


def start(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The first leg, carried on to VGS = 0, begins at no charge."""
    first = curve.y < 0.35 * float(np.max(curve.y))
    slope = _regression(curve, first)
    if slope is None or not float(np.max(curve.x)) > 0.0:
        return
    begins = float(np.mean(curve.x[first])) - slope * float(np.mean(curve.y[first]))
    share = begins / float(np.max(curve.x))
    yield Comparison(
        rule="start",
        curve=curve,
        off=abs(share) / 0.12,
        says=f"the first leg meets VGS = 0 at {engineering(begins, 'C')}, not near 0",
        remedy="look at the charge axis' from and to",
    )


def from_zero(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The test begins at VGS = 0; a figure that begins below it wants shifting first."""
    lowest = int(np.argmin(curve.y))
    share = -float(curve.y[lowest]) / max(float(np.max(np.abs(curve.y))), 1e-300)
    yield Comparison(
        rule="below zero",
        curve=curve,
        at=lowest,
        off=share / _BELOW_ZERO,
        says=f"the curve begins at VGS = {curve.y[lowest]:.3g} V, and all charges here count from VGS = 0",
        remedy="leave out the points below VGS = 0, and subtract the charge at VGS = 0 from all others",
    )


def _regression(curve: Curve, chosen: np.ndarray[tuple[int, ...], np.dtype[np.bool_]]) -> float | None:
    """Charge per volt [F] over the chosen points."""
    x, y = curve.x[chosen], curve.y[chosen]
    spread = float(np.sum((y - y.mean()) ** 2)) if y.size >= 3 else 0.0
    return float(np.sum((x - x.mean()) * (y - y.mean()))) / spread if spread > 0.0 else None


def total(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The charge at the stated VGS is QG."""
    group = part.stated.gate_charge
    stated = None if group is None else typical(group.q_g)
    if group is None or not stated:
        return
    same = curve.v_dd is None or abs(curve.v_dd / group.v_dd - 1.0) < 0.3
    if not same or float(np.max(curve.y)) < 0.6 * group.v_gs:
        return
    factor = _charge_at(curve, group.v_gs) / stated
    yield Comparison(
        rule="total",
        curve=curve,
        at=curve.x.size - 1,
        off=ratio(factor, _LEAST_TOTAL, _MOST_TOTAL),
        says=f"QG at {group.v_gs:g} V is {factor:.3g} times the stated {engineering(stated, 'C')}",
        remedy="one of the two is wrong: look at the charge axis and at the table's row",
        stated="gate_charge.q_g",
    )


def _charge_at(curve: Curve, v_gs: float) -> float:
    """Charge at a VGS, carried on along the last leg where the curve ends before."""
    rising_y = np.maximum.accumulate(curve.y)
    if v_gs <= rising_y[-1]:
        return float(np.interp(v_gs, rising_y, curve.x))
    last = np.arange(curve.x.size) >= curve.x.size - max(3, curve.x.size // 5)
    slope = _regression(curve, last)
    return float(curve.x[-1]) + (slope or 0.0) * (v_gs - float(rising_y[-1]))


def end(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The curve ends near the VGS that QG is stated at, and within the rating."""
    group, top = part.stated.gate_charge, float(np.max(curve.y))
    aim = part.v_gs_max if group is None else group.v_gs
    yield Comparison(
        rule="end",
        curve=curve,
        at=curve.x.size - 1,
        off=max(ratio(top / aim, 0.4, 2.5), ratio(top / part.v_gs_max, 0.0, 1.2)),
        says=f"the curve runs to {top:.3g} V, QG is stated at {aim:g} V and VGS rated {part.v_gs_max:g} V",
        remedy="look at the VGS axis and at vgs_V and vgs_max_V",
    )


def _flattest(curve: Curve) -> float | None:
    """VGS of the flattest stretch of an eighth of the points [V]."""
    reach = max(3, curve.x.size // 8)
    if curve.x.size < 2 * reach:
        return None
    step = np.maximum(curve.x[reach:] - curve.x[:-reach], 1e-12 * abs(float(curve.x[-1])) + 1e-300)
    at = int(np.argmin((curve.y[reach:] - curve.y[:-reach]) / step))
    return float(np.mean(curve.y[at : at + reach + 1]))


def plateau(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The flattest stretch lies at the stated plateau voltage."""
    group, flattest = part.stated.gate_charge, _flattest(curve)
    stated = None if group is None else typical(group.v_plateau)
    if not stated or flattest is None:
        return
    slack = 4.0 * curve.axis_error * curve.y_axis.length / stated
    yield Comparison(
        rule="plateau",
        curve=curve,
        at=curve.x.size // 2,
        off=ratio(flattest / stated, 1.0 / _PLATEAU, _PLATEAU, slack=slack),
        says=f"the plateau lies at {flattest:.3g} V, stated is {stated:g} V",
        remedy="look at the VGS axis and at v_plateau_V",
        stated="gate_charge.v_plateau",
    )


def _pair(part: Part, charge: Curve, transfer_curve: Curve) -> Iterator[Comparison]:
    current = charge.i_d if charge.i_d is not None else largest_current(part)
    flattest = _flattest(charge)
    if current is None or flattest is None or not is_cold(transfer_curve) or charge.load == "resistive":
        return
    if not float(np.min(transfer_curve.y)) < current < float(np.max(transfer_curve.y)):
        return
    expected = float(np.interp(current, np.maximum.accumulate(transfer_curve.y), transfer_curve.x))
    slack = 0.12 * abs(expected) + 0.3 + 0.02 * (transfer_curve.x_axis.length + charge.y_axis.length)
    yield Comparison(
        rule="plateau and transfer",
        curve=charge,
        other=transfer_curve,
        at=charge.x.size // 2,
        off=abs(flattest - expected) / slack,
        says=f"the plateau lies at {flattest:.3g} V; {transfer_curve.name} carries "
        f"{engineering(current, 'A')} at {expected:.3g} V",
        remedy="look at the test's id_A and at the VGS axes of both curves",
    )


def transfer(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The plateau lies where the transfer curve carries the load's current."""
    pairs = (
        [(curve, t) for t in part.curves_of(Quantity.TRANSFER)]
        if curve.quantity is Quantity.GATE_CHARGE
        else [(g, curve) for g in part.curves_of(Quantity.GATE_CHARGE)]
    )
    for charge, transfer_curve in pairs:
        yield from _pair(part, charge, transfer_curve)


def _leg(part: Part, charge: Curve, c_iss_curve: Curve) -> Iterator[Comparison]:
    group = part.stated.threshold
    v_th = None if group is None else typical(group.v_gs_th)
    if charge.v_dd is None or v_th is None:
        return
    slope, c_iss = _regression(charge, charge.y < v_th), read_at(c_iss_curve, charge.v_dd)
    if not c_iss or slope is None or float(np.ptp(charge.y[charge.y < v_th])) < 0.2:
        return
    error = 4.0 * charge.point_error * (charge.x_axis.length / (c_iss * v_th) + charge.y_axis.length / v_th)
    if error > 0.5:
        return  # of a leg so short, clicks say nothing
    yield Comparison(
        rule="first leg",
        curve=charge,
        other=c_iss_curve,
        off=ratio(slope / c_iss, _LEAST_LEG, _MOST_LEG, slack=error),
        says=f"the first leg of {charge.name} has {engineering(slope, 'F')}, {slope / c_iss:.3g} times Ciss at "
        f"{charge.v_dd:g} V",
        remedy="they should be alike: look at the units and axes of both curves",
    )


def first_leg(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Up to the threshold the gate is Ciss(VDD)."""
    if curve.quantity is Quantity.GATE_CHARGE:
        c_iss = first_curve(part, Quantity.CISS)
        pairs = [] if c_iss is None else [(curve, c_iss)]
    else:
        pairs = [(g, curve) for g in part.curves_of(Quantity.GATE_CHARGE)] if curve.quantity is Quantity.CISS else []
    for charge, c_iss_curve in pairs:
        yield from _leg(part, charge, c_iss_curve)
