"""Clouds of what a place says, held against integrals that are known: in closed form or on a fine grid."""

import numpy as np
import pytest
from scipy.special import expit
from scipy.stats import multivariate_normal, norm

from geoves.geology.inference import _hold_presence
from geoves.kernels.joint_state import ABOVE, AT, FIRST_UPPER, ROCK_DEPTH, Observations
from geoves.kernels.local_clouds import (
    Cloud,
    Normal,
    draw_clouds,
    fit_places,
    moments,
    sharp_moments,
    weigh,
)
from tests.laws.column_plans import FACTORS, HALF_SPACING, PLANS, draw_fields, make_places
from tests.laws.test_joint_column_laws import place_of

ORDER = PLANS["five units"]._replace(deep_limits=(0.0, np.inf), rock_limits=(0.0, np.inf))
P = ORDER.n_fields + FACTORS
SIZE = (100, 6, 60)
SHALLOW = 2  # field of the second thickness, latent
PRESENCE, DEEP = ORDER.first_presence, ORDER.first_deep


def silent_places(observations):
    count = len(observations.kind)
    return make_places(ORDER, np.zeros(count), np.full((count, HALF_SPACING.size), np.nan), observations)


def say(kind, quantity, value, error, count=1):
    one = np.ones((count, 1))
    return Observations((kind * one).astype(int), (quantity * one).astype(int), value * one, error * one)


def broad_prior(count=1, **tight):
    """Independent normals; `tight` names (mean, deviation) of fields by f<index>."""
    mean = np.tile(draw_fields(ORDER, 1, np.random.default_rng(1))[0], (count, 1))
    mean = np.concatenate([mean, np.zeros((count, FACTORS))], axis=1)
    deviation = np.full(P, 0.3)
    for name, (middle, width) in tight.items():
        mean[:, int(name[1:])], deviation[int(name[1:])] = middle, width
    return Normal(mean, np.tile(np.diag(deviation**-2.0), (count, 1, 1)))


def draw(places, prior, *, seeds=None, size=SIZE, starts=None):
    seeds = range(len(prior.mean)) if seeds is None else seeds
    starts = [prior.mean] if starts is None else starts
    fits = [fit_places(start, prior, places, ORDER) for start in starts]
    return draw_clouds(fits, prior, places, ORDER, [np.random.default_rng(seed) for seed in seeds], size)


def test_normal_density_is_scipys():
    generator = np.random.default_rng(2)
    root = generator.normal(size=(2, 3, 3)) + 2.0 * np.eye(3)
    normal = Normal(generator.normal(size=(2, 3)), root @ root.transpose(0, 2, 1))
    at = generator.normal(size=(2, 5, 3))
    for i in range(2):
        expected = multivariate_normal(normal.mean[i], np.linalg.inv(normal.precision[i])).logpdf(at[i])
        np.testing.assert_allclose(normal.log_density(at)[i], expected, rtol=1e-9)


def test_a_place_that_says_nothing_has_the_evidence_of_one():
    prior = broad_prior(count=3)
    cloud = draw(silent_places(say(0, 0, 0.0, 1.0, count=3)), prior)
    weighed = weigh(cloud, prior)
    # Parts placed where draws were thin favour those draws: the evidence comes out low, by less than a third.
    np.testing.assert_allclose(weighed.log_evidence, 0.0, atol=0.33)
    assert np.all(weighed.effective_size > 120)
    mean, covariance = moments(cloud.unknowns, weighed.weight)
    deviation = np.sqrt(np.linalg.inv(prior.precision).diagonal(axis1=1, axis2=2))
    assert np.max(np.abs(mean - prior.mean) / deviation) < 0.35
    np.testing.assert_allclose(np.sqrt(covariance.diagonal(axis1=1, axis2=2)).mean() / deviation.mean(), 1.0, atol=0.06)


