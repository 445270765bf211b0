"""Prints how far the fitted models lie from the physically built devices they were digitized from.

Run as ``python -m tests.benchmarks.accuracy [device ...]``.
"""

import sys
import tempfile
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))

import device_scenarios
import numpy as np
from digitization import write_part_folder

from fitter.fitting.fit import fit
from fitter.gate_charge import OperatingPoint, gate_charge_curve
from fitter.models.channel import gate_voltage
from fitter.models.transistor import Transistor
from fitter.part import Quantity
from fitter.reader import read_part

NAMES = [
    "trench_30v",
    "p_channel_40v",
    "shielded_80v",
    "shielded_150v",
    "planar_600v",
    "superjunction_650v",
    "silicon_carbide_750v",
    "silicon_carbide_1200v",
]
BASIC = {"ciss", "coss", "crss", "transfer", "gate_charge"}


def relative_rms(fitted, true):
    return float(np.sqrt(np.mean((fitted / true - 1) ** 2)))


def v_gs_at(transistor, i_d, v_ds):
    c = transistor.channel
    return gate_voltage(i_d, v_ds - i_d * (c.r_s + c.r_d), c) + i_d * c.r_s


def measure(device, part, seed, use):
    begin = time.perf_counter()
    result = fit(part, use_gate_charge=use)
    seconds = time.perf_counter() - begin
    t = Transistor.from_values(result.estimate.values)
    row = {"seconds": seconds}
    for q, true, fitted in (
        (Quantity.CISS, device.c_iss, t.c_iss),
        (Quantity.COSS, device.c_oss, t.c_oss),
        (Quantity.CRSS, device.c_rss, t.c_rss),
    ):
        x = part.curves_of(q)[0].x
        v = np.linspace(max(x[0], 1e-3), x[-1], 300)
        row[q.value] = 100 * relative_rms(fitted(v), true(v))
    gc = part.stated.gate_charge
    v_ds = part.curves_of(Quantity.TRANSFER)[0].v_ds
    i = np.linspace(0.1, 2.0, 60) * gc.i_d
    v_true = np.array([device_v_gs(device, x, v_ds) for x in i])
    d = v_gs_at(t, i, v_ds) - v_true
    row["dV mV"] = 1e3 * float(np.sqrt(np.mean(d**2)))
    row["dV %"] = 100 * float(np.sqrt(np.mean((d / v_true) ** 2)))
    worst = {}
    points = [(1.0, 1.0, 1.0), (0.6, 1, 1), (1.4, 1, 1), (1, 0.4, 1), (1, 1.6, 1), (1, 1, 1.2)]
    for a, b, c in points:
        where = {"v_dd": a * gc.v_dd, "i_d": b * gc.i_d, "v_gs": c * gc.v_gs}
        true = device.read_gate_charge(**where, load=gc.load)
        r = gate_charge_curve(t, OperatingPoint(**where, load=gc.load)).reading
        e = {
            "QG": 100 * (r.total / true.q_g - 1),
            "QGS": 100 * (r.q_gs / true.q_gs - 1),
            "QGD": 100 * (r.q_gd / true.q_gd - 1),
            "Vpl mV": 1e3 * (r.v_plateau - true.v_plateau),
        }
        for n, x in e.items():
            worst.setdefault(n, []).append(float(x))
    row |= worst
    row["forms"] = [t.shields for t in result.trials if t.chosen]
    row["out"] = len(result.outliers)
    row["bound"] = result.on_bound
    return row


def device_v_gs(device, i, v_ds):
    from scipy.optimize import brentq

    return brentq(lambda v: float(device.drain_current(v, v_ds)) - i, 0, 30)


if __name__ == "__main__":
    wanted = sys.argv[1:] or NAMES
    for name in wanted:
        device = getattr(device_scenarios, name)()
        for use in (False, True):
            for basic in (True, False):
                for seed in range(2):
                    with tempfile.TemporaryDirectory() as d:
                        part = read_part(write_part_folder(device, Path(d), seed, include=BASIC if basic else None))
                        r = measure(device, part, seed, use)
                    text = {
                        k: (
                            [round(x, 1) for x in v]
                            if isinstance(v, list)
                            else round(v, 2)
                            if isinstance(v, float)
                            else v
                        )
                        for k, v in r.items()
                    }
                    print(name, "basic" if basic else "all", use, seed, text, flush=True)
