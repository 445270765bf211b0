"""The channel: a square law in one formula for all regions, behind series resistances.

Square law: H. Shichman and D. A. Hodges, IEEE J. Solid-State Circuits 3 (1968) 285. One formula for all regions:
C. C. Enz, F. Krummenacher and E. A. Vittoz, Analog Integr. Circuits Signal Process. 8 (1995) 83. Bulk-charge factor:
the body's depletion charge grows towards the drain, so the channel saturates at (VGS - VTH)/alpha with alpha above 1
(Sze & Ng, Physics of Semiconductor Devices, 3rd ed., ch. 6; Y. Tsividis, Operation and Modeling of the MOS Transistor,
ch. 4; both from memory). Carriers that reach their saturation velocity have much the same effect.
"""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import ArrayLike

from fitter.models.roots import carries_derivatives, increasing_root, lifted_root, without_derivatives
from fitter.models.smooth import inverse_softplus, softplus_and_slope
from fitter.models.types import Numbers, Value
from fitter.parameters import ParameterDefinition

__all__ = [
    "CHANNEL",
    "Channel",
    "channel_current",
    "conductances",
    "drain_voltage",
    "gate_voltage",
    "on_resistance",
    "terminal_current",
    "threshold_voltage",
    "transconductance",
]

#: Definitions of the channel's parameters by their field in `Channel`.
CHANNEL = {
    "v_th": ParameterDefinition(
        name="v_th", unit="V", meaning="threshold voltage of the square law",
        lower=-20.0, upper=30.0, scale="linear"),
    "k": ParameterDefinition(
        name="k", unit="A/V^2", meaning="gain factor: ID = k/2 (VGS - VTH)^2 in saturation",
        lower=1e-4, upper=1e6, scale="log"),
    "w": ParameterDefinition(
        name="w", unit="V", meaning="width of the bend at threshold: 2 n kT/q with the slope factor n",
        lower=0.05, upper=2.0, scale="log"),
    "alpha": ParameterDefinition(
        name="alpha", unit="", meaning="bulk-charge factor: the current saturates at VDS = (VGS - VTH)/alpha",
        lower=0.5, upper=10.0, scale="log"),
    "lam": ParameterDefinition(
        name="lambda", unit="1/V", meaning="channel-length modulation",
        lower=0.0, upper=1.0, scale="linear", typical=1e-2),
    "r_s": ParameterDefinition(
        name="r_s", unit="ohm", meaning="series resistance of the source; carries mobility reduction, too",
        lower=0.0, upper=100.0, scale="linear", typical=1e-3),
    "r_d": ParameterDefinition(
        name="r_d", unit="ohm", meaning="series resistance of the drain",
        lower=0.0, upper=100.0, scale="linear", typical=1e-3),
}  # fmt: skip


@dataclass(frozen=True, kw_only=True)
class Channel:
    """Parameters of the channel; numbers or arrays that broadcast.

    Parameters
    ----------
    v_th : array_like
        Threshold voltage [V].
    k : array_like
        Gain factor [A/V^2].
    w : array_like
        Width of the bend at threshold [V].
    lam : array_like
        Channel-length modulation [1/V].
    r_s, r_d : array_like
        Series resistances of source and drain [ohm].
    alpha : array_like
        Bulk-charge factor: the channel saturates at VDS = (VGS - VTH)/alpha. 1 is the plain square law.
    """

    v_th: Value
    k: Value
    w: Value
    lam: Value
    r_s: Value
    r_d: Value
    alpha: Value = 1.0

    @property
    def carries_derivatives(self) -> bool:
        """Whether any parameter is complex."""
        return carries_derivatives(*(np.asarray(getattr(self, f.name)) for f in fields(self)))

    def real(self) -> Channel:
        """The same channel without derivatives."""
        return Channel(**{f.name: without_derivatives(getattr(self, f.name)) for f in fields(self)})


def channel_current(v_gs: ArrayLike, v_ds: ArrayLike, c: Channel) -> Numbers:
    """Current of the inner channel, K/2 [sp(VGS-VTH; w)^2 - sp(VGS-alpha VDS-VTH; w)^2] (1 + lambda VDS).

    With VDS < 0 source and drain change their places: the current is the negative of that at VGD and -VDS.

    Parameters
    ----------
    v_gs, v_ds : array_like
        Inner voltages, behind the series resistances [V].
    c : Channel
        Its parameters.

    Returns
    -------
    ndarray
        [A]; negative where v_ds is.

    Examples
    --------
    Half a volt below the edge of the triode region, K = 500 uA/V^2 (Berkeley EE105, discussion 5, with the signs
    reversed: VSG 2 V, VSD 3 V, |VT| 0.8 V gives 360 uA):

    >>> c = Channel(v_th=0.8, k=500e-6, w=0.01, lam=0.0, r_s=0.0, r_d=0.0)
    >>> round(float(channel_current(2.0, 3.0, c)) * 1e6, 6)
    360.0
    """
    return conductances(v_gs, v_ds, c)[0]


