"""Every slip in every curve of every demo part: the inspection names the edit that mends it.

Decade and unit slips of either axis (a wrong unit or calibration takes the printed axis with it; or points alone, or
the axis alone), exchanged columns, exchanged curves, axes taken for linear that were logarithmic, or only read or
declared so, axes calibrated from the wrong end, the same slip in a whole figure, slips of table values. The usual run
tries every seventh, ``slow`` all of them.
"""

from __future__ import annotations

import re
from collections import Counter
from dataclasses import dataclass, replace
from functools import cache
from itertools import combinations

import pytest
from conftest import DEMO_PARTS, ROOT

from fitter.inspection import inspect
from fitter.inspection.reading import CAPACITANCES
from fitter.inspection.transforms import (
    exchange_columns,
    exchange_curves,
    mirror,
    redivide,
    relabel,
    scale,
    scale_axis,
    scale_points,
)
from fitter.part import Part, Quantity
from fitter.reader import read_part

SHARE = 0.95
TEMPERATURES = (Quantity.RDS_ON_TEMPERATURE, Quantity.VGS_TH_TEMPERATURE)
SLIPS = {10.0: "decade", 0.1: "decade", 1e3: "unit", 1e-3: "unit"}


@dataclass(frozen=True)
class Mutation:
    """A slip: its class, what was done, the part with it, and what the remedy must say and be about."""

    kind: str
    label: str
    part: Part
    remedy: re.Pattern
    topics: tuple[str, ...]

    def named(self):
        """Whether a finding above a note names the right edit of the right curve."""
        return any(
            f.severity in ("stop", "doubtful")
            and self.remedy.search(f.remedy)
            and (not self.topics or set(f.topic.split(", ")) == set(self.topics))
            for f in inspect(self.part)
        )


def with_curves(part, *curves):
    """The part with curves in the place of those of their names."""
    by_name = {c.name: c for c in curves}
    return replace(part, curves=tuple(by_name.get(c.name, c) for c in part.curves))


@cache
def demo_part(name):
    return read_part(ROOT / "digitized_curves" / name)


def back(factor, along):
    """What undoes a factor, in the words of the remedy."""
    verb, by = ("divide", factor) if factor > 1.0 else ("multiply", 1.0 / factor)
    return re.compile(rf"\b{verb} the {along} values by {by:g}\b")


def slips(part):
    for curve in part.curves:
        for along in ("x", "y"):
            for factor, kind in SLIPS.items():
                for what, change in (("with its axis", scale), ("points alone", scale_points)):
                    yield Mutation(
                        f"{kind} {along} {what}", f"{curve.name} {along} x {factor:g} {what}",
                        with_curves(part, change(curve, along, factor)), back(factor, along), (curve.name,),
                    )  # fmt: skip


def columns(part):
    for curve in part.curves:
        for axes in (True, False):
            yield Mutation(
                "columns", f"{curve.name} columns, axes {'too' if axes else 'not'}",
                with_curves(part, exchange_columns(curve, axes=axes)), re.compile("exchange the two columns"),
                (curve.name,),
            )  # fmt: skip


def exchanges(part):
    for first, second in combinations(part.curves, 2):
        pair = {first.quantity, second.quantity}
        if len(pair) == 1 or pair <= set(CAPACITANCES) or pair == set(TEMPERATURES):
            yield Mutation(
                "curves", f"{first.name} <-> {second.name}", with_curves(part, *exchange_curves(first, second)),
                re.compile("exchange the (curves|points)"), (first.name, second.name),
            )  # fmt: skip
    iss, oss, rss = (part.curves_of(q)[0] for q in CAPACITANCES)
    for a, b, c in ((iss, oss, rss), (iss, rss, oss)):
        first, second = exchange_curves(a, b)
        second, third = exchange_curves(second, c)
        yield Mutation(
            "curves", f"{a.name} -> {b.name} -> {c.name}", with_curves(part, first, second, third),
            re.compile("exchange the curves"), (a.name, b.name, c.name),
        )  # fmt: skip


def divisions(part):
    """Axes taken for the other division: only where the ends are positive can this have happened."""
    for curve in part.curves:
        for along, axis in (("x", curve.x_axis), ("y", curve.y_axis)):
            wrong = redivide(curve, along) if axis.scale == "log" else None
            if wrong is not None:
                yield Mutation(
                    "division", f"{curve.name} {along} log taken for linear", with_curves(part, wrong),
                    re.compile(f"click it again with a log {along} axis"), (curve.name,),
                )  # fmt: skip


def axis_slips(part):
    """Only the axis is entered wrong: its from and to contradict the points."""
    for curve in part.curves:
        for along in ("x", "y"):
            for factor in (10.0, 0.1):
                verb = "divide" if factor > 1.0 else "multiply"
                yield Mutation(
                    f"axis {along}", f"{curve.name} {along} axis x {factor:g}",
                    with_curves(part, scale_axis(curve, along, factor)),
                    re.compile(f"{verb} its {along}_axis' from and to by 10"), (curve.name,),
                )  # fmt: skip


def mutations(name):
    part = demo_part(name)
    for make in (slips, columns, exchanges):
        yield from make(part)


def measure(cases):
    """Share of named cases by kind, and the labels of those missed."""
    seen, named, missed = Counter(), Counter(), []
    for case in cases:
        seen[case.kind] += 1
        if case.named():
            named[case.kind] += 1
        else:
            missed.append(f"{case.part.name}: {case.label}")
    return {kind: named[kind] / seen[kind] for kind in seen}, missed, sum(named.values()) / sum(seen.values())


