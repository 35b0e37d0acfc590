"""Variogram of the logarithm of zinc in the topsoil of the Meuse flood plain, as the R package gstat has it.

Pebesma, "The meuse data set: a brief tutorial for the gstat R package": variogram(log(zinc) ~ 1) with 15 bins up to a
third of the diagonal, and the spherical fit with weights N / h². The data are those that scikit-gstat ships.
"""

import numpy as np
import pytest
from skgstat import data

from geoves.kernels.covariances import experimental_variogram, fit_by_least_squares


@pytest.fixture(scope="module")
def variogram():
    points, zinc = data.meuse(variable="zinc")["sample"]
    points, values = np.asarray(points, dtype=float), np.log(np.ravel(zinc).astype(float))
    assert len(values) == 155
    cutoff = np.hypot(*np.ptp(points, axis=0)) / 3.0
    return experimental_variogram(points, values, np.linspace(0.0, cutoff, 16))


def test_published_bins(variogram):
    lag, semivariance, pairs = variogram
    assert (pairs[0], pairs[4]) == (57, 547)
    np.testing.assert_allclose(lag[[0, 4]], (79.29244, 478.4767), rtol=1e-6)
    np.testing.assert_allclose(semivariance[[0, 4]], (0.1234479, 0.4634128), rtol=1e-6)


def test_published_fit(variogram):
    """Within 1 %: two programs may stop at slightly different places on a flat optimum."""
    fit = fit_by_least_squares(*variogram, model="spherical")
    assert fit.nugget == pytest.approx(0.05066243, rel=0.01)
    assert fit.partial_sill == pytest.approx(0.5906078, rel=0.01)
    assert fit.length == pytest.approx(897.0209, rel=0.01)
