"""The model's equations as expressions of a circuit simulator.

Only min, max, abs, exp and log (natural) are used, which every SPICE-compatible simulator spells alike. No argument of
log is below one or so and none of exp is large, whatever voltages a simulator tries on its way to a solution.
Expressions have a space wherever a line may end, and nowhere else.
"""

from __future__ import annotations

import numpy as np

from fitter.models import capacitance as cap
from fitter.models.capacitance import Junction, Shield
from fitter.models.channel import Channel
from fitter.models.smooth import softplus
from fitter.models.transistor import Transistor
from fitter.writers.netlist_text import number, scalar, signed

__all__ = ["channel_current", "drain_source_charge", "gate_drain_charge", "gate_source_charge"]

#: A channel-length modulation this small [1/V] changes a current by 1e-6 of itself at 1000 V.
_NO_MODULATION = 1e-9


def _softplus(x: str, w: float) -> str:
    """Softplus w ln(1 + exp(x/w)) in the form that cannot overflow."""
    return f"(max({x}, 0) + {number(w)} * log(1 + exp(-abs({x}) / {number(w)})))"


def _shielded_voltage(v: str, shield: Shield) -> str:
    """Voltage over a share behind a shield, V - sp(V-Vs; ws) + sp(-Vs; ws).

    Written as min(V, Vs) - ws ln(1 + exp(-|V-Vs|/ws)) + sp(-Vs; ws): no large numbers cancel.
    """
    v_s, w = scalar(shield.v), scalar(shield.width)
    bend = f"{number(w)} * log(1 + exp(-abs({v} {signed(-v_s)}) / {number(w)}))"
    return f"min({v}, {number(v_s)}) - {bend} {signed(scalar(softplus(-v_s, w)))}"


def _junction_charge(v: str, j: Junction, unit: float) -> str:
    """Charge of a junction over a unit capacitance, at an expression that is never negative."""
    phi, rest_of_m = scalar(j.phi), 1.0 - scalar(j.m)
    scale = scalar(j.c_0) * phi / rest_of_m / unit
    voltages, share = [], 1.0
    for shield in j.shields:
        voltages.append((share * scalar(shield.s), _shielded_voltage(v, shield)))
        share *= 1.0 - scalar(shield.s)
    voltages.append((share, v))
    terms = [f"{number(scalar(j.c_f) / unit)} * {v}"] if scalar(j.c_f) > 0.0 else []
    if j.rise is not None and scalar(j.rise.c) > 0.0:
        v_r, w = scalar(j.rise.v), scalar(j.rise.width)
        risen = f"{_softplus(f'{v} {signed(-v_r)}', w)} {signed(-scalar(softplus(-v_r, w)))}"
        terms.append(f"{number(scalar(j.rise.c) / unit)} * ({risen})")
    for part, u in voltages:
        if part > 0.0:
            power = f"exp({number(rest_of_m)} * log(1 + ({u}) / {number(phi)}))"
            terms.append(f"{number(part * scale)} * ({power} - 1)")
    return " + ".join(terms)


def _split_charge(v: str, c_below: float, j: Junction, unit: float) -> str:
    """Charge of a junction above 0 V, of a constant capacitance below."""
    return f"{number(c_below / unit)} * min({v}, 0) + {_junction_charge(f'max({v}, 0)', j, unit)}"


def gate_drain_charge(t: Transistor, v_dg: str, unit: float) -> str:
    """Charge of the gate-drain capacitance over a unit capacitance.

    Parameters
    ----------
    t : Transistor
        With numbers, no arrays, for parameters.
    v_dg : str
        The inner drain-gate voltage in n-channel polarity [V].
    unit : float
        Unit capacitance [F].

    Returns
    -------
    str
        Q/unit [V].
    """
    return _split_charge(v_dg, scalar(t.c_acc), t.gate_drain, unit)


def drain_source_charge(t: Transistor, v_ds: str, unit: float) -> str:
    """Charge of the drain-source capacitance over a unit capacitance; see `gate_drain_charge`."""
    return _split_charge(v_ds, scalar(cap.capacitance(0.0, t.drain_source)), t.drain_source, unit)


def gate_source_charge(t: Transistor, v_gs: str, unit: float) -> str:
    """Charge of the gate-source capacitance over a unit capacitance; see `gate_drain_charge`."""
    v_th, w = scalar(t.channel.v_th), scalar(t.channel.w)
    c_body = scalar(t.gate_body.c_0)
    expression = f"{number(scalar(t.c_gs) / unit)} * {v_gs}"
    if c_body > 0.0:
        # Less what depletion takes of it: nothing and with no slope at 0 V, whatever slope a simulator gives max there.
        above = f"max({v_gs}, 0)"
        expression += f" - {number(c_body / unit)} * ({above} - ({_junction_charge(above, t.gate_body, c_body)}))"
    if scalar(t.c_ch) <= 0.0:
        return expression
    turned_on = f"{_softplus(f'{v_gs} {signed(-v_th)}', w)} {signed(-scalar(softplus(-v_th, w)))}"
    return f"{expression} + {number(scalar(t.c_ch) / unit)} * ({turned_on})"


def channel_current(c: Channel, v_gs: str, v_ds: str) -> str:
    """Current of the inner channel from drain to source.

    The difference of squares is written as a product, so that no digits are lost where both are nearly equal. What
    alpha takes from the overdrive is written so that the slope at VDS = 0 is right whatever slope a simulator gives
    max there.

    Parameters
    ----------
    c : Channel
        With numbers, no arrays, for parameters.
    v_gs, v_ds : str
        The inner voltages in n-channel polarity [V].

    Returns
    -------
    str
        The current [A].
    """
    v_th, w, lam, more = (scalar(x) for x in (c.v_th, c.w, c.lam, np.asarray(c.alpha) - 1.0))
    at_source = at_drain = ""
    if more != 0.0:
        at_source = f" {signed(-more)} * (max({v_ds}, 0) - {v_ds})"
        at_drain = f" {signed(-more)} * max({v_ds}, 0)"
    source_side = _softplus(f"{v_gs} {signed(-v_th)}{at_source}", w)
    drain_side = _softplus(f"{v_gs} - {v_ds} {signed(-v_th)}{at_drain}", w)
    current = f"{number(0.5 * scalar(c.k))} * ({source_side} - {drain_side}) * ({source_side} + {drain_side})"
    if lam < _NO_MODULATION:
        return current
    return f"{current} * (1 + {number(lam)} * abs({v_ds}))"
