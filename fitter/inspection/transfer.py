"""Transfer curves against the threshold, the plateau, gfs, RDS(on), the rating and each other."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fitter.inspection.finding import Comparison, ratio
from fitter.inspection.reading import error_at, is_cold, log_error, read_at, square_root_line, typical, x_where
from fitter.part import Curve, Part
from fitter.units import engineering

__all__ = [
    "crossing",
    "current_at_plateau",
    "currents",
    "hot_and_cold",
    "largest_current",
    "on_resistance",
    "rising",
    "same_gain",
    "threshold",
    "transconductance",
]

#: Current at the plateau voltage over the test's: the plateau is printed to two digits and typical, and ID goes with
#: the square of the overdrive.
_PLATEAU = 3.0
#: gfs is a typical figure, often rounded down by the maker; a factor of two either way is a trap of its own.
_GFS = 2.2
#: A transfer curve runs to a multiple of the currents that the table is stated at (common practice, no source).
_LEAST_CURRENT, _MOST_CURRENT = 0.6, 60.0
#: Hot and cold curves of one channel differ by less, at VGS well above the threshold.
_GAIN = 4.0
#: A switch does not lose a quarter of its rated voltage when it is on: this many times a tenth of it.
_DROP = 2.5


def largest_current(part: Part) -> float | None:
    """The largest current that the table is stated at [A]: none of them is above the rating."""
    s = part.stated
    currents = [g.i_d for g in (s.gate_charge, s.on_resistance, s.transconductance) if g is not None]
    currents += [s.body_diode.i_s] if s.body_diode is not None and s.body_diode.i_s is not None else []
    return max(currents, default=None)


def rising(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Current rises with the voltage, beyond the reading errors."""
    top = max(float(np.max(curve.y)), 1e-300)
    share = curve.y / top
    error = np.minimum(log_error(curve), 1.0) * np.abs(share)
    highest = np.maximum.accumulate(np.where(share >= np.maximum.accumulate(share), np.arange(share.size), 0))
    fall = share[highest] - share
    # Four standard deviations of the difference of two points; and where the curve is flat, the line's width.
    slack = 4.0 * np.hypot(error, error[highest]) + 0.1
    worst = int(np.argmax(fall / slack))
    yield Comparison(
        rule="monotone",
        curve=curve,
        at=worst,
        off=float(fall[worst] / slack[worst]),
        says=f"the current falls with the voltage, by {100.0 * fall[worst]:.0f} % of its largest value",
        remedy="look at the point again, and at the columns' order",
    )


