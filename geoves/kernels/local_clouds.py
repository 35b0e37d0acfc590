"""What each place says by itself, as a cloud of weighed unknowns: found by damped Gauss-Newton, sampled by an
incremental mixture.

A cloud is drawn once about the most probable unknowns under some normal prior, with its likelihoods and the density
that it was drawn from. Under another prior, as long as that is not too different, it needs only new weights: the
costly responses are not computed again.
"""

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from scipy.special import gammaln

from geoves.kernels.joint_state import ColumnOrder, Floats, Integers, LocalState, Places, evaluate, log_likelihood

# Degrees of freedom of the first and of later parts of the mixture, and how much wider the first is than the curvature.
FREEDOM, WIDENING = 6.0, 1.1
LONGEST_STEP = 1.0  # in prior deviations and natural logs alike
TOLERANCE = 1e-3  # of the objective, nats
# Models whose responses are computed at a time: their arrays stay in the processor's cache.
BLOCK = 512


class Normal(NamedTuple):
    """Normal distributions of b places: mean (b, p), precision (b, p, p)."""

    mean: Floats
    precision: Floats

    def take(self, rows: Integers) -> "Normal":
        return Normal(self.mean[rows], self.precision[rows])

    def log_density(self, unknowns: Floats) -> Floats:
        """(b, m) at unknowns (b, m, p)."""
        away = unknowns - self.mean[:, None]
        _, log_determinant = np.linalg.slogdet(self.precision)
        square = np.einsum("bmp,bmp->bm", np.matmul(away, self.precision), away)
        return np.asarray(0.5 * (log_determinant - self.mean.shape[1] * np.log(2.0 * np.pi))[:, None] - 0.5 * square)


class LocalFit(NamedTuple):
    """The most probable unknowns (b, p), minus their log posterior (b,), and its curvature (b, p, p)."""

    unknowns: Floats
    objective: Floats
    curvature: Floats
    robust_weight: Floats


class Cloud(NamedTuple):
    """Unknowns (b, m, p) with their log likelihood and the log density they were drawn from (b, m).

    gradient : (b, m, p) of the log likelihood
    """

    unknowns: Floats
    log_likelihood: Floats
    log_proposal: Floats
    gradient: Floats


def _objective(state: LocalState, unknowns: Floats, prior: Normal) -> tuple[Floats, Floats, Floats]:
    away = unknowns - prior.mean
    pull = np.matmul(prior.precision, away[..., None])[..., 0]
    value = -state.log_likelihood + 0.5 * np.sum(away * pull, axis=1)
    return value, state.gradient - pull, state.curvature + prior.precision


def fit_places(start: Floats, prior: Normal, places: Places, order: ColumnOrder, iterations: int = 40) -> LocalFit:
    """The most probable unknowns near `start` (b, p), by damped Gauss-Newton with a step limited in length."""
    unknowns = np.clip(start, places.lowest, places.highest)
    state = evaluate(unknowns, places, order)
    value, gradient, curvature = _objective(state, unknowns, prior)
    robust = state.robust_weight.copy()
    damping = np.full(len(unknowns), 0.1)
    active = np.arange(len(unknowns))
    reach = LONGEST_STEP * np.maximum(1.0, np.linalg.inv(prior.precision).diagonal(axis1=1, axis2=2) ** 0.5)
    for _ in range(iterations):
        those = places.take(active)
        damped = curvature[active].copy()
        diagonal = np.arange(damped.shape[1])
        damped[:, diagonal, diagonal] *= 1.0 + damping[active, None]
        step = np.linalg.solve(damped, gradient[active][..., None])[..., 0]
        longest = np.max(np.abs(step) / reach[active], axis=1, keepdims=True)
        trial = np.clip(unknowns[active] + step / np.maximum(1.0, longest), places.lowest, places.highest)
        then = evaluate(trial, those, order)
        new_value, new_gradient, new_curvature = _objective(then, trial, prior.take(active))
        gain = value[active] - new_value
        better = gain > 0
        rows = active[better]
        unknowns[rows], value[rows] = trial[better], new_value[better]
        gradient[rows], curvature[rows], robust[rows] = (
            new_gradient[better], new_curvature[better], then.robust_weight[better],
        )  # fmt: skip
        damping[active] = np.clip(damping[active] * np.where(better, 0.3, 5.0), 1e-6, 1e7)
        active = active[~((better & (gain < TOLERANCE)) | (damping[active] >= 1e7))]
        if not active.size:
            break
    return LocalFit(unknowns, value, curvature, robust)


