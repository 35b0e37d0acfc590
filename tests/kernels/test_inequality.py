"""Bounds by expectation propagation against a Gibbs sampler; closed forms against scipy and quadrature."""

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import norm, truncnorm

from geoves.kernels.covariances import Covariance, covariance_matrix
from geoves.kernels.inequality import (
    Bounds,
    bounds_as_values,
    field_at_places,
    fit_covariance_with_bounds,
    rectified_normal_moments,
    truncated_normal_moments,
)
from geoves.kernels.kriging import krige
from tests.reference.dense_kriging import predict_densely
from tests.reference.gibbs import sample_under_bounds

VALLEY = Covariance("matern32", 9.0, 900.0, 14_000.0, 35.0, 0.4)


def draw_valley(places, seed):
    own = covariance_matrix(places, places, VALLEY) + 9.0 * np.eye(len(places))
    return 200.0 + np.linalg.cholesky(own) @ np.random.default_rng(seed).standard_normal(len(places))


def bounded_county(n, m, softness, seed):
    """The m lowest of n places say only that the field is below something; the others have values with errors."""
    generator = np.random.default_rng(seed)
    places = generator.uniform(0.0, 30_000.0, (n, 2))
    truth = draw_valley(places, seed)
    low, rest = np.split(np.argsort(truth), [m])
    bound = truth[low] + generator.exponential(15.0, m)
    values = truth[rest] + 4.0 * generator.standard_normal(n - m)
    bounds = Bounds(places[low], bound, -np.ones(m), np.full(m, softness))
    return (places[rest], values, np.full(n - m, 16.0)), bounds


@pytest.mark.parametrize("z", [-300.0, -29.9, -5.0, -0.3, 0.0, 2.0, 9.0, 60.0])
@pytest.mark.parametrize("side", [1.0, -1.0])
def test_sharp_bound_equals_truncnorm(z, side):
    """scipy.stats.truncnorm, whose moments are off themselves far out: there the series 1 / z - 2 / z³ is held to."""
    mean, deviation = 3.0, 2.0
    bound = mean - side * z * deviation
    log_probability, centre, variance = truncated_normal_moments(
        *(np.array([number]) for number in (mean, deviation**2, bound, side, 0.0))
    )
    assert log_probability[0] == pytest.approx(norm.logcdf(z), rel=1e-10)
    if z < -20.0:  # moments of an exponential tail (Abramowitz and Stegun 26.2.12, from memory)
        beyond, spread = 1.0 / -z - 2.0 / (-z) ** 3, 1.0 / z**2 - 6.0 / z**4
    else:
        exact = truncnorm(-z, np.inf)
        beyond, spread = exact.mean() + z, exact.var()
    assert side * (centre[0] - bound) / deviation == pytest.approx(beyond, rel=1e-4)
    assert variance[0] / deviation**2 == pytest.approx(spread, rel=1e-3)


@pytest.mark.parametrize("bound", [-4.0, 1.0, 6.0])
@pytest.mark.parametrize("side", [1.0, -1.0])
def test_soft_bound_equals_quadrature(bound, side):
    mean, variance, softness = 1.0, 4.0, 1.5

    def moment(power):
        def integrand(x):
            return x**power * norm.pdf(x, mean, 2.0) * norm.cdf(side * (x - bound) / softness)

        return quad(integrand, -25.0, 25.0, epsabs=1e-13, points=(mean, bound))[0]

    log_probability, centre, spread = truncated_normal_moments(
        *(np.array([number]) for number in (mean, variance, bound, side, softness))
    )
    first = moment(1) / moment(0)
    assert log_probability[0] == pytest.approx(np.log(moment(0)), abs=1e-8)
    assert centre[0] == pytest.approx(first, abs=1e-7)
    assert spread[0] == pytest.approx(moment(2) / moment(0) - first**2, abs=1e-7)


@pytest.mark.parametrize("mean", [-12.0, -2.0, 0.0, 1.5, 40.0])
def test_rectified_moments_equal_quadrature(mean):
    deviation = 2.0
    moments = [
        quad(lambda x, k=k: x**k * norm.pdf(x, mean, deviation), 0.0, max(mean, 0.0) + 30.0, epsabs=1e-16)[0]
        for k in (1, 2)
    ]
    centre, spread = rectified_normal_moments(np.array([mean]), np.array([deviation]))
    assert centre[0] == pytest.approx(moments[0], rel=1e-6)
    assert spread[0] == pytest.approx(np.sqrt(moments[1] - moments[0] ** 2), rel=1e-6)


def test_field_at_places_equals_the_dense_reference():
    data, bounds = bounded_county(30, 8, 0.0, 1)
    ours = field_at_places(*data, bounds.points, VALLEY)
    theirs = predict_densely(*data, bounds.points, VALLEY)
    np.testing.assert_allclose(ours[0], theirs[0], rtol=1e-6)
    np.testing.assert_allclose(ours[1], theirs[1], rtol=1e-6, atol=1e-5)