def threshold(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The curve begins near VGS(th); the plateau of the same VGS axis lies above."""
    group, line = part.stated.threshold, square_root_line(curve)
    stated = None if group is None else typical(group.v_gs_th)
    if not stated or line is None or not is_cold(curve):
        return
    off = line[0] - stated
    # VGS(th) is read at a small current: it lies below the straight line's, by up to a volt and a half.
    limit = max(0.7 * stated, 2.0) if off > 0.0 else 0.35 * max(stated, 1.0)
    yield Comparison(
        rule="threshold",
        curve=curve,
        off=abs(off) / limit,
        says=f"the curve begins near {line[0]:.3g} V, the stated VGS(th) is {stated:g} V",
        remedy="one of the two is from another part, row or axis: look at the VGS axis and at vgs_th",
        stated="threshold.v_gs_th",
    )


def current_at_plateau(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The curve carries the gate-charge test's current at the plateau voltage."""
    group = part.stated.gate_charge
    stated = None if group is None else typical(group.v_plateau)
    if group is None or not stated or not is_cold(curve) or group.load != "current":
        return
    read = read_at(curve, stated)
    if read is None:
        low, high = float(curve.x[0]), float(curve.x[-1])
        off = max(ratio(high / stated, 1.0 / 1.1), ratio(low / stated, 0.0, 1.1))
        says = f"the curve runs from {low:.3g} to {high:.3g} V and misses the plateau at {stated:g} V"
    else:
        factor = read / group.i_d
        off = ratio(factor, 1.0 / _PLATEAU, _PLATEAU, slack=4.0 * error_at(curve, stated))
        current = engineering(group.i_d, "A")
        says = f"at the plateau's {stated:g} V the curve carries {factor:.3g} times the test's {current}"
    yield Comparison(
        rule="current at plateau",
        curve=curve,
        off=off,
        says=says,
        remedy="look at both axes of the curve, and at id_A and v_plateau_V of the gate-charge test",
        stated="gate_charge.v_plateau",
    )


def transconductance(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The curve's slope at the stated current is gfs."""
    group = part.stated.transconductance
    stated = None if group is None else typical(group.g_fs)
    if group is None or not stated or not is_cold(curve):
        return
    steps = [x_where(curve, group.i_d * share) for share in (0.75, 1.25)]
    if steps[0] is None or steps[1] is None or steps[1] <= steps[0]:
        return
    factor = 0.5 * group.i_d / (steps[1] - steps[0]) / stated
    error = 4.0 * curve.point_error * curve.x_axis.length / (steps[1] - steps[0])
    yield Comparison(
        rule="transconductance",
        curve=curve,
        off=ratio(factor, 1.0 / _GFS, _GFS, slack=error),
        says=f"the slope at {engineering(group.i_d, 'A')} is {factor:.3g} times the stated gfs of {stated:g} S",
        remedy="look at both axes of the curve, and at the row of gfs",
        stated="transconductance.g_fs",
    )


def on_resistance(part: Part, curve: Curve) -> Iterator[Comparison]:
    """RDS(on) is not below what an ideal channel of the transfer curve's gain has."""
    group, line = part.stated.on_resistance, square_root_line(curve)
    stated = None if group is None else typical(group.r_ds_on)
    if group is None or not stated or line is None or not is_cold(curve) or group.v_gs <= line[0]:
        return
    least = 1.0 / (line[1] * (group.v_gs - line[0]))
    yield Comparison(
        rule="on resistance",
        curve=curve,
        off=max(ratio(stated / least, 0.2), ratio(stated * group.i_d / (0.1 * part.v_ds_max), 0.0, _DROP)),
        says=f"the curve's channel alone has {engineering(least, 'ohm')} at VGS = {group.v_gs:g} V, RDS(on) is stated "
        f"as {engineering(stated, 'ohm', 4)}, a drop of {engineering(stated * group.i_d, 'V')} at "
        f"{engineering(group.i_d, 'A')}",
        remedy="look at the unit of rds_on (ohm or milliohm) and at the current axis",
        stated="on_resistance.r_ds_on",
    )


def currents(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The curve runs to a small multiple of the stated currents, and VGS stays within its rating."""
    largest, least, top = largest_current(part), float(np.min(curve.y)), float(np.max(curve.y))
    if largest:
        yield Comparison(
            rule="currents",
            curve=curve,
            at=int(np.argmax(curve.y)),
            off=max(ratio(top / largest, _LEAST_CURRENT, _MOST_CURRENT), ratio(least / largest, 0.0, 1.5)),
            says=f"the curve runs from {engineering(least, 'A')} to {engineering(top, 'A')}, the table is stated at up "
            f"to {engineering(largest, 'A')}",
            remedy="look at the current axis and column, and at the stated currents",
        )
    factor = float(curve.x[-1]) / part.v_gs_max
    yield Comparison(
        rule="gate rating",
        curve=curve,
        at=curve.x.size - 1,
        off=ratio(factor, 0.0, 1.2),
        says=f"VGS runs to {factor:.3g} times the rated {part.v_gs_max:g} V",
        remedy="look at the VGS axis, and at vgs_max_V",
    )


def _other_temperatures(part: Part, curve: Curve) -> Iterator[tuple[Curve, Curve]]:
    """The curve with each other one of its quantity, the colder first."""
    for other in part.curves_of(curve.quantity):
        t, u = curve.t_j, other.t_j
        if other.name != curve.name and t is not None and u is not None and t != u:
            yield (curve, other) if t < u else (other, curve)


def same_gain(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Hot and cold carry like currents well above the threshold, and begin at like voltages."""
    for cold, hot in _other_temperatures(part, curve):
        v = min(cold.x[-1], hot.x[-1])
        factor = (read_at(hot, float(v)) or np.nan) / (read_at(cold, float(v)) or np.nan)
        if not np.isfinite(factor):
            factor = 0.0
        yield Comparison(
            rule="same gain",
            curve=hot,
            other=cold,
            at=hot.x.size - 1,
            off=ratio(factor, 1.0 / _GAIN, _GAIN),
            says=f"at VGS = {v:.3g} V {hot.name} carries {factor:.3g} times the current of {cold.name}",
            remedy="look at the axes of both",
        )


def hot_and_cold(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Near the threshold the hot part carries more current: its threshold is lower by 2.6 to 10 mV/C.

    (Ten datasheets.) Where the two cross, above, the cold one takes the lead.
    """
    for cold, hot in _other_temperatures(part, curve):
        level = 0.1 * min(float(np.max(cold.y)), float(np.max(hot.y)))
        v_cold, v_hot = x_where(cold, level), x_where(hot, level)
        if v_cold is None or v_hot is None:
            continue
        error = 4.0 * cold.axis_error * cold.x_axis.length
        yield Comparison(
            rule="hot and cold",
            curve=hot,
            other=cold,
            off=max((v_hot - v_cold) / error, 0.0) if error > 0.0 else 0.0,
            says=f"at {engineering(level, 'A')} {hot.name} needs {v_hot:.3g} V and {cold.name} {v_cold:.3g} V; the "
            "threshold falls with temperature",
            remedy="exchange the two curves' tj_C, or look at the VGS axes",
        )


def crossing(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Hot and cold cross once: the lower threshold leads below, the higher mobility above, and stays ahead."""
    for cold, hot in _other_temperatures(part, curve):
        start, end = max(cold.x[0], hot.x[0]), min(cold.x[-1], hot.x[-1])
        if end <= start:
            continue
        v = np.linspace(start, end, 20)
        lead = np.log(np.divide(*(np.interp(v, c.x, np.maximum(c.y, 1e-300)) for c in (hot, cold))))
        error = np.hypot(*(np.interp(v, c.x, log_error(c)) for c in (hot, cold)))
        # Three standard deviations behind, then three ahead at a higher VGS.
        lead = lead / np.maximum(3.0 * error, 1e-9)
        back = np.minimum(lead, -np.minimum.accumulate(lead))
        worst = int(np.argmax(back))
        yield Comparison(
            rule="crossing",
            curve=hot,
            other=cold,
            at=int(np.argmin(np.abs(hot.x - v[worst]))),
            off=max(float(back[worst]), 0.0),
            says=f"{hot.name} falls behind {cold.name} and leads again at VGS = {v[worst]:.3g} V; they cross once",
            remedy="exchange the two curves' tj_C, or look at the axes of both",
        )