class _Part(NamedTuple):
    """One multivariate t of each place's mixture: centre (b, p), Cholesky factor of its precision (b, p, p)."""

    centre: Floats
    factor: Floats

    def draw(self, normal: Floats, mixing: Floats) -> Floats:
        """(b, m, p) from standard normal numbers (b, m, p) and the roots of inverse chi squares (b, m)."""
        standard = (normal * mixing[..., None]).transpose(0, 2, 1)
        return np.asarray(
            self.centre[:, None] + np.linalg.solve(self.factor.transpose(0, 2, 1), standard).transpose(0, 2, 1)
        )

    def log_density(self, unknowns: Floats) -> Floats:
        """(b, m) at unknowns (b, m, p)."""
        p = unknowns.shape[2]
        square = np.sum(np.matmul(unknowns - self.centre[:, None], self.factor) ** 2, axis=2)
        log_determinant = np.sum(np.log(np.diagonal(self.factor, axis1=1, axis2=2)), axis=1)
        constant = gammaln(0.5 * (FREEDOM + p)) - gammaln(0.5 * FREEDOM) - 0.5 * p * np.log(FREEDOM * np.pi)
        return np.asarray(constant + log_determinant[:, None] - 0.5 * (FREEDOM + p) * np.log1p(square / FREEDOM))


def draw_clouds(
    fits: Sequence[LocalFit],
    prior: Normal,
    places: Places,
    order: ColumnOrder,
    generators: Sequence[np.random.Generator],
    size: tuple[int, int, int],
) -> Cloud:
    """Clouds of b places; `size`: draws at each fit, rounds after it, draws of each round.

    Each round adds a multivariate t, in turn of the moments of the draws so far (adaptive multiple importance sampling:
    Cornuet, Marin, Mira and Robert 2012, Scandinavian J. of Statistics 39, 798-812) and at the draw that is heaviest
    under the mixture so far (incremental mixture importance sampling: Raftery and Bao 2010, Biometrics 66, 1162-1173;
    both from memory). Either alone leaves some half of the effective draws of both.
    """
    first, rounds, more = size
    p = fits[0].unknowns.shape[1]
    parts = [_Part(fit.unknowns, np.asarray(np.linalg.cholesky(fit.curvature) / WIDENING)) for fit in fits]
    counts = [first] * len(fits)
    unknowns = np.concatenate([part.draw(*_normal_numbers(generators, first, p)) for part in parts], axis=1)
    log_l = _log_likelihoods(unknowns, places, order)
    log_prior = prior.log_density(unknowns)
    log_mixture = np.logaddexp.reduce([np.log(first) + part.log_density(unknowns) for part in parts])
    for turn in range(rounds):
        log_weight = log_l + log_prior - log_mixture
        make = _part_about_the_heaviest if turn % 2 else _part_of_the_moments
        part = make(unknowns, log_weight, prior, places, order)
        drawn = part.draw(*_normal_numbers(generators, more, p))
        old = np.logaddexp(log_mixture, np.log(more) + part.log_density(unknowns))
        parts.append(part)
        counts.append(more)
        densities = [np.log(n) + one.log_density(drawn) for n, one in zip(counts, parts, strict=True)]
        log_mixture = np.concatenate([old, np.logaddexp.reduce(densities)], axis=1)
        unknowns = np.concatenate([unknowns, drawn], axis=1)
        log_l = np.concatenate([log_l, _log_likelihoods(drawn, places, order)], axis=1)
        log_prior = np.concatenate([log_prior, prior.log_density(drawn)], axis=1)
    return Cloud(unknowns, log_l, log_mixture - np.log(sum(counts)), _gradients(unknowns, places, order))


def _part_about_the_heaviest(
    unknowns: Floats, log_weight: Floats, prior: Normal, places: Places, order: ColumnOrder
) -> _Part:
    """Where the mixture so far is thinnest for what lies there, with the curvature found there."""
    heaviest = np.take_along_axis(unknowns, np.argmax(log_weight, axis=1)[:, None, None], axis=1)[:, 0]
    curvature = evaluate(heaviest, places, order).curvature + prior.precision
    return _Part(heaviest, np.asarray(np.linalg.cholesky(curvature)))


def _part_of_the_moments(
    unknowns: Floats, log_weight: Floats, prior: Normal, places: Places, order: ColumnOrder
) -> _Part:
    """The mean and covariance of the draws so far, weights truncated (Ionides 2008), so that it stands in the middle.

    Few effective draws leave the covariance to the curvature at the mean.
    """
    p = unknowns.shape[2]
    total = np.logaddexp.reduce(log_weight, axis=1, keepdims=True)
    weight = np.exp(np.minimum(log_weight - total, -0.5 * np.log(log_weight.shape[1])))
    weight /= weight.sum(axis=1, keepdims=True)
    mean, covariance = moments(unknowns, weight)
    mean = np.clip(mean, places.lowest, places.highest)
    expected = np.linalg.inv(evaluate(mean, places, order).curvature + prior.precision)
    size = 1.0 / np.sum(weight**2, axis=1)[:, None, None]
    covariance = (size * covariance + p * expected) / (size + p)
    return _Part(mean, np.asarray(np.linalg.cholesky(np.linalg.inv(covariance))))


def _normal_numbers(generators: Sequence[np.random.Generator], count: int, p: int) -> tuple[Floats, Floats]:
    normal = np.array([one.standard_normal((count, p)) for one in generators])
    mixing = np.array([np.sqrt(FREEDOM / one.chisquare(FREEDOM, count)) for one in generators])
    return normal, mixing


