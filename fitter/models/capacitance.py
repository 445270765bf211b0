"""Capacitances that fall with voltage: one junction, or one whose cells are partly shielded.

Depletion capacitance: S. M. Sze and K. K. Ng, Physics of Semiconductor Devices, 3rd ed., ch. 2.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from fitter.models.smooth import exp, log1p, softplus, softplus_and_slope
from fitter.models.types import Numbers, Value
from fitter.parameters import ParameterDefinition

__all__ = [
    "DRAIN_SOURCE",
    "GATE_DRAIN",
    "MOST_SHIELDS",
    "Junction",
    "Rise",
    "Shield",
    "capacitance",
    "charge",
    "depletion_capacitance",
    "depletion_charge",
    "junction_from",
    "junction_names",
    "stored_energy",
]

#: How many shields a junction can have at the most.
MOST_SHIELDS = 2

_PLAIN = ("c_0", "phi", "m", "c_f")
_RISE = ("c_r", "v_r")
#: Width of a rise over its voltage: so wide that it is nearly a straight line up to there.
_RISE_WIDTH = 0.5


def _definitions(suffix: str, name: str) -> dict[str, ParameterDefinition]:
    """Definitions of one junction's parameters by their field; fields of the n-th shield end in its number."""
    result = {
        "c_0": ParameterDefinition(
            name=f"c0_{suffix}", unit="F", meaning=f"{name}: depletion capacitance at 0 V",
            lower=1e-15, upper=1e-5, scale="log"),
        "phi": ParameterDefinition(
            name=f"phi_{suffix}", unit="V", meaning=f"{name}: built-in potential",
            lower=0.05, upper=100.0, scale="log"),
        "m": ParameterDefinition(
            name=f"m_{suffix}", unit="", meaning=f"{name}: grading exponent",
            lower=0.2, upper=0.9, scale="linear"),
        "c_f": ParameterDefinition(
            name=f"cf_{suffix}", unit="F", meaning=f"{name}: capacitance that does not fall with voltage",
            lower=0.0, upper=1e-6, scale="linear", typical=1e-11),
    }  # fmt: skip
    for number, of in ((1, "cells"), (2, "cells that the first left")):
        result |= {
            f"s_{number}": ParameterDefinition(
                name=f"s{number}_{suffix}", unit="", meaning=f"{name}: share of the {of} that shield {number} stops",
                lower=0.0, upper=1.0, scale="linear"),
            f"v_{number}": ParameterDefinition(
                name=f"vs{number}_{suffix}", unit="V", meaning=f"{name}: voltage at which shield {number} takes over",
                lower=0.1, upper=5000.0, scale="log"),
            f"w_{number}": ParameterDefinition(
                name=f"ws{number}_{suffix}", unit="", meaning=f"{name}: width of that bend over its voltage",
                lower=0.03, upper=30.0, scale="log"),
        }  # fmt: skip
    return result


GATE_DRAIN = _definitions("gd", "gate-drain") | {
    "c_r": ParameterDefinition(
        name="cr_gd", unit="F", meaning="gate-drain: capacitance that comes with high voltage",
        lower=0.0, upper=1e-6, scale="linear", typical=1e-12),
    "v_r": ParameterDefinition(
        name="vr_gd", unit="V", meaning="gate-drain: voltage at which half of it is there",
        lower=1.0, upper=5000.0, scale="log"),
}  # fmt: skip
DRAIN_SOURCE = _definitions("ds", "drain-source")


@dataclass(frozen=True, kw_only=True)
class Shield:
    """A part of the cells that stops depleting where its neighbours take over the voltage.

    Parameters
    ----------
    s : array_like
        Share of the cells that earlier shields left, 0 to 1.
    v : array_like
        Where that share stops depleting [V].
    w : array_like
        How wide the bend is, as a multiple of `v`: relative, so that its bounds suit parts of every voltage.
    """

    s: Value
    v: Value
    w: Value

    @property
    def width(self) -> Numbers:
        """Width of the bend [V]."""
        return np.asarray(np.asarray(self.v) * np.asarray(self.w))


