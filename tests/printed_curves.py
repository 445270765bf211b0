"""The curves of a device's datasheet as they are printed: columns, units, signs, axes; no errors yet."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
from datasheet_pages import Scale, Sheet, sheet_of
from physical_devices import Device

UNITS = {"V": 1.0, "A": 1.0, "C": 1.0, "ratio": 1.0, "pF": 1e-12, "nC": 1e-9, "mohm": 1e-3}


@dataclass(frozen=True, kw_only=True)
class PrintedCurve:
    """One curve as printed.

    Parameters
    ----------
    quantity, file : str
        What it shows, and the CSV file that it goes to.
    columns : (str, str)
        Of x and y, ``<symbol>_<unit>``.
    x, y : ndarray
        Dense points in those units and with the printed signs.
    x_axis, y_axis : Scale
        The printed axes.
    conditions : str
        Lines of part.toml.
    points : int
        How many of them a person would click.
    """

    quantity: str
    file: str
    columns: tuple[str, str]
    x: np.ndarray
    y: np.ndarray
    x_axis: Scale
    y_axis: Scale
    conditions: str
    points: int


def figure(value, digits=4):
    """A number to so many significant digits, without an exponent."""
    if abs(value) < 1e-12:
        return "0"
    return f"{float(f'{value:.{digits}g}'):.9f}".rstrip("0").rstrip(".")


def named(value):
    """A number in a file's name."""
    return figure(value).replace("-", "m").replace(".", "p")


@cache
def printed_curves(device: Device, sheet: Sheet | None = None) -> tuple[PrintedCurve, ...]:
    """All curves of a device's datasheet; worked out once."""
    sheet = sheet_of(device) if sheet is None else sheet
    page = _Page(-1.0 if device.polarity == "p" else 1.0)
    _capacitances(page, device, sheet)
    _channel(page, device, sheet)
    _gate_charge_and_diode(page, device, sheet)
    _temperature(page, device, sheet)
    return tuple(page.curves)


class _Page:
    """Collects curves, turning SI and n-channel polarity into what is printed."""

    def __init__(self, sign):
        self.sign = sign
        self.curves = []

    def signed(self, value):
        return figure(self.sign * value)

    def add(self, quantity, file, columns, values, axes, points, **conditions):
        """One curve; `values` and `axes` are of x and y, conditions given as text go in as they are."""
        units = [column.rpartition("_")[2] for column in columns]
        signs = [self.sign if unit in ("V", "A") else 1.0 for unit in units]
        x, y = (s * np.asarray(v) / UNITS[u] for s, v, u in zip(signs, values, units, strict=True))
        x_axis, y_axis = (axis.times(s) for axis, s in zip(axes, signs, strict=True))
        texts = [f"{key} = {v if isinstance(v, str) else self.signed(v)}" for key, v in conditions.items()]
        self.curves.append(
            PrintedCurve(
                quantity=quantity, file=f"{file}.csv", columns=columns, x=x, y=y, x_axis=x_axis,
                y_axis=y_axis, conditions="\n".join(texts), points=points,
            )
        )  # fmt: skip


def _capacitances(page, device, sheet):
    v_ds = sheet.c_axes[0].sweep(2500)
    v_ds = v_ds[v_ds <= device.v_ds_max]
    for name, c in (("ciss", device.c_iss), ("coss", device.c_oss), ("crss", device.c_rss)):
        file = "capacitance" if sheet.shared_file else name
        columns = ("vds_V", f"{name}_pF")
        page.add(name, file, columns, (v_ds, c(v_ds)), sheet.c_axes, sheet.c_points, vgs_V="0", frequency_MHz="1")


def _channel(page, device, sheet):
    v_gs = sheet.transfer_axes[0].sweep(700)
    for t_j in sheet.transfer_t_j:
        i_d = device.drain_current(v_gs, sheet.transfer_v_ds, t_j)
        # On a linear axis nobody clicks where the curve still lies on the axis
        seen = i_d > (0.008 * sheet.transfer_axes[1].end if sheet.transfer_axes[1].scale == "linear" else 0.0)
        page.add(
            "transfer", f"transfer_{named(t_j)}C", ("vgs_V", "id_A"), (v_gs[seen], i_d[seen]),
            sheet.transfer_axes, 20, vds_V=sheet.transfer_v_ds, tj_C=str(t_j),
        )  # fmt: skip
    v_ds = sheet.output_axes[0].sweep(400)
    for v_gs in sheet.output_v_gs:
        page.add(
            "output", f"output_{named(v_gs)}V", ("vds_V", "id_A"), (v_ds, device.drain_current(v_gs, v_ds)),
            sheet.output_axes, 16, vgs_V=v_gs, tj_C="25",
        )  # fmt: skip


def _gate_charge_and_diode(page, device, sheet):
    charge = device.gate_charge(sheet.v_dd, sheet.i_d, sheet.v_gs)
    page.add(
        "gate_charge", "gate_charge", ("qg_nC", "vgs_V"), (charge.q_g, charge.v_gs), sheet.charge_axes, 36,
        vdd_V=sheet.v_dd, id_A=sheet.i_d, load='"current"',
    )  # fmt: skip
    i_s = sheet.diode_axes[1].sweep(300)
    for t_j in sheet.diode_t_j:
        page.add(
            "body_diode", f"body_diode_{named(t_j)}C", ("vsd_V", "is_A"), (device.v_sd(i_s, t_j), i_s),
            sheet.diode_axes, 18, tj_C=str(t_j), vgs_V=sheet.diode_v_gs,
        )  # fmt: skip


def _temperature(page, device, sheet):
    t_j = np.linspace(-50.0, sheet.hot, 26)
    r_on = device.r_ds_on(sheet.v_gs, sheet.i_d, t_j)
    y, column = r_on, "rds_on_mohm"
    if not sheet.r_on_in_mohm:
        y, column = r_on / device.r_ds_on(sheet.v_gs, sheet.i_d), "rds_on_ratio"
    page.add(
        "rds_on_temperature", "rds_on_temperature", ("tj_C", column), (t_j, y), sheet.r_on_axes, 14,
        id_A=sheet.i_d, vgs_V=sheet.v_gs,
    )  # fmt: skip
    v_th, columns = device.v_gs_th(sheet.i_th, t_j), ("tj_C", "vgs_th_V")
    page.add("vgs_th_temperature", "vgs_th_temperature", columns, (t_j, v_th), sheet.v_th_axes, 12, id_A=sheet.i_th)