def test_a_normal_likelihood_is_recovered():
    # A latent thickness far above 0, and a contact so deep that nothing is squeezed: ramp and column are straight.
    prior = broad_prior(f0=(np.log(400.0), 0.01), f2=(20.0, 3.0))
    covariance = np.linalg.inv(prior.precision[0])
    covariance[SHALLOW, 7] = covariance[7, SHALLOW] = 0.6 * 3.0 * 0.3  # a resistivity that hangs together with it
    prior = Normal(prior.mean, np.linalg.inv(covariance)[None])
    cloud = draw(silent_places(say(AT, FIRST_UPPER + 1, 24.0, 2.0)), prior, size=(400, 10, 200))
    weighed = weigh(cloud, prior)
    mean, spread = moments(cloud.unknowns, weighed.weight)
    gain = covariance[:, SHALLOW] / (9.0 + 4.0)
    expected = prior.mean[0] + gain * 4.0
    after = covariance - np.outer(gain, covariance[SHALLOW])
    deviation = np.sqrt(np.diag(after))
    error = deviation / np.sqrt(weighed.effective_size[0])  # Monte Carlo's own
    assert np.max(np.abs(mean[0] - expected) / error) < 4.0
    np.testing.assert_allclose(np.sqrt(np.diag(spread[0])) / deviation, 1.0, atol=0.12)
    assert spread[0, SHALLOW, 7] == pytest.approx(after[SHALLOW, 7], abs=0.15 * deviation[SHALLOW] * deviation[7])
    # With the slope of the likelihood chance is taken out: exact, however few the draws.
    few = draw(silent_places(say(AT, FIRST_UPPER + 1, 24.0, 2.0)), prior, size=(60, 2, 40))
    mean, spread = sharp_moments(few, weigh(few, prior), prior)
    np.testing.assert_allclose((mean[0] - expected) / deviation, 0.0, atol=2e-3)
    np.testing.assert_allclose(
        spread[0] / np.outer(deviation, deviation), after / np.outer(deviation, deviation), atol=5e-3
    )
    evidence = norm.logpdf(24.0, 20.0, np.sqrt(13.0)) + np.log(2.0 * np.sqrt(2.0 * np.pi))
    assert weighed.log_evidence[0] == pytest.approx(evidence, abs=0.05)


def test_a_cloud_weighed_anew_is_one_drawn_anew():
    places = silent_places(say(AT, FIRST_UPPER + 1, 24.0, 2.0))
    first, second = (broad_prior(f0=(np.log(400.0), 0.01), f2=(middle, 3.0)) for middle in (20.0, 22.0))
    cloud = draw(places, first)
    again, fresh = weigh(cloud, second), draw(places, second)
    anew = weigh(fresh, second)
    assert again.log_evidence[0] == pytest.approx(anew.log_evidence[0], abs=0.08)
    mean, _ = moments(cloud.unknowns, again.weight)
    expected, spread = moments(fresh.unknowns, anew.weight)
    assert np.max(np.abs(mean - expected)[0] / np.sqrt(np.diag(spread[0]))) < 0.25


def test_effective_size():
    unknowns = np.zeros((1, 4, P))
    even = Cloud(unknowns, np.zeros((1, 4)), np.zeros((1, 4)), unknowns)
    prior = broad_prior()
    assert weigh(even, prior).effective_size[0] == pytest.approx(4.0)
    lone = even._replace(log_likelihood=np.array([[0.0, -90.0, -90.0, -90.0]]))
    assert weigh(lone, prior).effective_size[0] == pytest.approx(1.0)
    half = even._replace(log_likelihood=np.array([[0.0, 0.0, -90.0, -np.inf]]))
    assert weigh(half, prior).effective_size[0] == pytest.approx(2.0)
    # Kish: (Σw)² / Σw² of weights 3, 1, 0, 0.
    uneven = even._replace(log_likelihood=np.log([[3.0, 1.0, 1e-300, 1e-300]]))
    assert weigh(uneven, prior).effective_size[0] == pytest.approx(16.0 / 10.0)


def test_two_modes_are_both_found():
    # Rock at 60 m, gravel of 20 m where it is: the contact at 40 m over gravel, at 60 m where there is none, and little
    # between. By a grid over contact and presence, the other fields saying nothing.
    prior = broad_prior(f0=(np.log(50.0), 0.3), **{f"f{PRESENCE}": (0.0, 1.0), f"f{DEEP}": (np.log(20.0), 1e-3)})
    places = silent_places(say(AT, ROCK_DEPTH, 60.0, 0.5))
    fits = []
    for there in (1.0, -1.0, 1.0, -1.0):  # each search held to its side, as the inference does
        start = prior.mean.copy()
        start[:, PRESENCE] = there
        held = _hold_presence(prior, start, ORDER)
        fits.append(fit_places(start, held, places, ORDER))
    cloud = draw_clouds(fits, prior, places, ORDER, [np.random.default_rng(7)], (100, 10, 60))
    weighed = weigh(cloud, prior)
    v, eta = np.meshgrid(np.linspace(3.3, 4.6, 2601), np.linspace(-4.5, 4.5, 1801), indexing="ij")
    rock = np.exp(v) + 20.0 * expit(eta / 0.2)
    log_density = norm.logpdf(v, np.log(50.0), 0.3) + norm.logpdf(eta) - 0.5 * ((rock - 60.0) / 0.5) ** 2
    share = np.exp(log_density - log_density.max())
    share /= share.sum()
    mean, spread = moments(cloud.unknowns, weighed.weight)
    expected = np.sum(share * v)
    deviation = np.sqrt(np.sum(share * v**2) - expected**2)
    assert mean[0, 0] == pytest.approx(expected, abs=0.15 * deviation)
    assert np.sqrt(spread[0, 0, 0]) == pytest.approx(deviation, rel=0.15)
    there = weighed.weight[0] @ (cloud.unknowns[0, :, PRESENCE] > 0)
    assert there == pytest.approx(share[eta > 0].sum(), abs=0.13)
    evidence = np.log(np.sum(np.exp(log_density)) * (v[1, 0] - v[0, 0]) * (eta[0, 1] - eta[0, 0]))
    assert weighed.log_evidence[0] == pytest.approx(evidence, abs=0.5)