@dataclass(frozen=True, kw_only=True)
class Rise:
    """A capacitance that comes with high voltage.

    Crss of superjunction parts has a minimum at some hundred volts and rises slowly beyond it (common practice, no
    source). The form is our own: a softplus as its charge, like that of the channel's capacitance.

    Parameters
    ----------
    c : array_like
        How much comes in all [F].
    v : array_like
        Where half of it is there [V].
    """

    c: Value
    v: Value

    @property
    def width(self) -> Numbers:
        """Width of the bend [V]."""
        return np.asarray(np.asarray(self.v) * _RISE_WIDTH)

    def capacitance(self, v: Numbers) -> Numbers:
        """What of it is there at V [V]."""
        return np.asarray(self.c * softplus_and_slope(v - self.v, self.width)[1])

    def charge(self, v: Numbers) -> Numbers:
        """Its charge [C], zero at 0 V."""
        v_r = np.asarray(self.v)
        return np.asarray(self.c * (softplus(v - v_r, self.width) - softplus(-v_r, self.width)))


@dataclass(frozen=True, kw_only=True)
class Junction:
    """Parameters of one voltage-dependent capacitance; numbers or arrays that broadcast.

    Parameters
    ----------
    c_0 : array_like
        Depletion capacitance at 0 V [F].
    phi : array_like
        Built-in potential [V].
    m : array_like
        Grading exponent, below 1.
    c_f : array_like
        Constant part [F].
    shields : tuple of Shield
        None for the plain form.
    rise : Rise or None
        What comes with high voltage.
    """

    c_0: Value
    phi: Value
    m: Value
    c_f: Value
    shields: tuple[Shield, ...] = ()
    rise: Rise | None = None


def junction_names(
    definitions: Mapping[str, ParameterDefinition], shields: int, rises: bool = False
) -> tuple[str, ...]:
    """Names of the parameters that are fitted of a junction with some number of shields.

    Parameters
    ----------
    definitions : mapping of str to ParameterDefinition
        `GATE_DRAIN` or `DRAIN_SOURCE`.
    shields : int
        0 to `MOST_SHIELDS`.
    rises : bool
        Whether something comes with high voltage; its voltage is not fitted.

    Returns
    -------
    tuple of str
    """
    fields = _PLAIN + tuple(f"{field}_{n}" for n in range(1, shields + 1) for field in "svw") + _RISE[:1] * rises
    return tuple(definitions[field].name for field in fields)


def junction_from(definitions: Mapping[str, ParameterDefinition], values: Mapping[str, Value]) -> Junction:
    """A junction from parameters by name; shields, and a rise, whose parameters are absent are left out.

    Parameters
    ----------
    definitions : mapping of str to ParameterDefinition
        `GATE_DRAIN` or `DRAIN_SOURCE`.
    values : mapping of str to array_like
        SI values by name.

    Returns
    -------
    Junction
    """
    given = {field: values[d.name] for field, d in definitions.items() if d.name in values}
    shields = tuple(
        Shield(**{field: given[f"{field}_{n}"] for field in "svw"})
        for n in range(1, MOST_SHIELDS + 1)
        if f"s_{n}" in given
    )
    rise = Rise(c=given["c_r"], v=given["v_r"]) if given.keys() >= set(_RISE) else None
    return Junction(**{field: values[definitions[field].name] for field in _PLAIN}, shields=shields, rise=rise)


def depletion_capacitance(v: ArrayLike, c_0: ArrayLike, phi: ArrayLike, m: ArrayLike) -> Numbers:
    """Depletion capacitance C0 (1 + V/phi)^-m.

    Parameters
    ----------
    v : array_like
        Reverse voltage, at least 0 [V].
    c_0, phi, m : array_like
        Capacitance at 0 V [F], built-in potential [V], grading exponent.

    Returns
    -------
    ndarray
        [F]

    Examples
    --------
    An abrupt junction of 1 nF/cm^2 and 1 V has a tenth of that at 99 V (sqrt(100) = 10):

    >>> round(float(depletion_capacitance(99.0, 1e-9, 1.0, 0.5)) * 1e9, 9)
    0.1
    """
    return np.asarray(np.asarray(c_0) * exp(-np.asarray(m) * log1p(np.asarray(v) / np.asarray(phi))))


def depletion_charge(v: ArrayLike, c_0: ArrayLike, phi: ArrayLike, m: ArrayLike) -> Numbers:
    """Charge of the depletion capacitance, C0 phi/(1-m) [(1 + V/phi)^(1-m) - 1], zero at 0 V.

    Parameters
    ----------
    v, c_0, phi, m : array_like
        As for `depletion_capacitance`; m below 1.

    Returns
    -------
    ndarray
        [C]

    Examples
    --------
    The mean capacitance of an abrupt junction of 1 nF and 1 V over 0 to 99 V is 2/(1 + 10) nF:

    >>> round(float(depletion_charge(99.0, 1e-9, 1.0, 0.5)) / 99.0 * 11e9, 12)
    2.0
    """
    phi, rest = np.asarray(phi), 1.0 - np.asarray(m)
    return np.asarray(np.asarray(c_0) * phi / rest * np.expm1(rest * log1p(np.asarray(v) / phi)))


