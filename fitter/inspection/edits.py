"""The edits of a part folder that are considered where something contradicts."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from itertools import permutations

from fitter.inspection.reading import CAPACITANCES, sisters
from fitter.inspection.transforms import (
    Along,
    exchange_columns,
    exchange_curves,
    mirror,
    redivide,
    relabel,
    reread,
    scale,
    scale_axis,
    scale_points,
    with_data_of,
)
from fitter.part import Axis, Curve, Part, Quantity, StatedValues
from fitter.units import PREFIXES

__all__ = ["Edit", "edits", "key_of", "table_edits"]

#: Decade slips and unit slips.
_USUAL = (10.0, 0.1, 1e3, 1e-3)
#: Two decades; a micro for a pico.
_RARE = (100.0, 0.01, 1e6, 1e-6)
_TEMPERATURES = (Quantity.RDS_ON_TEMPERATURE, Quantity.VGS_TH_TEMPERATURE)
#: Conditions that a curve is read at to compare it with a table value.
_CONDITIONS = {
    "capacitance.c_iss": ("v_ds",),
    "capacitance.c_oss": ("v_ds",),
    "capacitance.c_rss": ("v_ds",),
    "gate_charge.q_g": ("v_gs",),
    "gate_charge.v_plateau": ("i_d",),
    "on_resistance.r_ds_on": ("i_d",),
    "transconductance.g_fs": ("i_d",),
    "output_charge.q_oss": ("v_ds",),
    "output_charge.e_oss": ("v_ds",),
    "body_diode.v_sd": ("i_s",),
}
#: Rows of the table that one can read in each other's places.
_ROWS = {
    "capacitance.c_iss": ("c_oss", "c_rss"),
    "capacitance.c_oss": ("c_iss", "c_rss"),
    "capacitance.c_rss": ("c_iss", "c_oss"),
}


@dataclass(frozen=True, kw_only=True)
class Edit:
    """An edit of a part folder, carried out.

    Parameters
    ----------
    rule : str
        Name of the rule that proposes it.
    text : str
        What the user is to do.
    curves : tuple of Curve
        The curves as they would be then, each under its own name.
    stated : StatedValues or None
        The table as it would be then; None where it stays.
    key : str
        The key in the part file of the edited table value or condition.
    cost : float
        How unlikely the slip is, to choose between edits that explain the data alike.
    """

    rule: str
    text: str
    curves: tuple[Curve, ...] = ()
    stated: StatedValues | None = None
    key: str = ""
    cost: float = 0.0

    def applied(self, part: Part) -> Part:
        """The part with the edit."""
        by_name = {c.name: c for c in self.curves}
        curves = tuple(by_name.get(c.name, c) for c in part.curves)
        return replace(part, curves=curves, stated=part.stated if self.stated is None else self.stated)


def edits(part: Part, curve: Curve, *, rare: bool) -> Iterator[Edit]:
    """The edits that are considered for a curve: the usual ones, or the rare ones."""
    if rare:
        yield from _scalings(curve, _RARE)
        yield from _figure(part, curve, _RARE)
    else:
        yield from _scalings(curve, _USUAL)
        yield from _figure(part, curve, _USUAL)
        yield from _columns(curve)
        yield from _divisions(curve)
        yield from _directions(part, curve)
        yield from _exchanges(part, curve)


def key_of(value: str) -> str:
    """The key in the part file, without its unit, of a table value named as ``group.value``."""
    group, _, name = value.partition(".")
    return f"stated.{group}.{name if name == 'v_plateau' else name.replace('_', '', 1)}"


def table_edits(part: Part, value: str, *, rare: bool) -> Iterator[Edit]:
    """Slips of a table value, named as ``group.value``, and of its conditions; and its exchange with another row."""
    group_name, _, name = value.partition(".")
    group = getattr(part.stated, group_name)
    stated = getattr(group, name)
    key = key_of(value)
    for other in () if rare else _ROWS.get(value, ()):
        taken = getattr(group, other)
        if taken is not None:
            both = f"{key}, {key_of(f'{group_name}.{other}')}"
            yield Edit(
                rule="table exchange",
                text=f"exchange {both.replace(', ', ' and ')}",
                stated=replace(part.stated, **{group_name: replace(group, **{name: taken, other: stated})}),
                key=both,
            )
    for factor in _RARE if rare else _USUAL:
        figures = {f: v * factor for f in ("min", "typ", "max") if (v := getattr(stated, f)) is not None}
        changed = replace(group, **{name: replace(stated, **figures)})
        yield Edit(
            rule="table slip",
            text=f"{_by(factor)[0]} {key} {_by(factor)[1]}",
            stated=replace(part.stated, **{group_name: changed}),
            key=key,
            cost=0.3,
        )
        for condition in _CONDITIONS.get(value, ()):
            name_of = condition.replace("_", "", 1)
            changed = replace(group, **{condition: getattr(group, condition) * factor})
            yield Edit(
                rule="table slip",
                text=f"{_by(factor)[0]} stated.{group_name}.{name_of} {_by(factor)[1]}",
                stated=replace(part.stated, **{group_name: changed}),
                key=f"stated.{group_name}.{name_of}",
                cost=0.3,
            )


def _by(factor: float) -> tuple[str, str]:
    """A factor in words, in two parts."""
    return ("divide", f"by {1.0 / factor:g}") if factor < 1.0 else ("multiply", f"by {factor:g}")


def _axes(curve: Curve) -> tuple[tuple[Along, Axis], tuple[Along, Axis]]:
    return ("x", curve.x_axis), ("y", curve.y_axis)


def _scalings(curve: Curve, factors: tuple[float, ...]) -> Iterator[Edit]:
    for factor in factors:
        verb, how = _by(factor)
        for along, axis in _axes(curve):
            yield Edit(
                rule="slip",
                text=f"{verb} the {along} values {how}, and its {along}_axis' from and to{_unit(curve, along, factor)}",
                curves=(scale(curve, along, factor),),
            )
            if axis.printed:
                yield Edit(
                    rule="slip",
                    text=f"{verb} the {along} values {how}{_read_unit(curve, along, factor)}; its {along}_axis' from "
                    "and to stay",
                    curves=(scale_points(curve, along, factor),),
                    cost=0.1,
                )
                yield Edit(
                    rule="axis slip",
                    text=f"{verb} its {along}_axis' from and to {how}; the points stay",
                    curves=(scale_axis(curve, along, factor),),
                    cost=0.2,
                )


def _figure(part: Part, curve: Curve, factors: tuple[float, ...]) -> Iterator[Edit]:
    """The same slip in all curves of a figure."""
    all_curves = (curve, *sisters(part, curve))
    if len(all_curves) < 2:
        return
    along: Along
    for factor in factors:
        verb, how = _by(factor)
        for along in ("x", "y"):
            yield Edit(
                rule="slip",
                text=f"{verb} the {along} values {how}, and each {along}_axis' from and to, in all curves of the figure"
                f"{_unit(curve, along, factor)}",
                curves=tuple(scale(c, along, factor) for c in all_curves),
                cost=0.1,
            )
            yield Edit(
                rule="slip",
                text=f"{verb} the {along} values {how}{_read_unit(curve, along, factor)}, in all curves of the figure; "
                f"each {along}_axis' from and to stay",
                curves=tuple(scale_points(c, along, factor) for c in all_curves),
                cost=0.15,
            )


def _unit(curve: Curve, along: Along, factor: float) -> str:
    """Where a thousand is meant: the column's name with the unit that would make it so."""
    column, base = (curve.x_column, curve.x_unit) if along == "x" else (curve.y_column, curve.y_unit)
    if base in ("", "degC"):
        return ""
    unit = _scaled_unit(column, base, factor)
    if unit:
        return f": the column should be {column.rpartition('_')[0]}_{unit}, not {column}"
    return ": a slip of its unit, or in the axis' calibration"


