"""Physically built devices, digitized with reading errors: the fitted models against what the devices really do.

Three of them, once each; ``tests/benchmarks/accuracy.py`` is the whole sweep. The bars are twice what a careful
digitization should give: 4 % of a capacitance, the larger of 50 mV and 2 % of a gate voltage, and with the gate charge
fitted 1.5, 5 and 7 % of QG, QGS and QGD.
"""

import tempfile
from functools import cache
from pathlib import Path

import device_scenarios
import numpy as np
import pytest
from digitization import write_part_folder

from fitter.part import Quantity
from fitter.pipeline import fit_part
from fitter.reader import read_part

BASIC = {"ciss", "coss", "crss", "transfer", "gate_charge"}
DEVICES = ("trench_30v", "superjunction_650v", "silicon_carbide_1200v")
TWICE = 2.0
#: Root mean square of the relative error; a superjunction part's Coss and Crss fall by three decades.
CAPACITANCE_BARS = {"superjunction_650v": {"ciss": 0.04, "coss": 0.10, "crss": 0.10}}
GATE_CHARGE_BARS = {"total": 0.015, "q_gs": 0.05, "q_gd": 0.07}


def device_of(name):
    return getattr(device_scenarios, name)()


@cache
def part_of(name):
    """Its basic curves and its table values, clicked once."""
    with tempfile.TemporaryDirectory() as folder:
        return read_part(write_part_folder(device_of(name), Path(folder), seed=0, include=BASIC))


@cache
def model_of(name, use_gate_charge):
    return fit_part(part_of(name), use_gate_charge=use_gate_charge)


def rms(x):
    return float(np.sqrt(np.mean(np.square(x))))


def condition_of(name):
    """VDD, ID and final VGS of the stated gate-charge test."""
    stated = part_of(name).stated.gate_charge
    return stated.v_dd, stated.i_d, stated.v_gs


@pytest.mark.parametrize("quantity", ["ciss", "coss", "crss"])
@pytest.mark.parametrize("name", DEVICES)
def test_capacitance_over_its_digitized_range(name, quantity):
    device, model = device_of(name), model_of(name, False)
    (curve,) = part_of(name).curves_of(Quantity(quantity))
    v = np.linspace(max(curve.x[0], 1e-3), curve.x[-1], 300)
    true = getattr(device, f"c_{quantity[1:]}")(v)
    bar = CAPACITANCE_BARS.get(name, {}).get(quantity, 0.04)
    assert rms(getattr(model, quantity)(model.sign * v) / true - 1.0) <= TWICE * bar


@pytest.mark.parametrize("name", DEVICES)
def test_gate_voltage_of_the_transfer_curve(name):
    """From a tenth of the gate-charge test's current to twice that."""
    device, model = device_of(name), model_of(name, False)
    curve = part_of(name).curves_of(Quantity.TRANSFER)[0]  # at 25 C
    i_d = np.linspace(0.1, 2.0, 60) * condition_of(name)[1]
    v = np.linspace(0.0, model.part.v_gs_max, 2001)
    true = np.interp(i_d, device.drain_current(v, curve.v_ds), v)
    fitted = np.interp(i_d, model.sign * model.drain_current(model.sign * v, model.sign * curve.v_ds), v)
    off = fitted - true
    assert rms(off) <= TWICE * 0.05 or rms(off / true) <= TWICE * 0.02


@pytest.mark.parametrize("name", DEVICES)
def test_fitted_gate_charge(name):
    true = device_of(name).read_gate_charge(*condition_of(name))
    found = model_of(name, True).gate_charge(*condition_of(name))
    for (quantity, bar), value in zip(GATE_CHARGE_BARS.items(), (true.q_g, true.q_gs, true.q_gd), strict=True):
        assert getattr(found, quantity) == pytest.approx(value, rel=TWICE * bar), quantity


@pytest.mark.parametrize("use_gate_charge", [False, True])
@pytest.mark.parametrize("name", DEVICES)
def test_plateau(name, use_gate_charge):
    true = device_of(name).read_gate_charge(*condition_of(name)).v_plateau
    found = model_of(name, use_gate_charge).gate_charge(*condition_of(name)).v_plateau
    assert abs(abs(found) - true) <= TWICE * max(0.05, 0.02 * true)


@pytest.mark.parametrize("name", DEVICES)
def test_interval_of_the_predicted_gate_charge_holds_the_true_one(name):
    true = device_of(name).read_gate_charge(*condition_of(name)).q_g
    found = model_of(name, False).gate_charge_intervals(*condition_of(name))["qg"]
    assert found.low <= true <= found.high
