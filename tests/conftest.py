"""Fixtures that several test files share."""

from functools import cache
from pathlib import Path

import pytest

from fitter.pipeline import fit_part
from fitter.reader import read_part

ROOT = Path(__file__).resolve().parents[1]
DEMO_PARTS = ("cargo_80v", "wall_box_650v", "ferry_charger_1200v", "camper_van_p40v")


@cache
def _fitted(name, use_gate_charge):
    return fit_part(read_part(ROOT / "digitized_curves" / name), use_gate_charge=use_gate_charge)


@pytest.fixture(scope="session")
def fitted():
    """``fitted(name, use_gate_charge=False)``: the model of a demo part, fitted once."""
    return lambda name, use_gate_charge=False: _fitted(name, use_gate_charge)


@pytest.fixture(scope="session", params=DEMO_PARTS)
def demo(request):
    """Name of each demo part in turn."""
    return request.param


@pytest.fixture(scope="session")
def demo_folder(demo):
    """Folder of each demo part in turn."""
    return ROOT / "digitized_curves" / demo
