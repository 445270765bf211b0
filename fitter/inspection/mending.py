"""The one edit that explains a curve's contradictions: every likely slip is tried, and the comparisons drawn again."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass, replace

from fitter.inspection.edits import Edit, edits, key_of, table_edits
from fitter.inspection.finding import Comparison, Finding
from fitter.inspection.reading import PART_FILE
from fitter.inspection.rules import comparisons
from fitter.part import Part

__all__ = ["contradiction", "mend"]

#: One part folder hardly holds more slips than this; each needs a search of its own.
_MOST_EDITS = 4
#: A comparison counts with the square of its distance, up to this: how far beyond its limit says little.
_MOST = 16.0
#: An edit must leave less than this share of the contradictions' weight.
_LEFT = 0.35
#: Curves that are tried, those with the most contradictions first.
_SUSPECTS = 6
#: Two edits explain the data alike where their gains differ by less than one contradiction's weight.
_ALIKE = 1.0

#: Either axis may be the reversed one; a wrong division may be in the points or only in the axis' entry, and look like
#: a slipped decade.
_AMBIGUOUS = ({"reversed axis"}, {"axis division"}, {"axis division", "slip"})

Key = tuple[str, frozenset[str]]


def mend(part: Part) -> tuple[list[Finding], list[Finding], Part]:
    """Find contradictions and the edits that explain them.

    Parameters
    ----------
    part : Part
        As read.

    Returns
    -------
    edits, contradictions : list of Finding
        What single edits explain, with the comparison as it would be then; and what none explains, after those edits.
    part : Part
        With those edits.
    """
    explained: list[Finding] = []
    for _ in range(_MOST_EDITS):
        best = _best(part)
        if best is None:
            break
        explained.append(best.finding())
        part = best.part
    return explained, [c.finding() for c in _drawn(part).values() if c.contradicts], part


def contradiction(part: Part) -> float:
    """How much the data contradict each other, as the sum of all contradictions' weights."""
    return sum(_weight(c) for c in _drawn(part).values() if c.contradicts)


def _best(part: Part) -> _Trial | None:
    """The edit that explains most: usual slips before rare ones, one that leaves nothing before any other."""
    drawn = _drawn(part)
    wrong = [c for c in drawn.values() if c.contradicts]
    weights = {c.name: sum(_weight(x) for x in wrong if c.name in x.key[1]) for c in part.curves}
    suspects = sorted((c for c in part.curves if weights[c.name]), key=lambda c: -weights[c.name])[:_SUSPECTS]
    values = dict.fromkeys(c.stated for c in wrong if c.stated)
    for rare in (False, True):
        trials: list[_Trial] = []
        tried: set[tuple[str, frozenset[str]]] = set()
        for curve in suspects:
            # An edit of a whole figure is proposed by each of its curves.
            fresh = {
                (edit.text, frozenset(c.name for c in edit.curves)): edit for edit in edits(part, curve, rare=rare)
            }
            found = [_try(part, drawn, edit) for key, edit in fresh.items() if key not in tried]
            tried |= fresh.keys()
            trials += [trial for trial in found if trial is not None]
            if any(trial.explains_all for trial in trials):
                break
        found = [_try(part, drawn, edit) for value in values for edit in table_edits(part, value, rare=rare)]
        trials += [trial for trial in found if trial is not None]
        if trials:
            return _with_rival(trials)
    return None


def _with_rival(trials: list[_Trial]) -> _Trial:
    """The best trial, with the best of the other kind (table or curve) where the data cannot tell them apart."""
    best = max(trials, key=lambda trial: trial.gain)
    others = [t for t in trials if t is not best and _is_rival(t.edit, best.edit)]
    rival = max(others, key=lambda trial: trial.gain, default=None)
    if rival is None or rival.gain < best.gain - _ALIKE:
        return best
    return replace(best, rival=rival.edit.text)


