"""The invented parts and the physics they come from: closed forms, published figures, orders of magnitude."""

from __future__ import annotations

from dataclasses import replace

import cell_physics as physics
import digitization
import numpy as np
import pytest
from cell_physics import OXIDE, SILICON, SILICON_CARBIDE, Channel, Q
from datasheet_pages import sheet_of
from device_scenarios import ALL
from make_demo_parts import DEMO_PARTS, FOLDERS, write_demo_parts
from scipy.constants import epsilon_0
from scipy.integrate import trapezoid

from fitter.part import Quantity
from fitter.reader import read_part

DEVICES = pytest.mark.parametrize("name", ALL)
N_SILICON_118 = replace(SILICON, permittivity=11.8 * epsilon_0)


def uniform(doping, depth=20e-6):
    x = physics.depth_grid(depth)
    return x, np.full_like(x, doping)


# The folders


def test_the_folders_are_what_their_script_writes(tmp_path):
    for folder in write_demo_parts(tmp_path):
        kept = FOLDERS / folder.name
        names = {file.name for file in folder.iterdir()}
        assert names == {file.name for file in kept.iterdir() if file.is_file()}
        for name in names:
            assert (folder / name).read_text("utf-8") == (kept / name).read_text("utf-8"), f"{folder.name}/{name}"


@pytest.mark.parametrize("folder", DEMO_PARTS)
def test_the_folders_are_read_without_a_notice_and_hold_every_quantity(folder):
    part = read_part(FOLDERS / folder)
    assert part.notices == ()
    assert {curve.quantity for curve in part.curves} == set(Quantity)
    assert len(part.curves_of(Quantity.OUTPUT)) >= 4
    stated = part.stated
    assert all(getattr(stated, group) is not None for group in stated.__dataclass_fields__)
    assert "nvented" in part.notes


def test_the_p_channel_part_is_printed_with_its_signs():
    text = (FOLDERS / "camper_van_p40v" / "part.toml").read_text("utf-8")
    assert "vds_max_V = -40" in text
    assert "from = 0, to = -40" in text
    assert "id_mA = -0.25" in text
    header, *rows = (FOLDERS / "camper_van_p40v" / "gate_charge.csv").read_text("utf-8").split()
    assert header == "qg_nC,vgs_V"
    assert all(float(q) > 0.0 > float(v) for q, v in (row.split(",") for row in rows[1:]))


# Clicking


def test_clicks_are_off_by_the_stated_shares_of_the_axes():
    device = ALL["shielded_150v"]()
    curve = next(
        c for c in digitization.printed_curves(device) if c.quantity == "output" and "vgs_V = 5.5" in c.conditions
    )
    flat = replace(curve, x=np.linspace(0.2, 3.8, 50), y=np.full(50, 80.0))
    common, single = [], []
    for seed in range(400):
        _, y = digitization.click(flat, np.random.default_rng(seed), point=0.003, axis=0.004)
        off = y / curve.y_axis.end - 0.5
        common.append(off.mean())
        single.append(off.std(ddof=1))
    assert np.mean(single) == pytest.approx(0.003, rel=0.05)
    assert np.std(common) == pytest.approx(np.hypot(0.004, 0.003 / 4.0), rel=0.1)


def test_without_errors_the_clicks_lie_on_the_curve_and_on_the_page():
    device = ALL["superjunction_650v"]()
    for curve in digitization.printed_curves(device):
        x, y = digitization.click(curve, np.random.default_rng(1), point=0.0, axis=0.0)
        assert x.size >= curve.points - 2
        u, v = curve.x_axis.place(curve.x), curve.y_axis.place(curve.y)
        away = np.hypot(np.subtract.outer(curve.x_axis.place(x), u), np.subtract.outer(curve.y_axis.place(y), v))
        assert np.max(np.min(away, axis=1)) < 0.03
        assert np.all(curve.x_axis.holds(x) & curve.y_axis.holds(y))


