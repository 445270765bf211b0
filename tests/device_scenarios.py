"""Eight invented transistors, from a 30 V trench part to silicon carbide: their cells, layers and areas.

Each function builds one physical device from doping profiles, oxides and dimensions; ``ALL`` names them.
Orders of magnitude are those of the kind of part; no real part is meant. What their datasheets print is in
``datasheet_pages.py``.
"""

from __future__ import annotations

from functools import cache

import numpy as np
from cell_physics import OXIDE, SILICON, SILICON_CARBIDE, Channel
from device_cells import (
    MM2,
    UM,
    layer_resistance,
    planar_neck,
    shielded_trench,
    superjunction,
    trench,
    voltage_grid,
)
from physical_devices import BodyDiode, Device, Neck


@cache
def shielded_80v():
    """80 V shielded-gate part of the cargo bike: 11 mm^2, trenches of 3.4 um, 50 nm gate oxide."""
    v = voltage_grid(80.0)
    area, pitch, mesa = 11.0 * MM2, 2.0 * UM, 0.9 * UM
    c_gd, c_ds = shielded_trench(
        v, area=area, pitch=pitch, mesa=mesa, depth=3.4 * UM, doping=(2.2e22, 3.6e22),
        oxide=(0.36 * UM, 0.5 * UM),
        overlap=0.08 * UM, t_gate=50e-9, bottom=(2.5e22, 1.6 * UM, 0.25 * UM), pads=0.6 * MM2,
    )  # fmt: skip
    wall = 2.0 * area / pitch
    channel = Channel(
        material=SILICON, width=wall, length=0.30 * UM, t_oxide=50e-9, body=2.4e23, v_flat=-1.0,
        mobility=0.032, dibl=0.01, modulation=0.02, v_shield=6.0,
    )  # fmt: skip
    return Device(
        name="CB80N4", v_ds_max=80.0, v_gs_max=20.0, v_grid=v, c_gd=c_gd, c_ds=c_ds,
        c_gs_fixed=wall * 0.12 * UM * OXIDE / 50e-9 + area * 0.4 * OXIDE / 0.12e-6,
        channel=channel, r_source=0.35e-3,
        r_drain=((layer_resistance(3.6 * UM, area * mesa / pitch, 2.9e22) + 0.2e-3, 2.1), (0.6e-3, 0.8)),
        diode=BodyDiode(
            material=SILICON, diffusion=2e-12, recombination=2e-7, emission=1.05,
            resistance=1.1e-3, exponent=0.7, lifetime=28e-9, transit=14e-9,
        ),
        r_gate=1.3,
    )  # fmt: skip


@cache
def superjunction_650v():
    """650 V superjunction part of a wall box for scooters: 14 mm^2, columns of 34 um at a pitch of 8 um."""
    v = voltage_grid(650.0)
    area, pitch = 14.0 * MM2, 8.0 * UM
    rise = np.linspace(0.0, 1.0, 30)
    doping = 4.2e21 * (1.0 + 0.35 * rise + 1.6 * (np.maximum(rise - 0.85, 0.0) / 0.15) ** 2)
    c_gd, c_ds = superjunction(
        v, area=area, pitch=pitch, depth=34.0 * UM, doping=doping, buffer=8e20,
        neck=(1.3 * UM, 1.1e22), t_gate=80e-9,
        finger=(2.0 * UM, 2e22), pads=0.1 * MM2,
    )  # fmt: skip
    wall = 2.0 * area / pitch
    channel = Channel(
        material=SILICON, width=wall, length=0.8 * UM, t_oxide=80e-9, body=1.25e23, v_flat=-1.0,
        mobility=0.042, dibl=0.004, modulation=0.012, v_shield=10.0,
    )  # fmt: skip
    column = layer_resistance(38.0 * UM, 0.37 * area, 5.0e21)
    return Device(
        name="WBX65N95", v_ds_max=650.0, v_gs_max=20.0, v_grid=v, c_gd=c_gd, c_ds=c_ds,
        c_gs_fixed=wall * 0.5 * UM * OXIDE / 80e-9 + area * 0.25 * OXIDE / 0.8e-6,
        channel=channel, r_source=2e-3, r_drain=((column, 2.4), (3e-3, 1.0)),
        neck=Neck(resistance=6e-3, v_pinch=14.0, exponent=2.3),
        diode=BodyDiode(
            material=SILICON, diffusion=4e-13, recombination=4e-8, emission=1.06, knee=30.0,
            resistance=4e-3, exponent=0.8, lifetime=420e-9, transit=110e-9,
        ),
        r_gate=4.5,
    )  # fmt: skip


