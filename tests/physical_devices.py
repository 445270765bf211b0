"""Physically built transistors: what the tool is tried on, none of them with the tool's own equations.

A device is a cell array (doping profiles, oxides, areas), a channel, resistances and a body diode.
Capacitances, currents, gate charge and table values all follow from it. SI, n-channel polarity,
temperatures in degrees Celsius. The eight scenarios are in ``device_scenarios.py``; all are invented.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from cell_physics import Channel, Material, kelvin, thermal_voltage
from scipy.interpolate import PchipInterpolator
from scipy.optimize import brentq

BISECTIONS = 44


def bisect(falling, low, high):
    """Root of a falling function of an array, elementwise between two arrays."""
    low, high = np.array(low, float), np.array(high, float)
    for _ in range(BISECTIONS):
        middle = 0.5 * (low + high)
        right = falling(middle) > 0.0
        low, high = np.where(right, middle, low), np.where(right, high, middle)
    return 0.5 * (low + high)


@dataclass(frozen=True, kw_only=True)
class Neck:
    """The passage between two bodies (JFET region), that narrows as its own drop depletes it.

    Parameters
    ----------
    resistance : float
        At 25 C if nothing were depleted [ohm].
    v_pinch : float
        Voltage that closes it [V].
    v_built : float
        Built-in voltage [V].
    exponent : float
        The resistance goes with (T/298 K)^exponent.
    """

    resistance: float
    v_pinch: float
    v_built: float = 0.75
    exponent: float = 2.0

    @cached_property
    def _law(self):
        """Shockley's junction transistor: I R0 = V - 2/3 [(V+Vb)^1.5 - Vb^1.5]/sqrt(Vp) (Sze & Ng, ch. 7)."""
        v = np.linspace(0.0, 0.8 * (self.v_pinch - self.v_built), 400)
        flow = v - ((v + self.v_built) ** 1.5 - self.v_built**1.5) / (1.5 * np.sqrt(self.v_pinch))
        return v, flow

    def drop(self, i, t_j):
        """Voltage [V] at a current [A] and t_j [degC]; beyond its law's end it goes on straight."""
        v, flow = self._law
        resistance = self.resistance * (kelvin(t_j) / 298.15) ** self.exponent
        drive = np.abs(i) * resistance
        slope = (v[-1] - v[-2]) / (flow[-1] - flow[-2])
        forward = np.interp(drive, flow, v) + np.maximum(drive - flow[-1], 0.0) * slope
        return np.where(np.asarray(i) < 0.0, -drive * v[1] / flow[1], forward)


@dataclass(frozen=True, kw_only=True)
class BodyDiode:
    """Body diode: diffusion with a knee to high injection, recombination, a series resistance, stored charge.

    Parameters
    ----------
    diffusion, recombination : float
        Saturation currents at 25 C [A], with emission 1 and 2.
    knee : float
        Current at which high injection begins [A]; inf for never.
    emission : float
        Emission of the diffusion current; a little above one.
    resistance : float
        In series at 25 C [ohm], going with (T/298 K)^exponent.
    lifetime, transit : float
        Of the stored charge: its lifetime and the time it takes to leave the base [s] (Lauritzen & Ma, IEEE
        Trans. Power Electron. 6 (1991) 188).
    """

    material: Material
    diffusion: float
    recombination: float
    knee: float = np.inf
    emission: float = 1.0
    resistance: float
    exponent: float = 1.0
    lifetime: float
    transit: float

    def v_forward(self, i_s, t_j=25.0):
        """Forward voltage [V] at i_s [A], t_j [degC]; saturation currents go with ni (Sze & Ng, ch. 2)."""
        i_s = np.asarray(i_s, dtype=float)
        u_t = thermal_voltage(t_j)
        rise = self.material.log_intrinsic(t_j) - self.material.log_intrinsic(25.0)
        i_1 = np.log(self.diffusion) + 2.0 * rise / self.emission
        i_2 = np.log(self.recombination) + rise

        def lacking(v):
            diffusion = np.exp(i_1 + v / (self.emission * u_t))
            diffusion = diffusion / np.sqrt(1.0 + diffusion / self.knee)
            return i_s - diffusion - np.exp(i_2 + 0.5 * v / u_t)

        inner = bisect(lacking, np.zeros_like(i_s), np.full_like(i_s, 6.0))
        return inner + i_s * self.resistance * (kelvin(t_j) / 298.15) ** self.exponent

    def recovery(self, i_f, di_dt):
        """QRR [C] and tRR [s] from a steady i_f [A] falling at di_dt [A/s]: charge control, solved.

        dqE/dt + (qE - qM)/TM = i is the lumped charge's balance: i = (qE - qM)/TM, dqM/dt = i - qM/tau.
        Reverse current peaks when qE is used up and decays with 1/tau + 1/TM; tRR ends where a line through
        90 % and 25 % of the peak meets zero.
        """
        tau, t_m = self.lifetime, self.transit

        def q_e(t):
            """Charge at the junction during the ramp; qM solves dqM/dt = i_f - a t - qM/tau from tau i_f."""
            q_m = tau * (i_f - di_dt * t + di_dt * tau * -np.expm1(-t / tau))
            return q_m + t_m * (i_f - di_dt * t)

        end = brentq(q_e, i_f / di_dt, 50.0 * (i_f / di_dt + tau))
        rise = end - i_f / di_dt
        peak = di_dt * rise
        decay = 1.0 / (1.0 / tau + 1.0 / t_m)
        line = decay * (np.log(4.0) + (np.log(4.0) - np.log(1.0 / 0.9)) * 0.25 / 0.65)
        return 0.5 * peak * rise + peak * decay, rise + line


