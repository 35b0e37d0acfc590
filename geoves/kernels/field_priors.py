"""Gaussian priors of latent fields over a plane, and the same fitted to what is known of a field.

A field's covariance is stationary, with a direction if it has one; to it may be added a drift of constant mean and a
drift that follows the relief of the basal contact in any smooth manner. Their sizes are inferred and may go to nothing.
"""

from typing import NamedTuple

import numpy as np
from scipy.linalg import cho_factor, cho_solve
from scipy.optimize import minimize

from geoves.kernels.covariances import (
    CORRELATIONS,
    Covariance,
    FloatArray,
    SquaredDistances,
    covariance_matrix,
    square_distances,
    stretch_distances,
    unpack_direction,
)

# Relief (m) over which a drift that follows it may turn.
RELIEF_LENGTH = 40.0
# Widths, in natural logs, of the priors of a covariance's length (about a third of the extent) and elongation, and of
# the relief drift's variance (about the field's own).
LENGTH_WIDTH, ELONGATION_WIDTH, RELIEF_WIDTH = 1.0, 0.8, 1.5
LONGEST_ELONGATION = 1.6
# The length that is expected, as a share of the extent.
FIRST_LENGTH = 1.0 / 3.0


class FieldPrior(NamedTuple):
    """mean, drift_variance : of the constant    relief_variance : of the drift that follows relief, 0 for none
    variance, width : what the sill is expected to be, and how well (natural log)    nugget_share : expected
    directed : whether the covariance may have a direction
    """

    mean: float
    covariance: Covariance
    drift_variance: float
    variance: float
    width: float
    nugget_share: float
    relief_variance: float = 0.0
    directed: bool = False


def relief_kernel(first: FloatArray, second: FloatArray) -> FloatArray:
    """(n, m) correlation of a smooth function of relief (m) at two sets of places; squared exponential."""
    return np.asarray(np.exp(-0.5 * (np.subtract.outer(first, second) / RELIEF_LENGTH) ** 2))


def prior_covariance(
    prior: FieldPrior, first: FloatArray, second: FloatArray, relief: tuple[FloatArray, FloatArray]
) -> FloatArray:
    """(n, m) between the fields at `first` (n, 2) and `second` (m, 2), the nugget left out."""
    total = covariance_matrix(first, second, prior.covariance) + prior.drift_variance
    if prior.relief_variance:
        total += prior.relief_variance * relief_kernel(*relief)
    return np.asarray(total)


def own_covariance(prior: FieldPrior, points: FloatArray, relief: FloatArray) -> FloatArray:
    """(n, n) at `points` (n, 2), the nugget on the diagonal."""
    total = prior_covariance(prior, points, points, (relief, relief))
    total[np.diag_indices_from(total)] += prior.covariance.nugget + 1e-9 * total.diagonal()
    return total


def own_variance(prior: FieldPrior) -> float:
    """The diagonal of `own_covariance`, the same everywhere."""
    total = prior.covariance.partial_sill + prior.drift_variance
    if prior.relief_variance:
        total += prior.relief_variance
    return total + (prior.covariance.nugget + 1e-9 * total)


class _Moments(NamedTuple):
    """A fit's problem in units of the prior's variance and the region's extent."""

    prior: FieldPrior
    squares: SquaredDistances
    by_relief: FloatArray
    second_moment: FloatArray

    @property
    def follows_relief(self) -> bool:
        return self.prior.relief_variance > 0.0

    @property
    def drift(self) -> float:
        return self.prior.drift_variance / self.prior.variance


def fit_prior(prior: FieldPrior, points: FloatArray, relief: FloatArray, second_moment: FloatArray) -> FieldPrior:
    """The prior that best explains a field of which the posterior second moment about `prior.mean` (n, n) is known.

    One maximisation of expectation maximisation (Dempster, Laird and Rubin 1977): the least of ½ ln |K| + ½ tr(K⁻¹ S)
    and weak priors on what K is made of. Its gradient is checked against differences.
    """
    extent = float(np.hypot(*np.ptp(points, axis=0)))
    problem = _Moments(
        prior, square_distances(points, extent), relief_kernel(relief, relief), second_moment / prior.variance
    )
    bounds = np.array(_BOUNDS)
    if not prior.directed:
        bounds[3:5] = 0.0
    fits = [
        minimize(
            _penalised, np.clip(start, *bounds.T), (problem,), jac=True, method="L-BFGS-B", bounds=bounds,
            options={"maxiter": 30},
        )
        for start in _starts(prior, extent)
    ]  # fmt: skip
    best = min(fits, key=lambda fit: float(fit.fun)).x
    length, azimuth_deg, ratio = unpack_direction(*best[2:5])
    sill, nugget, relief_variance = (float(one) * prior.variance for one in np.exp(best[[0, 1, 5]]))
    covariance = Covariance(prior.covariance.model, nugget, sill, length * extent, azimuth_deg, ratio)
    return prior._replace(covariance=covariance, relief_variance=relief_variance if problem.follows_relief else 0.0)


