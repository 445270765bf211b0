"""What the data cannot tell: it is said, with what would tell it, and it never passes for being known."""

from __future__ import annotations

import math
import re
from dataclasses import replace

import numpy as np
import pytest
from conftest import ROOT

from fitter.fitting.blocks import ScalarBlock
from fitter.fitting.determination import OPEN, expected_shares, led_by_expectation, spreads, undetermined
from fitter.fitting.intervals import Estimate, standard_errors
from fitter.fitting.solve import Solution, solve
from fitter.fitting.space import ParameterSpace
from fitter.models.transistor import DEFINITIONS
from fitter.part import StatedValues
from fitter.pipeline import fit_part
from fitter.reader import read_part

#: Standard errors, as natural logarithms, whose 95 % intervals reach this factor either way.
FACTOR = {factor: math.log(factor) / 1.96 for factor in (1.1, 2.0, 5.0, 20.0, 1e6)}
#: Values of the parameters that every estimate needs.
PLAIN = {"r_s": 2e-3, "r_d": 1e-3}


def text_of(model, topic):
    (text,) = [notice.text for notice in model.notices if notice.topic == topic]
    return text


# Fits of little data


def with_curves(*names):
    part = read_part(ROOT / "digitized_curves" / "cargo_80v")
    return replace(part, curves=tuple(c for c in part.curves if c.name in names), stated=StatedValues())


@pytest.fixture(scope="module")
def lean():
    """Capacitances and one transfer curve, without a table."""
    return fit_part(with_curves("ciss", "coss", "crss", "transfer 25 C"))


@pytest.fixture(scope="module")
def sparse():
    """The same, but only the upper points of the transfer curve, far above threshold."""
    part = with_curves("ciss", "coss", "crss", "transfer 25 C")

    def cut(curve):
        keep = curve.y > 0.3 * curve.y.max()
        return replace(curve, x=curve.x[keep], y=curve.y[keep], lines=curve.lines[keep])

    return fit_part(replace(part, curves=tuple(cut(c) if c.name == "transfer 25 C" else c for c in part.curves)))


def test_without_on_resistance_and_output_curves_r_d_is_taken_as_nothing(lean):
    row = lean.parameters["r_d"]
    assert (row.value, row.origin, row.stderr) == (0.0, "assumed", None)


def test_a_notice_says_what_r_d_was_taken_as_and_what_would_tell(lean):
    text = text_of(lean, "r_d")
    assert "r_d is taken as 0" in text
    assert "the stated RDS(on)" in text
    assert "output curve at low VDS, would tell" in text


def test_with_on_resistance_and_output_curves_there_is_no_such_notice(fitted):
    model = fitted("cargo_80v", use_gate_charge=True)
    assert model.parameters["r_d"].origin == "fitted"
    assert [n.text for n in model.notices if "taken as 0" in n.text] == []


@pytest.mark.parametrize("name", ["c_ch", "c_acc"])
def test_without_the_gate_charge_what_no_curve_shows_is_assumed(lean, name):
    row = lean.parameters[name]
    assert row.origin == "assumed"
    assert "taken as" in row.note


@pytest.mark.parametrize("name", ["c_ch", "c_acc"])
def test_what_is_assumed_has_a_range_that_the_intervals_show(lean, name):
    row = lean.parameters[name]
    assert row.stderr > 0.1 * row.value


@pytest.mark.parametrize("name", ["c_ch", "c_acc"])
def test_with_the_gate_charge_it_is_fitted(fitted, name):
    assert fitted("cargo_80v", use_gate_charge=True).parameters[name].origin == "fitted"


def test_an_open_parameter_is_not_determined(sparse):
    row = sparse.parameters["w"]
    assert row.origin == "not determined"
    assert "factor of ten or more" in row.note


def test_exactly_the_parameters_that_are_open_are_not_determined(sparse):
    wide = {name for name, spread in spreads(sparse.estimate).items() if spread > OPEN}
    marked = {name for name, row in sparse.parameters.items() if "factor of ten" in row.note}
    assert marked
    assert marked == wide & {name for name, row in sparse.parameters.items() if row.origin != "fixed"}


