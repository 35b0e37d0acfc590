"""Gibbs sampling of a Gaussian field under bounds: slow, and right as the number of draws grows."""

import numpy as np
from scipy.stats import truncnorm


def sample_under_bounds(mean, spread, bounds, draws, seed):
    """(draws, m) draws of a normal vector of `mean` (m,) and covariance `spread` (m, m) under soft bounds.

    bounds : bound, side, softness, (m,) each. A soft bound on x is a sharp one on u = x + softness * e, e standard
    normal, so that u is drawn one place at a time given the others (Geweke 1991, from memory) and x given u at once.
    `draws` chains run side by side from a feasible start; each gives its last state.
    """
    bound, side, softness = bounds
    generator = np.random.default_rng(seed)
    noisy = spread + np.diag(softness**2)
    precision = np.linalg.inv(noisy)
    deviation = 1.0 / np.sqrt(np.diag(precision))
    state = np.tile(bound + side * np.sqrt(np.diag(noisy)), (draws, 1))
    for _ in range(150):
        for i in range(len(mean)):
            others = precision[i] @ (state - mean).T - precision[i, i] * (state[:, i] - mean[i])
            centre = mean[i] - others / precision[i, i]
            edge = (bound[i] - centre) / deviation[i]
            low, high = (edge, np.inf) if side[i] > 0 else (-np.inf, edge)
            state[:, i] = centre + deviation[i] * truncnorm.rvs(low, high, size=draws, random_state=generator)
    gain = spread @ precision
    left = spread - gain @ spread
    values, vectors = np.linalg.eigh(0.5 * (left + left.T))
    root = vectors * np.sqrt(np.maximum(values, 0.0))
    return mean + (state - mean) @ gain.T + generator.standard_normal(state.shape) @ root.T
