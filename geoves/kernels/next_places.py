"""Which of many possible measurements of a Gaussian field lower a doubt most, one after the other.

What a measurement takes from the variance of a normal field does not hang on what it will show: with the covariance P
given all data so far, a value at c with error variance r lowers the variance at t by P_tc² / (P_cc + r). So plans can
be made before anything is measured. Choosing greedily is exact for one place, and in practice near the best for many
(Krause, Singh and Guestrin 2008, Journal of Machine Learning Research 9, 235-284, from memory).
"""

from typing import NamedTuple, Protocol

import numpy as np
from scipy.linalg import cho_factor, cho_solve
from scipy.special import ndtri, owens_t

from geoves.kernels.covariances import FloatArray
from geoves.kernels.field_priors import FieldPrior, own_covariance, prior_covariance

# Probabilities are held this far from 0 and 1, so that their quantiles are finite.
LEAST_PROBABILITY = 1e-4


class KnownField(NamedTuple):
    """A field at n places: its prior, points (n, 2), relief (n,) m, what is expected (n,), and the covariance of it."""

    prior: FieldPrior
    points: FloatArray
    relief: FloatArray
    mean: FloatArray
    covariance: FloatArray


def known_from_data(
    prior: FieldPrior,
    points: FloatArray,
    values: FloatArray,
    error_variance: FloatArray,
    relief: FloatArray | None = None,
) -> KnownField:
    """The field at places where it was measured with an error; without `relief` (n,) none is followed."""
    relief = np.zeros(len(values)) if relief is None else relief
    own = own_covariance(prior, points, relief)
    factor = cho_factor(own + np.diag(error_variance), lower=True)
    mean = prior.mean + own @ cho_solve(factor, values - prior.mean)
    return KnownField(prior, points, relief, mean, own - own @ cho_solve(factor, own))


class Carried(NamedTuple):
    """A field at cells (c, 2), given all places: mean (c,); weights (n, c); relief (c,) m."""

    cells: FloatArray
    mean: FloatArray
    weights: FloatArray
    relief: FloatArray


def carry(known: KnownField, cells: FloatArray, relief: FloatArray) -> Carried:
    """The field at cells; `relief` (c,) is of the cells."""
    own = own_covariance(known.prior, known.points, known.relief)
    between = prior_covariance(known.prior, known.points, cells, (known.relief, relief))
    weights = np.asarray(cho_solve(cho_factor(own, lower=True), between))
    mean = known.prior.mean + weights.T @ (known.mean - known.prior.mean)
    return Carried(cells, np.asarray(mean), weights, relief)


def covariance_between(known: KnownField, first: Carried, second: Carried) -> FloatArray:
    """(a, b) of the field at two sets of cells given all places, the nugget of the cells left out."""
    relief = first.relief, second.relief
    prior = prior_covariance(known.prior, first.cells, second.cells, relief)
    explained = prior_covariance(known.prior, known.points, second.cells, (known.relief, second.relief))
    return np.asarray(prior + first.weights.T @ (known.covariance @ second.weights - explained))


def variance_at(known: KnownField, carried: Carried) -> FloatArray:
    """The diagonal (c,) of `covariance_between` a set of cells and itself."""
    prior = known.prior
    total = prior.covariance.partial_sill + prior.drift_variance + prior.relief_variance
    explained = prior_covariance(prior, known.points, carried.cells, (known.relief, carried.relief))
    added = np.sum(carried.weights * (known.covariance @ carried.weights - explained), axis=0)
    return np.maximum(total + added, 1e-9 * total)


class Doubt(Protocol):
    """What is asked at t targets, as a variance."""

    def __call__(self, left: FloatArray) -> FloatArray:
        """Expected variance (..., t) of what is asked, where `left` (..., t) is left of the field's own variance."""


class LengthDoubt(NamedTuple):
    """Of a length: `total` (t,) m² of which the field explains `slope`² (t,) times its variance, at `first` (t,)."""

    total: FloatArray
    slope: FloatArray
    first: FloatArray

    def __call__(self, left: FloatArray) -> FloatArray:
        return self.total - self.slope**2 * (self.first - left)


