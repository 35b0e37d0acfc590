"""Ordinary kriging the long way: generalised least squares with every matrix written out and one solve a cell."""

import numpy as np

# t of (1 + t) exp(-t) = 0.05, to the digits that a pocket calculator's Newton steps give.
MATERN_PRACTICAL = 4.743864518


def correlation(h, model):
    """Correlation of one distance `h`, in practical lengths."""
    if model == "spherical":
        return 1.0 - 1.5 * h + 0.5 * h**3 if h < 1.0 else 0.0
    if model == "matern32":
        return (1.0 + MATERN_PRACTICAL * h) * np.exp(-MATERN_PRACTICAL * h)
    return 0.05 ** (h if model == "exponential" else h * h)


def anisotropic_distance(first, second, covariance):
    """Distance in practical lengths between two places, by the cosine of their bearing to the long axis."""
    east, north = second[0] - first[0], second[1] - first[1]
    distance = np.hypot(east, north)
    turn = np.arctan2(east, north) - np.deg2rad(covariance.azimuth_deg)
    return distance * np.hypot(np.cos(turn), np.sin(turn) / covariance.ratio) / covariance.length


def covariance_of(first, second, covariance):
    """Matrix of covariances without the nugget, one element at a time."""
    return np.array(
        [
            [
                covariance.partial_sill * correlation(anisotropic_distance(a, b, covariance), covariance.model)
                for b in second
            ]
            for a in first
        ]
    )


def krige_densely(points, values, error_variance, cells, covariance):
    """Estimate and variance at cells as new places.

    Best linear unbiased prediction with a mean fitted by generalised least squares: Cressie 1993, Statistics for
    Spatial Data, sect. 3.4.5 with the constant alone as drift (from memory).
    """
    mean, spread = predict_densely(points, values, error_variance, cells, covariance)
    return mean, np.diag(spread)


def predict_densely(points, values, error_variance, cells, covariance):
    """Mean and covariance of the field at cells, nugget included, given data and a mean of which nothing is known."""
    own = covariance_of(points, points, covariance) + np.diag(covariance.nugget + error_variance)
    cross = covariance_of(points, cells, covariance)
    ones = np.ones(len(values))
    level_variance = 1.0 / (ones @ np.linalg.solve(own, ones))
    level = level_variance * (ones @ np.linalg.solve(own, values))
    mean = level + cross.T @ np.linalg.solve(own, values - level)
    missing = 1.0 - cross.T @ np.linalg.solve(own, ones)
    spread = covariance_of(cells, cells, covariance) + covariance.nugget * np.eye(len(cells))
    return mean, spread - cross.T @ np.linalg.solve(own, cross) + level_variance * np.outer(missing, missing)


def negative_restricted_likelihood(points, values, error_variance, covariance):
    """Minus the log density of n - 1 contrasts that the mean does not enter: an orthonormal basis of them, explicit.

    Differs from the usual formula by a constant, half the logarithm of n.
    """
    n = len(values)
    own = covariance_of(points, points, covariance) + np.diag(covariance.nugget + error_variance)
    basis, _ = np.linalg.qr(np.column_stack((np.ones(n), np.eye(n)[:, : n - 1])))
    contrasts = basis[:, 1:]
    spread, seen = contrasts.T @ own @ contrasts, contrasts.T @ values
    _, log_determinant = np.linalg.slogdet(spread)
    return 0.5 * ((n - 1) * np.log(2.0 * np.pi) + log_determinant + seen @ np.linalg.solve(spread, seen))
