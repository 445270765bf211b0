"""Intervals of figures, the misfit that widens them, and fits in turn: on cases small enough to work out by hand."""

from __future__ import annotations

import numpy as np
import pytest

from fitter.fitting.blocks import PointsBlock, ScalarBlock
from fitter.fitting.intervals import COVERAGE_FACTOR, Estimate, intervals
from fitter.fitting.misfit import block_statistics
from fitter.fitting.solve import solve
from fitter.fitting.space import ParameterSpace
from fitter.parameters import ParameterDefinition


def parameter(name, lower=-1e3, upper=1e3):
    return ParameterDefinition(name=name, unit="", meaning=name, lower=lower, upper=upper, scale="linear")


def estimate(covariance, *free):
    return Estimate(space=ParameterSpace(free=free), coordinates=np.zeros(len(free)), covariance=np.array(covariance))


def interval(figure, made):
    value, low, high = intervals(
        lambda v: np.asarray(figure(v))[..., None] if np.ndim(figure(v)) == 0 else figure(v), made
    )
    return float(value[0]), float(low[0]), float(high[0])


# Ends of intervals


def test_interval_of_a_sum_carries_the_correlation():
    made = estimate([[4.0, -3.0], [-3.0, 9.0]], parameter("a"), parameter("b"))
    value, low, high = interval(lambda v: v["a"] + v["b"], made)
    assert (value, high, low) == pytest.approx((0.0, COVERAGE_FACTOR * np.sqrt(7.0), -COVERAGE_FACTOR * np.sqrt(7.0)))


def test_a_figure_that_bends_back_does_not_make_an_interval_of_one_side():
    # Up and down along a, a - 2 a^2 falls; by its slope it may rise by as much as a.
    made = estimate([[4.0]], parameter("a"))
    reach = 2.0 * COVERAGE_FACTOR
    value, low, high = interval(lambda v: v["a"] - 2.0 * v["a"] ** 2, made)
    assert (value, low, high) == pytest.approx((0.0, -reach - 2.0 * reach**2, reach))


def test_a_bound_in_the_way_ends_the_interval_there():
    made = estimate([[4.0, 0.0], [0.0, 9.0]], parameter("a", upper=1.0), parameter("b"))
    _, low, high = interval(lambda v: v["a"] + 0.0 * v["b"], made)
    assert (low, high) == pytest.approx((-2.0 * COVERAGE_FACTOR, 1.0))


def test_what_a_bound_leaves_is_spent_on_the_other_parameter():
    # a can go 1 = half a standard deviation; b, uncorrelated, then has sqrt(1.96^2 - 0.25) of its own.
    made = estimate([[4.0, 0.0], [0.0, 9.0]], parameter("a", upper=1.0), parameter("b"))
    _, _, high = interval(lambda v: 10.0 * v["a"] + v["b"], made)
    assert high == pytest.approx(10.0 + 3.0 * np.sqrt(COVERAGE_FACTOR**2 - 0.25))


def test_a_trade_off_that_a_bound_stops_does_not_make_an_interval_of_one_side():
    # a + b is known to 0.1, a alone to 3: were b clipped at its bound without a giving way, the sum would be off by 3.
    made = estimate([[9.0, -9.0], [-9.0, 9.01]], parameter("a"), parameter("b", lower=-1.0))
    _, low, high = interval(lambda v: v["a"] + v["b"], made)
    assert (low, high) == pytest.approx((-0.1 * COVERAGE_FACTOR, 0.1 * COVERAGE_FACTOR), rel=0.05)


# Misfit


def line(y, name="line", sigma=1.0):
    """A block of a level line through points."""
    y = np.asarray(y, dtype=float)
    return PointsBlock(
        name=name, group="group", model_parameters=("level",), x=np.arange(y.size, dtype=float), y=y,
        sigma_x=np.zeros(y.size), sigma_y=np.full(y.size, sigma), function=lambda v, x: v["level"] + 0.0 * x,
    )  # fmt: skip


def inflation(y):
    block = line(y)
    space = ParameterSpace(free=(parameter("level"),))
    return block_statistics(solve([block], space, {"level": 0.0}))[0].inflation


def test_scatter_from_point_to_point_widens_by_its_own_size():
    y = 3.0 * np.array([1.0, -1.0, 1.0, -1.0] * 10)
    assert inflation(y) == pytest.approx(3.0 * np.sqrt(40.0 / 39.0), rel=1e-3)


def test_a_run_of_points_counts_for_less_than_as_many_points():
    scattered = 3.0 * np.array([1.0, -1.0, 1.0, -1.0] * 10)
    in_runs = 3.0 * np.array([1.0] * 20 + [-1.0] * 20)
    assert inflation(in_runs) > 2.5 * inflation(scattered)


def test_points_that_fit_are_not_widened_for_a_run():
    rng = np.random.default_rng(1)
    smooth = np.convolve(rng.normal(size=60), [0.5, 0.5], mode="valid")
    assert inflation(0.7 * smooth) == 1.0


# Fits in turn


def reading(name, of, stated, sigma):
    return ScalarBlock(name=name, parameters=of, function=lambda v: sum(v[n] for n in of), stated=stated, sigma=sigma)


def test_a_fit_that_follows_tells_the_first_one_nothing_and_takes_over_its_error():
    first = solve([reading("a", ("a",), 1.0, 0.3)], ParameterSpace(free=(parameter("a"),)), {"a": 0.0})
    second = solve(
        [reading("a + b", ("a", "b"), 5.0, 0.4)], ParameterSpace(free=(parameter("b"),), fixed={"a": 1.0}), {"b": 0.0}
    )
    both = first.followed_by(second)
    assert both.space.names == ("a", "b")
    assert [float(both.values[n]) for n in "ab"] == pytest.approx([1.0, 4.0], abs=1e-6)
    np.testing.assert_allclose(both.covariance, [[0.09, -0.09], [-0.09, 0.25]], rtol=1e-6)
    assert both.leverage() == pytest.approx({"a": 1.0, "a + b": 1.0})
