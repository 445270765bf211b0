"""The gate-charge curve at an operating point, and how it is read.

The test drives a constant small gate current, so no current flows in the capacitances of the load circuit and nothing
needs to be stepped in time: charge is a function of the two inner voltages alone.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from fitter.errors import OperatingPointError
from fitter.models.channel import Channel, channel_current, conductances, gate_voltage
from fitter.models.roots import carries_derivatives, increasing_root, lifted_root, without_derivatives
from fitter.models.transistor import Transistor
from fitter.models.types import Numbers
from fitter.part import Load

__all__ = [
    "GateChargeCurve",
    "GateChargeReading",
    "OperatingPoint",
    "gate_charge_curve",
    "read_gate_charge",
]

#: Points on the way up to the plateau, and from there to the end.
_RISING, _FALLING = 80, 220
#: Share of the load's full current at which the walk along a resistive load line takes over.
_LOAD_LINE_START = 0.01


@dataclass(frozen=True, kw_only=True)
class OperatingPoint:
    """Conditions of a gate-charge test.

    Parameters
    ----------
    v_dd : float
        Supply of the load circuit [V].
    i_d : float
        The load's current; for a resistive load the current at VDS = 0 [A].
    v_gs : float
        Gate-source voltage at the end [V].
    load : {"current", "resistive"}
        Constant current with a free-wheel diode, or a resistor of VDD/ID.
    """

    v_dd: float
    i_d: float
    v_gs: float
    load: Load = "current"


@dataclass(frozen=True, kw_only=True)
class GateChargeReading:
    """What JESD24-2 reads off a gate-charge curve.

    Parameters
    ----------
    total : float or array
        Charge at the end [C].
    q_gs, q_gd : float or array
        Charge up to the plateau, and on it [C].
    v_plateau : float or array
        Plateau voltage [V].
    """

    total: Numbers
    q_gs: Numbers
    q_gd: Numbers
    v_plateau: Numbers


@dataclass(frozen=True, kw_only=True)
class GateChargeCurve:
    """A gate-charge curve, from VGS = 0 to its end.

    Parameters
    ----------
    q_g : ndarray, shape (..., n)
        Gate charge [C], rising.
    v_gs, v_ds : ndarray, shape (..., n)
        Terminal voltages [V].
    i_d : ndarray, shape (..., n)
        Current of the channel [A].
    reading : GateChargeReading
        Total, QGS, QGD and plateau of this curve.
    """

    q_g: Numbers
    v_gs: Numbers
    v_ds: Numbers
    i_d: Numbers
    reading: GateChargeReading

    @property
    def total(self) -> float:
        """Charge at the end [C]."""
        return float(self.reading.total)

    @property
    def q_gs(self) -> float:
        """Charge up to the plateau [C]."""
        return float(self.reading.q_gs)

    @property
    def q_gd(self) -> float:
        """Charge on the plateau [C]."""
        return float(self.reading.q_gd)

    @property
    def v_plateau(self) -> float:
        """Plateau voltage [V]."""
        return float(self.reading.v_plateau)


def gate_charge_curve(transistor: Transistor, point: OperatingPoint) -> GateChargeCurve:
    """Gate-charge curve of a transistor at an operating point.

    QG = Qgs(VGS') + Qgd(VDD) - Qgd(VDS' - VGS'), zero at VGS = 0 and VDS = VDD. While VGS rises to the plateau the
    points are spread over VGS'; from there VGS' hardly changes, so the way down is walked by VDS', solving for VGS'.

    Parameters
    ----------
    transistor : Transistor
        At the junction temperature wanted; parameters of shape (k, 1) give k curves at once.
    point : OperatingPoint
        The test's conditions, in n-channel polarity.

    Returns
    -------
    GateChargeCurve
        Of 300 points; with complex parameters its imaginary parts are derivatives.

    Raises
    ------
    OperatingPointError
        Where the channel cannot carry the load's current at the final VGS, carries it at VGS = 0 already, or the
        point makes no sense. A resistive load may end with less than its full current; QGD is no number then.
    """
    channel = transistor.channel
    load = _LoadLine(point, channel)
    inner_v_gs_1 = gate_voltage(load.current(load.start), load.start, channel)
    end = _end_of_walk(point, channel, load, inner_v_gs_1)

    rising_v_gs = np.linspace(0.0, 1.0, _RISING, endpoint=False) * inner_v_gs_1
    rising_v_ds = _voltage_left(rising_v_gs, point, channel, load)
    share = np.linspace(0.0, 1.0, _FALLING)
    falling_v_ds = load.start * np.exp(share * np.log(end / load.start))
    falling_i_d = load.current(falling_v_ds)
    falling_v_gs = gate_voltage(falling_i_d, falling_v_ds, channel)

    inner_v_gs = _joined(rising_v_gs, falling_v_gs)
    inner_v_ds = _joined(rising_v_ds, falling_v_ds)
    i_d = _joined(channel_current(rising_v_gs, rising_v_ds, channel), falling_i_d)
    q_gd_start = transistor.q_gd(inner_v_ds[..., :1] - inner_v_gs[..., :1])
    q_g = transistor.q_gs(inner_v_gs) + q_gd_start - transistor.q_gd(inner_v_ds - inner_v_gs)
    v_gs = inner_v_gs + i_d * channel.r_s
    v_ds = inner_v_ds + i_d * (np.asarray(channel.r_s) + channel.r_d)
    v_th = np.asarray(channel.v_th)
    reading = read_gate_charge(q_g, v_gs, v_th[..., 0] if v_th.ndim else v_th)
    return GateChargeCurve(q_g=q_g, v_gs=v_gs, v_ds=v_ds, i_d=i_d, reading=reading)


class _LoadLine:
    """The load's current as a function of the inner VDS, on the way down."""

    def __init__(self, point: OperatingPoint, channel: Channel) -> None:
        if not (point.v_dd > 0.0 and point.i_d > 0.0 and point.v_gs > 0.0):
            raise OperatingPointError("VDD, ID and VGS of a gate-charge test must all be above zero")
        self.point = point
        self.series: Numbers = np.asarray(channel.r_s) + np.asarray(channel.r_d)
        self.load_resistance = point.v_dd / point.i_d if point.load == "resistive" else 0.0
        self.resistance = self.series + self.load_resistance
        share = _LOAD_LINE_START if point.load == "resistive" else 1.0
        #: Inner VDS at which the walk by VDS' begins.
        self.start = point.v_dd - share * point.i_d * self.resistance
        if np.any(self.start.real <= 0.0):
            raise OperatingPointError(
                f"VDD = {point.v_dd:g} V is less than ID = {point.i_d:g} A drops over the transistor's own resistances"
            )

    def current(self, inner_v_ds: Numbers) -> Numbers:
        if self.point.load == "resistive":
            return np.asarray((self.point.v_dd - inner_v_ds) / self.resistance)
        return self.point.i_d + 0.0 * inner_v_ds

    @property
    def slope(self) -> Numbers:
        """dI/dVDS' [S]."""
        return -1.0 / self.resistance if self.point.load == "resistive" else np.zeros(())


def _end_of_walk(point: OperatingPoint, channel: Channel, load: _LoadLine, inner_v_gs_1: Numbers) -> Numbers:
    """Inner VDS at which the terminal VGS has reached its final value."""

    def missing(inner_v_ds: Numbers, c: Channel, line: _LoadLine) -> tuple[Numbers, Numbers]:
        current = line.current(inner_v_ds)
        carried, g_m, g_ds = conductances(point.v_gs - current * c.r_s, inner_v_ds, c)
        return carried - current, g_ds - line.slope * (1.0 + g_m * c.r_s)

    plateau = inner_v_gs_1 + load.current(load.start) * channel.r_s
    if np.any(inner_v_gs_1.real <= 0.0):
        raise OperatingPointError("the channel conducts at VGS = 0 already: there is no gate-charge curve from there")
    if np.any(plateau.real >= point.v_gs):
        share = f"{100.0 * _LOAD_LINE_START:g} % of " if point.load == "resistive" else ""
        raise OperatingPointError(
            f"the channel does not carry {share}the load's {point.i_d:g} A at VGS = {point.v_gs:g} V: "
            f"that takes {float(np.max(plateau.real)):.3g} V"
        )
    real = channel.real()
    line = _LoadLine(point, real)
    # Below the start the channel would carry more than the load gives; at 0 V it carries nothing.
    root = increasing_root(
        lambda v: missing(v, real, line), np.minimum(0.1, 0.5 * line.start), np.zeros(()), line.start
    )
    if carries_derivatives(plateau):
        return lifted_root(lambda v: missing(v, channel, load), root)
    return root


def _voltage_left(inner_v_gs: Numbers, point: OperatingPoint, channel: Channel, load: _LoadLine) -> Numbers:
    """Inner VDS on the way up: VDD less the drop over the resistances in series with the channel."""

    def excess(inner_v_ds: Numbers, v_gs: Numbers, c: Channel, resistance: Numbers) -> tuple[Numbers, Numbers]:
        carried, _, g_ds = conductances(v_gs, inner_v_ds, c)
        return inner_v_ds + resistance * carried - point.v_dd, 1.0 + resistance * g_ds

    real, resistance = channel.real(), without_derivatives(load.resistance)
    root = increasing_root(
        lambda v: excess(v, without_derivatives(inner_v_gs), real, resistance),
        np.asarray(point.v_dd), np.zeros(()), np.asarray(point.v_dd),
    )  # fmt: skip
    if carries_derivatives(inner_v_gs, load.resistance):
        return lifted_root(lambda v: excess(v, inner_v_gs, channel, load.resistance), root)
    return root


def _joined(first: Numbers, second: Numbers) -> Numbers:
    """Two legs of a walk, one after the other, with their leading shapes broadcast."""
    lead = np.broadcast_shapes(first.shape[:-1], second.shape[:-1])
    return np.concatenate([np.broadcast_to(leg, (*lead, leg.shape[-1])) for leg in (first, second)], axis=-1)


def read_gate_charge(q_g: ArrayLike, v_gs: ArrayLike, v_th: ArrayLike, window: float = 0.0) -> GateChargeReading:
    """Read QGS, QGD and the plateau off a gate-charge curve, fitted or digitized, by the rule of JESD24-2.

    The plateau voltage is VGS where dVGS/dQ has its minimum. Line 1 is the regression of VGS on Q below
    VGS(th) and the plateau, line 2 that over the on-state: the upper half of the way from the plateau to the end.
    QGS is the charge where line 1 reaches the plateau voltage, QGD the charge where line 2 does, less QGS.
    (The rule as quoted in public documents; the standard itself was not at hand.)

    Parameters
    ----------
    q_g : array_like, shape (..., n)
        Gate charge, rising [C].
    v_gs : array_like, shape (..., n)
        Gate-source voltage, not falling but for reading errors [V].
    v_th : array_like, shape (...)
        Threshold voltage, the upper end of line 1 [V].
    window : float
        Slopes are regressions over this share of the whole charge; 0 takes them from point to point, which suits a
        computed curve and no digitized one.

    Returns
    -------
    GateChargeReading
        Not-a-number where a line cannot be drawn.

    Examples
    --------
    Three straight lines: 1/(2 nF) up to 4 V, flat for 12 nC, then 1/(4 nF) up to 10 V (arithmetic: 8, 12, 44 nC):

    >>> q = np.concatenate([np.linspace(0, 8, 50), np.linspace(8.1, 20, 50), np.linspace(20.1, 44, 50)])
    >>> v = np.interp(q, [0, 8, 20, 44], [0, 4, 4, 10])
    >>> r = read_gate_charge(q, v, 3.0)
    >>> [round(float(x), 6) for x in (r.q_gs, r.q_gd, r.total, r.v_plateau)]
    [8.0, 12.0, 44.0, 4.0]
    """
    q_g, v_gs = np.broadcast_arrays(np.asarray(q_g), np.asarray(v_gs))
    v_th = np.asarray(v_th)
    total = q_g[..., -1]
    v_plateau = _flattest(q_g, v_gs, window)
    # Each point counts by the charge it stands for, so that the lines do not depend on how points are spread.
    share = np.gradient(q_g, axis=-1) if q_g.shape[-1] > 1 else np.ones(q_g.shape)
    half_way = 0.5 * (v_plateau + v_gs[..., -1])
    # Where the load takes so little current that the plateau lies below VTH, the line ends below the plateau.
    first = share * (v_gs.real <= np.minimum(v_th.real, 0.95 * v_plateau.real)[..., None])
    last = share * (v_gs.real >= half_way.real[..., None])
    with np.errstate(divide="ignore", invalid="ignore"):
        q_gs = _charge_at(q_g, v_gs, first, v_plateau)
        q_gd = _charge_at(q_g, v_gs, last, v_plateau) - q_gs
    return GateChargeReading(total=total, q_gs=q_gs, q_gd=q_gd, v_plateau=v_plateau)


def _charge_at(q_g: Numbers, v_gs: Numbers, weights: Numbers, voltage: Numbers) -> Numbers:
    """Charge at which the weighted regression line of VGS on Q reaches a voltage."""
    weights = weights / np.sum(weights, axis=-1, keepdims=True)
    q_mean, v_mean = np.sum(weights * q_g, axis=-1), np.sum(weights * v_gs, axis=-1)
    off = q_g - q_mean[..., None]
    slope = np.sum(weights * off * v_gs, axis=-1) / np.sum(weights * off * off, axis=-1)
    return np.asarray(q_mean + (voltage - v_mean) / slope)


def _flattest(q_g: Numbers, v_gs: Numbers, window: float) -> Numbers:
    """VGS where its slope over charge has its minimum."""
    if window > 0.0:
        return _flattest_smoothed(q_g.real, v_gs.real, window)
    with np.errstate(divide="ignore", invalid="ignore"):
        slope = np.diff(v_gs.real, axis=-1) / np.diff(q_g.real, axis=-1)
    at = np.argmin(np.where(np.isfinite(slope), slope, np.inf), axis=-1)[..., None]
    middle = 0.5 * (v_gs[..., :-1] + v_gs[..., 1:])
    return np.take_along_axis(middle, at, axis=-1)[..., 0]


def _flattest_smoothed(q_g: Numbers, v_gs: Numbers, window: float) -> Numbers:
    """The same for one digitized curve: the flattest of the regressions over a sliding stretch of charge."""
    reach = 0.5 * window * (q_g[-1] - q_g[0])
    best, slope_there = np.asarray(np.nan), np.inf
    for centre in np.linspace(q_g[0] + reach, q_g[-1] - reach, 200):
        near = np.abs(q_g - centre) <= reach
        if np.count_nonzero(near) < 3 or np.ptp(q_g[near]) < reach:
            continue
        off = q_g[near] - q_g[near].mean()
        slope = float(np.sum(off * v_gs[near]) / np.sum(off * off))
        if slope < slope_there:
            best, slope_there = v_gs[near].mean(), slope
    return best