def test_part_of_a_folder_leaves_the_rest_as_it_was(tmp_path):
    device = ALL["trench_30v"]()
    whole = digitization.write_part_folder(device, tmp_path / "whole", 5)
    less = digitization.write_part_folder(device, tmp_path / "less", 5, include={"crss", "transfer"}, stated=False)
    assert {f.name for f in less.iterdir()} == {
        "part.toml",
        "crss.csv",
        "transfer_25C.csv",
        "transfer_150C.csv",
    }
    assert (less / "crss.csv").read_text() == (whole / "crss.csv").read_text()
    assert "[stated" not in (less / "part.toml").read_text()


# Depletion


def test_depletion_of_uniform_doping_is_the_abrupt_junction():
    """1/C^2 is a straight line of slope 2/(q eps N), from -Vbi (Sze & Ng, ch. 2)."""
    v = np.linspace(0.5, 60.0, 30)
    w = physics.depletion_width(v, *uniform(1e22), SILICON, v_built=0.7)
    slope, offset = np.polyfit(v, (w / SILICON.permittivity) ** 2, 1)
    assert slope == pytest.approx(2.0 / (Q * SILICON.permittivity * 1e22), rel=1e-3)
    assert offset / slope == pytest.approx(0.7, abs=0.02)


def test_depletion_gives_published_junctions():
    # Wilson & Hawkes, Optoelectronics, example 2.6 (inputs): 33.4 pF
    w = physics.depletion_width(4.0, *uniform(4e21), N_SILICON_118, v_built=0.8)
    assert 4e-7 * N_SILICON_118.permittivity / w == pytest.approx(33.4e-12, rel=2e-3)
    # G. Tuttle, Iowa State University, pn-junction practice problem (inputs): 68.1 nm, 153 nF/cm^2 at 0 V
    both = 4e23 * 8e23 / (4e23 + 8e23)
    w = physics.depletion_width(0.0, *uniform(both, 1e-6), N_SILICON_118, v_built=0.949)
    assert w == pytest.approx(68.1e-9, rel=2e-3)
    assert N_SILICON_118.permittivity / w == pytest.approx(153e-5, rel=3e-3)


def test_surface_capacitance_between_its_limits():
    """Oxide; with eps/L_D in series at flat band; Cox/sqrt(1 + 2V/V0) depleted (Sze & Ng, ch. 4)."""
    t, n = 50e-9, 2e22
    c_ox, u_t, eps = OXIDE / t, physics.thermal_voltage(25.0), SILICON.permittivity
    accumulated, flat, deep = physics.surface_capacitance(np.array([-5.0, 0.0, 12.0]), *uniform(n), SILICON, t)
    assert 0.98 * c_ox < accumulated < c_ox, "what is missing is the accumulation layer's own thickness"
    debye = np.sqrt(eps * u_t / (Q * n))
    assert flat == pytest.approx(1.0 / (1.0 / c_ox + debye / eps), rel=0.01)
    assert deep == pytest.approx(c_ox / np.sqrt(1.0 + 2.0 * (12.0 - u_t) * c_ox**2 / (Q * n * eps)), rel=0.01)


def test_a_pinched_profile_ends():
    assert physics.surface_capacitance(np.array([40.0]), *uniform(2e22, 0.4e-6), SILICON, 50e-9) == 0.0


def test_intrinsic_density():
    """About 1e10 cm^-3 in silicon, below 1e-7 in silicon carbide, at 25 C (common practice, no source)."""
    assert 0.6e16 < np.exp(SILICON.log_intrinsic(25.0)) < 1.5e16
    assert np.exp(SILICON_CARBIDE.log_intrinsic(25.0)) < 0.1


# Channel


@pytest.fixture
def long_channel():
    return Channel(
        material=SILICON, width=1.0, length=20e-6, t_oxide=50e-9, body=5e22, v_flat=-1.0, mobility=0.05,
        field_0=1e12, v_saturation=1e9, dibl=0.0, modulation=0.0, mobility_exponent=0.0,
    )  # fmt: skip


