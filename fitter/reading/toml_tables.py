"""TOML documents as tables that are read key by key, with a line number for every complaint."""

from __future__ import annotations

import math
import re
import tomllib
from collections.abc import Mapping, Sequence

from fitter.errors import UnitError
from fitter.part import Stated
from fitter.reading.problems import Problems, nearest, printable, quoted
from fitter.reading.schema import Figure, excess, expectation
from fitter.units import si_factor

__all__ = ["MAX_KEYS", "MAX_LINE", "PLACEHOLDER", "TomlTable", "toml_document"]

MAX_KEYS = 4000
MAX_LINE = 4000
PLACEHOLDER = "fill in"

Path = tuple[str | int, ...]

_PART = r"""(?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*')"""
_DOTTED = rf"{_PART}(?:\s*\.\s*{_PART})*"
_HEADER = re.compile(rf"\s*(\[\[?)\s*({_DOTTED})\s*\]")
_KEY = re.compile(rf"\s*({_DOTTED})\s*=")
_ERROR_LINE = re.compile(r"\s*\(at (?:line (\d+), column \d+|end of document)\)$")
_MISSING = object()


def toml_document(text: str, file: str, problems: Problems) -> TomlTable | None:
    """Find the root table of a TOML document.

    Parameters
    ----------
    text : str
        The document.
    file : str
        Its name for messages.
    problems : Problems
        Where it is noted what is wrong, now and by the tables' methods.

    Returns
    -------
    TomlTable or None
        None where the text is no TOML, or more of it than a part file can be.
    """
    lines = text.replace("\r\n", "\n").split("\n")
    # The parser's time grows with the square of a key's parts, so a line must not be endless.
    for number, line in enumerate(lines, start=1):
        if len(line) > MAX_LINE:
            problems.add(file, f"a line of {len(line)} characters", f"expected at most {MAX_LINE}", line=number)
            return None
    try:
        values = tomllib.loads(text)
    except RecursionError:
        problems.add(file, "tables or lists nested without end", "expected the tables of a part file")
        return None
    except ValueError as error:
        message = str(error)
        where = _ERROR_LINE.search(message)
        at_line = None if where is None else int(where[1] or len(lines))
        message = _ERROR_LINE.sub("", message).replace("Cannot overwrite a value", "a key is given twice")
        problems.add(
            file,
            f"this is not valid TOML: {printable(message, longest=120)}" + _line_quote(lines, at_line),
            'expected lines such as name = "CB80N4" or vds_max_V = 80.5: texts in quotes, numbers with a '
            "decimal point and without a unit, each key once in its table",
            line=at_line,
        )
        return None
    if _count_keys(values) > MAX_KEYS:
        problems.add(file, f"more than {MAX_KEYS} keys", "expected the keys of one part")
        return None
    return TomlTable(values, path=(), file=file, lines=_key_lines(lines), problems=problems)