def conductances(v_gs: ArrayLike, v_ds: ArrayLike, c: Channel) -> tuple[Numbers, Numbers, Numbers]:
    """Current of the inner channel and its derivatives by the two inner voltages.

    Parameters
    ----------
    v_gs, v_ds : array_like
        Inner voltages [V].
    c : Channel
        Its parameters.

    Returns
    -------
    i_d, g_m, g_ds : ndarray
        Current [A], dID/dVGS at constant VDS [S], dID/dVDS at constant VGS [S].
    """
    v_gs, v_ds = np.asarray(v_gs), np.asarray(v_ds)
    forward, more = v_ds.real >= 0.0, np.asarray(c.alpha) - 1.0
    # What alpha takes from the overdrive stands on the drain's side, whichever end that is.
    at_source, at_drain = np.where(forward, 0.0, -more * v_ds), np.where(forward, more * v_ds, 0.0)
    over = v_gs - c.v_th
    source_side, source_slope = softplus_and_slope(over - at_source, c.w)
    drain_side, drain_slope = softplus_and_slope(over - v_ds - at_drain, c.w)
    k, lam = np.asarray(c.k), np.asarray(c.lam)
    modulation = 1.0 + lam * np.where(forward, v_ds, -v_ds)
    # The difference of squares as a product: fewer digits are lost where the two sides are nearly equal.
    square = 0.5 * k * (source_side - drain_side) * (source_side + drain_side)
    g_source, g_drain = k * source_side * source_slope, k * drain_side * drain_slope
    g_ds = g_drain + more * np.where(forward, g_drain, g_source)
    rise = square * np.where(forward, lam, -lam)
    return square * modulation, (g_source - g_drain) * modulation, g_ds * modulation + rise


def terminal_current(v_gs: ArrayLike, v_ds: ArrayLike, c: Channel) -> Numbers:
    """Drain current at the terminals: solves ID = Ich(VGS - ID RS, VDS - ID (RS + RD)).

    Parameters
    ----------
    v_gs, v_ds : array_like
        Terminal voltages [V].
    c : Channel
        Its parameters.

    Returns
    -------
    ndarray
        [A]; solved to about 1e-13 of itself, but for what rounding leaves of it below some millivolts of VDS.
    """
    v_gs, v_ds = np.asarray(v_gs), np.asarray(v_ds)
    if c.carries_derivatives or carries_derivatives(v_gs, v_ds):
        root = terminal_current(without_derivatives(v_gs), without_derivatives(v_ds), c.real())
        return lifted_root(lambda i: _excess_current(i, v_gs, v_ds, c), root)
    # Resistances only lower the current; the slack keeps rounding from pushing the root out of the bracket.
    most = channel_current(v_gs, v_ds, c) * (1.0 + 1e-9)
    return increasing_root(
        lambda i: _excess_current(i, v_gs, v_ds, c),
        np.zeros(()),
        np.minimum(most, 0.0),
        np.maximum(most, 0.0),
    )


def _excess_current(i: Numbers, v_gs: Numbers, v_ds: Numbers, c: Channel) -> tuple[Numbers, Numbers]:
    """Current less what the channel carries behind the resistances, and its slope, which is at least 1."""
    r_s, r = np.asarray(c.r_s), np.asarray(c.r_s) + np.asarray(c.r_d)
    carried, g_m, g_ds = conductances(v_gs - i * r_s, v_ds - i * r, c)
    return i - carried, 1.0 + g_m * r_s + g_ds * r


def gate_voltage(i_d: ArrayLike, v_ds: ArrayLike, c: Channel) -> Numbers:
    """Inner gate voltage at which the inner channel carries a current: the contour of constant current.

    Parameters
    ----------
    i_d : array_like
        Current, positive [A].
    v_ds : array_like
        Inner drain-source voltage, positive [V].
    c : Channel
        Its parameters.

    Returns
    -------
    ndarray
        Inner VGS [V].
    """
    i_d, v_ds = np.asarray(i_d), np.asarray(v_ds)
    if c.carries_derivatives or carries_derivatives(i_d, v_ds):
        root = gate_voltage(without_derivatives(i_d), without_derivatives(v_ds), c.real())
        return lifted_root(lambda v: _excess_over(v, i_d, v_ds, c), root)
    # Lower end: with the drain side off. Upper end: both sides on, with the softplus at its straight line.
    square = 2.0 * i_d / (np.asarray(c.k) * (1.0 + np.asarray(c.lam) * v_ds))
    off = np.sqrt(square)
    across = np.asarray(c.alpha) * v_ds
    on = 0.5 * (square / across + across)
    lower = np.asarray(c.v_th) + inverse_softplus(off, c.w)
    upper = np.asarray(c.v_th) + np.maximum(on, off) + 5.0 * np.asarray(c.w)
    guess = np.where(off < across, lower, np.maximum(lower, np.asarray(c.v_th) + on))
    return increasing_root(lambda v: _excess_over(v, i_d, v_ds, c), guess, lower - 1e-9, upper)