@pytest.mark.parametrize("v_gs", [5.0, 9.0])
def test_channel_far_above_threshold_is_the_long_channel_transistor(long_channel, v_gs):
    """Against the drift integral without linearisation, at pinch-off and in triode (Sze & Ng, ch. 6).

    That integral holds the surface at 2 phi_F; the few kT/q that it bends further are what is missing.
    """
    k = long_channel.mobility * long_channel.c_oxide * long_channel.width / long_channel.length
    two_fermi, gamma = 2.0 * SILICON.fermi(5e22, 25.0), long_channel.body_factor
    pinch_off = float(long_channel.surface(v_gs + 1.0, two_fermi)[0]) - two_fermi
    for v_ds, tolerance in ((pinch_off, 0.09), (0.05, 0.09)):
        body = (2.0 / 3.0) * gamma * ((v_ds + two_fermi) ** 1.5 - two_fermi**1.5)
        drift = k * ((v_gs + 1.0 - two_fermi - 0.5 * v_ds) * v_ds - body)
        beyond = 10.0 if v_ds == pinch_off else 0.0
        assert float(long_channel.state(v_gs, v_ds + beyond)[0]) == pytest.approx(drift, rel=tolerance)


def test_channel_below_threshold_is_exponential(long_channel):
    psi = 1.6 * SILICON.fermi(5e22, 25.0)
    v = -1.0 + psi + long_channel.body_factor * np.sqrt(psi)
    n = 1.0 + 0.5 * long_channel.body_factor / np.sqrt(psi)
    ratio = long_channel.state(v + 0.005, 5.0)[0] / long_channel.state(v - 0.005, 5.0)[0]
    assert np.log(ratio) == pytest.approx(0.01 / (n * physics.thermal_voltage(25.0)), rel=0.02)


def test_channel_charge_is_two_thirds_in_saturation(long_channel):
    triode, saturated = (float(long_channel.state(6.0, v)[1]) for v in (0.0, 50.0))
    psi = float(long_channel.surface(6.0 + 1.0, 2.0 * SILICON.fermi(5e22, 25.0))[0])
    body = 20e-6 * long_channel.c_oxide * (6.0 + 1.0 - psi)
    assert (saturated - body) / (triode - body) == pytest.approx(2.0 / 3.0, rel=0.02)


def test_channel_exchanges_source_and_drain(long_channel):
    forward, reverse = long_channel.state(5.0, 1.0), long_channel.state(4.0, -1.0)
    assert float(forward[0]) == pytest.approx(-float(reverse[0]), rel=1e-12)


def test_velocity_saturation_limits_the_current(long_channel):
    short = replace(long_channel, length=0.2e-6, v_saturation=8e4)
    most = short.width * short.c_oxide * 3.5 * 8e4
    assert 0.3 * most < float(short.state(6.0, 20.0)[0]) < most


# Devices


@DEVICES
def test_capacitances_are_derivatives_of_one_gate_charge(name):
    device, step = ALL[name](), 1e-3
    v = np.geomspace(0.2, 0.95 * device.v_ds_max, 12)
    along_gate = (device.q_gate(step, v) - device.q_gate(-step, v)) / (2 * step)
    along_drain = (device.q_gate(0.0, v - step) - device.q_gate(0.0, v + step)) / (2 * step)
    assert np.allclose(device.c_iss(v), along_gate, rtol=2e-3)
    assert np.allclose(device.c_rss(v), along_drain, rtol=2e-3)


