"""The one-page sheet: what was fitted, how well, and how far to trust it."""

from __future__ import annotations

import io
import textwrap
from collections.abc import Callable, Sequence
from functools import cache, partial

import matplotlib as mpl
import matplotlib.lines
from matplotlib import font_manager
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.backend_bases import RendererBase
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties

from fitter import plots
from fitter.model import FittedModel
from fitter.parameters import Parameter
from fitter.part import Quantity
from fitter.units import engineering
from fitter.writers.tables import Shown, shown_checks

__all__ = ["CAUTIONS", "draw_sheet", "sheet_files"]

#: A4, upright [inch].
_PAGE = (8.27, 11.69)
_DPI = 170
_LEFT, _RIGHT = 0.07, 0.965
#: Where the table of parameters ends, and the comparison begins.
_PARAMETERS_END, _CHECKS = 0.355, 0.368
#: Between two plots, for the right one's scale.
_GAP = 0.064
#: Height of a table line, as a share of the page.
_LINE = 0.0103
#: Size of the tables' and notices' texts [pt]; of what lines stand closer, this share of their distance.
_TABLE_SIZE = 5.7
_SIZE_OF_LINE = 0.82

CAUTIONS = (
    "Typical values are no limits. No safe operating area, avalanche, short circuit or self-heating. Such circuits "
    "store energy and carry hazardous voltage, also when switched off. Verify on the bench. Local codes and licensed "
    "practice come first."
)

_SETTINGS = {
    "font.family": "DejaVu Sans", "font.size": 6.5, "axes.titlesize": 7.5, "axes.titleweight": "bold",
    "axes.labelsize": 6.5, "xtick.labelsize": 6.0, "ytick.labelsize": 6.0, "legend.fontsize": 6.0,
    "legend.title_fontsize": 6.0, "legend.handlelength": 1.7, "legend.labelspacing": 0.3, "legend.borderaxespad": 0.3,
    "axes.linewidth": 0.6, "xtick.major.width": 0.5, "ytick.major.width": 0.5,
    "xtick.minor.width": 0.3, "ytick.minor.width": 0.3, "lines.solid_capstyle": "round", "pdf.fonttype": 3,
    "svg.hashsalt": "fetwright", "text.usetex": False, "text.hinting": "no_hinting", "mathtext.fontset": "dejavusans",
}  # fmt: skip

_VERDICT_COLOUR = {"agrees": plots.COLOURS[2], "differs": plots.COLOURS[1], "outside limit": "#B00000"}

#: Plots of what not every part gives.
_WHERE_GIVEN: dict[Quantity, Callable[[FittedModel, Axes], Axes]] = {
    Quantity.OUTPUT: plots.plot_output,
    Quantity.BODY_DIODE: plots.plot_body_diode,
    Quantity.RDS_ON_TEMPERATURE: plots.plot_on_resistance,
    Quantity.VGS_TH_TEMPERATURE: plots.plot_threshold,
}
#: Up to so many plots, two stand in the first row; else three.
_FEW = 5


class _Texts(Artist):
    """Many short texts on the page.

    A Text of its own for each would take twice as long, most of it for what short texts in a table do not need:
    lines, boxes, angles, formulas.
    """

    def __init__(self) -> None:
        super().__init__()
        self._texts: list[tuple[float, float, str, str, str, FontProperties]] = []
        self._fonts = {weight: FontProperties(size=_TABLE_SIZE, weight=weight) for weight in ("normal", "bold")}

    def set_size(self, size: float) -> None:
        """Size of the texts that are added from now on [pt]."""
        self._fonts = {weight: FontProperties(size=size, weight=weight) for weight in self._fonts}

    def add(
        self, x: float, y: float, text: str, align: str = "left", colour: str = "black", weight: str = "normal"
    ) -> None:
        """One more text: its left or right end on the baseline, as shares of the page."""
        self._texts.append((x, y, text, align, colour, self._fonts[weight]))

    def get_text(self) -> str:
        """All texts, line by line."""
        return "\n".join(text for _, _, text, *_ in self._texts)

    def draw(self, renderer: RendererBase) -> None:
        width, height = renderer.get_canvas_width_height()
        pen = renderer.new_gc()
        for x, y, text, align, colour, font in self._texts:
            pen.set_foreground(colour)
            length = renderer.get_text_width_height_descent(text, font, False)[0] if align == "right" else 0.0
            down = (1.0 - y if renderer.flipy() else y) * height
            renderer.draw_text(pen, x * width - length, down, text, font, 0.0)
        pen.restore()


def sheet_files(model: FittedModel) -> dict[str, bytes]:
    """The sheet as PNG and PDF.

    Parameters
    ----------
    model : FittedModel
        The model.

    Returns
    -------
    dict of str to bytes
        ``sheet.png`` and ``sheet.pdf``; the same bytes for the same model.
    """
    with mpl.rc_context():
        mpl.rcdefaults()
        mpl.rcParams.update(_SETTINGS)  # type: ignore[arg-type]
        figure = draw_sheet(model)
        png, pdf = io.BytesIO(), io.BytesIO()
        figure.savefig(png, format="png", metadata={"Software": None}, pil_kwargs={"compress_level": 3})
        figure.savefig(pdf, format="pdf", metadata={"CreationDate": None, "Creator": None, "Producer": None})
    return {"sheet.png": png.getvalue(), "sheet.pdf": pdf.getvalue()}