def figures(part):
    """The same slip in every curve of a figure."""
    groups = [CAPACITANCES, (Quantity.TRANSFER,), (Quantity.OUTPUT,), (Quantity.BODY_DIODE,)]
    for group in groups:
        curves = [c for c in part.curves if c.quantity in group]
        for along in ("x", "y"):
            for factor in SLIPS:
                yield Mutation(
                    "figure", f"figure of {curves[0].name} {along} x {factor:g}",
                    with_curves(part, *(scale(c, along, factor) for c in curves)), back(factor, along),
                    tuple(c.name for c in curves),
                )  # fmt: skip


def table_values(part):
    """A table value in the wrong unit or with its point in the wrong place."""
    for group, name in (
        ("capacitance", "c_iss"), ("capacitance", "c_oss"), ("capacitance", "c_rss"), ("threshold", "v_gs_th"),
        ("on_resistance", "r_ds_on"), ("transconductance", "g_fs"), ("gate_charge", "q_g"),
        ("gate_charge", "v_plateau"), ("body_diode", "v_sd"), ("output_charge", "q_oss"), ("output_charge", "e_oss"),
    ):  # fmt: skip
        values = getattr(part.stated, group)
        stated = getattr(values, name)
        for factor in SLIPS:
            wrong = {f: v * factor for f in ("min", "typ", "max") if (v := getattr(stated, f)) is not None}
            changed = replace(values, **{name: replace(stated, **wrong)})
            verb, by = ("divide", factor) if factor > 1.0 else ("multiply", 1.0 / factor)
            key = name if name == "v_plateau" else name.replace("_", "", 1)
            yield Mutation(
                "table", f"{group}.{name} x {factor:g}", replace(part, stated=replace(part.stated, **{group: changed})),
                re.compile(rf"\b{verb} stated.{group}.{key} by {by:g}\b"), (),
            )  # fmt: skip


def reversals(part):
    """Axes calibrated from the wrong end, of one curve and of a whole figure."""
    for curve in part.curves:
        for along in ("x", "y"):
            if curve.quantity is Quantity.OUTPUT and along == "x" and curve.y.max() < 0.1 * curve.y_axis.end:
                continue  # level all along: the same from either end
            yield Mutation(
                f"reversed {along}", f"{curve.name} {along} from the other end",
                with_curves(part, mirror(curve, along)),
                re.compile(f"its {along} axis was calibrated from the wrong end"), (curve.name,),
            )  # fmt: skip
    three = [part.curves_of(q)[0] for q in CAPACITANCES]
    for along in ("x", "y"):
        yield Mutation(
            f"reversed {along}", f"figure of capacitances {along} from the other end",
            with_curves(part, *(mirror(c, along) for c in three)),
            re.compile(f"its {along} axis was calibrated from the wrong end.*in all curves of the figure"),
            tuple(c.name for c in three),
        )  # fmt: skip


def declarations(part):
    """Points as they should be, on a logarithmic axis that is declared linear."""
    for curve in part.curves:
        for along, axis in (("x", curve.x_axis), ("y", curve.y_axis)):
            if axis.scale == "log":
                yield Mutation(
                    "declared", f"{curve.name} {along} axis declared linear",
                    with_curves(part, relabel(curve, along)),
                    re.compile(f'write scale = "log" for its {along}_axis'), (curve.name,),
                )  # fmt: skip


def rereads(part):
    """Points of a logarithmic axis read as on a linear one, the axis entered as printed.

    Of a level Ciss, and of a single diode curve at another temperature than the table's, nothing tells.
    """
    for curve in part.curves:
        if curve.quantity is Quantity.CISS or (curve.quantity is Quantity.BODY_DIODE and curve.t_j != 25.0):
            continue
        for along, axis in (("x", curve.x_axis), ("y", curve.y_axis)):
            wrong = redivide(curve, along) if axis.scale == "log" else None
            if wrong is not None:
                yield Mutation(
                    "reread", f"{curve.name} {along} read as linear",
                    with_curves(part, replace(wrong, x_axis=curve.x_axis, y_axis=curve.y_axis)),
                    re.compile(f"click it again with a log {along} axis: its points were read as on a linear one"),
                    (curve.name,),
                )  # fmt: skip


MAKERS = (slips, columns, exchanges, divisions, declarations, rereads, reversals, axis_slips, figures, table_values)
#: The usual run's stride: no divisor of the numbers of factors and axes, so that all of them have their turn.
STRIDE = 7


def judge(name, makers, start, stride):
    cases = [case for make in makers for case in make(demo_part(name))][start::stride]
    shares, missed, whole = measure(cases)
    assert whole >= SHARE, f"{shares}\nmissed: " + "\n".join(missed)
    return shares


@pytest.mark.parametrize("name", DEMO_PARTS)
def test_a_share_of_the_slips_is_named(name):
    shares = judge(name, MAKERS, DEMO_PARTS.index(name), STRIDE)
    assert {"curves", "columns"} <= set(shares)


@pytest.mark.slow
@pytest.mark.parametrize("make", MAKERS)
@pytest.mark.parametrize("name", DEMO_PARTS)
def test_all_slips_are_named(name, make):
    judge(name, (make,), 0, 1)