class TomlTable:
    """One table of a TOML document.

    Each method reads a key and remembers that it is known; `close` complains of all others. What is wrong is
    noted in the problems, and the method then returns what it would for an absent key, or None.
    """

    def __init__(
        self,
        values: Mapping[str, object],
        *,
        path: Path,
        file: str,
        lines: Mapping[Path, int],
        problems: Problems,
    ) -> None:
        self._values = values
        self._path = path
        self._file = file
        self._lines = lines
        self._problems = problems
        self._known: list[str] = []
        self._used: set[str] = set()

    def report(self, key: str, found: str, expected: str) -> None:
        """Note a problem with a key; with the table itself where `key` is empty."""
        path = (*self._path, key) if key else self._path
        place = "".join(f" {p}" if isinstance(p, int) else f".{p}" for p in path).lstrip(".")
        self._problems.add(self._file, found, expected, line=self.line_of(key), place=printable(place, longest=80))

    def line_of(self, key: str) -> int | None:
        """Line of a key, or of what it would stand in; None where that cannot be told."""
        path = (*self._path, key) if key else self._path
        return next((self._lines[path[:n]] for n in range(len(path), 0, -1) if path[:n] in self._lines), None)

    def report_value(self, key: str, value: object, expected: str) -> None:
        """Note that the value of a key is not what was expected."""
        found = "nothing is filled in yet" if value == PLACEHOLDER else f"found {quoted(value)}"
        self.report(key, found, expected)

    def _get(self, key: str) -> object:
        self._known.append(key)
        self._used.add(key)
        return self._values.get(key, _MISSING)

    def __contains__(self, key: str) -> bool:
        return key in self._values

    @property
    def unfilled(self) -> bool:
        """Whether a value still has to be filled in."""
        return PLACEHOLDER in self._values.values()

    def __bool__(self) -> bool:
        return bool(self._values)

    def table(self, key: str, expected: str) -> TomlTable | None:
        """Find a table within the table, or None."""
        value = self._get(key)
        if value is _MISSING:
            return None
        if isinstance(value, dict):
            return self._inner(value, key)
        self.report_value(key, value, expected)
        return None

    def tables(self, key: str, expected: str, *, most: int) -> list[TomlTable]:
        """Find the tables of an array of tables, at most `most`; they are numbered from 1 in messages."""
        value = self._get(key)
        if value is _MISSING:
            return []
        if not isinstance(value, list) or not all(isinstance(item, dict) for item in value):
            self.report_value(key, value, expected)
            return []
        if len(value) > most:
            self.report(key, f"{len(value)} entries", f"expected at most {most}")
        return [self._inner(item, key, number) for number, item in enumerate(value[:most], start=1)]

    def _inner(self, values: Mapping[str, object], *keys: str | int) -> TomlTable:
        path = (*self._path, *keys)
        return TomlTable(values, path=path, file=self._file, lines=self._lines, problems=self._problems)

    def text(self, key: str, expected: str, *, required: bool = True) -> str | None:
        """Read a text, or None."""
        value = self._get(key)
        if value is _MISSING:
            if required:
                self.report("", f"the key '{key}' is missing", expected)
            return None
        if isinstance(value, str) and value != PLACEHOLDER:
            return value
        self.report_value(key, value, expected)
        return None

    def choice(self, key: str, options: Sequence[str], meaning: str, *, required: bool = True) -> str | None:
        """One of several texts, or None."""
        listed = ", ".join(f"'{option}'" for option in options[:-1]) + f" or '{options[-1]}'"
        expected = f"expected {meaning}: {listed}"
        text = self.text(key, expected, required=required)
        if text is None or text in options:
            return text
        like = nearest(text, options)
        self.report_value(key, text, expected + (f"; did you mean '{like}'?" if like else ""))
        return None

    def number(self, key: str, expected: str) -> float | None:
        """Read a finite number, or None where it is absent or something else."""
        value = self._get(key)
        return None if value is _MISSING else self._number(key, value, expected)

    def _number(self, key: str, value: object, expected: str) -> float | None:
        if isinstance(value, (int, float)) and not isinstance(value, bool):
            try:
                number = float(value)
            except OverflowError:
                number = math.inf
            if math.isfinite(number):
                return number
        hint = "; write the number without quotes" if _is_number_text(value) else ""
        self.report_value(key, value, expected + hint)
        return None

    def match(self, figures: Sequence[Figure]) -> dict[str, tuple[str, float]]:
        """Find the keys ``<symbol>_<unit>`` of several figures, whatever the prefix of the unit.

        Returns
        -------
        dict
            By symbol: the key, and the factor to SI. A key whose unit is wrong is there with the factor nan,
            so that it is not taken for missing; its problem is noted.
        """
        found: dict[str, tuple[str, float]] = {}
        by_length = sorted(figures, key=lambda figure: -len(figure.symbol))
        self._known += [figure.key for figure in figures]
        for key in self._values:
            figure = next((f for f in by_length if _has_symbol(key, f.symbol)), None)
            if figure is None or key in self._used:
                continue
            self._used.add(key)
            if figure.symbol in found:
                self.report(
                    key,
                    f"'{figure.symbol}' is given twice, as '{found[figure.symbol][0]}' and as '{key}'",
                    f"expected one of the two ({figure.meaning}); remove the other",
                )
                continue
            found[figure.symbol] = (key, self._factor(key, figure))
        return found

    def _factor(self, key: str, figure: Figure) -> float:
        unit = key[len(figure.symbol) + 1 :]
        try:
            return si_factor(unit, figure.base)
        except UnitError as error:
            found = printable(str(error), longest=120) if unit else "the unit is missing"
            self.report(key, found, f"expected a key such as '{figure.key}' ({figure.meaning})")
            return math.nan

    def figure(self, figure: Figure, key: str, factor: float, *, reverse: bool) -> float | None:
        """Read a number with a unit [SI]; `reverse` takes the magnitude of a voltage, current or charge."""
        expected = expectation(figure)
        if math.isnan(factor):
            return None
        number = self._number(key, self._values[key], expected)
        if number is None:
            return None
        return self._checked(figure, key, number, factor, reverse)

    def _checked(self, figure: Figure, key: str, number: float, factor: float, reverse: bool) -> float | None:
        value = number * factor
        if (reverse and figure.polar) or figure.sign == "magnitude":
            value = abs(value)
        if excess(figure, value):
            hint = ""
            if value < 0.0 and figure.polar:
                self._problems.signs += 1
                hint = '; for a p-channel part, say so in [part]: channel = "p"'
            self.report_value(key, number, expectation(figure) + hint)
            return None
        return value

    def stated(self, figure: Figure, key: str, factor: float, *, reverse: bool) -> Stated | None:
        """Read a table value [SI]: a number, or a table of any of min, typ and max.

        Of a p-channel part, magnitudes; min and max are exchanged where they were entered in the order of
        signed numbers.
        """
        if math.isnan(factor):
            return None
        value = self._values[key]
        if not isinstance(value, dict):
            typ = self.figure(figure, key, factor, reverse=reverse)
            return None if typ is None else Stated(typ=typ)
        inner = self._inner(value, key)
        expected = f"expected one or more of min, typ and max, as in {{ typ = 3.4, max = 4.0 }} ({figure.meaning})"
        if not value:
            self.report_value(key, value, expected)
            return None
        limits: dict[str, float] = {}
        signed = False
        for name in ("min", "typ", "max"):
            number = inner.number(name, expectation(figure))
            if number is None:
                continue
            signed = signed or number < 0.0
            # A lower limit of nothing at all is said now and then; it limits nothing.
            if name == "min" and number == 0.0:
                limits[name] = 0.0
                continue
            checked = inner._checked(figure, name, number, factor, reverse)
            if checked is not None:
                limits[name] = checked
        inner.close(f" of {figure.meaning}")
        if reverse and figure.polar and signed and _is_falling([*limits.values()]):
            limits = {_OPPOSITE[name]: limit for name, limit in limits.items()}
        return Stated(**limits) if limits else None

    def close(self, where: str = "") -> None:
        """Complain of every key that no method asked for, and name the one that it is most like."""
        for key in self._values:
            if key in self._used:
                continue
            like = nearest(key, self._known)
            known = ", ".join(dict.fromkeys(self._known))
            self.report(
                key,
                f"unknown key {quoted(key)}",
                f"did you mean '{like}'?" if like else f"expected only the keys{where}: {known}",
            )


