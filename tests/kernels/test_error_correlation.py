"""The correlation of neighbouring errors from residuals of many small regressions, whose answer is known."""

import numpy as np
import pytest
from scipy.linalg import toeplitz

from geoves.kernels.error_correlation import FEWEST_CURVES, find_correlation, lag_moments

N, CURVES = 17, 120


def ar1_errors(lag_one, count, generator):
    """Errors (count, N) of unit variance: Cholesky factor of the covariance r^|i-j| (Box and Jenkins, any edition)."""
    return generator.standard_normal((count, N)) @ np.linalg.cholesky(toeplitz(lag_one ** np.arange(N))).T


def moments_of(lag_one, seed, *, degree=4, segment=None, count=CURVES):
    """Residuals of least-squares polynomials, the error's deviation 1 and known."""
    design = np.vander(np.linspace(-1.0, 1.0, N), degree + 1)
    covariance = np.linalg.inv(design.T @ design)
    segment = np.zeros(N, dtype=int) if segment is None else segment
    errors = ar1_errors(lag_one, count, np.random.default_rng(seed))
    residual = errors - errors @ design @ covariance @ design.T
    return [lag_moments(row, design, covariance, segment) for row in residual]


@pytest.mark.parametrize("lag_one", [0.3, 0.5, 0.7])
def test_comes_back_although_the_fits_took_part_of_it(lag_one):
    """The residuals' own correlation is below: five of 17 degrees of freedom went into each fit."""
    moments = moments_of(lag_one, 1)
    naive = sum(one.products for one in moments) / sum(one.squares for one in moments)
    assert naive < lag_one - 0.15
    found = find_correlation(moments)
    assert found.estimate == pytest.approx(lag_one, abs=0.12)
    assert abs(found.estimate - lag_one) < 3.0 * found.error
    assert found.lag_one == pytest.approx(found.estimate, abs=0.026)
    # n readings say as much of their mean as n (1 - r) / (1 + r) independent ones (Bayley and Hammersley 1946).
    assert found.widening >= np.sqrt((1 + found.lag_one) / (1 - found.lag_one))


def test_nothing_is_found_where_there_is_none():
    found = [find_correlation(moments_of(0.0, seed)) for seed in range(20)]
    assert [one.lag_one for one in found] == [0.0] * 20
    assert [one.widening for one in found] == [1.0] * 20
    estimates = np.array([one.estimate for one in found])
    assert abs(estimates.mean()) < 0.05
    assert np.std(estimates) == pytest.approx(np.mean([one.error for one in found]), rel=0.5)


def test_neighbours_in_two_segments_are_none():
    """Errors that change sign at the segment's end are alike within each."""
    segment = (np.arange(N) >= 8).astype(int)
    moments = moments_of(0.6, 2, segment=segment)
    assert find_correlation(moments).lag_one > 0.3
    lone = [lag_moments(np.ones(2), np.zeros((2, 1)), np.eye(1), np.array([0, 1]))] * 30
    assert lone[0].products == 0.0


def test_few_curves_tell_nothing():
    assert find_correlation(moments_of(0.7, 1, count=FEWEST_CURVES - 1)).lag_one == 0.0
    assert find_correlation([]).widening == 1.0