def _read_unit(curve: Curve, along: Along, factor: float) -> str:
    """Where a thousand is meant: the unit that the points were read in."""
    column, base = (curve.x_column, curve.x_unit) if along == "x" else (curve.y_column, curve.y_unit)
    unit = _scaled_unit(column, base, factor) if base not in ("", "degC") else ""
    return f": they are in {unit}, not in {column.rpartition('_')[2]}" if unit else ""


def _scaled_unit(column: str, base: str, factor: float) -> str:
    """The unit that is a factor times a column's; empty where there is none."""
    now = PREFIXES.get(column.rpartition("_")[2].removesuffix(base), 0.0)
    units = (f"{prefix}{base}" for prefix, value in PREFIXES.items() if abs(value - now * factor) < 1e-6 * value)
    return next(units, "")


def _columns(curve: Curve) -> Iterator[Edit]:
    text = f"exchange the two columns {curve.x_column} and {curve.y_column}"
    yield Edit(
        rule="exchanged columns",
        text=f"{text}, and x_axis with y_axis",
        curves=(exchange_columns(curve, axes=True),),
        cost=0.2,
    )
    yield Edit(
        rule="exchanged columns", text=f"{text}; the axes stay", curves=(exchange_columns(curve, axes=False),), cost=0.3
    )