@dataclass(frozen=True, kw_only=True)
class TrueGateCharge:
    """A gate-charge curve: q_g [C], v_gs, v_ds [V] at the terminals, i_d [A], from VGS = 0."""

    q_g: np.ndarray
    v_gs: np.ndarray
    v_ds: np.ndarray
    i_d: np.ndarray


@dataclass(frozen=True, kw_only=True)
class GateChargeReading:
    """QG, QGS, QGD [C], QG(th) [C] and plateau [V], by the two lines of JESD24-2."""

    q_g: float
    q_gs: float
    q_gd: float
    q_th: float
    v_plateau: float


@dataclass(frozen=True, kw_only=True, eq=False)
class Device:
    """A transistor.

    Parameters
    ----------
    v_grid, c_gd, c_ds : ndarray
        Drain-gate and drain-source capacitance [F] over the voltage across them [V], as the cell's physics
        gives them.
    c_gs_fixed : float
        Gate over source, shield and source metal [F]; the channel's own comes on top.
    channel : Channel
        The channel.
    r_source : float
        Source metal and contacts [ohm].
    r_drain : tuple of (float, float)
        Drift layers, substrate, drain leads: resistance at 25 C [ohm] and its exponent of T/298 K.
    neck : Neck or None
        The passage between the bodies.
    r_gate : float
        Internal gate resistance [ohm].
    """

    name: str
    polarity: str = "n"
    v_ds_max: float
    v_gs_max: float
    v_grid: np.ndarray = field(repr=False)
    c_gd: np.ndarray = field(repr=False)
    c_ds: np.ndarray = field(repr=False)
    c_gs_fixed: float
    channel: Channel
    r_source: float
    source_exponent: float = 1.1
    r_drain: tuple[tuple[float, float], ...]
    neck: Neck | None = None
    diode: BodyDiode
    r_gate: float

    @cached_property
    def _cells(self):
        """Capacitances, their charges from 0 V, and the energy of Coss, as interpolants over the voltage."""
        c_gd, c_ds = PchipInterpolator(self.v_grid, self.c_gd), PchipInterpolator(self.v_grid, self.c_ds)
        energy = PchipInterpolator(self.v_grid, self.v_grid * (self.c_gd + self.c_ds))
        return c_gd, c_ds, c_gd.antiderivative(), c_ds.antiderivative(), energy.antiderivative()

    def c_rss(self, v_ds):
        """Crss [F] at VGS = 0 over v_ds [V]."""
        return self._cells[0](v_ds)

    def c_oss(self, v_ds):
        """Coss [F] at VGS = 0 over v_ds [V]."""
        return self._cells[0](v_ds) + self._cells[1](v_ds)

    def c_iss(self, v_ds):
        """Ciss [F] at VGS = 0 over v_ds [V]: gate to drain, source and the channel, still empty."""
        step = 1e-3
        v_ds = np.asarray(v_ds, dtype=float)
        up, down = (self.channel.state(v, v_ds)[1] for v in (step, -step))
        return self.c_rss(v_ds) + self.c_gs_fixed + (up - down) / (2.0 * step)

    def q_oss(self, v_ds):
        """Output charge [C] from 0 to v_ds [V]."""
        _, _, q_gd, q_ds, _ = self._cells
        return q_gd(v_ds) - q_gd(0.0) + q_ds(v_ds) - q_ds(0.0)

    def e_oss(self, v_ds):
        """Output energy [J] from 0 to v_ds [V]."""
        return self._cells[4](v_ds) - self._cells[4](0.0)

    def q_gate(self, v_gs, v_ds):
        """Gate charge [C] over the inner voltages [V], but for a constant: its capacitances integrated."""
        return self.c_gs_fixed * v_gs + self.channel.state(v_gs, v_ds)[1] - self._cells[2](v_ds - v_gs)

    def _drain_drop(self, i_d, t_j):
        """Voltage [V] lost between the drain terminal and the channel."""
        heat = kelvin(t_j) / 298.15
        drop = i_d * sum(r * heat**exponent for r, exponent in self.r_drain)
        return drop if self.neck is None else drop + self.neck.drop(i_d, t_j)

    def _r_source(self, t_j):
        return self.r_source * (kelvin(t_j) / 298.15) ** self.source_exponent

    def drain_current(self, v_gs, v_ds, t_j=25.0):
        """Drain current [A] of the channel, without the body diode, at terminal voltages [V], t_j [degC]."""
        v_gs, v_ds, t_j = np.broadcast_arrays(*(np.asarray(a, float) for a in (v_gs, v_ds, t_j)))
        r_s = self._r_source(t_j)
        ideal = self.channel.state(v_gs, v_ds, t_j)[0]

        def lacking(i):
            v_inner = v_ds - i * r_s - self._drain_drop(i, t_j)
            v_inner = np.where(v_ds < 0.0, np.minimum(v_inner, 0.0), np.maximum(v_inner, 0.0))
            return self.channel.state(v_gs - i * r_s, v_inner, t_j)[0] - i

        return bisect(lacking, np.minimum(ideal, 0.0), np.maximum(ideal, 0.0))

    def _inner_v_gs(self, i_d, v_inner, t_j=25.0):
        """Inner VGS [V] at which the channel carries i_d [A] with v_inner [V] across it."""
        i_d, v_inner = np.broadcast_arrays(np.asarray(i_d, float), np.asarray(v_inner, float))
        high = np.full(i_d.shape, 4.0 * self.v_gs_max)
        return bisect(lambda v: i_d - self.channel.state(v, v_inner, t_j)[0], np.zeros(i_d.shape), high)

    def v_ds_on(self, v_gs, i_d, t_j=25.0):
        """VDS [V] of the on-state at terminal v_gs [V], i_d [A] and t_j [degC]."""
        v_gs, i_d, t_j = np.broadcast_arrays(*(np.asarray(a, float) for a in (v_gs, i_d, t_j)))
        drive = v_gs - i_d * self._r_source(t_j)
        high = np.full(i_d.shape, 0.5 * self.v_ds_max)
        inner = bisect(lambda v: i_d - self.channel.state(drive, v, t_j)[0], np.zeros(i_d.shape), high)
        return inner + i_d * self._r_source(t_j) + self._drain_drop(i_d, t_j)

    def r_ds_on(self, v_gs, i_d, t_j=25.0):
        """RDS(on) [ohm] at v_gs [V], i_d [A] and t_j [degC]."""
        return self.v_ds_on(v_gs, i_d, t_j) / i_d

    def v_gs_th(self, i_d, t_j=25.0):
        """VGS(th) [V]: gate joined to drain, at i_d [A] and t_j [degC]."""
        i_d, t_j = np.broadcast_arrays(np.asarray(i_d, float), np.asarray(t_j, float))
        lost = i_d * self._r_source(t_j)
        dropped = lost + self._drain_drop(i_d, t_j)
        high = np.full(i_d.shape, self.v_gs_max)
        return bisect(lambda v: i_d - self.channel.state(v - lost, v - dropped, t_j)[0], dropped, high)

    def g_fs(self, v_ds, i_d):
        """Transconductance [S] at terminal v_ds [V] and i_d [A]."""
        i = i_d * np.array([0.999, 1.001])
        lost = i * self._r_source(25.0)
        v_gs = lost + self._inner_v_gs(i, v_ds - lost - self._drain_drop(i, 25.0))
        return float(np.diff(i)[0] / np.diff(v_gs)[0])

    def v_sd(self, i_s, t_j=25.0):
        """Forward voltage of the body diode [V] at i_s [A], channel closed."""
        return self.diode.v_forward(i_s, t_j)

    def recovery(self, i_f, di_dt):
        """QRR [C] and tRR [s] at i_f [A] and di_dt [A/s]."""
        return self.diode.recovery(i_f, di_dt)

    def gate_charge(self, v_dd, i_d, v_gs, load="current", points=400):
        """Gate-charge curve from VGS = 0 to v_gs [V] at v_dd [V] and i_d [A].

        The gate current is so small that charge depends on the voltages alone. ``current``: VDS stays at
        v_dd until the channel carries i_d, then i_d flows while VDS falls. ``resistive``: VDS = v_dd - ID
        v_dd/i_d all along.
        """
        r_s = self._r_source(25.0)
        full = float(self.v_ds_on(v_gs, i_d))
        if load == "current":
            inner_dd = v_dd - i_d * r_s - float(self._drain_drop(i_d, 25.0))
            start = np.linspace(0.0, float(self._inner_v_gs(i_d, inner_dd)), points // 4)[:-1]
            i_start = self._current_at(start, v_dd)
            end = full - i_d * r_s - float(self._drain_drop(i_d, 25.0))
            falling, tail = (
                np.linspace(1.0, 0.1, points // 2),
                np.geomspace(0.1 * inner_dd, end, points // 2 + 1),
            )
            inner = np.concatenate([inner_dd * falling, tail[1:]])
            v_start = np.full_like(start, v_dd)
            i_run = np.full(inner.shape, float(i_d))
        else:
            r_load = v_dd / i_d
            full = float(brentq(lambda v: float(self.drain_current(v_gs, v)) - (v_dd - v) / r_load, 0.0, v_dd))
            early = np.geomspace(1e-6 * i_d, 0.5 * i_d, points // 2)
            v_late = np.geomspace(0.5 * v_dd, full, points // 2)[1:]
            i_run = np.concatenate([early, (v_dd - v_late) / r_load])
            inner = v_dd - i_run * (r_load + r_s) - self._drain_drop(i_run, 25.0)
            start = np.linspace(0.0, float(self._inner_v_gs(i_run[0], inner[0])), points // 4)[:-1]
            i_start, v_start = np.zeros_like(start), np.full_like(start, v_dd)
        drop = i_start * r_s + self._drain_drop(i_start, 25.0)
        v_inner_gs = np.concatenate([start, self._inner_v_gs(i_run, inner)])
        v_inner_ds = np.concatenate([v_start - drop, inner])
        i = np.concatenate([i_start, i_run])
        charge = self.q_gate(v_inner_gs, v_inner_ds) - self.q_gate(0.0, v_dd)
        return TrueGateCharge(
            q_g=charge,
            v_gs=v_inner_gs + i * r_s,
            v_ds=v_inner_ds + i * r_s + self._drain_drop(i, 25.0),
            i_d=i,
        )

    def _current_at(self, inner_v_gs, v_dd):
        """Current [A] at an inner VGS [V] with the drain terminal held at v_dd [V]."""
        ideal = self.channel.state(inner_v_gs, v_dd)[0]

        def lacking(i):
            v_inner = np.maximum(v_dd - i * self._r_source(25.0) - self._drain_drop(i, 25.0), 0.0)
            return self.channel.state(inner_v_gs, v_inner)[0] - i

        return bisect(lacking, np.zeros_like(ideal), ideal)

    def read_gate_charge(self, v_dd, i_d, v_gs, load="current", v_th=None):
        """QG, QGS, QGD and the plateau as JESD24-2 reads them: a line below threshold, one over the on-state.

        The plateau is where dVGS/dQ first has its minimum; the on-state is taken as the upper half from
        there to v_gs.
        """
        curve = self.gate_charge(v_dd, i_d, v_gs, load)
        v_th = float(self.v_gs_th(1e-5 * i_d)) if v_th is None else v_th
        q = np.linspace(0.0, curve.q_g[-1], 2001)
        v = PchipInterpolator(curve.q_g, curve.v_gs)(q)
        v_plateau = float(v[np.argmin(np.gradient(v, q))])
        first, last = v < v_th, v > 0.5 * (v_plateau + v_gs)
        lines = [np.polyfit(q[part], v[part], 1) for part in (first, last)]
        q_1, q_2 = (float((v_plateau - offset) / slope) for slope, offset in lines)
        return GateChargeReading(
            q_g=float(curve.q_g[-1]),
            q_gs=q_1,
            q_gd=q_2 - q_1,
            q_th=float(np.interp(v_th, curve.v_gs, curve.q_g)),
            v_plateau=v_plateau,
        )