def _excess_over(v_gs: Numbers, i_d: Numbers, v_ds: Numbers, c: Channel) -> tuple[Numbers, Numbers]:
    """Logarithm of the channel's current over the wanted one, and its slope by VGS: nearly straight below threshold."""
    carried, g_m, _ = conductances(v_gs, v_ds, c)
    return np.log(carried / i_d), g_m / carried


def threshold_voltage(i_d: ArrayLike, c: Channel) -> Numbers:
    """VGS(th) as a datasheet defines it: VGS at a small current with the gate joined to the drain.

    Parameters
    ----------
    i_d : array_like
        The test's current, positive [A].
    c : Channel
        Its parameters.

    Returns
    -------
    ndarray
        Terminal VGS [V].
    """
    i_d = np.asarray(i_d)
    if c.carries_derivatives:
        root = threshold_voltage(i_d, c.real())
        return lifted_root(lambda v: _excess_as_diode(v, i_d, c), root)
    # Without the drain's side and the resistances' drop; the true voltage is near.
    guess = np.asarray(c.v_th) + inverse_softplus(np.sqrt(2.0 * i_d / np.asarray(c.k)), c.w)
    # The whole drop over the resistances leaves the channel without a voltage.
    drop = i_d * (np.asarray(c.r_s) + c.r_d)
    guess = np.maximum(guess + i_d * c.r_s, 1.01 * drop + 1e-6)
    return increasing_root(
        lambda v: _excess_as_diode(v, i_d, c), guess, drop + 1e-9, guess + drop + 2.0 + 100.0 * np.asarray(c.w)
    )


def _excess_as_diode(v: Numbers, i_d: Numbers, c: Channel) -> tuple[Numbers, Numbers]:
    carried, g_m, g_ds = conductances(v - i_d * c.r_s, v - i_d * (np.asarray(c.r_s) + c.r_d), c)
    return np.log(np.where(carried.real < 0.0, -carried, carried) / i_d), (g_m + g_ds) / carried


def drain_voltage(i_d: ArrayLike, v_gs: ArrayLike, c: Channel) -> Numbers:
    """Drain-source voltage at a current in the on-state.

    Parameters
    ----------
    i_d : array_like
        Current, positive [A].
    v_gs : array_like
        Terminal VGS [V].
    c : Channel
        Its parameters.

    Returns
    -------
    ndarray
        Terminal VDS [V]; not-a-number where the channel does not carry the current at any VDS below 1 MV.
    """
    i_d = np.asarray(i_d)
    inner_v_gs = np.asarray(v_gs) - i_d * c.r_s
    resistance = np.asarray(c.r_s) + c.r_d
    if c.carries_derivatives:
        root = drain_voltage(i_d, v_gs, c.real()) - without_derivatives(i_d * resistance)
        return lifted_root(lambda v: _excess_at(v, i_d, inner_v_gs, c), root) + i_d * resistance
    over = np.maximum(inner_v_gs - c.v_th, 1e-3)
    guess = i_d / (np.asarray(c.k) * over)
    root = increasing_root(lambda v: _excess_at(v, i_d, inner_v_gs, c), guess, np.zeros_like(guess), np.asarray(1e6))
    return np.where(root < 0.999e6, root + i_d * resistance, np.nan)


def _excess_at(v_ds: Numbers, i_d: Numbers, v_gs: Numbers, c: Channel) -> tuple[Numbers, Numbers]:
    carried, _, g_ds = conductances(v_gs, v_ds, c)
    return carried - i_d, g_ds


def on_resistance(i_d: ArrayLike, v_gs: ArrayLike, c: Channel) -> Numbers:
    """RDS(on) = VDS/ID at a current and a gate voltage.

    Parameters
    ----------
    i_d, v_gs, c
        As for `drain_voltage`.

    Returns
    -------
    ndarray
        [ohm]
    """
    return np.asarray(drain_voltage(i_d, v_gs, c) / np.asarray(i_d))


def transconductance(i_d: ArrayLike, v_ds: ArrayLike, c: Channel) -> Numbers:
    """Forward transconductance dID/dVGS at the terminals, at a current and a drain-source voltage.

    Parameters
    ----------
    i_d : array_like
        Current, positive [A].
    v_ds : array_like
        Terminal VDS [V].
    c : Channel
        Its parameters.

    Returns
    -------
    ndarray
        [S]

    Examples
    --------
    gm = sqrt(2 K ID): 1.3 S at 3.4 A for K = 248.5 mA/V^2 (arithmetic):

    >>> c = Channel(v_th=3.0, k=0.2485, w=0.05, lam=0.0, r_s=0.0, r_d=0.0)
    >>> round(float(transconductance(3.4, 20.0, c)), 3)
    1.3
    """
    i_d, resistance = np.asarray(i_d), np.asarray(c.r_s) + c.r_d
    inner_v_ds = np.asarray(v_ds) - i_d * resistance
    inner_v_gs = gate_voltage(i_d, inner_v_ds, c)
    _, g_m, g_ds = conductances(inner_v_gs, inner_v_ds, c)
    return g_m / (1.0 + g_m * c.r_s + g_ds * resistance)
