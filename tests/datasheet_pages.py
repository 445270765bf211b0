"""What the invented datasheets print: test conditions, axes, temperatures, distance of the limits."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np


@dataclass(frozen=True)
class Scale:
    """A printed axis: how it is divided, and its ends in the printed unit."""

    scale: str
    start: float
    end: float

    def place(self, value):
        """Place on the axis: 0 at its start, 1 at its end."""
        if self.scale == "log":
            return np.log(np.asarray(value) / self.start) / np.log(self.end / self.start)
        return (np.asarray(value) - self.start) / (self.end - self.start)

    def value(self, place):
        """The figure that stands at a place."""
        if self.scale == "log":
            return self.start * (self.end / self.start) ** place
        return self.start + (self.end - self.start) * place

    def holds(self, value):
        """Whether a figure lies on the axis."""
        low, high = sorted((self.start, self.end))
        return (np.asarray(value) >= low) & (np.asarray(value) <= high)

    def sweep(self, points):
        """Figures evenly along the axis."""
        return self.value(np.linspace(0.0, 1.0, points))

    def times(self, sign):
        """The axis as it is printed for a p-channel part."""
        return self if sign > 0.0 else replace(self, start=sign * self.start, end=sign * self.end)


def linear(end, start=0.0):
    """A linear axis."""
    return Scale("linear", start, end)


def log(start, end):
    """A logarithmic axis."""
    return Scale("log", start, end)


@dataclass(frozen=True, kw_only=True)
class Sheet:
    """Conditions and axes of one datasheet, n-channel polarity, in the units of the columns.

    Parameters
    ----------
    v_dd, i_d, v_gs : float
        Gate-charge test and on-state [V, A, V].
    c_axes, transfer_axes, output_axes, charge_axes, diode_axes, r_on_axes, v_th_axes : (Scale, Scale)
        x and y axis of each figure.
    i_th : float
        Drain current of VGS(th) [A].
    factors : (float, float, float)
        Max over typ of QG, of Ciss, of RDS(on).
    """

    notes: str
    v_dd: float
    i_d: float
    v_gs: float
    c_axes: tuple[Scale, Scale]
    c_points: int = 34
    transfer_v_ds: float
    transfer_t_j: tuple[int, ...]
    transfer_axes: tuple[Scale, Scale]
    output_v_gs: tuple[float, ...]
    output_axes: tuple[Scale, Scale]
    charge_axes: tuple[Scale, Scale]
    diode_t_j: tuple[int, ...]
    diode_v_gs: float = 0.0
    diode_axes: tuple[Scale, Scale]
    hot: float = 150.0
    r_on_in_mohm: bool = False
    r_on_axes: tuple[Scale, Scale]
    i_th: float
    v_th_axes: tuple[Scale, Scale]
    v_th_spread: float = 1.0
    factors: tuple[float, float, float] = (1.35, 1.25, 1.2)
    v_sd_max: float = 1.2
    g_fs_v_ds: float = 10.0
    di_dt: float = 100.0
    leads: tuple[float, float, float] = (3.0, 1.0, 1.5)
    shared_file: bool = False


SHEETS = {
    "CB80N4": Sheet(
        notes="Invented part for a 48 V cargo-bike drive: 80 V, shielded gate.",
        v_dd=40.0, i_d=50.0, v_gs=10.0,
        c_axes=(linear(80.0), log(10.0, 10000.0)),
        transfer_v_ds=10.0, transfer_t_j=(25, 150, -40), transfer_axes=(linear(7.0), linear(250.0)),
        output_v_gs=(4.0, 4.5, 5.0, 6.0, 10.0), output_axes=(linear(3.0), linear(250.0)),
        charge_axes=(linear(80.0), linear(10.0)),
        diode_t_j=(25, 150), diode_axes=(linear(1.2), log(0.5, 200.0)),
        r_on_axes=(linear(160.0, -60.0), linear(2.2, 0.4)),
        i_th=250e-6, v_th_axes=(linear(160.0, -60.0), linear(4.0)),
    ),
    "WBX65N95": Sheet(
        notes="Invented part for the power factor stage of a scooter wall box: 650 V, superjunction.",
        v_dd=400.0, i_d=15.0, v_gs=10.0,
        c_axes=(log(0.1, 1000.0), log(0.1, 100000.0)), c_points=42,
        transfer_v_ds=20.0, transfer_t_j=(25, 150), transfer_axes=(linear(10.0), linear(60.0)),
        output_v_gs=(5.5, 6.0, 6.5, 7.0, 10.0), output_axes=(linear(15.0), linear(50.0)),
        charge_axes=(linear(50.0), linear(10.0)),
        diode_t_j=(25, 150), diode_axes=(linear(1.2), log(0.1, 100.0)),
        r_on_axes=(linear(160.0, -60.0), linear(2.6, 0.2)),
        i_th=300e-6, v_th_axes=(linear(160.0, -60.0), linear(5.0)), v_th_spread=0.5,
        factors=(1.4, 1.25, 1.1), g_fs_v_ds=20.0, leads=(5.0, 3.0, 4.0),
    ),
    "OBC12K30": Sheet(
        notes="Invented part for a ferry's on-board charger: 1200 V, silicon carbide, driven with 18 V.",
        v_dd=800.0, i_d=30.0, v_gs=18.0,
        c_axes=(log(0.1, 1000.0), log(1.0, 10000.0)), c_points=38,
        transfer_v_ds=20.0, transfer_t_j=(25, 175), transfer_axes=(linear(14.0), linear(80.0)),
        output_v_gs=(7.0, 8.0, 10.0, 12.0, 15.0, 18.0), output_axes=(linear(8.0), linear(80.0)),
        charge_axes=(linear(80.0), linear(18.0)),
        diode_t_j=(25, 175), diode_v_gs=-4.0, diode_axes=(linear(6.0), log(0.5, 100.0)),
        hot=175.0, r_on_in_mohm=True, r_on_axes=(linear(180.0, -60.0), linear(70.0)),
        i_th=8e-3, v_th_axes=(linear(180.0, -60.0), linear(6.0)),
        factors=(1.3, 1.2, 1.3), v_sd_max=4.8, g_fs_v_ds=20.0, di_dt=1500.0, leads=(4.0, 2.5, 1.0),
    ),
    "VAN40P8": Sheet(
        notes="Invented part for a camper van's reverse-polarity switch: -40 V, p-channel.",
        v_dd=20.0, i_d=30.0, v_gs=10.0,
        c_axes=(linear(40.0), log(100.0, 10000.0)), c_points=28,
        transfer_v_ds=10.0, transfer_t_j=(25, 150), transfer_axes=(linear(6.0), linear(150.0)),
        output_v_gs=(3.0, 3.5, 4.0, 5.0, 10.0), output_axes=(linear(2.0), linear(100.0)),
        charge_axes=(linear(60.0), linear(10.0)),
        diode_t_j=(25, 150), diode_axes=(linear(1.2), log(0.5, 100.0)),
        r_on_axes=(linear(160.0, -60.0), linear(2.0, 0.4)),
        i_th=250e-6, v_th_axes=(linear(160.0, -60.0), linear(3.0)), v_th_spread=0.7,
        factors=(1.3, 1.3, 1.25), leads=(2.5, 0.5, 1.2), shared_file=True,
    ),
    "POL30N4": Sheet(
        notes="Invented part for a point-of-load converter: 30 V, trench.",
        v_dd=15.0, i_d=20.0, v_gs=10.0,
        c_axes=(linear(30.0), log(10.0, 10000.0)), c_points=28,
        transfer_v_ds=5.0, transfer_t_j=(25, 150), transfer_axes=(linear(4.0), linear(100.0)),
        output_v_gs=(2.5, 2.8, 3.0, 3.5, 4.5, 10.0), output_axes=(linear(2.0), linear(80.0)),
        charge_axes=(linear(40.0), linear(10.0)),
        diode_t_j=(25, 150), diode_axes=(linear(1.2), log(0.2, 100.0)),
        r_on_axes=(linear(160.0, -60.0), linear(2.0, 0.4)),
        i_th=250e-6, v_th_axes=(linear(160.0, -60.0), linear(3.0)), v_th_spread=0.5,
        g_fs_v_ds=5.0, leads=(1.5, 0.3, 0.5),
    ),
    "TEL150N8": Sheet(
        notes="Invented part for a telecom converter: 150 V, shielded gate.",
        v_dd=75.0, i_d=40.0, v_gs=10.0,
        c_axes=(linear(150.0), log(1.0, 10000.0)), c_points=38,
        transfer_v_ds=10.0, transfer_t_j=(25, 150), transfer_axes=(linear(8.0), linear(160.0)),
        output_v_gs=(4.5, 5.0, 5.5, 6.0, 10.0), output_axes=(linear(4.0), linear(160.0)),
        charge_axes=(linear(80.0), linear(10.0)),
        diode_t_j=(25, 150), diode_axes=(linear(1.2), log(0.5, 200.0)),
        r_on_axes=(linear(160.0, -60.0), linear(2.4, 0.4)),
        i_th=250e-6, v_th_axes=(linear(160.0, -60.0), linear(4.0)),
    ),
    "LAMP60N20": Sheet(
        notes="Invented part for a lamp ballast: 600 V, planar stripes.",
        v_dd=300.0, i_d=20.0, v_gs=10.0,
        c_axes=(log(0.1, 1000.0), log(1.0, 10000.0)), c_points=38,
        transfer_v_ds=40.0, transfer_t_j=(25, 150), transfer_axes=(linear(10.0), log(0.1, 100.0)),
        output_v_gs=(5.5, 6.0, 6.5, 7.0, 10.0), output_axes=(linear(30.0), linear(60.0)),
        charge_axes=(linear(80.0), linear(10.0)),
        diode_t_j=(25, 150), diode_axes=(linear(1.4), log(0.1, 100.0)),
        r_on_axes=(linear(160.0, -60.0), linear(2.6, 0.2)),
        i_th=250e-6, v_th_axes=(linear(160.0, -60.0), linear(5.0)),
        v_sd_max=1.5, g_fs_v_ds=40.0, leads=(5.0, 3.0, 5.0),
    ),
    "SOL75K28": Sheet(
        notes="Invented part for a solar inverter: 750 V, silicon carbide, driven with 15 V.",
        v_dd=400.0, i_d=25.0, v_gs=15.0,
        c_axes=(log(0.1, 1000.0), log(1.0, 10000.0)), c_points=38,
        transfer_v_ds=20.0, transfer_t_j=(25, 175), transfer_axes=(linear(14.0), linear(80.0)),
        output_v_gs=(7.0, 8.0, 10.0, 12.0, 15.0), output_axes=(linear(8.0), linear(80.0)),
        charge_axes=(linear(40.0), linear(15.0)),
        diode_t_j=(25, 175), diode_v_gs=-4.0, diode_axes=(linear(6.0), log(0.5, 100.0)),
        hot=175.0, r_on_in_mohm=True, r_on_axes=(linear(180.0, -60.0), linear(60.0)),
        i_th=6e-3, v_th_axes=(linear(180.0, -60.0), linear(6.0)),
        v_sd_max=4.8, g_fs_v_ds=20.0, di_dt=1500.0, leads=(4.0, 2.5, 1.0),
    ),
}  # fmt: skip


def sheet_of(device):
    """The sheet of a device, by its name."""
    return SHEETS[device.name]
