"""Damped least squares against printed curves, scipy's optimisers, differences, and evidence by quadrature."""

import numpy as np
import pytest
from scipy.optimize import least_squares, minimize
from scipy.stats import multivariate_normal, norm

from geoves.kernels import layered_earth
from geoves.kernels.damped_steps import (
    Fit,
    Prior,
    Readings,
    _evaluate,
    fit_layers,
    keep_better,
    laplace_draws,
    objective,
    robust_misfit,
    stack_curves,
)
from tests.published.curve_tables import HALF_SPACING, MORE_LAYERS
from tests.reference.grid_posterior import log_evidence_on, log_likelihood

SPACING = np.geomspace(1.0, 500.0, 22)
NOISE = 0.03
# Thickness m, resistivity ohm m: three to five layers of outwash, strong contrasts.
MODELS = (
    (np.array([5.0, 10.0]), np.array([100.0, 20.0, 500.0])),
    (np.array([5.0, 10.0]), np.array([20.0, 200.0, 20.0])),
    (np.array([5.0, 25.0, 15.0]), np.array([35.0, 20.0, 90.0, 12.0])),
    (np.array([1.5, 6.0, 30.0, 20.0]), np.array([40.0, 110.0, 15.0, 48.0, 90.0])),
)
NAMES = ("H", "K", "HK", "five layers")


def readings_of(model, seed=None, *, spacing=SPACING, segment=None):
    """One curve over a model, ideal array, with NOISE where a seed is given."""
    spacing = np.asarray(spacing)
    ideal = np.zeros(spacing.size)
    apparent = layered_earth.apparent_resistivity(spacing, ideal, *(part[None] for part in model))[0]
    if seed is not None:
        apparent = apparent * np.exp(NOISE * np.random.default_rng(seed).standard_normal(spacing.size))
    segment = np.zeros(spacing.size, dtype=int) if segment is None else segment
    return Readings(spacing, ideal, apparent, np.full(spacing.size, NOISE), segment)


def stacked(*readings):
    wavenumber = layered_earth.shared_wavenumbers((one.half_spacing, one.potential_half_spacing) for one in readings)
    return stack_curves(readings, wavenumber)


def broad_prior(k, n_curves=1, n_segments=0, middle=40.0):
    """Interfaces evenly spaced in the log between 3 and 60 m; 1.0 and 1.2 natural logs of freedom."""
    thickness = np.diff(np.geomspace(3.0, 60.0, k - 1), prepend=0.0) if k > 1 else np.empty(0)
    mean = np.concatenate([np.log(thickness), np.full(k, np.log(middle)), np.zeros(n_segments)])
    deviation = np.concatenate([np.full(k - 1, 1.0), np.full(k, 1.2), np.full(n_segments, 0.05)])
    rows = (mean, deviation, mean - 6.0, mean + 6.0)
    return Prior(*(np.tile(row, (n_curves, 1)) for row in rows))


def near(model, n_segments=0):
    """A start some 30 % off the model."""
    logs = np.log(np.concatenate(model))
    return np.append(logs + 0.3 * np.cos(np.arange(logs.size)), np.zeros(n_segments))[None]


def written_out(unknowns, readings, prior):
    """The objective as its description reads: robust log densities of readings and normal ones of the unknowns."""
    k = (unknowns.size + 1 - int(readings.segment.max())) // 2
    model = np.exp(unknowns[: 2 * k - 1])
    apparent = layered_earth.apparent_resistivity(
        readings.half_spacing, readings.potential_half_spacing, model[None, : k - 1], model[None, k - 1 :]
    )[0]
    factor = np.append(0.0, np.cumsum(unknowns[2 * k - 1 :]))[readings.segment]
    residual = np.log(readings.apparent_resistivity / apparent) - factor
    return (
        -log_likelihood(residual, readings.relative_error)
        - norm.logpdf(unknowns, prior.mean[0], prior.deviation[0]).sum()
    )


@pytest.mark.parametrize("curve", MORE_LAYERS, ids=lambda curve: curve.name)
def test_printed_curves_are_fitted_within_their_errors(curve):
    """Printed curves of tests/published/curve_tables.py, taken as readings of 3 %, from a start that knows nothing."""
    n = HALF_SPACING.size
    readings = Readings(
        HALF_SPACING, np.zeros(n), curve.apparent_resistivity, np.full(n, NOISE), np.zeros(n, dtype=int)
    )
    curves, k = stacked(readings), len(curve.resistivity)
    prior = broad_prior(k, middle=float(np.median(curve.apparent_resistivity)))
    fit = fit_layers(prior.mean, k, curves, prior)
    residual = curves.log_apparent_resistivity[0] - fit.log_response[0]
    assert np.sqrt(np.mean(residual**2)) < 0.5 * NOISE
    assert np.all(np.abs(residual) < 1.5 * NOISE)
    assert np.all(fit.robust_weight > 0.9)


