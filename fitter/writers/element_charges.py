"""Charges from elements with constant values: splits, bends, and junctions as the depletion charge of diodes.

`element_laws` says what these circuits do. Controlled sources drive them, so that they load nothing; the current of a
charge goes through a zero-volt source, and a current-controlled source returns it between the real nodes.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fitter.models.capacitance import Junction, Shield
from fitter.models.smooth import softplus
from fitter.models.transistor import Transistor
from fitter.writers.element_laws import (
    BEND_CURRENT,
    BEND_EMISSION,
    BEND_LIMIT,
    BEND_OFFSET,
    BEND_SHARE,
    BEND_SHIFT,
    SPLIT_BIAS,
    SPLIT_CURRENT,
    SPLIT_EMISSION,
    SPLIT_RESISTANCE,
)
from fitter.writers.netlist_frame import DELAY
from fitter.writers.netlist_text import comment, number, scalar, statement

__all__ = ["gate_source_charge", "junction_charge", "shared", "split"]

#: Models and nodes that all charges share. No model's name is that of an element.
_SPLIT, _BEND_IN, _BEND_OUT, _LIMIT = "splitlaw", "bendinlaw", "bendoutlaw", "limitlaw"
_BIAS_NODE, _LIMIT_NODE = "bias", "limit"
#: Highest voltage at a bend's first diode [V].
_HIGHEST = BEND_SHIFT + BEND_LIMIT + BEND_OFFSET
#: Saturation current of a limiting diode [A], behind the resistance of a split.
_LIMIT_CURRENT = 1e-9
#: Saturation current [A] and emission coefficient of a diode that is there for its depletion charge only: it must not
#: conduct even at the voltages that a simulator tries on its way to a solution.
_BLOCKING = "IS=1e-20 N=10000"

_Pair = tuple[str, str]


def shared() -> list[str]:
    """Models and sources that every charge uses."""
    n = number(BEND_EMISSION)
    return [
        comment("Splits at zero, bends, and what limits the voltage at a bend, as diodes"),
        statement(f".MODEL {_SPLIT} D(IS={number(SPLIT_CURRENT)} N={number(SPLIT_EMISSION)})"),
        statement(f".MODEL {_BEND_IN} D(IS={number(BEND_CURRENT * float(np.exp(-BEND_SHIFT)))} N={n})"),
        statement(f".MODEL {_BEND_OUT} D(IS={number(BEND_CURRENT)} N={n})"),
        statement(f".MODEL {_LIMIT} D(IS={number(_LIMIT_CURRENT)} N=1)"),
        f"VBIAS {_BIAS_NODE} 0 {number(SPLIT_BIAS)}",
        f"VLIMIT {_LIMIT_NODE} 0 {number(_HIGHEST)}",
    ]


def split(name: str, pair: _Pair) -> tuple[list[str], _Pair, _Pair]:
    """A voltage taken apart at zero.

    Parameters
    ----------
    name : str
        What its elements' names end in.
    pair : tuple of str
        The nodes between which the voltage is.

    Returns
    -------
    lines : list of str
        Statements.
    positive, negative : tuple of str
        Nodes between which its positive and its negative part are; they must not be loaded.
    """
    copy, clamped = f"c{name}".lower(), f"x{name}".lower()
    lines = [
        f"EC{name} {copy} 0 {pair[0]} {pair[1]} 1",
        f"RX{name} {copy} {clamped} {number(SPLIT_RESISTANCE)}",
        f"DX{name} {_BIAS_NODE} {clamped} {_SPLIT}",
    ]
    return lines, (clamped, "0"), (copy, clamped)


@dataclass(frozen=True)
class _Bend:
    """A bend: its elements, and the pairs of nodes whose voltages add up to sp(z; 1) and a constant."""

    lines: list[str]
    outputs: list[_Pair]


def _bend(name: str, pair: _Pair, at: float, width: float, highest: float) -> _Bend:
    """The softplus of z = (V - at)/width, where V is the voltage between a pair of nodes and z at most `highest`."""
    (driven, lifted, limited, buffered), n = (f"{letter}{name}".lower() for letter in "yztl"), name
    gain, offset = 1.0 / width, BEND_SHIFT + BEND_OFFSET - at / width
    lines = [
        f"EY{n} {driven} 0 {pair[0]} {pair[1]} {number(gain)}",
        f"VZ{n} {lifted} {driven} {number(offset)}",
    ]
    outputs = [(f"b{name}".lower(), "0")]
    source = lifted
    if highest > BEND_LIMIT:
        lines += [
            f"RT{n} {lifted} {limited} {number(SPLIT_RESISTANCE)}",
            f"DT{n} {limited} {_LIMIT_NODE} {_LIMIT}",
            f"EL{n} {buffered} 0 {limited} 0 1",
        ]
        outputs.append((lifted, limited))
        source = buffered
    sensed, bent = f"a{name}".lower(), outputs[0][0]
    lines += [
        f"DA{n} {source} {sensed} {_BEND_IN}",
        f"VA{n} {sensed} 0 0",
        f"FA{n} 0 {bent} VA{n} 1",
        f"GA{n} 0 {bent} {_LIMIT_NODE} 0 {number(BEND_SHARE * BEND_CURRENT / _HIGHEST)}",
        f"DB{n} {bent} 0 {_BEND_OUT}",
    ]
    return _Bend(lines, outputs)


def _sum(name: str, start: str, outputs: list[_Pair], factor: float) -> tuple[list[str], str]:
    """Sources that add a bend's outputs, times a factor, to the voltage of a node; and the node of the sum."""
    lines, below = [], start
    for step, (plus, minus) in enumerate(outputs if factor > 0.0 else [(b, a) for a, b in outputs]):
        node = f"{'uv'[step]}{name}".lower()
        lines.append(f"E{'UV'[step]}{name} {node} {below} {plus} {minus} {number(abs(factor))}")
        below = node
    return lines, below


