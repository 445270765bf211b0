"""From what a part folder says to what a fit sees: curves and table values as blocks of residuals."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray
from scipy.stats import theilslopes

from fitter.errors import FitError
from fitter.fitting.assumptions import BODY_SHARE, BODY_SHARE_SPREAD
from fitter.fitting.blocks import EXPECTED, READ, Block, PathBlock, PointsBlock, ScalarBlock
from fitter.fitting.space import Values
from fitter.gate_charge import OperatingPoint, gate_charge_curve
from fitter.models.capacitance import DRAIN_SOURCE, GATE_DRAIN
from fitter.models.channel import CHANNEL, on_resistance, threshold_voltage
from fitter.models.diode import BODY_DIODE, forward_current, forward_voltage
from fitter.models.temperature import REFERENCE, TEMPERATURE, junction_temperature
from fitter.models.transistor import GATE, Transistor
from fitter.models.types import Numbers, Value
from fitter.part import Axis, Curve, Part, Quantity, Stated, StatedGateCharge

__all__ = [
    "HOT_DIODE",
    "HOT_OUTPUT",
    "HOT_TRANSFER",
    "STATED_ERROR",
    "TABLE_ERROR",
    "body_diode_blocks",
    "body_diode_curves",
    "capacitance_blocks",
    "channel_blocks",
    "curve_block",
    "from_axis",
    "gate_charge_blocks",
    "hot_blocks",
    "modulation_block",
    "to_axis",
]

#: 1-sigma error of a typical table value relative to itself: it is printed with two or three digits and need not belong
#: to the very device whose curves are printed (common practice, no source).
TABLE_ERROR = {
    "v_gs_th": 0.02,
    "r_ds_on": 0.02,
    "capacitance": 0.03,
    "q_g": 0.02,
    "q_gs": 0.04,
    "q_gd": 0.04,
    "v_plateau": 0.02,
    "v_sd": 0.02,
    "recovery": 0.05,
}

#: The same by the names of the comparison; a stated figure without an entry counts as a capacitance.
STATED_ERROR = {
    "qg": TABLE_ERROR["q_g"], "qgs": TABLE_ERROR["q_gs"], "qgd": TABLE_ERROR["q_gd"],
    "v_plateau": TABLE_ERROR["v_plateau"], "vgs_th": TABLE_ERROR["v_gs_th"], "rds_on": TABLE_ERROR["r_ds_on"],
    "vsd": TABLE_ERROR["v_sd"], "gfs": 0.05, "trr": TABLE_ERROR["recovery"],
}  # fmt: skip

#: Built-in potential of a junction, and how far the fitted one may be expected from it, as a natural logarithm:
#: 0.6 to 3 V is
#: physics (silicon, silicon carbide), the rest leaves room for what the form makes of it. It only matters where
#: no point at low VDS was digitized: there it keeps the capacitance at 0 V from running away.
_BUILT_IN, _BUILT_IN_SPREAD = 1.5, 1.5

#: By what share a current may be expected to rise with VDS up to the gate-charge test's VDD, 1-sigma: the drift zone
#: takes what VDS rises by beyond some volts (a judgement, no source). Without it a rise over the few volts of output
#: curves is drawn out to hundreds.
_MODULATION_SPREAD = 1.0

#: Points around 25 degC off which VGS(th) is read there.
_NEAR_REFERENCE = 5

_GATE_DRAIN = tuple(d.name for d in GATE_DRAIN.values())
_DRAIN_SOURCE = tuple(d.name for d in DRAIN_SOURCE.values())
_CHANNEL = tuple(d.name for d in CHANNEL.values())
_LAWS = tuple(d.name for d in TEMPERATURE.values())
_BODY_DIODE = tuple(d.name for d in BODY_DIODE.values())
_GATE = tuple(d.name for d in GATE.values())
#: The path of a gate-charge curve runs on beyond the last point by this share, so that no point lies past its end.
_BEYOND = 1.1

_CAPACITANCES = (Quantity.CISS, Quantity.COSS, Quantity.CRSS)
#: Curves that begin at 0 along x.
_FROM_ZERO = (*_CAPACITANCES, Quantity.BODY_DIODE)
#: On a linear VDS axis the first volts, where capacitances fall steeply, are within a few reading errors of each other.
_LOOKS = 1

#: Groups of curves away from 25 degC.
HOT_TRANSFER, HOT_OUTPUT, HOT_DIODE = "transfer hot", "output hot", "body_diode hot"

Evaluate = Callable[[Transistor, Numbers], Numbers]


def to_axis(values: NDArray[np.float64], axis: Axis) -> NDArray[np.float64]:
    """SI values in the axis' own coordinate: their logarithm on a log axis."""
    return np.log(values) if axis.scale == "log" else np.asarray(values, dtype=float)