def told(sigma_of_data, sigma_expected):
    """C0 of the gate-drain junction told by a datum and by an expectation, RD by a datum alone."""

    def block(name, stated, sigma, function, parameters):
        return ScalarBlock(name=name, parameters=parameters, stated=stated, sigma=sigma, function=function)

    c0 = DEFINITIONS["c0_gd"]
    space = ParameterSpace(free=(c0, DEFINITIONS["r_d"]), fixed={"r_s": 1e-3})
    blocks = [
        block("datum", -20.0, sigma_of_data, lambda v: np.log(v["c0_gd"]), ("c0_gd",)),
        block("c0_gd (expected)", -20.0, sigma_expected, lambda v: np.log(v["c0_gd"]), ("c0_gd",)),
        block("other", 2e-3, 1e-4, lambda v: 2.0 * v["r_d"], ("r_d",)),
    ]
    solution = solve(blocks, space, {"c0_gd": 3e-9, "r_d": 2e-3})
    estimate = Estimate(space=space, coordinates=solution.coordinates, covariance=solution.covariance)
    return solution, estimate


def test_an_expectation_as_sure_as_the_datum_gives_half_of_what_is_known():
    shares = expected_shares(told(0.8, 0.8)[0])
    assert shares == pytest.approx({"c0_gd": 0.5, "r_d": 0.0}, abs=1e-9)


def test_an_expectation_half_as_sure_as_the_datum_gives_a_fifth():
    assert expected_shares(told(0.4, 0.8)[0])["c0_gd"] == pytest.approx(1.0 / (1.0 + 4.0))


def test_an_expectation_leads_only_what_is_loosely_known():
    assert led_by_expectation(*told(0.8, 0.8)) == {"c0_gd"}
    assert led_by_expectation(*told(0.08, 0.08)) == set()
    assert led_by_expectation(*told(0.4, 0.8)) == set()


def test_what_an_expectation_leads_is_not_determined(fitted):
    row = fitted("cargo_80v", use_gate_charge=True).parameters["phi_gd"]
    assert row.origin == "not determined"
    assert row.note == "what is expected of it tells as much as the data"
    assert row.stderr > 0.3 * row.value


@pytest.mark.parametrize(
    "name, remedy",
    [
        ("w", "transfer points below threshold, on a log axis, or the stated VGS(th)"),
        ("v_th", "transfer points at small currents"),
        ("r_s", "an output curve at low VDS"),
        ("cf_ds", "points of coss at higher VDS"),
    ],
)
def test_the_notice_names_what_would_tell_an_open_parameter(sparse, name, remedy):
    assert sparse.parameters[name].origin == "not determined"
    texts = [
        n.text for n in sparse.notices if " open " in n.text and name in re.split(r"[ ,:]+", n.text.partition(";")[0])
    ]
    assert len(texts) == 1
    assert remedy in texts[0]


def test_what_would_tell_does_tell(sparse, lean):
    # The points below threshold that the notice asks for.
    assert lean.parameters["w"].origin == "fitted"
    assert spreads(lean.estimate)["w"] < 0.5 * spreads(sparse.estimate)["w"]


def test_what_is_well_known_is_in_no_notice(lean):
    said = " ".join(n.text.partition(" open ")[0] for n in lean.notices if " open " in n.text)
    assert "v_th" not in said
    assert "c_gs" not in said


# Estimates made by hand


def estimate(sigmas, correlations=(), values=None):
    """Parameters with standard errors (in coordinates) and correlations; the others are as in `PLAIN`."""
    free = tuple(DEFINITIONS[name] for name in sigmas)
    at = {d.name: 1e-9 if d.unit == "F" else d.typical for d in free} | {
        name: value for name, value in PLAIN.items() if name in sigmas
    }
    at |= values or {}
    space = ParameterSpace(free=free, fixed={name: v for name, v in PLAIN.items() if name not in sigmas})
    sigma = np.array(list(sigmas.values()))
    matrix = np.eye(sigma.size)
    for (a, b), r in dict(correlations).items():
        i, j = (space.names.index(name) for name in (a, b))
        matrix[i, j] = matrix[j, i] = r
    return Estimate(space=space, coordinates=space.coordinates(at), covariance=matrix * np.outer(sigma, sigma))


def found(sigmas, correlations=()):
    return undetermined(estimate(sigmas, correlations), tuple(sigmas))


def test_a_parameter_known_within_a_factor_of_two_is_in_no_notice():
    assert found({"c0_gd": FACTOR[2.0]}) == ()


