"""Start values from the curves themselves."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from itertools import combinations_with_replacement, product

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view
from numpy.typing import NDArray

from fitter.errors import FitError
from fitter.models.capacitance import GATE_DRAIN, MOST_SHIELDS, Junction, Rise, Shield, capacitance
from fitter.models.temperature import REFERENCE, junction_temperature
from fitter.part import Curve, Part, Quantity

__all__ = [
    "body_diode_start",
    "carrying",
    "channel_start",
    "gate_source_start",
    "junction_start",
    "rise_voltage",
    "shield_starts",
    "sized",
    "sorted_curve",
    "two_shield_starts",
]

Array = NDArray[np.float64]

_PHI = (0.1, 0.3, 0.7, 1.5, 4.0, 10.0, 30.0)
_FLOOR = (0.0, 0.3, 0.6, 0.85, 0.95)
#: Shares of ln VDS on the way down, at which a shield may take over.
_SHIELD_AT = (0.3, 0.5, 0.7)
_TWO_SHIELDS_AT = (0.1, 0.25, 0.4, 0.55, 0.7, 0.85, 0.95)
#: Widths of two shields.
_WIDTHS = (0.1, 0.5)
#: Share of a transfer curve's highest current that a channel must have at its threshold, or above.
_SETS_IN = 0.1
#: A curve rises where the median of so many last points lies above the lowest such median by this factor.
_TOGETHER, _RISEN = 3, 1.1
#: Steps to the sizes of a start.
_SIZE_STEPS = 60


def junction_start(v: Array, c: Array) -> dict[str, float]:
    """Plain junction through points: the best of a grid of potentials and floors, each a straight line in logarithms.

    Parameters
    ----------
    v : ndarray, shape (n,)
        Voltage, at least 0 [V].
    c : ndarray, shape (n,)
        Capacitance, positive [F].

    Returns
    -------
    dict
        c_0 [F], phi [V], m, c_f [F]; m within 0.25 to 0.85.
    """
    best, result = np.inf, {"c_0": float(np.max(c)), "phi": 1.0, "m": 0.5, "c_f": 0.0}
    for phi, share in product(_PHI, _FLOOR):
        c_f = share * float(np.min(c))
        x, y = np.log1p(v / phi), np.log(c - c_f)
        slope, offset = np.polyfit(x, y, 1) if np.ptp(x) > 0.0 else (-0.5, float(y.mean()))
        m = min(max(-slope, 0.25), 0.85)
        offset = float(np.mean(y + m * x))
        misfit = float(np.sum((np.log(np.exp(offset - m * x) + c_f) - np.log(c)) ** 2))
        if misfit < best:
            best, result = misfit, {"c_0": float(np.exp(offset)), "phi": phi, "m": m, "c_f": c_f}
    return result


def shield_starts(v: Array, c: Array) -> list[dict[str, float]]:
    """Several starts for one shield: a plain junction up to some voltage, a shield that takes over there.

    Parameters
    ----------
    v, c : ndarray, shape (n,)
        As for `junction_start`, in rising order of v.

    Returns
    -------
    list of dict
        As from `junction_start`, with s_1, v_1 [V], w_1.
    """
    starts = []
    for v_s in _fallen(v, c, _SHIELD_AT):
        below = v <= v_s
        base = junction_start(v[below], c[below]) if np.count_nonzero(below) >= 4 else junction_start(v, c)
        c_f = 0.5 * float(np.min(c))
        starts += [{**base, "c_f": c_f, "s_1": 0.9, "v_1": v_s, "w_1": width} for width in (0.1, 0.4)]
    return starts


def two_shield_starts(one: Mapping[str, float], v: Array, c: Array) -> list[dict[str, float]]:
    """Starts for two shields: one more beside the shield found, and pairs of voltages all along the curve.

    Parameters
    ----------
    one : mapping of str to float
        A junction fitted with one shield, as from `shield_starts`.
    v, c : ndarray, shape (n,)
        As for `junction_start`, in rising order of v.

    Returns
    -------
    list of dict
        As from `shield_starts`, with s_2, v_2 [V], w_2 added.
    """
    places = _fallen(v, c, _TWO_SHIELDS_AT)
    starts = [{**one, "s_2": 0.5, "v_2": v_2, "w_2": w_2} for v_2 in places for w_2 in _WIDTHS]
    # A single shield that stands for two bends the junction itself, too: to its bounds, at times.
    bases = (dict(one), {**one, "phi": 0.7, "m": 0.35}, {**one, "phi": 0.7, "m": 0.5}, {**one, "phi": 0.7, "m": 0.65})
    for (v_2, v_1), w_1, w_2 in product(combinations_with_replacement(places, 2), _WIDTHS, _WIDTHS):
        if v_1 > v_2 or w_1 < w_2:
            starts += [{**base, "s_2": 0.5, "v_1": v_1, "w_1": w_1, "v_2": v_2, "w_2": w_2} for base in bases]
    return starts


def rise_voltage(v: Array, c: Array) -> float | None:
    """Where half of what comes with high voltage is there, if the points show that something does.

    Parameters
    ----------
    v, c : ndarray, shape (n,)
        As for `junction_start`, in rising order of v.

    Returns
    -------
    float or None
        The highest voltage [V]; None where the curve does not rise at its end.
    """
    if c.size < _TOGETHER:
        return None
    # Medians, so that one mis-clicked point is no rise.
    smooth = np.median(sliding_window_view(c, _TOGETHER), axis=-1)
    return float(v[-1]) if smooth[-1] > _RISEN * np.min(smooth) else None


def _fallen(v: Array, c: Array, shares: tuple[float, ...]) -> list[float]:
    """Voltages, in rising order, at which ln C has fallen by some shares of its whole fall."""
    fall = np.log(c[0] / np.minimum.accumulate(c))
    at = {int(np.argmax(fall >= share * fall[-1])) for share in shares}
    return [max(float(v[i]), 0.1) for i in sorted(at)]


def sized(starts: Sequence[Mapping[str, float]], v: Array, c: Array) -> list[dict[str, float]]:
    """Starts with the sizes that suit the points best, best first.

    C0, Cf, the shields' shares and a rise make the capacitance linearly, so that they follow from the other parameters:
    by non-negative least squares of the relative deviations, in the multiplicative steps of D. D. Lee and H. S. Seung,
    Adv. Neural Inf. Process. Syst. 13 (2001) 556. Voltages outside the points are moved to their ends.

    Parameters
    ----------
    starts : sequence of mapping of str to float
        Any number of them, all with as many shields, and with v_r or without.
    v, c : ndarray, shape (n,)
        As for `junction_start`, in rising order of v.

    Returns
    -------
    list of dict
    """
    fields = {field: np.array([start[field] for start in starts]) for field in starts[0]}
    for field, d in GATE_DRAIN.items():
        if field in fields:
            fields[field] = np.clip(fields[field], d.lower, d.upper)
    numbers = [n for n in range(1, MOST_SHIELDS + 1) if f"v_{n}" in fields]
    for n in numbers:
        fields[f"v_{n}"] = np.clip(fields[f"v_{n}"], max(float(v[0]), 0.1), max(float(v[-1]), 0.1))
    column = {field: x[:, None] for field, x in fields.items()}
    unit = Junction(c_0=1.0, phi=column["phi"], m=column["m"], c_f=0.0)
    shares = [capacitance(v, unit)]
    for n in numbers:
        shield = Shield(s=1.0, v=column[f"v_{n}"], w=column[f"w_{n}"])
        shares.append(capacitance(v, replace(unit, shields=(shield,))))
    rises = [Rise(c=1.0, v=column["v_r"]).capacitance(v)] if "v_r" in fields else []
    # Relative deviations, each share with a mean of one.
    parts = np.stack([*shares, np.ones_like(shares[0]), *rises], axis=1) / c
    scale = parts.mean(axis=2, keepdims=True)
    parts /= scale
    products, aim = parts @ np.swapaxes(parts, 1, 2), parts.sum(axis=2, keepdims=True)
    sizes = np.full(aim.shape, 1.0 / aim.shape[1])
    for _ in range(_SIZE_STEPS):
        sizes *= aim / (products @ sizes)
    misfit = np.sum((np.sum(parts * sizes, axis=1) - 1.0) ** 2, axis=1)
    sizes = (sizes / scale)[..., 0]
    fields["c_f"] = sizes[:, len(shares)]
    fields["c_0"] = left = np.sum(sizes[:, : len(shares)], axis=1)
    if rises:
        fields["c_r"] = sizes[:, -1]
    for n in numbers:
        fields[f"s_{n}"] = sizes[:, n] / left
        left = left - sizes[:, n]
    return [{field: float(x[i]) for field, x in fields.items()} for i in np.argsort(misfit, kind="stable")]


def gate_source_start(v: Array, c: Array, c_gd: Junction) -> dict[str, float]:
    """What Ciss lies above Cgd.

    Parameters
    ----------
    v, c : ndarray, shape (n,)
        Points of Ciss, as for `junction_start`.
    c_gd : Junction
        The gate-drain capacitance.

    Returns
    -------
    dict
        c_gs [F].
    """
    return {"c_gs": float(np.median(c - np.minimum(capacitance(v, c_gd), 0.9 * c)))}


def channel_start(part: Part) -> dict[str, float]:
    """Square law through the transfer curve: a straight line of sqrt(2 ID) over VGS.

    Parameters
    ----------
    part : Part
        With a transfer curve at 25 degC.

    Returns
    -------
    dict
        v_th [V], k [A/V^2], w [V], lam [1/V], r_s and r_d [ohm].

    Raises
    ------
    FitError
        Where there is no such curve, or ID does not rise with VGS on it.
    """
    name, v, i = _transfer_points(part)
    top = float(np.max(i))
    middle = (i > 0.02 * top) & (i < 0.7 * top)
    if np.count_nonzero(middle) < 2:
        middle = i > 0.0
    if np.count_nonzero(middle) < 2 or np.ptp(v[middle]) <= 0.0:
        raise FitError(f"{name}: fewer than two points with current; digitize more of the curve")
    slope, offset = np.polyfit(v[middle], np.sqrt(2.0 * i[middle]), 1)
    if slope <= 0.0:
        raise FitError(f"{name}: ID does not rise with VGS; are the columns exchanged?")
    k = 1.3 * float(slope) ** 2
    over = float(np.max(v)) + float(offset / slope)
    given = _stated_on_resistance(part)
    # Mobility reduction bends the curve down by a tenth or so at its top.
    r_s = 0.1 / (k * max(over, 0.1))
    if given is not None:
        r_s = min(r_s, 0.3 * given)
    return {
        "v_th": -float(offset / slope), "k": k, "w": 0.1, "lam": 0.0,
        "r_s": r_s, "r_d": 0.0 if given is None else 0.3 * given,
    }  # fmt: skip


def carrying(start: Mapping[str, float], part: Part) -> dict[str, float]:
    """A start for the channel that carries the currents of the transfer curve, whatever its threshold and resistances.

    Parameters
    ----------
    start : mapping of str to float
        As from `channel_start`.
    part : Part
        With a transfer curve at 25 degC.

    Returns
    -------
    dict
        The same with v_th where the current sets in, k by the highest current, and resistances that leave room for it.
    """
    _, v, i = _transfer_points(part)
    top = int(np.argmax(i))
    sets_in = float(np.min(v[i >= _SETS_IN * i[top]]))
    room = max(float(v[top]) - sets_in, 0.1)
    v_th = min(max(start["v_th"], sets_in - room), sets_in)
    over = max(float(v[top]) - v_th, 0.1)
    r_s = min(start["r_s"], 0.3 * over / float(i[top]))
    k = 2.0 * float(i[top]) / (over - r_s * float(i[top])) ** 2
    on = _stated_on_resistance(part)
    if on is None:
        return {**start, "v_th": v_th, "k": k, "r_s": r_s}
    return {**start, "v_th": v_th, "k": k, "r_s": min(r_s, 0.3 * on), "r_d": min(start["r_d"], 0.6 * on)}


def _transfer_points(part: Part) -> tuple[str, Array, Array]:
    """Name of the transfer curve at 25 degC, and all points of such curves."""
    curves = [c for c in part.curves_of(Quantity.TRANSFER) if junction_temperature(c.t_j) == REFERENCE]
    if not curves:
        raise FitError("no transfer curve at 25 C: give one with tj_C = 25")
    return curves[0].name, np.concatenate([c.x for c in curves]), np.concatenate([c.y for c in curves])


def _stated_on_resistance(part: Part) -> float | None:
    on = part.stated.on_resistance
    return None if on is None or on.r_ds_on is None else on.r_ds_on.typ or on.r_ds_on.max


def body_diode_start(part: Part) -> dict[str, float]:
    """Exponential through the body diode's coolest curve: a straight line of ln I over VSD in its lower half.

    Parameters
    ----------
    part : Part
        With a body-diode curve or a stated VSD.

    Returns
    -------
    dict
        i_s [A], n, r [ohm], e_g [V], r_exponent.
    """
    thermal = 0.0257
    curves = sorted(part.curves_of(Quantity.BODY_DIODE), key=lambda c: abs(junction_temperature(c.t_j) - REFERENCE))
    n, v, i, r = 1.1, 0.8, 1.0, 0.0
    if curves:
        x, y = curves[0].x, np.maximum(curves[0].y, 1e-12)
        low = y <= np.sqrt(y.min() * y.max())
        if np.count_nonzero(low) < 3:
            low = np.argsort(y) < 3
        slope = float(np.polyfit(x[low], np.log(y[low]), 1)[0]) if np.ptp(x[low]) > 0.0 else 20.0
        n = min(max(1.0 / (max(slope, 0.1) * thermal), 0.8), 5.0)
        v, i = float(x[low].mean()), float(np.exp(np.log(y[low]).mean()))
        top = int(np.argmax(y))
        r = max(0.3 * (float(x[top]) - v - n * thermal * float(np.log(y[top] / i))) / float(y[top]), 1e-5)
    elif (table := part.stated.body_diode) is not None and table.v_sd is not None and table.i_s is not None:
        v, i = table.v_sd.typ or table.v_sd.max or 0.8, table.i_s
    return {"i_s": float(i * np.exp(-min(v / (n * thermal), 130.0))), "n": n, "r": r, "e_g": 1.12, "r_exponent": 0.5}


def small_current_drop(part: Part) -> float:
    """VSD [V] at the lowest current of the body diode's curves, or the stated one; 0 where neither is given."""
    curves = part.curves_of(Quantity.BODY_DIODE)
    if curves:
        return min(float(c.x[int(np.argmin(c.y))]) for c in curves)
    table = part.stated.body_diode
    return (table.v_sd.typ or 0.0) if table is not None and table.v_sd is not None else 0.0


def sorted_curve(curves: tuple[Curve, ...]) -> tuple[Array, Array] | None:
    """All points of some curves in rising order of x, none of them below 0; None where there are no curves."""
    if not curves:
        return None
    # Points clicked at 0 may come to lie below it by the reading error.
    x = np.concatenate([np.maximum(c.x, 0.0) for c in curves])
    y = np.concatenate([c.y for c in curves])
    order = np.argsort(x, kind="stable")
    return x[order], y[order]
