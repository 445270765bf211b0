"""Semiconductor physics of a switching cell: materials, depletion of a doping profile, the channel.

Nothing here has the shape that the tool fits: capacitances come from Poisson's equation over a doping
profile, the channel from the charge sheet with drift, diffusion and velocity saturation. SI throughout,
temperatures in degrees Celsius. Sources: Sze & Ng, Physics of Semiconductor Devices, 3rd ed. (Sze & Ng
below); Baliga, Fundamentals of Power Semiconductor Devices (Baliga); Enz, Krummenacher & Vittoz, Analog
Integr. Circuits Signal Process. 8 (1995) 83 (EKV).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy import constants
from scipy.integrate import cumulative_trapezoid
from scipy.special import wrightomega

Q, BOLTZMANN, epsilon_0 = constants.elementary_charge, constants.k, constants.epsilon_0
OXIDE = 3.9 * epsilon_0  # permittivity of silicon dioxide [F/m]


def kelvin(t_j):
    """Absolute temperature [K] of t_j [degC]."""
    return np.asarray(t_j, dtype=float) + 273.15


def thermal_voltage(t_j):
    """kT/q [V] at t_j [degC]; 25.7 mV at 25 C."""
    return BOLTZMANN * kelvin(t_j) / Q


@dataclass(frozen=True, kw_only=True)
class Material:
    """A semiconductor.

    Permittivity [F/m], band gap by Varshni's law [eV, eV/K, K], densities of states at 300 K [m^-3].
    """

    permittivity: float
    gap_0: float
    varshni_a: float
    varshni_b: float
    n_c: float
    n_v: float

    def gap(self, t_j):
        """Band gap [eV] at t_j [degC] (Varshni; Sze & Ng, ch. 1)."""
        t = kelvin(t_j)
        return self.gap_0 - self.varshni_a * t**2 / (t + self.varshni_b)

    def log_intrinsic(self, t_j):
        """ln of the intrinsic density [m^-3] at t_j [degC] (Sze & Ng, ch. 1)."""
        states = 0.5 * np.log(self.n_c * self.n_v) + 1.5 * np.log(kelvin(t_j) / 300.0)
        return states - self.gap(t_j) / (2.0 * thermal_voltage(t_j))

    def fermi(self, doping, t_j):
        """Fermi potential kT/q ln(N/ni) [V] of a doping [m^-3] at t_j [degC]."""
        return thermal_voltage(t_j) * (np.log(doping) - self.log_intrinsic(t_j))


SILICON = Material(
    permittivity=11.7 * epsilon_0, gap_0=1.17, varshni_a=4.73e-4, varshni_b=636.0, n_c=2.8e25, n_v=2.65e25
)
SILICON_CARBIDE = Material(
    permittivity=9.7 * epsilon_0, gap_0=3.26, varshni_a=6.5e-4, varshni_b=1300.0, n_c=1.7e25, n_v=2.5e25
)


def depth_grid(depth, points=1200):
    """Depths [m] from 0 to `depth`, dense at the surface."""
    return depth * np.linspace(0.0, 1.0, points) ** 2


def depletion_width(v, depth, doping, material, v_built=0.0, t_oxide=0.0):
    """Width [m] that v [V] depletes into a one-sided profile; where the profile ends, it stays at its end.

    Poisson's equation twice integrated in the depletion approximation (Sze & Ng, ch. 2), with an oxide in
    series: V + Vbi = q/eps int x N dx + t_ox/eps_ox q int N dx.

    Parameters
    ----------
    v : ndarray
        Voltage [V] that depletes.
    depth, doping : ndarray, shape (n,)
        The profile [m, m^-3].
    v_built : float
        Built-in voltage [V].
    t_oxide : float
        Oxide in series [m].
    """
    charge = Q * cumulative_trapezoid(doping, depth, initial=0.0)
    bending = Q / material.permittivity * cumulative_trapezoid(doping * depth, depth, initial=0.0)
    return np.interp(np.asarray(v) + v_built, bending + charge * t_oxide / OXIDE, depth)


def surface_capacitance(v, depth, doping, material, t_oxide, v_flat=0.0):
    """Capacitance per area [F/m^2] of gate, oxide and drain surface, from accumulation to deep depletion.

    Around flat band the exact charge for uniform doping (Sze & Ng, ch. 4), deeper the depletion
    approximation over the profile. No inversion: at the drain's side of a cell the minority carriers leave
    through the body.

    Parameters
    ----------
    v : ndarray
        Drain against gate [V].
    depth, doping : ndarray, shape (n,)
        The profile below the surface [m, m^-3]. At its end the silicon is used up (pinched): there the
        capacitance ends.
    t_oxide : float
        Gate oxide [m].
    v_flat : float
        Drain against gate at flat band [V].
    """
    u_t, eps, n_0 = thermal_voltage(25.0), material.permittivity, doping[0]
    x = np.linspace(-25.0, 6.0, 1501)
    x = x[np.abs(x) > 1e-9]
    scale = np.sqrt(2.0 * eps * Q * n_0 * u_t)
    root = np.sqrt(np.exp(-x) + x - 1.0)
    psi, charge = x * u_t, np.sign(x) * scale * root
    c_surface = scale / (2.0 * u_t * root) * np.abs(1.0 - np.exp(-x))
    deep_psi = u_t + Q / eps * cumulative_trapezoid(doping * depth, depth, initial=0.0)
    deep = deep_psi > psi[-1]
    psi = np.concatenate([psi, deep_psi[deep]])
    charge = np.concatenate([charge, Q * cumulative_trapezoid(doping, depth, initial=0.0)[deep]])
    c_surface = np.concatenate([c_surface, eps / depth[deep]])
    across = psi + charge * t_oxide / OXIDE + v_flat
    c = 1.0 / (t_oxide / OXIDE + 1.0 / c_surface)
    return np.interp(v, across, c, left=OXIDE / t_oxide, right=0.0)


def bulk_mobility(doping):
    """Electrons' mobility in silicon [m^2/Vs] at 300 K (Caughey & Thomas, Proc. IEEE 55 (1967) 2192)."""
    return 1e-4 * (65.0 + 1265.0 / (1.0 + (doping / 8.5e22) ** 0.72))


