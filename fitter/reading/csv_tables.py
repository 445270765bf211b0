"""CSV files of digitized points, as people's programs export them, as tables of numbers.

Columns stay in their own units here; every cell keeps its line and its text for messages.
"""

from __future__ import annotations

import csv
import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fitter.errors import UnitError
from fitter.reading.input_files import decoded
from fitter.reading.problems import Problems, nearest, printable, quoted
from fitter.reading.schema import COLUMNS, LIMITS, Figure
from fitter.units import engineering, si_factor

__all__ = ["MAX_CELL", "MAX_COLUMNS", "MAX_CSV_LINE", "MAX_ROWS", "CsvColumn", "CsvTable", "csv_table"]

MAX_ROWS = 20_000
MAX_COLUMNS = 50
MAX_CSV_LINE = 4000
MAX_CELL = 40
#: A smaller number is as good as none, and its square or its inverse may be none that a computer can hold.
_NOTHING = 1e-30

_SEPARATORS = {"\t": "tabs", ";": "semicolons", ",": "commas"}
_LINE_END = re.compile(r"\r\n|\n|\r")
_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_COMMA_NUMBER = re.compile(r"[+-]?(?:[0-9]+,?[0-9]*|,[0-9]+)(?:[eE][+-]?[0-9]+)?")
_NO_VALUE = {"nan", "na", "n/a", "#n/a", "-", "--", "none", "null"}
RATIO = "rds_on_ratio"


@dataclass(frozen=True, kw_only=True)
class CsvColumn:
    """One column.

    Parameters
    ----------
    header : str
        Its name in the file.
    figure : Figure
        What it holds.
    base : str
        Its SI unit; empty for a ratio.
    factor : float
        From the column's unit to SI.
    values : ndarray, shape (rows,)
        In SI; nan where the cell is blank or wrong.
    texts : tuple of str
        The cells.
    """

    header: str
    figure: Figure
    base: str
    factor: float
    values: NDArray[np.float64]
    texts: tuple[str, ...]


@dataclass(frozen=True, kw_only=True)
class CsvTable:
    """A CSV file.

    Parameters
    ----------
    columns : mapping of str to CsvColumn
        By symbol in lower case.
    header_line : int
        The header's line, counted from 1.
    lines : ndarray of int, shape (rows,)
        The line of each row.
    header_whole, rows_whole : bool
        Whether every column name was understood, and every line had its cells.
    """

    columns: Mapping[str, CsvColumn]
    header_line: int
    lines: NDArray[np.int64]
    header_whole: bool
    rows_whole: bool


def csv_table(data: bytes, file: str, problems: Problems) -> CsvTable | None:
    """Read a CSV file.

    Parameters
    ----------
    data : bytes
        The file.
    file : str
        Its name for messages.
    problems : Problems
        Where it is noted what is wrong.

    Returns
    -------
    CsvTable or None
        None where there is no table to speak of.
    """
    text = decoded(data, file, problems)
    lines = None if text is None else _lines(text, file, problems)
    if not lines:
        return None
    (header_line, header_text), *body = lines
    separator = next((mark for mark in _SEPARATORS if mark in header_text), ",")
    rows = _Rows(file=file, separator=separator, problems=problems)
    header = rows.cells(header_line, header_text)
    if header is None:
        return None
    figures = _figures(header, header_line, file, problems)
    if figures is None:
        return None
    if not body:
        problems.add(
            file,
            "there is a header but no point",
            "expected a line for each point below the header; fill them in",
            line=header_line,
        )
        return None
    table, rows_whole = rows.table(body, header)
    columns: dict[str, CsvColumn] = {}
    for position, (name, figure) in enumerate(zip(header, figures, strict=True)):
        if figure is None:
            continue
        base = "" if name.lower() == RATIO else figure.base
        factor = 1.0 if name.lower() == RATIO else _factor(name, figure)
        texts = tuple(cells[position] for _, cells in table)
        values = np.array([rows.number(line, name, cells[position]) for line, cells in table], dtype=float)
        column = CsvColumn(header=name, figure=figure, base=base, factor=factor, values=values * factor, texts=texts)
        _judge_sizes(column, [line for line, _ in table], file, problems)
        columns[figure.symbol] = column
    return CsvTable(
        columns=columns,
        header_line=header_line,
        lines=np.array([line for line, _ in table], dtype=np.int64),
        rows_whole=rows_whole,
        header_whole=all(figure is not None or not name for name, figure in zip(header, figures, strict=True)),
    )


