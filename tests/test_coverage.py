"""Intervals that say 95 % hold the truth about so often: on demo parts clicked again, the fitted model being the truth.

The small study is one part and few clicks; the whole one, of which ``tests/benchmarks/coverage.py`` prints the table,
is marked ``slow`` and takes some minutes.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from benchmarks.coverage import one
from conftest import DEMO_PARTS
from redigitize import inside

NAME = "camper_van_p40v"
FEW, MANY = 12, 60
FIGURES = ("qg", "qgs", "qgd", "v_plateau", "qoss", "eoss")
#: The small study does without the hot curves and the body diode.
CURVES = ("ciss", "coss", "crss", "transfer 25 C", "output 4 V", "output 10 V", "gate charge")


def study(part, values, count):
    """For each re-digitization: by name, truth, estimate, ends of the interval, standard error."""
    return [one((part, values, set(values), seed)) for seed in range(count)]


def held(rows):
    """Whether each interval holds the truth."""
    return np.array([low <= true <= high for true, _, low, high, _ in rows])


def pulls(rows):
    """Errors in units of the standard error that was promised."""
    return np.array([(estimate - true) / sigma for true, estimate, _, _, sigma in rows])


def rms(x):
    return float(np.sqrt(np.mean(np.square(x))))


@pytest.fixture(scope="module")
def few(fitted):
    model = fitted(NAME, use_gate_charge=True)
    curves = tuple(c for c in model.part.curves if c.name in CURVES)
    return study(replace(model.part, curves=curves), inside(model.estimate.values), FEW)


def test_every_re_digitization_can_be_fitted(few):
    assert len(few) == FEW
    assert all(set(FIGURES) <= set(rows) for rows in few)


def test_nearly_every_parameter_is_tested(few):
    names = {name for rows in few for name in rows} - set(FIGURES)
    assert {"c_gs", "c_ch", "c_acc", "c0_gd", "c0_ds", "v_th", "k", "lambda", "r_s", "r_d"} <= names


def test_intervals_hold_the_truth_about_as_often_as_they_say(few):
    share = np.mean(held([row for rows in few for row in rows.values()]))
    assert 0.85 <= share <= 1.0


@pytest.mark.parametrize("figure", FIGURES)
def test_errors_of_a_figure_are_as_large_as_promised(few, figure):
    assert rms(pulls([rows[figure] for rows in few])) < 1.5


def test_intervals_are_not_far_too_wide(few):
    # Twelve clicks of more than ten parameters: were the intervals three times too wide, this would be a third.
    assert rms(pulls([row for rows in few for row in rows.values()])) > 0.6


@pytest.mark.slow
@pytest.mark.parametrize("name", DEMO_PARTS)
def test_intervals_of_many_re_digitizations_hold_the_truth(fitted, name):
    model = fitted(name, use_gate_charge=True)
    many = study(model.part, inside(model.estimate.values), MANY)
    share = np.mean(held([row for rows in many for row in rows.values()]))
    figures = {figure: rms(pulls([rows[figure] for rows in many])) for figure in FIGURES}
    assert 0.90 <= share <= 0.99
    assert {figure: pull for figure, pull in figures.items() if not 0.5 < pull < 1.3} == {}