@pytest.mark.parametrize(("seed", "softness"), [(1, 0.0), (2, 5.0)])
def test_kriging_with_bounds_equals_gibbs(softness, seed):
    """Field at new cells given data and 12 bounds: means within 3 % of a deviation beside four standard errors of the
    sampler's 4000 draws, deviations within 8 % (propagation makes them too small by up to 6 % here, the draws know them
    to 1 %).
    """
    data, bounds = bounded_county(36, 12, softness, seed)
    cells = np.vstack((bounds.points + 200.0, np.random.default_rng(seed).uniform(0.0, 30_000.0, (8, 2))))
    m = len(bounds.bound)
    mean, spread = predict_densely(*data, np.vstack((bounds.points, cells)), VALLEY)
    draws = sample_under_bounds(mean[:m], spread[:m, :m], bounds[1:], 4000, seed)
    gain = np.linalg.solve(spread[:m, :m], spread[:m, m:])
    carried = mean[m:] + (draws - mean[:m]) @ gain
    left = np.diag(spread[m:, m:] - spread[m:, :m] @ gain)
    exact, deviation = carried.mean(axis=0), np.sqrt(carried.var(axis=0) + left)
    pseudo_value, pseudo_variance = bounds_as_values(*data, bounds, VALLEY)
    assert np.all(pseudo_variance > 0.0)
    estimate, variance = krige(
        np.vstack((data[0], bounds.points)),
        np.append(data[1], pseudo_value),
        np.append(data[2], pseudo_variance),
        cells,
        VALLEY,
    )
    tolerance = 0.03 * deviation + 4.0 * carried.std(axis=0) / np.sqrt(4000.0)
    assert np.all(np.abs(estimate - exact) < tolerance)
    np.testing.assert_allclose(np.sqrt(variance), deviation, rtol=0.08)
    plain, _ = krige(*data, cells, VALLEY)
    assert np.max(np.abs(plain - exact) / deviation) > 0.3  # the bounds do matter here


def test_idle_bounds_change_nothing():
    data, bounds = bounded_county(30, 8, 1.0, 3)
    idle = bounds._replace(bound=bounds.bound + 2000.0)
    pseudo_value, pseudo_variance = bounds_as_values(*data, idle, VALLEY)
    assert np.all(pseudo_variance > 1e5 * VALLEY.sill)
    assert np.all(np.abs(pseudo_value - 200.0) < 300.0)


@pytest.mark.parametrize("softness", [0.0, 2.0])
def test_contradictory_and_repeated_bounds_stay_finite(softness):
    """One place below 100 and above 110, twice over, at a datum of 180."""
    data, _ = bounded_county(20, 5, 1.0, 4)
    places = np.repeat(data[0][:1], 4, axis=0)
    bounds = Bounds(places, np.array([100.0, 110.0] * 2), np.array([-1.0, 1.0] * 2), np.full(4, softness))
    pseudo_value, pseudo_variance = bounds_as_values(*data, bounds, VALLEY)
    assert np.all(np.isfinite(pseudo_value))
    assert np.all((pseudo_variance > 0.0) & np.isfinite(pseudo_variance))


def test_bounds_beat_dropping_them_and_taking_them_as_picks():
    """Three fields, the deepest third of 120 places known only to be below a reach: error where the field is lowest."""
    errors = {"dropped": [], "picked": [], "bounds": []}
    for seed in range(3):
        generator = np.random.default_rng(seed)
        places, cells = generator.uniform(0.0, 30_000.0, (120, 2)), generator.uniform(0.0, 30_000.0, (200, 2))
        truth = draw_valley(np.vstack((places, cells)), seed)
        lowest = truth[120:] < np.quantile(truth[120:], 0.25)
        low, rest = np.split(np.argsort(truth[:120]), [40])
        reach = truth[low] + generator.uniform(5.0, 40.0, 40)
        points, values, variances = places[rest], truth[rest] + generator.normal(0.0, 4.0, 80), np.full(80, 16.0)
        bounds = Bounds(places[low], reach, -np.ones(40), np.full(40, 2.0))
        covariance, pseudo_value, pseudo_variance = fit_covariance_with_bounds(points, values, variances, bounds)
        everywhere = np.vstack((points, places[low]))
        ways = {
            "dropped": (points, values, variances),
            "picked": (everywhere, np.append(values, reach), np.full(120, 16.0)),
            "bounds": (everywhere, np.append(values, pseudo_value), np.append(variances, pseudo_variance)),
        }
        for way, known in ways.items():
            estimate, _ = krige(*known, cells[lowest], covariance)
            errors[way].append(np.sqrt(np.mean((estimate - truth[120:][lowest]) ** 2)))
    mean = {way: np.mean(found) for way, found in errors.items()}
    assert mean["bounds"] < 0.75 * min(mean["dropped"], mean["picked"])


def test_fit_with_bounds_mends_the_sill():
    """Without its lowest third a field looks tamer than it is; the bounds give back most of that. Three fields."""
    shares = []
    for seed in range(3):
        data, bounds = bounded_county(150, 50, 2.0, seed)
        with_bounds = fit_covariance_with_bounds(*data, bounds)[0]
        nothing = Bounds(np.empty((0, 2)), np.empty(0), np.empty(0), np.empty(0))
        without, pseudo_value, _ = fit_covariance_with_bounds(*data, nothing)
        assert pseudo_value.shape == (0,)
        shares.append((without.sill / VALLEY.sill, with_bounds.sill / VALLEY.sill))
    dropped, kept = np.mean(np.log(shares), axis=0)
    assert dropped < kept
    assert abs(kept) < abs(dropped)
