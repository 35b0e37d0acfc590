"""Batched damped least squares for layered models: steps, stopping, covariance and evidence.

Unknowns of each curve: ln thickness (k-1), ln resistivity (k), ln factor that each change of MN brings (s).
The misfit is robust: each reading's log residual comes from (1-p) N(0, σ) + p N(0, OUTLIER_DEVIATION),
p = OUTLIER_SHARE. The steps are those of expectation maximisation with Gauss-Newton inside, damped after Levenberg
and Marquardt.
"""

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import solve_triangular

from geoves.kernels.layered_earth import response, response_and_sensitivity, response_weights

Floats = NDArray[np.float64]

OUTLIER_SHARE = 0.02
OUTLIER_DEVIATION = 0.6
LONGEST_STEP = 1.0  # in natural logs: a factor of e
FIRST_DAMPING, LEAST_DAMPING, MOST_DAMPING = 0.1, 1e-6, 1e7
LOOSE_DEVIATION, LOOSE_ITERATIONS = 0.2, 10
TOLERANCE = 3e-3  # of the objective, in nats
LOG_TWO_PI = float(np.log(2.0 * np.pi))


class Curves(NamedTuple):
    """b curves padded to n readings on one grid of l wavenumbers.

    log_apparent_resistivity, deviation : (b, n), the deviation of its error in natural logs, infinite where padded
    weights : (b, n, l) from `response_weights`    wavenumber : (l,)
    segments : (b, n, s), 1 where a reading comes after change s of MN: log factors add up
    """

    log_apparent_resistivity: Floats
    deviation: Floats
    weights: Floats
    wavenumber: Floats
    segments: Floats

    def take(self, rows: NDArray[np.int64]) -> "Curves":
        """The curves of some rows, in that order."""
        return Curves(
            self.log_apparent_resistivity[rows],
            self.deviation[rows],
            self.weights[rows],
            self.wavenumber,
            self.segments[rows],
        )


class Readings(NamedTuple):
    """One curve: spacings in m, apparent resistivity in ohm m, error as a fraction, segment 0, 1, ... (n,) each."""

    half_spacing: Floats
    potential_half_spacing: Floats
    apparent_resistivity: Floats
    relative_error: Floats
    segment: NDArray[np.int64]


def stack_curves(readings: Sequence[Readings], wavenumber: Floats) -> Curves:
    """Curves of unlike length as one padded batch on one grid of wavenumbers."""
    n_readings = max(curve.half_spacing.size for curve in readings)
    n_segments = max(int(curve.segment.max()) for curve in readings)
    shape = (len(readings), n_readings)
    observed, deviation = np.zeros(shape), np.full(shape, np.inf)
    weights, segments = np.zeros((*shape, wavenumber.size)), np.zeros((*shape, n_segments))
    for i, curve in enumerate(readings):
        n = curve.half_spacing.size
        observed[i, :n] = np.log(curve.apparent_resistivity)
        deviation[i, :n] = curve.relative_error
        weights[i, :n] = response_weights(curve.half_spacing, curve.potential_half_spacing, wavenumber)
        segments[i, :n] = curve.segment[:, None] > np.arange(n_segments)
    return Curves(observed, deviation, weights, wavenumber, segments)


class Prior(NamedTuple):
    """Independent normal priors on the unknowns and the bounds of the search, each (b, 2k-1+s)."""

    mean: Floats
    deviation: Floats
    lowest: Floats
    highest: Floats

    def take(self, rows: NDArray[np.int64]) -> "Prior":
        """The priors of some rows, in that order."""
        return Prior(*(values[rows] for values in self))


class Fit(NamedTuple):
    """The most probable models.

    unknowns : (b, p)    objective : (b,) minus log posterior density, normalised in data and prior
    hessian : (b, p, p) Gauss-Newton    log_response : (b, n) without factors    robust_weight : (b, n) 0 to 1
    """

    unknowns: Floats
    objective: Floats
    hessian: Floats
    log_response: Floats
    robust_weight: Floats

    @property
    def log_evidence(self) -> Floats:
        """Laplace's approximation of the log evidence (b,) (MacKay 2003, chapter 27)."""
        _, log_determinant = np.linalg.slogdet(self.hessian)
        return np.asarray(-self.objective + 0.5 * self.unknowns.shape[1] * LOG_TWO_PI - 0.5 * log_determinant)

    def take(self, row: int) -> "Fit":
        """The fit of one curve, as a batch of one."""
        return Fit(*(values[row : row + 1] for values in self))


