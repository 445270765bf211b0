"""The model as tables: parameters, comparison, digitized against fitted points, the gate-charge curve.

A p-channel part's voltages and currents are negative here, as on its datasheet; charges, capacitances and energies
are positive.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import pandas as pd

from fitter.comparison import Comparison
from fitter.gate_charge import GateChargeCurve
from fitter.leave_out import MEAN, LeftOut
from fitter.model import FittedModel
from fitter.units import si_factor
from fitter.variants import Variant

__all__ = [
    "GATE_CHARGE_COLUMNS",
    "SHOWN",
    "Shown",
    "checks_frame",
    "csv_text",
    "curves_frame",
    "gate_charge_frame",
    "left_out_frame",
    "limits_frame",
    "parameters_frame",
    "ShownLeftOut",
    "shown_checks",
    "shown_left_out",
]

#: Unit in which each stated quantity is shown, as datasheets print it, and whether it changes sign with the channel.
SHOWN = {
    "qg": ("nC", 1e9, False), "qgs": ("nC", 1e9, False), "qgd": ("nC", 1e9, False), "v_plateau": ("V", 1.0, True),
    "ciss": ("pF", 1e12, False), "coss": ("pF", 1e12, False), "crss": ("pF", 1e12, False),
    "vgs_th": ("V", 1.0, True), "rds_on": ("mohm", 1e3, False), "gfs": ("S", 1.0, False),
    "qoss": ("nC", 1e9, False), "eoss": ("uJ", 1e6, False), "coss_er": ("pF", 1e12, False),
    "coss_tr": ("pF", 1e12, False), "vsd": ("V", 1.0, True), "qrr": ("nC", 1e9, False), "trr": ("ns", 1e9, False),
}  # fmt: skip

#: Columns of ``gate_charge.csv``.
GATE_CHARGE_COLUMNS = ("qg_nC", "vgs_V", "vds_V", "id_A")

_SIGNED_UNITS = ("V", "A")


@dataclass(frozen=True, kw_only=True)
class Shown:
    """A comparison in the units and with the signs of the datasheet.

    Parameters
    ----------
    check : Comparison
        The comparison in SI.
    unit : str
        Unit of the figures below.
    stated_min, stated_typ, stated_max, fitted, low, high : float or None
        [unit]; low <= fitted <= high.
    """

    check: Comparison
    unit: str
    stated_min: float | None
    stated_typ: float | None
    stated_max: float | None
    fitted: float | None
    low: float | None
    high: float | None


def shown_checks(model: FittedModel) -> tuple[Shown, ...]:
    """The comparison in the units and with the signs of the datasheet."""
    result = []
    for check in model.checks:
        unit, factor, signed = SHOWN[check.quantity]
        factor = factor * (model.sign if signed else 1.0)

        def figure(value: float | None, factor: float = factor) -> float | None:
            return None if value is None else value * factor

        low, high = figure(check.low), figure(check.high)
        if factor < 0.0:
            low, high = high, low
        result.append(
            Shown(
                check=check, unit=unit, stated_min=figure(check.stated.min), stated_typ=figure(check.stated.typ),
                stated_max=figure(check.stated.max), fitted=figure(check.fitted), low=low, high=high,
            )
        )  # fmt: skip
    return tuple(result)


def parameters_frame(model: FittedModel) -> pd.DataFrame:
    """The parameter set in SI: name, value, stderr, unit, origin."""
    rows = [(p.name, p.value, p.stderr, p.unit, p.origin) for p in model.parameters.values()]
    return pd.DataFrame(rows, columns=["name", "value", "stderr", "unit", "origin"])


def checks_frame(model: FittedModel) -> pd.DataFrame:
    """Stated against fitted, a row for each stated value, in the units of the datasheet."""
    rows = [
        (
            s.check.quantity, s.unit, s.check.condition, s.stated_min, s.stated_typ, s.stated_max, s.fitted, s.low,
            s.high, None if s.check.deviation is None else 100.0 * s.check.deviation,
            "yes" if s.check.used_in_fit else "no", s.check.verdict,
        )
        for s in shown_checks(model)
    ]  # fmt: skip
    columns = [
        "quantity", "unit", "condition", "stated_min", "stated_typ", "stated_max", "fitted", "fitted_low",
        "fitted_high", "deviation_percent", "used_in_fit", "verdict",
    ]  # fmt: skip
    return pd.DataFrame(rows, columns=columns)


def curves_frame(model: FittedModel) -> pd.DataFrame:
    """Each digitized point beside the fitted value, in the units of its file."""
    rows = []
    curves = {curve.name: curve for curve in model.part.curves}
    for point in model.points:
        curve = curves[point.curve]
        x_unit, y_unit = curve.x_column.rpartition("_")[2], curve.y_column.rpartition("_")[2]
        x_factor, y_factor = _file_factor(x_unit, curve.x_unit), _file_factor(y_unit, curve.y_unit)
        x_sign = model.sign if curve.x_unit in _SIGNED_UNITS else 1.0
        y_sign = model.sign if curve.y_unit in _SIGNED_UNITS else 1.0
        rows.append((
            point.curve, x_sign * point.x / x_factor, x_unit, y_sign * point.y / y_factor, y_unit,
            y_sign * point.fitted / y_factor, point.residual,
        ))  # fmt: skip
    return pd.DataFrame(rows, columns=["curve", "x", "x_unit", "y", "y_unit", "fitted", "residual"])


def _file_factor(unit: str, base: str) -> float:
    return si_factor(unit, base) if base else 1.0


@dataclass(frozen=True, kw_only=True)
class ShownLeftOut:
    """A figure that was left out, in the units and with the signs of the datasheet.

    Parameters
    ----------
    row : LeftOut
        The figure in SI.
    unit : str
        Unit of the figures below.
    given, predicted, low, high : float or None
        [unit]; low <= predicted <= high.
    """

    row: LeftOut
    unit: str
    given: float
    predicted: float | None
    low: float | None
    high: float | None


def shown_left_out(model: FittedModel) -> tuple[ShownLeftOut, ...]:
    """What was left out and predicted, in the units and with the signs of the datasheet."""
    columns = {c.name: c for c in model.part.curves}
    result = []
    for row in model.left_out:
        if row.condition != MEAN:
            unit, factor, signed = SHOWN[row.quantity]
        else:
            curve = columns[row.left_out]
            unit = curve.y_column.rpartition("_")[2]
            factor = 1.0 / _file_factor(unit, curve.y_unit)
            signed = curve.y_unit in _SIGNED_UNITS
        factor *= model.sign if signed else 1.0
        ends = [None if x is None else x * factor for x in (row.predicted, row.low, row.high)]
        if factor < 0.0:
            ends = [ends[0], ends[2], ends[1]]
        result.append(
            ShownLeftOut(
                row=row, unit=unit, given=row.given * factor, predicted=ends[0], low=ends[1], high=ends[2],
            )
        )  # fmt: skip
    return tuple(result)


def left_out_frame(model: FittedModel) -> pd.DataFrame:
    """Each group of data predicted from the others: a row for each figure, in the units of the datasheet."""
    rows = [
        (
            s.row.left_out, s.row.quantity, s.unit, s.row.condition, s.given, s.predicted, s.low, s.high,
            None if s.predicted is None else 100.0 * (s.predicted / s.given - 1.0), s.row.sigmas,
        )
        for s in shown_left_out(model)
    ]  # fmt: skip
    columns = [
        "left_out", "quantity", "unit", "condition", "given", "predicted", "predicted_low", "predicted_high",
        "deviation_percent", "sigmas",
    ]  # fmt: skip
    return pd.DataFrame(rows, columns=columns)


def limits_frame(model: FittedModel, variants: Sequence[Variant[Any]]) -> pd.DataFrame:
    """The variants against the stated limits, in the units of the datasheet: a row for each variant and quantity."""
    rows = []
    for variant in variants:
        for row in variant.rows:
            unit, factor, signed = SHOWN[row.quantity]
            factor *= model.sign if signed else 1.0
            stated, value = row.stated, row.value
            figures = [None if x is None else x * factor for x in (stated.min, stated.typ, stated.max, value)]
            rows.append((
                variant.kind, row.quantity, unit, row.condition, *figures, "yes" if row.moved else "no",
                "no limit stated" if row.met is None else "met" if row.met else "not met",
            ))  # fmt: skip
    columns = [
        "variant", "quantity", "unit", "condition", "stated_min", "stated_typ", "stated_max", "value", "set_by_limit",
        "limits",
    ]  # fmt: skip
    return pd.DataFrame(rows, columns=columns)


def gate_charge_frame(curve: GateChargeCurve) -> pd.DataFrame:
    """A gate-charge curve: qg_nC, vgs_V, vds_V, id_A."""
    columns = (curve.q_g * 1e9, curve.v_gs, curve.v_ds, curve.i_d)
    return pd.DataFrame(dict(zip(GATE_CHARGE_COLUMNS, columns, strict=True)))


def _no_formula(cell: object) -> object:
    return f"'{cell}" if isinstance(cell, str) and cell.startswith(("=", "+", "-", "@", "\t", "\r")) else cell


def csv_text(frame: pd.DataFrame) -> str:
    """A table as CSV: comma, a header line, ten significant digits, empty cells for what is not known.

    A text that a spreadsheet would take for a formula gets an apostrophe in front.
    """
    texts = frame.select_dtypes(exclude="number").columns
    frame = frame.copy()
    for name in texts:
        frame[name] = frame[name].map(_no_formula)
    return str(frame.to_csv(index=False, float_format="%.10g", lineterminator="\n"))
