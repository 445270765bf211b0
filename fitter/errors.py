"""Every error that the tool raises on purpose, in one tree.

Only the outermost function of the command turns one of these into a message and an exit status; everything
else raises and lets it pass.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

__all__ = [
    "ExtrapolationWarning",
    "FitError",
    "FitterError",
    "ModelFileError",
    "OperatingPointError",
    "OutputError",
    "PartFolderError",
    "Problem",
    "UnitError",
]


@dataclass(frozen=True, kw_only=True)
class Problem:
    """One thing that is wrong with the input: where, what was found, what was expected, what to do.

    Parameters
    ----------
    file : str
        File name inside the part folder, or the folder's own name.
    line : int or None
        Line in the file, counted from 1; None where no line can be named.
    place : str
        Column of a table or dotted key of a TOML file; empty where there is none.
    found : str
        What stands there, quoted.
    expected : str
        What should stand there, and what to do about it.
    """

    file: str
    line: int | None = None
    place: str = ""
    found: str
    expected: str

    def __str__(self) -> str:
        where = self.file if self.line is None else f"{self.file}:{self.line}"
        if self.place:
            where += f" [{self.place}]"
        return f"{where}: {self.found}; {self.expected}"


class FitterError(Exception):
    """Base of all errors that the tool raises on purpose; the message is meant for the user."""


class PartFolderError(FitterError):
    """The part folder cannot be read as it stands; carries all problems found, not only the first.

    Attributes
    ----------
    problems : tuple of Problem
        In the order of the files, never empty.
    """

    def __init__(self, problems: Sequence[Problem]) -> None:
        self.problems = tuple(problems)
        super().__init__("\n".join(str(problem) for problem in self.problems))


class UnitError(FitterError):
    """A unit that is not known, or not of the expected kind."""


class FitError(FitterError):
    """The data cannot carry a fit, or the fit failed."""


class OperatingPointError(FitterError):
    """An operating point that the model cannot reach, such as a load current above what the channel carries."""


class ExtrapolationWarning(UserWarning):
    """A model is asked about a junction temperature outside those it was fitted at."""


class ModelFileError(FitterError):
    """A model file that is missing, malformed or of another format version."""


class OutputError(FitterError):
    """Output that cannot be written."""