@DEVICES
@pytest.mark.parametrize("load", ["current", "resistive"])
def test_gate_charge_is_the_integral_of_the_capacitances_along_its_path(name, load):
    device, step = ALL[name](), 1e-3
    sheet = sheet_of(device)
    curve = device.gate_charge(sheet.v_dd, sheet.i_d, sheet.v_gs, load, points=4000)
    i, r_s = curve.i_d, device._r_source(25.0)
    g, d = curve.v_gs - i * r_s, curve.v_ds - i * r_s - device._drain_drop(i, 25.0)
    by_gate = (device.q_gate(g + step, d) - device.q_gate(g - step, d)) / (2 * step)
    by_drain = (device.q_gate(g, d + step) - device.q_gate(g, d - step)) / (2 * step)
    middle = [0.5 * (c[1:] + c[:-1]) for c in (by_gate, by_drain)]
    total = float(np.sum(middle[0] * np.diff(g) + middle[1] * np.diff(d)))
    assert curve.q_g[-1] == pytest.approx(total, rel=3e-3)
    assert curve.q_g[0] == 0.0
    assert np.all(np.diff(curve.q_g) > -1e-15)
    assert np.all(np.diff(curve.v_gs) > -1e-6)
    assert curve.v_gs[-1] == pytest.approx(sheet.v_gs, rel=1e-6)
    carried = device.drain_current(curve.v_gs[-300:], curve.v_ds[-300:])
    assert np.allclose(carried, i[-300:], rtol=1e-3)
    if load == "resistive":
        expected = sheet.v_dd * (1.0 - i / sheet.i_d)
        assert np.allclose(curve.v_ds, expected, atol=1e-5 * sheet.v_dd)


@DEVICES
def test_output_charge_and_energy(name):
    device = ALL[name]()
    v_ds = sheet_of(device).v_dd
    v = np.concatenate([np.linspace(0.0, 1.0, 2000), np.geomspace(1.0, v_ds, 8000)[1:]])
    assert float(device.q_oss(v_ds)) == pytest.approx(trapezoid(device.c_oss(v), v), rel=1e-3)
    assert float(device.e_oss(v_ds)) == pytest.approx(trapezoid(device.c_oss(v) * v, v), rel=1e-3)
    c_tr, c_er = float(device.q_oss(v_ds)) / v_ds, 2.0 * float(device.e_oss(v_ds)) / v_ds**2
    assert c_tr > c_er > float(device.c_oss(v_ds))


@DEVICES
def test_curves_rise_and_fall_as_they_must(name):
    device = ALL[name]()
    v = np.geomspace(0.1, device.v_ds_max, 400)
    assert np.all(np.diff(device.c_oss(v)) < 0.0)
    assert np.all(device.c_rss(v) < device.c_iss(v))
    crss = device.c_rss(v)
    lowest = np.argmin(crss)
    assert np.all(np.diff(crss[: lowest + 1]) < 0.0)
    assert crss[-1] < 1.5 * crss[lowest], "a slight rise at high voltage at the most"
    v_gs = np.linspace(0.5, device.v_gs_max, 60)
    assert np.all(np.diff(device.drain_current(v_gs, 10.0)) > 0.0)
    v_ds = np.linspace(-2.0, 20.0, 89)
    assert np.all(np.diff(device.drain_current(0.5 * device.v_gs_max, v_ds)) > 0.0)
    assert abs(float(device.drain_current(0.5 * device.v_gs_max, 0.0))) < 1e-9


@DEVICES
def test_gate_charge_is_in_proportion_as_on_datasheets(name):
    """QGS = Ciss(VDD) Vplateau, nearly; the last leg 1.2 to 2.3 times Ciss: read off published tables."""
    device = ALL[name]()
    sheet = sheet_of(device)
    reading = device.read_gate_charge(sheet.v_dd, sheet.i_d, sheet.v_gs, v_th=float(device.v_gs_th(sheet.i_th)))
    c_iss = float(device.c_iss(sheet.v_dd))
    assert 0.9 < reading.q_gs / (c_iss * reading.v_plateau) < 1.05
    curve = device.gate_charge(sheet.v_dd, sheet.i_d, sheet.v_gs)
    last = curve.v_gs > 0.5 * (reading.v_plateau + sheet.v_gs)
    assert 1.2 < np.polyfit(curve.v_gs[last], curve.q_g[last], 1)[0] / c_iss < 2.3
    assert float(device.c_rss(sheet.v_dd)) * sheet.v_dd < reading.q_gd
    assert float(device.v_gs_th(sheet.i_th)) < reading.v_plateau


