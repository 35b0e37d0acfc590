"""Posteriors of small layered models on dense grids, from images and plain densities; nothing of geoves is used.

Two-layer ground over an ideal array depends on k = (rho_2 - rho_1) / (rho_2 + rho_1) and h / s alone, up to rho_1.
"""

import numpy as np
from scipy.special import logsumexp
from scipy.stats import norm

from tests.reference.image_series import ideal_response, two_layer_strengths

# The mixture of readings that the method's description states: share and deviation (natural logs) of outliers.
OUTLIER_SHARE, OUTLIER_DEVIATION = 0.02, 0.6


def log_two_layer_curve(half_spacing, thickness, resistivity, images=2000):
    """Natural log of the apparent resistivity (n,) of two layers by images."""
    strengths = two_layer_strengths(resistivity, images)
    return np.log([ideal_response(s, thickness, resistivity[0], strengths) for s in half_spacing])


def log_likelihood(residual, deviation):
    """Log density of log residuals (..., n): most from a narrow normal, a few from a wide one."""
    narrow = np.log1p(-OUTLIER_SHARE) + norm.logpdf(residual, scale=deviation)
    wide = np.log(OUTLIER_SHARE) + norm.logpdf(residual, scale=np.maximum(OUTLIER_DEVIATION, deviation))
    return np.logaddexp(narrow, wide).sum(axis=-1)


def log_evidence_on(log_density, *axes):
    """Log of the integral of exp(log_density) over a rectangular grid of evenly spaced axes."""
    return float(logsumexp(log_density) + sum(np.log(axis[1] - axis[0]) for axis in axes))


def moments_on(log_density, *values):
    """Mean and standard deviation of quantities given on the grid, each shaped like (or broadcast to) it."""
    share = np.exp(log_density - logsumexp(log_density))
    found = []
    for value in values:
        mean = float(np.sum(share * value))
        found.append((mean, float(np.sqrt(np.sum(share * (value - mean) ** 2)))))
    return found


def two_layer_posterior(half_spacing, observed, deviation, prior, axes):
    """Log posterior density, not normalised, over axes of ln h, ln rho_1 and ln (rho_2 / rho_1) (a, b, c).

    observed : (n,) natural logs    prior : mean and deviation of ln h, ln rho_1, ln rho_2, each (3,)
    """
    log_h, log_upper, log_ratio = axes
    mean, spread = prior
    shape = np.array(
        [[log_two_layer_curve(half_spacing, np.exp(h), (1.0, np.exp(r)), 400) for r in log_ratio] for h in log_h]
    )
    residual = observed - shape[:, None] - log_upper[None, :, None, None]
    h, upper, ratio = np.meshgrid(*axes, indexing="ij")
    unknowns = np.stack([h, upper, upper + ratio], axis=-1)
    return log_likelihood(residual, deviation) + norm.logpdf(unknowns, mean, spread).sum(axis=-1)