def _divisions(curve: Curve) -> Iterator[Edit]:
    for along, axis in _axes(curve):
        true = "log" if axis.scale == "linear" else "linear"
        other = redivide(curve, along)
        if other is not None:
            yield Edit(
                rule="axis division",
                text=f"click it again with a {true} {along} axis: it was taken for {axis.scale}",
                curves=(other,),
                cost=0.5,
            )
        read = reread(curve, along)
        if read is not None:
            yield Edit(
                rule="axis division",
                text=f"click it again with a {axis.scale} {along} axis: its points were read as on a {true} one",
                curves=(read,),
                cost=0.45,
            )
        declared = relabel(curve, along)
        if declared is not None and axis.printed:
            yield Edit(
                rule="axis division",
                text=f'write scale = "{true}" for its {along}_axis; the points stay',
                curves=(declared,),
                cost=0.4,
            )


def _directions(part: Part, curve: Curve) -> Iterator[Edit]:
    """Axes that were calibrated from the wrong end, of one curve and of a whole figure."""
    figure = (curve, *sisters(part, curve))
    for along, axis in _axes(curve):
        column = curve.x_column if along == "x" else curve.y_column
        undone = f"from + to - {column}" if axis.scale == "linear" else f"from x to / {column}"
        text = f"its {along} axis was calibrated from the wrong end: "
        if axis.printed:
            text += f"replace each {column} by {undone} (from and to of its {along}_axis), or "
        text += f"click it again with the ends of the {along} axis exchanged"
        for curves, where, cost in (((curve,), "", 0.0), (figure, "; so in all curves of the figure", 0.1)):
            turned = [mirror(c, along) for c in curves]
            if where and len(curves) == 1:
                continue
            yield Edit(
                rule="reversed axis",
                text=text + where,
                curves=tuple(c for c in turned if c is not None),
                cost=cost,
            )


def _exchanges(part: Part, curve: Curve) -> Iterator[Edit]:
    for other in sisters(part, curve):
        yield Edit(
            rule="exchanged",
            text=f"exchange the curves {curve.name} and {other.name}: the points, or what is said of them in part.toml",
            curves=exchange_curves(curve, other),
        )
    if curve.quantity in CAPACITANCES:
        yield from _circles(part)
    if curve.quantity in _TEMPERATURES:
        for other in part.curves:
            if other.quantity in _TEMPERATURES and other.quantity is not curve.quantity:
                yield Edit(
                    rule="exchanged",
                    text=f"exchange the points of {curve.name} and {other.name}",
                    curves=exchange_curves(curve, other),
                )


def _circles(part: Part) -> Iterator[Edit]:
    """All three capacitances in each other's places."""
    three = [c for q in CAPACITANCES for c in part.curves_of(q)[:1]]
    for order in permutations(range(len(three))):
        if len(three) == 3 and all(i != j for i, j in enumerate(order)):
            moved = [(three[i], three[j]) for i, j in enumerate(order)]
            yield Edit(
                rule="exchanged",
                text="exchange the curves: " + ", ".join(f"{b.name}'s points are {a.name}" for a, b in moved),
                curves=tuple(with_data_of(a, b) for a, b in moved),
            )
