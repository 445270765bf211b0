"""The model's equations as expressions of a circuit simulator.

Only min, max, abs, exp and log (natural) are used, which every SPICE-compatible simulator spells alike. No argument of log
is below about 1 and none of exp above a few tens, whatever voltages a simulator tries on its way to a solution. Expressions have
a space wherever a line may end, and nowhere else.
"""

from __future__ import annotations

import numpy as np

from fitter.models import capacitance as cap
from fitter.models.capacitance import Junction, Shield
from fitter.models.channel import Channel
from fitter.models.smooth import softplus
from fitter.models.transistor import Transistor
from fitter.writers.netlist_text import number, signed

__all__ = ["channel_current", "drain_source_charge", "gate_drain_charge", "gate_source_charge"]

#: A channel-length modulation this small [1/V] changes no current by as much as 1e-6 below 1000 V.
_NO_MODULATION = 1e-9


def _softplus(x: str, w: float) -> str:
    """W ln(1 + exp(x/w)) of an expression that is a sum, in the form that cannot overflow."""
    return f"(max({x}, 0) + {number(w)} * log(1 + exp(-abs({x}) / {number(w)})))"


def _over(v: str, v_th: float) -> str:
    """A voltage less the threshold."""
    return f"{v} {signed(-v_th)}"


def _shielded_voltage(v: str, shield: Shield) -> str:
    """V - sp(V-Vs; ws) + sp(-Vs; ws) for a share behind a shield.

    Written as min(V, Vs) - ws ln(1 + exp(-|V-Vs|/ws)) + sp(-Vs; ws): no large numbers cancel.
    """
    v_s, w = float(np.asarray(shield.v)), float(shield.width)
    bend = f"{number(w)} * log(1 + exp(-abs({v} {signed(-v_s)}) / {number(w)}))"
    return f"min({v}, {number(v_s)}) - {bend} {signed(float(softplus(-v_s, w)))}"


def _junction_charge(v: str, j: Junction, unit: float) -> str:
    """Charge of a junction at an expression that is never negative, over a unit capacitance [V]."""
    rest_of_m = 1.0 - float(np.asarray(j.m))
    scale = float(np.asarray(j.c_0)) * float(np.asarray(j.phi)) / rest_of_m / unit
    terms, share = [], 1.0
    for shield in j.shields:
        terms.append((share * float(np.asarray(shield.s)), _shielded_voltage(v, shield)))
        share *= 1.0 - float(np.asarray(shield.s))
    terms.append((share, v))
    constant = float(np.asarray(j.c_f)) / unit
    parts = [f"{number(constant)} * {v}"] if constant > 0.0 else []
    parts += [
        f"{number(part * scale)} * (exp({number(rest_of_m)} * log(1 + ({u}) / {number(float(np.asarray(j.phi)))})) - 1)"
        for part, u in terms
        if part > 0.0
    ]
    return " + ".join(parts) or "0"


def _split_charge(v: str, c_below: float, j: Junction, unit: float) -> str:
    """A junction's charge above 0 V, a constant capacitance's below."""
    return f"{number(c_below / unit)} * min({v}, 0) + {_junction_charge(f'max({v}, 0)', j, unit)}"


def gate_drain_charge(t: Transistor, v_dg: str, unit: float) -> str:
    """Charge of the gate-drain capacitance over a unit capacitance.

    Parameters
    ----------
    t : Transistor
        With numbers, no arrays, for parameters.
    v_dg : str
        Expression of the inner drain-gate voltage in n-channel polarity [V].
    unit : float
        Unit capacitance [F].

    Returns
    -------
    str
        Expression of Q/unit [V].
    """
    return _split_charge(v_dg, float(np.asarray(t.c_acc)), t.gate_drain, unit)


def drain_source_charge(t: Transistor, v_ds: str, unit: float) -> str:
    """Charge of the drain-source capacitance over a unit capacitance; see `gate_drain_charge`."""
    return _split_charge(v_ds, float(np.real(cap.capacitance(0.0, t.drain_source))), t.drain_source, unit)


def gate_source_charge(t: Transistor, v_gs: str, unit: float) -> str:
    """Charge of the gate-source capacitance over a unit capacitance; see `gate_drain_charge`."""
    constant, added = float(np.asarray(t.c_gs)) / unit, float(np.asarray(t.c_ch)) / unit
    expression = f"{number(constant)} * {v_gs}"
    if added <= 0.0:
        return expression
    v_th, w = float(np.asarray(t.channel.v_th)), float(np.asarray(t.channel.w))
    turned_on = f"{_softplus(_over(v_gs, v_th), w)} {signed(-float(softplus(-v_th, w)))}"
    return f"{expression} + {number(added)} * ({turned_on})"


def channel_current(c: Channel, v_gs: str, v_gd: str, v_ds: str) -> str:
    """Current of the inner channel from drain to source.

    The difference of squares is written as a product, so that no digits are lost where both sides are nearly equal.

    Parameters
    ----------
    c : Channel
        With numbers, no arrays, for parameters.
    v_gs, v_gd, v_ds : str
        Expressions of the inner voltages in n-channel polarity [V].

    Returns
    -------
    str
        Expression of the current [A].
    """
    v_th, w, lam = (float(np.asarray(x)) for x in (c.v_th, c.w, c.lam))
    source_side, drain_side = (_softplus(_over(v, v_th), w) for v in (v_gs, v_gd))
    product = f"({source_side} - {drain_side}) * ({source_side} + {drain_side})"
    current = f"{number(0.5 * float(np.asarray(c.k)))} * {product}"
    if lam < _NO_MODULATION:
        return current
    return f"{current} * (1 + {number(lam)} * abs({v_ds}))"