def _shielded_voltage(v: Numbers, shield: Shield) -> tuple[Numbers, Numbers]:
    """Voltage over a shielded share, and its slope.

    U(V) = V - sp(V-Vs; ws) + sp(-Vs; ws), zero at V = 0; since sp(x) - sp(-x) = x, that is sp(Vs) - sp(Vs-V).
    """
    v_s, width = np.asarray(shield.v), shield.width
    left, slope = softplus_and_slope(v_s - v, width)
    return softplus(v_s, width) - left, slope


def capacitance(v: ArrayLike, j: Junction) -> Numbers:
    """Capacitance of a junction: its shares, Cj(V) of what no shield stops, Cj(U) U'(V) of the rest; Cf, and a rise.

    With one shield: (1-s) Cj(V) + s Cj(U) U'(V) + Cf. The form is our own; it follows the steep fall that
    shielded-gate, superjunction and closing-neck structures show, and has a charge in closed form.

    Parameters
    ----------
    v : array_like
        Voltage, at least 0 [V].
    j : Junction
        Its parameters.

    Returns
    -------
    ndarray
        [F]
    """
    v = np.asarray(v)
    total, rest = np.asarray(j.c_f) + np.zeros(v.shape), np.ones(())
    for shield in j.shields:
        u, slope = _shielded_voltage(v, shield)
        total = total + rest * shield.s * depletion_capacitance(u, j.c_0, j.phi, j.m) * slope
        rest = rest * (1.0 - np.asarray(shield.s))
    if j.rise is not None:
        total = total + j.rise.capacitance(v)
    return total + rest * depletion_capacitance(v, j.c_0, j.phi, j.m)


def charge(v: ArrayLike, j: Junction) -> Numbers:
    """Charge of a junction, zero at 0 V; the integral of `capacitance`.

    With one shield: (1-s) Qj(V) + s Qj(U(V)) + Cf V.

    Parameters
    ----------
    v : array_like
        Voltage, at least 0 [V].
    j : Junction
        Its parameters.

    Returns
    -------
    ndarray
        [C]
    """
    v = np.asarray(v)
    total, rest = np.asarray(j.c_f) * v, np.ones(())
    for shield in j.shields:
        held = depletion_charge(_shielded_voltage(v, shield)[0], j.c_0, j.phi, j.m)
        total = total + rest * shield.s * held
        rest = rest * (1.0 - np.asarray(shield.s))
    if j.rise is not None:
        total = total + j.rise.charge(v)
    return np.asarray(total + rest * depletion_charge(v, j.c_0, j.phi, j.m))


def stored_energy(v: ArrayLike, j: Junction, panels: int = 512) -> Numbers:
    """Energy taken from the source on the way from 0 to V, the integral of V C(V) dV = V Q - integral of Q dV.

    Parameters
    ----------
    v : array_like, shape (..., n)
        Voltage, at least 0 [V].
    j : Junction
        Its parameters; arrays must broadcast against `v`.
    panels : int
        Simpson panels; with V = V_end t^2 they lie densest at 0, where Q bends most.

    Returns
    -------
    ndarray, shape (..., n)
        [J]
    """
    v = np.asarray(v)
    t = np.linspace(0.0, 1.0, 2 * panels + 1)
    weights = np.full(t.size, 2.0)
    weights[1::2] = 4.0
    weights[[0, -1]] = 1.0
    wide = Junction(
        c_0=_widened(j.c_0), phi=_widened(j.phi), m=_widened(j.m), c_f=_widened(j.c_f),
        shields=tuple(Shield(s=_widened(x.s), v=_widened(x.v), w=_widened(x.w)) for x in j.shields),
        rise=None if j.rise is None else Rise(c=_widened(j.rise.c), v=_widened(j.rise.v)),
    )  # fmt: skip
    under = charge(v[..., None] * t**2, wide) @ (weights / (6.0 * panels) * 2.0 * t) * v
    return np.asarray(v * charge(v, j) - under)


def _widened(parameter: Value) -> Numbers:
    """A parameter with one more axis, that of the integration."""
    return np.asarray(parameter)[..., None]
