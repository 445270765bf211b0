"""The finished model: its parameters, how sure they are, and the curves that follow from them.

Inside, everything is of n-channel polarity. Where a user looks in, a p-channel part has the signs of its
datasheet: voltages and currents negative, charges, capacitances and energies positive.
"""

from __future__ import annotations

import warnings
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fitter.comparison import Comparison
from fitter.errors import ExtrapolationWarning, OperatingPointError
from fitter.fitting.forms import FormTrial
from fitter.fitting.intervals import COVERAGE_FACTOR, Estimate, Figures, ends, intervals, standard_errors
from fitter.fitting.misfit import BlockStatistics
from fitter.fitting.space import Values
from fitter.gate_charge import GateChargeCurve, OperatingPoint, gate_charge_curve
from fitter.leave_out import LeftOut
from fitter.models.channel import terminal_current
from fitter.models.temperature import REFERENCE
from fitter.models.transistor import Transistor
from fitter.models.types import scalar
from fitter.parameters import Parameter
from fitter.part import Load, Notice, Part, Quantity

__all__ = ["CurveRow", "FittedModel", "Interval", "Validity", "operating_point"]

Array = NDArray[np.float64]

#: A point this little beyond the last click is no extrapolation.
_SLACK = 1.02
#: Largest voltage [V] and current [A] of an operating point.
_LARGEST = 1e5


@dataclass(frozen=True, kw_only=True)
class Interval:
    """A figure and its 95 % interval, low <= value <= high, in SI."""

    value: float
    low: float
    high: float


@dataclass(frozen=True, kw_only=True)
class CurveRow:
    """A digitized point beside the fitted value.

    Parameters
    ----------
    curve : str
        The curve's name.
    x, y, fitted : float
        In SI, n-channel polarity.
    residual : float
        Distance in standard deviations of the reading error.
    used : bool
        False where the fit leaves the point aside.
    """

    curve: str
    x: float
    y: float
    fitted: float
    residual: float
    used: bool


@dataclass(frozen=True, kw_only=True)
class Validity:
    """What was digitized: outside of it the equations extrapolate. Each a lowest and a highest value, or None.

    Parameters
    ----------
    capacitance_v_ds, current_v_ds : tuple of float or None
        VDS of the capacitance curves, and of the transfer and output curves [V].
    v_gs, i_d : tuple of float or None
        VGS [V] and ID [A] of the transfer, output and gate-charge curves.
    t_j : tuple of float
        Junction temperatures of what the channel was fitted to [degC].
    """

    capacitance_v_ds: tuple[float, ...] | None = None
    current_v_ds: tuple[float, ...] | None = None
    v_gs: tuple[float, ...] | None = None
    i_d: tuple[float, ...] | None = None
    t_j: tuple[float, ...] = (REFERENCE, REFERENCE)


