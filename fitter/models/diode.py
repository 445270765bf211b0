"""The body diode: an exponential behind a resistance, and the charge it stores.

Its law and its temperature law are those of the junction diode that circuit simulators share: S. M. Sze and K. K. Ng,
Physics of Semiconductor Devices, 3rd ed., ch. 2.
"""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import ArrayLike

from fitter.models.roots import carries_derivatives, increasing_root, lifted_root, without_derivatives
from fitter.models.smooth import log1p
from fitter.models.temperature import KELVIN, REFERENCE
from fitter.models.types import Numbers, Value
from fitter.parameters import ParameterDefinition

__all__ = [
    "BODY_DIODE",
    "TRANSIT_TIME",
    "BodyDiode",
    "forward_current",
    "forward_voltage",
    "recovery",
    "saturation_current",
    "series_resistance",
    "thermal_voltage",
    "transit_time_from_charge",
    "transit_time_from_time",
]

#: Boltzmann's constant over the elementary charge [V/K], exact in the SI of 2019.
_K_OVER_Q = 1.380649e-23 / 1.602176634e-19

#: Definitions of the diode's parameters by their field in `BodyDiode`.
BODY_DIODE = {
    "i_s": ParameterDefinition(
        name="is_d", unit="A", meaning="body diode: saturation current",
        lower=1e-60, upper=1e-2, scale="log"),
    "n": ParameterDefinition(
        name="n_d", unit="", meaning="body diode: emission coefficient",
        lower=0.7, upper=8.0, scale="linear"),
    "r": ParameterDefinition(
        name="r_dio", unit="ohm", meaning="body diode: series resistance",
        lower=0.0, upper=100.0, scale="linear", typical=1e-3),
    "e_g": ParameterDefinition(
        name="eg_d", unit="V", meaning="body diode: activation energy of the saturation current over q",
        lower=0.3, upper=5.0, scale="linear"),
    "r_exponent": ParameterDefinition(
        name="rdio_exponent", unit="", meaning="body diode: its resistance rises as (T/T0)^rdio_exponent",
        lower=-5.0, upper=8.0, scale="linear"),
}  # fmt: skip

#: Definition of the transit time, which the stated recovery determines by itself.
TRANSIT_TIME = ParameterDefinition(
    name="tt_d", unit="s", meaning="body diode: transit time",
    lower=0.0, upper=1e-3, scale="linear", typical=1e-8,
)  # fmt: skip


@dataclass(frozen=True, kw_only=True)
class BodyDiode:
    """Parameters of the body diode at 25 degC; numbers or arrays that broadcast.

    Parameters
    ----------
    i_s : array_like
        Saturation current [A].
    n : array_like
        Emission coefficient.
    r : array_like
        Series resistance [ohm].
    e_g : array_like
        Activation energy of the saturation current over the elementary charge [V].
    r_exponent : array_like
        Exponent of the series resistance over temperature.
    """

    i_s: Value
    n: Value
    r: Value
    e_g: Value = 1.12
    r_exponent: Value = 0.0

    @property
    def carries_derivatives(self) -> bool:
        """Whether any parameter is complex."""
        return carries_derivatives(*(np.asarray(getattr(self, f.name)) for f in fields(self)))

    def real(self) -> BodyDiode:
        """The same diode without derivatives."""
        return BodyDiode(**{f.name: without_derivatives(getattr(self, f.name)) for f in fields(self)})


def thermal_voltage(t_j: ArrayLike) -> Numbers:
    """Thermal voltage kT/q [V] at a junction temperature [degC].

    Examples
    --------
    >>> round(float(thermal_voltage(25.0)) * 1e3, 3)
    25.693
    """
    return np.asarray(_K_OVER_Q * (np.asarray(t_j) + KELVIN))


def saturation_current(t_j: ArrayLike, d: BodyDiode) -> Numbers:
    """Saturation current at a junction temperature, IS (T/T0)^(3/N) exp[Eg/(N kT/q) (T/T0 - 1)].

    Parameters
    ----------
    t_j : array_like
        Junction temperature [degC].
    d : BodyDiode
        Its parameters at 25 degC.

    Returns
    -------
    ndarray
        [A]
    """
    ratio = (np.asarray(t_j) + KELVIN) / (REFERENCE + KELVIN)
    n = np.asarray(d.n)
    return np.asarray(d.i_s * np.exp(3.0 / n * np.log(ratio) + d.e_g / (n * thermal_voltage(t_j)) * (ratio - 1.0)))


def series_resistance(t_j: ArrayLike, d: BodyDiode) -> Numbers:
    """Series resistance [ohm] at a junction temperature [degC]: R (T/T0)^r_exponent."""
    ratio = (np.asarray(t_j) + KELVIN) / (REFERENCE + KELVIN)
    return np.asarray(d.r * np.exp(d.r_exponent * np.log(ratio)))


def forward_voltage(i: ArrayLike, d: BodyDiode, t_j: ArrayLike = REFERENCE) -> Numbers:
    """Forward voltage VSD = N kT/q ln(1 + I/IS) + I Rdio.

    Parameters
    ----------
    i : array_like
        Forward current [A].
    d : BodyDiode
        Its parameters.
    t_j : array_like
        Junction temperature [degC].

    Returns
    -------
    ndarray
        [V]
    """
    i = np.asarray(i)
    junction = np.asarray(d.n) * thermal_voltage(t_j) * log1p(i / saturation_current(t_j, d))
    return np.asarray(junction + i * series_resistance(t_j, d))


