"""A curve's entry in the part file: what it shows, where its points are, its axes, errors and conditions."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal, cast

from fitter.part import Load, Quantity
from fitter.reading.input_files import file_name
from fitter.reading.problems import quoted, with_article
from fitter.reading.schema import CONDITIONS, CURVES, Condition, CurveSchema
from fitter.reading.toml_tables import PLACEHOLDER, TomlTable
from fitter.units import engineering

__all__ = [
    "LOADS",
    "AxisEntry",
    "CurveEntry",
    "ReadingErrors",
    "StatedConditions",
    "curve_entry",
    "load_of",
    "share",
]

LOADS: tuple[Load, ...] = ("current", "resistive")
SCALES = ("linear", "log")
_CAPACITANCES = (Quantity.CISS, Quantity.COSS, Quantity.CRSS)
_SMALLEST_SHARE, _LARGEST_SHARE = 1e-6, 0.1
_SMALLEST_END, _LARGEST_END = 1e-12, 1e12


@dataclass(frozen=True, kw_only=True)
class ReadingErrors:
    """1-sigma errors of clicking, as shares of the printed axis' length.

    Parameters
    ----------
    point : float
        Of each point, independently.
    axis : float
        Of a whole curve in common.
    """

    point: float = 0.003
    axis: float = 0.003


@dataclass(frozen=True, kw_only=True)
class StatedConditions:
    """Conditions of the stated groups, which curves without their own may take.

    Parameters
    ----------
    figures : mapping of str to mapping of str to float
        In SI, by group and attribute.
    load : {"current", "resistive"} or None
        Of the stated gate charge, where it is said.
    """

    figures: Mapping[str, Mapping[str, float]]
    load: Load | None


@dataclass(frozen=True, kw_only=True)
class AxisEntry:
    """A printed axis as entered: its two ends in the unit of the curve's column."""

    scale: Literal["linear", "log"]
    ends: tuple[float, float]


@dataclass(frozen=True, kw_only=True)
class CurveEntry:
    """What the part file says of a curve.

    Parameters
    ----------
    table : TomlTable
        Where it stands, for complaints.
    quantity : Quantity or None
        None where it could not be read.
    file : str or None
        None where it could not be read.
    axes : mapping of str to AxisEntry
        Under ``x_axis`` and ``y_axis``, where given.
    errors : ReadingErrors
        The curve's own, or the part's.
    conditions : mapping of str to float
        In SI, by attribute of `Curve`.
    load : {"current", "resistive"} or None
        None where the quantity has none.
    title : str
        Name of the curve, not yet made unique.
    assumed : tuple of str
        Sentences on what was assumed.
    """

    table: TomlTable
    quantity: Quantity | None
    file: str | None
    axes: Mapping[str, AxisEntry]
    errors: ReadingErrors
    conditions: Mapping[str, float]
    load: Load | None
    title: str
    assumed: tuple[str, ...]


def curve_entry(table: TomlTable, *, errors: ReadingErrors, stated: StatedConditions, reverse: bool) -> CurveEntry:
    """Read a curve's entry; what is wrong is noted in the table's problems.

    Parameters
    ----------
    table : TomlTable
        One of the part file's [[curve]] tables.
    errors : ReadingErrors
        Those of a curve that does not have its own.
    stated : StatedConditions
        What a curve without its own conditions may take.
    reverse : bool
        Whether the part may be a p-channel one.
    """
    text = table.choice("quantity", [str(q) for q in Quantity], "what the curve shows")
    quantity = None if text is None else Quantity(text)
    file = _file(table)
    axes = {key: axis for key in ("x_axis", "y_axis") if (axis := _axis(table, key)) is not None}
    own = ReadingErrors(point=share(table, "point_error", errors.point), axis=share(table, "axis_error", errors.axis))
    assumed: list[str] = []
    conditions = _conditions(table, quantity, stated, reverse, assumed)
    load = _load(table, quantity, stated, assumed)
    table.close(" of a curve")
    return CurveEntry(
        table=table,
        quantity=quantity,
        file=file,
        axes=axes,
        errors=own,
        conditions=conditions,
        load=load,
        title="" if quantity is None else _title(quantity, conditions),
        assumed=tuple(assumed),
    )


def share(table: TomlTable, key: str, default: float) -> float:
    """Read a reading error as a share of an axis' length, or the default."""
    expected = f"expected a share of the axis' length from {_SMALLEST_SHARE:g} to {_LARGEST_SHARE:g}, such as 0.003"
    value = table.number(key, expected)
    if value is None:
        return default
    if not _SMALLEST_SHARE <= value <= _LARGEST_SHARE:
        table.report_value(key, value, expected)
        return default
    return value


def load_of(table: TomlTable) -> Load | None:
    """Read the kind of load of a gate-charge test, where it is said."""
    return cast("Load | None", table.choice("load", LOADS, "the kind of load", required=False))


def _file(table: TomlTable) -> str | None:
    expected = "expected the name of a CSV file in the part folder"
    text = table.text("file", expected)
    if text is None:
        return None
    name, reason = file_name(text)
    if reason:
        table.report("file", f"the name {quoted(text)} {reason}", expected)
        return None
    return name


