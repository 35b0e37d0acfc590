"""Sampling from a growing mixture against posteriors added up on dense grids (tests/reference/grid_posterior.py)."""

import numpy as np
import pytest
from scipy.stats import multivariate_t, norm

from geoves.kernels import layered_earth
from geoves.kernels.damped_steps import (
    Prior,
    Readings,
    fit_layers,
    laplace_draws,
    local_hessian,
    objective,
    stack_curves,
)
from geoves.kernels.ensembles import (
    ADDED_FREEDOM,
    FIRST_FREEDOM,
    WIDENING,
    Density,
    Effort,
    Members,
    effective_number,
    resample,
    sample_densities,
)
from tests.reference.grid_posterior import (
    log_evidence_on,
    log_likelihood,
    log_two_layer_curve,
    moments_on,
    two_layer_posterior,
)

NOISE = 0.05
COUNT = 6000
# All members about the fit; and as many in rounds about the heaviest draws.
PLAIN = Effort(first=COUNT, fewest=1, each=1, at_once=1, rounds=0, enough=0.0)
GROWING = Effort(first=1500, fewest=1, each=150, at_once=3, rounds=10, enough=np.inf)


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


def sample_one(fit, n_layers, curves, prior, effort, seed):
    (members,) = sample_densities([Density(fit, n_layers, prior)], curves, effort, np.random.default_rng(seed))
    return members


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


@pytest.mark.parametrize("effort", [PLAIN, GROWING], ids=["plain", "growing"])
@pytest.mark.parametrize(
    ("resistivity", "reach"), [((60.0, 15.0), 80.0), ((20.0, 80.0), 60.0)], ids=["falling", "rising, short spread"]
)
def test_moments_and_evidence_of_one_layer_over_a_half_space(resistivity, reach, effort):
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
    known_well(sample_one(fit, 2, curves, prior, effort, 1), exact)


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
    members = sample_one(clays.fit, 3, clays.curves, clays.prior, GROWING, 4)
    rows = resample(members.log_weight, 4000, np.random.default_rng(5))
    sums = np.exp(members.unknowns[rows, :2]).sum(axis=1)
    assert sums.mean() == pytest.approx(mean, abs=0.15 * spread)
    assert sums.std() == pytest.approx(spread, rel=0.15)
    assert members.log_evidence == pytest.approx(evidence, abs=0.1)
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
    members = sample_one(fit, 2, curves, prior, PLAIN._replace(first=2000), 1)
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
    members = sample_one(sure, 2, curves, prior, PLAIN._replace(first=400), 1)
    proposal = multivariate_t(fit.unknowns[0], WIDENING**2 * np.linalg.inv(sure.hessian[0]), df=FIRST_FREEDOM)
    log_weight = -objective(members.unknowns, 2, curves, prior) - proposal.logpdf(members.unknowns) - np.log(400)
    total = np.logaddexp.reduce(log_weight)
    assert np.exp(log_weight.max() - total) > 0.5
    most = total - 0.5 * np.log(400)
    np.testing.assert_allclose(members.log_weight, np.minimum(log_weight, most), atol=1e-8)


SMALL = Effort(first=100, fewest=1, each=50, at_once=1, rounds=1, enough=np.inf)


def test_a_component_about_the_heaviest_draw_counts_in_every_weight():
    """The mixture of two of scipy's multivariate t, 100 members and 50, each member weighed by both together."""
    fit, curves, prior = small_fit()
    sure = fit._replace(hessian=100.0 * fit.hessian)
    members = sample_one(sure, 2, curves, prior, SMALL, 1)
    first = multivariate_t(fit.unknowns[0], WIDENING**2 * np.linalg.inv(sure.hessian[0]), df=FIRST_FREEDOM)
    log_posterior = -objective(members.unknowns, 2, curves, prior)
    alone = log_posterior[:100] - first.logpdf(members.unknowns[:100])
    centre = members.unknowns[np.argmax(alone)]
    hessian = local_hessian(centre[None], 2, curves, prior)[0]
    second = multivariate_t(centre, np.linalg.inv(hessian), df=ADDED_FREEDOM)
    mixture = 100.0 * first.pdf(members.unknowns) + 50.0 * second.pdf(members.unknowns)
    log_weight = log_posterior - np.log(mixture)
    most = np.logaddexp.reduce(log_weight) - 0.5 * np.log(150)
    np.testing.assert_allclose(members.log_weight, np.minimum(log_weight, most), atol=1e-8)
    assert effective_number(members.log_weight) > 5.0 * effective_number(alone)


