"""Plots of a fitted model beside what was digitized. Each function takes and returns matplotlib Axes.

A p-channel part is drawn as its datasheet draws it: magnitudes, with a minus sign in the axis' label.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter
from numpy.typing import NDArray

from fitter.errors import OperatingPointError
from fitter.gate_charge import gate_charge_curve
from fitter.model import CurveRow, FittedModel
from fitter.models.channel import on_resistance, threshold_voltage
from fitter.models.diode import forward_voltage
from fitter.models.temperature import REFERENCE, junction_temperature
from fitter.part import Curve, Quantity
from fitter.units import engineering

__all__ = [
    "COLOURS",
    "plot_body_diode",
    "plot_capacitances",
    "plot_gate_charge",
    "plot_on_resistance",
    "plot_output",
    "plot_residuals",
    "plot_threshold",
    "plot_transfer",
]

#: On a log axis whose ends have a ratio of less, 2 and 5 are labelled, too.
_FEW_DECADES = 100.0
#: Characters of a curve's name below the residuals.
_LONGEST_LABEL = 18

Array = NDArray[np.float64]

#: Colours that colour-blind readers can tell apart (M. Okabe and K. Ito, 2008), darkest first.
COLOURS = ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#E69F00", "#56B4E9", "#000000")
_MARKERS = ("o", "s", "^", "D", "v", "P", "X")
_STYLES = ("-", "--", "-.", ":", (0, (5, 1)), (0, (3, 1, 1, 1)), "-")
_CAPACITANCES: tuple[tuple[Literal["ciss", "coss", "crss"], str], ...] = (
    ("ciss", "Ciss"), ("coss", "Coss"), ("crss", "Crss"),
)  # fmt: skip


def _axes(ax: Axes | None) -> Axes:
    """The given Axes, or those of a figure of its own, which needs no display."""
    return Figure(figsize=(5.0, 3.6), layout="constrained").add_subplot() if ax is None else ax


def _minus(model: FittedModel) -> str:
    return "\N{MINUS SIGN}" if model.sign < 0.0 else ""


def _points(model: FittedModel, curve: str) -> list[CurveRow]:
    return [point for point in model.points if point.curve == curve]


def _draw_points(
    ax: Axes, points: Sequence[CurveRow], colour: str, marker: str, x: float = 1.0, y: float = 1.0
) -> None:
    """Digitized points as hollow markers; those that the fit leaves aside as crosses."""
    for used, style in ((True, marker), (False, "x")):
        chosen = [p for p in points if p.used is used]
        if chosen:
            ax.plot(
                [p.x * x for p in chosen], [p.y * y for p in chosen], linestyle="none", marker=style, markersize=3.0,
                markerfacecolor="none", markeredgecolor=colour if used else "black", markeredgewidth=0.7,
            )  # fmt: skip


def _signed(text: str) -> str:
    """Figures with minus signs instead of hyphens."""
    return text.replace("-", "\N{MINUS SIGN}")


def _celsius(t_j: float) -> str:
    return _signed(f"{t_j:g} \N{DEGREE SIGN}C")


def _plain_number(value: float, _: int) -> str:
    """A decade's label as an ordinary number up to 10000, without the font that powers of ten need."""
    return f"{value:g}" if 1e-4 < abs(value) < 1e5 else f"{value:.0e}".replace("e-0", "e-").replace("e+0", "e")


def _finish(ax: Axes, title: str, x: str, y: str) -> Axes:
    for axis in (ax.xaxis, ax.yaxis):
        if axis.get_scale() == "log":
            axis.set_major_formatter(FuncFormatter(_plain_number))
            axis.set_minor_locator(LogLocator(subs=(2.0, 5.0)))
            low, high = axis.get_view_interval()
            axis.set_minor_formatter(FuncFormatter(_plain_number) if high < _FEW_DECADES * low else NullFormatter())
    # A title that is told where to stand saves measuring everything on the axes.
    ax.set_title(title, loc="left", y=1.0)
    ax.set_xlabel(x)
    ax.set_ylabel(y)
    ax.grid(visible=True, which="major", linewidth=0.4, color="0.85")
    ax.set_axisbelow(True)
    return ax


