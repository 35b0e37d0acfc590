"""Ordinary kriging of a field from data that each have an error of their own; the one door to PyKrige.

The field varies about an unknown constant mean. Its nugget is variation between places too small to follow, not error:
a cell is always a new place, so the nugget is in its variance, and no cell jumps to the datum that it happens to hold.
"""

import numpy as np
from numpy.typing import NDArray
from pykrige.ok import OrdinaryKriging
from scipy.linalg import cho_factor, cho_solve
from threadpoolctl import threadpool_limits

from geoves.kernels.covariances import (
    Covariance,
    FloatArray,
    bounded_error_variance,
    correlation,
    covariance_matrix,
    scale_coordinates,
)


class _KrigingWithErrors(OrdinaryKriging):
    """Ordinary kriging with PyKrige that knows an error variance for each datum, in the unit of the sill.

    PyKrige has no such argument. Its matrix is minus the semivariogram, bordered by ones, so a datum's error variance
    belongs on the first n of its diagonal. A test guards that this private member exists and is asked.
    """

    def __init__(
        self, scaled: FloatArray, values: FloatArray, error_variance: FloatArray, covariance: Covariance
    ) -> None:
        def semivariogram(parameters: list[float], distance: FloatArray) -> FloatArray:
            nugget_share, model_share = parameters
            return nugget_share + model_share * (1.0 - correlation(distance, covariance.model))

        self.error_variance = error_variance
        super().__init__(
            scaled[:, 0],
            scaled[:, 1],
            values,
            variogram_model="custom",
            variogram_parameters=[covariance.nugget / covariance.sill, covariance.partial_sill / covariance.sill],
            variogram_function=semivariogram,
            nlags=1,  # its own experimental variogram is not used
            exact_values=False,
        )

    def _get_kriging_matrix(self, n: int) -> FloatArray:
        matrix: FloatArray = super()._get_kriging_matrix(n)
        matrix[np.arange(n), np.arange(n)] += self.error_variance
        return matrix


@threadpool_limits.wrap(limits=1)  # blocks are small: threads cost more than they bring
def krige(
    points: FloatArray,
    values: FloatArray,
    error_variance: FloatArray,
    cells: FloatArray,
    covariance: Covariance,
    *,
    block: int = 1024,
) -> tuple[FloatArray, FloatArray]:
    """Estimate and variance (m,) of the field at `cells` (m, 2), each taken as a new place.

    points : (n, 2), two or more, repeated places allowed      values, error_variance : (n,)
    The variance is that of the field about the estimate, nugget included, errors of the data not.
    Cells are taken `block` at a time, or n at a time where data are more; each holds some 43 bytes a datum and cell.
    Ordinary kriging: Isaaks and Srivastava 1989, An Introduction to Applied Geostatistics, ch. 12. Checked in
    tests/published/test_ordinary_kriging.py, and against GSTools and dense generalised least squares in
    tests/kernels/test_kriging.py.
    """
    origin, level, sill = points.mean(axis=0), values.mean(), covariance.sill
    engine = _KrigingWithErrors(
        scale_coordinates(points, covariance, origin),
        (values - level) / np.sqrt(sill),
        bounded_error_variance(error_variance, covariance) / sill,
        covariance,
    )
    estimate, variance = np.empty(len(cells)), np.empty(len(cells))
    step = max(block, len(values))
    for start in range(0, len(cells), step):
        part = slice(start, start + step)
        scaled = scale_coordinates(cells[part], covariance, origin)
        estimate[part], variance[part] = engine.execute("points", scaled[:, 0], scaled[:, 1], backend="vectorized")
    return level + np.sqrt(sill) * estimate, sill * np.maximum(variance, 0.0)


def leave_one_out(
    points: FloatArray, values: FloatArray, error_variance: FloatArray, covariance: Covariance
) -> tuple[FloatArray, FloatArray]:
    """What kriging from all other data would say at each datum: predicted and variance (n,), as `krige` means them.

    A residual `values - predicted` has that variance plus the datum's own error variance. Closed form from one
    factor of the covariance. Dubrule 1983, Math. Geology 15, 687-699 (from memory). Checked by leaving each one out.
    """
    sill = covariance.sill
    noise = bounded_error_variance(error_variance, covariance) / sill
    matrix = covariance_matrix(points, points, covariance) / sill
    matrix[np.diag_indices_from(matrix)] += covariance.nugget / sill + noise
    inverse = cho_solve(cho_factor(matrix, lower=True), np.eye(len(values)))
    row_sums = inverse.sum(axis=0)
    projection = inverse - np.outer(row_sums, row_sums) / row_sums.sum()
    precision = np.diag(projection)
    residual = projection @ (values - values.mean()) / precision
    return values - residual, sill * np.maximum(1.0 / precision - noise, 0.0)


def estimate_offset(
    points: FloatArray,
    values: FloatArray,
    error_variance: FloatArray,
    member: NDArray[np.bool_],
    prior_deviation: float,
    covariance: Covariance,
) -> tuple[float, float]:
    """By how much the data of one kind (`member`, (n,)) lie above the others in one field, and its deviation.

    The offset is normal about 0 with `prior_deviation` beforehand, the field's mean anything. Generalised least
    squares with a prior on one coefficient (Omre and Halvorsen 1989, Mathematical Geology 21, 767-786, from memory).
    """
    matrix = covariance_matrix(points, points, covariance)
    matrix[np.diag_indices_from(matrix)] += covariance.nugget + bounded_error_variance(error_variance, covariance)
    design = np.column_stack([np.ones(len(values)), member.astype(float)])
    weighted = cho_solve(cho_factor(matrix, lower=True), np.column_stack([design, values]))
    precision = design.T @ weighted[:, :2]
    precision[1, 1] += prior_deviation**-2
    spread = np.linalg.inv(precision)
    coefficients = spread @ (design.T @ weighted[:, 2])
    return float(coefficients[1]), float(np.sqrt(spread[1, 1]))
