"""A clamped inductive double pulse: the circuit, and when what happens in it."""

from dataclasses import dataclass

import numpy as np

#: Inductance of the loop that commutates [H]. Right across the load's large inductance, a free-wheel diode turns the
#: rounding noise of L I/h volts (h the time step) into microamperes, and where the supply's current passes through zero
#: a run may stop, with any transistor; real loops have some nanohenries. A resistor of L/0.5 ns beside them damps.
LOOP, DAMPED = 5e-9, 5e-10


@dataclass(frozen=True)
class DoublePulse:
    """A deck, and the times [s] at its pulses: the first ends at `t_on`, then `gap`, the second, and another `gap`."""

    deck: str
    t_on: float
    gap: float
    end: float


def double_pulse(model, r_gate, *, loop=LOOP):
    """Switch the gate-charge test's load current twice, between resistors of the gate drive.

    Parameters
    ----------
    model : FittedModel
        Its subcircuit lies in ``part.lib``.
    r_gate : float
        External gate resistance [ohm].
    loop : float
        Inductance of the free-wheel diode's leg [H]; none where 0.

    Returns
    -------
    DoublePulse
    """
    s, p = model.sign, model.test_point()
    switch = max((r_gate + (model.part.package.r_g or 0.0)) * 40 * float(model.ciss(s * p.v_dd)), 0.3e-6)
    t_on, gap = 20 * switch, 6 * switch
    inductance = p.v_dd * t_on / p.i_d
    # Two pulses: the first one brings the inductor to the load's current, the second one switches that current.
    times = [0, 1e-8, t_on, t_on + 1e-8, t_on + gap, t_on + gap + 1e-8, t_on + 2 * gap, t_on + 2 * gap + 1e-8]
    levels = [0, 1, 1, 0, 0, 1, 1, 0]
    pulses = " ".join(f"{t + 1e-7:.9g} {s * p.v_gs * x:.6g}" for t, x in zip(times, levels, strict=True))
    end = times[-1] + gap
    anode, cathode = ("d", "clamp") if s > 0 else ("clamp", "d")
    leg = f"Lloop clamp vdd {loop}\nRloop clamp vdd {loop / DAMPED}\n" if loop else "Vloop clamp vdd 0\n"
    deck = (
        "test\n.include part.lib\n.options ABSTOL=1e-9\n.model wheel D(IS=1e-12 RS=2m CJO=200p)\n"
        f"Vdd vdd 0 {s * p.v_dd}\nLload vdd d {inductance} IC=0\nDwheel {anode} {cathode} wheel\n{leg}"
        f"Vdrive in 0 PWL(0 0 {pulses})\nRgate in g {r_gate}\nX1 d g 0 {model.part.name}\n"
        f".tran {switch / 20} {end}\n"
    )
    return DoublePulse(deck=deck, t_on=t_on, gap=gap, end=end)


def switched(model, pulse, rows):
    """What of a run went as it should, by name.

    Parameters
    ----------
    model : FittedModel
        The transistor.
    pulse : DoublePulse
        What was run.
    rows : ndarray, shape (n, 3)
        Time [s], VDS [V], current of the load [A].

    Returns
    -------
    dict of str to bool
    """
    s, p = model.sign, model.test_point()
    time, v_d, i_l = rows[:, 0], s * rows[:, 1], s * rows[:, 2]
    on, off = 0.25 * p.v_dd + 2.0, 0.9 * p.v_dd

    def v_ds(share, begin):
        return np.interp(begin + share * pulse.gap, time, v_d)

    return {
        "ran to the end": abs(time[-1] / pulse.end - 1.0) < 1e-6,
        "carries the load's current": abs(np.interp(pulse.t_on, time, i_l) / p.i_d - 1.0) < 0.15,
        "is on": np.interp(pulse.t_on, time, v_d) < on,
        "is off, the free-wheel diode carries the current": v_ds(0.9, pulse.t_on) > off,
        "is on again": v_ds(1.9, pulse.t_on) < on,
        "is off at the end": np.interp(pulse.end, time, v_d) > off,
    }