def plot_capacitances(model: FittedModel, ax: Axes | None = None) -> Axes:
    """Ciss, Coss and Crss over VDS at VGS = 0 on log axes: points, fit, 95 % band of the reading errors.

    Parameters
    ----------
    model : FittedModel
        The model.
    ax : Axes, optional
        Where to draw; new ones by default.

    Returns
    -------
    Axes
        VDS [V], C [pF].
    """
    ax = _axes(ax)
    known = model.validity.capacitance_v_ds
    low = max(known[0] if known else 0.1, 1e-5 * model.part.v_ds_max)
    v = np.geomspace(low, model.part.v_ds_max, 120)
    for (name, label), colour, marker, style in zip(_CAPACITANCES, COLOURS, _MARKERS, _STYLES, strict=False):
        fitted = {"ciss": model.ciss, "coss": model.coss, "crss": model.crss}[name](model.sign * v)
        band = model.band(name, model.sign * v)
        ax.fill_between(v, band[0] * 1e12, band[1] * 1e12, color=colour, alpha=0.18, linewidth=0.0)
        ax.plot(v, fitted * 1e12, color=colour, linestyle=style, linewidth=1.1, label=label)
        _draw_points(ax, [p for p in _points(model, name) if p.x > 0.0], colour, marker, y=1e12)
    ax.set_xscale("log")
    ax.set_yscale("log")
    ax.legend(loc="lower left", frameon=False)
    return _finish(ax, "Capacitances", f"{_minus(model)}VDS / V", "C / pF")


def _temperatures(curves: Sequence[Curve]) -> list[float]:
    """Junction temperatures of some curves, 25 degC first."""
    found = dict.fromkeys(junction_temperature(c.t_j) for c in curves)
    return sorted(found, key=lambda t: (t != REFERENCE, -t))


def plot_transfer(model: FittedModel, ax: Axes | None = None, scale: Literal["linear", "log"] = "linear") -> Axes:
    """Drain current over VGS, at every junction temperature that was digitized.

    Parameters
    ----------
    model : FittedModel
        The model.
    ax : Axes, optional
        Where to draw; new ones by default.
    scale : {"linear", "log"}
        Of the current.

    Returns
    -------
    Axes
        VGS [V], ID [A].
    """
    ax = _axes(ax)
    curves = [c for c in model.part.curves_of(Quantity.TRANSFER) if _points(model, c.name)]
    top = max((float(np.max(c.y)) for c in curves), default=model.test_point().i_d * 2.0)
    known = model.validity.v_gs
    end = max((float(np.max(c.x)) for c in curves), default=known[-1] if known else model.part.v_gs_max)
    v_ds = next((c.v_ds for c in curves if c.v_ds is not None), 0.5 * model.part.v_ds_max)
    v = np.linspace(0.0, end, 100)
    for t_j, colour, marker, style in zip(
        _temperatures(curves) or [REFERENCE], COLOURS, _MARKERS, _STYLES, strict=False
    ):
        i = np.asarray(model.transistor(t_j).i_d(v, v_ds))
        shown = (i < 1.15 * top) & (i > (1e-6 * top if scale == "log" else -1.0))
        low, high = model.current_band(model.sign * v[shown], model.sign * v_ds, t_j)
        ax.fill_between(v[shown], low, high, color=colour, alpha=0.18, linewidth=0.0)
        ax.plot(v[shown], i[shown], color=colour, linestyle=style, linewidth=1.1, label=_celsius(t_j))
        for curve in curves:
            if junction_temperature(curve.t_j) == t_j:
                points = _points(model, curve.name)
                _draw_points(ax, [p for p in points if scale == "linear" or p.y > 1e-6 * top], colour, marker)
    if scale == "log":
        ax.set_yscale("log")
        ax.set_ylim(1e-5 * top, 2.0 * top)
        ax.set_xlim(right=1.25 * end)  # room for the legend beside the curves
    else:
        ax.set_ylim(0.0, 1.05 * top)
    crossing = model.zero_temperature_coefficient(model.sign * v_ds) if scale == "linear" else None
    if crossing is not None and abs(crossing[1]) < top:
        ax.plot([abs(crossing[0])], [abs(crossing[1])], "k+", markersize=7.0)
        ax.annotate(
            "zero temp. coeff.", (abs(crossing[0]), abs(crossing[1])), xytext=(-4, 4), textcoords="offset points",
            ha="right", fontsize="small",
        )  # fmt: skip
    ax.legend(loc="upper left" if scale == "linear" else "lower right", frameon=False)
    minus = _minus(model)
    title = f"Transfer at {minus}{v_ds:g} V" + (", log" if scale == "log" else "")
    return _finish(ax, title, f"{minus}VGS / V", f"{minus}ID / A")