@cache
def silicon_carbide_1200v():
    """1200 V silicon carbide part of a ferry's on-board charger: planar cells, 12 mm^2, driven with 18 V."""
    v = voltage_grid(1200.0)
    area, pitch, half = 12.0 * MM2, 8.0 * UM, 0.75 * UM
    c_gd, c_ds = planar_neck(
        v, material=SILICON_CARBIDE, area=area, pitch=pitch, half=half, n_neck=3.2e22, body_depth=0.75 * UM,
        drift=(8e21, 11.0 * UM, 0.3 * UM), t_gate=45e-9, v_built=2.9, pads=0.1 * MM2, v_flat=0.1,
    )  # fmt: skip
    wall = 2.0 * area / pitch
    channel = Channel(
        material=SILICON_CARBIDE, width=wall, length=0.65 * UM, t_oxide=45e-9, body=6.7e22, v_flat=-3.4,
        mobility=0.0065, mobility_exponent=1.0, field_0=3e8, coulomb=0.0026, v_saturation=1.5e5, traps=2e15,
        dibl=0.008, modulation=0.02, v_shield=20.0,
    )  # fmt: skip
    return Device(
        name="OBC12K30", v_ds_max=1200.0, v_gs_max=22.0, v_grid=v, c_gd=c_gd, c_ds=c_ds,
        c_gs_fixed=wall * 0.3 * UM * OXIDE / 45e-9 + area * 0.5 * OXIDE / 0.9e-6,
        channel=channel, r_source=2.5e-3, r_drain=((13e-3, 2.2), (3e-3, 0.8)),
        neck=Neck(resistance=4e-3, v_pinch=20.0, v_built=2.9, exponent=2.0),
        diode=BodyDiode(
            material=SILICON_CARBIDE, diffusion=1e-46, recombination=1e-23, emission=1.0,
            resistance=32e-3, exponent=-0.3, lifetime=30e-9, transit=9e-9,
        ),
        r_gate=2.2,
    )  # fmt: skip


@cache
def p_channel_40v():
    """-40 V p-channel trench part of a camper van's reverse-polarity switch, in n-channel polarity."""
    v = voltage_grid(40.0)
    area, pitch = 7.0 * MM2, 1.8 * UM
    c_gd, c_ds = trench(
        v, area=area, pitch=pitch, gate=0.5 * UM, overlap=0.14 * UM, t_gate=45e-9, t_bottom=80e-9,
        epi=(1.6e22, 1.5 * UM, 0.2 * UM), n_body=1.2e23, pads=0.1 * MM2,
    )  # fmt: skip
    wall = 2.0 * area / pitch
    channel = Channel(
        material=SILICON, width=wall, length=0.33 * UM, t_oxide=45e-9, body=1.25e23, v_flat=-1.0,
        mobility=0.011, mobility_exponent=1.3, field_0=7e7, v_saturation=7e4, dibl=0.012, modulation=0.02,
        v_shield=5.0,
    )  # fmt: skip
    return Device(
        name="VAN40P8", polarity="p", v_ds_max=40.0, v_gs_max=20.0, v_grid=v, c_gd=c_gd, c_ds=c_ds,
        c_gs_fixed=wall * 0.16 * UM * OXIDE / 45e-9 + area * 0.4 * OXIDE / 0.25e-6,
        channel=channel, r_source=0.9e-3,
        r_drain=((layer_resistance(1.9 * UM, 0.75 * area, 1.6e22, hole=True), 1.9), (1.5e-3, 0.7)),
        diode=BodyDiode(
            material=SILICON, diffusion=3e-12, recombination=3e-7, emission=1.04,
            resistance=2.5e-3, exponent=0.6, lifetime=22e-9, transit=11e-9,
        ),
        r_gate=6.0,
    )  # fmt: skip