class _State(NamedTuple):
    """One evaluation at some unknowns."""

    objective: Floats
    gradient: Floats
    hessian: Floats
    log_response: Floats
    robust_weight: Floats


def robust_misfit(residual: Floats, deviation: Floats) -> tuple[Floats, Floats, Floats]:
    """Minus log density (b,) of the log residuals (b, n), the probability that each is no outlier, and its weight."""
    known = np.isfinite(deviation)
    narrow = np.where(known, deviation, 1.0)
    wide = np.maximum(OUTLIER_DEVIATION, narrow)
    inlier = np.log1p(-OUTLIER_SHARE) - 0.5 * (residual / narrow) ** 2 - np.log(narrow)
    outlier = np.log(OUTLIER_SHARE) - 0.5 * (residual / wide) ** 2 - np.log(wide)
    log_density = np.logaddexp(inlier, outlier)
    robust_weight = np.exp(inlier - log_density)
    weight = np.where(known, robust_weight / narrow**2 + (1.0 - robust_weight) / wide**2, 0.0)
    return np.sum(np.where(known, 0.5 * LOG_TWO_PI - log_density, 0.0), axis=1), robust_weight, weight


def _prior_misfit(unknowns: Floats, prior: Prior) -> Floats:
    """Minus log prior density (b,)."""
    from_prior = (unknowns - prior.mean) / prior.deviation
    return np.asarray(np.sum(0.5 * (from_prior**2 + LOG_TWO_PI) + np.log(prior.deviation), axis=1))


def objective(unknowns: Floats, n_layers: int, curves: Curves, prior: Prior) -> Floats:
    """Minus log posterior density (b,) at `unknowns` (b, p), normalised in both; curves and prior b or one."""
    k = n_layers
    model = np.exp(unknowns[:, : 2 * k - 1])
    apparent = response(curves.weights, curves.wavenumber, model[:, : k - 1], model[:, k - 1 :])
    factors = np.matmul(curves.segments, unknowns[:, 2 * k - 1 :, None])[..., 0]
    residual = curves.log_apparent_resistivity - np.log(apparent) - factors
    misfit, _, _ = robust_misfit(residual, np.broadcast_to(curves.deviation, residual.shape))
    return np.asarray(misfit + _prior_misfit(unknowns, prior))


def _evaluate(unknowns: Floats, n_layers: int, curves: Curves, prior: Prior) -> _State:
    k = n_layers
    model = np.exp(unknowns[:, : 2 * k - 1])
    apparent, sensitivity = response_and_sensitivity(
        curves.weights, curves.wavenumber, model[:, : k - 1], model[:, k - 1 :]
    )
    log_response = np.log(apparent)
    factors = np.matmul(curves.segments, unknowns[:, 2 * k - 1 :, None])[..., 0]
    residual = curves.log_apparent_resistivity - log_response - factors
    misfit, robust_weight, weight = robust_misfit(residual, curves.deviation)

    jacobian = np.concatenate([sensitivity, curves.segments], axis=2)
    weighted = jacobian * weight[..., None]
    gradient = np.matmul(weighted.transpose(0, 2, 1), residual[..., None])[..., 0]
    gradient -= (unknowns - prior.mean) / prior.deviation**2
    hessian = np.matmul(weighted.transpose(0, 2, 1), jacobian)
    diagonal = np.arange(unknowns.shape[1])
    hessian[:, diagonal, diagonal] += prior.deviation**-2
    return _State(misfit + _prior_misfit(unknowns, prior), gradient, hessian, log_response, robust_weight)


def local_hessian(unknowns: Floats, n_layers: int, curves: Curves, prior: Prior) -> Floats:
    """Gauss-Newton Hessians (b, p, p) of the objective at `unknowns` (b, p)."""
    return _evaluate(unknowns, n_layers, curves, prior).hessian