def test_a_parameter_that_is_open_is_named_with_how_far():
    (one,) = found({"c0_gd": FACTOR[5.0], "m_gd": FACTOR[1.1]})
    assert one.names == ("c0_gd",)
    assert one.factors == pytest.approx((5.0,))
    assert one.text == "c0_gd is open within a factor of 5 either way; points of crss at lower VDS would tell"


def test_a_parameter_that_is_wide_open_is_said_to_be_so_by_orders_of_magnitude():
    (one,) = found({"c0_gd": FACTOR[1e6]})
    assert "c0_gd is open by orders of magnitude; " in one.text


def test_an_endless_variance_has_a_finite_factor():
    (one,) = found({"c0_gd": 1e6})
    assert math.isfinite(one.factors[0])


def test_two_loose_parameters_that_trade_off_are_one_combination():
    (one,) = found({"c0_gd": FACTOR[20.0], "phi_gd": FACTOR[5.0]}, {("c0_gd", "phi_gd"): 0.97})
    assert one.names == ("c0_gd", "phi_gd")
    assert one.factors == pytest.approx((20.0, 5.0))
    assert "c0_gd and phi_gd: only a combination of them is fixed" in one.text
    assert "within a factor of 20 either way" in one.text


def test_they_trade_off_with_either_sign():
    (one,) = found({"c0_gd": FACTOR[20.0], "phi_gd": FACTOR[5.0]}, {("c0_gd", "phi_gd"): -0.97})
    assert one.names == ("c0_gd", "phi_gd")


def test_a_combination_is_named_with_what_would_separate_it():
    (one,) = found({"c0_gd": FACTOR[5.0], "c0_ds": FACTOR[5.0]}, {("c0_gd", "c0_ds"): 0.95})
    assert one.text.endswith("points of crss at lower VDS or points of coss at lower VDS would separate them")


def test_what_would_separate_them_is_said_once():
    (one,) = found({"c0_gd": FACTOR[5.0], "phi_gd": FACTOR[5.0]}, {("c0_gd", "phi_gd"): 0.95})
    assert one.text.count("points of crss at lower VDS") == 1


def test_loose_parameters_that_do_not_trade_off_stand_alone():
    apart = found({"c0_gd": FACTOR[5.0], "c0_ds": FACTOR[5.0]}, {("c0_gd", "c0_ds"): 0.8})
    assert [one.names for one in apart] == [("c0_gd",), ("c0_ds",)]


def test_a_well_known_parameter_belongs_to_no_combination():
    (one,) = found({"c0_gd": FACTOR[5.0], "phi_gd": FACTOR[1.1]}, {("c0_gd", "phi_gd"): 0.97})
    assert one.names == ("c0_gd",)


def test_three_that_hang_together_in_a_chain_are_one_combination():
    loose = dict.fromkeys(("c0_gd", "phi_gd", "m_gd"), FACTOR[5.0])
    (one,) = found(loose, {("c0_gd", "phi_gd"): 0.95, ("phi_gd", "m_gd"): 0.95, ("c0_gd", "m_gd"): 0.85})
    assert one.names == ("c0_gd", "phi_gd", "m_gd")
    assert one.text.startswith("c0_gd, phi_gd and m_gd: ")


def test_of_the_two_resistances_the_sum_is_fixed():
    both = sum(PLAIN.values())
    sigma = {name: FACTOR[5.0] * both / DEFINITIONS[name].typical for name in PLAIN}
    (one,) = found(sigma, {("r_s", "r_d"): -0.97})
    assert one.names == ("r_s", "r_d")
    assert "r_s and r_d: only their sum is fixed" in one.text


def test_parameters_that_were_not_asked_for_are_not_looked_at():
    wide = estimate({"c0_gd": FACTOR[5.0], "c0_ds": FACTOR[5.0]})
    assert [one.names for one in undetermined(wide, ("c0_ds",))] == [("c0_ds",)]


def test_the_spread_of_a_logarithmic_parameter_is_its_own():
    assert spreads(estimate({"c0_gd": 0.3}))["c0_gd"] == pytest.approx(0.3)


def test_the_spread_of_a_resistance_is_relative_to_both():
    # One of them may well be nothing: then its own size says little.
    d = DEFINITIONS["r_d"]
    found = spreads(estimate({"r_d": 0.5e-3 / d.typical}, values={"r_d": 0.0}))
    assert found["r_d"] == pytest.approx(0.5e-3 / max(PLAIN["r_s"], d.typical))


# What a least-squares fit says of a direction that the data leave open


