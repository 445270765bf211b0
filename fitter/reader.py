"""Reading a part folder: one transistor's `part.toml` and CSV files, turned into a `Part` in SI.

A part folder may come from a stranger, so it is untrusted: no path leaves it, sizes are bounded, nothing in
it is evaluated. Whether the data make sense as a transistor's is not judged here.
"""

from __future__ import annotations

import os
import re
import unicodedata
from collections import Counter
from collections.abc import Collection
from dataclasses import dataclass
from typing import Any, Literal, cast

import numpy as np

from fitter.errors import Problem
from fitter.part import Curve, Load, Notice, Package, Part, Quantity, Stated, StatedValues
from fitter.reading.csv_tables import CsvTable, csv_table
from fitter.reading.curve_entries import (
    CurveEntry,
    ReadingErrors,
    StatedConditions,
    curve_entry,
    load_of,
    share,
)
from fitter.reading.curve_points import curve_axis, curve_points, describe
from fitter.reading.input_files import MAX_CSV_BYTES, MAX_TOML_BYTES, PART_FILE, InputFolder, decoded
from fitter.reading.problems import Problems, quoted
from fitter.reading.schema import PACKAGE, RATINGS, STATED
from fitter.reading.toml_tables import TomlTable, toml_document

__all__ = ["MAX_CURVES", "MAX_NOTES", "missing_data", "read_part"]

MAX_CURVES = 100
MAX_NOTES = 2000

_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]{0,31}")
_CAPACITANCES = {Quantity.CISS: "c_iss", Quantity.COSS: "c_oss", Quantity.CRSS: "c_rss"}


def read_part(folder: str | os.PathLike[str]) -> Part:
    """Read a part folder.

    Parameters
    ----------
    folder : str or path
        The folder that holds ``part.toml``.

    Returns
    -------
    Part
        In SI, temperatures in degrees Celsius, of n-channel polarity.

    Raises
    ------
    PartFolderError
        If anything in the folder cannot be used as it stands. It carries all problems of all files.
    """
    problems = Problems()
    read = _read(folder, problems)
    if read.part is not None:
        return read.part
    # Where the folder can be read as a p-channel part's, one word is wrong and not every figure.
    if problems.signs:
        turned = _read(folder, Problems(), p_channel=True)
        if turned.part is not None and turned.negative > 0.5:
            problems = Problems()
            problems.add(
                PART_FILE,
                "found 'n', but most voltages and currents of the folder are negative",
                'expected "p", as which the folder can be read: write channel = "p"; or the values without their signs',
                line=read.channel_line,
                place="part.channel",
            )
    raise problems.error()


@dataclass(frozen=True, kw_only=True)
class _Read:
    """What became of a folder: the part, the line of its channel's type, the share of negative columns."""

    part: Part | None = None
    channel_line: int | None = None
    negative: float = 0.0


def _read(folder: str | os.PathLike[str], problems: Problems, *, p_channel: bool = False) -> _Read:
    """Read a folder as it says, or as a p-channel part's; what is wrong is noted in the problems."""
    files = InputFolder(folder, problems)
    data = files.read(PART_FILE, largest=MAX_TOML_BYTES)
    text = None if data is None else decoded(data, PART_FILE, problems)
    root = None if text is None else toml_document(text, PART_FILE, problems)
    if root is None:
        return _Read()
    notices: list[Notice] = []
    heading = _heading(root, p_channel)
    # Where the channel's type is not known, signs are not judged either.
    reverse = heading.channel != "n"
    package = _package(root)
    errors = _reading_errors(root)
    stated, conditions = _stated(root, reverse)
    tables = root.tables("curve", "expected a table [[curve]] for each curve", most=MAX_CURVES)
    root.close(" of a part file")
    entries = [curve_entry(table, errors=errors, stated=conditions, reverse=reverse) for table in tables]
    quantities = [entry.quantity for entry in entries if entry.quantity is not None]
    # A quantity that could not be read may be the one that would be missed.
    if len(quantities) == len(entries):
        for problem in missing_data(quantities, stated):
            problems.add(problem.file, problem.found, problem.expected)
    curves = _Curves(files=files, problems=problems, notices=notices, reverse=reverse)
    read = [curves.read(entry, number) for number, entry in enumerate(entries, start=1)]
    curves.note_unused_columns()
    if problems or heading.name is None or heading.channel is None:
        return _Read(channel_line=heading.channel_line)
    negative = curves.share_of_negative()
    if heading.channel == "p" and not negative:
        notices.append(_without_signs())
    part = Part(
        name=heading.name,
        channel=heading.channel,
        notes=heading.notes,
        package=package,
        curves=tuple(curve for curve in read if curve is not None),
        stated=stated,
        digests=files.digests,
        notices=tuple(notices + _stand_ins(quantities, stated)),
        **heading.ratings,
    )
    return _Read(part=part, channel_line=heading.channel_line, negative=negative)


