"""What the command shows: tables for people, on a terminal or in a log."""

from __future__ import annotations

import math
import sys
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rich import box
from rich.console import Console
from rich.markup import escape
from rich.table import Table

from fitter.units import engineering

if TYPE_CHECKING:
    from fitter.inspection import Finding
    from fitter.interface import Model
    from fitter.model import Interval
    from fitter.part import Part
    from fitter.prospects import Prospects
    from fitter.variants import Variant

__all__ = [
    "show_files",
    "show_findings",
    "show_gate_charge",
    "show_left_out",
    "show_limits",
    "show_model",
    "show_prospects",
    "show_reading",
]

#: Width where the output is no terminal.
_WIDTH = 130

_SEVERITY = {
    "stop": ("stops the fit", "bold red"),
    "doubtful": ("doubtful", "yellow"),
    "note": ("note", "dim"),
}
#: Deviations beyond this many standard deviations stand out.
_FAR = 3.0
_VERDICT = {"agrees": "green", "differs": "yellow", "outside limit": "bold red"}


def _console() -> Console:
    return Console(width=None if sys.stdout.isatty() else _WIDTH, highlight=False, soft_wrap=False)


def _table(*columns: str, right: Sequence[str] = ()) -> Table:
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    for column in columns:
        table.add_column(column, justify="right" if column in right else "left")
    return table


def show_reading(part: Part) -> None:
    """What was read: the part, its curves, what the reader assumed."""
    console, sign = _console(), -1.0 if part.channel == "p" else 1.0
    console.print(
        f"[bold]{part.name}[/bold]: {part.channel}-channel, {sign * part.v_ds_max:g} V, gate {part.v_gs_max:g} V"
    )
    table = _table("curve", "points", "from", "to", "file", right=("points", "from", "to"))
    for curve in part.curves:
        unit = curve.x_unit.replace("degC", "C")
        ends = [
            f"{x:.4g} C" if curve.x_unit == "degC" else engineering(sign * x if unit == "V" else x, unit)
            for x in curve.x[[0, -1]]
        ]
        table.add_row(curve.name, str(curve.x.size), *ends, escape(curve.file))
    console.print(table)
    for notice in part.notices:
        console.print(f"[dim]note[/dim] {escape(notice.text)}", soft_wrap=True)


def show_findings(findings: Sequence[Finding]) -> None:
    """What the inspection found, worst first."""
    console = _console()
    if not findings:
        console.print("Nothing to object to.")
        return
    for finding in findings:
        word, style = _SEVERITY[finding.severity]
        console.print(f"[{style}]{word}[/{style}] {escape(str(finding))}", soft_wrap=True)
    count = {s: sum(f.severity == s for f in findings) for s in _SEVERITY}
    console.print(", ".join(f"{n} {_SEVERITY[s][0]}" for s, n in count.items() if n))


def show_model(model: Model) -> None:
    """What is doubtful about the data, the parameters with their errors, the comparison, the notices."""
    from fitter.pipeline import DOUBTFUL
    from fitter.writers.tables import shown_checks

    console = _console()
    console.print(f"[bold]{model.part.name}[/bold]")
    doubts = [n for n in model.notices if n.text.startswith(DOUBTFUL)]
    for notice in doubts:
        console.print(f"[yellow]{escape(notice.text)}[/yellow]", soft_wrap=True)
    table = _table("parameter", "value", "std. error", "origin", "meaning", right=("value", "std. error"))
    for p in model.parameters.values():
        error = "" if p.stderr is None else engineering(p.stderr, p.unit, 2)
        table.add_row(p.name, engineering(p.value, p.unit, 4), error, p.origin, p.meaning)
    console.print(table)

    table = _table(
        "quantity", "condition", "stated", "fitted", "95 % interval", "off", "", "verdict",
        right=("stated", "fitted", "95 % interval", "off"),
    )  # fmt: skip
    for s in shown_checks(model):
        style = _VERDICT.get(s.check.verdict, "")
        stated = "" if s.stated_typ is None else f"{s.stated_typ:.4g}"
        if s.stated_min is not None or s.stated_max is not None:
            ends = ["" if x is None else f"{x:.4g}" for x in (s.stated_min, s.stated_max)]
            stated += (
                f" ({' to '.join(ends)})" if all(ends) else f" ({'min' if ends[0] else 'max'} {ends[0] or ends[1]})"
            )
        known = s.fitted is not None and s.low is not None and s.high is not None
        table.add_row(
            s.check.quantity, s.check.condition, f"{stated.strip()} {s.unit}",
            f"{s.fitted:.4g}" if known else "", f"{s.low:.4g} to {s.high:.4g}" if known else "",
            "" if s.check.deviation is None else f"{100.0 * s.check.deviation:+.1f} %",
            "fitted" if s.check.used_in_fit else "check",
            f"[{style}]{s.check.verdict}[/{style}]" if style else s.check.verdict,
        )  # fmt: skip
    console.print(table)
    for notice in model.notices:
        if notice in doubts:
            continue
        console.print(f"[dim]note[/dim] {escape(notice.text)}", soft_wrap=True)