def test_a_bound_moves_what_it_excludes():
    prior = broad_prior(f0=(np.log(50.0), 0.3), **{f"f{PRESENCE}": (-4.0, 0.1)})
    cloud = draw(silent_places(say(ABOVE, ROCK_DEPTH, 60.0, 0.5)), prior)
    weighed = weigh(cloud, prior)
    depth = np.exp(cloud.unknowns[0, :, 0])
    assert weighed.weight[0] @ (depth < 58.0) < 1e-3
    beyond = norm.sf(np.log(60.0), np.log(50.0), 0.3)
    assert weighed.log_evidence[0] == pytest.approx(np.log(beyond), abs=0.35)
    # The median of what is left of a normal above a bound.
    order = np.argsort(depth)
    median = np.log(depth[order][np.searchsorted(np.cumsum(weighed.weight[0][order]), 0.5)])
    assert median == pytest.approx(norm.isf(0.5 * beyond, np.log(50.0), 0.3), abs=0.05)


def test_sharp_moments_are_no_worse_than_plain_ones_where_nothing_is_normal():
    # The bound above: half a normal. Over many clouds both are off by chance; the sharp ones not by more.
    count, beyond = 12, norm.sf(np.log(60.0), np.log(50.0), 0.3)
    prior = broad_prior(count=count, f0=(np.log(50.0), 0.3), **{f"f{PRESENCE}": (-4.0, 0.1)})
    cloud = draw(silent_places(say(ABOVE, ROCK_DEPTH, 60.0, 0.5, count=count)), prior)
    weighed = weigh(cloud, prior)
    expected = np.log(50.0) + 0.3 * norm.pdf(norm.isf(beyond)) / beyond
    plain, sharp = moments(cloud.unknowns, weighed.weight), sharp_moments(cloud, weighed, prior)
    off = [np.sqrt(np.mean((mean[:, 0] - expected) ** 2)) for mean, _ in (plain, sharp)]
    assert off[1] < 1.1 * off[0]
    silent = np.arange(5, 12)  # fields that nothing is said of keep what was expected of them, to the last digits
    assert np.abs((sharp[0] - prior.mean)[:, silent]).max() < 0.25 * np.abs((plain[0] - prior.mean)[:, silent]).max()
    assert np.all(np.linalg.eigvalsh(sharp[1]) > 0)


def test_a_fit_is_where_nothing_near_is_better():
    unknowns, places = place_of(ORDER, 21, count=4)
    prior = Normal(unknowns, np.tile(np.eye(P) / 0.3**2, (4, 1, 1)))
    fit = fit_places(unknowns + 0.1, prior, places, ORDER, iterations=80)
    again = fit_places(fit.unknowns, prior, places, ORDER, iterations=80)
    assert np.all(fit.objective - again.objective < 0.01)
    assert np.all(np.linalg.eigvalsh(fit.curvature) > 0)


def test_clouds_are_the_same_however_places_are_cut():
    unknowns, places = place_of(ORDER, 22, count=5)
    prior = Normal(unknowns, np.tile(np.eye(P) / 0.3**2, (5, 1, 1)))
    whole = draw(places, prior, size=(30, 2, 20))
    np.testing.assert_array_equal(draw(places, prior, size=(30, 2, 20)).unknowns, whole.unknowns)
    for rows in ([0], [4], [1, 2], [3, 0]):
        part = np.array(rows)
        alone = draw(places.take(part), prior.take(part), seeds=rows, size=(30, 2, 20))
        for values, expected in zip(alone, whole, strict=True):
            np.testing.assert_array_equal(values, expected[part])