@dataclass(frozen=True, kw_only=True)
class FittedModel:
    """A model fitted to a part.

    Parameters
    ----------
    part : Part
        What it was fitted to; without curves in a model that was loaded from a file.
    parameters : mapping of str to Parameter
        Every parameter by name, in the order of the tables.
    estimate : Estimate
        The free parameters, their coordinates and covariance.
    correlations : mapping of (str, str) to float
        Between parameters that were fitted, each pair once.
    statistics : tuple of BlockStatistics
        How well each block of data is met.
    trials : tuple of FormTrial
        The capacitances' forms that were tried.
    checks : tuple of Comparison
        Stated against fitted.
    points : tuple of CurveRow
        Digitized against fitted.
    notices : tuple of Notice
        What the user should know.
    used_gate_charge : bool
        Whether gate-charge data were fitted.
    left_out : tuple of LeftOut
        Each group of data predicted from the others, where that was asked for; a loaded model has none.
    validity : Validity
        Ranges that were digitized.
    version : str
        Version of the tool that made it.
    """

    part: Part
    parameters: Mapping[str, Parameter]
    estimate: Estimate
    correlations: Mapping[tuple[str, str], float] = field(default_factory=dict)
    statistics: tuple[BlockStatistics, ...] = ()
    trials: tuple[FormTrial, ...] = ()
    checks: tuple[Comparison, ...] = ()
    points: tuple[CurveRow, ...] = ()
    notices: tuple[Notice, ...] = ()
    used_gate_charge: bool = False
    left_out: tuple[LeftOut, ...] = ()
    validity: Validity = field(default_factory=Validity)
    version: str = ""

    @property
    def sign(self) -> float:
        """-1 for a p-channel part, whose voltages and currents are negative, else 1."""
        return -1.0 if self.part.channel == "p" else 1.0

    def transistor(self, t_j: float = REFERENCE) -> Transistor:
        """The equations with this model's parameters, in n-channel polarity.

        Parameters
        ----------
        t_j : float
            Junction temperature [degC].

        Warns
        -----
        ExtrapolationWarning
            Where the temperature lies outside those that were digitized.

        Raises
        ------
        OperatingPointError
            Where the model knows nothing of that temperature.
        """
        if message := self.extrapolation(t_j):
            warnings.warn(message, ExtrapolationWarning, stacklevel=3)
        values = {name: scalar(value) for name, value in self.estimate.values.items()}
        return Transistor.from_values(values).at(t_j)

    def extrapolation(self, t_j: float) -> str:
        """What to say of a junction temperature [degC] outside those that were digitized; empty inside."""
        low, high = self.validity.t_j[0], self.validity.t_j[-1]
        if low <= t_j <= high:
            return ""
        return f"{t_j:g} C lies outside the digitized {low:g} to {high:g} C: the temperature laws extrapolate"

    def beyond(self, vdd: float, i_d: float, v_gs: float) -> tuple[str, ...]:
        """What to say of an operating point beyond the ratings, or beyond what was digitized.

        Parameters
        ----------
        vdd, i_d, v_gs : float
            Supply [V], load current [A] and gate voltage [V]; signs do not matter.

        Returns
        -------
        tuple of str
            Empty where there is nothing to say.
        """
        known = self.validity
        limits = (
            ("VDD", abs(vdd), "V", self.part.v_ds_max, known.capacitance_v_ds, "the capacitances"),
            ("ID", abs(i_d), "A", np.inf, known.i_d, "the channel"),
            ("VGS", abs(v_gs), "V", self.part.v_gs_max, None, ""),
        )
        said = []
        for name, value, unit, rated, digitized, what in limits:
            if value > rated:
                said.append(f"{name} = {value:g} {unit} lies above the rated {rated:g} {unit}")
            elif digitized is not None and value > digitized[-1] * _SLACK:
                said.append(
                    f"{name} = {value:g} {unit} lies above {digitized[-1]:.4g} {unit}, where the digitized curves of "
                    f"{what} end: the equations extrapolate"
                )
        return tuple(said)

    def zero_temperature_coefficient(self, v_ds: float | None = None) -> tuple[float, float] | None:
        """Where the transfer curves of 25 degC and of the hottest digitized temperature cross.

        Parameters
        ----------
        v_ds : float, optional
            Drain-source voltage [V], negative for a p-channel part; that of the first transfer curve by default.

        Returns
        -------
        v_gs, i_d : float
            [V], [A], with a p-channel part's signs; None where they do not cross within the gate's rating.
        """
        if v_ds is None:
            curves = self.part.curves_of(Quantity.TRANSFER)
            at_drain = next((c.v_ds for c in curves if c.v_ds is not None), 0.5 * self.part.v_ds_max)
        else:
            at_drain = self.sign * v_ds
        hottest = self.validity.t_j[-1]
        if hottest <= REFERENCE:
            return None
        cold, hot = self.transistor().channel, self.transistor(hottest).channel
        v_gs = np.linspace(float(cold.v_th), self.part.v_gs_max, 2000)
        lead = terminal_current(v_gs, at_drain, hot) - terminal_current(v_gs, at_drain, cold)
        down = np.flatnonzero((lead[:-1] > 0.0) & (lead[1:] <= 0.0))
        if down.size == 0:
            return None
        k = int(down[0])
        at = v_gs[k] + (v_gs[k + 1] - v_gs[k]) * lead[k] / (lead[k] - lead[k + 1])
        return self.sign * float(at), self.sign * float(terminal_current(at, at_drain, cold))

    def ciss(self, v_ds: ArrayLike) -> Array:
        """Input capacitance at VGS = 0.

        Parameters
        ----------
        v_ds : array_like
            Drain-source voltage [V], negative for a p-channel part.

        Returns
        -------
        ndarray
            [F], of the shape of v_ds.
        """
        return np.asarray(self.transistor().c_iss(self.sign * np.asarray(v_ds, dtype=float)))

    def coss(self, v_ds: ArrayLike) -> Array:
        """Output capacitance at VGS = 0 [F]; see `ciss`."""
        return np.asarray(self.transistor().c_oss(self.sign * np.asarray(v_ds, dtype=float)))

    def crss(self, v_ds: ArrayLike) -> Array:
        """Reverse transfer capacitance at VGS = 0 [F]; see `ciss`."""
        return np.asarray(self.transistor().c_rss(self.sign * np.asarray(v_ds, dtype=float)))

    def drain_current(self, v_gs: ArrayLike, v_ds: ArrayLike, t_j: float = REFERENCE) -> Array:
        """Drain current of the channel at terminal voltages.

        Parameters
        ----------
        v_gs, v_ds : array_like
            Gate-source and drain-source voltage [V], negative for a p-channel part; they broadcast.
        t_j : float
            Junction temperature [degC].

        Returns
        -------
        ndarray
            [A], negative for a p-channel part in forward operation. The body diode is not in it.

        Raises
        ------
        OperatingPointError
            Where the model knows nothing of that temperature.
        """
        gate, drain = (self.sign * np.asarray(v, dtype=float) for v in (v_gs, v_ds))
        return np.asarray(self.sign * self.transistor(t_j).i_d(gate, drain))

    def gate_charge(
        self, vdd: float, i_d: float, v_gs: float, load: Load = "current", t_j: float = REFERENCE
    ) -> GateChargeCurve:
        """Gate-charge curve at an operating point.

        Parameters
        ----------
        vdd, i_d, v_gs : float
            Supply [V], load current [A] and final gate voltage [V]; for a p-channel part with its signs or as
            magnitudes.
        load : {"current", "resistive"}
            Constant current with a free-wheel diode, or a resistor of VDD/ID.
        t_j : float
            Junction temperature [degC].

        Returns
        -------
        GateChargeCurve
            Charges positive, as a datasheet prints them; voltages and currents of a p-channel part negative.

        Raises
        ------
        OperatingPointError
            Where the channel cannot carry the current at that gate voltage, or the load is not known.
        """
        curve = gate_charge_curve(self.transistor(t_j), operating_point(vdd, i_d, v_gs, load))
        if self.sign > 0.0:
            return curve
        return replace(
            curve, v_gs=-curve.v_gs, v_ds=-curve.v_ds, i_d=-curve.i_d,
            reading=replace(curve.reading, v_plateau=-curve.reading.v_plateau),
        )  # fmt: skip

    def test_point(self) -> OperatingPoint:
        """The stated gate-charge test in n-channel polarity.

        Where none is stated, one stands in for it: half the rated VDS, half the rated VGS, and half the largest
        current of the
        transfer curve or, in a model without curves, what the channel carries half-way from threshold to that VGS.
        """
        table = self.part.stated.gate_charge
        if table is not None:
            return OperatingPoint(v_dd=table.v_dd, i_d=table.i_d, v_gs=table.v_gs, load=table.load)
        v_dd, v_gs = self.part.supply, 0.5 * self.part.v_gs_max
        transistor = self.transistor()
        half_way = 0.5 * (v_gs + scalar(transistor.channel.v_th))
        curves = self.part.curves_of(Quantity.TRANSFER)
        i_d = 0.5 * float(np.max(curves[0].y)) if curves else float(transistor.i_d(half_way, v_dd))
        return OperatingPoint(v_dd=v_dd, i_d=i_d, v_gs=v_gs)

    def gate_charge_intervals(
        self, vdd: float, i_d: float, v_gs: float, load: Load = "current", t_j: float = REFERENCE
    ) -> dict[str, Interval]:
        """QG, QGS, QGD [C] and plateau [V] at an operating point with their 95 % intervals.

        Parameters
        ----------
        vdd, i_d, v_gs, load, t_j
            As for `gate_charge`.

        Returns
        -------
        dict
            By ``qg``, ``qgs``, ``qgd``, ``v_plateau``; the plateau of a p-channel part is negative.
        """
        point = operating_point(vdd, i_d, v_gs, load)

        def figures(values: Values) -> NDArray[np.float64]:
            r = gate_charge_curve(Transistor.from_values(values).at(t_j), point).reading
            return np.stack(np.broadcast_arrays(r.total, r.q_gs, r.q_gd, r.v_plateau), axis=-1)

        found = dict(zip(("qg", "qgs", "qgd", "v_plateau"), self.intervals(figures), strict=True))
        if self.sign < 0.0:
            v = found["v_plateau"]
            found["v_plateau"] = Interval(value=-v.value, low=-v.high, high=-v.low)
        return found

    def intervals(self, figures: Figures) -> Sequence[Interval]:
        """95 % intervals of figures that follow from the parameters.

        Parameters
        ----------
        figures : callable
            Takes SI values by name, returns m figures along the last axis; see `fitter.fitting.intervals`.

        Returns
        -------
        list of Interval
        """
        value, low, high = intervals(figures, self.estimate)
        return [Interval(value=float(v), low=float(a), high=float(b)) for v, a, b in zip(value, low, high, strict=True)]

    def band(self, quantity: Literal["ciss", "coss", "crss"], v_ds: ArrayLike) -> tuple[Array, Array]:
        """95 % band of a capacitance curve, from the reading errors.

        Parameters
        ----------
        quantity : {"ciss", "coss", "crss"}
            Which.
        v_ds : array_like, shape (n,)
            [V], negative for a p-channel part.

        Returns
        -------
        low, high : ndarray, shape (n,)
            [F]
        """
        v = self.sign * np.asarray(v_ds, dtype=float)

        def logarithm(values: Values) -> NDArray[np.float64]:
            t = Transistor.from_values(values)
            return np.asarray(np.log({"ciss": t.c_iss, "coss": t.c_oss, "crss": t.c_rss}[quantity](v)))

        middle = logarithm(self.estimate.values)
        off = COVERAGE_FACTOR * standard_errors(logarithm, self.estimate)
        return np.exp(middle - off), np.exp(middle + off)

    def current_band(self, v_gs: ArrayLike, v_ds: float, t_j: float = REFERENCE) -> tuple[Array, Array]:
        """95 % band of a transfer curve, from the reading errors.

        Parameters
        ----------
        v_gs : array_like, shape (n,)
            [V], negative for a p-channel part.
        v_ds : float
            [V], likewise.
        t_j : float
            Junction temperature [degC].

        Returns
        -------
        low, high : ndarray, shape (n,)
            Magnitude of the drain current [A].
        """
        gate, drain = self.sign * np.asarray(v_gs, dtype=float), self.sign * v_ds

        def logarithm(values: Values) -> NDArray[np.float64]:
            return np.asarray(np.log(Transistor.from_values(values).at(t_j).i_d(gate, drain)))

        middle = np.real(logarithm(self.estimate.values))
        off = COVERAGE_FACTOR * standard_errors(logarithm, self.estimate)
        return np.exp(middle - off), np.exp(middle + off)

    def gate_charge_band(
        self, vdd: float, i_d: float, v_gs: float, load: Load = "current"
    ) -> tuple[GateChargeCurve, GateChargeCurve]:
        """Gate-charge curves at the two ends of QG's 95 % interval, in n-channel polarity.

        Parameters
        ----------
        vdd, i_d, v_gs, load
            As for `gate_charge`.

        Returns
        -------
        low, high : GateChargeCurve
        """
        point = operating_point(vdd, i_d, v_gs, load)

        def total(values: Values) -> NDArray[np.float64]:
            return np.asarray(gate_charge_curve(Transistor.from_values(values), point).reading.total)[..., None]

        low, high = (
            gate_charge_curve(Transistor.from_values({n: scalar(x) for n, x in values.items()}), point)
            for values in ends(total, self.estimate)
        )
        return low, high


def operating_point(vdd: float, i_d: float, v_gs: float, load: str) -> OperatingPoint:
    """An operating point in n-channel polarity, from figures with a p-channel part's signs or as magnitudes.

    Raises
    ------
    OperatingPointError
        Where the load is not known, or a figure is zero or no number.
    """
    if load not in ("current", "resistive"):
        raise OperatingPointError(f"load {load!r} is not known; it is 'current' or 'resistive'")
    figures = {"VDD": vdd, "ID": i_d, "VGS": v_gs}
    for name, value in figures.items():
        if not np.isfinite(value) or value == 0.0:
            raise OperatingPointError(f"{name} = {value:g} makes no gate-charge test; give a figure other than zero")
        if abs(value) > _LARGEST:
            raise OperatingPointError(f"{name} = {value:g} is beyond every transistor: at most {_LARGEST:g} is taken")
    return OperatingPoint(v_dd=abs(vdd), i_d=abs(i_d), v_gs=abs(v_gs), load=load)  # type: ignore[arg-type]