def missing_data(quantities: Collection[Quantity], stated: StatedValues) -> list[Problem]:
    """Say what a part lacks to be fitted at all.

    Needed are the three capacitance curves, or two of them and the third's typical table value, and one
    transfer curve.

    Parameters
    ----------
    quantities : collection of Quantity
        The curves that there are.
    stated : StatedValues
        The table values.

    Returns
    -------
    list of Problem
        Empty where there is enough.
    """
    missing = [quantity for quantity in _CAPACITANCES if quantity not in quantities]
    problems = []
    if len(missing) > 1 or any(_typical(quantity, stated) is None for quantity in missing):
        names = " and no ".join(missing)
        problems.append(
            Problem(
                file=PART_FILE,
                found=f"there is no {names} curve",
                expected="expected a [[curve]] for each of ciss, coss and crss, or two of them and the "
                "third's typical value in [stated.capacitance]; digitize what is missing",
            )
        )
    if Quantity.TRANSFER not in quantities:
        problems.append(
            Problem(
                file=PART_FILE,
                found="there is no transfer curve",
                expected='expected at least one [[curve]] with quantity = "transfer"; digitize ID over VGS',
            )
        )
    return problems


def _typical(quantity: Quantity, stated: StatedValues) -> float | None:
    value = getattr(stated.capacitance, _CAPACITANCES[quantity], None)
    return value.typ if isinstance(value, Stated) else None


def _stand_ins(quantities: Collection[Quantity], stated: StatedValues) -> list[Notice]:
    """Note a capacitance that only the table gives."""
    return [
        Notice(
            topic=str(quantity),
            text=f"There is no {quantity} curve; its table value at VDS = {stated.capacitance.v_ds:g} V "
            "stands in for it.",
        )
        for quantity in _CAPACITANCES
        if quantity not in quantities and stated.capacitance is not None
    ]


def _without_signs() -> Notice:
    return Notice(
        topic="channel",
        text="The part is entered as p-channel, and its curves have no signs: their values are taken as magnitudes. If "
        'it is an n-channel part, write channel = "n".',
    )


@dataclass(frozen=True, kw_only=True)
class _Heading:
    """The [part] table; None for what could not be read."""

    name: str | None
    channel: Literal["n", "p"] | None
    channel_line: int | None
    notes: str
    ratings: dict[str, float]


