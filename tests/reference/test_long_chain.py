"""The long chain on posteriors known in closed form, by plain integrals, and by a sum over a dense grid."""

import numpy as np
import pytest
from scipy.stats import truncnorm

from geoves.kernels import layered_earth
from geoves.kernels.damped_steps import Prior, Readings, fit_layers, stack_curves
from tests.reference.grid_posterior import log_likelihood
from tests.reference.long_chain import sample_chain, sample_posterior

EFFECTIVE = 3000


def test_a_linear_problem_with_normal_errors():
    """Mean and covariance of the normal posterior (Tarantola 2005, Inverse Problem Theory, 3.37 and 3.38).

    Tolerance: a deviation from 3000 independent draws is known to 1.3 %, a mean to 1.8 % of a deviation; three times.
    """
    rng = np.random.default_rng(2)
    matrix = rng.standard_normal((4, 3)) @ np.diag([3.0, 1.0, 0.2])
    data, error, spread = np.array([1.0, -0.5, 2.0, 0.3]), 0.3, 2.0
    covariance = np.linalg.inv(matrix.T @ matrix / error**2 + np.eye(3) / spread**2)
    mean = covariance @ matrix.T @ data / error**2

    def log_density(unknowns):
        misfit = np.sum((unknowns @ matrix.T - data) ** 2, axis=1) / error**2
        return -0.5 * (misfit + np.sum(unknowns**2, axis=1) / spread**2)

    chain = sample_chain(log_density, rng.standard_normal((32, 3)), EFFECTIVE, 5)
    assert chain.effective >= EFFECTIVE
    deviation = np.sqrt(np.diag(covariance))
    np.testing.assert_allclose((chain.members.mean(axis=0) - mean) / deviation, 0.0, atol=0.055)
    np.testing.assert_allclose(chain.members.std(axis=0) / deviation, 1.0, atol=0.04)
    np.testing.assert_allclose(np.corrcoef(chain.members.T), covariance / np.outer(deviation, deviation), atol=0.05)


def half_space(reach):
    """Two readings of homogeneous ground, a third far off, and where the search is bounded."""
    spacing = np.array([3.0, 10.0, 30.0])
    observed, error = np.log([48.0, 52.0, 70.0]), np.full(3, 0.1)
    curves = stack_curves(
        [Readings(spacing, np.zeros(3), np.exp(observed), error, np.zeros(3, dtype=int))],
        layered_earth.shared_wavenumbers([(spacing, np.zeros(3))]),
    )
    mean, deviation = np.log([[60.0]]), np.array([[0.5]])
    return curves, Prior(mean, deviation, mean - reach, mean + reach)


@pytest.mark.parametrize("reach", [2.5, 0.1], ids=["free", "bounded"])
def test_homogeneous_ground(reach):
    """One unknown, the log resistivity, over which the density is added up; the apparent resistivity is the true one.

    Quantiles of 3000 independent draws lie within 0.07 deviations in the middle and 0.12 at 5 and 95 %, three times
    their standard error.
    """
    curves, prior = half_space(reach)
    fit = fit_layers(prior.mean.copy(), 1, curves, prior)
    chain = sample_posterior(fit, 1, curves, prior, effective=EFFECTIVE, seed=3)
    axis = np.linspace(prior.lowest[0, 0], prior.highest[0, 0], 20_001)
    density = log_likelihood(curves.log_apparent_resistivity - axis[:, None], 0.1)
    share = np.exp(density - 0.5 * ((axis - prior.mean[0, 0]) / prior.deviation[0, 0]) ** 2)
    share = np.cumsum(share) / share.sum()
    levels = np.array([0.05, 0.5, 0.95])
    exact, found = axis[np.searchsorted(share, levels)], np.quantile(chain.members[:, 0], levels)
    assert np.all(np.abs(found - exact) < np.array([0.12, 0.07, 0.12]) * chain.members.std())
    assert chain.members.min() >= prior.lowest.min()
    assert chain.members.max() <= prior.highest.max()


def test_a_chain_too_short_is_refused(monkeypatch):
    monkeypatch.setattr("tests.reference.long_chain.MOST_STEPS", 2000)
    start = np.random.default_rng(1).uniform(-1.5, 1.5, (32, 8))
    bound = truncnorm(-2.0, 2.0)
    with pytest.raises(ValueError, match="2000 steps"):
        sample_chain(lambda unknowns: bound.logpdf(unknowns).sum(axis=1), start, 1e6, 1)