def forward_current(v: ArrayLike, d: BodyDiode, t_j: ArrayLike = REFERENCE) -> Numbers:
    """Forward current at a voltage; solves I = IS [exp((V - I Rdio)/(N kT/q)) - 1].

    Parameters
    ----------
    v : array_like
        Forward voltage, at least 0 [V].
    d : BodyDiode
        Its parameters.
    t_j : array_like
        Junction temperature [degC].

    Returns
    -------
    ndarray
        [A]
    """
    v = np.asarray(v)
    width = np.asarray(d.n) * thermal_voltage(t_j)
    i_s, r = saturation_current(t_j, d), series_resistance(t_j, d)

    def excess(
        x: Numbers, v: Numbers = v, width: Numbers = width, i_s: Numbers = i_s, r: Numbers = r
    ) -> tuple[Numbers, Numbers]:
        """Voltage at a junction voltage of x thermal ones, less the wanted one, and its slope."""
        return width * x + r * i_s * np.expm1(x) - v, width + r * i_s * np.exp(x)

    if d.carries_derivatives or carries_derivatives(v):
        root = _junction_voltages(without_derivatives(v), d.real(), t_j)
        return np.asarray(i_s * np.expm1(lifted_root(excess, root)))
    return np.asarray(i_s * np.expm1(_junction_voltages(v, d, t_j)))


def _junction_voltages(v: Numbers, d: BodyDiode, t_j: ArrayLike) -> Numbers:
    """Junction voltage in units of N kT/q at a forward voltage."""
    width = np.asarray(d.n) * thermal_voltage(t_j)
    i_s, r = saturation_current(t_j, d), series_resistance(t_j, d)
    upper = np.asarray(v / width)
    # With all the voltage over the resistance the junction would need this much: from there Newton's way is down.
    guess = np.minimum(upper, log1p(v / np.maximum(r * i_s, 1e-300)))
    return increasing_root(
        lambda x: (width * x + r * i_s * np.expm1(x) - v, width + r * i_s * np.exp(x)),
        guess, np.zeros_like(upper), upper * (1.0 + 1e-12) + 1e-12,
    )  # fmt: skip


def recovery(transit_time: float, i_f: float, di_dt: float) -> tuple[float, float]:
    """Reverse recovery of the exported diode: charge control, Q = TT I, with the current falling at a constant rate.

    TT dI/dt + I = IF - (dI/dt) t for the junction's current I; it blocks when I is 0. From the zero of the terminal
    current on, that takes tRR, and carries QRR = (dI/dt) tRR^2/2. The simulators' diode snaps off there; a real one's
    current decays, so a real tRR is longer at the same QRR.

    Parameters
    ----------
    transit_time : float
        TT [s].
    i_f, di_dt : float
        Forward current [A] and its rate of fall [A/s], positive.

    Returns
    -------
    q_rr, t_rr : float
        [C], [s]

    Examples
    --------
    With a forward current that lasts long against TT, the charge stored is all but IF TT less what recombines;
    for TT much shorter than the fall, TT alone counts: tRR tends to TT.

    >>> q, t = recovery(1e-9, 10.0, 1e8)
    >>> round(t * 1e9, 6), round(q * 1e9, 6)
    (1.0, 0.05)
    """
    fall = i_f / di_dt

    def current(t: Numbers) -> tuple[Numbers, Numbers]:
        # Minus the junction's current over di/dt, which rises with time once it falls.
        decay = np.exp(-t / transit_time)
        return t - fall - transit_time * (1.0 - decay), 1.0 - decay

    end = fall + transit_time
    root = increasing_root(current, np.asarray(end), np.asarray(fall), np.asarray(end * (1.0 + 1e-12)))
    t_rr = float(root) - fall
    return 0.5 * di_dt * t_rr**2, t_rr


def transit_time_from_charge(q_rr: float, i_f: float, di_dt: float) -> float:
    """Transit time [s] whose recovery charge is the stated QRR [C]; see `recovery`."""
    return transit_time_from_time((2.0 * q_rr / di_dt) ** 0.5, i_f, di_dt)


def transit_time_from_time(t_rr: float, i_f: float, di_dt: float) -> float:
    """Transit time [s] whose recovery takes the stated tRR [s]; see `recovery`.

    Examples
    --------
    >>> q, t = recovery(37e-9, 20.0, 1e8)
    >>> round(transit_time_from_time(t, 20.0, 1e8) * 1e9, 6), round(transit_time_from_charge(q, 20.0, 1e8) * 1e9, 6)
    (37.0, 37.0)
    """
    total = i_f / di_dt + t_rr

    def excess(tau: Numbers) -> tuple[Numbers, Numbers]:
        decay = np.exp(-total / tau)
        return tau * (1.0 - decay) - t_rr, 1.0 - decay * (1.0 + total / tau)

    # TT is at least tRR; where recovery takes as long as the current lasted, it tends to infinity.
    return float(increasing_root(excess, np.asarray(t_rr), np.asarray(t_rr * 0.999999), np.asarray(1e6 * total)))
