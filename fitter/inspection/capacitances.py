"""The capacitance curves against each other, and against the table."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import permutations

import numpy as np
from numpy.typing import NDArray

from fitter.inspection.finding import Finding, Severity
from fitter.inspection.reading import first_curve, log_error, read_at, typical
from fitter.part import Curve, Part, Quantity

__all__ = ["inspect"]

Array = NDArray[np.float64]

_NAMES = (Quantity.CISS, Quantity.COSS, Quantity.CRSS)
#: A curve this far, as a factor, from its table value is not the same quantity: QG max over typ is 1.2 to 1.5, Ciss 1.2
#: to 1.3, so typical curves and typical values differ by less (common practice, no source).
_FACTOR = 1.5
#: A power of ten is recognised within this factor.
_NEAR = 1.4


def inspect(part: Part) -> Iterator[Finding]:
    """Findings on the capacitance curves."""
    curves = {q: c for q in _NAMES if (c := first_curve(part, q)) is not None}
    factors = _factors(part, curves)
    exchanged = _exchange(part, curves, factors)
    if exchanged is not None:
        yield exchanged
        return
    for quantity, factor in factors.items():
        if not 1.0 / _FACTOR <= factor <= _FACTOR:
            yield _off_table(curves[quantity], factor, part)
    yield from _definitions(curves, factors)
    for curve in curves.values():
        yield from _rising(curve)


def _factors(part: Part, curves: dict[Quantity, Curve]) -> dict[Quantity, float]:
    """Each curve, read at the table's VDS, over its table value."""
    table = part.stated.capacitance
    if table is None:
        return {}
    stated = {
        Quantity.CISS: typical(table.c_iss),
        Quantity.COSS: typical(table.c_oss),
        Quantity.CRSS: typical(table.c_rss),
    }
    found = {}
    for quantity, curve in curves.items():
        value, read = stated[quantity], read_at(curve, table.v_ds)
        if value and read:
            found[quantity] = read / value
    return found


def _exchange(part: Part, curves: dict[Quantity, Curve], factors: dict[Quantity, float]) -> Finding | None:
    """Curves exchanged: where another order meets the table and the definitions, and this one does not."""
    table = part.stated.capacitance
    if len(curves) < 2:
        return None
    order = [q for q in _NAMES if q in curves]

    def bad(assigned: dict[Quantity, Curve]) -> float:
        swapped = _factors(part, assigned)
        from_table = sum(abs(np.log(f)) for f in swapped.values())
        return float(from_table + 3.0 * sum(share for _, share, _ in _violations(assigned)))

    now = bad(curves)
    if now < np.log(_FACTOR):
        return None
    best, best_order = now, tuple(order)
    for other in permutations(order):
        value = bad({q: curves[o] for q, o in zip(order, other, strict=True)})
        if value < best:
            best, best_order = value, other
    if best_order == tuple(order) or best > 0.35 * len(order) or best > 0.4 * now:
        return None
    moved = [(q, o) for q, o in zip(order, best_order, strict=True) if q != o]
    names = " and ".join(sorted({str(q) for q, _ in moved}))
    against = "" if table is None else f" (against the table now: {_said(factors)})"
    first = curves[moved[0][0]]
    return Finding(
        rule="exchanged",
        severity="stop",
        topic=names,
        file=first.file,
        line=int(first.lines[0]),
        found=f"the curves {names} are exchanged{against}",
        remedy="exchange them: " + ", ".join(f"what is entered as {o} is {q}" for q, o in moved),
    )


def _said(factors: dict[Quantity, float]) -> str:
    return ", ".join(f"{q} {f:.3g} times" for q, f in factors.items())


def _off_table(curve: Curve, factor: float, part: Part) -> Finding:
    table = part.stated.capacitance
    at = 0.0 if table is None else table.v_ds
    severity: Severity = "doubtful"
    remedy = "one of the two is wrong: look at the curve's axes, the column's unit, and the table's row and condition"
    for power in (-6, -3, -2, -1, 1, 2, 3, 6):
        if 1.0 / _NEAR <= factor / 10.0**power <= _NEAR:
            severity = "stop"
            slip = "the unit in the column's name" if power % 3 == 0 else "the y axis' from and to: a decade slip"
            then = f"then it is {factor / 10.0**power:.3g} times the table"
            remedy = f"divide the curve by {10.0**power:g} (look at {slip}); {then}"
    return Finding(
        rule="off table",
        severity=severity,
        topic=curve.name,
        file=curve.file,
        line=int(curve.lines[0]),
        found=f"the curve at {at:g} V is {factor:.3g} times its table value",
        remedy=remedy,
    )


def _violations(curves: dict[Quantity, Curve]) -> Iterator[tuple[Quantity, float, int]]:
    """Where Ciss or Coss lies below Crss beyond the reading errors: quantity, share of its points, first such point."""
    lower = curves.get(Quantity.CRSS)
    if lower is None:
        return
    rss_error = float(np.median(log_error(lower)))
    for quantity in (Quantity.CISS, Quantity.COSS):
        upper = curves.get(quantity)
        if upper is None:
            continue
        error = np.hypot(log_error(upper), rss_error)
        read = [read_at(lower, float(v)) for v in upper.x]
        below = np.array(
            [r is not None and np.log(r / c) > 4.0 * e for r, c, e in zip(read, upper.y, error, strict=True)]
        )
        if np.count_nonzero(below) > 0.1 * upper.x.size:
            yield quantity, float(np.mean(below)), int(np.argmax(below))


def _definitions(curves: dict[Quantity, Curve], factors: dict[Quantity, float]) -> Iterator[Finding]:
    """Ciss >= Crss and Coss >= Crss everywhere: both contain it."""
    if any(not 0.1 < f < 10.0 for f in factors.values()):
        return
    for quantity, share, first in _violations(curves):
        curve = curves[quantity]
        yield Finding(
            rule="definition",
            severity="stop" if share > 0.5 else "doubtful",
            topic=f"{quantity}, crss",
            file=curve.file,
            line=int(curve.lines[first]),
            found=f"{quantity} lies below crss at {100.0 * share:.0f} % of its points, yet crss is a part of it",
            remedy="look at the units and axes of both, and whether the two are exchanged",
        )


def _rising(curve: Curve) -> Iterator[Finding]:
    """Capacitances fall with VDS; a slight rise of Crss at high VDS is real on some parts."""
    y, error = np.log(curve.y), log_error(curve)
    lowest = np.minimum.accumulate(y)
    rise = y - lowest
    worst = int(np.argmax(rise - 5.0 * error))
    if rise[worst] <= 5.0 * error[worst]:
        return
    whole = y[-1] - y[0]
    if whole > 0.3:
        yield Finding(
            rule="rising",
            severity="stop",
            topic=curve.name,
            file=curve.file,
            line=int(curve.lines[worst]),
            found=f"the curve rises with VDS, by a factor of {np.exp(whole):.3g} in all; capacitances fall",
            remedy="look at the direction of the axes and whether the columns are exchanged",
        )
        return
    real = curve.quantity is Quantity.CRSS and rise[worst] < 0.9
    yield Finding(
        rule="rising",
        severity="note" if real else "doubtful",
        topic=curve.name,
        file=curve.file,
        line=int(curve.lines[worst]),
        found=f"the curve rises again by a factor of {np.exp(rise[worst]):.2f}",
        remedy="a rise of Crss at high VDS is real on some parts; the model cannot follow it"
        if real
        else "look at the point again",
    )
