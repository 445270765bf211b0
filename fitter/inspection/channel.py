"""Transfer and output curves, the threshold, RDS(on), and their temperature curves."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import pairwise

import numpy as np

from fitter.inspection.finding import Finding
from fitter.inspection.reading import first_curve, typical
from fitter.part import Curve, Part, Quantity

__all__ = ["inspect"]


def inspect(part: Part) -> Iterator[Finding]:
    """Findings on the channel's curves."""
    for curve in part.curves_of(Quantity.TRANSFER):
        yield from _monotone(curve)
    for curve in part.curves_of(Quantity.OUTPUT):
        yield from _monotone(curve)
    yield from _threshold(part)
    yield from _on_resistance(part)
    yield from _temperatures(part)


def _monotone(curve: Curve) -> Iterator[Finding]:
    """Current rises with the voltage, beyond the reading errors."""
    top = max(float(np.max(curve.y)), 1e-300)
    share = curve.y / top
    # Six standard deviations of the difference of two clicks, as a share of the largest current.
    length = curve.y_axis.length / top if curve.y_axis.scale == "linear" else curve.y_axis.length
    error = 6.0 * 1.4 * curve.point_error * length
    fall = np.maximum.accumulate(share) - share
    worst = int(np.argmax(fall))
    # Steep curves and flat ones: clicks along x stand in the wrong order, or the fall is within the line's width.
    slack = error + 0.1
    if fall[worst] > slack:
        backwards = float(np.corrcoef(curve.x, curve.y)[0, 1]) < -0.5
        yield Finding(
            rule="monotone",
            severity="stop" if backwards else "doubtful",
            topic=curve.name,
            file=curve.file,
            line=int(curve.lines[worst]),
            found=f"the current falls by {100.0 * fall[worst]:.0f} % of its largest value",
            remedy="look at the columns' order" if backwards else "look at the point again",
        )


def _square_root_line(curve: Curve) -> tuple[float, float] | None:
    """Threshold [V] and gain K [A/V^2] of the straight line of sqrt(2 ID) over VGS; None where there is none."""
    top = float(np.max(curve.y))
    middle = (curve.y > 0.05 * top) & (curve.y < 0.6 * top)
    if np.count_nonzero(middle) < 2 or np.ptp(curve.x[middle]) <= 0.0:
        return None
    slope, offset = np.polyfit(curve.x[middle], np.sqrt(2.0 * curve.y[middle]), 1)
    return (-float(offset / slope), float(slope) ** 2) if slope > 0.0 else None


def _threshold(part: Part) -> Iterator[Finding]:
    curve, table = first_curve(part, Quantity.TRANSFER), part.stated.threshold
    if curve is None or table is None:
        return
    stated, line = typical(table.v_gs_th), _square_root_line(curve)
    if stated is None or line is None:
        return
    # The stated threshold is read at a small current: it lies below the line's, by up to a volt and a half.
    off = line[0] - stated
    if not -0.35 * max(stated, 1.0) <= off <= max(0.7 * stated, 2.0):
        yield Finding(
            rule="threshold",
            severity="doubtful",
            topic=curve.name,
            file=curve.file,
            line=int(curve.lines[0]),
            found=f"the curve begins near {line[0]:.2f} V, the stated VGS(th) is {stated:g} V",
            remedy="one of the two is from another part, row or axis: look at the VGS axis and at vgs_th",
        )
    v_plateau = None if part.stated.gate_charge is None else typical(part.stated.gate_charge.v_plateau)
    if v_plateau is not None and v_plateau <= stated:
        yield Finding(
            rule="plateau above threshold",
            severity="doubtful",
            topic="v_plateau",
            file="part.toml",
            found=f"the plateau, {v_plateau:g} V, is not above VGS(th) = {stated:g} V",
            remedy="the plateau lies above the threshold by what the load current needs: look at both",
        )


def _on_resistance(part: Part) -> Iterator[Finding]:
    """RDS(on) is not below what an ideal channel of the transfer curve's gain has, nor a thousand times above."""
    curve, table = first_curve(part, Quantity.TRANSFER), part.stated.on_resistance
    if curve is None or table is None:
        return
    stated, line = typical(table.r_ds_on), _square_root_line(curve)
    if stated is None or line is None or table.v_gs <= line[0]:
        return
    drop = stated * table.i_d
    least = 1.0 / (line[1] * (table.v_gs - line[0]))
    for power in (3, -3):
        wrong = drop > 60.0 and drop > 0.5 * part.v_ds_max if power > 0 else stated < 0.05 * least
        if wrong:
            yield Finding(
                rule="on resistance",
                severity="doubtful",
                topic="rds_on",
                file="part.toml",
                found=f"RDS(on) = {stated * 1e3:.4g} mohm: a drop of {drop:.3g} V at {table.i_d:g} A, and the "
                f"transfer curve's channel "
                f"alone has {least * 1e3:.3g} mohm",
                remedy=f"divide it by {10.0**power:g}: ohm against milliohm",
            )


def _temperatures(part: Part) -> Iterator[Finding]:
    for quantity, rises, why in (
        (Quantity.RDS_ON_TEMPERATURE, True, "RDS(on) rises with temperature well above 25 C"),
        (Quantity.VGS_TH_TEMPERATURE, False, "VGS(th) falls with temperature"),
    ):
        for curve in part.curves_of(quantity):
            ends = float(curve.y[-1] - curve.y[0]) / max(float(np.mean(np.abs(curve.y))), 1e-300)
            if (ends < -0.1) if rises else (ends > 0.05):
                yield Finding(
                    rule="temperature",
                    severity="doubtful",
                    topic=curve.name,
                    file=curve.file,
                    line=int(curve.lines[-1]),
                    found=f"{why}; this curve does not",
                    remedy="look at the axes and the columns' order",
                )
    curves = sorted((c for c in part.curves_of(Quantity.TRANSFER) if c.t_j is not None), key=lambda c: c.t_j or 0.0)
    for cold, hot in pairwise(curves):
        # Near the threshold the hot part carries more current: its threshold is lower.
        level = 0.1 * min(float(np.max(cold.y)), float(np.max(hot.y)))
        v_cold, v_hot = (float(np.interp(level, c.y, c.x)) for c in (cold, hot))
        if v_hot > v_cold + 0.02 * cold.x_axis.length:
            yield Finding(
                rule="hot and cold",
                severity="doubtful",
                topic=f"{cold.name}, {hot.name}",
                file=hot.file,
                line=int(hot.lines[0]),
                found=f"at a tenth of the current the curve of {hot.t_j:g} C needs {v_hot:.2f} V, that of "
                f"{cold.t_j:g} C {v_cold:.2f} V; "
                "the threshold falls with temperature",
                remedy="exchange the two curves' tj_C",
            )
