"""From CSV columns to a curve's points and axes: in SI, of n-channel polarity, sorted."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from fitter.part import Axis, Quantity
from fitter.reading.csv_tables import CsvColumn, CsvTable
from fitter.reading.curve_entries import AxisEntry
from fitter.reading.problems import Problems, quoted
from fitter.reading.schema import CURVES, Figure
from fitter.units import engineering

__all__ = ["Points", "curve_axis", "curve_points", "describe"]

Array = NDArray[np.float64]

# Points may lie below zero by a reading error: this share of the largest value is some ten of the usual ones.
_BELOW_ZERO = 0.05
# Where a printed axis is not given, data of more decades than this are taken for those of a logarithmic one.
_LOG_DECADES_X = 1.5
_LOG_DECADES_Y = 2.0
_CAPACITANCES = (Quantity.CISS, Quantity.COSS, Quantity.CRSS)
_Y_OFTEN_LOG = (Quantity.TRANSFER, Quantity.BODY_DIODE)


@dataclass(frozen=True, kw_only=True)
class Points:
    """The points of a curve.

    Parameters
    ----------
    x, y : ndarray, shape (n,)
        In SI, in rising order of x; read-only.
    lines : ndarray of int, shape (n,)
        Line of each point in the file; read-only.
    x_column, y_column : CsvColumn
        Where they come from.
    x_texts, y_texts : tuple of str
        As they stand in the file.
    """

    x: Array
    y: Array
    lines: NDArray[np.int64]
    x_column: CsvColumn
    y_column: CsvColumn
    x_texts: tuple[str, ...]
    y_texts: tuple[str, ...]


def curve_points(table: CsvTable, quantity: Quantity, file: str, problems: Problems, *, reverse: bool) -> Points | None:
    """Find the points of a curve, or None where they cannot be had; the problems are noted.

    Parameters
    ----------
    table : CsvTable
        The file.
    quantity : Quantity
        What the curve shows, hence which columns.
    file : str
        The file's name, for messages.
    problems : Problems
        Where it is noted what is wrong.
    reverse : bool
        Whether the part may be a p-channel one: then voltages and currents that are mostly negative are
        reversed as a whole, so that the noise of clicks around zero keeps its sign.
    """
    schema = CURVES[quantity]
    columns = [_column(table, figure, quantity, file, problems) for figure in (schema.x, schema.y)]
    x_column, y_column = columns
    if x_column is None or y_column is None:
        return None
    x_given = np.array([text != "" for text in x_column.texts], dtype=bool)
    y_given = np.array([text != "" for text in y_column.texts], dtype=bool)
    for row in np.flatnonzero(y_given & ~x_given):
        if problems.full(file):
            break
        problems.add(
            file,
            f"the cell is blank, but {y_column.header} is {quoted(y_column.texts[row])}",
            f"expected the {schema.x.meaning} of the point; fill it in, or blank the other",
            line=int(table.lines[row]),
            place=x_column.header,
        )
    count = int(np.count_nonzero(y_given))
    if count < 2 and not table.rows_whole:
        return None
    if count < 2:
        many = "no point" if count == 0 else "a single point"
        problems.add(
            file,
            f"{many} for the {quantity} curve",
            "expected at least two, better ten or more; click more points of the curve",
            line=table.header_line,
            place=y_column.header,
        )
        return None
    # Cells that are no numbers have been complained of already.
    rows = np.flatnonzero(np.isfinite(x_column.values) & np.isfinite(y_column.values))
    if len(rows) < 2:
        return None
    x = _upright(x_column, schema.x, rows, table, file, problems, reverse)
    y = _upright(y_column, schema.y, rows, table, file, problems, reverse)
    if np.all(x == x[0]):
        problems.add(
            file,
            f"all points have the same value {quoted(x_column.texts[rows[0]])}",
            f"expected points along the axis; does the column really hold the {schema.x.meaning}?",
            line=table.header_line,
            place=x_column.header,
        )
        return None
    # A current may be none throughout, with the channel off.
    if schema.y.sign != "not negative" and not np.any(y):
        problems.add(
            file,
            "all points are zero",
            f"expected the {schema.y.meaning} along the curve; were the axes calibrated?",
            line=table.header_line,
            place=y_column.header,
        )
        return None
    order = np.argsort(x, kind="stable")
    x, y, rows = x[order], y[order], rows[order]
    lines = table.lines[rows]
    for array in (x, y, lines):
        array.setflags(write=False)
    return Points(
        x=x,
        y=y,
        lines=lines,
        x_column=x_column,
        y_column=y_column,
        x_texts=tuple(x_column.texts[row] for row in rows),
        y_texts=tuple(y_column.texts[row] for row in rows),
    )


def _column(table: CsvTable, figure: Figure, quantity: Quantity, file: str, problems: Problems) -> CsvColumn | None:
    column = table.columns.get(figure.symbol)
    # Where a column name was not understood, that is the complaint already.
    if column is None and table.header_whole:
        there = ", ".join(column.header for column in table.columns.values()) or "none"
        problems.add(
            file,
            f"no column of the {figure.meaning}; the columns are {there}",
            f"expected a column such as '{figure.key}', which the {quantity} curve takes; add it, or name another file",
            line=table.header_line,
        )
    return column


def _upright(
    column: CsvColumn,
    figure: Figure,
    rows: NDArray[np.intp],
    table: CsvTable,
    file: str,
    problems: Problems,
    reverse: bool,
) -> Array:
    """Values of n-channel polarity; complains of those below zero that no reading error explains."""
    values = column.values[rows]
    if not figure.polar:
        return values
    # The sign is that of most values that are clear of zero, whatever the noise around it and a slip or two.
    small = _BELOW_ZERO * np.max(np.abs(values))
    balance = np.count_nonzero(values > small) - np.count_nonzero(values < -small)
    if balance < 0 or (balance == 0 and np.sum(values) < 0.0):
        if reverse:
            # Taken from zero, a zero stays the plain one.
            values = 0.0 - values
        else:
            problems.signs += 1
            problems.add(
                file,
                "most values are negative",
                f'expected the {figure.meaning} above zero; for a p-channel part, say so in [part]: channel = "p"',
                line=int(table.lines[rows[0]]),
                place=column.header,
            )
            return values
    if figure.sign == "any":
        return values
    for position in np.flatnonzero(values < -small):
        row = rows[position]
        if problems.full(file):
            break
        problems.add(
            file,
            f"found {quoted(column.texts[row])}",
            f"expected the {figure.meaning} above zero like the curve's other points; mend or remove it",
            line=int(table.lines[row]),
            place=column.header,
        )
    return values


def curve_axis(
    along: Literal["x", "y"],
    points: Points,
    quantity: Quantity,
    entry: AxisEntry | None,
    file: str,
    problems: Problems,
    *,
    reverse: bool,
) -> Axis | None:
    """Find an axis of a curve: the printed one, or the data's own range where that is not given.

    Parameters
    ----------
    along : {"x", "y"}
        Which one.
    points : Points
        The curve's points.
    quantity : Quantity
        What the curve shows.
    entry : AxisEntry or None
        The axis as entered.
    file : str
        For messages.
    problems : Problems
        Where it is noted what is wrong, such as points at or below zero on a logarithmic axis.
    reverse : bool
        Whether the part may be a p-channel one.

    Returns
    -------
    Axis or None
        In SI, of n-channel polarity; None where there can be none.
    """
    if along == "x":
        column, values, texts, figure = points.x_column, points.x, points.x_texts, CURVES[quantity].x
    else:
        column, values, texts, figure = points.y_column, points.y, points.y_texts, CURVES[quantity].y
    if entry is None:
        start, end = float(values.min()), float(values.max())
        if start == end:
            problems.add(
                file,
                f"all points have the same value {quoted(texts[0])}",
                f"expected '{along}_axis' in the curve's entry, since the data have no range of their own",
                line=int(points.lines[0]),
                place=column.header,
            )
            return None
        log = _looks_log_x(quantity, values) if along == "x" else _looks_log_y(quantity, values)
        return Axis(scale="log" if log else "linear", start=start, end=end, printed=False)
    ends = sorted(end * column.factor for end in entry.ends)
    if reverse and figure.polar and sum(ends) < 0.0:
        ends = [0.0 - ends[1], 0.0 - ends[0]]
    if entry.scale == "linear":
        return Axis(scale="linear", start=ends[0], end=ends[1])
    if ends[0] <= 0.0:
        problems.add(
            file,
            f"the logarithmic axis of this column runs from {entry.ends[0]:g} to {entry.ends[1]:g}",
            f"expected ends above zero; mend '{along}_axis' in the curve's entry",
            line=None,
            place=column.header,
        )
        return None
    off = np.flatnonzero(values <= 0.0)
    # Of a figure that is never zero, that is the complaint already.
    for position in off if figure.sign != "positive" else ():
        if problems.full(file):
            break
        problems.add(
            file,
            f"found {quoted(texts[position])} on a logarithmic axis",
            f"expected a value above zero; remove the point, or mend '{along}_axis' if it is linear",
            line=int(points.lines[position]),
            place=column.header,
        )
    return None if len(off) else Axis(scale="log", start=ends[0], end=ends[1])


def describe(axis: Axis, unit: str) -> str:
    """Tell an axis in a few words, with the unit [unit of its ends]."""
    return f"{axis.scale} from {engineering(axis.start, unit)} to {engineering(axis.end, unit)}"


def _looks_log_x(quantity: Quantity, x: Array) -> bool:
    """Whether points of a capacitance curve lie as one clicks them along a logarithmic axis."""
    first, middle, last = float(x[0]), float(np.median(x)), float(x[-1])
    # Differences of logarithms, since a first value next to nothing would make the ratio infinite.
    if quantity not in _CAPACITANCES or first <= 0.0 or math.log10(last) - math.log10(first) <= _LOG_DECADES_X:
        return False
    linear = (middle - first) / (last - first)
    log = (math.log(middle) - math.log(first)) / (math.log(last) - math.log(first))
    return abs(log - 0.5) < abs(linear - 0.5)


def _looks_log_y(quantity: Quantity, y: Array) -> bool:
    if quantity in _CAPACITANCES:
        return True
    lowest, highest = float(y.min()), float(y.max())
    return quantity in _Y_OFTEN_LOG and lowest > 0.0 and math.log10(highest) - math.log10(lowest) > _LOG_DECADES_Y
