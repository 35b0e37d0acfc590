"""Forward-backward and the best path against every path written out.

The algorithms: Rabiner, L. R., 1989, Proceedings of the IEEE 77, 257-286.
"""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as some
from hypothesis.extra.numpy import arrays

from geoves.kernels.unit_sequence import ordered_transition, read_units
from tests.reference.enumerated_paths import LIKELIHOOD, START, TRANSITION, enumerate_paths, marginals

sizes = some.tuples(some.integers(1, 5), some.integers(1, 4))


def likelihoods(size):
    return arrays(np.float64, size, elements=some.floats(-8.0, 0.0))


def test_published_example():
    found = read_units(np.log(LIKELIHOOD), np.log(START), np.log(TRANSITION))
    assert found.best.tolist() == [0, 0, 1]
    assert np.exp(found.log_evidence) == pytest.approx(0.03628)


@given(some.data(), sizes, some.floats(0.05, 0.95))
def test_equals_enumeration_of_an_ordered_column(data, size, stay):
    likelihood = data.draw(likelihoods(size))
    start = data.draw(arrays(np.float64, size[1], elements=some.floats(-5.0, 0.0)))
    transition = ordered_transition(size[1], stay)
    found = read_units(likelihood, start, transition)
    paths = enumerate_paths(np.exp(likelihood), np.exp(start), np.exp(transition))
    share, total = marginals(paths, *size)
    np.testing.assert_allclose(found.probability, share, atol=1e-12)
    assert found.log_evidence == pytest.approx(np.log(total), abs=1e-10)
    # Where two paths are alike to the last digit, either may be named.
    assert paths[tuple(found.best.tolist())] == pytest.approx(max(paths.values()), rel=1e-10)


@given(some.data(), sizes)
def test_equals_enumeration_whatever_the_order(data, size):
    likelihood = data.draw(likelihoods(size))
    transition = data.draw(arrays(np.float64, (size[1], size[1]), elements=some.floats(-6.0, 0.0)))
    found = read_units(likelihood, np.zeros(size[1]), transition)
    paths = enumerate_paths(np.exp(likelihood), np.ones(size[1]), np.exp(transition))
    share, total = marginals(paths, *size)
    np.testing.assert_allclose(found.probability, share, atol=1e-12)
    assert found.log_evidence == pytest.approx(np.log(total), abs=1e-10)
    assert paths[tuple(found.best.tolist())] == pytest.approx(max(paths.values()), rel=1e-10)


@given(some.data(), sizes)
def test_the_column_never_turns_back(data, size):
    likelihood = data.draw(likelihoods(size))
    found = read_units(likelihood, np.zeros(size[1]), ordered_transition(size[1], 0.5))
    assert np.all(np.diff(found.best) >= 0)


def test_the_deepest_unit_found_early_leaves_nothing_else_below():
    certain = np.full((3, 4), -np.inf)
    certain[0, 3] = 0.0
    certain[1:] = np.log(0.25)
    found = read_units(certain, np.zeros(4), ordered_transition(4, 0.6))
    np.testing.assert_allclose(found.probability, np.tile([0.0, 0.0, 0.0, 1.0], (3, 1)))


@pytest.mark.parametrize("n_units", [1, 2, 5])
def test_transitions_are_probabilities_and_stay_as_told(n_units):
    transition = np.exp(ordered_transition(n_units, 0.6))
    np.testing.assert_allclose(transition.sum(axis=1), 1.0)
    np.testing.assert_allclose(np.diag(transition)[:-1], 0.6)
    assert np.all(np.tril(transition, -1) == 0.0)


def test_long_columns_do_not_underflow():
    found = read_units(np.full((200, 3), -50.0), np.zeros(3), ordered_transition(3, 0.9))
    assert np.isfinite(found.log_evidence)
    np.testing.assert_allclose(found.probability.sum(axis=1), 1.0)
