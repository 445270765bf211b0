"""What an inspection says, and the comparisons that it draws."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

from fitter.part import Curve

__all__ = ["SEVERITIES", "Comparison", "Finding", "Severity", "ratio"]

Severity = Literal["stop", "doubtful", "note"]

#: Worst first: what would make a fit meaningless; what is likely wrong; what is worth knowing.
SEVERITIES: tuple[Severity, ...] = ("stop", "doubtful", "note")


#: A curve this many times its limit off a table value makes a meaningless model, whatever the reason.
_HOPELESS = 4.0


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


@dataclass(frozen=True, kw_only=True)
class Comparison:
    """One figure read off a curve and held against what it should be; a contradiction where it is beyond its limit.

    Parameters
    ----------
    rule : str
        Name of the rule.
    curve : Curve
        The curve that was read.
    other : Curve or None
        The curve that it was held against; None for a table value or a rule that needs none.
    at : int
        The point to look at.
    off : float
        Distance from what it should be, in units of the limit: above 1 is a contradiction.
    says : str
        The comparison in words, with its figure.
    remedy : str
        What to look at where no single edit explains the contradiction.
    severity : {"stop", "doubtful", "note"}
        How bad the contradiction is by itself.
    stated : str
        The table value that takes part, as ``group.value`` of `fitter.part.StatedValues`; empty for none.
    """

    rule: str
    curve: Curve
    other: Curve | None = None
    at: int = 0
    off: float
    says: str
    remedy: str
    severity: Severity = "doubtful"
    stated: str = ""

    @property
    def contradicts(self) -> bool:
        """Whether the figure is beyond its limit."""
        return self.off > 1.0

    @property
    def key(self) -> tuple[str, frozenset[str]]:
        """What identifies the comparison, from whichever of its two curves it is drawn."""
        names = {self.curve.name} | ({self.other.name} if self.other is not None else set())
        return self.rule, frozenset(names)

    def finding(self) -> Finding:
        """The contradiction as a finding; one far from a table value stops the fit, explained or not."""
        hopeless = self.severity == "doubtful" and bool(self.stated) and self.off > _HOPELESS
        names = [self.curve.name] + ([self.other.name] if self.other is not None else [])
        return Finding(
            rule=self.rule,
            severity="stop" if hopeless else self.severity,
            topic=", ".join(names),
            file=self.curve.file,
            line=int(self.curve.lines[self.at]),
            found=self.says,
            remedy=self.remedy,
        )


def ratio(factor: float, low: float, high: float = math.inf, *, slack: float = 0.0) -> float:
    """How far a factor that should be about one is off, in units of its limit.

    Parameters
    ----------
    factor : float
        What was read over what was expected.
    low, high : float
        Limits below and above one; 0 and inf for none.
    slack : float
        Widens both limits: an error of ln(factor).

    Returns
    -------
    float
        0 at a factor of one, 1 at a limit, growing with the logarithm.

    Examples
    --------
    >>> ratio(1.0, 0.5, 2.0), ratio(4.0, 0.5, 2.0), ratio(0.125, 0.5), ratio(100.0, 0.5)
    (0.0, 2.0, 3.0, 0.0)
    """
    if not factor > 0.0:
        return 9.0 if low > 0.0 else 0.0
    limit = low if factor < 1.0 else high
    if limit in (0.0, math.inf):
        return 0.0
    # An error beyond a factor of e would excuse anything.
    return abs(math.log(factor)) / (abs(math.log(limit)) + min(slack, 1.0))
