"""What every rule takes for granted, and the reader guarantees: finite figures, axes with a length, real conditions."""

from __future__ import annotations

from dataclasses import fields, replace
from typing import Any

import numpy as np

from fitter.inspection.finding import Finding
from fitter.inspection.reading import PART_FILE
from fitter.part import Axis, Curve, Part, Stated

__all__ = ["judge"]

#: No figure of a transistor is larger in SI; squares and ratios of smaller ones can be worked out.
_MOST = 1e30


def judge(part: Part) -> tuple[list[Finding], Part]:
    """Find what a part that was not read from a folder may hold, and no rule can work with.

    Parameters
    ----------
    part : Part
        From anywhere.

    Returns
    -------
    findings : list of Finding
        Each stops a fit.
    part : Part
        Without what they are about.
    """
    findings = [
        _finding(f"part.{key}", f"{key} is {value:g} V", "give the rating, above zero")
        for key, value in (("vds_max_V", part.v_ds_max), ("vgs_max_V", part.v_gs_max))
        if not 0.0 < value < _MOST
    ]
    bad = [curve for curve in part.curves if not _is_sound(curve)]
    findings += [
        _finding(curve.name, "its points, axes or conditions are not all finite, or there are none", "click it again")
        for curve in bad
    ]
    names = {curve.name for curve in bad}
    groups: dict[str, Any] = {}
    for field in fields(part.stated):
        group = getattr(part.stated, field.name)
        if group is not None and not all(_is_figure(getattr(group, item.name)) for item in fields(group)):
            groups[field.name] = None
            findings.append(
                _finding(f"stated.{field.name}", "its figures are not all finite and above zero", "look at the table")
            )
    curves = tuple(curve for curve in part.curves if curve.name not in names)
    return findings, replace(part, curves=curves, stated=replace(part.stated, **groups))


def _finding(topic: str, found: str, remedy: str) -> Finding:
    return Finding(rule="soundness", severity="stop", topic=topic, file=PART_FILE, found=found, remedy=remedy)


def _is_sound(curve: Curve) -> bool:
    conditions = (curve.v_gs, curve.v_ds, curve.t_j, curve.v_dd, curve.i_d)
    return (
        curve.x.size > 0
        and bool(np.all(np.abs(curve.x) < _MOST) and np.all(np.abs(curve.y) < _MOST))
        and all(_has_length(axis) for axis in (curve.x_axis, curve.y_axis))
        and all(0.0 <= error < 1.0 for error in (curve.point_error, curve.axis_error))
        and all(value is None or abs(value) < _MOST for value in conditions)
    )


def _has_length(axis: Axis) -> bool:
    return -_MOST < axis.start < axis.end < _MOST and (axis.scale == "linear" or axis.start > 0.0)


def _is_figure(value: object) -> bool:
    """Whether a condition is a number above zero, and a table value finite."""
    if isinstance(value, Stated):
        return all(not x or 1.0 / _MOST < abs(x) < _MOST for x in (value.min, value.typ, value.max))
    return not isinstance(value, float) or 1.0 / _MOST < value < _MOST
