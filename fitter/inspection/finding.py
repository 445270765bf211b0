"""What an inspection says."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

__all__ = ["SEVERITIES", "Finding", "Severity"]

Severity = Literal["stop", "doubtful", "note"]

#: Worst first: what would make a fit meaningless; what is likely wrong; what is worth knowing.
SEVERITIES: tuple[Severity, ...] = ("stop", "doubtful", "note")


@dataclass(frozen=True, kw_only=True)
class Finding:
    """One thing that an inspection found.

    Parameters
    ----------
    rule : str
        Name of the rule.
    severity : {"stop", "doubtful", "note"}
        How bad it is.
    topic : str
        The curve or table value.
    file : str
        Where it stands.
    line : int or None
        Line in that file, where one can be named.
    found : str
        What was found, with its figure, and why it cannot be right.
    remedy : str
        What to do.
    """

    rule: str
    severity: Severity
    topic: str
    file: str
    line: int | None = None
    found: str
    remedy: str

    def __str__(self) -> str:
        where = self.file if self.line is None else f"{self.file}:{self.line}"
        return f"{where} [{self.topic}]: {self.found}; {self.remedy}"
