"""Fits of which a part is stated, and the score by which a direction is tested."""

import numpy as np
import pytest
from scipy.stats import norm

from geoves.kernels.covariances import (
    Covariance,
    Stated,
    covariance_matrix,
    fit_by_restricted_likelihood,
    fit_covariance,
    leave_one_out_score,
)
from geoves.kernels.inequality import Bounds, fit_covariance_with_bounds
from tests.reference.dense_kriging import krige_densely

TRUTH = Covariance("matern32", 0.4, 9.0, 6000.0, 40.0, 0.35)


def drawn(n=70, seed=8, covariance=TRUTH):
    random = np.random.default_rng(seed)
    points = random.uniform(0.0, 12_000.0, (n, 2))
    own = covariance_matrix(points, points, covariance) + covariance.nugget * np.eye(n)
    errors = random.uniform(0.02, 0.3, n)
    values = 30.0 + np.linalg.cholesky(own) @ random.standard_normal(n) + np.sqrt(errors) * random.standard_normal(n)
    return points, values, errors


@pytest.mark.parametrize(
    "stated",
    [
        Stated(nugget=0.7),
        Stated(nugget=0.0),
        Stated(partial_sill=5.0),
        Stated(length=3500.0),
        Stated(azimuth_deg=120.0, ratio=0.5),
        Stated(length=7000.0, azimuth_deg=35.0, ratio=0.4, nugget=0.2),
        Stated(azimuth_deg=0.0, ratio=1.0),
    ],
)
def test_what_is_stated_stays_and_the_rest_is_the_best_beside_it(stated):
    data = drawn()
    found = fit_covariance(*data, "matern32", stated)
    for name, value in stated._asdict().items():
        assert value is None or getattr(found, name) == value
    _, likelihood = fit_by_restricted_likelihood(*data, "matern32", stated, anisotropic=stated.ratio is None)
    _, free = fit_by_restricted_likelihood(*data, "matern32", anisotropic=True)
    assert likelihood <= free + 0.5  # weak priors stand beside the likelihood


def test_a_stated_direction_is_the_direction_that_was_fitted():
    """Stating the truth's direction brings the rest near what the free fit, which finds it, says."""
    data = drawn(150, 3)
    free = fit_covariance(*data)
    told = fit_covariance(*data, "matern32", Stated(azimuth_deg=free.azimuth_deg, ratio=free.ratio))
    assert told[1:4] == pytest.approx(free[1:4], rel=0.02)
    assert abs(free.azimuth_deg - 40.0) < 15.0
    assert free.ratio == pytest.approx(0.35, abs=0.15)


def test_all_stated_is_not_fitted_and_bounds_hear_of_it():
    points, values, errors = drawn(20)
    stated = Stated(1.0, 8.0, 5000.0)
    assert fit_covariance(points, values, errors, "spherical", stated) == Covariance("spherical", 1.0, 8.0, 5000.0)
    bounds = Bounds(points[:3] + 500.0, values[:3] - 2.0, np.ones(3), np.full(3, 0.1))
    found, value, variance = fit_covariance_with_bounds(points, values, errors, bounds, "spherical", stated)
    assert found == Covariance("spherical", 1.0, 8.0, 5000.0)
    assert np.isfinite(value).all()
    assert (variance > 0).all()


def test_score_is_the_mean_log_density_of_data_left_out():
    """Each datum's normal density by scipy, its mean and variance by dense kriging from the others."""
    points, values, errors = drawn(25)
    expected = []
    for i in range(25):
        others = np.arange(25) != i
        mean, variance = krige_densely(points[others], values[others], errors[others], points[[i]], TRUTH)
        expected.append(norm.logpdf(values[i], mean[0], np.sqrt(variance[0] + errors[i])))
    assert leave_one_out_score(points, values, errors, TRUTH) == pytest.approx(np.mean(expected), rel=1e-6)


def test_a_direction_is_taken_up_where_there_is_one():
    """Of ten fields each: nearly always found where the ratio is 0.35, seldom where it is 1."""
    alike = TRUTH._replace(ratio=1.0)
    found = [fit_covariance(*drawn(80, seed)).ratio < 1.0 for seed in range(10)]
    wrongly = [fit_covariance(*drawn(80, seed, alike)).ratio < 1.0 for seed in range(10)]
    assert sum(found) >= 8
    assert sum(wrongly) <= 3
