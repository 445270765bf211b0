"""The table values among themselves."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import fields
from itertools import pairwise

from fitter.inspection.edits import key_of
from fitter.inspection.finding import Finding, Severity
from fitter.inspection.reading import PART_FILE, typical
from fitter.inspection.transfer import largest_current
from fitter.part import Part, Quantity, Stated
from fitter.reading.schema import STATED
from fitter.units import engineering

__all__ = ["inspect"]

#: Rounding of table values to two or three digits (common practice, no source).
_ROUNDING = 0.03
#: QGS over Ciss times the plateau voltage is farther off once than that, and QGD as near as QGS should be: 0.98 to 1.00
#: on three datasheets, 0.93 to 0.97 for devices built from oxides and doping, read by eye some percent more.
_EXCHANGED, _LEAST_OTHER, _MOST_OTHER = 1.25, 0.88, 1.1
#: A real diode's reverse current decays, so its charge is less than the triangle's; how much less is a judgement.
_LEAST_TRIANGLE, _MOST_TRIANGLE = 0.1, 1.5
#: Thresholds are read at one current throughout a datasheet (common practice, no source).
_LIKE = 30.0
#: They are read at a few millionths to some thousandths of the currents that the table is stated at (common practice,
#: no source).
_SMALL = 0.05
#: Gate charge is tested at a fifth to four fifths of the rated VDS (common practice, no source).
_LEAST_SUPPLY, _OTHER_TEST = 0.12, 6.0


def inspect(part: Part) -> Iterator[Finding]:
    """Findings on the table values."""
    yield from _order(part)
    yield from _gate_charge(part)
    yield from _output_charge(part)
    yield from _recovery(part)
    yield from _threshold_current(part)
    yield from _conditions(part)


def _finding(rule: str, severity: Severity, topic: str, found: str, remedy: str) -> Finding:
    return Finding(
        rule=rule,
        severity=severity,
        topic=topic,
        file=PART_FILE,
        found=found,
        remedy=remedy,
    )


def _order(part: Part) -> Iterator[Finding]:
    """Min <= typ <= max of every stated value."""
    for group in fields(part.stated):
        values = getattr(part.stated, group.name)
        for item in fields(values) if values is not None else ():
            stated = getattr(values, item.name)
            if not isinstance(stated, Stated):
                continue
            base = next(f.base for f in STATED[group.name].values if f.name == item.name)
            known = [
                (n, v) for n, v in (("min", stated.min), ("typ", stated.typ), ("max", stated.max)) if v is not None
            ]
            for (low_name, low), (high_name, high) in pairwise(known):
                if low > high:
                    yield _finding(
                        "order",
                        "doubtful",
                        key_of(f"{group.name}.{item.name}"),
                        f"{low_name} {engineering(low, base, 4)} is above {high_name} {engineering(high, base, 4)}",
                        "look at the row again: min, typ and max must rise",
                    )


def _gate_charge(part: Part) -> Iterator[Finding]:
    table = part.stated.gate_charge
    if table is None:
        return
    q_g, q_gs, q_gd = typical(table.q_g), typical(table.q_gs), typical(table.q_gd)
    if q_g and q_gs and q_gd and q_gs + q_gd > q_g * (1.0 + _ROUNDING):
        yield _finding(
            "charge sum",
            "doubtful",
            "qg",
            f"QGS + QGD = {engineering(q_gs + q_gd, 'C')} is above QG = {engineering(q_g, 'C')}",
            f"one of the three is from another row, or QG is stated at another VGS{_tenths(q_g, q_gs, q_gd)}",
        )
    plateau = typical(table.v_plateau)
    if plateau and plateau >= table.v_gs:
        yield _finding(
            "plateau",
            "doubtful",
            "v_plateau",
            f"the plateau, {plateau:g} V, is not below VGS = {table.v_gs:g} V",
            "one of the two is from another row",
        )
    threshold = part.stated.threshold
    v_th = None if threshold is None else typical(threshold.v_gs_th)
    if plateau and v_th and plateau <= v_th:
        yield _finding(
            "plateau above threshold",
            "doubtful",
            "v_plateau",
            f"the plateau, {plateau:g} V, is not above VGS(th) = {v_th:g} V",
            "the plateau lies above the threshold by what the load current needs: look at both",
        )
    capacitance = part.stated.capacitance
    if capacitance is None:
        return
    c_iss, c_rss = typical(capacitance.c_iss), typical(capacitance.c_rss)
    near = 0.5 <= capacitance.v_ds / table.v_dd <= 2.0
    if q_gd and c_rss and near and c_rss * min(capacitance.v_ds, table.v_dd) > 1.1 * q_gd:
        yield _finding(
            "crss below qgd",
            "doubtful",
            "qgd",
            f"Crss times VDS = {engineering(c_rss * min(capacitance.v_ds, table.v_dd), 'C')} is above QGD = "
            f"{engineering(q_gd, 'C')}, yet Crss only grows towards low VDS",
            "look at the units of Crss and QGD",
        )
    if q_gs and c_iss and plateau:
        ratio = q_gs / (c_iss * plateau)
        # QGS / Vplateau = Ciss(VDD): 0.98 to 1.00 on three datasheets; QG(th) = Ciss VTH within 0.84 to 1.13 on
        # sixteen.
        other = (q_gd or 0.0) / (c_iss * plateau)
        if _LEAST_OTHER <= other <= _MOST_OTHER and not 1.0 / _EXCHANGED <= ratio <= _EXCHANGED:
            yield _finding(
                "charges exchanged",
                "doubtful",
                "qgs, qgd",
                f"QGS is {ratio:.3g} times Ciss times the plateau voltage, where it should be about once; QGD is "
                f"{other:.3g} times",
                "exchange qgs_nC and qgd_nC",
            )
        elif not 0.6 <= ratio <= 1.6:
            yield _finding(
                "first leg",
                "doubtful",
                "qgs",
                f"QGS is {ratio:.3g} times Ciss times the plateau voltage; it should be about once",
                _power_of_ten(ratio, "QGS or Ciss"),
            )


def _tenths(q_g: float, q_gs: float, q_gd: float) -> str:
    """Which of three charges would fit with its decimal point moved by one."""
    moved = {"QGS": (q_g, 0.1 * q_gs, q_gd), "QGD": (q_g, q_gs, 0.1 * q_gd), "QG": (10.0 * q_g, q_gs, q_gd)}
    figures = {"QGS": 0.1 * q_gs, "QGD": 0.1 * q_gd, "QG": 10.0 * q_g}
    fits = [f"{name} = {engineering(figures[name], 'C')}" for name, (g, s, d) in moved.items() if s + d <= g]
    return f"; {' or '.join(fits)} would fit" if fits else ""


def _power_of_ten(factor: float, what: str) -> str:
    for power in (-3, -2, -1, 1, 2, 3):
        if 0.7 <= factor / 10.0**power <= 1.4:
            return f"a factor of about {10.0**power:g}: look at the unit of {what}"
    return f"look at {what} again"


def _output_charge(part: Part) -> Iterator[Finding]:
    o = part.stated.output_charge
    if o is None:
        return
    er, tr, q, e = typical(o.c_oss_er), typical(o.c_oss_tr), typical(o.q_oss), typical(o.e_oss)
    if er and tr and er > tr * (1.0 + _ROUNDING):
        yield _finding(
            "co order",
            "doubtful",
            "coss_er, coss_tr",
            f"Co(er) = {engineering(er, 'F')} is above Co(tr) = {engineering(tr, 'F')}; where Coss falls it cannot be",
            "exchange coss_er_pF and coss_tr_pF: datasheets have printed their footnotes exchanged",
        )
        er, tr = tr, er
    capacitance = part.stated.capacitance
    c_oss = None if capacitance is None or capacitance.v_ds != o.v_ds else typical(capacitance.c_oss)
    if er and c_oss and er < c_oss / (1.0 + _ROUNDING):
        yield _finding(
            "co order",
            "doubtful",
            "coss_er, coss",
            f"Co(er) = {engineering(er, 'F')} is below Coss = {engineering(c_oss, 'F')} at {o.v_ds:g} V; where Coss "
            "falls with VDS it cannot be",
            "one of the two is from another row or in another unit",
        )
    yield from _charge_definitions(o.v_ds, q, e, tr, er)


def _charge_definitions(
    v_ds: float, q: float | None, e: float | None, tr: float | None, er: float | None
) -> Iterator[Finding]:
    """Co(tr) VDS is Qoss, Co(er) VDS^2/2 is Eoss."""
    of_q = q / (tr * v_ds) if q and tr else 1.0
    of_e = e / (0.5 * er * v_ds**2) if e and er else 1.0
    remedy = "one of them is from another row or in another unit"
    if q and tr and e and er and 0.85 <= of_e / of_q**2 <= 1.18:
        remedy = f"look at vds_V of stated.output_charge: {engineering(of_q * v_ds, 'V')} would fit all four"
    for what, unit, stated, factor, name in (("Qoss", "C", q, of_q, "Co(tr)"), ("Eoss", "J", e, of_e, "Co(er)")):
        if stated and not 0.85 <= factor <= 1.18:
            yield _finding(
                "co definition",
                "doubtful",
                what.lower(),
                f"{what} = {engineering(stated, unit)} differs from {engineering(stated / factor, unit)}, which {name} "
                f"means at {engineering(v_ds, 'V')}",
                remedy,
            )


def _recovery(part: Part) -> Iterator[Finding]:
    """QRR is at most the triangle that tRR and dI/dt span, and not a small part of it."""
    d = part.stated.body_diode
    if d is None or d.di_dt is None:
        return
    q_rr, t_rr = typical(d.q_rr), typical(d.t_rr)
    if not q_rr or not t_rr:
        return
    share = q_rr / (0.5 * d.di_dt * t_rr**2)
    if not _LEAST_TRIANGLE <= share <= _MOST_TRIANGLE:
        yield _finding(
            "recovery",
            "doubtful",
            "qrr, trr",
            f"QRR is {share:.3g} times dI/dt tRR^2/2, the largest charge that fits into tRR",
            _power_of_ten(share, "qrr, trr or di_dt"),
        )


def _threshold_current(part: Part) -> Iterator[Finding]:
    """Thresholds are read at one small current: that of the table is that of the temperature curve."""
    table = part.stated.threshold
    if table is None:
        return
    for curve in part.curves_of(Quantity.VGS_TH_TEMPERATURE):
        if curve.i_d and not 1.0 / _LIKE <= table.i_d / curve.i_d <= _LIKE:
            yield _finding(
                "threshold current",
                "doubtful",
                "stated.threshold, " + curve.name,
                f"VGS(th) is stated at {engineering(table.i_d, 'A')}, its temperature curve at "
                f"{engineering(curve.i_d, 'A')}",
                "look at both currents: id_mA against id_A",
            )
    load = largest_current(part)
    if load and table.i_d > _SMALL * load:
        yield _finding(
            "threshold current",
            "doubtful",
            "stated.threshold id",
            f"VGS(th) is stated at {engineering(table.i_d, 'A')}, {table.i_d / load:.3g} times the largest current of "
            "the table; it is read at microamperes to some milliamperes",
            "look at its unit: id_mA or id_uA instead of id_A",
        )


def _conditions(part: Part) -> Iterator[Finding]:
    """Conditions against the ratings, and those of the gate-charge curve against those of its table."""
    s = part.stated
    voltages = [("stated.gate_charge vdd", s.gate_charge.v_dd, part.v_ds_max)] if s.gate_charge else []
    voltages += [("stated.gate_charge vgs", s.gate_charge.v_gs, part.v_gs_max)] if s.gate_charge else []
    voltages += [("stated.capacitance vds", s.capacitance.v_ds, part.v_ds_max)] if s.capacitance else []
    voltages += [("stated.on_resistance vgs", s.on_resistance.v_gs, part.v_gs_max)] if s.on_resistance else []
    voltages += [("stated.transconductance vds", s.transconductance.v_ds, part.v_ds_max)] if s.transconductance else []
    voltages += [("stated.output_charge vds", s.output_charge.v_ds, part.v_ds_max)] if s.output_charge else []
    for topic, value, rating in voltages:
        if value > rating * 1.001:
            tenth = f"{topic} of {value / 10.0:g} V would fit: look at the decimal point, and at the rating"
            yield _finding(
                "rating",
                "doubtful",
                topic,
                f"{value:g} V is above the rating of {rating:g} V",
                tenth if 0.2 * rating <= value / 10.0 <= rating else "look at both again",
            )
    share = s.gate_charge.v_dd / part.v_ds_max if s.gate_charge else 1.0
    if s.gate_charge and share < _LEAST_SUPPLY:
        yield _finding(
            "supply",
            "doubtful",
            "stated.gate_charge vdd",
            f"VDD of {s.gate_charge.v_dd:g} V is {share:.2g} times the rated VDS; gate charge is tested at a fifth of "
            "it and more",
            "look at vdd_V and at vds_max_V",
        )
    v_th = typical(s.threshold.v_gs_th) if s.threshold else None
    if v_th and s.on_resistance and s.on_resistance.v_gs <= v_th:
        yield _finding(
            "drive",
            "doubtful",
            "stated.on_resistance vgs",
            f"RDS(on) is stated at VGS = {s.on_resistance.v_gs:g} V, not above VGS(th) = {v_th:g} V",
            "look at both again",
        )
    yield from _same_test(part)


def _same_test(part: Part) -> Iterator[Finding]:
    """A gate-charge curve is measured at the table's current, and at a fifth to four fifths of the rated voltage."""
    table = part.stated.gate_charge
    if table is None:
        return
    for curve in part.curves_of(Quantity.GATE_CHARGE):
        for key, own, stated, unit in (
            ("vdd_V", curve.v_dd, table.v_dd, "V"),
            ("id_A", curve.i_d, table.i_d, "A"),
        ):
            if own and not 1.0 / _OTHER_TEST <= own / stated <= _OTHER_TEST:
                yield _finding(
                    "gate-charge test",
                    "doubtful",
                    f"{curve.name}, stated.gate_charge",
                    f"{key} of the curve is {engineering(own, unit)}, that of the table {engineering(stated, unit)}",
                    f"one of the two is likely wrong: look at {key} of both",
                )
