"""What measurements take from a doubt, against the whole solved anew with them, and choices against all others."""

from itertools import combinations

import numpy as np
import pytest
from scipy.stats import multivariate_normal, norm, truncnorm

from geoves.kernels.covariances import Covariance
from geoves.kernels.field_priors import FieldPrior
from geoves.kernels.next_places import (
    LengthDoubt,
    Possible,
    PresenceDoubt,
    carry,
    choose_greedily,
    covariance_between,
    known_from_data,
    presence_error,
    variance_at,
)

PRIOR = FieldPrior(3.0, Covariance("matern32", 0.02, 0.5, 900.0, 30.0, 0.6), 0.4, 0.5, 1.0, 0.1)


@pytest.fixture
def data():
    rng = np.random.default_rng(2)
    points = rng.uniform(0.0, 2000.0, (14, 2))
    return points, rng.normal(3.0, 0.6, 14), rng.uniform(0.005, 0.05, 14)


@pytest.fixture
def places():
    rng = np.random.default_rng(5)
    return rng.uniform(0.0, 2000.0, (7, 2)), rng.uniform(0.0, 2000.0, (30, 2))


def without_relief(known, cells):
    return carry(known, cells, np.zeros(len(cells)))


def variance_with(data, more, error, cells):
    """The field's variance at cells with further data, whatever their values, all solved at once."""
    points, values, errors = data
    known = known_from_data(
        PRIOR,
        np.concatenate([points, more]),
        np.concatenate([values, np.full(len(more), 7.0)]),
        np.concatenate([errors, error]),
    )
    return variance_at(known, without_relief(known, cells))


def possibilities(data, places, error):
    known = known_from_data(PRIOR, *data)
    candidates, targets = (without_relief(known, one) for one in places)
    first = variance_at(known, targets)
    possible = Possible(
        covariance_between(known, candidates, candidates),
        covariance_between(known, candidates, targets),
        first,
        error + PRIOR.covariance.nugget,
        np.ones(error.shape[1]),
    )
    return possible, first


def test_variance_at_is_the_diagonal(data, places):
    known = known_from_data(PRIOR, *data)
    carried = without_relief(known, places[1])
    whole = covariance_between(known, carried, carried)
    np.testing.assert_allclose(variance_at(known, carried), np.diag(whole), rtol=1e-10)
    np.testing.assert_allclose(whole, whole.T, atol=1e-12)


def test_carried_field_is_simple_kriging_by_its_formula(data, places):
    """Against C₀ᵀ (C + E)⁻¹ z, Cressie 1993, Statistics for Spatial Data, sect. 3.4.5 (from memory)."""
    points, values, errors = data

    def prior(a, b):
        turn = np.deg2rad(30.0)
        axes = np.array([[np.sin(turn), np.cos(turn)], [np.cos(turn) / 0.6, -np.sin(turn) / 0.6]]).T / 900.0
        h = 4.743864518390577 * np.linalg.norm((a @ axes)[:, None] - (b @ axes)[None], axis=2)
        return 0.5 * (1.0 + h) * np.exp(-h) + 0.4

    among = prior(points, points) + np.diag(errors + 0.02)
    between = prior(points, places[1])
    known = known_from_data(PRIOR, *data)
    carried = without_relief(known, places[1])
    np.testing.assert_allclose(carried.mean, 3.0 + between.T @ np.linalg.solve(among, values - 3.0), rtol=1e-6)
    expected = prior(places[1], places[1]) - between.T @ np.linalg.solve(among, between)
    np.testing.assert_allclose(covariance_between(known, carried, carried), expected, atol=1e-7)


def test_each_choice_takes_what_solving_anew_takes(data, places):
    error = np.column_stack([np.linspace(0.02, 0.08, 7), np.full(7, 1e-4)])
    possible, first = possibilities(data, places, error)
    slope = np.linspace(10.0, 30.0, len(first))
    doubt = LengthDoubt(slope**2 * first + 9.0, slope, first)
    choices = choose_greedily(possible, doubt, 4)
    rows = [choice.candidate for choice in choices]
    assert len(set(rows)) == 4
    for count in range(1, 5):
        errors = np.array([error[one.candidate, one.kind] for one in choices[:count]])
        left = variance_with(data, places[0][rows[:count]], errors, places[1])
        assert choices[count - 1].after == pytest.approx(np.mean(slope**2 * left + 9.0), rel=1e-7)
        here = variance_with(data, places[0][rows[:count]], errors, places[0][rows[count - 1]][None])
        assert choices[count - 1].variance == pytest.approx(here[0], rel=1e-5)


