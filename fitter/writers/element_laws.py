"""What the element form's circuits do to a voltage, in closed form, and how far its capacitances are off by that.

Two circuits stand in for functions. A *split* takes a voltage apart at zero: the voltage drives a resistor R, and a
sharp diode behind R keeps the node at its end from going negative. The node's voltage x solves

    x - n exp(-x/n) + n/rho = V,    n = N kT/q,

so that x is V above a few n and zero below. A *bend* makes the softplus of a voltage z in units of the bend's width: a
diode driven by z + 12 with a saturation current of IS exp(-12) passes IS (exp(z) - exp(-12)), and a second one with IS,
driven by a constant share of IS more than that, has the voltage ln(exp(z) + f) = ln f + sp(z - ln f; 1). (The 12 keeps
the first diode from reverse voltages, where simulators do not follow the exponential; the constant share keeps the
second one's current positive, near zero some settle on a wrong voltage.) With it a share behind a shield is exact, for
U(V) = V - sp(V-Vs; ws) + sp(-Vs; ws) is the same as sp(Vs; ws) - sp(Vs-V; ws).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import wrightomega

from fitter.model import FittedModel
from fitter.models import capacitance as cap
from fitter.models.capacitance import Junction
from fitter.models.diode import thermal_voltage
from fitter.models.smooth import logistic, softplus
from fitter.writers.netlist_frame import NOMINAL
from fitter.writers.netlist_text import scalar

__all__ = [
    "BEND_CURRENT",
    "BEND_EMISSION",
    "BEND_LIMIT",
    "BEND_OFFSET",
    "BEND_SHARE",
    "BEND_SHIFT",
    "SPLIT_BIAS",
    "SPLIT_CURRENT",
    "SPLIT_EMISSION",
    "SPLIT_RESISTANCE",
    "ElementAccuracy",
    "element_accuracy",
]

Array = NDArray[np.float64]

_KT_Q = float(thermal_voltage(NOMINAL))

#: Emission coefficient of a split's diode; the sharper, the harder to solve.
SPLIT_EMISSION = 0.05
#: Resistance that drives it [ohm].
SPLIT_RESISTANCE = 1e3
#: How many times its saturation current is below n/R; the split is off by n over this where its diode blocks.
_SPLIT_RATIO = 1e3
_SPLIT_WIDTH = SPLIT_EMISSION * _KT_Q
#: Its saturation current [A], and the voltage [V] at its anode that puts the split at zero all the same.
SPLIT_CURRENT = _SPLIT_WIDTH / (_SPLIT_RATIO * SPLIT_RESISTANCE)
SPLIT_BIAS = _SPLIT_WIDTH * float(np.log(_SPLIT_RATIO))

#: Emission coefficient with which N kT/q is one volt, the unit of a bend.
BEND_EMISSION = 1.0 / _KT_Q
#: Saturation current of a bend's second diode [A]: far above what GMIN lets pass at the highest voltages.
BEND_CURRENT = 1e-6
#: How much higher the first diode is driven, and how much less saturation current it has, in units of the bend.
BEND_SHIFT = 12.0
#: Share of that current that is always added, and the constant ln f by which drive and result are raised for it.
BEND_SHARE = 0.05
BEND_OFFSET = float(np.log1p(BEND_SHARE - np.exp(-BEND_SHIFT)))
#: Above this sp(z) is z to 6e-6; the bend is driven no higher, and what is left of z is added behind it.
BEND_LIMIT = 12.0

#: From where on the accuracy is taken [V]: below, the split is not sharp.
_LEAST_V_DS = 0.1
_POINTS = 400


@dataclass(frozen=True, kw_only=True)
class ElementAccuracy:
    """Relative deviation of the element form's Ciss, Coss and Crss from the model's own.

    Parameters
    ----------
    rms, largest : float
        Over all three curves at VDS spread evenly on a logarithmic axis.
    v_ds : tuple of float
        Lowest and highest VDS [V], in n-channel polarity.
    """

    rms: float
    largest: float
    v_ds: tuple[float, float]


def _split(v: Array) -> tuple[Array, Array]:
    """A split's positive part x [V] and its derivative, for V >= 0."""
    driven = v - _SPLIT_WIDTH / _SPLIT_RATIO
    passed = np.asarray(wrightomega(-driven / _SPLIT_WIDTH))
    return driven + _SPLIT_WIDTH * passed, 1.0 / (1.0 + passed)


def _bend(z: Array) -> tuple[Array, Array]:
    """A bend's output and its derivative."""
    limited = np.minimum(z, BEND_LIMIT)
    return np.log1p(np.exp(limited)) + z - limited, np.where(z < BEND_LIMIT, logistic(limited, 1.0), 1.0)


def _capacitance(v: Array, j: Junction, c_below: float) -> Array:
    """Capacitance of a junction [F] as the circuits make it, for V >= 0."""
    x, slope = _split(v)
    above, rest = np.full(v.shape, scalar(j.c_f)), 1.0
    for shield in j.shields:
        v_s, w, s = scalar(shield.v), scalar(shield.width), scalar(shield.s)
        bent, held = _bend((v_s - x) / w)
        u = scalar(softplus(v_s, w)) - w * bent
        above = above + rest * s * cap.depletion_capacitance(u, j.c_0, j.phi, j.m) * held
        rest *= 1.0 - s
    above = above + rest * cap.depletion_capacitance(x, j.c_0, j.phi, j.m)
    if j.rise is not None:
        above = above + scalar(j.rise.c) * _bend((x - scalar(j.rise.v)) / scalar(j.rise.width))[1]
    return above * slope + c_below * (1.0 - slope)


def element_accuracy(model: FittedModel) -> ElementAccuracy:
    """How far the element form's capacitances are off, from 0.1 V to the rated VDS.

    From the circuits' laws in closed form; a simulator's own tolerances come on top.

    Parameters
    ----------
    model : FittedModel
        The model.

    Returns
    -------
    ElementAccuracy
    """
    t = model.transistor()
    v = np.geomspace(_LEAST_V_DS, model.part.v_ds_max, _POINTS)
    c_gd = _capacitance(v, t.gate_drain, scalar(t.c_acc))
    c_ds = _capacitance(v, t.drain_source, scalar(t.c_ds(0.0)))
    made = np.stack([c_gd + scalar(t.c_gs), c_gd + c_ds, c_gd])
    own = np.stack([t.c_iss(v), t.c_oss(v), t.c_rss(v)])
    off = made / own - 1.0
    return ElementAccuracy(
        rms=float(np.sqrt(np.mean(off**2))),
        largest=float(np.max(np.abs(off))),
        v_ds=(_LEAST_V_DS, model.part.v_ds_max),
    )
