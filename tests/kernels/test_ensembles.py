"""Importance sampling against posteriors added up on dense grids (tests/reference/grid_posterior.py)."""

import numpy as np
import pytest
from scipy.stats import multivariate_t, norm

from geoves.kernels import layered_earth
from geoves.kernels.damped_steps import Prior, Readings, fit_layers, laplace_draws, objective, stack_curves
from geoves.kernels.ensembles import FREEDOM, WIDENING, Members, resample, sample_importance
from tests.reference.grid_posterior import (
    log_evidence_on,
    log_likelihood,
    log_two_layer_curve,
    moments_on,
    two_layer_posterior,
)

NOISE = 0.05
COUNT = 6000


def observed_curve(spacing, thickness, resistivity, seed):
    """Natural logs of a noisy two-layer curve by images."""
    noise = NOISE * np.random.default_rng(seed).standard_normal(spacing.size)
    return log_two_layer_curve(spacing, thickness, resistivity) + noise


def as_curves(spacing, observed):
    n = spacing.size
    readings = Readings(spacing, np.zeros(n), np.exp(observed), np.full(n, NOISE), np.zeros(n, dtype=int))
    return stack_curves([readings], layered_earth.shared_wavenumbers([(spacing, np.zeros(n))]))


def as_prior(mean, deviation, reach=8.0):
    mean, deviation = np.array([mean]), np.array([deviation])
    return Prior(mean, deviation, mean - reach * deviation, mean + reach * deviation)


def known_well(sampled, exact, evidence_tolerance=0.06):
    """Members against (mean, deviation) of each unknown and the log evidence on the grid."""
    members, moments, evidence = sampled, *exact
    weight = np.exp(members.log_weight - np.logaddexp.reduce(members.log_weight))
    mean = weight @ members.unknowns
    deviation = np.sqrt(weight @ (members.unknowns - mean) ** 2)
    for found, spread, (truth, true_spread) in zip(mean, deviation, moments, strict=True):
        assert found == pytest.approx(truth, abs=0.08 * true_spread)
        assert spread == pytest.approx(true_spread, rel=0.1)
    assert members.log_evidence == pytest.approx(evidence, abs=evidence_tolerance)


@pytest.mark.parametrize(
    ("resistivity", "reach"), [((60.0, 15.0), 80.0), ((20.0, 80.0), 60.0)], ids=["falling", "rising, short spread"]
)
def test_moments_and_evidence_of_one_layer_over_a_half_space(resistivity, reach):
    spacing = np.geomspace(2.0, reach, 8)
    observed = observed_curve(spacing, 12.0, resistivity, 4)
    mean, spread = np.log([10.0, 40.0, 40.0]), np.array([0.8, 0.7, 0.7])
    prior, curves = as_prior(mean, spread), as_curves(spacing, observed)
    fit = fit_layers(np.log([[12.0, *resistivity]]), 2, curves, prior)
    # Axes as wide as the posterior: the grid itself is checked to hold all of it.
    deviation = np.sqrt(np.diag(np.linalg.inv(fit.hessian[0])))
    best = fit.unknowns[0]
    across = np.hypot(deviation[2], deviation[1])
    axes = (
        np.linspace(best[0] - 6 * deviation[0], best[0] + 8 * deviation[0], 57),
        np.linspace(best[1] - 6 * deviation[1], best[1] + 6 * deviation[1], 49),
        np.linspace(best[2] - best[1] - 7 * across, best[2] - best[1] + 7 * across, 57),
    )
    log_density = two_layer_posterior(spacing, observed, NOISE, (mean, spread), axes)
    share = np.exp(log_density - log_density.max())
    edge = max(share[0].max(), share[-1].max(), share[:, :, 0].max(), share[:, :, -1].max(), share[:, -1].max())
    assert edge < 1e-3
    h, upper, ratio = np.meshgrid(*axes, indexing="ij")
    exact = moments_on(log_density, h, upper, upper + ratio), log_evidence_on(log_density, *axes)
    known_well(sample_importance(fit, 2, curves, prior, COUNT, np.random.default_rng(1)), exact)


class TwoClays:
    """Two clays of one known resistivity on known rock: the curve knows the sum of their thicknesses, not the parts."""

    CLAY, ROCK = 18.0, 70.0
    SPACING = np.geomspace(3.0, 120.0, 8)
    # Parts of 3 to 30 m each, in the middle 10.
    MEAN, SPREAD = np.log(10.0), 0.9
    KNOWN = 1e-4  # deviation of the log resistivities

    def __init__(self, total=40.0):
        self.observed = observed_curve(self.SPACING, total, (self.CLAY, self.ROCK), 2)
        logs = [self.MEAN, self.MEAN, *np.log([self.CLAY, self.CLAY, self.ROCK])]
        self.prior = as_prior(logs, [self.SPREAD, self.SPREAD, self.KNOWN, self.KNOWN, self.KNOWN])
        self.curves = as_curves(self.SPACING, self.observed)
        start = np.array([logs])
        start[0, :2] = np.log(0.5 * total)
        self.fit = fit_layers(start, 3, self.curves, self.prior)

    def exact(self):
        """Mean and deviation of the sum, and the evidence, over a grid of the two log thicknesses."""
        axis = np.linspace(self.MEAN - 5 * self.SPREAD, self.MEAN + 4 * self.SPREAD, 351)
        both = np.logaddexp(axis[:, None], axis[None, :])
        grid = np.linspace(both.min(), both.max(), 240)
        curves = [log_two_layer_curve(self.SPACING, np.exp(total), (self.CLAY, self.ROCK), 400) for total in grid]
        curve = log_likelihood(self.observed - np.array(curves), NOISE)
        log_density = np.interp(both, grid, curve)
        log_density += norm.logpdf(axis, self.MEAN, self.SPREAD)[:, None] + norm.logpdf(axis, self.MEAN, self.SPREAD)
        return moments_on(log_density, np.exp(both))[0], log_evidence_on(log_density, axis, axis)


