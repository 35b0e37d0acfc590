"""Laws of Gaussian fields that places speak of: against dense algebra, and covariances against what they were made of.

The dense answers are generalised least squares written out (Tarantola 2005, Inverse Problem Theory, eq. 3.37-3.38, from
memory): with Gaussian likelihoods expectation propagation is exact, whatever the cavities were (Minka 2001).
"""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import check_grad

from geoves.kernels import field_priors
from geoves.kernels.covariances import Covariance, covariance_matrix
from geoves.kernels.field_priors import FieldPrior, fit_prior, own_covariance, weights_at
from geoves.kernels.latent_fields import Sites, cavities, condition, cut, denoise, match

quick = settings(max_examples=20, deadline=None, derandomize=True)
seeds = st.integers(0, 2**32 - 1)


class Problem:
    """q fields at n places; each place observes `seen` linear combinations of its fields with normal errors."""

    def __init__(self, seed, q=4, n=9, error=(0.05, 2.0)):
        generator = np.random.default_rng(seed)
        self.q, self.n = q, n
        points = generator.uniform(0.0, 1000.0, (n, 2))
        self.mean = generator.normal(0.0, 2.0, q)
        self.prior = np.array([self._covariance(points, generator) for _ in range(q)])
        self.design = generator.normal(0.0, 1.0, (n, 2, q))  # fewer than the fields: each site alone is singular
        self.error = generator.uniform(*error, (n, 2))
        self.data = generator.normal(0.0, 3.0, (n, 2))

    @staticmethod
    def _covariance(points, generator):
        shape = Covariance(
            "matern32", generator.uniform(0.01, 0.3), generator.uniform(0.3, 2.0), generator.uniform(200, 900)
        )
        prior = FieldPrior(0.0, shape, generator.uniform(0.0, 1.0), 1.0, 1.0, 0.1)
        return own_covariance(prior, points, np.zeros(len(points)))

    @property
    def sites(self):
        weighted = self.design / self.error[..., None] ** 2
        return Sites(np.einsum("iof,iog->ifg", weighted, self.design), np.einsum("iof,io->if", weighted, self.data))

    def solve(self, left_out=()):
        """Mean (q, n) and covariance (q n, q n) by generalised least squares in data space."""
        q, n = self.q, self.n
        prior = np.zeros((q, n, q, n))
        prior[np.arange(q), :, np.arange(q)] = self.prior
        prior = prior.reshape(q * n, q * n)
        kept = [i for i in range(n) if i not in left_out]
        jacobian = np.zeros((len(kept), 2, q, n))
        for row, i in enumerate(kept):
            jacobian[row, :, :, i] = self.design[i]
        jacobian = jacobian.reshape(-1, q * n)
        mean = np.repeat(self.mean, n)
        within = jacobian @ prior @ jacobian.T + np.diag(self.error[kept].ravel() ** 2)
        gain = np.linalg.solve(within, jacobian @ prior).T
        mean = mean + gain @ (self.data[kept].ravel() - jacobian @ mean)
        return mean.reshape(q, n), prior - gain @ jacobian @ prior


@quick
@given(seeds)
def test_fields_given_sites_are_generalised_least_squares(seed):
    problem = Problem(seed)
    found = condition(problem.mean, problem.prior, problem.sites)
    mean, covariance = problem.solve()
    np.testing.assert_allclose(found.mean, mean, atol=1e-6)
    np.testing.assert_allclose(found.covariance, covariance, atol=1e-6)
    at_mean, at_covariance = found.at_places()
    full = covariance.reshape(problem.q, problem.n, problem.q, problem.n)
    for i in range(problem.n):
        np.testing.assert_allclose(at_mean[i], mean[:, i], atol=1e-6)
        np.testing.assert_allclose(at_covariance[i], full[:, i, :, i], atol=1e-6)
    np.testing.assert_allclose(found.block(1, 2), full[1, :, 2], atol=1e-6)
    np.testing.assert_allclose(found.deviation(3) ** 2, np.diag(full[3, :, 3]), atol=1e-6)


