"""Data made from a fitted model itself, with the reading errors that a fit assumes: what intervals are tested on."""

from dataclasses import replace

import numpy as np

from fitter.comparison import compare
from fitter.fitting.blocks import PathBlock
from fitter.fitting.intervals import Estimate
from fitter.fitting.observations import STATED_ERROR, curve_block, from_axis, to_axis
from fitter.fitting.space import ParameterSpace
from fitter.models.types import scalar
from fitter.part import Stated

#: Table values that the tests give to a fit or compare: field in `fitter.part` by the comparison's name.
_FIELDS = {
    "qg": ("gate_charge", "q_g"),
    "qgs": ("gate_charge", "q_gs"),
    "qgd": ("gate_charge", "q_gd"),
    "v_plateau": ("gate_charge", "v_plateau"),
    "vgs_th": ("threshold", "v_gs_th"),
    "rds_on": ("on_resistance", "r_ds_on"),
}


def exact(values):
    """An estimate without any uncertainty."""
    values = {name: scalar(value) for name, value in values.items()}
    return Estimate(space=ParameterSpace(free=(), fixed=values), coordinates=np.zeros(0), covariance=np.zeros((0, 0)))


def inside(values):
    """Parameters a little off the bounds that fits like to end on: on a bound there is no interval to test."""
    values = {name: scalar(value) for name, value in values.items()}
    for name, value in values.items():
        if name[:1] == "s" and name[1:2].isdigit():
            values[name] = min(value, 0.93)
        elif name.startswith("ws"):
            values[name] = min(max(value, 0.08), 1.0)
    values["lambda"] = max(values["lambda"], 2e-4)
    for name in ("m_gd", "m_ds"):
        values[name] = min(max(values[name], 0.25), 0.85)
    values["r_s"] = max(values["r_s"], 0.15 * values["r_d"])
    return values


def true_points(curve, values):
    """A curve's points as the model has them, in the axes' own coordinates."""
    block = curve_block(curve)
    x = np.asarray(block.x)
    if isinstance(block, PathBlock):
        path_x, path_y = (np.real(p) for p in block.function(values))
        x = np.linspace(0.0, 1.0, x.size) * to_axis(curve.x, curve.x_axis)[-1]
        return x, np.interp(x, path_x, path_y)
    return x, np.real(block.function(values, x))


def redigitize(part, values, seed):
    """A part whose curves and table values come from a model, clicked with its own reading errors."""
    rng = np.random.default_rng(seed)
    curves = []
    for curve in part.curves:
        x, y = true_points(curve, values)
        along_x, along_y = curve.x_axis.length, curve.y_axis.length
        x = x + along_x * (curve.point_error * rng.normal(size=x.size) + curve.axis_error * rng.normal())
        y = y + along_y * (curve.point_error * rng.normal(size=x.size) + curve.axis_error * rng.normal())
        x, y = from_axis(x, curve.x_axis), from_axis(y, curve.y_axis)
        order = np.argsort(x, kind="stable")
        curves.append(replace(curve, x=x[order], y=y[order]))
    stated = part.stated
    for check in compare(part, exact(values), (), False):
        if check.quantity not in _FIELDS or check.fitted is None:
            continue
        group, name = _FIELDS[check.quantity]
        typ = check.fitted * (1.0 + STATED_ERROR[check.quantity] * rng.normal())
        table = replace(getattr(stated, group), **{name: Stated(typ=typ)})
        stated = replace(stated, **{group: table})
    return replace(part, curves=tuple(curves), stated=stated)
