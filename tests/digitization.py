"""From a physical device to a part folder: the datasheet's pages, clicked by somebody who is a little off.

``write_part_folder`` writes the whole folder of any device as a user would have entered it: points at a
sensible spacing, each off by a share of the printed axes' length, each curve's axes placed a little off in
common, four digits; and table values rounded as a datasheet rounds them.
"""

from __future__ import annotations

from functools import cache
from pathlib import Path

import numpy as np
from datasheet_pages import Sheet, sheet_of
from physical_devices import Device
from printed_curves import PrintedCurve, figure, printed_curves


def click(curve, rng, point=0.003, axis=0.003):
    """Points clicked on a curve: x and y in printed units.

    Spaced evenly along the curve as it lies on the page, so denser in x where it is steep; a hand's spacing
    varies by a tenth.

    Parameters
    ----------
    curve : PrintedCurve
        With its true points, dense.
    rng : numpy.random.Generator
        Where the errors come from.
    point, axis : float
        1-sigma errors as shares of each axis' length, of each point and common to all of them, along x and
        along y.
    """
    inside = curve.x_axis.holds(curve.x) & curve.y_axis.holds(curve.y)
    u, v = curve.x_axis.place(curve.x[inside]), curve.y_axis.place(curve.y[inside])
    along = np.concatenate([[0.0], np.cumsum(np.hypot(np.diff(u), np.diff(v)))])
    where = np.linspace(0.0, along[-1], curve.points)
    where[1:-1] += rng.uniform(-0.1, 0.1, curve.points - 2) * (where[1] - where[0])
    shift_u, shift_v = rng.normal(0.0, 1.0, 2) * axis
    u = np.interp(where, along, u) + rng.normal(0.0, 1.0, curve.points) * point + shift_u
    v = np.interp(where, along, v) + rng.normal(0.0, 1.0, curve.points) * point + shift_v
    # A point that would fall beside the page is not clicked
    on_page = (u >= 0.0) & (u <= 1.0) & (v >= 0.0) & (v <= 1.0)
    order = np.argsort(u[on_page], kind="stable")
    return curve.x_axis.value(u[on_page][order]), curve.y_axis.value(v[on_page][order])


def csv_text(curves) -> str:
    """A CSV of one or more curves (columns, x, y) that share the x column.

    A cell stays blank where its curve was not clicked.
    """
    lines = [",".join([curves[0][0][0], *(columns[1] for columns, _, _ in curves)])]
    for place, (_, x, y) in enumerate(curves):
        for x_i, y_i in zip(x, y, strict=True):
            cells = [""] * len(curves)
            cells[place] = figure(y_i)
            lines.append(",".join([figure(x_i), *cells]))
    return "\n".join(lines) + "\n"


def rough(value):
    """A table value as printed: two digits, three where the first is a 1."""
    return figure(value, 3 if f"{abs(value):e}".startswith("1") else 2)


def with_limits(typ, high, *, low=None, digits=None):
    """An inline table of min, typ, max as a datasheet rounds them."""
    cells = {
        "min": low and figure(low, 2),
        "typ": figure(typ, digits) if digits else rough(typ),
        "max": rough(high),
    }
    return "{ " + ", ".join(f"{key} = {text}" for key, text in cells.items() if text) + " }"


@cache
def stated_text(device: Device, sheet: Sheet) -> str:
    """The table values of a device as the ``[stated]`` groups of part.toml."""
    sign = -1.0 if device.polarity == "p" else 1.0
    q_factor, c_factor, r_factor = sheet.factors

    def signed(value, digits=4):
        return figure(sign * value, digits)

    v = sheet.v_dd
    v_th = float(device.v_gs_th(sheet.i_th))
    low, high = v_th - sheet.v_th_spread, v_th + sheet.v_th_spread
    reading = device.read_gate_charge(v, sheet.i_d, sheet.v_gs, v_th=v_th)
    q_g = 1e9 * reading.q_g
    c_iss, c_oss, c_rss = (1e12 * float(c(v)) for c in (device.c_iss, device.c_oss, device.c_rss))
    r_on = 1e3 * float(device.r_ds_on(sheet.v_gs, sheet.i_d))
    q_oss, e_oss = float(device.q_oss(v)), float(device.e_oss(v))
    v_sd = float(device.v_sd(sheet.i_d))
    q_rr, t_rr = device.recovery(sheet.i_d, 1e6 * sheet.di_dt)
    return f"""\
# The table values, each group with its own conditions. Any of min, typ, max; a bare number means typ.
[stated.gate_charge]
vdd_V = {signed(v)}
id_A = {signed(sheet.i_d)}
vgs_V = {signed(sheet.v_gs)}
load = "current"                 # "current": inductive load or constant current; "resistive": a load resistor
qg_nC = {with_limits(q_g, q_factor * q_g)}
qgs_nC = {rough(1e9 * reading.q_gs)}
qgd_nC = {rough(1e9 * reading.q_gd)}
v_plateau_V = {signed(reading.v_plateau, 2)}

[stated.capacitance]
vds_V = {signed(v)}
ciss_pF = {with_limits(c_iss, c_factor * c_iss, digits=3)}
coss_pF = {with_limits(c_oss, 1.3 * c_oss, digits=3)}
crss_pF = {with_limits(c_rss, 1.6 * c_rss)}

[stated.threshold]
id_mA = {signed(1e3 * sheet.i_th)}
vgs_th_V = {with_limits(sign * v_th, sign * high, low=sign * low, digits=2)}

[stated.on_resistance]
vgs_V = {signed(sheet.v_gs)}
id_A = {signed(sheet.i_d)}
rds_on_mohm = {with_limits(r_on, r_factor * r_on)}

[stated.transconductance]
vds_V = {signed(sheet.g_fs_v_ds)}
id_A = {signed(sheet.i_d)}
gfs_S = {rough(device.g_fs(sheet.g_fs_v_ds, sheet.i_d))}

[stated.output_charge]
vds_V = {signed(v)}
qoss_nC = {rough(1e9 * q_oss)}
eoss_uJ = {rough(1e6 * e_oss)}
coss_er_pF = {figure(2e12 * e_oss / v**2, 3)}
coss_tr_pF = {figure(1e12 * q_oss / v, 3)}

[stated.body_diode]
is_A = {signed(sheet.i_d)}
vsd_V = {with_limits(sign * v_sd, sign * sheet.v_sd_max, digits=2)}
if_A = {signed(sheet.i_d)}
di_dt_A_per_us = {figure(sheet.di_dt)}
qrr_nC = {rough(1e9 * q_rr)}
trr_ns = {rough(1e9 * t_rr)}
"""


