"""The seven-sample example of ordinary kriging.

Samples, target and covariance: Isaaks and Srivastava 1989, An Introduction to Applied Geostatistics, ch. 12. The book
prints 592.7 and 8.96 (from memory); the further digits, the weights among them, were calculated apart from geoves.
"""

import numpy as np
import pytest

from geoves.kernels.covariances import Covariance
from geoves.kernels.kriging import krige

SAMPLES = np.array(
    [
        (61, 139, 477),
        (63, 140, 696),
        (64, 129, 227),
        (68, 128, 646),
        (71, 140, 606),
        (73, 141, 791),
        (75, 128, 783),
    ],
    dtype=float,
)
POINTS, VALUES = SAMPLES[:, :2], SAMPLES[:, 2]
TARGET = np.array([[65.0, 137.0]])
# C(h) = 10 exp(-0.3 h): it has fallen to a twentieth at ln 20 / 0.3.
COVARIANCE = Covariance("exponential", 0.0, 10.0, np.log(20.0) / 0.3)
PUBLISHED_WEIGHTS = (0.173, 0.318, 0.129, 0.086, 0.151, 0.057, 0.086)


def test_estimate_and_variance():
    estimate, variance = krige(POINTS, VALUES, np.zeros(7), TARGET, COVARIANCE)
    assert estimate[0] == pytest.approx(592.73, abs=0.006)
    assert variance[0] == pytest.approx(8.956, abs=0.0006)


def test_weights():
    """A weight is the estimate where its sample is 1 and all others are 0; half of the last printed digit."""
    weights = [krige(POINTS, unit, np.zeros(7), TARGET, COVARIANCE)[0][0] for unit in np.eye(7)]
    np.testing.assert_allclose(weights, PUBLISHED_WEIGHTS, atol=0.00051)
    assert sum(weights) == pytest.approx(1.0, abs=1e-9)