def _lines(text: str, file: str, problems: Problems) -> list[tuple[int, str]] | None:
    """Find the lines that are neither blank nor comments, with their numbers."""
    found: list[tuple[int, str]] = []
    for number, line in enumerate(_LINE_END.split(text), start=1):
        content = line.strip(" ")
        # A spreadsheet puts a comment into quotes where the comment holds a separator.
        if not content.strip() or content.lstrip('"').startswith("#"):
            continue
        if len(content) > MAX_CSV_LINE:
            problems.add(
                file,
                f"a line of {len(content)} characters",
                f"expected a few cells, at most {MAX_CSV_LINE} characters; does the file lack line ends?",
                line=number,
            )
            return None
        if len(found) > MAX_ROWS:
            problems.add(file, f"more than {MAX_ROWS} rows", "expected the points of a few curves", line=number)
            return None
        found.append((number, content))
    if not found:
        problems.add(
            file,
            "the file holds only comments",
            "expected a header line such as 'vds_V,ciss_pF' and a line for each point",
        )
    return found


class _Rows:
    """Splits lines into cells and reads cells as numbers, remembering how the file writes its decimals."""

    def __init__(self, *, file: str, separator: str, problems: Problems) -> None:
        self._file = file
        self._separator = separator
        self._problems = problems
        self._first_mark: tuple[str, int] | None = None
        self._mixed = False

    def cells(self, line: int, text: str) -> list[str] | None:
        if '"' not in text:
            return [cell.strip() for cell in text.split(self._separator)]
        try:
            (cells,) = csv.reader([text], delimiter=self._separator, strict=True)
        except (csv.Error, ValueError):
            self._problems.add(
                self._file,
                f"the quotation marks in {quoted(text)} do not pair",
                "expected plain cells",
                line=line,
            )
            return None
        return [cell.strip() for cell in cells]

    def table(
        self, lines: Sequence[tuple[int, str]], header: Sequence[str]
    ) -> tuple[list[tuple[int, list[str]]], bool]:
        """Find the rows that have as many cells as the header has, and whether those are all."""
        found: list[tuple[int, list[str]]] = []
        ragged: list[tuple[int, str, int]] = []
        whole = True
        for line, text in lines:
            # Of a file with very many problems the rest need not be looked at.
            if self._problems.full(self._file):
                whole = False
                break
            cells = self.cells(line, text)
            if cells is None:
                whole = False
            elif len(cells) < len(header) or any(cells[len(header) :]):
                if any(cells):
                    ragged.append((line, text, len(cells)))
            elif any(cells):
                found.append((line, cells[: len(header)]))
                self._judge_unnamed(line, cells, header)
        if not found and len({count for *_, count in ragged}) == 1:
            # One complaint will do where it is rather the header that is wrong.
            del ragged[1:]
        hint = f"columns are separated by {_SEPARATORS[self._separator]} here"
        for line, text, count in ragged:
            if self._problems.full(self._file):
                break
            commas = self._separator == "," and count > len(header)
            self._problems.add(
                self._file,
                f"{count} {'cell' if count == 1 else 'cells'} in {quoted(text)}",
                f"expected {len(header)} as in the header; {hint}; "
                + ("where decimals are written with a comma, separate columns by semicolons; " if commas else "")
                + "leave a cell blank where no point was clicked",
                line=line,
            )
        return found, whole and not ragged

    def _judge_unnamed(self, line: int, cells: Sequence[str], header: Sequence[str]) -> None:
        unnamed = [cell for cell, name in zip(cells, header, strict=False) if cell and not name]
        if unnamed:
            self._problems.add(
                self._file,
                f"found {quoted(unnamed[0])} in a column without a name",
                "expected every column with values to have a name in the header; name it or empty it",
                line=line,
            )

    def number(self, line: int, column: str, cell: str) -> float:
        """Read a cell as a number; nan where it is blank, or is none, which is noted."""
        if not cell or self._problems.full(self._file):
            return math.nan
        comma = self._separator != "," and "," in cell
        pattern = _COMMA_NUMBER if comma else _NUMBER
        if len(cell) > MAX_CELL or not pattern.fullmatch(cell):
            self._not_a_number(line, column, cell)
            return math.nan
        if "," in cell or "." in cell:
            self._note_mark("," if comma else ".", line, column, cell)
        value = float(cell.replace(",", "."))
        if math.isinf(value):
            self._not_a_number(line, column, cell)
            return math.nan
        return 0.0 if abs(value) < _NOTHING else value

    def _not_a_number(self, line: int, column: str, cell: str) -> None:
        expected = "expected a number such as 12.5 or 3.9e3"
        if cell.lower() in _NO_VALUE:
            expected += "; leave the cell blank where no point was clicked"
        elif any(mark in cell for mark in _SEPARATORS if mark not in (self._separator, ",")):
            expected += f"; columns are separated by {_SEPARATORS[self._separator]} here, as in the header"
        elif "," in cell and self._separator == ",":
            expected += "; where decimals are written with a comma, separate columns by semicolons"
        elif cell[-1:].isalpha() and cell[:1].isdigit():
            expected += "; write units into the column's name only, as in 'ciss_pF'"
        elif "," in cell or "'" in cell or " " in cell:
            expected += "; write no marks between thousands"
        self._problems.add(self._file, f"found {quoted(cell)}", expected, line=line, place=column)

    def _note_mark(self, mark: str, line: int, column: str, cell: str) -> None:
        if self._first_mark is None:
            self._first_mark = (mark, line)
        elif self._first_mark[0] != mark and not self._mixed:
            self._mixed = True
            names = {".": "point", ",": "comma"}
            self._problems.add(
                self._file,
                f"found {quoted(cell)} with a decimal {names[mark]}, but line {self._first_mark[1]} has a "
                f"decimal {names[self._first_mark[0]]}",
                "expected the same decimal mark in the whole file; write all numbers alike",
                line=line,
                place=column,
            )


