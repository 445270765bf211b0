"""All rules over one part."""

from __future__ import annotations

from fitter.inspection import capacitances, clicks, level, mending, ratings, soundness, table, twins
from fitter.inspection.finding import SEVERITIES, Finding
from fitter.part import Part

__all__ = ["inspect"]


def inspect(part: Part) -> tuple[Finding, ...]:
    """Judge a part's data by themselves and against each other.

    Parameters
    ----------
    part : Part
        As from `fitter.read_part`.

    Returns
    -------
    tuple of Finding
        Worst first, then by file and line; nothing is changed.
    """
    unsound, part = soundness.judge(part)
    if any(finding.topic.startswith("part.") for finding in unsound):
        return tuple(unsound)
    rating, rated = ratings.judge(part)
    flat, bent = level.judge(rated)
    clicked, smooth = clicks.judge(bent)
    twin, rest = twins.judge(smooth)
    explained, contradictions, mended = mending.mend(rest)
    findings = [
        *unsound,
        *rating,
        *flat,
        *table.inspect(mended),
        *clicked,
        *twin,
        *capacitances.notes(part),
        *explained,
        *contradictions,
    ]
    return tuple(sorted(findings, key=lambda f: (SEVERITIES.index(f.severity), f.file, f.line or 0, f.rule)))
