"""Published fits through the project's own fit: its optimizer, its weights, its uncertainties and its intervals."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.constants import elementary_charge, epsilon_0, k

from fitter.fitting.blocks import PointsBlock
from fitter.fitting.intervals import COVERAGE_FACTOR, Estimate, intervals, standard_errors
from fitter.fitting.misfit import block_statistics
from fitter.fitting.solve import solve
from fitter.fitting.space import ParameterSpace
from fitter.models.capacitance import GATE_DRAIN, capacitance, junction_from
from fitter.parameters import ParameterDefinition


def linear(name, bound):
    return ParameterDefinition(name=name, unit="", meaning=name, lower=-bound, upper=bound, scale="linear")


def line_block(x, y, sigma_x, sigma_y):
    """Points of a straight line; sigma_x, sigma_y scalars or arrays."""
    return PointsBlock(
        name="line", group="line", model_parameters=("offset", "slope"), x=x, y=y,
        sigma_x=np.broadcast_to(sigma_x, x.shape), sigma_y=np.broadcast_to(sigma_y, x.shape),
        function=lambda values, x: values["offset"] + values["slope"] * x,
    )  # fmt: skip


LINE = ParameterSpace(free=(linear("offset", 100.0), linear("slope", 100.0)))


# JCGM 100:2008 (GUM), example H.3, straight-line calibration with uncertainties and correlation.
T = np.array([21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511])
B = np.array([-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160])
T_0, T_PREDICTED = 20.0, 30.0


@pytest.fixture(scope="module")
def thermometer():
    """GUM H.3: b = y1 + y2 (t - 20), weights found from the scatter itself, as the guide does."""
    blocks = [line_block(T - T_0, B, 0.0, 1e-3)]
    first = solve(blocks, LINE, {"offset": 0.0, "slope": 0.0})
    (found,) = block_statistics(first)
    return solve([replace(blocks[0], inflation=found.inflation)], LINE, first.values)


@pytest.fixture(scope="module")
def calibration(thermometer):
    return Estimate(space=LINE, coordinates=thermometer.coordinates, covariance=thermometer.covariance)


def at(t):
    return lambda values: np.atleast_1d(values["offset"] + values["slope"] * (t - T_0))


def test_gum_h3_offset(calibration):
    assert round(float(calibration.values["offset"]), 4) == -0.1712


def test_gum_h3_slope(calibration):
    assert round(float(calibration.values["slope"]), 5) == 0.00218


def test_gum_h3_standard_errors(calibration):
    def both(values):
        return np.concatenate(np.broadcast_arrays(*(np.atleast_1d(values[name]) for name in LINE.names)), axis=-1)

    offset, slope = standard_errors(both, calibration)
    assert (round(float(offset), 4), round(float(slope), 5)) == (0.0029, 0.00067)


def test_gum_h3_correlation(calibration):
    c = calibration.covariance
    assert round(float(c[0, 1] / np.sqrt(c[0, 0] * c[1, 1])), 3) == -0.930


def test_gum_h3_standard_deviation_of_the_points(thermometer):
    (found,) = block_statistics(thermometer)
    assert found.freedom == pytest.approx(9.0)
    assert round(1e-3 * found.misfit, 4) == 0.0035


def test_gum_h3_prediction_at_30_degrees(calibration):
    value, _, _ = intervals(at(T_PREDICTED), calibration)
    assert round(float(value[0]), 4) == -0.1494


def test_gum_h3_uncertainty_of_the_prediction(calibration):
    value, low, high = intervals(at(T_PREDICTED), calibration)
    assert high - value == pytest.approx(value - low)
    assert round(float((high - low)[0] / (2.0 * COVERAGE_FACTOR)), 4) == 0.0041


# Pearson's data with York's weights (K. Pearson 1901; D. York, Can. J. Phys. 44 (1966) 1079), straight line with
# errors in both variables; weight = 1/sigma^2.
X = np.array([0.0, 0.9, 1.8, 2.6, 3.3, 4.4, 5.2, 6.1, 6.5, 7.4])
Y = np.array([5.9, 5.4, 4.4, 4.6, 3.5, 3.7, 2.8, 2.8, 2.4, 1.5])
WEIGHT_X = np.array([1000.0, 1000.0, 500.0, 800.0, 200.0, 80.0, 60.0, 20.0, 1.8, 1.0])
WEIGHT_Y = np.array([1.0, 1.8, 4.0, 8.0, 20.0, 20.0, 70.0, 70.0, 100.0, 500.0])


@pytest.fixture(scope="module", params=[(5.0, -0.5), (0.0, 0.0)], ids=["near", "far"])
def pearson(request):
    offset, slope = request.param
    block = line_block(X, Y, WEIGHT_X**-0.5, WEIGHT_Y**-0.5)
    return solve([block], LINE, {"offset": offset, "slope": slope})


def test_pearson_york_slope(pearson):
    assert round(float(pearson.values["slope"]), 6) == -0.480533


def test_pearson_york_intercept(pearson):
    assert round(float(pearson.values["offset"]), 6) == 5.479910


def test_pearson_york_chi_square(pearson):
    assert round(pearson.chi_square, 4) == 11.8664


# G. Tuttle, Iowa State University, pn-junction practice problem (inputs): Nd 4e17, Na 8e17, ni 6e9 cm^-3, 11.8:
# Vbi 0.949 V, width 68.1 nm, 153 nF/cm^2 at 0 V. C-V data of that junction follow with scipy.constants at 300 K.
N_D, N_A, N_I, PERMITTIVITY = 4e23, 8e23, 6e15, 11.8 * epsilon_0
BUILT_IN = k * 300.0 / elementary_charge * np.log(N_D * N_A / N_I**2)


def abrupt_junction(v):
    """Capacitance per area [F/m^2] of the depleted width sqrt(2 eps (Vbi + V)/q (1/Na + 1/Nd))."""
    return PERMITTIVITY / np.sqrt(2.0 * PERMITTIVITY * (BUILT_IN + v) / elementary_charge * (1.0 / N_A + 1.0 / N_D))


@pytest.fixture(scope="module", params=[3.0, 1.0 / 3.0])
def junction(request):
    """The junction fitted to its C-V curve on 1 mm^2, from starts off by a factor of three either way."""
    v = np.concatenate([[0.0], np.geomspace(0.05, 40.0, 30)])
    names = {field: GATE_DRAIN[field].name for field in ("c_0", "phi", "m", "c_f")}
    block = PointsBlock(
        name="c-v", group="c-v", model_parameters=tuple(names.values()), x=v, y=np.log(1e-6 * abrupt_junction(v)),
        sigma_x=np.full(v.size, 1e-3), sigma_y=np.full(v.size, 1e-2),
        function=lambda values, x: np.log(capacitance(x, junction_from(GATE_DRAIN, values))),
    )  # fmt: skip
    space = ParameterSpace(free=tuple(GATE_DRAIN[field] for field in names))
    start = {"c_0": 1.5e-9, "phi": 1.0, "m": 0.4, "c_f": 1e-11}
    fitted = solve([block], space, {names[field]: request.param * value for field, value in start.items()})
    return {field: float(fitted.values[name]) for field, name in names.items()}


def test_published_junction_built_in_potential(junction):
    assert round(junction["phi"], 3) == 0.949


def test_published_junction_capacitance_at_0_v(junction):
    assert round(junction["c_0"] * 1e9 / 1e-2) == 153  # nF/cm^2


def test_published_junction_is_abrupt(junction):
    assert junction["m"] == pytest.approx(0.5, abs=1e-4)