# Of log sill, log nugget, log length, the two of the direction, and log relief variance.
_BOUNDS = [(-5.0, 4.0), (-9.0, 2.0), (-4.0, 0.7), *[(-LONGEST_ELONGATION, LONGEST_ELONGATION)] * 2, (-7.0, 3.0)]


def _starts(prior: FieldPrior, extent: float) -> list[FloatArray]:
    """Where the fit starts: at the covariance so far, and in four directions where it has none yet."""
    known = prior.covariance
    elongation, turn = -np.log(known.ratio), 2.0 * np.deg2rad(known.azimuth_deg)
    start = np.array(
        [
            np.log(known.partial_sill / prior.variance),
            np.log(max(known.nugget / prior.variance, 1e-4)),
            np.log(known.length / extent) - 0.5 * elongation,
            elongation * np.cos(turn),
            elongation * np.sin(turn),
            np.log(max(prior.relief_variance / prior.variance, 1e-3)),
        ]
    )
    if not prior.directed or elongation > 0.05:
        return [start]
    turns = np.array([(0.5, 0.0), (-0.5, 0.0), (0.0, 0.5), (0.0, -0.5)])
    return [start + np.array([0.0, 0.0, 0.0, p, q, 0.0]) for p, q in turns]


def _penalised(parameters: FloatArray, problem: _Moments) -> tuple[float, FloatArray]:
    """What is minimised, and its gradient (6,)."""
    value, gradient = _negative_expected(parameters, problem)
    penalty, penalty_gradient = _penalty(parameters, problem)
    return value + penalty, gradient + penalty_gradient


def _negative_expected(parameters: FloatArray, problem: _Moments) -> tuple[float, FloatArray]:
    """Minus the expected log density of the field, without its constant, and its gradient (6,)."""
    sill, nugget, relief = np.exp(parameters[[0, 1, 5]])
    squared, by_p, by_q = stretch_distances(problem.squares, *parameters[2:5])
    rho, fall = CORRELATIONS[problem.prior.covariance.model](np.sqrt(squared))
    total = sill * rho + problem.drift
    if problem.follows_relief:
        total += relief * problem.by_relief
    total[np.diag_indices_from(total)] += nugget + 1e-8
    factor = cho_factor(total, lower=True, check_finite=False)
    inverse = cho_solve(factor, np.eye(len(total)), check_finite=False)
    value = np.log(np.diag(factor[0])).sum() + 0.5 * np.sum(inverse * problem.second_moment)
    slope = 0.5 * (inverse - inverse @ problem.second_moment @ inverse)
    by_squared = -0.5 * sill * fall / np.where(squared > 0.0, squared, 1.0) * slope
    return float(value), np.array(
        [
            sill * np.sum(slope * rho),
            nugget * np.trace(slope),
            sill * np.sum(slope * fall),
            np.sum(by_squared * by_p),
            np.sum(by_squared * by_q),
            relief * np.sum(slope * problem.by_relief) if problem.follows_relief else 0.0,
        ]
    )


def _penalty(parameters: FloatArray, problem: _Moments) -> tuple[float, FloatArray]:
    """Weak priors on the covariance: on the log of its whole, its nugget, length, elongation, and the relief drift."""
    prior = problem.prior
    sill, nugget = np.exp(parameters[:2])
    _, _, log_length, p, q, log_relief = parameters
    off = np.log(sill + nugget)
    longer = log_length - np.log(FIRST_LENGTH)
    value = 0.5 * (off / prior.width) ** 2 + nugget / prior.nugget_share + 0.5 * (longer / LENGTH_WIDTH) ** 2
    value += 0.5 * (p * p + q * q) / ELONGATION_WIDTH**2
    away = off / prior.width**2 / (sill + nugget)
    gradient = np.array(
        [
            away * sill,
            away * nugget + nugget / prior.nugget_share,
            longer / LENGTH_WIDTH**2,
            p / ELONGATION_WIDTH**2,
            q / ELONGATION_WIDTH**2,
            0.0,
        ]
    )
    if problem.follows_relief:
        value += 0.5 * (log_relief / RELIEF_WIDTH) ** 2
        gradient[5] = log_relief / RELIEF_WIDTH**2
    return float(value), gradient


def weights_at(
    prior: FieldPrior, points: FloatArray, cells: FloatArray, relief: tuple[FloatArray, FloatArray]
) -> tuple[FloatArray, FloatArray]:
    """Weights (n, c) that carry a field from places to cells, and the variance (c,) that they leave.

    points : (n, 2)    cells : (c, 2)    relief : of the cells (c,) and of the places (n,). Simple kriging about the
    prior's mean, drifts in the covariance; a cell is a new place, so that the nugget is in its variance.
    """
    own = own_covariance(prior, points, relief[1])
    between = prior_covariance(prior, points, cells, (relief[1], relief[0]))
    weights = np.asarray(cho_solve(cho_factor(own, lower=True), between))
    total = prior.covariance.sill + prior.drift_variance + prior.relief_variance
    return weights, np.maximum(total - np.sum(weights * between, axis=0), 1e-9 * total)