def _axis(table: TomlTable, key: str) -> AxisEntry | None:
    expected = 'expected an axis as printed, such as { scale = "log", from = 0.1, to = 100 }'
    inner = table.table(key, expected)
    if inner is None:
        return None
    if inner.unfilled:
        inner.report_value("", PLACEHOLDER, f"{expected}; or leave '{key}' out")
        return None
    scale = inner.choice("scale", SCALES, "how the axis is divided")
    ends: list[float] = []
    as_printed = "expected the axis' end as printed, in the column's unit"
    for end in ("from", "to"):
        if end not in inner:
            inner.report("", f"the key '{end}' is missing", expected)
        number = inner.number(end, as_printed)
        if number is not None and number != 0.0 and not _SMALLEST_END <= abs(number) <= _LARGEST_END:
            inner.report_value(end, number, as_printed)
        elif number is not None:
            ends.append(number)
    inner.close(" of an axis")
    if scale is None or len(ends) != 2:
        return None
    if ends[0] == ends[1]:
        inner.report("", f"the axis has no length: from {ends[0]:g} to {ends[1]:g}", expected)
        return None
    # Of a p-channel part, both ends may be negative.
    if scale == "log" and ends[0] * ends[1] <= 0.0:
        inner.report(
            "",
            f"a logarithmic axis from {ends[0]:g} to {ends[1]:g}",
            "expected ends beyond zero; a logarithmic axis has no zero, so it is linear or has another end",
        )
        return None
    return AxisEntry(scale="log" if scale == "log" else "linear", ends=(ends[0], ends[1]))


def _conditions(
    table: TomlTable,
    quantity: Quantity | None,
    stated: StatedConditions,
    reverse: bool,
    assumed: list[str],
) -> dict[str, float]:
    keys = table.match(CONDITIONS)
    if quantity is None:
        return {}
    schema = CURVES[quantity]
    belonging = {condition.figure.symbol for condition in schema.conditions}
    for symbol, (key, _) in keys.items():
        if symbol not in belonging:
            table.report(key, f"'{key}' is no condition of {with_article(f'{quantity} curve')}", _belongs(schema))
    found: dict[str, float] = {}
    for condition in schema.conditions:
        figure = condition.figure
        if figure.symbol in keys:
            value = table.figure(figure, *keys[figure.symbol], reverse=reverse)
        else:
            value = _assumed(table, condition, stated, assumed)
        if value is not None:
            found[figure.name] = value
    if quantity in _CAPACITANCES and found.get("v_gs", 0.0) != 0.0:
        assumed.append(
            f"The curve was measured at VGS = {found['v_gs']:g} V, but is taken as one at VGS = 0, where the "
            "model has its capacitances."
        )
    return found


def _assumed(table: TomlTable, condition: Condition, stated: StatedConditions, assumed: list[str]) -> float | None:
    """Take a condition that the curve does not give from the table, or by default."""
    figure = condition.figure
    if condition.default is not None:
        return condition.default
    value = stated.figures.get(condition.stated_in, {}).get(figure.name)
    if value is None:
        expected = f"expected a key such as '{figure.key}' ({figure.meaning})"
        if condition.stated_in:
            expected += f"; it may also stand in [stated.{condition.stated_in}]"
        table.report("", f"the condition '{figure.key}' is missing", expected)
        return None
    assumed.append(
        f"The curve's '{figure.symbol}' is not given; {engineering(value, figure.base)} is taken from "
        f"stated.{condition.stated_in}."
    )
    return value


def _load(table: TomlTable, quantity: Quantity | None, stated: StatedConditions, assumed: list[str]) -> Load | None:
    load = load_of(table)
    if quantity is None:
        return None
    schema = CURVES[quantity]
    if not schema.has_load:
        if "load" in table:
            table.report("load", f"'load' is no condition of {with_article(f'{quantity} curve')}", _belongs(schema))
        return None
    if load is None and "load" not in table and stated.load is not None:
        assumed.append(f"The curve's 'load' is not given; '{stated.load}' is taken from stated.gate_charge.")
        return stated.load
    return load or "current"


def _belongs(schema: CurveSchema) -> str:
    keys = [condition.figure.key for condition in schema.conditions] + ["load"] * schema.has_load
    return f"expected only its own conditions: {', '.join(keys)}; remove this one"


def _title(quantity: Quantity, conditions: Mapping[str, float]) -> str:
    """Such as ``output 4.5 V``; the temperature where it tells curves apart or is not 25 C."""
    words = [CURVES[quantity].title]
    t_j, v_gs = conditions.get("t_j"), conditions.get("v_gs")
    if quantity is Quantity.OUTPUT and v_gs is not None:
        words.append(f"{v_gs:g} V")
    if t_j is not None and (quantity is not Quantity.OUTPUT or t_j != 25.0):
        words.append(f"{t_j:g} C")
    if quantity is Quantity.BODY_DIODE and v_gs:
        words.append(f"VGS {v_gs:g} V")
    return " ".join(words)