def plot_output(model: FittedModel, ax: Axes | None = None) -> Axes:
    """Drain current over VDS at every VGS that was digitized, at 25 degC or, where none was there, at the hottest.

    Parameters
    ----------
    model : FittedModel
        The model.
    ax : Axes, optional
        Where to draw; new ones by default.

    Returns
    -------
    Axes
        VDS [V], ID [A]; empty where no output curve was digitized.
    """
    ax = _axes(ax)
    every = [c for c in model.part.curves_of(Quantity.OUTPUT) if _points(model, c.name)]
    t_j = (_temperatures(every) or [REFERENCE])[0]
    curves = [c for c in every if junction_temperature(c.t_j) == t_j]
    transistor = model.transistor(t_j)
    for k, curve in enumerate(sorted(curves, key=lambda c: -(c.v_gs or 0.0))):
        colour, marker, style = COLOURS[k % 7], _MARKERS[k % 7], _STYLES[k % 7]
        v = np.linspace(0.0, float(curve.x[-1]), 80)
        i = np.asarray(transistor.i_d(curve.v_gs or 0.0, v))
        label = _signed(f"{model.sign * (curve.v_gs or 0.0):g} V")
        ax.plot(v, i, color=colour, linestyle=style, linewidth=1.1, label=label)
        _draw_points(ax, _points(model, curve.name), colour, marker)
    if curves:
        ax.set_ylim(0.0, 1.05 * max(float(np.max(c.y)) for c in curves))
        ax.set_xlim(0.0, 1.8 * max(float(np.max(c.x)) for c in curves))  # room for the legend beside the curves
        ax.legend(loc="upper right", frameon=False, title="VGS")
    minus = _minus(model)
    return _finish(ax, f"Output, {_celsius(t_j)}", f"{minus}VDS / V", f"{minus}ID / A")


def plot_gate_charge(model: FittedModel, ax: Axes | None = None) -> Axes:
    """The gate-charge curve at the stated condition with its 95 % band, the digitized one, and what the table states.

    Parameters
    ----------
    model : FittedModel
        The model.
    ax : Axes, optional
        Where to draw; new ones by default.

    Returns
    -------
    Axes
        QG [nC], VGS [V].
    """
    ax = _axes(ax)
    point = model.test_point()
    try:
        curve = gate_charge_curve(model.transistor(), point)
        origin = "fitted" if model.used_gate_charge else "predicted"
        low, high = model.gate_charge_band(point.v_dd, point.i_d, point.v_gs, point.load)
        outline = np.concatenate([low.q_g, high.q_g[::-1]]) * 1e9, np.concatenate([low.v_gs, high.v_gs[::-1]])
        ax.fill(*outline, color=COLOURS[0], alpha=0.18, linewidth=0.0, label="95 % of QG")
        ax.plot(curve.q_g * 1e9, curve.v_gs, color=COLOURS[0], linewidth=1.3, label=origin)
    except OperatingPointError as error:
        ax.text(0.5, 0.5, str(error), transform=ax.transAxes, ha="center", va="center", wrap=True, fontsize="small")
    for digitized in model.part.curves_of(Quantity.GATE_CHARGE):
        ax.plot(
            digitized.x * 1e9, digitized.y, linestyle="none", marker="o", markersize=3.0, markerfacecolor="none",
            markeredgecolor=COLOURS[1], markeredgewidth=0.7, label="digitized",
        )  # fmt: skip
    _draw_stated_charge(ax, model)
    ax.set_xlim(left=0.0)
    ax.set_ylim(bottom=0.0)
    ax.legend(loc="upper left", frameon=False)
    load = ", resistive load" if point.load == "resistive" else ""
    minus = "\N{MINUS SIGN}" if model.sign < 0.0 else ""
    title = f"Gate charge at {minus}{point.v_dd:g} V, {minus}{point.i_d:g} A{load}"
    return _finish(ax, title, "QG / nC", f"{minus}VGS / V")


