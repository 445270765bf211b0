"""The capacitance curves against each other, against the table, and against the charges that it states."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fitter.inspection.finding import Comparison, Finding, ratio
from fitter.inspection.reading import error_at, extreme_before, first_curve, log_error, read_at, typical
from fitter.part import Curve, Part, Quantity, Stated
from fitter.units import engineering

__all__ = ["definitions", "notes", "rating", "readable", "rising", "stated_charge", "table", "table_reach"]

#: A typical curve and a typical table value differ by less than this factor: max over typ of Ciss is 1.2 to 1.3
#: (common practice, no source).
_FACTOR = 1.5
#: Capacitances are not measured beyond the rating; a log axis may run on to its next decade's end. Where they are not
#: measured up to it, they are up to some tens of volts (common practice, no source).
_BEYOND_RATING, _BELOW_RATING = 2.0, 0.02
#: A curve reaches at least half the voltage that its table value is stated at.
_REACH = 0.5
#: Reading errors from zero that a point read on a linear axis lies off it.
_READABLE = 1.5
#: Integrals of hand-digitized curves are good to 5-10 % (common practice, no source); what lies below the first point,
#: and the rounding of stated charges, come on top.
_CHARGE = 1.5
_VALUES = {Quantity.CISS: "c_iss", Quantity.COSS: "c_oss", Quantity.CRSS: "c_rss"}


def _stated(part: Part, quantity: Quantity) -> float | None:
    table = part.stated.capacitance
    if table is None:
        return None
    value: Stated | None = getattr(table, _VALUES[quantity])
    return typical(value)


def table(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The curve at the stated VDS is the table value."""
    value, group = _stated(part, curve.quantity), part.stated.capacitance
    if group is None or not value:
        return
    read = read_at(curve, group.v_ds)
    if read is None:
        return
    yield Comparison(
        rule="off table",
        curve=curve,
        off=ratio(read / value, 1.0 / _FACTOR, _FACTOR, slack=4.0 * error_at(curve, group.v_ds)),
        says=f"at {group.v_ds:g} V the curve is {read / value:.3g} times its table value of "
        f"{engineering(value, 'F', 4)}",
        remedy="one of the two is wrong: look at the curve's axes, the column's unit, and the table's row and condition"
        + _trap(read / value),
        stated=f"capacitance.{_VALUES[curve.quantity]}",
    )


def _trap(factor: float) -> str:
    """A factor of two has causes of its own."""
    if 1.8 < max(factor, 1.0 / max(factor, 1e-300)) < 2.2:
        return "; a factor of two: two dies in one package, or the next curve of the figure"
    return ""