@pytest.mark.parametrize("model", MODELS, ids=NAMES)
def test_reaches_the_optimum_that_scipy_reaches(model):
    """scipy.optimize.minimize (L-BFGS-B, then Nelder-Mead) on the objective written out, both from one start."""
    readings = readings_of(model, seed=5)
    curves, prior, k = stacked(readings), broad_prior(model[1].size), model[1].size
    fit = fit_layers(near(model), k, curves, prior)
    theirs = minimize(written_out, near(model)[0], args=(readings, prior), method="L-BFGS-B")
    theirs = minimize(written_out, theirs.x, args=(readings, prior), method="Nelder-Mead", options={"maxiter": 300})
    assert fit.objective[0] == pytest.approx(written_out(fit.unknowns[0], readings, prior), abs=2e-3)
    # Steps stop where one gains less than 3e-3 nats: a tenth of a standard deviation at most is left.
    assert fit.objective[0] == pytest.approx(theirs.fun, abs=0.02)
    deviation = np.sqrt(np.diag(np.linalg.inv(fit.hessian[0])))
    assert np.all(np.abs(fit.unknowns[0] - theirs.x) < 0.25 * deviation)


@pytest.mark.parametrize("seed", range(6))
def test_gradient_is_that_of_the_objective(seed):
    """Central differences, at random unknowns, with two changes of MN and an outlier among the readings."""
    generator = np.random.default_rng(seed)
    model = MODELS[seed % len(MODELS)]
    k, segment = model[1].size, np.repeat([0, 1, 2], [9, 7, 6])
    readings = readings_of(model, seed, segment=segment)
    readings.apparent_resistivity[11] *= 1.5
    curves, prior = stacked(readings), broad_prior(k, n_segments=2)
    unknowns = near(model, 2) + 0.1 * generator.standard_normal(2 * k + 1)
    state = _evaluate(unknowns, k, curves, prior)
    step = 1e-5
    shifted = unknowns + step * np.vstack([np.eye(unknowns.size), -np.eye(unknowns.size)])
    values = objective(shifted, k, curves, prior).reshape(2, -1)
    np.testing.assert_allclose(-state.gradient[0], (values[0] - values[1]) / (2.0 * step), rtol=1e-5, atol=1e-4)
    assert state.objective[0] == pytest.approx(objective(unknowns, k, curves, prior)[0], abs=1e-9)
    assert state.objective[0] == pytest.approx(written_out(unknowns[0], readings, prior), abs=2e-3)


def test_gradient_vanishes_at_the_fit():
    fit = fit_layers(near(MODELS[0]), 3, stacked(readings_of(MODELS[0], 2)), broad_prior(3))
    state = _evaluate(fit.unknowns, 3, stacked(readings_of(MODELS[0], 2)), broad_prior(3))
    newton = np.linalg.solve(fit.hessian[0], state.gradient[0])
    assert 0.5 * newton @ state.gradient[0] < 0.01  # nats still to gain


@pytest.mark.parametrize("spoilt", [8, 12, 15])
@pytest.mark.parametrize("factor", [1.3, 1 / 1.3])
def test_an_outlier_moves_the_depth_far_less_than_least_squares(spoilt, factor):
    """One reading 30 % off: depth of the base against scipy's plain least squares on the same readings and prior."""
    model, prior = MODELS[0], broad_prior(3)
    clean, spoiled = readings_of(model), readings_of(model)
    spoiled.apparent_resistivity[spoilt] *= factor

    def residuals(unknowns, readings):
        h, rho = np.exp(unknowns[None, :2]), np.exp(unknowns[None, 2:])
        apparent = layered_earth.apparent_resistivity(SPACING, np.zeros(SPACING.size), h, rho)[0]
        misfit = np.log(readings.apparent_resistivity / apparent) / NOISE
        return np.append(misfit, (unknowns - prior.mean[0]) / prior.deviation[0])

    def moved(solve):
        depths = [np.exp(solve(one)[:2]).sum() for one in (clean, spoiled)]
        return abs(depths[1] - depths[0])

    robust = moved(lambda one: fit_layers(near(model), 3, stacked(one), prior).unknowns[0])
    plain = moved(lambda one: least_squares(residuals, near(model)[0], args=(one,)).x)
    assert plain > 0.2
    assert robust < 0.25 * plain
    fit = fit_layers(near(model), 3, stacked(spoiled), prior)
    assert np.argmin(fit.robust_weight[0]) == spoilt
    assert fit.robust_weight[0, spoilt] < 0.05


