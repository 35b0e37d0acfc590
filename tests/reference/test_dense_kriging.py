"""The dense reference held against the seven-sample example and against a textbook's property."""

import numpy as np
import pytest

from geoves.kernels.covariances import Covariance
from tests.reference.dense_kriging import krige_densely


def test_seven_samples():
    """Isaaks and Srivastava 1989, ch. 12; 592.7 and 8.96 in print (from memory), further digits calculated."""
    points = np.array([(61, 139), (63, 140), (64, 129), (68, 128), (71, 140), (73, 141), (75, 128)], dtype=float)
    values = np.array([477.0, 696, 227, 646, 606, 791, 783])
    covariance = Covariance("exponential", 0.0, 10.0, np.log(20.0) / 0.3)
    estimate, variance = krige_densely(points, values, np.zeros(7), np.array([[65.0, 137.0]]), covariance)
    assert estimate[0] == pytest.approx(592.73, abs=0.006)
    assert variance[0] == pytest.approx(8.956, abs=0.0006)


def test_two_data_far_away():
    """Nothing correlates: the mean of the two, with the variance of the field and of that mean."""
    covariance = Covariance("spherical", 1.0, 3.0, 10.0)
    points, cells = np.array([(0.0, 0.0), (100.0, 0.0)]), np.array([(50.0, 50.0)])
    estimate, variance = krige_densely(points, np.array([2.0, 6.0]), np.full(2, 4.0), cells, covariance)
    assert estimate[0] == pytest.approx(4.0)
    assert variance[0] == pytest.approx(4.0 + 8.0 / 2.0)