def head_text(device: Device, sheet: Sheet, point: float, axis: float) -> str:
    """The first tables of part.toml: the part, its package, the reading errors."""
    sign = -1 if device.polarity == "p" else 1
    l_g, l_d, l_s = sheet.leads
    name = f'"{device.name}"'
    return f"""\
# {sheet.notes}
# No such part exists: the figures come from a physical description of one, with reading errors added.
# Every key carries its unit. Copy this folder to begin one of your own.

[part]
name = {name:26}# becomes the subcircuit's name
channel = "{device.polarity}"                    # "n", or "p", entered as printed, signs and all
vds_max_V = {figure(sign * device.v_ds_max):21}# rated drain-source voltage
vgs_max_V = {figure(device.v_gs_max):21}# rated gate-source voltage
notes = "{sheet.notes}"

[package]                        # optional; goes into the netlist
rg_ohm = {figure(device.r_gate):24}# internal gate resistance
lg_nH = {figure(l_g):25}# inductances of the leads
ld_nH = {figure(l_d)}
ls_nH = {figure(l_s):25}# of the source lead shared by gate loop and power loop

[reading]                        # optional; 1-sigma reading errors as a share of the printed axis' length
point = {figure(point):25}# each clicked point, along x and along y
axis = {figure(axis):26}# where the axes were placed, common to a whole curve
"""


REMARKS = {
    "ciss": "# Capacitances at VGS = 0. Axes as printed: `from` and `to` in the column's unit.",
    "transfer": "# Transfer curves, one entry for each junction temperature.",
    "output": "# Output curves, one entry for each gate voltage.",
    "gate_charge": "# The gate-charge curve: x is the charge, y the gate voltage.",
    "body_diode": "# Body diode, channel closed, one entry for each junction temperature.",
    "rds_on_temperature": "# RDS(on)(Tj), in milliohms (rds_on_mohm) or normalised to 25 C (rds_on_ratio).",
    "vgs_th_temperature": "# VGS(th) over the junction temperature.",
}


def curve_text(curve: PrintedCurve, remark: str | None) -> str:
    """One ``[[curve]]`` entry."""
    lines = ["[[curve]]", f'quantity = "{curve.quantity}"', f'file = "{curve.file}"']
    for key, scale in (("x_axis", curve.x_axis), ("y_axis", curve.y_axis)):
        ends = f"from = {figure(scale.start)}, to = {figure(scale.end)}"
        lines.append(f'{key} = {{ scale = "{scale.scale}", {ends} }}')
    return "\n".join(([remark] if remark else []) + [*lines, curve.conditions, ""])


def write_part_folder(
    device: Device,
    folder: Path,
    seed: int,
    point: float = 0.003,
    axis: float = 0.003,
    *,
    include=None,
    stated: bool = True,
    sheet: Sheet | None = None,
) -> Path:
    """Write the part folder of a device as a user would have entered it.

    Parameters
    ----------
    device : Device
        What is on the datasheet.
    folder : Path
        Made if it is not there; files of the same names are replaced.
    seed : int
        Of the reading errors: the same seed gives the same text, and leaving curves out does not change the
        others.
    point, axis : float
        1-sigma errors as shares of each axis' length.
    include : callable or collection of str, optional
        Quantities to write, or a function of a PrintedCurve that says whether to; all if not given.
    stated : bool
        Whether to write the table values.
    sheet : Sheet, optional
        Another datasheet of the same device, say with other conditions.

    Returns
    -------
    Path
        The folder.
    """
    sheet = sheet_of(device) if sheet is None else sheet
    folder = Path(folder)
    folder.mkdir(parents=True, exist_ok=True)
    wanted = include if callable(include) else lambda curve: include is None or curve.quantity in include
    entries, files, told = [], {}, set()
    for number, curve in enumerate(printed_curves(device, sheet)):
        if not wanted(curve):
            continue
        x, y = click(curve, np.random.default_rng([seed, number]), point, axis)
        files.setdefault(curve.file, []).append((curve.columns, x, y))
        entries.append(curve_text(curve, None if curve.quantity in told else REMARKS.get(curve.quantity)))
        told.add(curve.quantity)
    texts = {name: csv_text(curves) for name, curves in files.items()}
    tables = [stated_text(device, sheet)] if stated else []
    texts["part.toml"] = "\n".join([head_text(device, sheet, point, axis), *entries, *tables])
    for name, text in texts.items():
        (folder / name).write_text(text, encoding="utf-8", newline="\n")
    return folder