_OPPOSITE = {"min": "max", "typ": "typ", "max": "min"}


def _is_falling(values: list[float]) -> bool:
    return values != sorted(values) and values == sorted(values, reverse=True)


def _has_symbol(key: str, symbol: str) -> bool:
    """Whether a key is `symbol` with a unit, right or wrong; what holds more than that is another key."""
    lower = key.lower()
    unit = lower.removeprefix(f"{symbol}_")
    return lower == symbol or (unit != lower and "_" not in unit.replace("_per_", ""))


def _is_number_text(value: object) -> bool:
    try:
        return isinstance(value, str) and math.isfinite(float(value))
    except ValueError:
        return False


def _line_quote(lines: Sequence[str], number: int | None) -> str:
    if number is None or not 1 <= number <= len(lines) or not lines[number - 1].strip():
        return ""
    return f", at {quoted(lines[number - 1].strip())}"


def _count_keys(values: Mapping[str, object]) -> int:
    """Keys of a document at any depth; without recursion, since the depth is the sender's."""
    count = 0
    rest: list[object] = [values]
    while rest:
        value = rest.pop()
        if isinstance(value, dict):
            count += len(value)
            rest += value.values()
        elif isinstance(value, list):
            rest += value
    return count


def _key_lines(lines: Sequence[str]) -> dict[Path, int]:
    """Find the line of each key and table header, by path.

    The parser of the standard library does not give lines. This looks only at how lines begin, which is
    enough for the tables of a part file; a key that is not found is reported with its table's line.
    """
    found: dict[Path, int] = {}
    counts: dict[Path, int] = {}
    here: Path = ()
    quotes = ""
    for number, line in enumerate(lines, start=1):
        if quotes:
            quotes = "" if quotes in line else quotes
            continue
        header = _HEADER.match(line)
        if header:
            here = ()
            parts = _split(header[2])
            for position, part in enumerate(parts, start=1):
                here = (*here, part)
                if header[1] == "[[" and position == len(parts):
                    counts[here] = counts.get(here, 0) + 1
                if here in counts:
                    here = (*here, counts[here])
            found.setdefault(here, number)
            continue
        key = _KEY.match(line)
        if key:
            found.setdefault((*here, *_split(key[1])), number)
        for mark in ('"""', "'''"):
            if line.count(mark) % 2:
                quotes = mark
    return found


def _split(dotted: str) -> list[str]:
    return [part.strip("\"'") for part in re.findall(_PART, dotted)]
