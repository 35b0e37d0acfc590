"""What kriging must obey whatever the data: laws that follow from its definition."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from geoves.kernels.covariances import Covariance, covariance_matrix, experimental_variogram, fit_covariance
from geoves.kernels.inequality import Bounds, bounds_as_values, rectified_normal_moments
from geoves.kernels.kriging import krige, leave_one_out

MODELS = ("matern32", "exponential", "spherical")  # the gaussian is too smooth to be exact with data close together


@st.composite
def covariances(draw, ratio=None):
    return Covariance(
        draw(st.sampled_from(MODELS)),
        draw(st.sampled_from((0.0, 0.1, 2.0))),
        draw(st.floats(0.5, 50.0)),
        draw(st.floats(200.0, 20_000.0)),
        draw(st.floats(0.0, 180.0)),
        draw(st.floats(0.1, 1.0)) if ratio is None else ratio,
    )


@st.composite
def problems(draw, ratio=None):
    """Data of 3 to 25 places in 10 km, with errors, ten cells, and a covariance."""
    generator = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    n = draw(st.integers(3, 25))
    points, cells = (generator.uniform(0.0, 10_000.0, (k, 2)) + np.array((400_000.0, 5_500_000.0)) for k in (n, 10))
    values = 100.0 + 5.0 * generator.standard_normal(n)
    return points, values, generator.uniform(0.01, 4.0, n), cells, draw(covariances(ratio))


laws = settings(max_examples=40, deadline=None)


@laws
@given(problems())
def test_exact_data_are_honoured(problem):
    """Without error or nugget the surface goes through its data, and is certain there."""
    points, values, errors, _, covariance = problem
    covariance = covariance._replace(nugget=0.0)
    estimate, variance = krige(points, values, np.zeros_like(errors), points, covariance)
    np.testing.assert_allclose(estimate, values, atol=1e-3)
    assert np.all(variance < 1e-4 * covariance.sill)


@laws
@given(problems(), st.floats(-1000.0, 1000.0), st.floats(0.01, 100.0))
def test_shift_and_scale_of_values(problem, shift, scale):
    """Values a z + b, errors and sills a²: estimate a z + b, variance a²."""
    points, values, errors, cells, covariance = problem
    estimate, variance = krige(points, values, errors, cells, covariance)
    scaled = covariance._replace(nugget=scale**2 * covariance.nugget, partial_sill=scale**2 * covariance.partial_sill)
    moved, spread = krige(points, scale * values + shift, scale**2 * errors, cells, scaled)
    np.testing.assert_allclose(moved, scale * estimate + shift, rtol=1e-7, atol=1e-7)
    np.testing.assert_allclose(spread, scale**2 * variance, rtol=1e-6)


@laws
@given(problems(), st.randoms(use_true_random=False))
def test_order_of_data_is_irrelevant(problem, random):
    points, values, errors, cells, covariance = problem
    order = random.sample(range(len(values)), len(values))
    np.testing.assert_allclose(
        krige(points[order], values[order], errors[order], cells, covariance),
        krige(points, values, errors, cells, covariance),
        rtol=1e-8,
    )


@laws
@given(problems(ratio=1.0), st.floats(0.0, 2.0 * np.pi))
def test_rotation_where_all_directions_are_alike(problem, angle):
    points, values, errors, cells, covariance = problem
    centre = points.mean(axis=0)
    turn = np.array([(np.cos(angle), np.sin(angle)), (-np.sin(angle), np.cos(angle))])
    turned = ((part - centre) @ turn + centre for part in (points, cells))
    turned_points, turned_cells = turned
    np.testing.assert_allclose(
        krige(turned_points, values, errors, turned_cells, covariance),
        krige(points, values, errors, cells, covariance),
        rtol=1e-6,
    )


@laws
@given(problems(), st.floats(0.0, 180.0))
def test_rotation_together_with_the_azimuth(problem, degrees):
    """Turning everything clockwise turns the azimuth by as much."""
    points, values, errors, cells, covariance = problem
    angle, centre = np.deg2rad(degrees), points.mean(axis=0)
    clockwise = np.array([(np.cos(angle), -np.sin(angle)), (np.sin(angle), np.cos(angle))])
    turned_points, turned_cells = ((part - centre) @ clockwise + centre for part in (points, cells))
    turned = covariance._replace(azimuth_deg=covariance.azimuth_deg + degrees)
    np.testing.assert_allclose(
        krige(turned_points, values, errors, turned_cells, turned),
        krige(points, values, errors, cells, covariance),
        rtol=1e-6,
    )


@laws
@given(problems(), st.sampled_from((0.3048, 10.0)))
def test_unit_of_the_coordinates(problem, unit):
    points, values, errors, cells, covariance = problem
    in_unit = covariance._replace(length=covariance.length / unit)
    np.testing.assert_allclose(
        krige(points / unit, values, errors, cells / unit, in_unit),
        krige(points, values, errors, cells, covariance),
        rtol=1e-7,
    )


@laws
@given(problems())
def test_more_data_never_make_it_less_sure(problem):
    """A datum added, or one made more exact, cannot raise the variance anywhere."""
    points, values, errors, cells, covariance = problem
    _, all_data = krige(points, values, errors, cells, covariance)
    _, one_fewer = krige(points[1:], values[1:], errors[1:], cells, covariance)
    _, worse = krige(points, values, 2.0 * errors, cells, covariance)
    assert np.all(all_data <= one_fewer * (1.0 + 1e-8))
    assert np.all(all_data <= worse * (1.0 + 1e-8))
    assert np.all(all_data >= covariance.nugget * (1.0 - 1e-8))


@laws
@given(problems(), st.floats(-50.0, 50.0))
def test_equal_data_give_a_flat_surface(problem, level):
    points, _, errors, cells, covariance = problem
    estimate, _ = krige(points, np.full(len(errors), level), errors, cells, covariance)
    np.testing.assert_allclose(estimate, level, atol=1e-8)


@laws
@given(problems())
def test_left_out_residuals_do_not_see_a_shift(problem):
    points, values, errors, _, covariance = problem
    predicted, variance = leave_one_out(points, values, errors, covariance)
    moved, same = leave_one_out(points, values + 500.0, errors, covariance)
    np.testing.assert_allclose(moved, predicted + 500.0, rtol=1e-8)
    np.testing.assert_allclose(same, variance, rtol=1e-8)


@laws
@given(covariances(), st.integers(0, 2**32 - 1))
def test_covariance_matrices_are_positive_definite(covariance, seed):
    points = np.random.default_rng(seed).uniform(0.0, 10_000.0, (30, 2))
    eigenvalues = np.linalg.eigvalsh(covariance_matrix(points, points, covariance))
    assert eigenvalues.min() > -1e-9 * covariance.partial_sill


@laws
@given(problems(), st.floats(-10.0, 10.0), st.floats(0.0, 5.0), st.sampled_from((1.0, -1.0)))
def test_a_bound_never_pulls_to_its_wrong_side(problem, offset, softness, side):
    """At its place, a bound moves the estimate toward its own side or not at all, and makes it surer."""
    points, values, errors, cells, covariance = problem
    place = cells[:1]
    bounds = Bounds(place, np.array([100.0 + offset]), np.array([side]), np.array([softness]))
    pseudo_value, pseudo_variance = bounds_as_values(points, values, errors, bounds, covariance)
    before, before_variance = krige(points, values, errors, place, covariance)
    after, after_variance = krige(
        np.vstack((points, place)),
        np.append(values, pseudo_value),
        np.append(errors, pseudo_variance),
        place,
        covariance,
    )
    assert side * (after[0] - before[0]) >= -1e-4 * np.sqrt(covariance.sill)
    assert after_variance[0] <= before_variance[0] * (1.0 + 1e-6)


@laws
@given(problems(), st.floats(0.01, 100.0), st.floats(-500.0, 500.0))
def test_bounds_follow_shift_and_scale(problem, scale, shift):
    points, values, errors, cells, covariance = problem
    bounds = Bounds(cells, np.full(10, 99.0), np.array([1.0, -1.0] * 5), np.full(10, 0.5))
    pseudo_value, pseudo_variance = bounds_as_values(points, values, errors, bounds, covariance)
    scaled = covariance._replace(nugget=scale**2 * covariance.nugget, partial_sill=scale**2 * covariance.partial_sill)
    moved_bounds = bounds._replace(bound=scale * bounds.bound + shift, softness=scale * bounds.softness)
    moved, spread = bounds_as_values(points, scale * values + shift, scale**2 * errors, moved_bounds, scaled)
    # An idle bound's pseudo-value is far out and says nothing: what counts is its pull, value over variance.
    np.testing.assert_allclose(
        (moved - shift - scale * 100.0) / spread,
        (pseudo_value - 100.0) / (scale * pseudo_variance),
        rtol=1e-3,
        atol=1e-4 / (scale * np.sqrt(covariance.sill)),
    )
    np.testing.assert_allclose(1.0 / spread, 1.0 / (scale**2 * pseudo_variance), rtol=1e-3, atol=1e-4 / scaled.sill)


@laws
@given(st.floats(-20.0, 20.0), st.floats(0.01, 20.0))
def test_rectified_moments(mean, deviation):
    """Never below 0 or below the mean itself, never more spread; both signs add up to the mean."""
    centre, spread = rectified_normal_moments(np.array([mean]), np.array([deviation]))
    mirrored, _ = rectified_normal_moments(np.array([-mean]), np.array([deviation]))
    assert centre[0] >= max(0.0, mean) - 1e-12
    assert 0.0 <= spread[0] <= deviation * (1.0 + 1e-12)
    assert centre[0] - mirrored[0] == pytest.approx(mean, abs=1e-9)


@settings(max_examples=8, deadline=None)
@given(st.integers(0, 2**32 - 1), st.sampled_from((0.01, 100.0)))
def test_fit_follows_scale_and_order(seed, scale):
    """Values scaled, coordinates in feet and data shuffled: the same covariance in the new units."""
    generator = np.random.default_rng(seed)
    points = generator.uniform(0.0, 10_000.0, (40, 2))
    own = covariance_matrix(points, points, Covariance("matern32", 0.0, 25.0, 6000.0)) + 1e-6 * np.eye(40)
    values = np.linalg.cholesky(own) @ generator.standard_normal(40)
    errors, order = np.full(40, 0.5), generator.permutation(40)
    fit = fit_covariance(points, values, errors)
    other = fit_covariance(points[order] / 0.3048, scale * values[order] + 7.0, scale**2 * errors[order])
    assert other.length * 0.3048 == pytest.approx(fit.length, rel=0.01)
    assert other.partial_sill / scale**2 == pytest.approx(fit.partial_sill, rel=0.01)
    assert other.ratio == pytest.approx(fit.ratio, rel=0.01)


@laws
@given(problems(), st.floats(-90.0, 90.0))
def test_directional_pairs_add_up(problem, azimuth):
    """Two perpendicular sectors of 45 degrees hold every pair once."""
    points, values, *_ = problem
    edges = np.linspace(0.0, 20_000.0, 5)
    everywhere = experimental_variogram(points, values, edges)[2]
    sectors = [experimental_variogram(points, values, edges, azimuth + turn, 45.0)[2] for turn in (0.0, 90.0)]
    np.testing.assert_array_equal(sectors[0] + sectors[1], everywhere)