def test_each_choice_is_the_best_of_all_by_brute_force(data, places):
    error = np.column_stack([np.linspace(0.02, 0.08, 7), np.full(7, 1e-4)])
    cost = np.array([1.0, 2.5])
    possible, first = possibilities(data, places, error)
    choices = choose_greedily(possible._replace(cost=cost), LengthDoubt(first, np.ones(30), first), 3)
    taken, errors = [], []
    before = float(np.mean(first))
    for choice in choices:
        worth = {}
        for i in set(range(7)) - set(taken):
            for kind in range(2):
                left = variance_with(data, places[0][[*taken, i]], np.array([*errors, error[i, kind]]), places[1])
                worth[i, kind] = (before - float(np.mean(left))) / cost[kind]
        best = max(worth, key=worth.get)
        assert (choice.candidate, choice.kind) == best
        taken.append(best[0])
        errors.append(error[best])
        before = choice.after


def test_the_first_pair_is_the_best_pair_where_ground_is_far_apart(data):
    """Two far patches without data between: what is best for one does not hang on the other."""
    patches = np.array([[0.0, 20_000.0], [300.0, 20_100.0], [150.0, 20_050.0]])
    candidates = np.concatenate([patches, patches + np.array([40_000.0, 0.0])])
    targets = np.concatenate([patches + np.array([20.0, 30.0]), patches + np.array([40_020.0, 30.0])])
    error = np.full((6, 1), 0.03)
    possible, first = possibilities(data, (candidates, targets), error)
    choices = choose_greedily(possible, LengthDoubt(first, np.ones(6), first), 2)
    left = {
        pair: np.mean(variance_with(data, candidates[list(pair)], np.full(2, 0.03), targets))
        for pair in combinations(range(6), 2)
    }
    assert tuple(sorted(one.candidate for one in choices)) == min(left, key=left.get)


def test_a_kind_that_is_not_possible_is_never_chosen(data, places):
    error = np.column_stack([np.full(7, 0.05), np.full(7, np.inf)])
    possible, first = possibilities(data, places, error)
    choices = choose_greedily(possible, LengthDoubt(first, np.ones(30), first), 20)
    assert len(choices) == 7  # no place twice, then it ends
    assert {one.kind for one in choices} == {0}
    assert all(one.by_kind[1] == pytest.approx(one.before) for one in choices)


@pytest.mark.parametrize("share", [0.0, 0.3, 0.9])
def test_doubt_of_presence_is_that_of_two_normals(share):
    """Φ₂ by SciPy's own integration of the bivariate normal."""
    probability = np.array([0.02, 0.3, 0.5, 0.85])
    doubt = PresenceDoubt(probability, np.full(4, 0.9), 0.1)
    both = [
        multivariate_normal.cdf([h, h], cov=[[1.0, share], [share, 1.0]], abseps=1e-10) if share else norm.cdf(h) ** 2
        for h in norm.ppf(probability)
    ]
    np.testing.assert_allclose(doubt(np.full(4, 0.9 - share)), probability - both, atol=1e-6)


def test_seeing_whether_it_is_there_is_worth_what_truncation_takes():
    """Variance of a normal cut at a threshold, from SciPy, averaged over both sides."""
    probability, variance = np.array([0.1, 0.5, 0.8]), 2.0
    error = presence_error(probability, np.full(3, variance))
    left = variance - variance**2 / (variance + error)
    for p, found in zip(probability, left, strict=True):
        cut = norm.ppf(1.0 - p)
        expected = p * truncnorm.var(cut, np.inf) + (1.0 - p) * truncnorm.var(-np.inf, cut)
        assert found == pytest.approx(variance * expected, rel=1e-6)
