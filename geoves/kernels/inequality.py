"""Bounds on a field turned into data with errors, and the closed forms this rests on.

A place that only says "the field is above (or below) so much" becomes a pseudo-datum by expectation propagation, so
that ordinary kriging can take it like any other datum.
"""

from typing import NamedTuple

import numpy as np
from scipy.linalg import cho_factor, cho_solve, cholesky, solve_triangular
from scipy.special import erfcx, log_ndtr, ndtr, ndtri
from threadpoolctl import threadpool_limits

from geoves.kernels.covariances import (
    ERROR_CEILING,
    ERROR_FLOOR,
    NOTHING_STATED,
    Covariance,
    FloatArray,
    Stated,
    bounded_error_variance,
    covariance_matrix,
    fit_covariance,
)

_SWEEPS = 400
_DAMPING = 0.6
_TOLERANCE = 1e-7  # of the posterior means, in deviations
_SHARPEST = 1e-3  # softness of a sharp bound, in deviations of the field: what keeps contradictory ones finite
_ROUNDS = 10
_SETTLED = 0.03  # of the logs of sill and length
_TELLING = 100.0  # pseudo-variances beyond so many sills tell a fit nothing


class Bounds(NamedTuple):
    """What is known at `points` (m, 2) where no value is: the field is on one side of `bound` (m,).

    side : (m,), +1 the field is above the bound, -1 below
    softness : (m,), standard deviation of the bound itself, in the unit of the values; 0 for a sharp one
    """

    points: FloatArray
    bound: FloatArray
    side: FloatArray
    softness: FloatArray


def _hazard(z: FloatArray) -> tuple[FloatArray, FloatArray]:
    """The ratio r = φ(z) / Φ(z), and 1 - r (z + r), both to full precision in either tail."""
    with np.errstate(over="ignore"):  # far inside the bound erfcx overflows, and r is 0 there
        r = np.sqrt(2.0 / np.pi) / erfcx(-z / np.sqrt(2.0))
    far = np.minimum(z, -30.0) ** -2
    kept = np.where(z < -30.0, far - 6.0 * far**2 + 50.0 * far**3, 1.0 - r * (z + r))
    return r, np.clip(kept, 0.0, 1.0)


