"""Prints how far hot curves, output curves and the body diode lie from the physically built devices.

Run as ``python tests/benchmarks/hot.py [device ...]``. Everything that the devices' datasheets print is given.
"""

import os
import sys
import tempfile
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).parents[1]))

import device_scenarios
import numpy as np
from digitization import write_part_folder

from fitter.fitting.fit import fit
from fitter.models.channel import on_resistance, threshold_voltage
from fitter.models.diode import forward_voltage
from fitter.models.transistor import Transistor
from fitter.models.types import scalar
from fitter.part import Quantity
from fitter.reader import read_part

SEEDS = 2


def rms(x):
    return float(np.sqrt(np.mean(np.square(x))))


def measure(device, part):
    values = {name: scalar(x) for name, x in fit(part).estimate.values.items()}
    t = Transistor.from_values(values)
    rated = part.stated.gate_charge.i_d
    hot = max(c.t_j for c in part.curves_of(Quantity.TRANSFER) if c.t_j is not None)
    v_ds = part.curves_of(Quantity.TRANSFER)[0].v_ds
    row = {"hot [C]": hot}
    v_gs = np.linspace(1.0, part.v_gs_max, 200)
    true = np.array([device.drain_current(v, v_ds, hot) for v in v_gs])
    shown = (true > 0.1 * rated) & (true < 2.0 * rated)
    found = np.real(t.at(hot).i_d(v_gs[shown], v_ds))
    at_current = np.interp(true[shown], np.real(t.at(hot).i_d(v_gs, v_ds)), v_gs)
    row["transfer VGS %"] = 100 * rms(at_current / v_gs[shown] - 1)
    row["transfer ID %"] = 100 * rms(found / true[shown] - 1)
    on, th = part.stated.on_resistance, part.stated.threshold
    row["RDS(on) 150 C %"] = 100 * (
        scalar(on_resistance(on.i_d, on.v_gs, t.at(150.0).channel)) / device.r_ds_on(on.v_gs, on.i_d, 150.0) - 1
    )
    row["VGS(th) 150 C mV"] = 1e3 * (
        scalar(threshold_voltage(th.i_d, t.at(150.0).channel)) - device.v_gs_th(th.i_d, 150.0)
    )
    off = []
    for curve in part.curves_of(Quantity.OUTPUT):
        x = np.linspace(max(curve.x[0], 0.02), curve.x[-1], 40)
        true = np.array([device.drain_current(curve.v_gs, v) for v in x])
        inside = (true > 0.1 * rated) & (true < 2.0 * rated)
        off += list(np.real(t.i_d(curve.v_gs, x[inside])) / true[inside] - 1)
    row["output %"] = 100 * rms(off)
    i_s = np.geomspace(0.01, 1.0, 30) * part.stated.body_diode.i_s
    true = np.array([device.v_sd(i) for i in i_s])
    row["VSD mV"] = 1e3 * rms(np.real(forward_voltage(i_s, t.diode)) - true)
    return row


def main():
    for name in sys.argv[1:] or device_scenarios.ALL:
        device = device_scenarios.ALL[name]()
        for seed in range(SEEDS):
            with tempfile.TemporaryDirectory() as folder:
                row = measure(device, read_part(write_part_folder(device, Path(folder), seed)))
            print(name, seed, ", ".join(f"{what} {value:.3g}" for what, value in row.items()), flush=True)


if __name__ == "__main__":
    main()