@cache
def trench_30v():
    """30 V plain trench part of a point-of-load converter."""
    v = voltage_grid(30.0)
    area, pitch = 3.6 * MM2, 1.1 * UM
    c_gd, c_ds = trench(
        v, area=area, pitch=pitch, gate=0.35 * UM, overlap=0.07 * UM, t_gate=35e-9, t_bottom=90e-9,
        epi=(1.7e22, 1.5 * UM, 0.15 * UM), n_body=2e23, pads=0.05 * MM2,
    )  # fmt: skip
    wall = 2.0 * area / pitch
    channel = Channel(
        material=SILICON, width=wall, length=0.27 * UM, t_oxide=35e-9, body=1.8e23, v_flat=-1.0,
        mobility=0.026, dibl=0.015, modulation=0.025, v_shield=4.0,
    )  # fmt: skip
    return Device(
        name="POL30N4", v_ds_max=30.0, v_gs_max=20.0, v_grid=v, c_gd=c_gd, c_ds=c_ds,
        c_gs_fixed=wall * 0.08 * UM * OXIDE / 35e-9 + area * 0.4 * OXIDE / 0.2e-6,
        channel=channel, r_source=0.8e-3,
        r_drain=((layer_resistance(1.7 * UM, 0.8 * area, 1.7e22), 1.9), (0.9e-3, 0.7)),
        diode=BodyDiode(
            material=SILICON, diffusion=2e-12, recombination=2e-7, emission=1.03,
            resistance=1.6e-3, exponent=0.6, lifetime=14e-9, transit=8e-9,
        ),
        r_gate=1.0,
    )  # fmt: skip


@cache
def shielded_150v():
    """150 V shielded-gate part of a telecom converter."""
    v = voltage_grid(150.0)
    area, pitch, mesa = 14.0 * MM2, 3.4 * UM, 1.6 * UM
    c_gd, c_ds = shielded_trench(
        v, area=area, pitch=pitch, mesa=mesa, depth=6.5 * UM, doping=(0.85e22, 1.6e22),
        oxide=(0.6 * UM, 0.85 * UM),
        overlap=0.12 * UM, t_gate=60e-9, bottom=(0.9e22, 3.2 * UM, 0.4 * UM), pads=0.3 * MM2,
    )  # fmt: skip
    wall = 2.0 * area / pitch
    channel = Channel(
        material=SILICON, width=wall, length=0.36 * UM, t_oxide=60e-9, body=1.9e23, v_flat=-1.0,
        mobility=0.034, dibl=0.008, modulation=0.015, v_shield=8.0,
    )  # fmt: skip
    return Device(
        name="TEL150N8", v_ds_max=150.0, v_gs_max=20.0, v_grid=v, c_gd=c_gd, c_ds=c_ds,
        c_gs_fixed=wall * 0.15 * UM * OXIDE / 60e-9 + area * 0.42 * OXIDE / 0.15e-6,
        channel=channel, r_source=0.5e-3,
        r_drain=((layer_resistance(8.0 * UM, area * mesa / pitch, 1.2e22), 2.2), (0.7e-3, 0.8)),
        diode=BodyDiode(
            material=SILICON, diffusion=2e-12, recombination=1e-7, emission=1.05,
            resistance=1.6e-3, exponent=0.7, lifetime=55e-9, transit=25e-9,
        ),
        r_gate=1.6,
    )  # fmt: skip


