"""Covariances against GSTools and a dense reference, and fits against known truths."""

import gstools
import numpy as np
import pytest
from scipy.optimize import approx_fprime

from geoves.kernels import covariances
from geoves.kernels.covariances import (
    Covariance,
    covariance_matrix,
    experimental_variogram,
    fit_by_least_squares,
    fit_by_restricted_likelihood,
    fit_covariance,
    scaled_distances,
    semivariance,
    variance_between_places,
)
from tests.reference.dense_kriging import covariance_of, negative_restricted_likelihood

MODELS = ("matern32", "exponential", "spherical", "gaussian")
TRUTH = Covariance("matern32", 20.0, 400.0, 12_000.0, 35.0, 0.4)


def field(covariance, n, seed, error_deviation=4.0):
    """Points in a county 30 km wide, values with errors drawn from the covariance, and the error variances."""
    generator = np.random.default_rng(seed)
    points = generator.uniform(0.0, 30_000.0, (n, 2)) + np.array((500_000.0, 5_000_000.0))
    own = covariance_matrix(points, points, covariance) + (covariance.nugget + 1e-6) * np.eye(n)
    values = 300.0 + np.linalg.cholesky(own) @ generator.standard_normal(n)
    return points, values + error_deviation * generator.standard_normal(n), np.full(n, error_deviation**2)


@pytest.mark.parametrize("model", MODELS)
def test_semivariance_equals_gstools(model):
    """GSTools writes the same models with length scales of its own, here worked out from the practical length."""
    shapes = {
        "matern32": (gstools.Matern, {"nu": 1.5, "rescale": 1.0, "len_scale": 2.0 * np.sqrt(1.5) / 4.743864518}),
        "exponential": (gstools.Exponential, {"len_scale": 2.0 / np.log(20.0)}),
        "spherical": (gstools.Spherical, {"len_scale": 2.0}),
        "gaussian": (gstools.Gaussian, {"rescale": 1.0, "len_scale": 2.0 / np.sqrt(np.log(20.0))}),
    }
    shape, settings = shapes[model]
    theirs = shape(dim=2, var=3.0, nugget=0.5, **settings)
    distance = np.linspace(0.01, 5.0, 40)
    ours = semivariance(distance, Covariance(model, 0.5, 3.0, 2.0))
    np.testing.assert_allclose(ours, theirs.variogram(distance), rtol=1e-7)


@pytest.mark.parametrize("model", MODELS)
def test_practical_length(model):
    """What `length` promises: a twentieth of the correlation is left, and nothing of the spherical one."""
    left = 3.5 - semivariance(np.array([2.0]), Covariance(model, 0.5, 3.0, 2.0))[0]
    assert left == pytest.approx(0.0 if model == "spherical" else 0.05 * 3.0, abs=1e-9)


@pytest.mark.parametrize("model", MODELS)
def test_covariance_matrix_equals_the_dense_reference(model):
    generator = np.random.default_rng(3)
    first, second = generator.uniform(0.0, 50.0, (7, 2)), generator.uniform(0.0, 50.0, (5, 2))
    covariance = Covariance(model, 1.0, 3.0, 30.0, 70.0, 0.3)
    ours = covariance_matrix(first, second, covariance)
    np.testing.assert_allclose(ours, covariance_of(first, second, covariance), atol=1e-8)


def test_azimuth_is_clockwise_from_north():
    """Along a bearing of 60 degrees (east by north) a length is a distance of 1; across it, a ratio of it is."""
    covariance = Covariance("matern32", 0.0, 1.0, 1000.0, 60.0, 0.25)
    along = 1000.0 * np.array([[np.sin(np.pi / 3.0), np.cos(np.pi / 3.0)]])
    across = 250.0 * np.array([[np.cos(np.pi / 3.0), -np.sin(np.pi / 3.0)]])
    origin = np.zeros((1, 2))
    assert scaled_distances(origin, along, covariance)[0, 0] == pytest.approx(1.0)
    assert scaled_distances(origin, across, covariance)[0, 0] == pytest.approx(1.0)


def test_experimental_variogram_by_hand():
    """Three points on a line to the north and one to the east: pairs counted on paper."""
    points = np.array([(0.0, 0.0), (0.0, 1.0), (0.0, 3.0), (2.0, 0.0)])
    values = np.array([1.0, 2.0, 5.0, 9.0])
    edges = np.array([0.0, 1.0, 2.0, 3.0])
    lag, gamma, pairs = experimental_variogram(points, values, edges, azimuth_deg=0.0, tolerance_deg=10.0)
    np.testing.assert_array_equal(pairs, (1, 1, 1))
    np.testing.assert_allclose(lag, (1.0, 2.0, 3.0))
    np.testing.assert_allclose(gamma, (0.5, 4.5, 8.0))
    lag, gamma, pairs = experimental_variogram(points, values, edges, azimuth_deg=90.0, tolerance_deg=10.0)
    np.testing.assert_array_equal(pairs, (0, 1, 0))
    np.testing.assert_allclose(gamma, (np.nan, 32.0, np.nan))