def truncated_normal_moments(
    mean: FloatArray, variance: FloatArray, bound: FloatArray, side: FloatArray, softness: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Log probability of the bound, and mean and variance of a normal variable once the bound is known; (n,) each.

    side : +1 the variable is above `bound`, -1 below      softness : deviation of the bound itself, 0 for a sharp one.
    The bound enters as Φ(side (x - bound) / softness). Rasmussen and Williams 2006, Gaussian Processes for Machine
    Learning, eq. 3.58 (from memory); checked against scipy.stats.truncnorm and quadrature.
    """
    total = variance + softness**2
    z = side * (mean - bound) / np.sqrt(total)
    r, kept = _hazard(z)
    share = variance / total
    return log_ndtr(z), mean + side * share * np.sqrt(total) * r, variance * (1.0 - share * (1.0 - kept))


def rectified_normal_moments(mean: FloatArray, deviation: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Mean and standard deviation of max(0, X), X normal with `mean` and `deviation` (above 0); any shape.

    Mean μ Φ(a) + σ φ(a), second moment (μ² + σ²) Φ(a) + μ σ φ(a), a = μ / σ (from memory; checked by quadrature).
    """
    a = mean / deviation
    density = np.exp(-0.5 * a * a) / np.sqrt(2.0 * np.pi)
    first = np.maximum(a * ndtr(a) + density, 0.0)
    # E[max(0, X)²] - E² written by parts, which loses less where a is large.
    spread = ndtr(a) + first * (a - first)
    return deviation * first, deviation * np.sqrt(np.maximum(spread, 0.0))


def latent_moments(share: float, mean_present: float) -> tuple[float, float]:
    """Mean and deviation of a normal variable that is above 0 with probability `share`, and `mean_present` then.

    E[X | X > 0] = μ + σ φ(μ/σ) / Φ(μ/σ) (from memory; checked by quadrature).
    """
    z = float(ndtri(share))
    deviation = mean_present / (z + float(np.exp(-0.5 * z * z)) / (np.sqrt(2.0 * np.pi) * share))
    return z * deviation, deviation


def bounds_alone_as_values(bounds: Bounds, mean: float, deviation: float) -> tuple[FloatArray, FloatArray]:
    """Pseudo-values and pseudo-variances (m,) of bounds on a field of known mean and deviation, each by itself.

    The mean and variance that the bound leaves, the field's own taken out again: what one site of expectation
    propagation says before it hears of its neighbours.
    """
    centre, variance = np.full(len(bounds.bound), mean), np.full(len(bounds.bound), deviation**2)
    softness = np.maximum(bounds.softness, _SHARPEST * deviation)
    _, new_mean, new_variance = truncated_normal_moments(centre, variance, bounds.bound, bounds.side, softness)
    precision = np.maximum(1.0 / new_variance - 1.0 / variance, 1.0 / (ERROR_CEILING * variance))
    return (new_mean / new_variance - centre / variance) / precision, 1.0 / precision


def field_at_places(
    points: FloatArray,
    values: FloatArray,
    error_variance: FloatArray,
    places: FloatArray,
    covariance: Covariance,
) -> tuple[FloatArray, FloatArray]:
    """Mean (m,) and covariance (m, m) of the field at `places` (m, 2), nugget included, from data of unknown mean.

    points : (n, 2), n ≥ 1      values, error_variance : (n,). The mean of the field is anything beforehand (flat).
    """
    sill = covariance.sill
    own = covariance_matrix(points, points, covariance)
    own[np.diag_indices_from(own)] += covariance.nugget + bounded_error_variance(error_variance, covariance)
    factor = cho_factor(own / sill, lower=True)
    between = covariance_matrix(points, places, covariance) / sill
    weights = cho_solve(factor, between)
    ones = cho_solve(factor, np.ones(len(values)))
    information = ones.sum()
    level = float(ones @ values / information)
    missing = 1.0 - weights.sum(axis=0)
    mean = level + weights.T @ (values - level)
    spread = covariance_matrix(places, places, covariance) / sill - between.T @ weights
    spread += np.outer(missing, missing) / information
    spread[np.diag_indices_from(spread)] += covariance.nugget / sill + ERROR_FLOOR
    return mean, sill * 0.5 * (spread + spread.T)


def _posterior(
    mean: FloatArray, spread: FloatArray, precision: FloatArray, shift: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Mean and variance of N(mean, spread) times sites exp(shift f - precision f² / 2), f taken from `mean`."""
    root = np.sqrt(precision)
    inner = np.eye(len(mean)) + root[:, None] * spread * root
    half = solve_triangular(cholesky(inner, lower=True), root[:, None] * spread, lower=True)
    covariance = spread - half.T @ half
    return mean + covariance @ shift, np.maximum(np.diag(covariance), 0.0)


@threadpool_limits.wrap(limits=1)  # many small factors: threads cost more than they bring
def bounds_as_values(
    points: FloatArray, values: FloatArray, error_variance: FloatArray, bounds: Bounds, covariance: Covariance
) -> tuple[FloatArray, FloatArray]:
    """Pseudo-values and pseudo-variances (m,) that stand in `krige` for bounds, at `bounds.points`.

    points, values, error_variance : (n, 2), (n,), (n,): data proper, n ≥ 1; their unknown mean is the bounds' too
    Pseudo-variances are above 0; a bound that the data make idle gets a very large one. Expectation propagation,
    all sites at once with damping: Minka 2001; Rasmussen and Williams 2006, sect. 3.6 (from memory). The sites are
    log-concave, so that no variance turns negative but by rounding. Sharp bounds that contradict each other at one
    place may not settle; what is returned then is finite, and between them. Checked in tests/kernels/test_inequality.py
    against a Gibbs sampler.
    """
    if not len(bounds.bound):
        return np.empty(0), np.empty(0)
    mean, spread = field_at_places(points, values, error_variance, bounds.points, covariance)
    _, bound, side, softness = bounds
    softness = np.hypot(softness, _SHARPEST * np.sqrt(covariance.sill))
    precision, shift = np.zeros_like(mean), np.zeros_like(mean)
    centre, variance = mean, np.diag(spread).copy()
    for _ in range(_SWEEPS):
        cavity_precision = np.maximum(1.0 / variance - precision, 1e-12 / covariance.sill)
        cavity_mean = mean + ((centre - mean) / variance - shift) / cavity_precision
        _, tilted_mean, tilted_variance = truncated_normal_moments(
            cavity_mean, 1.0 / cavity_precision, bound, side, softness
        )
        new_precision = np.clip(1.0 / tilted_variance - cavity_precision, 0.0, 1.0 / (ERROR_FLOOR * covariance.sill))
        new_shift = (new_precision + cavity_precision) * (tilted_mean - mean) - cavity_precision * (cavity_mean - mean)
        precision = precision + _DAMPING * (new_precision - precision)
        shift = shift + _DAMPING * (new_shift - shift)
        before = centre
        centre, variance = _posterior(mean, spread, precision, shift)
        variance = np.maximum(variance, 0.1 * ERROR_FLOOR * covariance.sill)
        if np.max(np.abs(centre - before) / np.sqrt(variance), initial=0.0) < _TOLERANCE:
            break
    idle = precision < 1.0 / (ERROR_CEILING * covariance.sill)
    working = np.where(idle, 1.0, precision)
    pseudo_variance = np.where(idle, ERROR_CEILING * covariance.sill, 1.0 / working)
    return np.where(idle, centre, mean + shift / working), pseudo_variance


def fit_covariance_with_bounds(
    points: FloatArray,
    values: FloatArray,
    error_variance: FloatArray,
    bounds: Bounds,
    model: str = "matern32",
    stated: Stated = NOTHING_STATED,
) -> tuple[Covariance, FloatArray, FloatArray]:
    """Covariance fitted to data and bounds together, with the pseudo-values and pseudo-variances (m,) that go with it.

    Bounds are turned into pseudo-data, the covariance fitted to all, and so on until both agree. At a fixed point of
    expectation propagation the gradient of its evidence is that of the pseudo-data held fixed (Rasmussen and Williams
    2006, sect. 5.5.2, from memory), so that what is settled on is the evidence of the bounds too, no draws needed.
    Without bounds it is `fit_covariance`. Needs three data proper.
    """
    covariance = fit_covariance(points, values, error_variance, model, stated)
    for _ in range(_ROUNDS if len(bounds.bound) else 0):
        pseudo_value, pseudo_variance = bounds_as_values(points, values, error_variance, bounds, covariance)
        telling = pseudo_variance < _TELLING * covariance.sill
        before = covariance
        covariance = fit_covariance(
            np.vstack((points, bounds.points[telling])),
            np.concatenate((values, pseudo_value[telling])),
            np.concatenate((error_variance, pseudo_variance[telling])),
            model,
            stated,
        )
        change = np.log([covariance.sill / before.sill, covariance.length / before.length])
        if np.max(np.abs(change)) < _SETTLED:
            break
    return covariance, *bounds_as_values(points, values, error_variance, bounds, covariance)
