"""The transistor: the sum of its capacitances and its channel.

The inner nodes lie behind RD, RG and RS. What the datasheet prints as Ciss, Coss and Crss are sums of the three
capacitances between them: Crss = Cgd, Ciss = Cgs + Cgd, Coss = Cds + Cgd, all at VGS = 0.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from fitter.errors import OperatingPointError
from fitter.models import capacitance as cap
from fitter.models.capacitance import DRAIN_SOURCE, GATE_DRAIN, Junction, Shield, junction_from
from fitter.models.channel import CHANNEL, Channel, terminal_current
from fitter.models.diode import BODY_DIODE, TRANSIT_TIME, BodyDiode
from fitter.models.smooth import softplus
from fitter.models.temperature import KELVIN, REFERENCE, TEMPERATURE, TemperatureLaws, channel_at
from fitter.models.types import Numbers, Value
from fitter.parameters import ParameterDefinition

__all__ = ["DEFINITIONS", "GATE", "Transistor"]

#: Definitions of the gate's own parameters by their field in `Transistor`.
GATE = {
    "c_gs": ParameterDefinition(
        name="c_gs", unit="F", meaning="gate-source capacitance at VGS = 0",
        lower=1e-15, upper=1e-5, scale="log"),
    "s_gs": ParameterDefinition(
        name="s_gs", unit="", meaning="share of it over the body, which the gate depletes",
        lower=0.0, upper=0.8, scale="linear", typical=0.1),
    "c_ch": ParameterDefinition(
        name="c_ch", unit="F", meaning="what the channel adds to it above threshold",
        lower=0.0, upper=1e-5, scale="linear", typical=1e-9),
    "c_acc": ParameterDefinition(
        name="c_acc", unit="F", meaning="gate-drain capacitance with the gate above the drain",
        lower=1e-15, upper=1e-5, scale="log"),
}  # fmt: skip

#: How that share falls with VGS, voltage [V] and exponent: an oxide in series with the body's depletion layer has
#: C = Cox [1 + 2 Cox^2 (VGS - VFB)/(q eps NA)]^(-1/2) (Sze & Ng, Physics of Semiconductor Devices, 3rd ed., ch. 4),
#: where q eps NA/(2 Cox^2) - VFB is about 2 V for the oxides and bodies of power transistors (50 nm, 1e17 cm^-3).
BODY_DEPLETION, BODY_EXPONENT = 2.0, 0.5
#: Widths of the bend at threshold that depletion takes at the least.
_LEAST_DEPLETION = 5.0

#: Every fitted parameter's definition by its name, in the order of the tables.
DEFINITIONS: dict[str, ParameterDefinition] = {
    definition.name: definition
    for group in (GATE, GATE_DRAIN, DRAIN_SOURCE, CHANNEL, TEMPERATURE, BODY_DIODE)
    for definition in group.values()
} | {TRANSIT_TIME.name: TRANSIT_TIME}


@dataclass(frozen=True, kw_only=True)
class Transistor:
    """One transistor in n-channel polarity; its parameters are numbers or arrays that broadcast.

    Parameters
    ----------
    c_gs : array_like
        Gate-source capacitance at VGS = 0 [F].
    s_gs : array_like
        Share of it that lies over the body.
    c_ch, c_acc : array_like
        What the channel adds to it, and the gate-drain capacitance for VGD > 0 [F].
    gate_drain, drain_source : Junction
        The two capacitances that fall with voltage.
    channel : Channel
        The channel at 25 degC.
    laws : TemperatureLaws or None
        None where nothing is known of other temperatures.
    diode : BodyDiode or None
        None where nothing is known of it; it takes the junction temperature as an argument.
    """

    c_gs: Value
    c_ch: Value
    c_acc: Value
    gate_drain: Junction
    drain_source: Junction
    channel: Channel
    s_gs: Value = 0.0
    laws: TemperatureLaws | None = None
    diode: BodyDiode | None = None

    @classmethod
    def from_values(cls, values: Mapping[str, Value]) -> Transistor:
        """A transistor from parameters by name; those of shields, temperature laws and body diode may be absent.

        Parameters
        ----------
        values : mapping of str to array_like
            SI values by the names in `DEFINITIONS`.

        Raises
        ------
        KeyError
            Where a parameter without a default is missing.
        """

        def group(definitions: Mapping[str, ParameterDefinition]) -> dict[str, Value]:
            return {field: values[d.name] for field, d in definitions.items() if d.name in values}

        laws, diode = group(TEMPERATURE), group(BODY_DIODE)
        return cls(
            **{field: values[d.name] for field, d in GATE.items() if field != "s_gs"},
            s_gs=values.get(GATE["s_gs"].name, 0.0),
            gate_drain=junction_from(GATE_DRAIN, values),
            drain_source=junction_from(DRAIN_SOURCE, values),
            channel=Channel(**group(CHANNEL)),
            laws=TemperatureLaws(**laws) if laws else None,
            diode=BodyDiode(**diode) if diode else None,
        )

    def at(self, t_j: ArrayLike) -> Transistor:
        """The transistor at another junction temperature; capacitances do not follow it.

        Parameters
        ----------
        t_j : array_like
            Junction temperature [degC].

        Raises
        ------
        OperatingPointError
            Where `t_j` is not 25 degC and the model has no temperature laws, or where it is no temperature.
        """
        if not np.all(np.isfinite(t_j)) or np.any(np.asarray(t_j) <= -KELVIN):
            raise OperatingPointError(
                f"{np.asarray(t_j)} C is no junction temperature: a finite one above absolute zero is expected"
            )
        if np.all(np.asarray(t_j) == REFERENCE):
            return self
        if self.laws is None:
            raise OperatingPointError(
                f"the model is known at {REFERENCE:g} C only: no curve at another junction temperature was fitted; "
                "digitize a transfer curve at a second temperature to get one"
            )
        return replace(self, channel=channel_at(t_j, self.channel, self.laws))

    def c_gd(self, v_dg: ArrayLike) -> Numbers:
        """Gate-drain capacitance [F] at VDG [V]: Cgd for VDG >= 0, Cacc below."""
        v_dg = np.asarray(v_dg)
        depleted = cap.capacitance(np.where(v_dg.real < 0.0, 0.0, v_dg), self.gate_drain)
        return np.where(v_dg.real < 0.0, self.c_acc, depleted)

    def q_gd(self, v_dg: ArrayLike) -> Numbers:
        """Charge [C] of the gate-drain capacitance at VDG [V], zero at 0 V."""
        v_dg = np.asarray(v_dg)
        depleted = cap.charge(np.where(v_dg.real > 0.0, v_dg, 0.0), self.gate_drain)
        return np.where(v_dg.real > 0.0, depleted, np.asarray(self.c_acc) * v_dg)

    def c_ds(self, v_ds: ArrayLike) -> Numbers:
        """Drain-source capacitance [F] at VDS [V]; below 0 V it stays at its value there."""
        v_ds = np.asarray(v_ds)
        return cap.capacitance(np.where(v_ds.real > 0.0, v_ds, 0.0), self.drain_source)

    def q_ds(self, v_ds: ArrayLike) -> Numbers:
        """Charge [C] of the drain-source capacitance at VDS [V], zero at 0 V."""
        v_ds = np.asarray(v_ds)
        depleted = cap.charge(np.where(v_ds.real > 0.0, v_ds, 0.0), self.drain_source)
        return np.where(v_ds.real > 0.0, depleted, cap.capacitance(0.0, self.drain_source) * v_ds)

    def q_gs(self, v_gs: ArrayLike) -> Numbers:
        """Charge [C] of the gate-source capacitance at VGS [V].

        Cgs (1-s) v + QB(v) + Cch [sp(v-VTH; w) - sp(-VTH; w)], with QB the charge over the body.
        """
        v_gs, v_th = np.asarray(v_gs), np.asarray(self.channel.v_th)
        turned_on = softplus(v_gs - v_th, self.channel.w) - softplus(-v_th, self.channel.w)
        body = self.gate_body
        depleting = cap.charge(np.where(v_gs.real > 0.0, v_gs, 0.0), body)
        over_body = np.where(v_gs.real > 0.0, depleting, np.asarray(body.c_0) * v_gs)
        return np.asarray((np.asarray(self.c_gs) - body.c_0) * v_gs + over_body + np.asarray(self.c_ch) * turned_on)

    @property
    def gate_body(self) -> Junction:
        """The share of Cgs over the body: constant below VGS = 0, falling while the gate depletes the body.

        Depletion ends where the channel forms, which from then on holds the charge: as behind a shield at VTH, or at
        the least where the bend begins above VGS = 0.
        """
        c_0 = np.asarray(self.s_gs) * np.asarray(self.c_gs)
        v_th, w = np.asarray(self.channel.v_th), np.asarray(self.channel.w)
        least = _LEAST_DEPLETION * w
        end = np.where(v_th.real > least.real, v_th, least)
        return Junction(
            c_0=c_0, phi=BODY_DEPLETION, m=BODY_EXPONENT, c_f=0.0, shields=(Shield(s=1.0, v=end, w=w / end),)
        )

    def c_iss(self, v_ds: ArrayLike) -> Numbers:
        """Input capacitance [F] at VDS [V], VGS = 0: Cgs + Cgd."""
        return np.asarray(self.c_gs) + self.c_gd(v_ds)

    def c_oss(self, v_ds: ArrayLike) -> Numbers:
        """Output capacitance [F] at VDS [V], VGS = 0: Cds + Cgd."""
        return self.c_ds(v_ds) + self.c_gd(v_ds)

    def c_rss(self, v_ds: ArrayLike) -> Numbers:
        """Reverse transfer capacitance [F] at VDS [V], VGS = 0: Cgd."""
        return self.c_gd(v_ds)

    def q_oss(self, v_ds: ArrayLike) -> Numbers:
        """Output charge [C], the integral of Coss from 0 to VDS [V]."""
        return self.q_ds(v_ds) + self.q_gd(v_ds)

    def e_oss(self, v_ds: ArrayLike) -> Numbers:
        """Energy stored in Coss [J], the integral of V Coss from 0 to VDS [V], VDS >= 0."""
        return cap.stored_energy(v_ds, self.drain_source) + cap.stored_energy(v_ds, self.gate_drain)

    def i_d(self, v_gs: ArrayLike, v_ds: ArrayLike) -> Numbers:
        """Drain current [A] at the terminal voltages VGS and VDS [V]."""
        return terminal_current(v_gs, v_ds, self.channel)