def _draw_stated_charge(ax: Axes, model: FittedModel) -> None:
    """The stated typical values: the plateau's two ends by QGS and QGD, and the end."""
    table = model.part.stated.gate_charge
    if table is None:
        return
    q_gs, q_gd, q_g, plateau = (
        None if s is None else s.typ for s in (table.q_gs, table.q_gd, table.q_g, table.v_plateau)
    )
    if plateau is None:
        plateau = next((c.fitted for c in model.checks if c.quantity == "v_plateau"), None)
    stated = []
    if q_gs is not None and plateau is not None:
        stated.append((q_gs, plateau))
        if q_gd is not None:
            stated.append((q_gs + q_gd, plateau))
    if q_g is not None:
        stated.append((q_g, table.v_gs))
    if stated:
        x, y = zip(*stated, strict=True)
        ax.plot(
            [q * 1e9 for q in x],
            y,
            linestyle="none",
            marker="D",
            markersize=5.0,
            color="black",
            label="stated",
            zorder=4,
        )


def plot_body_diode(model: FittedModel, ax: Axes | None = None) -> Axes:
    """Forward current of the body diode over VSD, at every junction temperature that was digitized.

    Parameters
    ----------
    model : FittedModel
        The model.
    ax : Axes, optional
        Where to draw; new ones by default.

    Returns
    -------
    Axes
        VSD [V], IS [A]; empty where the model has no body diode.
    """
    ax = _axes(ax)
    diode = model.transistor().diode
    curves = [c for c in model.part.curves_of(Quantity.BODY_DIODE) if _points(model, c.name)]
    if diode is not None and curves:
        i = np.geomspace(min(float(np.min(c.y)) for c in curves), max(float(np.max(c.y)) for c in curves), 80)
        for t_j, colour, marker, style in zip(_temperatures(curves), COLOURS, _MARKERS, _STYLES, strict=False):
            v = np.asarray(forward_voltage(i, diode, t_j))
            ax.plot(v, i, color=colour, linestyle=style, linewidth=1.1, label=_celsius(t_j))
            for curve in curves:
                if junction_temperature(curve.t_j) == t_j:
                    _draw_points(ax, _points(model, curve.name), colour, marker)
        ax.set_yscale("log")
        ax.set_ylim(top=4.0 * i[-1])  # room for the legend above the curves
        ax.legend(loc="upper left", frameon=False)
    return _finish(ax, "Body diode", "VSD / V", "IS / A")


def plot_on_resistance(model: FittedModel, ax: Axes | None = None) -> Axes:
    """RDS(on) over the junction temperature, every curve that was digitized.

    Parameters
    ----------
    model : FittedModel
        The model.
    ax : Axes, optional
        Where to draw; new ones by default.

    Returns
    -------
    Axes
        Tj [degC], RDS(on) [mOhm], or over its value at 25 degC where every curve is; empty where none was digitized.
    """
    ax = _axes(ax)
    curves = [c for c in model.part.curves_of(Quantity.RDS_ON_TEMPERATURE) if _points(model, c.name)]
    relative = bool(curves) and all(c.y_unit == "" for c in curves)
    transistor = model.transistor()
    drawn = []
    for curve in curves:
        i_d, v_gs = curve.i_d or 0.0, curve.v_gs or 0.0
        cold = float(on_resistance(i_d, v_gs, transistor.channel))
        t_j = np.linspace(curve.x[0], curve.x[-1], 60)
        fitted = np.asarray(on_resistance(i_d, v_gs, transistor.at(t_j).channel)) / (cold if relative else 1e-3)
        # A curve over its own value at 25 degC, beside one in ohms, is drawn in ohms of the fit.
        scale = 1.0 if relative else 1e3 * (cold if curve.y_unit == "" else 1.0)
        condition = _signed(f"{model.sign * v_gs:g} V, {engineering(model.sign * i_d, 'A', 3)}")
        drawn.append((curve, t_j, fitted, scale, condition))
    unit = f"RDS(on) at {_celsius(REFERENCE)}" if relative else "m\N{GREEK CAPITAL LETTER OMEGA}"
    _draw_over_temperature(ax, model, drawn, "upper left")
    return _finish(ax, "On-resistance", "Tj / \N{DEGREE SIGN}C", f"RDS(on) / {unit}")


