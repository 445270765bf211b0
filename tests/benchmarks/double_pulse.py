"""Prints how many clamped inductive double pulses ngspice runs to their end, for both forms of the subcircuit.

Run as ``python tests/benchmarks/double_pulse.py [--count 30] [--no-loop] [demo part ...]``. Each part is fitted without
and with its gate charge, and switched by that many gate resistors from 0.5 to 100 ohm. Beside the two forms stands a
level-1 transistor with constant capacitances behind the same leads: what stops that one is the circuit. With
``--no-loop`` the free-wheel diode lies right across the load's inductance.
"""

import argparse
import os
import subprocess
import sys
import tempfile
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).parents[1]))

import numpy as np
from double_pulse_circuit import LOOP, double_pulse, switched
from simulators import ngspice

from fitter.pipeline import fit_part
from fitter.reader import read_part
from fitter.writers.elements import element_subcircuit
from fitter.writers.netlist import subcircuit

DEMOS = Path(__file__).resolve().parents[2] / "digitized_curves"
PARTS = ("cargo_80v", "wall_box_650v", "ferry_charger_1200v", "camper_van_p40v")


def level_1(model):
    """The subcircuit with a level-1 transistor and constant capacitances in the place of channel, charges and diode."""
    text, v, v_dd, kind = subcircuit(model), model.estimate.values, model.test_point().v_dd, "PN"[model.sign > 0]
    begin = text.index("GCH ")
    lines = {
        line.split()[0]: line.split()[1:3][:: int(model.sign)] for line in text[begin:].splitlines() if line[:1] in "GF"
    }
    (drain, source), (gate, _) = lines["GCH"], lines["FQGS"]
    c_rss, c_iss, c_oss = (float(c(model.sign * v_dd)) for c in (model.crss, model.ciss, model.coss))
    core = (
        f"M1 {drain} {gate} {source} {source} square\n"
        f".MODEL square {kind}MOS(LEVEL=1 VTO={model.sign * float(v['v_th'])} KP={float(v['k'])})\n"
        f"CGD {drain} {gate} {c_rss}\nCGS {gate} {source} {c_iss - c_rss}\nCDS {drain} {source} {c_oss - c_rss}\n"
    )
    return text[:begin] + core + text[text.index(".ENDS") :]


FORMS = {"expressions": subcircuit, "elements": element_subcircuit, "level 1": level_1}


def run(job):
    """Whether one double pulse went as it should."""
    model, text, r_gate, loop = job
    pulse = double_pulse(model, r_gate, loop=loop)
    with tempfile.TemporaryDirectory() as folder:
        (Path(folder) / "part.lib").write_text(text, encoding="ascii")
        try:
            rows = ngspice(pulse.deck, Path(folder), columns=["v(d)", "i(lload)"])
        except (AssertionError, subprocess.TimeoutExpired):
            return False
    return switched(model, pulse, rows)["ran to the end"]


def main():
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("parts", nargs="*", default=PARTS)
    parser.add_argument("--count", type=int, default=30)
    parser.add_argument("--no-loop", action="store_true")
    options = parser.parse_args()
    loop = 0.0 if options.no_loop else LOOP
    resistors = [float(f"{r:.5g}") for r in np.geomspace(0.5, 100.0, options.count)]
    print(f"{'':22s}" + "".join(f"{form:>16s}" for form in FORMS))
    for name in options.parts:
        part, line = read_part(DEMOS / name), f"{name:22s}"
        models = [fit_part(part, use_gate_charge=use) for use in (False, True)]
        for write in FORMS.values():
            jobs = [(model, text, r, loop) for model in models for text in [write(model)] for r in resistors]
            with ThreadPoolExecutor(os.cpu_count()) as pool:
                ended = list(pool.map(run, jobs))
            line += f"{sum(ended):9d} of {len(ended)}".rjust(16)
        print(line, flush=True)


if __name__ == "__main__":
    main()
