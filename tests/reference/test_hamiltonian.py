"""The reference itself: on a normal density that is known, and its gradient against differences."""

import numpy as np
import pytest

from tests.reference.hamiltonian import sample_hamiltonian
from tests.reference.hamiltonian_county import make_density


def normal_target(mean, precision):
    def target(at):
        pull = (at - mean) @ precision
        return -0.5 * np.sum(pull * (at - mean), axis=1), -pull

    return target


@pytest.mark.parametrize("known", [True, False])
def test_a_normal_density_is_recovered(known):
    generator = np.random.default_rng(3)
    root = 0.5 * generator.normal(size=(6, 6)) + 2.0 * np.eye(6)
    covariance, mean = root @ root.T / 6.0, generator.normal(0.0, 3.0, 6)
    metric = covariance if known else np.diag(np.diag(covariance))  # a metric that is off slows, and biases nothing
    target = normal_target(mean, np.linalg.inv(covariance))
    chains = sample_hamiltonian(target, np.zeros((4, 6)), metric, 5, burn=200, count=1500, leaps=12)
    assert 0.6 < chains.acceptance < 0.97
    assert chains.scale_reduction().max() < 1.02
    draws = chains.flat()
    deviation = np.sqrt(np.diag(covariance))
    np.testing.assert_allclose((draws.mean(axis=0) - mean) / deviation, 0.0, atol=0.08)
    np.testing.assert_allclose(draws.std(axis=0) / deviation, 1.0, atol=0.06)
    expected = covariance / np.outer(deviation, deviation)
    np.testing.assert_allclose(np.corrcoef(draws.T), expected, atol=0.08)


def test_chains_that_disagree_are_noticed():
    # Two hills that no chain crosses between: half of the chains sit on either.
    def target(at):
        near = np.where(at > 0, 20.0, -20.0)
        return -0.5 * np.sum((at - near) ** 2, axis=1), near - at

    start = np.array([[20.0], [20.0], [-20.0], [-20.0]])
    assert sample_hamiltonian(target, start, np.eye(1), 1, burn=50, count=100).scale_reduction()[0] > 2.0


def test_gradient_and_summit_of_the_county():
    density = make_density()
    generator = np.random.default_rng(2)
    plain = np.concatenate(
        [np.tile(density.mean, (density.n, 1)), np.zeros((density.n, density.p - density.q))], axis=1
    )
    at = plain.ravel() + 0.1 * generator.standard_normal(density.n * density.p)
    gradient = density(at[None])[1][0]
    for j in generator.choice(at.size, 12, replace=False):
        ahead, behind = at.copy(), at.copy()
        ahead[j] += 1e-5
        behind[j] -= 1e-5
        slope = (density(ahead[None])[0][0] - density(behind[None])[0][0]) / 2e-5
        assert gradient[j] == pytest.approx(slope, rel=1e-4, abs=1e-3)
    summit = density.climb(plain.ravel(), iterations=40)
    assert density(summit[None])[0][0] > density(at[None])[0][0]
    assert np.all(np.linalg.eigvalsh(density.hessian(summit)) > 0)
