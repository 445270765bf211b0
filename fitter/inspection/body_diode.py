"""Body-diode curves against VSD, the current that it is stated at, and each other."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fitter.inspection.finding import Comparison, ratio
from fitter.inspection.reading import error_at, is_cold, read_at, smallest_readable, typical, x_where
from fitter.inspection.transfer import largest_current
from fitter.models.temperature import KELVIN, junction_temperature
from fitter.part import Curve, Part
from fitter.units import engineering

__all__ = ["current", "currents", "drift", "slope", "voltage"]

#: A typical curve and a typical VSD differ by less; max over typ is 1.3 to 1.4.
_VOLTAGE = 1.2
#: A VSD printed to two digits and a line's width make a factor of two in current; a slip makes ten.
_CURRENT = 5.0
#: Curves run to a small multiple of IS (common practice, no source).
_LEAST, _MOST = 0.7, 25.0
#: dVSD/dT [V/C] at a small current: silicon -1 to -2.5 mV/C, wide-gap junctions more (theory: -(Eg/q - V)/T).
_STEEPEST, _FLATTEST = -6e-3, -0.1e-3
#: No junction's current rises faster than exp(qV/kT): k/q ln 10 [V/C] for each decade.
_DECADE = 1.984e-4


def voltage(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The curve at IS shows VSD."""
    group = part.stated.body_diode
    stated = None if group is None else typical(group.v_sd)
    if group is None or not stated or group.i_s is None or not is_cold(curve):
        return
    read = x_where(curve, group.i_s)
    if read is None:
        return
    slack = 4.0 * float(np.hypot(curve.point_error, curve.axis_error)) * curve.x_axis.length / stated
    yield Comparison(
        rule="forward voltage",
        curve=curve,
        off=ratio(read / stated, 1.0 / _VOLTAGE, _VOLTAGE, slack=slack),
        says=f"VSD at {engineering(group.i_s, 'A')} is {read:.3g} V, stated is {stated:g} V",
        remedy="look at the curve's axes and at the row of VSD",
        stated="body_diode.v_sd",
    )


def current(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The curve carries IS at the stated VSD."""
    group = part.stated.body_diode
    stated = None if group is None else typical(group.v_sd)
    if group is None or not stated or not group.i_s or not is_cold(curve):
        return
    read = read_at(curve, stated)
    if read is None:
        low, high = float(curve.x[0]), float(curve.x[-1])
        yield Comparison(
            rule="forward current",
            curve=curve,
            off=max(ratio(high / stated, 1.0 / 1.15), ratio(low / stated, 0.0, 1.15)),
            says=f"the curve runs from {low:.3g} to {high:.3g} V, VSD is stated as {stated:g} V",
            remedy="look at the VSD axis and at the row of VSD",
            stated="body_diode.v_sd",
        )
        return
    factor = read / group.i_s
    yield Comparison(
        rule="forward current",
        curve=curve,
        off=ratio(factor, 1.0 / _CURRENT, _CURRENT, slack=2.0 * error_at(curve, stated)),
        says=f"at the stated VSD of {stated:g} V the curve carries {factor:.3g} times {engineering(group.i_s, 'A')}",
        remedy="look at the curve's axes and at the row of VSD",
        stated="body_diode.v_sd",
    )


def currents(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The curve runs to a small multiple of IS, VSD to a few volts."""
    group, top = part.stated.body_diode, float(np.max(curve.y))
    largest = group.i_s if group is not None and group.i_s else largest_current(part)
    if largest:
        yield Comparison(
            rule="currents",
            curve=curve,
            at=int(np.argmax(curve.y)),
            off=max(ratio(top / largest, _LEAST, _MOST), ratio(float(np.min(curve.y)) / largest, 0.0, 1.5)),
            says=f"the curve runs to {engineering(top, 'A')}, {top / largest:.3g} times the largest stated "
            f"{engineering(largest, 'A')}",
            remedy="look at the current axis and column, and at is_A",
        )
    # Between a germanium-like 0.1 V at the least current and ten times a silicon carbide junction's.
    # Points that lie on a linear axis say nothing of the voltage.
    v_low = float(curve.x[np.argmax(curve.y >= min(smallest_readable(curve), top))])
    v_high = float(curve.x[-1])
    yield Comparison(
        rule="junction voltage",
        curve=curve,
        at=curve.x.size - 1,
        off=max(ratio(v_high, 0.3, 10.0), ratio(v_low, 0.02, 5.0)),
        says=f"VSD runs from {v_low:.3g} to {v_high:.3g} V; a junction with its resistance has about one to five",
        remedy="look at the VSD axis and column",
    )


def _ends(curve: Curve) -> str:
    return f"{engineering(float(np.min(curve.y)), 'A')} to {engineering(float(np.max(curve.y)), 'A')}"


def drift(part: Part, curve: Curve) -> Iterator[Comparison]:
    """VSD at a small current falls with temperature."""
    for other in part.curves_of(curve.quantity):
        t, u = curve.t_j, other.t_j
        if other.name == curve.name or t is None or u is None or t == u:
            continue
        cold, hot = (curve, other) if t < u else (other, curve)
        low = max(float(np.min(cold.y)), float(np.min(hot.y)))
        high = min(float(np.max(cold.y)), float(np.max(hot.y)))
        low = max(low, smallest_readable(cold), smallest_readable(hot))
        level = float(np.sqrt(max(low, 1e-300) * max(low, np.sqrt(max(low * high, 0.0)))))
        v_cold, v_hot = x_where(cold, level), x_where(hot, level)
        if v_cold is None or v_hot is None:
            yield Comparison(
                rule="drift",
                curve=hot,
                other=cold,
                off=2.0,
                says=f"{hot.name} runs from {_ends(hot)}, {cold.name} from {_ends(cold)}: they have no current in "
                "common",
                remedy="look at the current axes of both",
            )
            continue
        slope = (v_hot - v_cold) / abs(t - u)
        middle = 0.5 * (_STEEPEST + _FLATTEST)
        error = 2.0 * cold.axis_error * cold.x_axis.length / abs(t - u)
        yield Comparison(
            rule="drift",
            curve=hot,
            other=cold,
            off=abs(slope - middle) / (0.5 * (_FLATTEST - _STEEPEST) + error),
            says=f"at {engineering(level, 'A')} VSD changes by {slope * 1e3:.3g} mV/C from {cold.name} to "
            f"{hot.name}; it falls by one to a few",
            remedy="exchange the two curves' tj_C, or look at the axes of both",
        )


def slope(part: Part, curve: Curve) -> Iterator[Comparison]:
    """A decade of current takes kT/q ln 10 or more."""
    low = max(float(curve.y[0]), smallest_readable(curve))
    if low <= 0.0 or curve.y[-1] < 10.0 * low:
        return
    first, then = x_where(curve, 1.01 * low), x_where(curve, 10.0 * low)
    if first is None or then is None:
        return
    least = _DECADE * (junction_temperature(curve.t_j) + KELVIN)
    error = 4.0 * 1.4 * curve.point_error * curve.x_axis.length
    yield Comparison(
        rule="junction law",
        curve=curve,
        off=max((0.9 * least - (then - first)) / error, 0.0) if error > 0.0 else 0.0,
        says=f"from {engineering(low, 'A')} to {engineering(10.0 * low, 'A')} VSD rises by "
        f"{(then - first) * 1e3:.3g} mV; a junction needs "
        f"{least * 1e3:.3g} mV for a decade of current",
        remedy="look at the division of the current axis: logarithmic or linear",
    )