def solution(jacobian, on_bound=(False, False), residuals=None):
    """A fit's end; what is on a bound is on the upper one."""
    residuals = np.zeros(len(jacobian)) if residuals is None else np.array(residuals)
    space = ParameterSpace(free=(DEFINITIONS["c0_gd"], DEFINITIONS["c0_ds"]), fixed=PLAIN)
    return Solution(
        space=space, coordinates=space.coordinates({"c0_gd": 1e-9, "c0_ds": 1e-9}), blocks=(),
        residuals={"all": residuals},
        jacobian=np.array(jacobian, dtype=float), on_bound=np.array(on_bound), chi_square=0.0, cost=0.0, converged=True,
    )  # fmt: skip


def test_a_covariance_is_the_inverse_of_the_information():
    jacobian = np.array([[3.0, 1.0], [0.5, 20.0], [1.0, 1.0]])
    np.testing.assert_allclose(solution(jacobian).covariance, np.linalg.inv(jacobian.T @ jacobian), rtol=1e-9)


def test_a_parameter_on_which_no_residual_depends_has_a_huge_variance():
    covariance = solution([[3.0, 0.0], [4.0, 0.0]]).covariance
    assert covariance[1, 1] > 1e9
    assert covariance[0, 0] == pytest.approx(1.0 / 25.0)


def test_such_a_parameter_is_undetermined():
    open_one = solution([[3.0, 0.0], [4.0, 0.0]])
    made = Estimate(space=open_one.space, coordinates=open_one.coordinates, covariance=open_one.covariance)
    (one,) = undetermined(made, ("c0_gd", "c0_ds"))
    assert one.names == ("c0_ds",)
    assert "by orders of magnitude" in one.text


def test_parameters_that_only_a_sum_shows_have_huge_variances():
    covariance = solution([[1.0, 1.0], [2.0, 2.0]]).covariance
    assert min(covariance[0, 0], covariance[1, 1]) > 1e9
    assert covariance[0, 1] / math.sqrt(covariance[0, 0] * covariance[1, 1]) == pytest.approx(-1.0)


def test_the_sum_itself_is_known_all_the_same():
    open_one = solution([[1.0, 1.0], [2.0, 2.0]])
    made = Estimate(space=open_one.space, coordinates=open_one.coordinates, covariance=open_one.covariance)
    # The logarithm of the product is the sum of the coordinates; its variance is 1/5.
    error = standard_errors(lambda v: np.reshape(np.log(v["c0_gd"] * v["c0_ds"]), (-1, 1)), made)
    assert error[0] == pytest.approx(math.sqrt(0.2), rel=0.01)


SLOPES = np.array([[3.0, 1.0], [4.0, 1.0], [0.0, 20.0]])


def test_a_parameter_just_on_its_bound_varies_inwards_as_much_as_without_it():
    covariance = solution(SLOPES, on_bound=(False, True)).covariance
    np.testing.assert_allclose(covariance, np.linalg.inv(SLOPES.T @ SLOPES), rtol=1e-9)


def test_a_parameter_far_beyond_its_bound_hardly_varies_and_the_others_as_if_it_were_known():
    # The cost falls outwards, upwards, by 4000 per unit: an exponential distribution of that rate is left.
    covariance = solution(SLOPES, on_bound=(False, True), residuals=[0.0, 0.0, -200.0]).covariance
    assert covariance[1, 1] == pytest.approx(2.0 / 4000.0**2, rel=0.02)
    assert covariance[0, 0] == pytest.approx(1.0 / 25.0, rel=1e-3)


def test_a_parameter_on_its_bound_takes_the_others_along():
    slopes = SLOPES[:2]
    residuals = np.array([-0.8, 0.6])  # with no slope along the first coordinate: that one is at its best
    made = solution(slopes, on_bound=(False, True), residuals=residuals)
    # Drawn from the normal distribution of the unbounded fit, where the second coordinate lies below its bound.
    random = np.random.default_rng(1)
    whole = np.linalg.inv(slopes.T @ slopes)
    draws = random.multivariate_normal(-whole @ slopes.T @ residuals, whole, size=400_000)
    first, second = draws[draws[:, 1] < 0.0].T
    expected = np.mean(first**2), np.mean(second**2), np.mean(first * second)
    found = made.covariance
    assert (found[0, 0], found[1, 1], found[0, 1]) == pytest.approx(expected, rel=0.02)