@cache
def planar_600v():
    """600 V planar stripe part of a lamp ballast."""
    v = voltage_grid(600.0)
    area, pitch, half = 30.0 * MM2, 16.0 * UM, 2.7 * UM
    c_gd, c_ds = planar_neck(
        v, material=SILICON, area=area, pitch=pitch, half=half, n_neck=2.2e21, body_depth=3.0 * UM,
        drift=(3e20, 48.0 * UM, 1.5 * UM), t_gate=100e-9, v_built=0.7, pads=0.4 * MM2, v_flat=0.25,
    )  # fmt: skip
    wall = 2.0 * area / pitch
    channel = Channel(
        material=SILICON, width=wall, length=0.9 * UM, t_oxide=100e-9, body=8.2e22, v_flat=-1.0,
        mobility=0.048, dibl=0.003, modulation=0.01, v_shield=12.0,
    )  # fmt: skip
    return Device(
        name="LAMP60N20", v_ds_max=600.0, v_gs_max=30.0, v_grid=v, c_gd=c_gd, c_ds=c_ds,
        c_gs_fixed=wall * 0.65 * UM * OXIDE / 100e-9 + area * 0.35 * OXIDE / 0.9e-6,
        channel=channel, r_source=4e-3,
        r_drain=((layer_resistance(42.0 * UM, 0.85 * area, 3e20), 2.4), (4e-3, 1.0)),
        neck=Neck(resistance=20e-3, v_pinch=25.0, exponent=2.3),
        diode=BodyDiode(
            material=SILICON, diffusion=2e-12, recombination=1e-7, emission=1.08, knee=15.0,
            resistance=8e-3, exponent=0.8, lifetime=600e-9, transit=200e-9,
        ),
        r_gate=1.2,
    )  # fmt: skip


@cache
def silicon_carbide_750v():
    """750 V silicon carbide part of a solar inverter: narrower necks, thinner drift, driven with 15 V."""
    v = voltage_grid(750.0)
    area, pitch, half = 6.0 * MM2, 6.0 * UM, 0.6 * UM
    c_gd, c_ds = planar_neck(
        v, material=SILICON_CARBIDE, area=area, pitch=pitch, half=half, n_neck=4.5e22, body_depth=0.6 * UM,
        drift=(1.5e22, 6.5 * UM, 0.3 * UM), t_gate=40e-9, v_built=2.9, pads=0.08 * MM2, v_flat=0.1,
    )  # fmt: skip
    wall = 2.0 * area / pitch
    channel = Channel(
        material=SILICON_CARBIDE, width=wall, length=0.5 * UM, t_oxide=40e-9, body=7.4e22, v_flat=-3.4,
        mobility=0.006, mobility_exponent=1.0, field_0=3e8, coulomb=0.003, v_saturation=1.5e5, traps=2.2e15,
        dibl=0.008, modulation=0.02, v_shield=20.0,
    )  # fmt: skip
    return Device(
        name="SOL75K28", v_ds_max=750.0, v_gs_max=20.0, v_grid=v, c_gd=c_gd, c_ds=c_ds,
        c_gs_fixed=wall * 0.25 * UM * OXIDE / 40e-9 + area * 0.5 * OXIDE / 0.9e-6,
        channel=channel, r_source=2e-3, r_drain=((9e-3, 2.1), (2.5e-3, 0.8)),
        neck=Neck(resistance=4e-3, v_pinch=22.0, v_built=2.9, exponent=2.0),
        diode=BodyDiode(
            material=SILICON_CARBIDE, diffusion=1e-46, recombination=1e-23, emission=1.0,
            resistance=28e-3, exponent=-0.3, lifetime=22e-9, transit=8e-9,
        ),
        r_gate=3.0,
    )  # fmt: skip


ALL = {
    build.__name__: build
    for build in (
        shielded_80v, superjunction_650v, silicon_carbide_1200v, p_channel_40v,
        trench_30v, shielded_150v, planar_600v, silicon_carbide_750v,
    )
}  # fmt: skip