def test_factors_of_shifted_segments_are_recovered():
    """Two changes of MN, +6 % and then -4 % more: known to the root of the readings in a segment, prior 5 %."""
    segment = np.repeat([0, 1, 2], [9, 7, 6])
    readings = readings_of(MODELS[1], segment=segment)
    readings.apparent_resistivity[:] *= np.array([1.0, 1.06, 1.06 * 0.96])[segment]
    curves = stacked(readings)
    fit = fit_layers(near(MODELS[1], 2), 3, curves, broad_prior(3, n_segments=2))
    found = fit.unknowns[0, 5:]
    deviation = np.sqrt(np.diag(np.linalg.inv(fit.hessian[0])))[5:]
    assert np.all(deviation < 0.04)
    assert np.all(np.abs(found - np.log([1.06, 0.96])) < deviation)
    # A K curve knows h rho of its middle layer, not the parts (Maillet 1947, Geophysics 12, 529-556).
    assert np.exp(fit.unknowns[0, 1] + fit.unknowns[0, 3]) == pytest.approx(2000.0, rel=0.05)


def uniform_ground(log_resistivity, seed, *, shift=None):
    """Readings over uniform ground, whose log response is linear in ln rho and in the factor of a segment."""
    n = 10
    segment = np.repeat([0, 1], 5) if shift is not None else np.zeros(n, dtype=int)
    noise = NOISE * np.random.default_rng(seed).standard_normal(n)
    apparent = np.exp(log_resistivity + noise + (shift or 0.0) * segment)
    return Readings(np.geomspace(2.0, 100.0, n), np.zeros(n), apparent, np.full(n, NOISE), segment)


def test_evidence_of_a_linear_normal_model_is_exact():
    """Against the multivariate normal of the readings, 0.98 of the density of each being the narrow one."""
    readings = uniform_ground(3.4, 1, shift=0.04)
    prior = broad_prior(1, n_segments=1, middle=40.0)
    fit = fit_layers(prior.mean, 1, stacked(readings), prior)
    design = np.column_stack([np.ones(10), readings.segment])
    spread = design @ np.diag(prior.deviation[0] ** 2) @ design.T + NOISE**2 * np.eye(10)
    exact = multivariate_normal.logpdf(np.log(readings.apparent_resistivity), design @ prior.mean[0], spread)
    # The wide part of the mixture adds 0.02 / 0.98 * 0.03 / 0.6 of the narrow one's peak for each reading and more in
    # its flanks.
    assert fit.log_evidence[0] == pytest.approx(exact + 10 * np.log(0.98), abs=0.05)


@pytest.mark.parametrize(("seed", "tolerance"), [(0, 0.02), (1, 0.02), (5, 0.02), (7, 0.02), (3, 0.5)])
def test_evidence_with_an_outlier_agrees_with_quadrature(seed, tolerance):
    """Near exact with an outlier that is plainly one; seed 3 has a reading at 3 deviations too, neither in nor out."""
    readings = uniform_ground(3.4, seed, shift=0.04)
    readings.apparent_resistivity[7] *= 1.35
    prior = broad_prior(1, n_segments=1, middle=40.0)
    fit = fit_layers(np.array([[3.45, 0.0]]), 1, stacked(readings), prior)
    rho, factor = np.linspace(3.2, 3.6, 301), np.linspace(-0.2, 0.25, 301)
    observed = np.log(readings.apparent_resistivity)
    predicted = rho[:, None, None] + factor[None, :, None] * readings.segment
    log_density = log_likelihood(observed - predicted, NOISE)
    log_density += norm.logpdf(rho, prior.mean[0, 0], 1.2)[:, None] + norm.logpdf(factor, 0.0, 0.05)
    assert fit.log_evidence[0] == pytest.approx(log_evidence_on(log_density, rho, factor), abs=tolerance)


def test_robust_misfit_is_minus_the_log_of_the_mixture():
    residual = np.array([[0.0, 0.03, -0.2, 1.0], [0.5, -0.01, 0.0, 0.0]])
    deviation = np.array([[0.03, 0.03, 0.05, 0.8], [0.03, 0.03, np.inf, np.inf]])
    misfit, inlier, weight = robust_misfit(residual, deviation)
    assert misfit[0] == pytest.approx(-log_likelihood(residual[0], deviation[0]))
    assert misfit[1] == pytest.approx(-log_likelihood(residual[1, :2], 0.03))
    assert inlier[0, 0] > 0.99
    assert inlier[1, 0] < 1e-6
    assert np.all(weight[1, 2:] == 0.0)