# At VDD: Ciss nF, Coss pF, Crss pF, QG nC, RDS(on) mohm, VGS(th) V: from, to, of parts of the kind
# (common practice, no source)
KIND = {
    "shielded_80v": ((3, 5), (500, 800), (15, 40), (50, 75), (3, 4), (2, 4)),
    "superjunction_650v": ((1.5, 3), (25, 60), (0.5, 5), (35, 60), (80, 110), (3, 4.5)),
    "silicon_carbide_1200v": ((1.4, 2.5), (80, 150), (3, 12), (50, 90), (25, 45), (2.5, 4.5)),
    "p_channel_40v": ((2, 4), (350, 700), (100, 300), (40, 70), (6, 12), (1.2, 2.5)),
    "trench_30v": ((1.5, 3), (250, 700), (60, 200), (25, 50), (3, 6), (1.2, 2.2)),
    "shielded_150v": ((3, 5), (150, 400), (5, 20), (45, 75), (6, 10), (2.5, 4)),
    "planar_600v": ((2, 3.5), (70, 150), (4, 15), (45, 80), (250, 350), (3, 4.5)),
    "silicon_carbide_750v": ((0.8, 1.6), (70, 150), (3, 10), (25, 45), (20, 40), (2.5, 4.5)),
}


@DEVICES
def test_orders_of_magnitude(name):
    device = ALL[name]()
    sheet = sheet_of(device)
    v = sheet.v_dd
    figures = (
        1e9 * device.c_iss(v), 1e12 * device.c_oss(v), 1e12 * device.c_rss(v),
        1e9 * device.gate_charge(v, sheet.i_d, sheet.v_gs).q_g[-1],
        1e3 * device.r_ds_on(sheet.v_gs, sheet.i_d), device.v_gs_th(sheet.i_th),
    )  # fmt: skip
    for value, (low, high) in zip(figures, KIND[name], strict=True):
        assert low < float(value) < high


@DEVICES
def test_heat(name):
    """Threshold -2.6 to -10 mV/K; RDS(on) at 150 C over 25 C up to 2.4 (published datasheets)."""
    device = ALL[name]()
    sheet = sheet_of(device)
    cold, hot = device.v_gs_th(sheet.i_th, np.array([25.0, 125.0]))
    assert -10e-3 < (hot - cold) / 100.0 < -2.6e-3
    r_on = device.r_ds_on(sheet.v_gs, sheet.i_d, np.array([25.0, 150.0]))
    assert 1.2 < r_on[1] / r_on[0] < 2.4
    currents = np.geomspace(1e-2, 1.0, 9) * sheet.i_d
    assert np.all(device.v_sd(currents, 150.0) < device.v_sd(currents, 25.0))


@DEVICES
def test_recovery_is_what_its_equations_give_in_small_steps(name):
    device = ALL[name]()
    diode, i_f = device.diode, sheet_of(device).i_d
    di_dt = 1e6 * sheet_of(device).di_dt
    q_rr, t_rr = device.recovery(i_f, di_dt)
    steps = 40000
    dt = (i_f / di_dt + 5.0 * t_rr) / steps
    q_m, charge, blocking = diode.lifetime * i_f, 0.0, False
    for k in range(steps):
        i = i_f - di_dt * (k + 0.5) * dt
        blocking = blocking or q_m + diode.transit * i < 0.0
        i = -q_m / diode.transit if blocking else i
        q_m += dt * (i - q_m / diode.lifetime)
        charge -= min(i, 0.0) * dt
    assert charge == pytest.approx(q_rr, rel=0.01)
    assert 0.0 < q_rr < diode.lifetime * i_f * 1.5