def _figures(header: Sequence[str], line: int, file: str, problems: Problems) -> list[Figure | None] | None:
    """Tell what each column holds; None for one whose name says nothing, or nothing that is known."""
    if len(header) > MAX_COLUMNS:
        problems.add(file, f"{len(header)} columns", f"expected at most {MAX_COLUMNS}", line=line)
        return None
    if all(not cell or _NUMBER.fullmatch(cell.replace(",", ".")) for cell in header):
        problems.add(
            file,
            f"the first line is {quoted(','.join(header))}: the header is missing",
            "expected a line of column names above the points, such as 'vds_V,ciss_pF' or 'vgs_V,id_A'",
            line=line,
        )
        return None
    figures: list[Figure | None] = []
    taken: dict[str, str] = {}
    for name in header:
        figure = _figure(name, line, file, problems) if name else None
        if figure is not None and figure.symbol in taken:
            problems.add(
                file,
                f"two columns hold '{figure.symbol}': {quoted(taken[figure.symbol])} and {quoted(name)}",
                "expected one column of each kind; put the points of another curve into another file",
                line=line,
                place=name,
            )
            figure = None
        if figure is not None:
            taken[figure.symbol] = name
        figures.append(figure)
    return figures


def _figure(name: str, line: int, file: str, problems: Problems) -> Figure | None:
    lower = name.lower()
    figures = {figure.symbol: figure for figure in COLUMNS}
    if lower == RATIO:
        return figures["rds_on"]
    symbols = sorted(figures, key=len, reverse=True)
    symbol = next((s for s in symbols if lower == s or lower.startswith(f"{s}_")), None)
    if symbol is None:
        known = [figure.key for figure in COLUMNS] + [RATIO]
        like = nearest(name, known)
        problems.add(
            file,
            f"unknown column {quoted(name)}",
            f"did you mean '{like}'?" if like else f"expected names such as {', '.join(known)}",
            line=line,
            place=printable(name, longest=40),
        )
        return None
    try:
        _factor(name, figures[symbol])
    except UnitError as error:
        found = f"the column {quoted(name)} has no unit"
        if lower not in (symbol, f"{symbol}_"):
            found = printable(str(error), longest=120)
        problems.add(
            file,
            found,
            f"expected a column name such as '{figures[symbol].key}'",
            line=line,
            place=printable(name, longest=40),
        )
        return None
    return figures[symbol]


def _factor(name: str, figure: Figure) -> float:
    return si_factor(name[len(figure.symbol) + 1 :], figure.base)


def _judge_sizes(column: CsvColumn, lines: Sequence[int], file: str, problems: Problems) -> None:
    """Complain of values that no transistor has; small ones are left in peace where zero is a value."""
    limits = LIMITS[column.base]
    signed = column.base == "degC"
    positive = column.figure.sign == "positive"
    with np.errstate(invalid="ignore"):
        if signed:
            wrong = (column.values < limits.smallest) | (column.values > limits.largest)
        else:
            wrong = np.abs(column.values) > limits.largest
            if positive:
                wrong |= column.values < limits.smallest
    low, high = (f"{end:g} C" if signed else engineering(end, column.base) for end in (limits.smallest, limits.largest))
    expected = f"expected {limits.noun} " + (f"from {low} to {high}" if signed or positive else f"up to {high}")
    if not column.base:
        expected += ", not percent"
    for row in np.flatnonzero(wrong).tolist():
        if problems.full(file):
            break
        problems.add(
            file,
            f"found {quoted(column.texts[row])}",
            f"{expected}; is it a slip, or the column's unit wrong?",
            line=lines[row],
            place=column.header,
        )