def test_rounds_end_when_the_members_are_worth_enough():
    fit, curves, prior = small_fit()
    few = sample_one(fit, 2, curves, prior, SMALL._replace(rounds=20, enough=10.0), 1)
    more = sample_one(fit, 2, curves, prior, SMALL._replace(rounds=20, enough=150.0), 1)
    assert len(few.log_weight) == 100 < len(more.log_weight) < 100 + 20 * 50
    assert effective_number(more.log_weight) >= 150.0


def test_effort_goes_to_the_density_that_weighs():
    """Two densities alike but for 4 nats of prior weight: their evidences differ by that, and so does the effort."""
    fit, curves, prior = small_fit()
    pair = [Density(fit, 2, prior), Density(fit, 2, prior, log_weight=-4.0)]
    effort = GROWING._replace(first=600, fewest=60)
    heavy, light = sample_densities(pair, curves, effort, np.random.default_rng(3))
    assert 60 <= len(light.log_weight) < 0.2 * len(heavy.log_weight)
    assert heavy.log_evidence - light.log_evidence == pytest.approx(4.0, abs=0.4)


def test_limits_take_weight_away():
    """A limit that halves the posterior's weight above its median leaves the evidence 0.75 of what it was."""
    fit, curves, prior = small_fit()
    free = sample_one(fit, 2, curves, prior, GROWING, 5)
    weight = np.exp(free.log_weight - free.log_evidence)
    order = np.argsort(free.unknowns[:, 0])
    median = free.unknowns[order, 0][np.searchsorted(np.cumsum(weight[order]), 0.5)]
    limited = Density(fit, 2, prior, limits=lambda u: np.where(u[:, 0] > median, np.log(0.5), 0.0))
    (members,) = sample_densities([limited], curves, GROWING, np.random.default_rng(6))
    assert members.log_evidence - free.log_evidence == pytest.approx(np.log(0.75), abs=0.06)


def test_a_fit_outside_of_all_that_is_allowed_speaks_for_itself():
    fit, curves, prior = small_fit()
    nowhere = prior._replace(lowest=prior.highest)
    members = sample_one(fit, 2, curves, nowhere, SMALL, 1)
    np.testing.assert_array_equal(members.unknowns, fit.unknowns)
    assert members.log_evidence == pytest.approx(float(fit.log_evidence[0]))


def test_a_seed_repeats_to_the_bit():
    fit, curves, prior = small_fit()
    first, second = (sample_one(fit, 2, curves, prior, SMALL, 8) for _ in range(2))
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


def test_the_evidence_is_the_sum_of_weights():
    assert Members(np.zeros((4, 1)), np.log([1.0, 2.0, 3.0, 6.0])).log_evidence == pytest.approx(np.log(12.0))


def test_effective_number_counts_equal_weights():
    """Kish (1965): n for n equal weights, whatever their scale, one for a lone weight, none without any."""
    assert effective_number(np.full(7, -300.0)) == pytest.approx(7.0)
    assert effective_number(np.array([0.0, -np.inf, -np.inf])) == pytest.approx(1.0)
    assert effective_number(np.full(3, -np.inf)) == 0.0
    assert effective_number(np.log([1.0, 2.0, 3.0])) == pytest.approx(36.0 / 14.0)