def _heading(root: TomlTable, p_channel: bool) -> _Heading:
    expected = "expected a table [part] with name, channel, vds_max_V and vgs_max_V"
    if "part" not in root:
        root.report("", "the table [part] is missing", expected)
    table = root.table("part", expected)
    if table is None:
        return _Heading(name=None, channel=None, channel_line=None, notes="", ratings={})
    expected = "expected a letter, then letters, digits or underscores, at most 32; it names the subcircuit"
    name = table.text("name", expected)
    if name is not None and not _NAME.fullmatch(name):
        table.report_value("name", name, expected)
        name = None
    channel = cast('Literal["n", "p"] | None', table.choice("channel", ("n", "p"), "the channel's type"))
    channel = "p" if p_channel and channel == "n" else channel
    notes = _notes(table)
    ratings: dict[str, float] = {}
    keys = table.match(RATINGS)
    for figure in RATINGS:
        if figure.symbol not in keys:
            table.report("", f"the key '{figure.key}' is missing", f"expected the {figure.meaning}")
            continue
        value = table.figure(figure, *keys[figure.symbol], reverse=channel != "n")
        if value is not None:
            ratings[figure.name] = value
    table.close(" of [part]")
    line = table.line_of("channel")
    return _Heading(name=name, channel=channel, channel_line=line, notes=notes, ratings=ratings)


def _notes(table: TomlTable) -> str:
    expected = f"expected one line of text, at most {MAX_NOTES} characters"
    notes = table.text("notes", expected, required=False) or ""
    if len(notes) > MAX_NOTES:
        table.report("notes", f"a text of {len(notes)} characters", expected)
    # The notes go into the netlist's header, where another line could say anything to a simulator.
    elif any(unicodedata.category(character) in ("Cc", "Cf", "Cs", "Zl", "Zp") for character in notes):
        table.report("notes", f"{quoted(notes)} holds line ends or control characters", expected)
    return notes


def _package(root: TomlTable) -> Package:
    table = root.table("package", "expected a table [package] with rg_ohm, lg_nH, ld_nH, ls_nH")
    if table is None:
        return Package()
    keys = table.match(PACKAGE)
    values = {
        figure.name: table.figure(figure, *keys[figure.symbol], reverse=False)
        for figure in PACKAGE
        if figure.symbol in keys
    }
    table.close(" of [package]")
    return Package(**values)


def _reading_errors(root: TomlTable) -> ReadingErrors:
    usual = ReadingErrors()
    table = root.table("reading", "expected a table [reading] with point and axis")
    if table is None:
        return usual
    errors = ReadingErrors(point=share(table, "point", usual.point), axis=share(table, "axis", usual.axis))
    table.close(" of [reading]")
    return errors


def _stated(root: TomlTable, reverse: bool) -> tuple[StatedValues, StatedConditions]:
    """Read the groups of table values; their conditions by themselves too, for curves without their own."""
    groups: dict[str, Any] = {}
    conditions: dict[str, dict[str, float]] = {}
    load: Load | None = None
    stated = root.table("stated", "expected tables such as [stated.gate_charge]")
    for group, schema in STATED.items():
        table = None if stated is None else stated.table(group, f"expected a table [stated.{group}]")
        if not table:
            continue
        keys = table.match((*schema.conditions, *schema.values))
        figures = {
            figure.name: value
            for figure in schema.conditions
            if figure.symbol in keys
            and (value := table.figure(figure, *keys[figure.symbol], reverse=reverse)) is not None
        }
        values = {
            figure.name: table.stated(figure, *keys[figure.symbol], reverse=reverse)
            for figure in schema.values
            if figure.symbol in keys
        }
        needed = {figure.symbol for figure in schema.conditions}
        if schema.needs is not None:
            needed = {need for value, needs in schema.needs.items() if value in keys for need in needs}
        whole = True
        for figure in schema.conditions:
            if figure.symbol in needed and figure.symbol not in keys:
                table.report("", f"the condition '{figure.key}' is missing", f"expected the {figure.meaning}; add it")
            whole &= figure.symbol not in needed or figure.name in figures
        extra: dict[str, Load] = {}
        if schema.has_load:
            load = load_of(table)
            extra = {} if load is None else {"load": load}
        table.close(f" of [stated.{group}]")
        conditions[group] = figures
        if whole:
            groups[group] = schema.build(**figures, **values, **extra)
    if stated is not None:
        stated.close(" of [stated]")
    return StatedValues(**groups), StatedConditions(figures=conditions, load=load)