@dataclass(frozen=True, kw_only=True)
class Channel:
    """The inverted channel of a cell array, as a charge sheet.

    Parameters
    ----------
    width, length : float
        [m], all cells in parallel.
    t_oxide : float
        Gate oxide [m].
    body : float
        Body doping at the surface [m^-3].
    v_flat : float
        Flat-band voltage of the gate at 25 C [V], with fixed oxide charge; it follows the body's Fermi
        potential.
    gate_type : {-1, 1}
        -1 for a polysilicon gate doped as the source, +1 for one doped as the body.
    mobility : float
        Low-field mobility of the surface at 300 K [m^2/Vs].
    mobility_exponent : float
        It goes with (T/300 K)^-exponent.
    field_0 : float
        Vertical field that halves it [V/m].
    coulomb : float
        Mobility limited by charged traps [m^2/Vs], screened by the inversion charge, rising with T; inf for
        none.
    v_saturation : float
        Saturation velocity [m/s].
    traps : float
        Interface traps [1/(m^2 eV)].
    dibl, modulation : float
        Threshold's fall per volt that the drain shows the channel, and channel-length modulation per e-fold
        of voltage.
    v_shield : float
        Voltage above which the cell hides the drain from the channel ever better [V].
    """

    material: Material
    width: float
    length: float
    t_oxide: float
    body: float
    v_flat: float
    gate_type: int = -1
    mobility: float
    mobility_exponent: float = 1.5
    field_0: float = 6.7e7
    coulomb: float = np.inf
    v_saturation: float = 8e4
    traps: float = 0.0
    dibl: float = 0.004
    modulation: float = 0.01
    v_shield: float = 8.0

    @property
    def c_oxide(self):
        """Oxide's capacitance per area [F/m^2]."""
        return OXIDE / self.t_oxide

    @property
    def body_factor(self):
        """sqrt(2 eps q N)/Cox [V^0.5]."""
        return np.sqrt(2.0 * self.material.permittivity * Q * self.body) / self.c_oxide

    @cached_property
    def _at_25(self):
        """Fermi potential [V] and band gap [eV] at 25 C."""
        return self.material.fermi(self.body, 25.0), self.material.gap(25.0)

    def flat_band(self, t_j):
        """Flat-band voltage [V] at t_j [degC]."""
        fermi_25, gap_25 = self._at_25
        bands = 0.5 * self.gate_type * (self.material.gap(t_j) - gap_25)
        return self.v_flat - (self.material.fermi(self.body, t_j) - fermi_25) + bands

    def surface(self, drive, two_fermi):
        """Pinch-off potential [V] and slope factor of the inversion charge (EKV, with traps beside the body).

        Without inversion charge, drive = VGS - VFB = psi + gamma sqrt(psi) + (q Dit/Cox) psi. The charge over
        the potential is taken as a straight line between pinch-off and the source, where psi = 2 phi_F.

        Parameters
        ----------
        drive : ndarray
            VGS - VFB [V].
        two_fermi : float
            2 phi_F [V].
        """
        # Traps are per electronvolt: q more turns that into volts
        stiff = 1.0 + Q * self.traps / self.c_oxide
        drive, gamma = np.maximum(drive, 1e-6), self.body_factor
        root = 2.0 * drive / (gamma + np.sqrt(gamma**2 + 4.0 * stiff * drive))
        return root**2, stiff + gamma / (root + np.sqrt(two_fermi))

    def state(self, v_gs, v_ds, t_j=25.0):
        """Drain current [A] and the channel's gate charge [C] at the channel's own ends.

        The inversion charge q solves 2q + ln q = (psi_p - 2 phi_F - V)/UT at either end (EKV); current is
        drift plus diffusion, (qs^2 + qs) - (qd^2 + qd), limited by velocity saturation at the drain end;
        the gate's charge is that of the body plus the inversion charge's mean, which falls to 2/3 in
        saturation (Sze & Ng, ch. 6, with diffusion added).

        Parameters
        ----------
        v_gs, v_ds : float or ndarray
            [V]. A negative v_ds exchanges source and drain.
        t_j : float
            [degC].
        """
        v_gs, v_ds = np.broadcast_arrays(np.asarray(v_gs, float), np.asarray(v_ds, float))
        t, u_t, eps = kelvin(t_j), thermal_voltage(t_j), self.material.permittivity
        v_gate, v = np.where(v_ds < 0.0, v_gs - v_ds, v_gs), np.abs(v_ds)
        seen = self.v_shield * np.log1p(v / self.v_shield)
        two_fermi = 2.0 * self.material.fermi(self.body, t_j)
        drive = v_gate - self.flat_band(t_j)
        psi_p, n = self.surface(drive + self.dibl * seen, two_fermi)
        x_s = (psi_p - two_fermi) / u_t
        q_s = 0.5 * wrightomega(x_s + np.log(2.0))
        # Mobility at the mean vertical field (body charge and half the inversion charge), see Sze & Ng, ch. 6
        c_ox, unit = self.c_oxide, 2.0 * n * u_t * self.c_oxide
        field = (self.body_factor * c_ox * np.sqrt(psi_p) + 0.35 * unit * q_s) / eps
        mu = self.mobility * (t / 300.0) ** -self.mobility_exponent / (1.0 + (field / self.field_0) ** 1.3)
        if np.isfinite(self.coulomb):
            screened = self.coulomb * (t / 300.0) ** 1.5 * (1.0 + unit * q_s / 2e-3)
            mu = 1.0 / (1.0 / mu + 1.0 / screened)
        # Velocity saturation: mu/(1 + E/Ec) up to i = 2 q/a at the drain end
        a = 2.0 * u_t * mu / (self.v_saturation * self.length)
        b = 0.5 + 1.0 / a + q_s
        q_sat = (q_s**2 + q_s) / (b + np.sqrt(b**2 - q_s**2 - q_s))
        v_sat = u_t * (2.0 * (q_s - q_sat) + np.log(q_s / q_sat))
        soft = 0.03 * v_sat
        gap = v_sat - v - soft
        v_eff = v_sat - 0.5 * (gap + np.sqrt(gap**2 + 4.0 * soft * v_sat))
        q_d = 0.5 * wrightomega(x_s - v_eff / u_t + np.log(2.0))
        flow = (q_s - q_d) * (q_s + q_d + 1.0) / (1.0 + a * (q_s - q_d))
        beyond = 1.0 + self.modulation * np.log1p(np.maximum(seen - v_eff, 0.0) / v_sat)
        current = self.width / self.length * mu * u_t * unit * flow * beyond
        mean = ((2.0 / 3.0) * (q_s**2 + q_s * q_d + q_d**2) + 0.5 * (q_s + q_d)) / (q_s + q_d + 1.0)
        # The body's own charge answers the gate alone; what the drain lends it is no charge of the gate's
        body = c_ox * (drive - self.surface(drive, two_fermi)[0])
        charge = self.width * self.length * (body + unit * mean / n)
        return np.where(v_ds < 0.0, -current, current), charge