class PresenceDoubt(NamedTuple):
    """Of a thing that is there where a latent field is above a threshold, now with `probability` (t,).

    first : (t,) the field's variance now    nugget : of the field
    """

    probability: FloatArray
    first: FloatArray
    nugget: float

    def __call__(self, left: FloatArray) -> FloatArray:
        """E p'(1 - p') = p - Φ₂(h, h; ρ), h = Φ⁻¹(p), ρ the share of the variance that is known by then.

        Φ₂(h, h; ρ) = Φ(h) - 2 T(h, √((1-ρ)/(1+ρ))) with Owen's T (Owen 1956, Annals of Mathematical Statistics 27,
        1075-1090, from memory).
        """
        quantile = ndtri(np.clip(self.probability, LEAST_PROBABILITY, 1.0 - LEAST_PROBABILITY))
        share = np.clip((self.first - left) / (self.first + self.nugget), 0.0, 1.0)
        return np.asarray(2.0 * owens_t(quantile, np.sqrt((1.0 - share) / (1.0 + share))))


def presence_error(probability: FloatArray, variance: FloatArray, worth: float = 1.0) -> FloatArray:
    """Error variance (c,) of a value of the field that would tell as much of it as seeing whether the thing is there.

    Seeing on which side of a threshold a normal value lies lowers its variance by the share φ(h)² / (p (1 - p)) on
    average (moments of the truncated normal); `worth` is the share of that which a poorer look gets.
    variance : (c,) of the field, nugget included
    """
    p = np.clip(probability, LEAST_PROBABILITY, 1.0 - LEAST_PROBABILITY)
    density = np.exp(-0.5 * ndtri(p) ** 2) / np.sqrt(2.0 * np.pi)
    share = np.clip(worth * density**2 / (p * (1.0 - p)), 1e-12, 1.0 - 1e-12)
    return np.asarray(variance * (1.0 / share - 1.0))


class Possible(NamedTuple):
    """What may be measured: the field's covariance among c candidates (c, c) and with t targets (c, t) without nugget,
    its variance (t,) at the targets, and the error variance (c, k) of each kind of measurement, nugget included; inf
    where a kind is not possible. cost : (k,) of each kind.
    """

    among: FloatArray
    with_targets: FloatArray
    at_targets: FloatArray
    error_variance: FloatArray
    cost: FloatArray


class Choice(NamedTuple):
    """candidate, kind : which    before, after : mean doubt (a variance) at the targets around it
    by_kind : (k,) mean doubt after it had the place been given to each kind    variance : the field's here, after it
    """

    candidate: int
    kind: int
    before: float
    after: float
    by_kind: FloatArray
    variance: float


def choose_greedily(possible: Possible, doubt: Doubt, count: int) -> list[Choice]:
    """At most `count` measurements, no candidate twice, each the best buy given those before it: the most lowering of
    the mean doubt for its cost. It ends where nothing lowers it any more.
    """
    among, between, left = (np.array(one, dtype=float) for one in possible[:3])
    open_places = np.ones(len(among), dtype=bool)
    choices: list[Choice] = []
    for _ in range(count):
        before = float(np.mean(doubt(left)))
        after = _mean_after(among, between, left, possible.error_variance, doubt)
        worth = np.where(open_places[:, None], (before - after) / possible.cost, -np.inf)
        candidate, kind = np.unravel_index(int(np.argmax(worth)), worth.shape)
        if not worth[candidate, kind] > 1e-12 * before:
            break
        root = np.sqrt(among[candidate, candidate] + possible.error_variance[candidate, kind])
        gain, gain_at_targets = among[:, candidate] / root, between[candidate] / root
        between -= np.outer(gain, gain_at_targets)
        among -= np.outer(gain, gain)
        left = np.maximum(left - gain_at_targets**2, 0.0)
        open_places[candidate] = False
        choices.append(
            Choice(
                int(candidate), int(kind), before, float(after[candidate, kind]), after[candidate],
                float(max(among[candidate, candidate], 0.0)),
            )
        )  # fmt: skip
    return choices


def _mean_after(
    among: FloatArray, between: FloatArray, left: FloatArray, error_variance: FloatArray, doubt: Doubt
) -> FloatArray:
    """Mean doubt (c, k) after each measurement alone."""
    variance = np.diag(among)
    return np.array(
        [
            [float(np.mean(doubt(np.maximum(left - row**2 / (own + error), 0.0)))) for error in errors]
            for row, own, errors in zip(between, variance, error_variance, strict=True)
        ]
    )
