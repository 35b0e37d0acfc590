"""The floor of a survey: what its places would give if each knew its rock exactly, kriged at its best.

No inference from the same soundings can be expected to come below it by more than luck.
"""

import numpy as np

from geoves.kernels.covariances import fit_by_restricted_likelihood
from geoves.kernels.kriging import krige

# Exact data, but for a centimetre that keeps repeated places apart.
ERROR = 1e-4


def krige_true_rock(points, elevation, cells):
    """Estimate and 1.645 standard errors (c,) at cells (c, 2) from true elevations (n,) at points (n, 2), m.

    Anisotropic Matérn 3/2 by restricted maximum likelihood.
    """
    error = np.full(len(elevation), ERROR)
    covariance, _ = fit_by_restricted_likelihood(points, elevation, error, "matern32", anisotropic=True)
    estimate, variance = krige(points, elevation, error, cells, covariance)
    return estimate, 1.6448536 * np.sqrt(variance)
