"""Collecting what is wrong with a part folder, so that everything is reported at once."""

from __future__ import annotations

import difflib
from collections.abc import Iterable

from fitter.errors import PartFolderError, Problem

__all__ = ["MAX_PROBLEMS", "MAX_PROBLEMS_PER_FILE", "Problems", "nearest", "printable", "quoted", "with_article"]

MAX_PROBLEMS = 200
MAX_PROBLEMS_PER_FILE = 50
_LONGEST_QUOTE = 40
_LONGEST_INTEGER_BITS = 128


def printable(text: str, *, longest: int) -> str:
    """Put a text on one line, without control characters, and shorten it to `longest` characters."""
    shown = text if len(text) <= longest else text[:longest] + "..."
    return "".join(c if c.isprintable() else ascii(c)[1:-1] for c in shown)


def quoted(value: object) -> str:
    r"""Quote what was found as it can stand in a message: shortened, on one line, without control characters.

    Parameters
    ----------
    value : object
        A text of a file, or a value of a TOML document.

    Returns
    -------
    str
        Texts in quotes; tables and lists only by their kind.

    Examples
    --------
    >>> print(quoted("3,9 nF"), quoted(True), quoted(-4.0), quoted("two\nlines"))
    '3,9 nF' true -4 'two\nlines'
    """
    if isinstance(value, str):
        return f"'{printable(value, longest=_LONGEST_QUOTE)}'"
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, list):
        return "a list"
    if isinstance(value, int) and value.bit_length() > _LONGEST_INTEGER_BITS:
        return "a number of very many digits"
    return f"{value:.10g}" if isinstance(value, float) else str(value)


def nearest(word: str, known: Iterable[str]) -> str:
    """Find the known word most like `word`; empty where none is at all like it. Case does not count.

    Examples
    --------
    >>> nearest("Vds_max", ["vds_max_V", "vgs_max_V", "name"])
    'vds_max_V'
    """
    by_lower = {name.lower(): name for name in known}
    found = difflib.get_close_matches(word.lower(), by_lower, n=1, cutoff=0.5)
    return by_lower[found[0]] if found else ""


def with_article(noun: str) -> str:
    """Put the indefinite article before a noun.

    Examples
    --------
    >>> with_article("output curve"), with_article("transfer curve"), with_article("rds_on_temperature curve")
    ('an output curve', 'a transfer curve', 'an rds_on_temperature curve')
    """
    # Names of curves are spoken: "r" begins with a vowel where it is spelled out.
    return f"{'an' if noun[:1] in 'aeio' or noun.startswith('rds') else 'a'} {noun}"


class Problems:
    """The problems found so far, by file.

    Attributes
    ----------
    signs : int
        How many of them are voltages or currents of a p-channel part's sign.
    """

    def __init__(self) -> None:
        self.signs = 0
        # By file, in the order in which they were found; dictionaries, since a file can have very many.
        self._by_file: dict[str, dict[Problem, None]] = {}
        self._count = 0

    def add(self, file: str, found: str, expected: str, *, line: int | None = None, place: str = "") -> None:
        """Note one problem; the arguments are those of `Problem`. The same one twice is noted once."""
        problem = Problem(file=file, line=line, place=place, found=found, expected=expected)
        problems = self._by_file.setdefault(file, {})
        if problem in problems:
            return
        if not self.full(file):
            problems[problem] = None
            self._count += 1

    def full(self, file: str) -> bool:
        """Whether no more problems of a file are noted: the rest of it need not be looked at."""
        return self._count >= MAX_PROBLEMS or len(self._by_file.get(file, ())) >= MAX_PROBLEMS_PER_FILE

    def __bool__(self) -> bool:
        return bool(self._by_file)

    def error(self) -> PartFolderError:
        """All of them as one error: file by file, each file's by line, and no more than help."""
        shown: list[Problem] = []
        for file, problems in self._by_file.items():
            if not problems:
                break
            shown += sorted(problems, key=lambda problem: problem.line or 0)
            if self.full(file):
                shown.append(Problem(file=file, found="there may be more problems", expected="mend those above first"))
        return PartFolderError(shown)
