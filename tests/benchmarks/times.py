"""Prints how long things take, each as a figure and as a ratio to something everyone can judge.

Run as ``python tests/benchmarks/times.py [demo part]``. Machines are shared and noisy: of several runs the shortest
counts, and a ratio says more than a figure.
"""

import os
import shutil
import subprocess
import sys
import tempfile
import time
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(Path(__file__).parents[1]))

NGSPICE_DECK = """gate charge
.include part.lib
.options ABSTOL=1e-9
.model clamp D(IS=1e-9 N=0.1)
Vdd vdd 0 {v_dd}
Iload vdd d {i_d}
Dclamp d vdd clamp
Ig 0 g PULSE(0 {i_g} {start} 1n 1n 1 2)
Rleak g 0 1e9
X1 d g 0 {name}
.tran {step} {end} 0 {step}
.control
run
quit
.endc
.end
"""


def shortest(function, runs):
    times = []
    for _ in range(runs):
        begin = time.perf_counter()
        function()
        times.append(time.perf_counter() - begin)
    return min(times)


def command(*arguments, runs=5):
    call = [sys.executable, *arguments]
    return shortest(lambda: subprocess.run(call, cwd=ROOT, check=True, capture_output=True), runs)


def show(what, seconds, ratio, to):
    print(f"{what:58s} {1e3 * seconds:9.1f} ms   {ratio:8.3g} times {to}")


def ngspice_gate_charge(model, point, total, folder):
    (folder / "part.lib").write_text(model.subcircuit(), encoding="ascii")
    i_g = 1e-3
    duration = total / i_g
    deck = NGSPICE_DECK.format(
        v_dd=point.v_dd, i_d=point.i_d, i_g=i_g, name=model.part.name, start=duration / 50, step=duration / 1000,
        end=duration * 1.02,
    )  # fmt: skip
    (folder / "deck.cir").write_text(deck, encoding="ascii")
    call = ["ngspice", "-b", "deck.cir"]
    return shortest(lambda: subprocess.run(call, cwd=folder, capture_output=True, check=False), 3)


def main(name="cargo_80v"):
    bare = command("-c", "pass")
    heavy = command("-c", "import lmfit, matplotlib.figure, pandas")
    help_text = command("-m", "fitter", "--help")
    show("fetwright --help", help_text, help_text / bare, "a bare interpreter")
    folder = ROOT / "digitized_curves" / name
    check = command("-m", "fitter", "check", str(folder), runs=3)
    show(f"fetwright check {name}", check, check / heavy, "importing lmfit, matplotlib, pandas")
    with tempfile.TemporaryDirectory() as out:
        fit_all = command("-m", "fitter", "fit", str(folder), "--out", out + "/model", runs=3)
    show(f"fetwright fit {name}", fit_all, fit_all / heavy, "importing lmfit, matplotlib, pandas")
    print(f"{'':58s} {1e3 * (fit_all - heavy):9.1f} ms   more than those imports")

    from fitter.fitting.fit import fit
    from fitter.pipeline import fit_part
    from fitter.reader import read_part

    part = read_part(folder)
    for use in (False, True):
        seconds = shortest(lambda use=use: fit(part, use_gate_charge=use), 3)
        what = "fit of one part, with gate charge" if use else "fit of one part"
        show(what, seconds, seconds / heavy, "importing lmfit, matplotlib, pandas")
    model = fit_part(part, use_gate_charge=True)
    point = model.test_point()
    s = model.sign
    curve = model.gate_charge(s * point.v_dd, s * point.i_d, s * point.v_gs, point.load)
    one = shortest(lambda: model.gate_charge(s * point.v_dd, s * point.i_d, s * point.v_gs, point.load), 30)
    if shutil.which("ngspice") and s > 0:
        with tempfile.TemporaryDirectory() as work:
            simulated = ngspice_gate_charge(model, point, curve.total, Path(work))
        show("gate-charge curve of 300 points", one, one / simulated, "the same test in ngspice")
    else:
        show("gate-charge curve of 300 points", one, one / heavy, "importing lmfit, matplotlib, pandas")


if __name__ == "__main__":
    main(*sys.argv[1:])
