"""How the channel follows the junction temperature."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from fitter.models.channel import Channel
from fitter.models.types import Value
from fitter.parameters import ParameterDefinition

__all__ = ["KELVIN", "REFERENCE", "TEMPERATURE", "TemperatureLaws", "channel_at", "junction_temperature"]

#: 0 degC in kelvin.
KELVIN = 273.15
#: Junction temperature at which parameters are given [degC].
REFERENCE = 25.0

#: Definitions of the temperature laws' parameters by their field in `TemperatureLaws`.
TEMPERATURE = {
    "a": ParameterDefinition(
        name="vth_tc", unit="V/K", meaning="temperature coefficient of the threshold",
        lower=-0.05, upper=0.02, scale="linear", typical=1e-3),
    "b": ParameterDefinition(
        name="k_exponent", unit="", meaning="gain factor falls as (T/T0)^-k_exponent",
        lower=-5.0, upper=8.0, scale="linear"),
    "c": ParameterDefinition(
        name="rd_exponent", unit="", meaning="drain resistance rises as (T/T0)^rd_exponent",
        lower=-5.0, upper=8.0, scale="linear"),
    "d": ParameterDefinition(
        name="w_exponent", unit="", meaning="width of the bend at threshold rises as (T/T0)^w_exponent",
        lower=-2.0, upper=3.0, scale="linear"),
}  # fmt: skip


@dataclass(frozen=True, kw_only=True)
class TemperatureLaws:
    """Parameters of the temperature laws; numbers or arrays that broadcast.

    Parameters
    ----------
    a : array_like
        Slope of the threshold [V/K].
    b : array_like
        Exponent of the gain factor.
    c : array_like
        Exponent of the drain resistance.
    d : array_like
        Exponent of the width of the bend at threshold: 1 where that is the thermal voltage's alone.
    """

    a: Value
    b: Value
    c: Value
    d: Value = 1.0


def junction_temperature(t_j: float | None) -> float:
    """Junction temperature of a curve [degC]: the reference where none is given.

    Examples
    --------
    >>> junction_temperature(None), junction_temperature(0.0)
    (25.0, 0.0)
    """
    return REFERENCE if t_j is None else t_j


def channel_at(t_j: ArrayLike, channel: Channel, laws: TemperatureLaws) -> Channel:
    """The channel at another junction temperature.

    VTH + a (T - T0), K (T/T0)^-b, RS (T/T0)^b, RD (T/T0)^c, w (T/T0)^d, with T in kelvin. RS follows 1/K because
    it carries the mobility reduction, theta/K.

    Parameters
    ----------
    t_j : array_like
        Junction temperature [degC].
    channel : Channel
        At the reference temperature of 25 degC.
    laws : TemperatureLaws
        Their parameters.

    Returns
    -------
    Channel

    Examples
    --------
    >>> c = Channel(v_th=3.0, k=100.0, w=0.1, lam=0.0, r_s=0.0, r_d=1e-3)
    >>> hot = channel_at(125.0, c, TemperatureLaws(a=-6e-3, b=1.5, c=2.0))
    >>> round(float(hot.v_th), 6), round(float(hot.k) / 100.0, 4)  # (398.15/298.15)^-1.5 = 0.6480
    (2.4, 0.648)
    """
    t_j = np.asarray(t_j)
    ratio = (t_j + KELVIN) / (REFERENCE + KELVIN)
    return replace(
        channel,
        v_th=np.asarray(channel.v_th) + np.asarray(laws.a) * (t_j - REFERENCE),
        k=np.asarray(channel.k) * ratio ** -np.asarray(laws.b),
        r_s=np.asarray(channel.r_s) * ratio ** np.asarray(laws.b),
        r_d=np.asarray(channel.r_d) * ratio ** np.asarray(laws.c),
        w=np.asarray(channel.w) * ratio ** np.asarray(laws.d),
    )