def _model_to_axis(values: Numbers, axis: Axis) -> Numbers:
    if axis.scale == "linear":
        return values
    return np.log(np.where(values.real > 1e-30, values, 1e-30))


def from_axis(coordinates: Numbers, axis: Axis) -> Numbers:
    """Coordinates on an axis as SI values."""
    return np.exp(coordinates) if axis.scale == "log" else coordinates


def _digitized(curve: Curve) -> dict[str, object]:
    """The fields that every block of a curve takes from it."""
    return {
        "name": curve.name,
        "group": f"{curve.quantity} hot" if _hot(curve) else str(curve.quantity),
        "x": to_axis(curve.x, curve.x_axis),
        "y": to_axis(curve.y, curve.y_axis),
        "sigma_x": np.full(curve.x.size, curve.point_error * curve.x_axis.length),
        "sigma_y": np.full(curve.x.size, curve.point_error * curve.y_axis.length),
        "shift_x": curve.axis_error * curve.x_axis.length,
        "shift_y": curve.axis_error * curve.y_axis.length,
    }


def curve_block(curve: Curve) -> PointsBlock | PathBlock:
    """The block of a curve.

    Parameters
    ----------
    curve : Curve
        Of any quantity.

    Returns
    -------
    PointsBlock or PathBlock
    """
    if curve.quantity is Quantity.GATE_CHARGE:
        return _gate_charge_path(curve)
    parameters, evaluate = _EVALUATED[curve.quantity](curve)

    def function(values: Values, x: Numbers) -> Numbers:
        y = evaluate(Transistor.from_values(values), from_axis(x, curve.x_axis))
        return _model_to_axis(y, curve.y_axis)

    # A point clicked at 0 V may come to lie below it by the reading error; the printed curve ends at 0.
    begins = 0.0 if curve.quantity in _FROM_ZERO and curve.x_axis.scale == "linear" else -np.inf
    looks = _LOOKS if curve.quantity in _CAPACITANCES else 0
    block = PointsBlock(**_digitized(curve), model_parameters=parameters, function=function)  # type: ignore[arg-type]
    return replace(block, begins=begins, looks=looks)


def _c_iss(_: Curve) -> tuple[tuple[str, ...], Evaluate]:
    return ("c_gs", *_GATE_DRAIN), lambda t, v: t.c_iss(v)


def _c_oss(_: Curve) -> tuple[tuple[str, ...], Evaluate]:
    return (*_DRAIN_SOURCE, *_GATE_DRAIN), lambda t, v: t.c_oss(v)


def _c_rss(_: Curve) -> tuple[tuple[str, ...], Evaluate]:
    return _GATE_DRAIN, lambda t, v: t.c_rss(v)


def _channel_parameters(t_j: float) -> tuple[str, ...]:
    return _CHANNEL if t_j == REFERENCE else _CHANNEL + _LAWS


def _condition(curve: Curve, name: str) -> float:
    """A condition of a curve, which a part that was put together by hand may lack."""
    value = getattr(curve, name)
    if value is None:
        raise FitError(f"{curve.name}: a {curve.quantity} curve needs its condition {name}")
    return float(value)


def _transfer(curve: Curve) -> tuple[tuple[str, ...], Evaluate]:
    v_ds, t_j = _condition(curve, "v_ds"), junction_temperature(curve.t_j)
    return _channel_parameters(t_j), lambda t, v: t.at(t_j).i_d(v, v_ds)


def _output(curve: Curve) -> tuple[tuple[str, ...], Evaluate]:
    v_gs, t_j = _condition(curve, "v_gs"), junction_temperature(curve.t_j)
    return _channel_parameters(t_j), lambda t, v: t.at(t_j).i_d(v_gs, v)


def _r_ds_on_temperature(curve: Curve) -> tuple[tuple[str, ...], Evaluate]:
    i_d, v_gs = _condition(curve, "i_d"), _condition(curve, "v_gs")

    def evaluate(t: Transistor, t_j: Numbers) -> Numbers:
        hot = on_resistance(i_d, v_gs, t.at(t_j).channel)
        return hot / on_resistance(i_d, v_gs, t.channel) if curve.y_unit == "" else hot

    return _CHANNEL + _LAWS, evaluate


def _v_gs_th_temperature(curve: Curve) -> tuple[tuple[str, ...], Evaluate]:
    i_d = _condition(curve, "i_d")
    return _CHANNEL + _LAWS, lambda t, t_j: threshold_voltage(i_d, t.at(t_j).channel)


def _body_diode(curve: Curve) -> tuple[tuple[str, ...], Evaluate]:
    t_j = junction_temperature(curve.t_j)

    def evaluate(t: Transistor, v: Numbers) -> Numbers:
        if t.diode is None:
            raise FitError(f"{curve.name}: the model has no body diode")
        return forward_current(v, t.diode, t_j)

    return _BODY_DIODE, evaluate