class _Curves:
    """Turns the entries of a part file into curves, reading each CSV file once."""

    def __init__(self, *, files: InputFolder, problems: Problems, notices: list[Notice], reverse: bool) -> None:
        self._files = files
        self._problems = problems
        self._notices = notices
        self._reverse = reverse
        self._tables: dict[str, CsvTable | None] = {}
        self._taken: dict[tuple[str, Quantity], int] = {}
        self._columns_taken: set[tuple[str, str]] = set()
        self._titles: Counter[str] = Counter()

    def read(self, entry: CurveEntry, number: int) -> Curve | None:
        """Read the curve of an entry, the `number`-th from 1; None where it cannot be had."""
        quantity, file = entry.quantity, entry.file
        table = None if file is None else self._table(file)
        if file is None or quantity is None:
            return None
        if (file, quantity) in self._taken:
            entry.table.report(
                "file",
                f"'{file}' gave its {quantity} curve to curve {self._taken[file, quantity]} already",
                "expected one entry for each digitized curve; remove one, or name another file",
            )
            return None
        self._taken[file, quantity] = number
        if table is None:
            return None
        points = curve_points(table, quantity, file, self._problems, reverse=self._reverse)
        if points is None:
            return None
        self._columns_taken |= {(file, points.x_column.header), (file, points.y_column.header)}
        x_axis, y_axis = (
            curve_axis(
                along,
                points,
                quantity,
                entry.axes.get(f"{along}_axis"),
                file,
                self._problems,
                reverse=self._reverse,
            )
            for along in ("x", "y")
        )
        if x_axis is None or y_axis is None or self._problems:
            return None
        self._titles[entry.title] += 1
        count = self._titles[entry.title]
        curve = Curve(
            quantity=quantity,
            name=entry.title if count == 1 else f"{entry.title} ({count})",
            file=file,
            x=points.x,
            y=points.y,
            lines=points.lines,
            x_column=points.x_column.header,
            y_column=points.y_column.header,
            x_axis=x_axis,
            y_axis=y_axis,
            point_error=entry.errors.point,
            axis_error=entry.errors.axis,
            x_unit=points.x_column.base,
            y_unit=points.y_column.base,
            load=entry.load,
            **entry.conditions,
        )
        self._notices += [Notice(topic=curve.name, text=text) for text in entry.assumed]
        self._note_axes(curve)
        return curve

    def _table(self, file: str) -> CsvTable | None:
        if file not in self._tables:
            full = self._problems.full(file)
            data = None if full else self._files.read(file, largest=MAX_CSV_BYTES)
            self._tables[file] = None if data is None else csv_table(data, file, self._problems)
        return self._tables[file]

    def _note_axes(self, curve: Curve) -> None:
        guessed = [
            f"{key} ({describe(axis, unit)})"
            for key, axis, unit in (
                ("x_axis", curve.x_axis, curve.x_unit),
                ("y_axis", curve.y_axis, curve.y_unit),
            )
            if not axis.printed
        ]
        if guessed:
            self._notices.append(
                Notice(
                    topic=curve.name,
                    text=f"Not all printed axes of {curve.name} are given; the data's own range is taken for "
                    f"{' and '.join(guessed)}. Reading errors go by an axis' length: enter them as printed.",
                )
            )

    def share_of_negative(self) -> float:
        """The share of the columns of voltages and currents whose values are mostly negative."""
        tables = [table for table in self._tables.values() if table is not None]
        columns = [column for table in tables for column in table.columns.values() if column.figure.base in ("V", "A")]
        return float(np.mean([np.nansum(column.values) < 0.0 for column in columns])) if columns else 0.0

    def note_unused_columns(self) -> None:
        """Note columns that hold points but belong to no curve."""
        for file, table in self._tables.items():
            for column in () if table is None else table.columns.values():
                if (file, column.header) not in self._columns_taken and any(column.texts):
                    self._notices.append(
                        Notice(
                            topic=file,
                            text=f"The column {column.header} of {file} belongs to no curve and is not used.",
                        )
                    )