@quick
@given(seeds)
def test_a_cavity_is_what_all_others_say(seed):
    problem = Problem(seed)
    found = condition(problem.mean, problem.prior, problem.sites)
    cavity_mean, cavity_precision = cavities(*found.at_places(), problem.sites)
    for i in (0, 4):
        mean, covariance = problem.solve(left_out=(i,))
        full = covariance.reshape(problem.q, problem.n, problem.q, problem.n)[:, i, :, i]
        np.testing.assert_allclose(np.linalg.inv(cavity_precision[i]), full, rtol=1e-5, atol=1e-5)
        np.testing.assert_allclose(cavity_mean[i], mean[:, i], rtol=1e-5, atol=1e-5)


@pytest.mark.parametrize("error", [0.3, 3e-3])
def test_a_cavity_beside_a_sure_log(error):
    # A log fixes the basal contact to 0.3 m in 100: what the others say must not drown in rounding.
    problem = Problem(5, error=(error, error))
    found = condition(problem.mean, problem.prior, problem.sites)
    cavity_mean, cavity_precision = cavities(*found.at_places(), problem.sites)
    for i in range(problem.n):
        mean, covariance = problem.solve(left_out=(i,))
        full = covariance.reshape(problem.q, problem.n, problem.q, problem.n)[:, i, :, i]
        deviation = np.sqrt(np.diag(full))
        assert np.max(np.abs(cavity_mean[i] - mean[:, i]) / deviation) < 0.02
        widths = np.sqrt(np.diag(np.linalg.inv(cavity_precision[i])))
        np.testing.assert_allclose(widths, deviation, rtol=0.02)


def moments_under(problem, cavity_mean, cavity_precision):
    """Mean and covariance of each place's fields under its cavity and its own normal data: Bayes's rule for normals."""
    sites = problem.sites
    covariance = np.linalg.inv(cavity_precision + sites.precision)
    shift = np.matmul(cavity_precision, cavity_mean[..., None])[..., 0] + sites.shift
    return np.matmul(covariance, shift[..., None])[..., 0], covariance


@quick
@given(seeds)
def test_one_round_is_exact_for_normal_likelihoods(seed):
    problem = Problem(seed)
    q, n = problem.q, problem.n
    nothing = Sites(np.zeros((n, q, q)), np.zeros((n, q)))
    before = condition(problem.mean, problem.prior, nothing)
    cavity = cavities(*before.at_places(), nothing)
    sites = match(*cavity, *moments_under(problem, *cavity))
    np.testing.assert_allclose(sites.precision, problem.sites.precision, rtol=1e-5, atol=1e-4)
    found = condition(problem.mean, problem.prior, sites)
    mean, covariance = problem.solve()
    np.testing.assert_allclose(found.mean, mean, atol=1e-5)
    np.testing.assert_allclose(found.covariance, covariance, atol=1e-5)
    # And it stays: the next round finds the same sites.
    cavity = cavities(*found.at_places(), sites)
    again = match(*cavity, *moments_under(problem, *cavity))
    np.testing.assert_allclose(again.precision, sites.precision, rtol=1e-3, atol=1e-3)


def test_a_site_never_takes_precision_away():
    cavity_precision = np.array([[[4.0, 1.0], [1.0, 3.0]]])
    covariance = np.linalg.inv(cavity_precision) * np.array([[1.0, 1.0], [1.0, 1.0]]) + np.diag([0.5, 0.0])
    sites = match(np.zeros((1, 2)), cavity_precision, np.array([[0.2, -0.1]]), covariance)
    assert np.all(np.linalg.eigvalsh(sites.precision) >= -1e-9)
    # The mean found is met all the same.
    total = cavity_precision + sites.precision
    np.testing.assert_allclose(np.linalg.solve(total[0], sites.shift[0]), [0.2, -0.1], atol=1e-9)


def test_a_place_that_says_nothing_has_no_site():
    cavity_precision = np.eye(3)[None] * 2.0
    sites = match(np.ones((1, 3)), cavity_precision, np.ones((1, 3)), np.eye(3)[None] * 0.5)
    np.testing.assert_allclose(sites.precision, 0.0, atol=1e-9)
    np.testing.assert_allclose(sites.shift, 0.0, atol=1e-9)


def test_a_covariance_that_is_none_is_refused():
    with pytest.raises(np.linalg.LinAlgError):
        condition(np.zeros(1), np.eye(2)[None], Sites(np.full((2, 1, 1), -3.0), np.zeros((2, 1))))