def plot_threshold(model: FittedModel, ax: Axes | None = None) -> Axes:
    """VGS(th) over the junction temperature, every curve that was digitized.

    Parameters
    ----------
    model : FittedModel
        The model.
    ax : Axes, optional
        Where to draw; new ones by default.

    Returns
    -------
    Axes
        Tj [degC], VGS(th) [V]; empty where none was digitized.
    """
    ax = _axes(ax)
    curves = [c for c in model.part.curves_of(Quantity.VGS_TH_TEMPERATURE) if _points(model, c.name)]
    transistor = model.transistor()
    drawn = []
    for curve in curves:
        i_d = curve.i_d or 0.0
        t_j = np.linspace(curve.x[0], curve.x[-1], 60)
        fitted = np.asarray(threshold_voltage(i_d, transistor.at(t_j).channel))
        drawn.append((curve, t_j, fitted, 1.0, _signed(engineering(model.sign * i_d, "A", 3))))
    _draw_over_temperature(ax, model, drawn, "lower left")
    return _finish(ax, "Threshold", "Tj / \N{DEGREE SIGN}C", f"{_minus(model)}VGS(th) / V")


def _draw_over_temperature(
    ax: Axes,
    model: FittedModel,
    drawn: Sequence[tuple[Curve, Array, Array, float, str]],
    corner: Literal["upper left", "lower left"],
) -> None:
    """Curves with their fit over the junction temperature, what scales their points, and their condition."""
    for k, (curve, t_j, fitted, scale, condition) in enumerate(drawn):
        colour = COLOURS[k % 7]
        ax.plot(t_j, fitted, color=colour, linestyle=_STYLES[k % 7], linewidth=1.1, label=condition)
        _draw_points(ax, _points(model, curve.name), colour, _MARKERS[k % 7], y=scale)
    if len(drawn) == 1:
        y, va = (0.94, "top") if corner == "upper left" else (0.06, "bottom")
        ax.text(0.06, y, drawn[0][-1], transform=ax.transAxes, va=va)
    elif drawn:
        ax.legend(loc=corner, frameon=False)


def plot_residuals(model: FittedModel, ax: Axes | None = None) -> Axes:
    """Distance of every digitized point from the fit in standard deviations of its reading error, curve by curve.

    Parameters
    ----------
    model : FittedModel
        The model.
    ax : Axes, optional
        Where to draw; new ones by default.

    Returns
    -------
    Axes
        A stretch for each curve, residual [standard deviations]; far ones are drawn at the edge.
    """
    ax = _axes(ax)
    names = list(dict.fromkeys(point.curve for point in model.points))
    edge = 6.0
    residuals, x, number = _residuals(model, names)
    shown = np.clip(residuals, -edge, edge)
    for far, marker, size in ((0.0, ".", 3.0), (1.0, "^", 3.5), (-1.0, "v", 3.5)):
        kind = np.where(np.abs(residuals) > edge, np.sign(residuals), 0.0) == far
        for k, colour in enumerate(COLOURS[:3]):
            chosen = kind & (number % 3 == k)
            if np.any(chosen):
                ax.plot(x[chosen], shown[chosen], linestyle="none", marker=marker, markersize=size, color=colour)
    ax.vlines(np.arange(1, len(names)), -2.0 * edge, 2.0 * edge, color="0.85", linewidth=0.5)
    for level, style in ((0.0, "-"), (2.0, ":"), (-2.0, ":")):
        ax.axhline(level, color="0.5", linewidth=0.6, linestyle=style)
    ax.set_xlim(0.0, max(len(names), 1))
    ax.set_ylim(-edge - 0.6, edge + 0.6)
    labels = [name if len(name) <= _LONGEST_LABEL else f"{name[: _LONGEST_LABEL - 2]} ..." for name in names]
    ax.set_xticks([k + 0.5 for k in range(len(names))], labels, rotation=35, ha="right", rotation_mode="anchor")
    ax.tick_params(axis="x", length=0)
    ax.set_title("Residuals", loc="left", y=1.0)
    ax.set_ylabel("std. deviations")
    return ax


def _residuals(model: FittedModel, names: Sequence[str]) -> tuple[Array, Array, NDArray[np.int_]]:
    """Of every digitized point: residual, place along x, number of its curve, which takes 1 of the x axis."""
    residuals, x, number = [], [], []
    for k, name in enumerate(names):
        points = _points(model, name)
        residuals += [point.residual for point in points]
        x += [k + 0.07 + 0.86 * (j + 0.5) / len(points) for j in range(len(points))]
        number += [k] * len(points)
    return np.array(residuals), np.array(x), np.array(number, dtype=int)