def show_limits(model: Model, corners: Sequence[Variant[Any]]) -> None:
    """The weak and strong variants against the stated limits; nothing where they were not asked for."""
    import pandas as pd

    from fitter.writers.tables import limits_frame

    if not corners:
        return
    table = _table("variant", "quantity", "stated", "value", "at a limit", "limits", right=("stated", "value"))
    for row in limits_frame(model, corners).to_dict("records"):
        ends = [f"{end} {row[f'stated_{end}']:.4g}" for end in ("min", "typ", "max") if pd.notna(row[f"stated_{end}"])]
        value = f"{row['value']:.4g} {row['unit']}" if pd.notna(row["value"]) else "not determined"
        style = "bold red" if row["limits"] == "not met" else ""
        said = f"[{style}]{row['limits']}[/{style}]" if style else row["limits"]
        set_by = "yes" if row["set_by_limit"] == "yes" else ""
        table.add_row(row["variant"], row["quantity"], ", ".join(ends), value, set_by, said)
    _console().print(table)


def show_left_out(model: Model) -> None:
    """Each group of data predicted from the others; nothing where that was not asked for."""
    from fitter.writers.tables import shown_left_out

    rows = shown_left_out(model)
    if not rows:
        return
    table = _table(
        "left out", "figure", "given", "predicted", "95 % interval", "off", "sigmas",
        right=("given", "predicted", "95 % interval", "off", "sigmas"),
    )  # fmt: skip
    for s in rows:
        given = f"{s.given:.4g} {s.unit}".strip()
        if s.predicted is None or s.row.sigmas is None:
            table.add_row(s.row.left_out, s.row.quantity, given, "", "not determined by the others", "", "")
            continue
        style = "yellow" if abs(s.row.sigmas) > _FAR else ""
        sigmas = f"{s.row.sigmas:+.1f}"
        table.add_row(
            s.row.left_out, s.row.quantity, given, f"{s.predicted:.4g}", f"{s.low:.4g} to {s.high:.4g}",
            f"{100.0 * (s.predicted / s.given - 1.0):+.1f} %", f"[{style}]{sigmas}[/{style}]" if style else sigmas,
        )  # fmt: skip
    _console().print(table)


def show_prospects(model: Model, found: Prospects) -> None:
    """How much narrower the intervals would be with one more curve or table value."""
    labels = {"qg": "QG", "qgd": "QGD", "v_plateau": "plateau", "eoss": "Eoss"}
    p = model.test_point()
    sign = model.sign
    console = _console()
    console.print(
        f"[bold]{model.part.name}[/bold]: half of the 95 % interval, relative to the figure, with "
        f"the gate charge {'fitted' if model.used_gate_charge else 'not fitted'}, "
        f"at VDD {sign * p.v_dd:g} V, ID {sign * p.i_d:g} A, VGS {sign * p.v_gs:g} V",
        soft_wrap=True,
    )
    table = _table("with", *labels.values(), "narrower by", right=(*labels.values(), "narrower by"))

    def row(what: str, widths: Mapping[str, float], gain: float | None) -> None:
        cells = [f"{100.0 * widths[name]:.2g} %" for name in labels]
        table.add_row(what, *cells, "" if gain is None else f"{100.0 * (1.0 - math.exp(-gain)):.0f} %")

    row("all that is given", found.now, None)
    for prospect in found.missing:
        row(prospect.what, prospect.widths, prospect.gain)
    for prospect in found.again:
        row(f"{prospect.what}, clicked a second time", prospect.widths, prospect.gain)
    console.print(table)
    if not found.missing:
        console.print("Every curve and table value that the fit can use for these figures is given.")


def show_files(folder: Path, files: Sequence[str]) -> None:
    """Where the output is."""
    _console().print(f"{escape(str(folder))}: {', '.join(files)}", soft_wrap=True)


def show_gate_charge(model: Model, found: Mapping[str, Interval], where: str) -> None:
    """Gate-charge figures with their intervals, at an operating point in words."""
    console = _console()
    console.print(f"[bold]{model.part.name}[/bold]: gate charge at {where}", soft_wrap=True)
    if not model.used_gate_charge:
        console.print("[dim]note[/dim] c_acc, c_ch and s_gs are assumed: the model was not fitted to gate-charge data")
    table = _table("figure", "value", "95 % interval", right=("value", "95 % interval"))
    for name, label, unit in (
        ("qg", "QG", "C"),
        ("qgs", "QGS", "C"),
        ("qgd", "QGD", "C"),
        ("v_plateau", "plateau", "V"),
    ):
        x = found[name]
        table.add_row(label, engineering(x.value, unit), f"{engineering(x.low, unit)} to {engineering(x.high, unit)}")
    console.print(table)
