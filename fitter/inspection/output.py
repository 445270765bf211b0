"""Output curves against each other, RDS(on) and the transfer curve."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fitter.inspection.finding import Comparison, ratio
from fitter.inspection.reading import error_at, is_cold, log_error, read_at, typical, x_where
from fitter.inspection.transfer import largest_current
from fitter.part import Curve, Part, Quantity
from fitter.units import engineering

__all__ = ["conductance", "on_resistance", "order", "output_currents", "transfer"]

#: RDS(on) max over typ is up to 1.3; a typical curve and a typical value differ by less.
_RESISTANCE = 1.5
#: Saturated output current over the transfer curve's at the same VGS.
_SATURATED = 1.6
#: A channel's conductance goes with VGS - VTH, series resistances lower its rise; twice that is too much.
_CONDUCTANCE = 2.0
#: Where two output curves are compared: at this many places, the steep beginning left out.
_PLACES = 5


def _neighbours(part: Part, curve: Curve) -> Iterator[tuple[Curve, Curve]]:
    """The curve with the next ones of the same temperature below and above in VGS, the lower first."""
    at = curve.v_gs
    if at is None:
        return
    same = {c.v_gs: c for c in part.curves_of(Quantity.OUTPUT) if c.v_gs is not None and c.t_j == curve.t_j}
    below, above = [v for v in same if v < at], [v for v in same if v > at]
    if below:
        yield same[max(below)], curve
    if above:
        yield curve, same[min(above)]


def order(part: Part, curve: Curve) -> Iterator[Comparison]:
    """At the same VDS more VGS carries more current."""
    for lower, upper in _neighbours(part, curve):
        start, end = max(lower.x[0], upper.x[0]), min(lower.x[-1], upper.x[-1])
        if end <= start:
            continue
        v = np.linspace(start + 0.3 * (end - start), end, _PLACES)
        low, high = (np.interp(v, c.x, np.maximum(c.y, 1e-300)) for c in (lower, upper))
        excess = np.log(low / high)
        error = np.hypot(*(np.interp(v, c.x, log_error(c)) for c in (lower, upper))) * _averaged(lower)
        worst = int(np.argmax(excess))
        off = float(np.median(excess / np.maximum(3.0 * error, 1e-9)))
        yield Comparison(
            rule="order",
            curve=upper,
            other=lower,
            at=int(np.argmin(np.abs(upper.x - v[worst]))),
            off=max(off, 0.0),
            says=f"at VDS = {v[worst]:.3g} V {upper.name} carries {engineering(high[worst], 'A')} and {lower.name} "
            f"{engineering(low[worst], 'A')}; more VGS carries more",
            remedy="look at the vgs_V and the axes of both",
        )


def _averaged(curve: Curve) -> float:
    """What is left of a reading error in the middle of several places: points err by themselves, axes in common."""
    point, axis = curve.point_error, curve.axis_error
    return float(np.hypot(point / np.sqrt(_PLACES), axis) / max(np.hypot(point, axis), 1e-300))


def _slope(curve: Curve) -> tuple[float, float] | None:
    """Conductance [S] near VDS = 0 from the points below half the largest current, and its error as a share."""
    first = (curve.y <= 0.5 * np.max(curve.y)) & (curve.x > 0.0)
    across, squared = (float(np.sum(z * curve.y[first])) for z in (curve.x[first], curve.y[first]))
    if not across > 0.0 or not squared > 0.0:
        return None
    error = float(np.hypot(curve.point_error, curve.axis_error)) * curve.x_axis.length / float(np.mean(curve.x[first]))
    return squared / across, error


def conductance(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Conductance near VDS = 0 does not rise faster than with VGS - VTH."""
    group = part.stated.threshold
    v_th = None if group is None else typical(group.v_gs_th)
    if v_th is None:
        return
    for lower, upper in _neighbours(part, curve):
        low, high = _slope(lower), _slope(upper)
        if not low or not high or lower.v_gs is None or upper.v_gs is None or lower.v_gs < v_th + 0.2:
            continue
        most = (upper.v_gs - v_th) / (lower.v_gs - v_th)
        factor, error = high[0] / low[0], float(np.hypot(high[1], low[1]))
        yield Comparison(
            rule="conductance",
            curve=upper,
            other=lower,
            off=max(np.log(factor / most), 0.0) / (np.log(_CONDUCTANCE) + 4.0 * error),
            says=f"near VDS = 0 {upper.name} conducts {factor:.3g} times as well as {lower.name}; above a threshold "
            f"of {v_th:g} V that should be {most:.3g} at most",
            remedy="look at the axes of both",
        )