def _shielded(name: str, v: str, shield: Shield, unit: float) -> tuple[list[str], str]:
    """U = sp(Vs; ws) - sp(Vs-V; ws) of a node's voltage V >= 0, as a node's voltage in a unit [V]."""
    v_s, w = scalar(shield.v), scalar(shield.width)
    start = f"w{name}".lower()
    # z = (Vs - V)/ws = (V(0,v) + Vs)/ws
    bend = _bend(name, ("0", v), -v_s, w, v_s / w)
    chain, node = _sum(name, start, bend.outputs, -w / unit)
    constant = (scalar(softplus(v_s, w)) + w * BEND_OFFSET) / unit
    return [*bend.lines, f"VW{name} {start} 0 {number(constant)}", *chain], node


def _depletion(name: str, pair: _Pair, j: Junction, share: float) -> list[str]:
    """The depletion charge of a share of a junction between two nodes, as that of a diode.

    The voltage is in units of the built-in potential, for simulators limit that to what silicon has. The share is in
    the model's capacitance, not in an area factor, which simulators do not read alike.
    """
    card = f"{name}junction".lower()
    c_0, m = number(share * scalar(j.c_0) * scalar(j.phi)), number(scalar(j.m))
    return [
        statement(f".MODEL {card} D({_BLOCKING} CJO={c_0} VJ=1 M={m})"),
        f"DJ{name} {pair[1]} {pair[0]} {card}",
    ]


def _return(name: str, sensed: str, pair: _Pair, largest: float) -> list[str]:
    """The current into a node, slowed down by `DELAY` at the largest capacitance to it [F], between the real nodes."""
    node = f"i{name}".lower()
    return [
        f"RQ{name} {sensed} {node} {number(DELAY / largest)}",
        f"VQ{name} {node} 0 0",
        f"FQ{name} {pair[0]} {pair[1]} VQ{name} 1",
    ]


def junction_charge(name: str, pair: _Pair, j: Junction, c_below: float) -> list[str]:
    """A charge that is a junction's above 0 V and that of a constant capacitance below.

    Parameters
    ----------
    name : str
        What its elements' names end in.
    pair : tuple of str
        The real nodes, in n-channel polarity.
    j : Junction
        With numbers, no arrays, for parameters.
    c_below : float
        Capacitance below 0 V [F].

    Returns
    -------
    list of str
        Statements.
    """
    above, below, sensed = (f"{letter}{name}".lower() for letter in "pns")
    lines, positive, negative = split(name, pair)
    lines += [
        f"EP{name} {above} 0 {positive[0]} {positive[1]} 1",
        f"EN{name} {below} 0 {negative[0]} {negative[1]} 1",
        f"CN{name} {below} {sensed} {number(c_below)}",
    ]
    if scalar(j.c_f) > 0.0:
        lines.append(f"CF{name} {above} {sensed} {number(scalar(j.c_f))}")
    if j.rise is not None and scalar(j.rise.c) > 0.0:
        width = scalar(j.rise.width)
        bend = _bend(f"{name}R", (above, "0"), scalar(j.rise.v), width, float(np.inf))
        chain, node = _sum(f"{name}R", "0", bend.outputs, width)
        lines += [*bend.lines, *chain, f"CR{name} {node} {sensed} {number(scalar(j.rise.c))}"]
    rest, phi = 1.0, scalar(j.phi)
    for k, shield in enumerate(j.shields, start=1):
        share = rest * scalar(shield.s)
        rest *= 1.0 - scalar(shield.s)
        if share > 0.0:
            held, node = _shielded(f"{name}{k}", above, shield, phi)
            lines += [*held, *_depletion(f"{name}{k}", (node, sensed), j, share)]
    if rest > 0.0:
        node = f"h{name}".lower()
        lines += [f"EH{name} {node} 0 {above} 0 {number(1.0 / phi)}", *_depletion(name, (node, sensed), j, rest)]
    return lines + _return(name, sensed, pair, max(scalar(j.c_0) * phi + scalar(j.c_f), c_below))


def gate_source_charge(name: str, pair: _Pair, t: Transistor) -> list[str]:
    """The gate-source charge; see `junction_charge`. Its constant part is a capacitor between the real nodes."""
    c_body, c_ch, v_th, w = scalar(t.gate_body.c_0), scalar(t.c_ch), scalar(t.channel.v_th), scalar(t.channel.w)
    lines = [f"C{name} {pair[0]} {pair[1]} {number(scalar(t.c_gs) - c_body)}"]
    if c_body > 0.0:
        lines += junction_charge(f"{name}B", pair, t.gate_body, c_body)
    if c_ch <= 0.0:
        return lines
    bend = _bend(name, pair, v_th, w, float(np.inf))
    chain, node = _sum(name, "0", bend.outputs, w)
    sensed = f"s{name}".lower()
    return [*lines, *bend.lines, *chain, f"CC{name} {node} {sensed} {number(c_ch)}", *_return(name, sensed, pair, c_ch)]