def test_a_sum_that_is_known_although_its_parts_are_not():
    """Draws of the normal approximation push the sum upward; weighing them by the posterior mends it."""
    clays = TwoClays()
    (mean, spread), evidence = clays.exact()
    normal = np.random.default_rng(3).standard_normal((COUNT, 5))
    crude = np.exp(laplace_draws(clays.fit, normal)[:, :2]).sum(axis=1)
    assert crude.mean() > mean + spread
    members = sample_importance(clays.fit, 3, clays.curves, clays.prior, COUNT, np.random.default_rng(4))
    rows = resample(members.log_weight, 4000, np.random.default_rng(5))
    sums = np.exp(members.unknowns[rows, :2]).sum(axis=1)
    assert sums.mean() == pytest.approx(mean, abs=0.15 * spread)
    assert sums.std() == pytest.approx(spread, rel=0.15)
    # The arms, one part thin and the other nearly all, are reached seldom: the evidence comes out somewhat low.
    assert evidence - 0.6 < members.log_evidence < evidence + 0.1
    # The parts stay as open as the sum lets them.
    assert np.std(members.unknowns[rows, 0]) > 3.0 * spread / mean


def small_fit(reach=8.0):
    spacing = np.geomspace(2.0, 80.0, 8)
    prior = as_prior(np.log([10.0, 40.0, 40.0]), [0.8, 0.7, 0.7], reach)
    curves = as_curves(spacing, observed_curve(spacing, 12.0, (60.0, 15.0), 4))
    return fit_layers(np.log([[12.0, 60.0, 15.0]]), 2, curves, prior), curves, prior


def test_members_stay_within_the_bounds():
    """A bound through the middle of the posterior: what lies beyond has no weight."""
    fit, curves, prior = small_fit()
    prior.highest[0, 0] = fit.unknowns[0, 0]
    members = sample_importance(fit, 2, curves, prior, 2000, np.random.default_rng(1))
    rows = resample(members.log_weight, 1000, np.random.default_rng(2))
    assert np.all(members.unknowns[rows, 0] < fit.unknowns[0, 0])
    assert 0.3 < np.mean(np.isneginf(members.log_weight)) < 0.7


def test_weights_are_posterior_over_proposal_and_no_lone_draw_speaks_for_all():
    """Against scipy's multivariate t, about a fit ten times too sure, whose outermost draw takes most of the weight.

    It is cut to the mean times the root of the number (Ionides 2008, Journal of Computational and Graphical
    Statistics 17, 295-311, from memory).
    """
    fit, curves, prior = small_fit()
    sure = fit._replace(hessian=100.0 * fit.hessian)
    members = sample_importance(sure, 2, curves, prior, 400, np.random.default_rng(1))
    proposal = multivariate_t(fit.unknowns[0], WIDENING**2 * np.linalg.inv(sure.hessian[0]), df=FREEDOM)
    log_weight = -objective(members.unknowns, 2, curves, prior) - proposal.logpdf(members.unknowns)
    total = np.logaddexp.reduce(log_weight)
    assert np.exp(log_weight.max() - total) > 0.5
    most = total - 0.5 * np.log(400)
    np.testing.assert_allclose(members.log_weight, np.minimum(log_weight, most), atol=1e-8)


def test_a_seed_repeats_to_the_bit():
    fit, curves, prior = small_fit()
    first, second = (sample_importance(fit, 2, curves, prior, 300, np.random.default_rng(8)) for _ in range(2))
    np.testing.assert_array_equal(first.unknowns, second.unknowns)
    np.testing.assert_array_equal(first.log_weight, second.log_weight)


def test_resampling_gives_each_its_share_to_within_one():
    """Systematic resampling (Kitagawa 1996): a member of weight w is kept floor(n w) or ceil(n w) times."""
    generator = np.random.default_rng(1)
    for _ in range(20):
        log_weight = 3.0 * generator.standard_normal(30)
        share = np.exp(log_weight - np.logaddexp.reduce(log_weight))
        kept = np.bincount(resample(log_weight, 100, generator), minlength=30)
        assert kept.sum() == 100
        assert np.all(np.abs(kept - 100 * share) < 1.0 + 1e-9)


def test_the_evidence_is_the_mean_weight():
    members = Members(np.zeros((4, 1)), np.log([1.0, 2.0, 3.0, 6.0]))
    assert members.log_evidence == pytest.approx(np.log(3.0))
