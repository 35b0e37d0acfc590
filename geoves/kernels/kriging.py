"""Kriging of a field from data that each have an error of their own, by one factor of their covariance.

The field varies about an unknown constant mean, or about a drift with unknown coefficients. Its nugget is variation
between places too small to follow, not error: a cell is always a new place, so the nugget is in its variance, and no
cell jumps to the datum that it happens to hold.
"""

from collections.abc import Iterator
from typing import NamedTuple, Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import cho_factor, cho_solve, cholesky
from scipy.linalg.lapack import dtrtri
from scipy.spatial.distance import cdist
from threadpoolctl import threadpool_limits

from geoves.kernels.covariances import (
    Covariance,
    FloatArray,
    bounded_error_variance,
    correlate_in_place,
    covariance_matrix,
    scale_coordinates,
)
from geoves.kernels.far_field import Expansion, choose_witnesses, expand_correlations, group_cells

# Numbers in a block of covariances between cells and data: wide enough for products of matrices, 4 MB with its room.
_BLOCK = 2**18
# Rows of the triangular factor that are multiplied at once: what lies right of them is 0 and left out.
_STRIPE = 128
# An expansion counts where it is this near, in sills or their root.
_AGREED = 2e-9
# Lengths within which cells lie together.
_TOGETHER = 0.5


class FieldData(NamedTuple):
    """What is known of a field: values with error variances (n,) at points (n, 2), two or more; repeats allowed.

    drift : (n, p) values of what the field's mean is linear in, beside a constant; None for a constant mean.
    """

    points: FloatArray
    values: FloatArray
    error_variance: FloatArray
    drift: FloatArray | None = None


class KrigingEngine(Protocol):
    """Whatever predicts a field: PyKrige, one factor of all data, or a factor for each tile."""

    def predict(self, cells: FloatArray, drift: FloatArray | None = None) -> tuple[FloatArray, FloatArray]:
        """Estimate and variance (m,) at `cells` (m, 2), where the drift is `drift` (m, p) if the data have one."""

    def estimate_many(self, values: FloatArray, cells: FloatArray, drift: FloatArray | None = None) -> FloatArray:
        """Estimates (m, r) from other `values` (n, r) at the same points with the same errors."""


def standardise_drift(drift: FloatArray, known: FloatArray) -> FloatArray:
    """`drift` (m, p) in deviations of the data's own, `known` (n, p), from its mean: what keeps the system solvable."""
    spread = known.std(axis=0)
    return np.asarray((drift - known.mean(axis=0)) / np.where(spread > 0.0, spread, 1.0))