def table_reach(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The curve reaches the voltage that its table value is stated at."""
    group = part.stated.capacitance
    if group is None or _stated(part, curve.quantity) is None:
        return
    low, high = float(curve.x[0]), float(curve.x[-1])
    yield Comparison(
        rule="reach",
        curve=curve,
        at=curve.x.size - 1,
        off=max(ratio(high / group.v_ds, _REACH), ratio(low / group.v_ds, 0.0, 1.0 / _REACH) if low > 0.0 else 0.0),
        says=f"the curve runs from {low:.3g} to {high:.3g} V, the table value is stated at {group.v_ds:g} V",
        remedy="look at the VDS axis and at the table's condition",
        severity="note",
    )


def rating(part: Part, curve: Curve) -> Iterator[Comparison]:
    """The curve does not end far beyond the rated VDS, nor at a small part of it."""
    factor = float(curve.x[-1]) / part.v_ds_max
    yield Comparison(
        rule="beyond rating",
        curve=curve,
        at=curve.x.size - 1,
        off=ratio(factor, _BELOW_RATING, _BEYOND_RATING),
        says=f"the curve runs to {factor:.3g} times the rated {part.v_ds_max:g} V",
        remedy="look at the VDS axis and at vds_max_V",
    )


def readable(part: Part, curve: Curve) -> Iterator[Comparison]:
    """On a linear axis nothing can be read that is small against a click's error."""
    if not curve.y_axis.printed:
        return
    lowest = int(np.argmin(curve.y))
    if curve.y_axis.scale == "log":
        says = "the lowest point can be read on a log axis"
        yield Comparison(rule="unreadable", curve=curve, at=lowest, off=0.0, says=says, remedy="")
        return
    clicks = float(curve.y[lowest]) / (curve.point_error * curve.y_axis.length)
    yield Comparison(
        rule="unreadable",
        curve=curve,
        at=lowest,
        off=_READABLE / max(clicks, 1e-3),
        says=f"the lowest point is {clicks:.2g} times the error of a click on its linear axis",
        remedy='if the axis is printed logarithmic, write scale = "log"',
    )


def definitions(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Ciss >= Crss and Coss >= Crss everywhere: both contain it."""
    if curve.quantity is Quantity.CRSS:
        others = [first_curve(part, q) for q in (Quantity.CISS, Quantity.COSS)]
        pairs = [(upper, curve) for upper in others if upper is not None]
    else:
        lower = first_curve(part, Quantity.CRSS)
        pairs = [] if lower is None else [(curve, lower)]
    for upper, lower in pairs:
        error = np.hypot(log_error(upper), float(np.median(log_error(lower))))
        # Falling from left to right even where the points do not: a curve is read between its own points only.
        common = (upper.x >= lower.x[0]) & (upper.x <= lower.x[-1])
        below = np.log(np.maximum(np.interp(upper.x, lower.x, lower.y), 1e-300) / np.maximum(upper.y, 1e-300))
        below = common & (below > 4.0 * error)
        share = float(np.mean(below))
        yield Comparison(
            rule="definition",
            curve=upper,
            other=lower,
            at=int(np.argmax(below)),
            off=share / 0.1,
            says=f"{upper.name} lies below {lower.name} at {100.0 * share:.0f} % of its points, "
            "yet Crss is a part of it",
            remedy="look at the units and axes of both, and whether the two are exchanged",
            severity="stop" if share > 0.5 else "doubtful",
        )


def _rise(curve: Curve) -> tuple[int, float, float]:
    """Where the curve has risen most above a point before it: its number, ln of the rise, and that in its limit."""
    y, error = np.log(np.maximum(curve.y, 1e-300)), log_error(curve)
    lowest, there = extreme_before(curve, -y)
    rise = np.where(there, y - y[lowest], 0.0)
    # Four standard deviations of the difference of two points.
    limit = np.maximum(4.0 * np.hypot(error, error[lowest]), 1e-9)
    worst = int(np.argmax(rise / limit))
    return worst, float(rise[worst]), float(rise[worst] / limit[worst])


def _is_real(curve: Curve, rise: float) -> bool:
    """Whether such a rise is seen on real parts: of Crss at high VDS, up to about a factor of two and a half."""
    return curve.quantity is Quantity.CRSS and rise < 0.9


def rising(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Capacitances fall with VDS."""
    worst, rise, off = _rise(curve)
    yield Comparison(
        rule="rising",
        curve=curve,
        at=worst,
        off=min(off, 1.0) if _is_real(curve, rise) else off,
        says=f"the capacitance rises again with VDS, by a factor of {np.exp(min(rise, 50.0)):.3g}",
        remedy="look at the point again, and at the direction of the axes",
    )


def notes(part: Part) -> Iterator[Finding]:
    """A slight rise of Crss at high VDS is real on some parts, and worth knowing."""
    for curve in part.curves_of(Quantity.CRSS):
        worst, rise, off = _rise(curve)
        if off > 1.0 and _is_real(curve, rise):
            yield Finding(
                rule="rising",
                severity="note",
                topic=curve.name,
                file=curve.file,
                line=int(curve.lines[worst]),
                found=f"the capacitance rises again with VDS, by a factor of {np.exp(rise):.3g}",
                remedy="a rise of Crss at high VDS is real on some parts; the model cannot follow it",
            )


def stated_charge(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Qoss and Eoss are integrals of Coss over VDS."""
    group = part.stated.output_charge
    if group is None or curve.quantity is not Quantity.COSS:
        return
    x, y = curve.x, curve.y
    if not x[0] < 0.2 * group.v_ds < 0.9 * x[-1]:
        return
    v = np.concatenate([[0.0], x[x < group.v_ds], [group.v_ds]])
    c = np.interp(v, x, y)
    for name, unit, stated, integrand in (
        ("Qoss", "C", typical(group.q_oss), c),
        ("Eoss", "J", typical(group.e_oss), c * v),
    ):
        if not stated:
            continue
        integral = float(np.sum(0.5 * (integrand[1:] + integrand[:-1]) * np.diff(v)))
        yield Comparison(
            rule=name,
            curve=curve,
            off=ratio(integral / stated, 1.0 / _CHARGE, _CHARGE),
            says=f"the curve's integral up to {group.v_ds:g} V is {integral / stated:.3g} times the stated {name} of "
            f"{engineering(stated, unit)}",
            remedy=f"one of the two is wrong: look at the curve's axes and at the row of {name}",
            stated="output_charge.q_oss" if name == "Qoss" else "output_charge.e_oss",
        )