def _is_rival(edit: Edit, best: Edit) -> bool:
    """Whether two edits are worth naming both: one of the table and one of a curve, or two readings of one slip."""
    alike = {edit.rule, best.rule} in _AMBIGUOUS
    return (edit.stated is None) != (best.stated is None) or (
        alike and [c.name for c in edit.curves] == [c.name for c in best.curves]
    )


@dataclass(frozen=True, kw_only=True)
class _Trial:
    """An edit that explains something: the part with it, and the comparisons before and after."""

    edit: Edit
    part: Part
    gain: float
    before: dict[Key, Comparison]
    after: dict[Key, Comparison]
    explains_all: bool
    rival: str = ""

    def finding(self) -> Finding:
        """Say what the edit explains."""
        mended = [c for key, c in self.before.items() if c.contradicts and key in self.after]
        mended.sort(key=lambda c: -c.off)
        shown = mended[:2]
        then = "; ".join(self.after[c.key].says for c in shown)
        curves = self.edit.curves
        sure = sum(c.severity != "note" for c in mended)
        advice = self.edit.text + (f", or {self.rival}" if self.rival else "")
        if not sure:
            advice += ", unless the curves are from two figures"
        # The line of the worst contradiction where it is in an edited curve.
        own = next((c for c in mended if c.curve.name in {x.name for x in curves}), None)
        return Finding(
            rule=self.edit.rule,
            severity="stop" if sure > 1 else "doubtful",
            topic=self.edit.key or ", ".join(c.name for c in curves),
            file=PART_FILE if self.edit.key else curves[0].file if own is None else own.curve.file,
            line=None if self.edit.key or own is None else int(own.curve.lines[own.at]),
            found="; ".join(c.says for c in shown),
            remedy=f"{advice}; then {then}",
        )


def _drawn(part: Part, names: Collection[str] | None = None) -> dict[Key, Comparison]:
    """The comparisons of all curves, or of those named."""
    curves = [c for c in part.curves if names is None or c.name in names]
    return {c.key: c for curve in curves for c in comparisons(part, curve)}


def _weight(comparison: Comparison) -> float:
    return min(comparison.off**2, _MOST)


def _try(part: Part, drawn: dict[Key, Comparison], edit: Edit) -> _Trial | None:
    """The trial of an edit; None where it does not explain what it touches."""
    names = {c.name for c in edit.curves}
    if edit.stated is not None:
        named = {c.curve.name for c in drawn.values() if c.stated and key_of(c.stated) == edit.key}
        # A condition may show in any curve's comparisons.
        names = named or {c.name for c in part.curves}
    before = {key: c for key, c in drawn.items() if key[1] & names}
    wrong = {key: c for key, c in before.items() if c.contradicts}
    edited = edit.applied(part)
    after = _drawn(edited, names)
    if edit.rule == "axis slip":
        # A figure that stays is not mended because a longer axis has larger reading errors.
        after |= {key: c for key, c in wrong.items() if key in after and after[key].says == c.says}
    # A curve that no longer reaches the table's condition is not thereby mended; another curve may be out of its reach.
    after |= {key: c for key, c in wrong.items() if key not in after and c.other is None}
    lost = wrong.keys() - after.keys()
    wrong = {key: c for key, c in wrong.items() if key not in lost}
    still_wrong = {key: c for key, c in after.items() if c.contradicts}
    if not wrong or any(c.severity != "note" for key, c in still_wrong.items() if key not in wrong):
        return None
    if sum(map(_weight, still_wrong.values())) > _LEFT * sum(map(_weight, wrong.values())):
        return None
    return _Trial(
        edit=edit,
        part=edited,
        gain=sum(map(_weight, before.values())) - sum(map(_weight, after.values())) - edit.cost,
        before=before,
        after=after,
        explains_all=not still_wrong and len(wrong) + len(lost) == sum(c.contradicts for c in drawn.values()),
    )
