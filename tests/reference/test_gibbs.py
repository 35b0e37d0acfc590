"""The Gibbs sampler held against a closed form and against integration on a grid."""

import numpy as np
import pytest
from scipy.stats import multivariate_normal, norm, truncnorm

from tests.reference.gibbs import sample_under_bounds

DRAWS = 4000


def test_one_sharp_bound():
    """scipy.stats.truncnorm; four standard errors of 4000 draws."""
    sharp = (np.array([1.0]), np.array([1.0]), np.array([0.0]))
    draws = sample_under_bounds(np.array([0.0]), np.array([[4.0]]), sharp, DRAWS, 1)[:, 0]
    exact = truncnorm(0.5, np.inf, scale=2.0)
    assert draws.min() > 1.0
    assert draws.mean() == pytest.approx(exact.mean(), abs=4 * exact.std() / np.sqrt(DRAWS))
    assert draws.std() == pytest.approx(exact.std(), rel=0.06)


def test_two_soft_bounds():
    """Two correlated places, one bound above and one below, against the density summed over a fine grid."""
    mean, spread = np.array([0.0, 1.0]), np.array([[4.0, 2.0], [2.0, 3.0]])
    bound, side, softness = np.array([2.0, 0.5]), np.array([1.0, -1.0]), np.array([0.5, 0.3])
    draws = sample_under_bounds(mean, spread, (bound, side, softness), DRAWS, 2)
    axis = np.linspace(-12.0, 12.0, 801)
    grid = np.stack(np.meshgrid(axis, axis, indexing="ij"), -1)
    density = multivariate_normal(mean, spread).pdf(grid) * norm.cdf(side * (grid - bound) / softness).prod(axis=-1)
    density /= density.sum()
    for i in range(2):
        exact = np.sum(density * grid[..., i])
        deviation = np.sqrt(np.sum(density * (grid[..., i] - exact) ** 2))
        assert draws[:, i].mean() == pytest.approx(exact, abs=4 * deviation / np.sqrt(DRAWS))
        assert draws[:, i].std() == pytest.approx(deviation, rel=0.06)
