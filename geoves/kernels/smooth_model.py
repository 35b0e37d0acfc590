"""The smoothest layered model that fits: fixed thin layers, their log resistivities as alike as the readings allow.

Constable, S. C., Parker, R. L., and Constable, C. G., 1987, Occam's inversion, Geophysics 52, 289-300: the largest
weight on roughness whose misfit is what the errors explain. Here the weight cools by a fixed factor from step to step.
"""

import numpy as np
from numpy.typing import NDArray

from geoves.kernels.damped_steps import Curves, robust_misfit
from geoves.kernels.layered_earth import response_and_sensitivity

Floats = NDArray[np.float64]

FIRST_ROUGHNESS_WEIGHT, COOLING = 300.0, 0.6
LONGEST_STEP = 0.7
# Chi-square per reading at which cooling stops, and how weakly the whole is held to the curve's level.
TARGET, LEVEL_WEIGHT = 1.0, 1e-3


def smooth_thickness(shallowest: float, deepest: float, n_layers: int) -> Floats:
    """Thicknesses (n_layers - 1,) m of layers whose tops go from `shallowest` to `deepest` (m) evenly in the log."""
    return np.diff(np.geomspace(shallowest, deepest, n_layers - 1), prepend=0.0)


def fit_smooth(curves: Curves, thickness: Floats, *, iterations: int = 24) -> tuple[Floats, Floats]:
    """Resistivity (b, k) ohm m of the smoothest models on fixed layers, and their chi-square per reading (b,).

    curves : their segments are not fitted, so shifts are taken out of the readings beforehand; errors as given
    thickness : (k-1,) m, the same for all
    """
    n_curves, k = curves.weights.shape[0], thickness.size + 1
    known = np.isfinite(curves.deviation)
    level = np.sum(np.where(known, curves.log_apparent_resistivity, 0.0), axis=1) / known.sum(axis=1)
    model = np.repeat(level[:, None], k, axis=1)
    difference = np.diff(np.eye(k), axis=0)
    roughness = difference.T @ difference
    weight = np.full(n_curves, FIRST_ROUGHNESS_WEIGHT)
    best, best_misfit = model.copy(), np.full(n_curves, np.inf)
    for _ in range(iterations):
        apparent, sensitivity = response_and_sensitivity(
            curves.weights, curves.wavenumber, np.tile(thickness, (n_curves, 1)), np.exp(model)
        )
        residual = curves.log_apparent_resistivity - np.log(apparent)
        _, trusted, reading_weight = robust_misfit(residual, curves.deviation)
        trusted = np.where(known, trusted, 0.0)
        scaled = np.where(known, residual / np.where(known, curves.deviation, 1.0), 0.0)
        misfit = np.sum(trusted * scaled**2, axis=1) / trusted.sum(axis=1)
        # Smoother models come first, so the first within the target stands; until then the best fitting one.
        better = (best_misfit > TARGET) & (misfit < best_misfit)
        best[better], best_misfit[better] = model[better], misfit[better]
        if np.all(best_misfit <= TARGET):
            break
        jacobian = sensitivity[:, :, thickness.size :]
        weighted = jacobian * reading_weight[..., None]
        hessian = np.matmul(weighted.transpose(0, 2, 1), jacobian)
        hessian += weight[:, None, None] * roughness + LEVEL_WEIGHT * np.eye(k)
        gradient = np.matmul(weighted.transpose(0, 2, 1), residual[..., None])[..., 0]
        gradient -= weight[:, None] * (model @ roughness) + LEVEL_WEIGHT * (model - level[:, None])
        step = np.linalg.solve(hessian, gradient[..., None])[..., 0]
        longest = np.max(np.abs(step), axis=1, keepdims=True)
        model = model + step * np.minimum(1.0, LONGEST_STEP / np.maximum(longest, 1e-300))
        weight = weight * COOLING
    return np.exp(best), best_misfit
