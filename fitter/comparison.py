"""Stated against fitted: every table value beside what the model says, and a verdict."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from fitter.errors import OperatingPointError
from fitter.fitting.intervals import COVERAGE_FACTOR, Estimate, intervals, standard_errors
from fitter.fitting.space import Values
from fitter.gate_charge import GateChargeReading, OperatingPoint, gate_charge_curve, read_gate_charge
from fitter.models.channel import on_resistance, threshold_voltage, transconductance
from fitter.models.diode import TRANSIT_TIME, forward_voltage, recovery
from fitter.models.transistor import Transistor
from fitter.models.types import Numbers, scalar
from fitter.part import Curve, Notice, Part, Stated, StatedBodyDiode

__all__ = ["Comparison", "Verdict", "compare", "digitized_reading", "explain_gate_charge", "explain_recovery"]

Verdict = Literal["agrees", "differs", "outside limit", "not determined", "no typ"]

#: A typical value this near agrees even where the interval is narrower.
_NEAR = 0.05
#: Slopes of a digitized gate-charge curve are taken over this share of its charge: clicks are about 4 % apart.
_WINDOW = 0.15


@dataclass(frozen=True, kw_only=True)
class Comparison:
    """One stated value beside the fitted one, in SI and n-channel polarity.

    Parameters
    ----------
    quantity : str
        Such as ``qg``, ``ciss``, ``rds_on``.
    unit : str
        SI unit.
    condition : str
        Such as ``VDD 40 V, ID 50 A, VGS 10 V``.
    stated : Stated
        As printed.
    fitted, low, high : float or None
        The model's value and its 95 % interval; None where the data do not determine it.
    used_in_fit : bool
        Whether the fit saw it: then it is no check.
    verdict : str
        ``agrees``: the typical value lies in the interval, or within 5 %. ``differs``: it does not. ``outside limit``:
        above a stated max or below a stated min. ``not determined``. ``no typ``: only limits are stated, and they hold.
    """

    quantity: str
    unit: str
    condition: str
    stated: Stated
    fitted: float | None
    low: float | None
    high: float | None
    used_in_fit: bool
    verdict: Verdict

    @property
    def deviation(self) -> float | None:
        """Fitted over stated typical value, less 1; None where either is missing."""
        if self.fitted is None or not self.stated.typ:
            return None
        return self.fitted / self.stated.typ - 1.0


def _verdict(stated: Stated, fitted: float | None, low: float | None, high: float | None) -> Verdict:
    if fitted is None or low is None or high is None:
        return "not determined"
    if (stated.max is not None and fitted > stated.max) or (stated.min is not None and fitted < stated.min):
        return "outside limit"
    if stated.typ is None:
        return "no typ"
    near = low <= stated.typ <= high or abs(fitted - stated.typ) <= _NEAR * abs(stated.typ)
    return "agrees" if near else "differs"


Figure = Callable[[Transistor], Numbers]


@dataclass(frozen=True, kw_only=True)
class _Row:
    """What to compare: one stated value, and which block of the fit would have been it."""

    quantity: str
    unit: str
    condition: str
    stated: Stated
    used: bool


def compare(
    part: Part, estimate: Estimate, used_blocks: Sequence[str], used_gate_charge: bool
) -> tuple[Comparison, ...]:
    """Compare everything stated with the model.

    Parameters
    ----------
    part : Part
        With its table values.
    estimate : Estimate
        The fitted parameters.
    used_blocks : sequence of str
        Names of the fit's blocks, to mark what it saw.
    used_gate_charge : bool
        Whether the fit saw gate-charge data: then the gate-charge table is no check, either.

    Returns
    -------
    tuple of Comparison
        A row for each stated value.
    """
    result: list[Comparison] = []
    sign = -1.0 if part.channel == "p" else 1.0

    def volts(v: float) -> str:
        return f"{sign * v:g} V"

    def amperes(i: float) -> str:
        return f"{sign * i:g} A" if i >= 0.1 else f"{sign * i * 1e3:g} mA"

    def add(rows: Sequence[_Row | None], figures: Callable[[Transistor], Sequence[Numbers]] | None) -> None:
        wanted = [i for i, row in enumerate(rows) if row is not None]
        if wanted:
            result.extend(_compared([rows[i] for i in wanted], wanted, figures, estimate))  # type: ignore[misc]

    def row(quantity: str, unit: str, condition: str, stated: Stated | None, block: str = "") -> _Row | None:
        if stated is None:
            return None
        used = block in used_blocks and stated.typ is not None
        return _Row(quantity=quantity, unit=unit, condition=condition, stated=stated, used=used)

    stated = part.stated
    if (g := stated.gate_charge) is not None:
        where = f"VDD {volts(g.v_dd)}, ID {amperes(g.i_d)}, VGS {volts(g.v_gs)}"
        where += ", resistive load" if g.load == "resistive" else ""
        point = OperatingPoint(v_dd=g.v_dd, i_d=g.i_d, v_gs=g.v_gs, load=g.load)
        rows = [
            row("qg", "C", where, g.q_g), row("qgs", "C", where, g.q_gs), row("qgd", "C", where, g.q_gd),
            row("v_plateau", "V", where, g.v_plateau),
        ]  # fmt: skip
        marked = [None if r is None else _Row(**{**vars(r), "used": used_gate_charge}) for r in rows]
        add(marked, lambda t: _gate_charge_figures(t, point))
    if (c := stated.capacitance) is not None:
        where, v = f"VDS {volts(c.v_ds)}, VGS 0", c.v_ds
        add(
            [
                row("ciss", "F", where, c.c_iss, "ciss (table)"), row("coss", "F", where, c.c_oss, "coss (table)"),
                row("crss", "F", where, c.c_rss, "crss (table)"),
            ],
            lambda t: (t.c_iss(v), t.c_oss(v), t.c_rss(v)),
        )  # fmt: skip
    if (h := stated.threshold) is not None:
        i_th = h.i_d
        add(
            [row("vgs_th", "V", f"ID {amperes(i_th)}, VDS = VGS", h.v_gs_th, "vgs_th (table)")],
            lambda t: (threshold_voltage(i_th, t.channel),),
        )
    if (r := stated.on_resistance) is not None:
        i_on, v_on = r.i_d, r.v_gs
        add(
            [row("rds_on", "ohm", f"VGS {volts(v_on)}, ID {amperes(i_on)}", r.r_ds_on, "rds_on (table)")],
            lambda t: (on_resistance(i_on, v_on, t.channel),),
        )
    if (f := stated.transconductance) is not None:
        i_f, v_f = f.i_d, f.v_ds
        add(
            [row("gfs", "S", f"VDS {volts(v_f)}, ID {amperes(i_f)}", f.g_fs)],
            lambda t: (transconductance(i_f, v_f, t.channel),),
        )
    if (o := stated.output_charge) is not None:
        where, v_o = f"VDS 0 to {volts(o.v_ds)}", o.v_ds

        def output_figures(t: Transistor) -> Sequence[Numbers]:
            q, e = t.q_oss(v_o), t.e_oss(v_o)
            return q, e, 2.0 * e / v_o**2, q / v_o

        add(
            [
                row("qoss", "C", where, o.q_oss), row("eoss", "J", where, o.e_oss),
                row("coss_er", "F", where, o.c_oss_er), row("coss_tr", "F", where, o.c_oss_tr),
            ],
            output_figures,
        )  # fmt: skip
    if (d := stated.body_diode) is not None:
        forward = "" if d.i_s is None else f"IS {amperes(d.i_s)}"
        recovery = "" if d.i_f is None or d.di_dt is None else f"IF {amperes(d.i_f)}, dI/dt {d.di_dt * 1e-6:g} A/us"
        known = Transistor.from_values(estimate.values).diode is not None
        i_s = 0.0 if d.i_s is None else d.i_s

        def forward_figures(t: Transistor) -> Sequence[Numbers]:
            return () if t.diode is None else (forward_voltage(i_s, t.diode),)

        add([row("vsd", "V", forward, d.v_sd, "vsd (table)")], forward_figures if known else None)
        result.extend(_recovery_rows(d, recovery, estimate))
    return tuple(result)


def _recovery_rows(d: StatedBodyDiode, condition: str, estimate: Estimate) -> list[Comparison]:
    """QRR and tRR of the exported diode; it was solved for one of them, QRR where that is stated."""
    nothing: tuple[float | None, float | None] = (None, None)
    found = low = high = nothing
    transit_time = scalar(estimate.values.get(TRANSIT_TIME.name, 0.0))
    if transit_time > 0.0 and d.i_f is not None and d.di_dt is not None:
        off = 0.0
        if TRANSIT_TIME.name in estimate.space.names:
            off = COVERAGE_FACTOR * float(
                standard_errors(lambda v: np.reshape(v[TRANSIT_TIME.name], (-1, 1)), estimate)[0]
            )
        low, found, high = (
            recovery(max(t, 1e-3 * transit_time), d.i_f, d.di_dt)
            for t in (transit_time - off, transit_time, transit_time + off)
        )
    solved_for = "qrr" if d.q_rr is not None and d.q_rr.typ else "trr"
    return [
        Comparison(
            quantity=quantity, unit=unit, condition=condition, stated=stated, fitted=found[k], low=low[k], high=high[k],
            used_in_fit=found[k] is not None and quantity == solved_for,
            verdict=_verdict(stated, found[k], low[k], high[k]),
        )
        for k, (quantity, unit, stated) in enumerate((("qrr", "C", d.q_rr), ("trr", "s", d.t_rr)))
        if stated is not None
    ]  # fmt: skip


def explain_recovery(checks: Sequence[Comparison]) -> tuple[Notice, ...]:
    """Where one transit time cannot meet the stated QRR and tRR together: which was met, and how far off the other is.

    Parameters
    ----------
    checks : sequence of Comparison
        As from `compare`.

    Returns
    -------
    tuple of Notice
    """
    by_name = {c.quantity: c for c in checks if c.quantity in ("qrr", "trr") and c.deviation is not None}
    if len(by_name) < 2:
        return ()
    met, other = sorted(by_name.values(), key=lambda c: not c.used_in_fit)
    if other.verdict == "agrees":
        return ()
    text = (
        f"one transit time cannot meet both: {met.quantity} is met, {other.quantity} of the exported diode is off by "
        f"{100.0 * (other.deviation or 0.0):+.0f} %: it snaps off where a real diode's current decays"
    )
    return (Notice(topic="trr", text=text),)


def digitized_reading(curve: Curve, v_th: float) -> GateChargeReading:
    """What JESD24-2's rule reads off a digitized gate-charge curve.

    Parameters
    ----------
    curve : Curve
        The curve; QG is the charge of its last point.
    v_th : float
        Threshold voltage, the upper end of the first line [V].

    Returns
    -------
    GateChargeReading
    """
    order = np.argsort(curve.x)
    return read_gate_charge(curve.x[order], curve.y[order], v_th, window=_WINDOW)


def _gate_charge_figures(t: Transistor, point: OperatingPoint) -> Sequence[Numbers]:
    reading = gate_charge_curve(t, point).reading
    return tuple(np.asarray(x) for x in (reading.total, reading.q_gs, reading.q_gd, reading.v_plateau))


def _compared(
    rows: Sequence[_Row],
    at: Sequence[int],
    figures: Callable[[Transistor], Sequence[Numbers]] | None,
    estimate: Estimate,
) -> list[Comparison]:
    found: list[tuple[float | None, float | None, float | None]] = [(None, None, None)] * len(rows)
    if figures is not None:
        evaluate = figures

        def wanted(values: Values) -> Numbers:
            every = evaluate(Transistor.from_values(values))
            flat = [np.reshape(every[i], (-1,)) for i in at]
            size = max(f.size for f in flat)
            stacked = np.stack([np.broadcast_to(f, (size,)) for f in flat], axis=-1)
            return stacked if size > 1 else stacked[0]

        try:
            value, low, high = intervals(wanted, estimate)
        except OperatingPointError:
            value = np.full(len(rows), np.nan)
            low = high = value
        found = [
            (float(v), float(a), float(b)) if np.isfinite([v, a, b]).all() else (None, None, None)
            for v, a, b in zip(value, low, high, strict=True)
        ]
    return [
        Comparison(
            quantity=r.quantity, unit=r.unit, condition=r.condition, stated=r.stated, fitted=v, low=a, high=b,
            used_in_fit=r.used, verdict=_verdict(r.stated, v, a, b),
        )
        for r, (v, a, b) in zip(rows, found, strict=True)
    ]  # fmt: skip


def explain_gate_charge(checks: Sequence[Comparison]) -> tuple[Notice, ...]:
    """Where QG is off: on which leg of the curve, and what that means.

    Parameters
    ----------
    checks : sequence of Comparison
        As from `compare`.

    Returns
    -------
    tuple of Notice
        Empty where QG is within 5 % or nothing is stated.
    """
    by_name = {c.quantity: c for c in checks if c.fitted is not None and c.stated.typ is not None}
    total = by_name.get("qg")
    if total is None or abs(total.deviation or 0.0) <= _NEAR:
        return ()
    legs: list[tuple[str, float, str]] = []
    stated = {name: c.stated.typ or 0.0 for name, c in by_name.items()}
    fitted = {name: c.fitted or 0.0 for name, c in by_name.items()}
    if "qgs" in by_name:
        legs.append((
            "before the plateau", fitted["qgs"] - stated["qgs"],
            "that leg is Ciss times the plateau voltage: look at the Ciss curve's scale and at the transfer curve",
        ))  # fmt: skip
    if "qgd" in by_name:
        legs.append((
            "on the plateau", fitted["qgd"] - stated["qgd"],
            "that leg is the integral of Crss: look at the Crss curve at low VDS and at the test's VDD",
        ))  # fmt: skip
    if "qgs" in by_name and "qgd" in by_name:
        rest = {which: x["qg"] - x["qgs"] - x["qgd"] for which, x in (("fitted", fitted), ("stated", stated))}
        legs.append((
            "after the plateau", rest["fitted"] - rest["stated"],
            "that leg is the on-state input capacitance, which no curve at VGS = 0 shows: it is assumed "
            "unless gate-charge data are fitted (--use-gate-charge)",
        ))  # fmt: skip
    off_by = f"QG is off by {100.0 * (total.deviation or 0.0):+.0f} %"
    if not legs:
        return (Notice(topic="qg", text=f"{off_by}; with QGS and QGD stated, too, the leg could be named"),)
    where, off, meaning = max(legs, key=lambda leg: abs(leg[1]))
    share = 100.0 * off / stated["qg"]
    return (Notice(topic="qg", text=f"{off_by}, most of it {where} ({share:+.0f} % of QG): {meaning}"),)