_EVALUATED: dict[Quantity, Callable[[Curve], tuple[tuple[str, ...], Evaluate]]] = {
    Quantity.CISS: _c_iss,
    Quantity.COSS: _c_oss,
    Quantity.CRSS: _c_rss,
    Quantity.TRANSFER: _transfer,
    Quantity.OUTPUT: _output,
    Quantity.RDS_ON_TEMPERATURE: _r_ds_on_temperature,
    Quantity.VGS_TH_TEMPERATURE: _v_gs_th_temperature,
    Quantity.BODY_DIODE: _body_diode,
}


def _gate_charge_path(curve: Curve) -> PathBlock:
    point = OperatingPoint(
        v_dd=_condition(curve, "v_dd"),
        i_d=_condition(curve, "i_d"),
        v_gs=_BEYOND * float(np.max(curve.y)),
        load=curve.load or "current",
    )

    def function(values: Values) -> tuple[Numbers, Numbers]:
        path = gate_charge_curve(Transistor.from_values(values), point)
        return _model_to_axis(path.q_g, curve.x_axis), _model_to_axis(path.v_gs, curve.y_axis)

    parameters = _GATE + _GATE_DRAIN + _CHANNEL
    return PathBlock(**_digitized(curve), model_parameters=parameters, function=function)  # type: ignore[arg-type]


def _of(part: Part, *quantities: Quantity) -> list[PointsBlock | PathBlock]:
    return [curve_block(c) for c in part.curves if c.quantity in quantities and not _hot(c)]


def _hot(curve: Curve) -> bool:
    """Whether a curve belongs to another junction temperature than that of the parameters."""
    return junction_temperature(curve.t_j) != REFERENCE


def _typical(stated: Stated | None) -> float | None:
    return None if stated is None else stated.typ


def _scalar(
    name: str,
    parameters: tuple[str, ...],
    stated: Stated | None,
    error: float,
    function: Callable[[Transistor], Numbers],
) -> list[ScalarBlock]:
    typ = _typical(stated)
    if typ is None:
        return []
    return [
        ScalarBlock(
            name=name, parameters=parameters, stated=typ, sigma=error * typ,
            function=lambda values: function(Transistor.from_values(values)),
        )
    ]  # fmt: skip


def capacitance_blocks(part: Part) -> list[Block]:
    """The capacitance curves; for one that is missing, its table value."""
    blocks: list[Block] = list(_of(part, Quantity.CISS, Quantity.COSS, Quantity.CRSS))
    blocks += [_built_in(d["phi"].name) for d in (GATE_DRAIN, DRAIN_SOURCE)]
    table = part.stated.capacitance
    if table is None:
        return blocks
    v, error = table.v_ds, TABLE_ERROR["capacitance"]
    if not part.curves_of(Quantity.CISS):
        blocks += _scalar("ciss (table)", ("c_gs", *_GATE_DRAIN), table.c_iss, error, lambda t: t.c_iss(v))
    if not part.curves_of(Quantity.COSS):
        blocks += _scalar("coss (table)", _DRAIN_SOURCE + _GATE_DRAIN, table.c_oss, error, lambda t: t.c_oss(v))
    if not part.curves_of(Quantity.CRSS):
        blocks += _scalar("crss (table)", _GATE_DRAIN, table.c_rss, error, lambda t: t.c_rss(v))
    return blocks


def _built_in(name: str) -> ScalarBlock:
    return _expected(name, math.log(_BUILT_IN), _BUILT_IN_SPREAD, lambda values: np.log(values[name]))


def _expected(name: str, value: float, spread: float, function: Callable[[Values], Value]) -> ScalarBlock:
    """What is known of a parameter, or a function of it, before any point is seen."""
    return ScalarBlock(
        name=f"{name}{EXPECTED}", parameters=(name,), stated=value, sigma=spread,
        function=lambda values: np.asarray(function(values)),
    )  # fmt: skip


def modulation_block(part: Part) -> ScalarBlock:
    """What is known of channel-length modulation before any point is seen, for fits in which lambda is free."""
    return _expected("lambda", 0.0, _MODULATION_SPREAD / part.supply, lambda values: values["lambda"])


def channel_blocks(part: Part) -> list[Block]:
    """Transfer and output curves at 25 degC, the stated VGS(th) and RDS(on), and VGS(th) read off its curve over Tj."""
    blocks: list[Block] = list(_of(part, Quantity.TRANSFER, Quantity.OUTPUT))
    threshold, on = part.stated.threshold, part.stated.on_resistance
    if threshold is not None:
        blocks += _scalar(
            "vgs_th (table)", _CHANNEL, threshold.v_gs_th, TABLE_ERROR["v_gs_th"],
            lambda t: threshold_voltage(threshold.i_d, t.channel),
        )  # fmt: skip
    if on is not None:
        blocks += _scalar(
            "rds_on (table)", _CHANNEL, on.r_ds_on, TABLE_ERROR["r_ds_on"],
            lambda t: on_resistance(on.i_d, on.v_gs, t.channel),
        )  # fmt: skip
    return blocks + _threshold_blocks(part)