def draw_sheet(model: FittedModel) -> Figure:
    """The sheet as a matplotlib Figure, A4 upright.

    Parameters
    ----------
    model : FittedModel
        The model.

    Returns
    -------
    Figure
        In the settings of the caller; `sheet_files` draws it in the sheet's own.
    """
    figure = Figure(figsize=_PAGE, dpi=_DPI)
    _draw_head(figure, model)
    _draw_plots(figure, model)
    top = 0.405
    texts = _Texts()
    _draw_parameters(figure, texts, model, top)
    right_end = _draw_checks(figure, texts, model, top)
    _draw_notices(figure, texts, model, right_end - 0.014, 0.062)
    figure.add_artist(texts)
    _draw_cautions(figure)
    return figure


def _draw_plots(figure: Figure, model: FittedModel) -> None:
    """Two rows of plots of what the part gives, and the residuals across the page."""
    digitized = {p.curve for p in model.points}
    given = {c.quantity for c in model.part.curves if c.name in digitized}
    wanted: list[Callable[[FittedModel, Axes], Axes]] = [plots.plot_capacitances, plots.plot_gate_charge]
    wanted += [plots.plot_transfer, partial(plots.plot_transfer, scale="log")]
    wanted += [plot for quantity, plot in _WHERE_GIVEN.items() if quantity in given]
    first = 3 if len(wanted) > _FEW else 2
    for row, (top, bottom) in ((wanted[:first], (0.918, 0.745)), (wanted[first:], (0.690, 0.572))):
        shares = [1.5 if plot is plots.plot_output else 1.0 for plot in row]  # its legend stands beside the curves
        unit = (_RIGHT - _LEFT - _GAP * (len(row) - 1)) / sum(shares)
        left = _LEFT
        for plot, share in zip(row, shares, strict=True):
            ax = plot(model, figure.add_axes((left, bottom, unit * share, top - bottom)))
            ax.xaxis.set_label_coords(0.5, -0.020 / (top - bottom))  # being told saves measuring the scale's labels
            left += unit * share + _GAP
    plots.plot_residuals(model, figure.add_axes((_LEFT, 0.466, _RIGHT - _LEFT, 0.054)))


def _draw_head(figure: Figure, model: FittedModel) -> None:
    part = model.part
    figure.text(_LEFT, 0.967, part.name, fontsize=15, fontweight="bold", va="baseline")
    ratings = f"{part.channel}-channel, {model.sign * part.v_ds_max:g} V, gate {part.v_gs_max:g} V"
    ratings = ratings.replace("-channel", "\0").replace("-", "\N{MINUS SIGN}").replace("\0", "-channel")
    figure.text(_LEFT + 0.02 + 0.0195 * len(part.name), 0.967, ratings, fontsize=8, va="baseline")
    how = (
        "gate charge fitted"
        if model.used_gate_charge
        else "gate charge not fitted: Cacc, Cch, s_gs assumed, QG is a check"
    )
    figure.text(_RIGHT, 0.967, f"fetwright {model.version}: {how}", fontsize=7, ha="right", va="baseline", color="0.3")
    notes = _shortened(part.notes, 150).replace("$", r"\$")  # which would begin a formula
    figure.text(_LEFT, 0.950, notes, fontsize=7, va="baseline", color="0.3")
    figure.add_artist(mpl.lines.Line2D([_LEFT, _RIGHT], [0.942, 0.942], color="black", linewidth=0.8))


@cache
def _known_characters() -> frozenset[int]:
    return frozenset(font_manager.get_font(font_manager.findfont("DejaVu Sans")).get_charmap())


def _shortened(text: str, most: int) -> str:
    # What the font lacks would make the plot warn.
    plain = "".join(c if ord(c) in _known_characters() else "?" for c in " ".join(text.split()))
    return plain if len(plain) <= most else plain[: most - 1].rstrip() + "\N{HORIZONTAL ELLIPSIS}"


def _row(
    texts: _Texts,
    y: float,
    cells: Sequence[str],
    places: Sequence[tuple[float, str]],
    colours: Sequence[str] = (),
    weight: str = "normal",
) -> None:
    """One line of a table: texts at their places, left or right aligned."""
    for k, (cell, (x, align)) in enumerate(zip(cells, places, strict=True)):
        if cell:
            texts.add(x, y, cell, align, colours[k] if colours else "black", weight)


def _rule(figure: Figure, y: float, left: float, right: float) -> None:
    figure.add_artist(mpl.lines.Line2D([left, right], [y, y], color="0.6", linewidth=0.5))