class CholeskyKriging:
    """Kriging from one Cholesky factor of the data's covariance, cells block by block.

    Coordinates are centred and counted in lengths, values centred, sills counted in the field's own. Generalised least
    squares for the drift's coefficients: Cressie 1993, Statistics for Spatial Data, sect. 3.4.5 (from memory).
    """

    def __init__(self, data: FieldData, covariance: Covariance) -> None:
        self.covariance, self._known_drift = covariance, data.drift
        self._origin, self._level = data.points.mean(axis=0), float(data.values.mean())
        self._points = scale_coordinates(data.points, covariance, self._origin)
        sill = covariance.sill
        self._share = covariance.partial_sill / sill
        matrix = self._share * correlate_in_place(cdist(self._points, self._points), covariance.model)
        noise = bounded_error_variance(data.error_variance, covariance)
        matrix[np.diag_indices_from(matrix)] += (covariance.nugget + noise) / sill
        factor = cholesky(matrix, lower=True, overwrite_a=True, check_finite=False)
        # Upper triangular: products with it run at twice the speed of solving with the factor.
        self._whitening = np.ascontiguousarray(dtrtri(factor, lower=1)[0].T)
        self._half = self._whitening.T @ self._drift_at(data.drift, len(data.values))
        self._drift_weights = self._whitening @ self._half
        self._information = cho_factor(self._half.T @ self._half, lower=True)
        self._dual, self._coefficients = self._weigh((data.values - self._level)[:, None])

    def predict(self, cells: FloatArray, drift: FloatArray | None = None) -> tuple[FloatArray, FloatArray]:
        """Estimate and variance (m,) at `cells` (m, 2), each taken as a new place.

        The variance is that of the field about the estimate, nugget included, errors of the data not. Cells that lie
        together share an expansion of their covariances with far data, where that agrees to 1e-9 at some of them.
        """
        estimate, variance = np.empty(len(cells)), np.empty(len(cells))
        for rows in group_cells(cells):
            here = None if drift is None else drift[rows]
            estimate[rows], variance[rows] = self._predict_together(cells[rows], here)
        variance *= self.covariance.sill
        return self._level + estimate, np.maximum(variance, 0.0)

    def _predict_together(self, cells: FloatArray, drift: FloatArray | None) -> tuple[FloatArray, FloatArray]:
        """Estimate from the level, and variance in sills, of cells that lie together."""
        expansion = self._expand(cells)
        if expansion is None:
            return self._predict_exactly(cells, drift)
        basis = expansion.basis()
        here = self._drift_at(drift, len(cells))
        estimate = basis @ expansion.apply(self._share * self._dual[:, 0:1]) + here @ self._coefficients[:, 0:1]
        missing = here - basis @ expansion.apply(self._share * self._drift_weights)
        white = self._share * expansion.apply(self._whitening)
        explained = np.einsum("ij,ij->i", basis @ (white @ white.T), basis)
        found = estimate[:, 0], 1.0 - explained + self._drift_variance(missing)
        return found if self._agrees(cells, drift, found) else self._predict_exactly(cells, drift)

    def _expand(self, cells: FloatArray) -> Expansion | None:
        return expand_correlations(cells, self._points, self.covariance, self._origin)

    def _agrees(self, cells: FloatArray, drift: FloatArray | None, found: tuple[FloatArray, FloatArray]) -> bool:
        """Whether an expansion's estimate and variance are right at the cells where they are most likely not."""
        witnesses = choose_witnesses(cells)
        exact = self._predict_exactly(cells[witnesses], None if drift is None else drift[witnesses])
        off = [np.max(np.abs(one[witnesses] - other)) for one, other in zip(found, exact, strict=True)]
        return bool(off[0] <= _AGREED * np.sqrt(self.covariance.sill) and off[1] <= _AGREED)

    def _predict_exactly(self, cells: FloatArray, drift: FloatArray | None) -> tuple[FloatArray, FloatArray]:
        estimate, variance = np.empty(len(cells)), np.empty(len(cells))
        for part, between in self._blocks(cells):
            here = self._drift_at(None if drift is None else drift[part], len(between))
            estimate[part] = between @ self._dual[:, 0] + here @ self._coefficients[:, 0]
            missing = here - between @ self._drift_weights
            variance[part] = 1.0 - self._explained(between) + self._drift_variance(missing)
        return estimate, variance

    def _drift_variance(self, missing: FloatArray) -> FloatArray:
        return np.asarray(np.sum(missing * cho_solve(self._information, missing.T).T, axis=1))

    def estimate(self, cells: FloatArray, drift: FloatArray | None = None) -> FloatArray:
        """The estimate (m,) alone, at a small part of the cost."""
        return self._level + self._estimate(cells, drift, self._dual, self._coefficients)[:, 0]

    def estimate_many(self, values: FloatArray, cells: FloatArray, drift: FloatArray | None = None) -> FloatArray:
        """Estimates (m, r) from other `values` (n, r) at the same points with the same errors."""
        return self._estimate(cells, drift, *self._weigh(values))

    def _estimate(
        self, cells: FloatArray, drift: FloatArray | None, dual: FloatArray, coefficients: FloatArray
    ) -> FloatArray:
        estimate = np.empty((len(cells), dual.shape[1]))
        for rows in group_cells(cells):
            here = self._drift_at(None if drift is None else drift[rows], len(rows))
            estimate[rows] = self._weigh_together(cells[rows], dual) + here @ coefficients
        return estimate

    def _weigh_together(self, cells: FloatArray, dual: FloatArray) -> FloatArray:
        """Covariances of cells that lie together with the data, times `dual` (n, r)."""
        expansion = self._expand(cells)
        if expansion is not None:
            found = expansion.weigh(self._share * dual)
            witnesses = choose_witnesses(cells)
            off = np.abs(found[witnesses] - self._weigh_exactly(cells[witnesses], dual))
            if np.max(off) <= _AGREED * max(np.sqrt(self.covariance.sill), float(np.abs(found).max())):
                return found
        return self._weigh_exactly(cells, dual)

    def _weigh_exactly(self, cells: FloatArray, dual: FloatArray) -> FloatArray:
        found = np.empty((len(cells), dual.shape[1]))
        for part, between in self._blocks(cells):
            found[part] = between @ dual
        return found

    def _weigh(self, values: FloatArray) -> tuple[FloatArray, FloatArray]:
        """What `values` (n, r) give every covariance with them (n, r), and every drift (1 + p, r)."""
        solved = self._whitening.T @ values
        coefficients = cho_solve(self._information, self._half.T @ solved)
        return self._whitening @ (solved - self._half @ coefficients), coefficients

    def _explained(self, between: FloatArray) -> FloatArray:
        """Share of the sill (block,) that the data explain, the drift known: the squared length of whitened rows."""
        explained = np.zeros(len(between))
        room = np.empty((len(between), _STRIPE))
        for start in range(0, between.shape[1], _STRIPE):
            end = min(start + _STRIPE, between.shape[1])
            white = np.matmul(between[:, :end], self._whitening[:end, start:end], out=room[:, : end - start])
            explained += np.einsum("ij,ij->i", white, white)
        return explained

    def _drift_at(self, drift: FloatArray | None, count: int) -> FloatArray:
        """(count, 1 + p): a constant beside the drift."""
        if self._known_drift is None:
            return np.ones((count, 1))
        if drift is None:
            raise ValueError("the data have a drift; the cells need its values too")
        return np.column_stack([np.ones(count), standardise_drift(drift, self._known_drift)])

    def _blocks(self, cells: FloatArray) -> Iterator[tuple[slice, FloatArray]]:
        """Slices of the cells, and their correlations with the data (block, n), which the next block overwrites."""
        step = min(max(_BLOCK // len(self._points), 16), max(len(cells), 1))
        rooms = np.empty((2, step, len(self._points)))
        for start in range(0, len(cells), step):
            part = slice(start, min(start + step, len(cells)))
            between, room = rooms[:, : part.stop - start]
            scaled = scale_coordinates(cells[part], self.covariance, self._origin)
            _write_distances(scaled, self._points, between)
            correlate_in_place(between, self.covariance.model, room)
            between *= self._share
            yield part, between


def _write_distances(cells: FloatArray, points: FloatArray, out: FloatArray) -> None:
    """(m, n) distances into `out`. Cells that lie together are counted from their middle: one product of matrices.

    What cancels there is of the order of the cells' own extent, so that a distance is off by 1e-8 of it at worst.
    """
    middle = cells.mean(axis=0)
    near = cells - middle
    squared = np.einsum("ij,ij->i", near, near)
    if squared.max() > _TOGETHER**2:
        cdist(cells, points, out=out)
        return
    away = points - middle
    left = np.column_stack([squared, near, np.ones(len(cells))])
    right = np.column_stack([np.ones(len(points)), -2.0 * away, np.einsum("ij,ij->i", away, away)])
    np.matmul(left, right.T, out=out)
    np.maximum(out, 0.0, out=out)
    np.sqrt(out, out=out)


@threadpool_limits.wrap(limits=1)  # blocks are small: threads cost more than they bring
def krige(
    points: FloatArray,
    values: FloatArray,
    error_variance: FloatArray,
    cells: FloatArray,
    covariance: Covariance,
) -> tuple[FloatArray, FloatArray]:
    """Estimate and variance (m,) of the field at `cells` (m, 2), each taken as a new place, about a constant mean.

    points : (n, 2), two or more, repeated places allowed      values, error_variance : (n,)
    The variance is that of the field about the estimate, nugget included, errors of the data not.
    Ordinary kriging: Isaaks and Srivastava 1989, An Introduction to Applied Geostatistics, ch. 12. Checked in
    tests/published/test_ordinary_kriging.py, and against PyKrige, GSTools and dense generalised least squares in
    tests/kernels/test_kriging.py.
    """
    return CholeskyKriging(FieldData(points, values, error_variance), covariance).predict(cells)


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
