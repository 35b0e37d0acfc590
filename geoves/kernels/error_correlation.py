"""Whether errors of neighbouring readings are alike: the lag-1 correlation behind the residuals of many fits.

A fit takes the smooth part of the errors with it, so its residuals alternate even where errors are independent, and
show less than their correlation where they are not. Residuals are P e, P = I - H with the hat matrix H of the
linearised fit, so their expected lag-1 moments follow for every correlation of e = AR(1); the correlation is the one
that gives the moments found (method of moments). Its error comes from the scatter between curves.
"""

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

# Correlations for which moments are tabulated.
TRIED = np.linspace(-0.4, 0.8, 25)
# Steps of what is believed: finer than a survey knows it, and coarse enough that one curve more seldom changes it.
STEP = 0.05
# A correlation is believed from so many of its standard errors and curves on, and from this on: a weaker one alters
# little, and a layer too few in some fits looks the same.
BELIEVED_ERRORS, FEWEST_CURVES, LEAST = 3.0, 12, 0.2


class Moments(NamedTuple):
    """Of one curve's standardised residuals: lag-1 products and squares, found, and expected for the TRIED (t,)."""

    products: float
    squares: float
    expected_products: Floats
    expected_squares: Floats


class Correlation(NamedTuple):
    """lag_one : 0 where none is believed    error : its standard error    estimate : believed or not

    widening : factor on the deviation of a reading's error so that what many together say is as sure as it should be
    """

    lag_one: float
    error: float
    estimate: float
    widening: float


NONE = Correlation(0.0, np.nan, np.nan, 1.0)


def lag_moments(residual: Floats, jacobian: Floats, covariance: Floats, segment: NDArray[np.int64]) -> Moments:
    """Moments of one curve; residual (n,) and jacobian (n, p) in units of the errors, readings in order of spacing.

    covariance : (p, p) inverse Hessian of the fit    segment : (n,), neighbours are of one segment
    """
    n = residual.size
    left = np.flatnonzero(segment[1:] == segment[:-1])
    keeps = np.eye(n) - jacobian @ covariance @ jacobian.T
    apart = np.abs(np.subtract.outer(np.arange(n), np.arange(n)))
    within = np.equal.outer(segment, segment)
    products, squares = np.empty(TRIED.size), np.empty(TRIED.size)
    for i, lag_one in enumerate(TRIED):
        expected = keeps @ np.where(within, lag_one**apart, 0.0) @ keeps.T
        products[i], squares[i] = expected[left, left + 1].sum(), np.trace(expected)
    return Moments(float(residual[left] @ residual[left + 1]), float(residual @ residual), products, squares)


def find_correlation(moments: Sequence[Moments]) -> Correlation:
    """The lag-1 correlation of a survey's errors from all its curves together; none is believed that is not plain."""
    if len(moments) < FEWEST_CURVES:
        return NONE
    found, squares = (np.array([one[part] for one in moments]) for part in (0, 1))
    if not squares.sum() > 0:
        return NONE
    expected_squares = sum(one.expected_squares for one in moments)
    expected = sum(one.expected_products for one in moments) / expected_squares
    rising = np.maximum.accumulate(expected)
    ratio = found.sum() / squares.sum()
    error = float(np.sqrt(np.sum((found - ratio * squares) ** 2)) / squares.sum())
    estimate, low, high = np.interp([ratio, ratio - error, ratio + error], rising, TRIED)
    error = max(0.5 * float(high - low), 1e-6)
    if estimate < max(BELIEVED_ERRORS * error, LEAST):
        return Correlation(0.0, error, float(estimate), 1.0)
    lag_one = STEP * round(float(estimate) / STEP)
    # The fits took more of correlated errors than of independent ones; and n of them say as much as n (1-r)/(1+r).
    hidden = np.interp(0.0, TRIED, expected_squares) / np.interp(lag_one, TRIED, expected_squares)
    widening = float(np.sqrt(hidden * (1.0 + lag_one) / (1.0 - lag_one)))
    return Correlation(lag_one, error, float(estimate), widening)
