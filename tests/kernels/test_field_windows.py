"""Windows against one factor of all places: the seam, what each hears, realisations across it."""

import numpy as np
import pytest

from geoves.kernels.covariances import Covariance
from geoves.kernels.field_priors import FieldPrior, own_covariance, own_variance
from geoves.kernels.field_windows import (
    WindowSizes,
    choose_by_name,
    condition_window,
    cut_windows,
    draw_windows,
    join_windows,
    tell,
)
from geoves.kernels.latent_fields import Sites, condition

N = 150
NAMES = [f"S{i}" for i in range(N)]
SIZES = WindowSizes(60, 60, 40)
# Drifts and lengths as the joint inference has them: a third of the extent, a free constant, a relief that is followed.
PRIORS = (
    FieldPrior(3.0, Covariance("matern32", 0.05, 0.6, 10_000.0, 60.0, 0.5), 1.0, 0.6, 1.0, 0.05),
    FieldPrior(-0.3, Covariance("matern32", 0.05, 0.95, 9_000.0), 1.0, 1.0, 0.1, 0.1, 2.0),
    FieldPrior(2.5, Covariance("matern32", 0.02, 0.08, 12_000.0), 0.03, 0.1, 0.25, 0.5),
)
Q = len(PRIORS)


@pytest.fixture(scope="module", params=[1, 2, 3])
def told(request):
    """Places in a county of 30 by 25 km, relief, and sites of all strengths that speak of several fields at once."""
    generator = np.random.default_rng(request.param)
    points = generator.uniform(0.0, 1.0, (N, 2)) * [30_000.0, 25_000.0]
    relief = 20.0 + 30.0 * np.sin(points[:, 0] / 4000.0)
    deviation = np.sqrt([prior.covariance.sill for prior in PRIORS])
    truth = np.array(
        [
            prior.mean + np.linalg.cholesky(own_covariance(prior, points, relief)) @ generator.standard_normal(N)
            for prior in PRIORS
        ]
    ).T
    strength = generator.choice([0.3, 1.5, 4.0], (N, 2, 1))
    looks = generator.standard_normal((N, 2, Q)) / deviation * strength
    precision = looks.transpose(0, 2, 1) @ looks
    shift = np.einsum("nfg,ng->nf", precision, truth)
    return points, relief, Sites(precision, shift)


def solve_by_windows(told, sizes):
    points, relief, sites = told
    windows = cut_windows(points, NAMES, sizes)
    found = [condition_window(tell(one.heard, points, relief, sites, len(one.own)), priors=PRIORS) for one in windows]
    return join_windows(windows, found)


def solve_at_once(told):
    points, relief, sites = told
    own = np.array([own_covariance(prior, points, relief) for prior in PRIORS])
    return condition(np.array([prior.mean for prior in PRIORS]), own, sites)


def compare(told, sizes):
    """How far windows are off, in deviations of one factor of all (n, q), and the ratio of the deviations."""
    (mean, covariance), (near_mean, near_covariance) = (
        solved.at_places() for solved in (solve_at_once(told), solve_by_windows(told, sizes))
    )
    deviation = np.sqrt(np.diagonal(covariance, axis1=1, axis2=2))
    near_deviation = np.sqrt(np.diagonal(near_covariance, axis1=1, axis2=2))
    return (near_mean - mean) / deviation, near_deviation / deviation


def test_the_seam_is_below_a_tenth_of_the_doubt(told):
    off, ratio = compare(told, SIZES)
    assert np.sqrt(np.mean(off**2)) < 0.06
    assert np.quantile(np.abs(off), 0.95) < 0.1
    assert np.abs(off).max() < 0.3
    # Fewer data never know more: variances grow, and by little.
    assert ratio.min() > 1.0 - 1e-9
    assert ratio.max() < 1.02


def test_the_seam_steps_by_less_than_a_tenth_from_place_to_neighbour(told):
    """Across the border of two windows: the step between neighbours beside the same step without windows."""
    points, _, _ = told
    windows = cut_windows(points, NAMES, SIZES)
    window_of = np.empty(N, dtype=int)
    for number, window in enumerate(windows):
        window_of[window.own] = number
    off, _ = compare(told, SIZES)
    distance = np.linalg.norm(points[:, None] - points[None], axis=2)
    across = (window_of[:, None] != window_of[None]) & (distance < 2500.0)
    first, second = np.nonzero(np.triu(across))
    assert len(first) > 10
    assert np.sqrt(np.mean((off[first] - off[second]) ** 2)) < 0.1


def test_places_from_everywhere_carry_drifts(told):
    """Without them a window must learn constants and drifts anew, and is farther off."""
    off, _ = compare(told, SIZES)
    alone, _ = compare(told, SIZES._replace(everywhere=0))
    assert np.mean(off**2) < np.mean(alone**2)


def test_a_window_that_hears_all_is_exact(told):
    off, ratio = compare(told, WindowSizes(60, N, 0))
    np.testing.assert_allclose(off, 0.0, atol=1e-6)
    np.testing.assert_allclose(ratio, 1.0, atol=1e-6)


def test_each_place_is_in_one_window_and_no_window_hears_one_twice(told):
    points, _, _ = told
    windows = cut_windows(points, NAMES, SIZES)
    assert sorted(np.concatenate([one.own for one in windows])) == list(range(N))
    for one in windows:
        assert len(one.own) <= SIZES.window
        assert len(np.unique(one.heard)) == len(one.heard) <= sum(SIZES)
        np.testing.assert_array_equal(one.heard[: len(one.own)], one.own)


def test_places_from_everywhere_hardly_change_with_one_place_more():
    before = {NAMES[i] for i in choose_by_name(NAMES, 40)}
    more = [*NAMES, "newcomer"]
    after = {more[i] for i in choose_by_name(more, 40)}
    assert len(before & after) >= 39


def test_the_variance_of_a_prior_is_its_diagonal(told):
    points, relief, _ = told
    for prior in PRIORS:
        assert np.unique(own_covariance(prior, points, relief).diagonal()).tolist() == [own_variance(prior)]


def test_realisations_have_the_covariances_of_all_at_once_across_windows(told):
    points, relief, sites = told
    windows = cut_windows(points, NAMES, SIZES)
    said = (tell(one.heard, points, relief, sites, len(one.own)) for one in windows)
    members = draw_windows(windows, said, PRIORS, 3000, (7, 1)).reshape(3000, -1)
    dense = solve_at_once(told)
    deviation = np.sqrt(np.diag(dense.covariance))
    off = (members.mean(axis=0) - dense.mean.ravel()) / deviation
    assert np.sqrt(np.mean(off**2)) < 0.08  # the seam, and 3000 draws
    np.testing.assert_allclose(members.std(axis=0) / deviation, 1.0, atol=0.08)
    correlation = dense.covariance / np.outer(deviation, deviation)
    # The error of a correlation from 3000 draws is at most 1/sqrt(3000) = 0.018 (Fisher); the seam is added.
    wrong = np.corrcoef(members.T) - correlation
    assert np.sqrt(np.mean(wrong**2)) < 0.04
    assert np.abs(wrong).max() < 0.25