def on_resistance(part: Part, curve: Curve) -> Iterator[Comparison]:
    """VDS over ID at the stated VGS and ID is RDS(on); at less VGS it is not below."""
    group = part.stated.on_resistance
    stated = None if group is None else typical(group.r_ds_on)
    if group is None or not stated or not is_cold(curve) or curve.v_gs is None:
        return
    same = abs(curve.v_gs / group.v_gs - 1.0) < 0.1
    v_ds = x_where(curve, group.i_d) if same else None
    slope = _slope(curve)
    if v_ds is not None and v_ds > 0.0:
        read = v_ds / group.i_d
        error = 4.0 * float(np.hypot(curve.point_error, curve.axis_error)) * curve.x_axis.length / v_ds
    elif slope:
        read, error = 1.0 / slope[0], 4.0 * slope[1]
    else:
        return
    yield Comparison(
        rule="on resistance",
        curve=curve,
        off=ratio(read / stated, 1.0 / _RESISTANCE, _RESISTANCE if same else np.inf, slack=error),
        says=f"the curve has {read / stated:.3g} times the stated RDS(on) of {engineering(stated, 'ohm', 4)}",
        remedy="look at both axes of the curve, its vgs_V, and the unit of rds_on (ohm or milliohm)",
        stated="on_resistance.r_ds_on",
    )


def _saturates(curve: Curve) -> bool:
    """Whether the current no longer rises much over the last third of VDS."""
    early = read_at(curve, float(curve.x[-1]) * 0.67)
    return early is not None and early > 0.9 * float(curve.y[-1])


def _pair(part: Part, output: Curve, transfer_curve: Curve) -> Iterator[Comparison]:
    if output.v_gs is None or output.t_j != transfer_curve.t_j:
        return
    v_ds = float(output.x[-1]) if transfer_curve.v_ds is None else min(float(output.x[-1]), transfer_curve.v_ds)
    carried, full = read_at(output, v_ds), read_at(transfer_curve, output.v_gs)
    if carried is None or full is None:
        return
    factor = carried / max(full, 1e-300)
    low = 1.0 / _SATURATED if _saturates(output) else 0.0
    slack = 4.0 * float(np.hypot(error_at(transfer_curve, output.v_gs), error_at(output, v_ds)))
    yield Comparison(
        rule="transfer and output",
        curve=output,
        other=transfer_curve,
        at=output.x.size - 1,
        off=ratio(factor, low, _SATURATED, slack=slack),
        says=f"{output.name} carries {factor:.3g} times what {transfer_curve.name} carries at that VGS",
        remedy="look at the axes of both and at vgs_V",
    )


def transfer(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Where it saturates, an output curve carries what the transfer curve does at its VGS; elsewhere not more."""
    pairs = (
        [(curve, t) for t in part.curves_of(Quantity.TRANSFER)]
        if curve.quantity is Quantity.OUTPUT
        else [(o, curve) for o in part.curves_of(Quantity.OUTPUT)]
    )
    for output, transfer_curve in pairs:
        yield from _pair(part, output, transfer_curve)


def output_currents(part: Part, curve: Curve) -> Iterator[Comparison]:
    """Currents are not far above those that the table is stated at; VDS stays within the rating."""
    largest, top = largest_current(part), float(np.max(curve.y))
    if largest:
        yield Comparison(
            rule="currents",
            curve=curve,
            at=int(np.argmax(curve.y)),
            off=ratio(top / largest, 0.0, 60.0),
            says=f"the curve runs to {engineering(top, 'A')}, the table is stated at up to {engineering(largest, 'A')}",
            remedy="look at the current axis and column, and at the stated currents",
        )
    factor = float(curve.x[-1]) / part.v_ds_max
    yield Comparison(
        rule="beyond rating",
        curve=curve,
        at=curve.x.size - 1,
        off=ratio(factor, 0.0, 1.0 + 1e-6) if factor > 1.05 else 0.0,
        says=f"VDS runs to {factor:.3g} times the rated {part.v_ds_max:g} V",
        remedy="look at the VDS axis and at vds_max_V",
    )