# Priors of fields


def scattered(n, seed):
    return np.random.default_rng(seed).uniform(0.0, 10_000.0, (n, 2))


@quick
@given(seeds, st.booleans(), st.booleans())
def test_gradient_of_the_fit(seed, directed, follows):
    generator = np.random.default_rng(seed)
    points, relief = generator.uniform(0.0, 5000.0, (12, 2)), generator.uniform(-10.0, 90.0, 12)
    prior = FieldPrior(
        0.5, Covariance("matern32", 0.1, 0.9, 1500.0), 0.4, 1.3, 0.7, 0.2, 0.8 if follows else 0.0, directed=directed
    )
    draws = generator.normal(0.0, 1.0, (12, 30))
    problem = field_priors._Moments(
        prior,
        field_priors.square_distances(points, 7000.0),
        field_priors.relief_kernel(relief, relief),
        draws @ draws.T / 30.0,
    )
    at = np.array([0.2, -2.0, -1.0, 0.4, -0.3, -0.5]) + generator.normal(0.0, 0.3, 6)
    slope = field_priors._penalised(at, problem)[1]
    off = check_grad(
        lambda x: field_priors._penalised(x, problem)[0], lambda x: field_priors._penalised(x, problem)[1], at
    )
    assert off < 1e-4 * max(1.0, np.abs(slope).max())


def test_a_fit_finds_the_covariance_that_the_moment_was_made_of():
    # The least of ½ ln|K| + ½ tr(K⁻¹ S) at S = K0 is K0 itself; weak priors draw little with so many places.
    points = scattered(90, 2)
    truth = FieldPrior(0.0, Covariance("matern32", 0.1, 1.2, 4000.0, 60.0, 0.4), 0.2, 1.0, 1.0, 0.5, 0.0, directed=True)
    start = truth._replace(covariance=Covariance("matern32", 0.3, 0.7, 1500.0))
    relief = np.zeros(90)
    moment = own_covariance(truth, points, relief)
    found = fit_prior(start, points, relief, moment).covariance
    assert found.partial_sill == pytest.approx(1.2, rel=0.1)
    assert found.nugget == pytest.approx(0.1, rel=0.1)
    assert found.length == pytest.approx(4000.0, rel=0.1)
    assert found.ratio == pytest.approx(0.4, rel=0.2)  # drawn toward 1 by its prior
    assert found.azimuth_deg == pytest.approx(60.0, abs=4.0)


@pytest.mark.parametrize(("truth", "low", "high"), [(2.0, 1.2, 3.0), (0.0, 0.0, 0.2)])
def test_a_fit_finds_whether_a_field_follows_the_relief(truth, low, high):
    points, relief = scattered(80, 3), np.random.default_rng(4).uniform(-10.0, 110.0, 80)
    shape = Covariance("matern32", 0.05, 0.95, 2500.0)
    start = FieldPrior(0.0, shape, 0.5, 1.0, 0.1, 0.1, 1.0)
    moment = own_covariance(start._replace(relief_variance=truth), points, relief)
    found = fit_prior(start, points, relief, moment)
    assert low <= found.relief_variance <= high


def test_a_field_that_has_no_direction_keeps_none():
    points = scattered(80, 6)
    truth = FieldPrior(0.0, Covariance("matern32", 0.1, 0.9, 4000.0, 60.0, 0.4), 0.2, 1.0, 1.0, 0.2)
    found = fit_prior(truth._replace(covariance=Covariance("matern32", 0.1, 0.9, 3000.0)), points, np.zeros(80),
                      own_covariance(truth, points, np.zeros(80)))  # fmt: skip
    assert found.covariance.ratio == 1.0
    assert found.relief_variance == 0.0


def test_a_fit_does_not_depend_on_units():
    points = scattered(60, 7)
    truth = FieldPrior(0.0, Covariance("matern32", 0.1, 0.9, 3000.0), 0.2, 1.0, 1.0, 0.2)
    start = truth._replace(covariance=Covariance("matern32", 0.2, 0.8, 2000.0))
    moment = own_covariance(truth, points, np.zeros(60))
    one = fit_prior(start, points, np.zeros(60), moment)
    scaled = start._replace(
        covariance=Covariance("matern32", 0.2 * 49.0, 0.8 * 49.0, 2000.0 / 0.3048),
        drift_variance=0.2 * 49.0,
        variance=49.0,
    )
    other = fit_prior(scaled, points / 0.3048, np.zeros(60), moment * 49.0)
    assert other.covariance.length * 0.3048 == pytest.approx(one.covariance.length, rel=1e-4)
    assert other.covariance.partial_sill / 49.0 == pytest.approx(one.covariance.partial_sill, rel=1e-4)