def _threshold_blocks(part: Part) -> list[Block]:
    """VGS(th) at 25 degC, read off the curve of VGS(th) over Tj."""
    blocks: list[Block] = []
    for curve in part.curves_of(Quantity.VGS_TH_TEMPERATURE):
        near = np.argsort(np.abs(curve.x - REFERENCE), kind="stable")[:_NEAR_REFERENCE]
        t_j, v = curve.x[near], curve.y[near]
        if near.size < _NEAR_REFERENCE or not np.min(t_j) < REFERENCE < np.max(t_j):
            continue
        # A straight line that one mis-clicked point does not turn (P. K. Sen, J. Am. Stat. Assoc. 63 (1968) 1379).
        slope = float(theilslopes(v, t_j).slope)
        read = float(np.median(v - slope * (t_j - REFERENCE)))
        share = math.hypot(curve.point_error, curve.axis_error)
        blocks.append(
            _read_threshold(curve, read, share * math.hypot(curve.y_axis.length, slope * curve.x_axis.length))
        )
    return blocks


def _read_threshold(curve: Curve, read: float, sigma: float) -> ScalarBlock:
    i_d = _condition(curve, "i_d")
    return ScalarBlock(
        name=f"{curve.name}{READ}", parameters=_CHANNEL, stated=read, sigma=sigma,
        function=lambda values: threshold_voltage(i_d, Transistor.from_values(values).channel),
    )  # fmt: skip


def hot_blocks(part: Part) -> list[Block]:
    """What shows the temperature laws: transfer and output curves away from 25 degC, RDS(on) and VGS(th) over Tj."""
    hot = (Quantity.TRANSFER, Quantity.OUTPUT)
    over = (Quantity.RDS_ON_TEMPERATURE, Quantity.VGS_TH_TEMPERATURE)
    return [curve_block(c) for c in part.curves if c.quantity in over or (c.quantity in hot and _hot(c))]


def body_diode_blocks(part: Part) -> list[Block]:
    """The body diode's forward curves with the channel closed; without one at 25 degC, the stated VSD."""
    curves = body_diode_curves(part)
    blocks: list[Block] = [curve_block(c) for c in curves]
    table = part.stated.body_diode
    if table is not None and table.i_s is not None and all(_hot(c) for c in curves):
        i_s = table.i_s

        def drop(t: Transistor) -> Numbers:
            return forward_voltage(i_s, t.diode) if t.diode is not None else np.asarray(np.nan)

        blocks += _scalar("vsd (table)", _BODY_DIODE, table.v_sd, TABLE_ERROR["v_sd"], drop)
    return blocks


def body_diode_curves(part: Part) -> tuple[Curve, ...]:
    """The body diode's curves that count: at VGS = 0 where there are such, else with the gate more firmly off."""
    every = [c for c in part.curves_of(Quantity.BODY_DIODE) if (c.v_gs or 0.0) <= 0.0]
    at_zero = tuple(c for c in every if not c.v_gs)
    return at_zero or tuple(every)


def gate_charge_blocks(part: Part) -> list[Block]:
    """The digitized gate-charge curves; where there are none, the stated QG, QGS, QGD and plateau."""
    table = part.stated.gate_charge
    blocks: list[Block] = list(_of(part, Quantity.GATE_CHARGE))
    if not blocks and table is not None:
        blocks = _gate_charge_table(table)
    return [*blocks, _expected("s_gs", BODY_SHARE, BODY_SHARE_SPREAD, lambda values: values["s_gs"])] if blocks else []


def _gate_charge_table(table: StatedGateCharge) -> list[Block]:
    point = OperatingPoint(v_dd=table.v_dd, i_d=table.i_d, v_gs=table.v_gs, load=table.load)
    parameters = _GATE + _GATE_DRAIN + _CHANNEL
    stated = {"q_g": table.q_g, "q_gs": table.q_gs, "q_gd": table.q_gd, "v_plateau": table.v_plateau}
    read = {"q_g": "total", "q_gs": "q_gs", "q_gd": "q_gd", "v_plateau": "v_plateau"}
    blocks: list[Block] = []
    for name, value in stated.items():

        def figure(t: Transistor, name: str = name) -> Numbers:
            return np.asarray(getattr(gate_charge_curve(t, point).reading, read[name]))[..., None]

        blocks += _scalar(f"{name} (table)", parameters, value, TABLE_ERROR[name], figure)
    return blocks