@pytest.mark.parametrize("model", MODELS)
def test_least_squares_finds_an_exact_variogram(model):
    truth = Covariance(model, 0.3, 1.7, 800.0)
    lag = np.linspace(50.0, 1500.0, 20)
    fit = fit_by_least_squares(lag, semivariance(lag, truth), np.full(20, 100), model)
    np.testing.assert_allclose(fit[1:4], truth[1:4], rtol=1e-3)


def test_variance_between_places_takes_errors_off():
    """Exact data give the sample variance; data with the errors of their scatter, what was there before."""
    generator = np.random.default_rng(5)
    values = generator.normal(50.0, 3.0, 4000)
    assert variance_between_places(values, np.zeros(4000)) == pytest.approx(np.var(values, ddof=1), rel=1e-5)
    errors = generator.choice([1.0, 100.0], 4000)
    noisy = values + np.sqrt(errors) * generator.standard_normal(4000)
    assert variance_between_places(noisy, errors) == pytest.approx(9.0, rel=0.1)


@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize("turn", [(0.0, 0.0), (1e-3, -2e-3), (0.4, 0.6)])
def test_likelihood_gradient(model, turn):
    """Against finite differences by scipy, at and off the isotropic point."""
    points, values, errors = field(TRUTH, 30, 1)
    squares = covariances.square_distances(points, 30_000.0)
    problem = covariances._Restricted(model, squares, (values - 300.0) / 20.0, errors / 400.0)
    at = np.array([-0.3, -2.0, -1.2, *turn])
    gradient = covariances._penalised(at, problem)[1]
    numeric = approx_fprime(at, lambda x: covariances._penalised(x, problem)[0], 1e-7)
    np.testing.assert_allclose(gradient, numeric, atol=2e-5 * np.abs(gradient).max())


def test_log_likelihood_is_that_of_the_contrasts():
    """The dense reference takes explicit contrasts; the usual formula differs by half the logarithm of n."""
    points, values, errors = field(TRUTH, 25, 2)
    fit, log_likelihood = fit_by_restricted_likelihood(points, values, errors, anisotropic=True)
    dense = -negative_restricted_likelihood(points, values, errors, fit)
    assert log_likelihood == pytest.approx(dense - 0.5 * np.log(25.0), abs=1e-4)


def test_restricted_likelihood_finds_a_direction():
    """Five counties of 170 from one truth: medians near it, within what so few data leave open."""
    fits = [fit_covariance(*field(TRUTH, 170, seed)) for seed in range(5)]
    assert all(fit.ratio < 0.7 for fit in fits)
    assert all(abs((fit.azimuth_deg - 35.0 + 90.0) % 180.0 - 90.0) < 20.0 for fit in fits)
    assert np.median([fit.length for fit in fits]) == pytest.approx(12_000.0, rel=0.3)
    assert np.median([fit.sill for fit in fits]) == pytest.approx(420.0, rel=0.35)


def test_no_direction_where_there_is_none():
    """Akaike's criterion is wrong one time in seven by design (chi square of 2 above 4): not more than 3 of 8."""
    truth = TRUTH._replace(ratio=1.0)
    fits = [fit_covariance(*field(truth, 80, seed)) for seed in range(8)]
    assert sum(fit.ratio < 1.0 for fit in fits) <= 3


def test_known_errors_are_not_called_a_nugget():
    truth = TRUTH._replace(nugget=0.0, ratio=1.0)
    told = fit_covariance(*field(truth, 170, 3, error_deviation=10.0))
    points, values, errors = field(truth, 170, 3, error_deviation=10.0)
    untold = fit_covariance(points, values, np.zeros_like(errors))
    assert told.nugget < 25.0
    assert untold.nugget == pytest.approx(100.0, rel=0.4)


@pytest.mark.parametrize("kind", ["constant", "two places", "trend", "worthless", "noise", "repeated"])
def test_awkward_data_give_a_usable_covariance(kind):
    """No absurd sill or length: within a hundredfold of what the data span."""
    generator = np.random.default_rng(9)
    points, values = generator.uniform(0.0, 1000.0, (30, 2)), generator.normal(10.0, 2.0, 30)
    errors = np.full(30, 0.01)
    if kind == "constant":
        values = np.zeros(30)
    elif kind == "two places":
        points, values, errors = points[:3], values[:3], errors[:3]
        points[2] = points[1]
    elif kind == "trend":
        values = points[:, 0] / 10.0
    elif kind == "worthless":
        values, errors = values + 50.0 * generator.standard_normal(30), np.full(30, 2500.0)
    elif kind == "repeated":
        points[15:] = points[:15]
    fit = fit_covariance(points, values, errors)
    assert np.all(np.isfinite(fit[1:]))
    assert 0.0 < fit.sill < 100.0 * max(np.var(values), 1e-6)
    assert 1.0 < fit.length < 1e4
    assert 0.05 < fit.ratio <= 1.0


def test_large_sets_are_thinned_without_regard_to_order():
    points, values, errors = field(TRUTH, 700, 4)
    turned = np.random.default_rng(1).permutation(700)
    rows, other_rows = (covariances._chosen_rows(points[o], values[o]) for o in (np.arange(700), turned))
    assert len(rows) == 600
    np.testing.assert_array_equal(points[rows], points[turned][other_rows])
    assert errors[rows].shape == (600,)