def test_weights_to_cells_are_the_dense_ones():
    points, cells = scattered(15, 8), scattered(4, 9)
    relief, cell_relief = np.linspace(0.0, 80.0, 15), np.linspace(10.0, 60.0, 4)
    prior = FieldPrior(0.0, Covariance("matern32", 0.2, 0.8, 4000.0, 30.0, 0.5), 0.3, 1.0, 1.0, 0.2, 0.7)
    weights, left = weights_at(prior, points, cells, (cell_relief, relief))

    def dense(a, b, relief_a, relief_b):
        follows = np.exp(-0.5 * ((relief_a[:, None] - relief_b) / 40.0) ** 2)
        return covariance_matrix(a, b, prior.covariance) + 0.3 + 0.7 * follows

    own = dense(points, points, relief, relief) + 0.2 * np.eye(15)
    between = dense(points, cells, relief, cell_relief)
    expected = np.linalg.solve(own, between)
    np.testing.assert_allclose(weights, expected, atol=1e-6)
    np.testing.assert_allclose(left, 0.2 + 0.8 + 0.3 + 0.7 - np.sum(between * expected, axis=0), atol=1e-6)


def test_chance_alone_is_not_taken_for_knowledge():
    """Draws of the cavity itself know nothing; draws of a sharp field are known as sharp as they are."""
    generator = np.random.default_rng(4)
    root = generator.normal(size=(12, 12))
    precision = (root @ root.T + np.eye(12))[None]
    draws = generator.multivariate_normal(np.zeros(12), np.linalg.inv(precision[0]), (20, 150))
    seen = np.array([np.cov(one.T, bias=True) for one in draws])
    nothing, cavity = np.zeros((20, 12)), np.repeat(precision, 20, axis=0)
    kept = match(nothing, cavity, nothing, denoise(cavity, seen, np.full(20, 150.0))).precision
    raw = match(nothing, cavity, nothing, seen).precision
    share = np.trace(np.linalg.solve(cavity, kept), axis1=1, axis2=2).mean()
    assert share < 0.1 * np.trace(np.linalg.solve(cavity, raw), axis1=1, axis2=2).mean()

    known = np.diag([0.01] + [1.0] * 11)
    draws = generator.multivariate_normal(np.zeros(12), known, 150)
    found = denoise(np.eye(12)[None], np.cov(draws.T, bias=True)[None], np.array([150.0]))
    np.testing.assert_allclose(found[0], known, atol=0.15)
    assert found[0, 0, 0] == pytest.approx(0.01, rel=0.5)


def test_cut_fields_keep_what_others_say_of_them():
    """The joint normal of the cavity's marginal and the moments' conditional, written out."""
    generator = np.random.default_rng(5)
    one, two = (np.cov(generator.normal(size=(3, 40)) * [[1], [2], [0.5]]) for _ in range(2))
    mean, cavity_mean = generator.normal(size=3), generator.normal(size=3)
    new_mean, new = cut(cavity_mean[None], np.linalg.inv(one)[None], mean[None], two[None], np.array([1]))
    slope = two[[0, 2], 1] / two[1, 1]
    assert new_mean[0, 1] == pytest.approx(cavity_mean[1])
    assert new[0, 1, 1] == pytest.approx(one[1, 1])
    np.testing.assert_allclose(new_mean[0, [0, 2]], mean[[0, 2]] + slope * (cavity_mean[1] - mean[1]))
    np.testing.assert_allclose(new[0, [0, 2], 1], slope * one[1, 1])
    left = two[np.ix_([0, 2], [0, 2])] - np.outer(slope, slope) * two[1, 1]
    np.testing.assert_allclose(new[0][np.ix_([0, 2], [0, 2])], left + np.outer(slope, slope) * one[1, 1])