_PARAMETER_PLACES = ((_LEFT, "left"), (0.205, "right"), (0.270, "right"), (0.281, "left"))


def _draw_parameters(figure: Figure, texts: _Texts, model: FittedModel, top: float) -> None:
    """The parameter table, its lines as far apart as there is room for."""
    _row(texts, top, ("Parameter", "value", "std. error", "origin"), _PARAMETER_PLACES, weight="bold")
    _rule(figure, top - 0.004, _LEFT, _PARAMETERS_END)
    step = min(_LINE, (top - 0.012 - 0.056) / max(len(model.parameters), 1))
    y = top - 0.0035
    texts.set_size(min(_TABLE_SIZE, _SIZE_OF_LINE * step * 72.0 * _PAGE[1]))
    for p in model.parameters.values():
        y -= step
        error = "" if p.stderr is None else engineering(p.stderr, _pretty_unit(p), 2)
        colour = "black" if p.origin == "fitted" else "0.4"
        cells = (p.name, engineering(p.value, _pretty_unit(p), 4), error, p.origin)
        _row(texts, y, [c.replace("-", "\N{MINUS SIGN}") for c in cells], _PARAMETER_PLACES, [colour] * 4)
    texts.set_size(_TABLE_SIZE)


def _pretty_unit(p: Parameter) -> str:
    return {"ohm": "\N{GREEK CAPITAL LETTER OMEGA}", "A/V^2": "A/V\N{SUPERSCRIPT TWO}"}.get(p.unit, p.unit)


_CHECK_PLACES = (
    (_CHECKS, "left"), (0.419, "left"), (0.672, "right"), (0.720, "right"), (0.825, "right"), (0.873, "right"),
    (0.880, "left"), (_RIGHT, "right"),
)  # fmt: skip


def _draw_checks(figure: Figure, texts: _Texts, model: FittedModel, top: float) -> float:
    """The comparison; returns where it ends."""
    heads = ("Stated", "condition", "typ (limits)", "fitted", "95 % interval", "off", "", "verdict")
    _row(texts, top, heads, _CHECK_PLACES, weight="bold")
    _rule(figure, top - 0.004, _CHECKS, _RIGHT)
    y = top - 0.0035
    for s in shown_checks(model):
        y -= _LINE
        known = s.fitted is not None and s.low is not None and s.high is not None
        off = "" if s.check.deviation is None else f"{100.0 * s.check.deviation:+.1f} %"
        cells = (
            s.check.quantity, _shortened(s.check.condition, 40), _stated(s), f"{s.fitted:.4g}" if known else "",
            f"{s.low:.4g} to {s.high:.4g}" if known else "", off, "used" if s.check.used_in_fit else "",
            s.check.verdict,
        )  # fmt: skip
        colours = ["black"] * 7 + [_VERDICT_COLOUR.get(s.check.verdict, "0.4")]
        _row(texts, y, [c.replace("-", "\N{MINUS SIGN}") for c in cells], _CHECK_PLACES, colours)
    if not model.checks:
        y -= _LINE
        _row(texts, y, ("no table values are stated", *[""] * 7), _CHECK_PLACES)
    return y


def _stated(s: Shown) -> str:
    typ = "" if s.stated_typ is None else f"{s.stated_typ:.4g}"
    limits = [None if x is None else f"{x:.4g}" for x in (s.stated_min, s.stated_max)]
    if all(limits):
        inside = f" ({limits[0]} to {limits[1]})"
    elif any(limits):
        inside = f" (min {limits[0]})" if limits[0] else f" (max {limits[1]})"
    else:
        inside = ""
    return f"{typ}{inside} {s.unit}".strip()


def _draw_notices(figure: Figure, texts: _Texts, model: FittedModel, top: float, bottom: float) -> None:
    """As many notices as there is room for; the command shows them all."""
    _row(texts, top, ("Notices",), ((_CHECKS, "left"),), weight="bold")
    _rule(figure, top - 0.004, _CHECKS, _RIGHT)
    y, shown = top - 0.0035, 0
    for notice in model.notices:
        lines = textwrap.wrap(_shortened(notice.text, 240), 115)
        if y - _LINE * 0.9 * (len(lines) + 1) < bottom:
            break
        for k, line in enumerate(lines):
            y -= _LINE * 0.9
            text = ("\N{EN DASH} " if k == 0 else "   ") + line
            texts.add(_CHECKS, y, text, colour="0.2")
        shown += 1
    left = len(model.notices) - shown
    if left or not model.notices:
        text = f"and {left} more, in model.json" if left else "none"
        texts.add(_CHECKS, y - _LINE * 0.9, text, colour="0.4")


def _draw_cautions(figure: Figure) -> None:
    _rule(figure, 0.044, _LEFT, _RIGHT)
    for k, line in enumerate(textwrap.wrap(f"CAUTION. {CAUTIONS}", 140)):
        figure.text(_LEFT, 0.033 - 0.0105 * k, line, fontsize=6.4, va="baseline", fontweight="bold", color="#B00000")
