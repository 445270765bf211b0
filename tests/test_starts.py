"""Start values hardly matter: fits from starts that are off by up to a factor of three end in the same minimum.

The small study is one part and few fits; the whole one, of which ``tests/benchmarks/starts.py`` prints the table, is
marked ``slow`` and takes some minutes.
"""

from __future__ import annotations

import numpy as np
import pytest
from benchmarks.starts import DEMOS, End, excess, fit_from_kicked_starts, study, verdict
from conftest import DEMO_PARTS

from fitter.fitting.fit import fit
from fitter.fitting.start_values import sized
from fitter.models.capacitance import Junction, Shield, capacitance
from fitter.reader import read_part

NAME = "camper_van_p40v"
FEW, MANY, SAME_OF_MANY = 6, 100, 98


@pytest.fixture(scope="module")
def part():
    return read_part(DEMOS / NAME)


@pytest.fixture(scope="module")
def reference(part):
    return fit(part)


def test_few_fits_from_kicked_starts_end_in_the_same_minimum(reference, part):
    ends = [End.of(fit_from_kicked_starts(part, seed, use_gate_charge=False)) for seed in range(FEW)]
    assert [verdict(reference, end) for end in ends] == ["same"] * FEW


def test_starts_are_kicked_and_another_minimum_is_told_from_the_same(reference, part):
    again = fit_from_kicked_starts(part, 0, use_gate_charge=False)
    assert again.solution.coordinates.tolist() != reference.solution.coordinates.tolist()
    assert excess(reference, reference.solution.values) == pytest.approx(0.0, abs=1e-9)
    other = End.of(reference)
    other.values["v_th"] = 1.1 * other.values["v_th"]
    assert verdict(reference, other).startswith("chi-squared +")


@pytest.mark.parametrize("factor", (1e-3, 1.0, 1e3))
def test_sizes_of_a_start_follow_from_the_points(factor):
    v = np.geomspace(0.1, 100.0, 40)
    shields = (Shield(s=0.7, v=30.0, w=0.1), Shield(s=0.5, v=5.0, w=0.2))
    c = capacitance(v, Junction(c_0=2e-9, phi=0.7, m=0.5, c_f=3e-11, shields=shields))
    right = {"phi": 0.7, "m": 0.5, "v_1": 30.0, "w_1": 0.1, "v_2": 5.0, "w_2": 0.2}
    wrong = {**right, "v_1": 50.0, "phi": 3.0}
    unsized = {"c_0": factor * 1e-9, "c_f": factor * 1e-11, "s_1": 3.0, "s_2": 0.01}
    first, second = sized([{**wrong, **unsized}, {**right, **unsized}], v, c)
    assert first["phi"] == 0.7
    assert second["phi"] == 3.0
    found = Junction(
        c_0=first["c_0"], phi=0.7, m=0.5, c_f=first["c_f"],
        shields=(Shield(s=first["s_1"], v=30.0, w=0.1), Shield(s=first["s_2"], v=5.0, w=0.2)),
    )  # fmt: skip
    np.testing.assert_allclose(capacitance(v, found), c, rtol=0.1)


@pytest.mark.slow
@pytest.mark.parametrize("name", DEMO_PARTS)
def test_nearly_all_of_many_fits_from_kicked_starts_end_in_the_same_minimum(name):
    verdicts = study(name, MANY, workers=2)
    assert verdicts["same"] >= SAME_OF_MANY, verdicts