def log_sensitivity(unknowns: Floats, n_layers: int, curves: Curves) -> Floats:
    """Derivative (b, n, p) of the log readings with respect to the unknowns (b, p), segments' factors included."""
    k, model = n_layers, np.exp(unknowns[:, : 2 * n_layers - 1])
    _, sensitivity = response_and_sensitivity(curves.weights, curves.wavenumber, model[:, : k - 1], model[:, k - 1 :])
    return np.concatenate([sensitivity, curves.segments], axis=2)


def _step(unknowns: Floats, state: _State, damping: Floats, prior: Prior) -> Floats:
    """A damped Gauss-Newton step (b, p), with unknowns held that push against a bound."""
    held = ((unknowns <= prior.lowest) & (state.gradient < 0)) | ((unknowns >= prior.highest) & (state.gradient > 0))
    hessian = np.where(held[:, :, None] | held[:, None, :], 0.0, state.hessian)
    diagonal = np.arange(unknowns.shape[1])
    curvature = state.hessian[:, diagonal, diagonal]
    hessian[:, diagonal, diagonal] = np.where(held, 1.0, curvature * (1.0 + damping[:, None]))
    step = np.linalg.solve(hessian, np.where(held, 0.0, state.gradient)[..., None])[..., 0]
    longest = np.max(np.abs(step), axis=1, keepdims=True)
    return np.asarray(step * np.minimum(1.0, LONGEST_STEP / np.maximum(longest, 1e-300)))


def fit_layers(start: Floats, n_layers: int, curves: Curves, prior: Prior, *, iterations: int = 40) -> Fit:
    """The most probable layered models near `start` (b, p), p = 2 n_layers - 1 + s.

    Curves drop out of the batch as they converge: by an accepted step that gains less than TOLERANCE, or where no
    damped step gains any more.
    """
    unknowns = np.clip(start, prior.lowest, prior.highest)
    state = _evaluate(unknowns, n_layers, curves, prior)
    damping = np.full(unknowns.shape[0], FIRST_DAMPING)
    active = np.arange(unknowns.shape[0])
    for _ in range(iterations):
        here, those = prior.take(active), curves.take(active)
        now = _State(*(values[active] for values in state))
        trial = np.clip(
            unknowns[active] + _step(unknowns[active], now, damping[active], here), here.lowest, here.highest
        )
        then = _evaluate(trial, n_layers, those, here)
        gain = now.objective - then.objective
        better = gain > 0
        rows = active[better]
        unknowns[rows] = trial[better]
        for kept, new in zip(state, then, strict=True):
            kept[rows] = new[better]
        damping[active] = np.clip(damping[active] * np.where(better, 0.3, 5.0), LEAST_DAMPING, MOST_DAMPING)
        done = (better & (gain < TOLERANCE)) | (damping[active] >= MOST_DAMPING)
        active = active[~done]
        if not active.size:
            break
    return Fit(unknowns, state.objective, state.hessian, state.log_response, state.robust_weight)


def fit_from_afar(start: Floats, n_layers: int, curves: Curves, prior: Prior) -> Fit:
    """`fit_layers` from a start that may be far from the curve.

    Its first steps take errors for no less than LOOSE_DEVIATION: else readings far off count as bad ones, lose their
    weight, and the search ends where it began.
    """
    loose = curves._replace(deviation=np.maximum(curves.deviation, LOOSE_DEVIATION))
    near = fit_layers(start, n_layers, loose, prior, iterations=LOOSE_ITERATIONS)
    return fit_layers(near.unknowns, n_layers, curves, prior)


def keep_better(first: Fit, second: Fit) -> Fit:
    """For each curve the fit of the lower objective."""
    better = second.objective < first.objective
    return Fit(*(np.where(better.reshape(-1, *[1] * (a.ndim - 1)), b, a) for a, b in zip(first, second, strict=True)))


def laplace_draws(fit: Fit, normal: Floats) -> Floats:
    """Draws (m, p) from the normal approximation at a fit (a batch of one); `normal` (m, p) standard normal numbers."""
    factor = np.linalg.cholesky(fit.hessian[0])
    return np.asarray(fit.unknowns[0] + solve_triangular(factor, normal.T, lower=True, trans="T").T)