def _log_likelihoods(unknowns: Floats, places: Places, order: ColumnOrder) -> Floats:
    """(b, m) at unknowns (b, m, p), a few places at a time."""
    step = max(1, BLOCK // unknowns.shape[1])
    parts = [np.arange(i, min(i + step, len(unknowns))) for i in range(0, len(unknowns), step)]
    return np.concatenate([log_likelihood(unknowns[rows], places.take(rows), order) for rows in parts])


def _gradients(unknowns: Floats, places: Places, order: ColumnOrder) -> Floats:
    """(b, m, p) at unknowns (b, m, p), those beyond the bounds taken at the bounds: they have no weight anyway."""
    b, m, p = unknowns.shape
    inside = np.clip(unknowns, places.lowest, places.highest).reshape(b * m, p)
    place = np.repeat(np.arange(b), m)
    rows = [np.arange(i, min(i + BLOCK, b * m)) for i in range(0, b * m, BLOCK)]
    parts = [evaluate(inside[some], places.take(place[some]), order).gradient for some in rows]
    return np.concatenate(parts).reshape(b, m, p)


class Weighed(NamedTuple):
    """A cloud under a prior: normalised weights (b, m), log evidence (b,), effective size (b,)."""

    weight: Floats
    log_evidence: Floats
    effective_size: Floats


def weigh(cloud: Cloud, prior: Normal) -> Weighed:
    """Weights of a cloud under a normal prior of its unknowns (Kish's effective size)."""
    log_weight = cloud.log_likelihood + prior.log_density(cloud.unknowns) - cloud.log_proposal
    total = np.logaddexp.reduce(log_weight, axis=1)
    weight = np.exp(log_weight - total[:, None])
    return Weighed(weight, total - np.log(weight.shape[1]), 1.0 / np.sum(weight**2, axis=1))


def moments(unknowns: Floats, weight: Floats) -> tuple[Floats, Floats]:
    """Mean (b, p) and covariance (b, p, p) of weighed unknowns (b, m, p)."""
    mean = np.einsum("bm,bmp->bp", weight, unknowns)
    away = unknowns - mean[:, None]
    return mean, np.matmul((away * weight[..., None]).transpose(0, 2, 1), away)


def sharp_moments(cloud: Cloud, weighed: Weighed, prior: Normal) -> tuple[Floats, Floats]:
    """Mean (b, p) and covariance (b, p, p) of a weighed cloud, with the chance of the draws taken out by the slope.

    Minus the slope of the log posterior, h, has mean 0 and covariance 1 with the unknowns whatever their distribution
    (Stein). So their regression on h, x = a + B h + r, gives the mean a and the covariance B + cov r: exact where the
    posterior is normal, however few the draws, and no worse than the plain moments where it is anything else. Control
    variates of zero variance: Mira, Solgi and Imparato 2013, Statistics and Computing 23, 653-662 (from memory).
    """
    weight, p = weighed.weight, cloud.unknowns.shape[2]
    plain, covariance = moments(cloud.unknowns, weight)
    away = cloud.unknowns - plain[:, None]
    slope = np.matmul(cloud.unknowns - prior.mean[:, None], prior.precision) - cloud.gradient
    middle = np.einsum("bm,bmp->bp", weight, slope)
    slope = slope - middle[:, None]
    weighted = (slope * weight[..., None]).transpose(0, 2, 1)
    of_slope, of_both = np.matmul(weighted, slope), np.matmul(weighted, away)
    # A trace of the identity keeps what has no slope, and what a few draws cannot tell, solvable.
    diagonal = np.arange(p)
    of_slope[:, diagonal, diagonal] *= 1.0 + 1e-6
    by_slope = np.linalg.solve(of_slope, of_both)  # (b, p, p), B transposed
    mean = plain - np.matmul(middle[:, None], by_slope)[:, 0]
    rest = away - np.matmul(slope, by_slope)
    left = np.matmul((rest * weight[..., None]).transpose(0, 2, 1), rest)
    # What is left was made smaller by the regression; few draws, inverted, are also too sure.
    size = weighed.effective_size[:, None, None]
    left *= size / np.maximum(size - 1.0 - p, 0.2 * size)
    found = 0.5 * (by_slope + by_slope.transpose(0, 2, 1)) + left
    return mean, _keep_near(found, covariance)


# How far a covariance may differ from the plain one, as a factor on variances: a few draws may mislead a regression.
FARTHEST = 4.0


def _keep_near(found: Floats, plain: Floats) -> Floats:
    """Covariances (b, p, p) held to within FARTHEST of the plain ones in every direction."""
    root = np.linalg.cholesky(plain + 1e-9 * plain.diagonal(axis1=1, axis2=2)[:, :, None] * np.eye(plain.shape[1]))
    half = np.linalg.solve(root, found)
    values, vectors = np.linalg.eigh(np.linalg.solve(root, half.transpose(0, 2, 1)))
    turned = np.matmul(root, vectors)
    return np.matmul(turned * np.clip(values, 1.0 / FARTHEST, FARTHEST)[:, None], turned.transpose(0, 2, 1))