def batch(n_readings=(22, 14, 9)):
    """Three curves of one layer count and unlike length, one with a change of MN."""
    curves = [readings_of(MODELS[i % 2], 10 + i, spacing=SPACING[:n]) for i, n in enumerate(n_readings)]
    curves[0].segment[12:] = 1
    return curves


def test_a_batch_is_what_each_is_alone():
    """Padded with others to one length and to one number of segments, or alone: the same fit."""
    together = batch()
    prior = broad_prior(3, 3, n_segments=1)
    fits = fit_layers(np.tile(near(MODELS[0], 1), (3, 1)), 3, stacked(*together), prior)
    wavenumber = stacked(*together).wavenumber
    for i, one in enumerate(together):
        s = int(one.segment.max())
        own = fit_layers(near(MODELS[0], s), 3, stack_curves([one], wavenumber), broad_prior(3, n_segments=s))
        np.testing.assert_allclose(fits.unknowns[i, : 5 + s], own.unknowns[0], rtol=1e-7, atol=1e-9)
        # A factor that touches no reading keeps its prior, whose normalised density at its mean is left over.
        unused = (1 - s) * (0.5 * np.log(2.0 * np.pi) + np.log(0.05))
        assert fits.objective[i] - unused == pytest.approx(own.objective[0], abs=1e-7)
        assert fits.log_evidence[i] == pytest.approx(own.log_evidence[0], abs=1e-7)
        n = one.half_spacing.size
        np.testing.assert_allclose(fits.log_response[i, :n], own.log_response[0], rtol=1e-7)


def test_taking_rows_keeps_their_order():
    curves, prior = stacked(*batch()), broad_prior(3, 3)
    rows = np.array([2, 0])
    np.testing.assert_array_equal(curves.take(rows).weights, curves.weights[rows])
    np.testing.assert_array_equal(curves.take(rows).segments, curves.segments[rows])
    np.testing.assert_array_equal(prior.take(rows).mean, prior.mean[rows])


def test_the_search_stays_within_its_bounds():
    """The base wants 500 ohm m and may have 80 at most: it stops there, and the rest makes the best of it."""
    prior = broad_prior(3)
    prior.highest[0, 4] = np.log(80.0)
    fit = fit_layers(near(MODELS[0]), 3, stacked(readings_of(MODELS[0])), prior)
    assert fit.unknowns[0, 4] == pytest.approx(np.log(80.0))
    state = _evaluate(fit.unknowns, 3, stacked(readings_of(MODELS[0])), prior)
    assert state.gradient[0, 4] > 0
    free = np.arange(4)
    newton = np.linalg.solve(state.hessian[0][np.ix_(free, free)], state.gradient[0, free])
    assert 0.5 * newton @ state.gradient[0, free] < 0.02


def test_the_better_of_two_fits_is_kept_row_by_row():
    curves, prior = stacked(*(readings_of(MODELS[0], seed) for seed in (1, 2))), broad_prior(3, 2)
    good = fit_layers(np.tile(near(MODELS[0]), (2, 1)), 3, curves, prior)
    poor = Fit(*(values.copy() for values in good))
    poor.objective[:] += [5.0, -5.0]
    poor.unknowns[:] += 1.0
    kept = keep_better(good, poor)
    np.testing.assert_array_equal(kept.unknowns[0], good.unknowns[0])
    np.testing.assert_array_equal(kept.unknowns[1], poor.unknowns[1])
    np.testing.assert_array_equal(kept.objective, np.minimum(good.objective, poor.objective))


def test_laplace_draws_have_the_inverse_hessian_as_covariance():
    fit = fit_layers(near(MODELS[0]), 3, stacked(readings_of(MODELS[0])), broad_prior(3))
    draws = laplace_draws(fit, np.random.default_rng(1).standard_normal((40_000, 5)))
    expected = np.linalg.inv(fit.hessian[0])
    scale = np.sqrt(np.outer(np.diag(expected), np.diag(expected)))
    # 40 000 draws: standard error of a correlation 0.005.
    np.testing.assert_allclose(np.cov(draws, rowvar=False) / scale, expected / scale, atol=0.03)
    np.testing.assert_allclose(draws.mean(axis=0), fit.unknowns[0], atol=0.03 * np.sqrt(np.diag(expected)).max())
