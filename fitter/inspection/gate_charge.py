"""The gate-charge curve against the table, the transfer curve and the capacitances."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fitter.gate_charge import read_gate_charge
from fitter.inspection.finding import Finding, Severity
from fitter.inspection.reading import first_curve, read_at, typical
from fitter.part import Curve, Part, Quantity

__all__ = ["inspect"]

#: Share of the charge over which slopes of a digitized curve are taken.
_WINDOW = 0.12


def inspect(part: Part) -> Iterator[Finding]:
    """Findings on the gate-charge curves."""
    for curve in part.curves_of(Quantity.GATE_CHARGE):
        yield from _shape(curve)
        yield from _against_table(part, curve)
        yield from _against_transfer(part, curve)


def _say(rule: str, severity: Severity, curve: Curve, at: int, found: str, remedy: str) -> Finding:
    line = int(curve.lines[at])
    return Finding(
        rule=rule, severity=severity, topic=curve.name, file=curve.file, line=line, found=found, remedy=remedy
    )


def _shape(curve: Curve) -> Iterator[Finding]:
    fall = np.maximum.accumulate(curve.y) - curve.y
    worst = int(np.argmax(fall))
    if fall[worst] > (8.0 * curve.point_error + 0.01) * curve.y_axis.length:
        yield _say(
            "monotone",
            "doubtful",
            curve,
            worst,
            f"VGS falls by {fall[worst]:.2f} V; it only rises",
            "look at the point again",
        )
    if curve.x.size < 4:
        return
    # The first leg, carried on to VGS = 0, must begin at no charge.
    first = curve.y < 0.35 * float(np.max(curve.y))
    if np.count_nonzero(first) >= 3 and float(np.ptp(curve.y[first])) > 0.0:
        start = float(np.polyval(np.polyfit(curve.y[first], curve.x[first], 1), 0.0))
        if abs(start) > 0.12 * float(np.max(curve.x)):
            yield _say(
                "start",
                "doubtful",
                curve,
                0,
                f"the first leg meets VGS = 0 at {start * 1e9:.3g} nC, not near 0",
                "look at the charge axis' from and to",
            )


def _against_table(part: Part, curve: Curve) -> Iterator[Finding]:
    table = part.stated.gate_charge
    if table is None:
        return
    stated = typical(table.q_g)
    same = curve.v_dd is None or abs(curve.v_dd / table.v_dd - 1.0) < 0.3
    if stated and same and float(curve.y[-1]) > 0.6 * table.v_gs:
        x = _charge_at(curve, table.v_gs)
        factor = x / stated
        if not 0.75 <= factor <= 1.35:
            remedy = "one of the two is wrong: look at the charge axis and at the table's row"
            severity: Severity = "doubtful"
            for power in (-3, -2, -1, 1, 2, 3):
                if 0.75 <= factor / 10.0**power <= 1.35:
                    severity = "stop"
                    then = f"then it is {factor / 10.0**power:.3g} times"
                    remedy = f"divide the curve by {10.0**power:g} (unit or decade slip); {then}"
            yield _say(
                "end",
                severity,
                curve,
                curve.x.size - 1,
                f"QG at {table.v_gs:g} V is {factor:.3g} times the stated {stated * 1e9:.3g} nC",
                remedy,
            )


def _charge_at(curve: Curve, v_gs: float) -> float:
    """Charge at a VGS, carried on along the last leg where the curve ends before."""
    last = slice(-max(3, curve.x.size // 5), None)
    if v_gs <= float(np.max(curve.y)):
        order = np.maximum.accumulate(curve.y)
        return float(np.interp(v_gs, order, curve.x))
    return float(np.polyval(np.polyfit(curve.y[last], curve.x[last], 1), v_gs))


def _against_transfer(part: Part, curve: Curve) -> Iterator[Finding]:
    """The plateau lies where the transfer curve carries the load's current."""
    transfer = first_curve(part, Quantity.TRANSFER)
    if transfer is None or curve.i_d is None or curve.x.size < 8:
        return
    if not float(np.min(transfer.y)) < curve.i_d < float(np.max(transfer.y)):
        return
    table = part.stated.threshold
    v_th = (None if table is None else typical(table.v_gs_th)) or 0.3 * float(np.max(curve.y))
    with np.errstate(all="ignore"):
        plateau = float(np.real(read_gate_charge(curve.x, curve.y, v_th, window=_WINDOW).v_plateau))
    expected = float(np.interp(curve.i_d, np.maximum.accumulate(transfer.y), transfer.x))
    slack = 0.12 * expected + 0.3 + 0.02 * (transfer.x_axis.length + curve.y_axis.length)
    if np.isfinite(plateau) and abs(plateau - expected) > slack:
        yield _say(
            "plateau",
            "doubtful",
            curve,
            int(curve.x.size // 2),
            f"the plateau lies at {plateau:.2f} V; the transfer curve carries {curve.i_d:g} A at {expected:.2f} V",
            "look at the test's id_A and at the VGS axes of both curves",
        )
    crss, v_dd = first_curve(part, Quantity.CISS), curve.v_dd
    if crss is None or v_dd is None:
        return
    c_iss = read_at(crss, v_dd)
    low = curve.y < min(v_th, 0.5 * plateau if np.isfinite(plateau) else v_th)
    if c_iss and np.count_nonzero(low) >= 3 and float(np.ptp(curve.y[low])) > 0.2:
        slope = float(np.polyfit(curve.y[low], curve.x[low], 1)[0])
        if not 0.6 <= slope / c_iss <= 1.6:
            yield _say(
                "first leg",
                "doubtful",
                curve,
                0,
                f"the first leg has {slope * 1e12:.3g} pF, Ciss at {v_dd:g} V is {c_iss * 1e12:.3g} pF; they "
                f"should be alike",
                "look at the units and axes of both curves",
            )
