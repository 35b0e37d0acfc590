"""Correlations of many cells close together with data all around: those with far data by polynomials of few terms.

Seen from a tile of cells, the correlation with a datum well outside it is a smooth function of the cell's place: a
polynomial of degree 11 gives it to some 1e-10. So a thousand cells need no more evaluations of the covariance than a
hundred nodes do, and products of matrices shrink alike. Data in or near the tile are taken as they are.
Chebyshev interpolation: Trefethen 2013, Approximation Theory and Approximation Practice, ch. 8 (from memory); near and
far as in the fast multipole method (Greengard and Rokhlin 1987, J. Comput. Phys. 73, 325-348, from memory).
"""

from collections.abc import Iterator
from typing import NamedTuple

import numpy as np
from numpy.polynomial.chebyshev import chebvander
from scipy.spatial.distance import cdist

from geoves.kernels.covariances import Covariance, FloatArray, IntArray, correlate_in_place, scale_coordinates

# Degree of the polynomials (of both coordinates together), and Chebyshev nodes along a side that determine them.
_DEGREE, _NODES = 11, 13
# A datum is far beyond so many times the distance from a tile's middle to its corner.
_FAR = 3.0
# Cells that share an expansion at most, and the fewest for which it pays.
_MOST_CELLS, _FEWEST_CELLS = 2048, 512
_FEWEST_DATA = 150
# Columns of weights up to which each is evaluated by itself.
_FEW_COLUMNS = 4
# Models that are smooth wherever the distance is not 0.
_SMOOTH = ("matern32", "exponential", "gaussian")

_I, _J = (axis.ravel() for axis in np.meshgrid(np.arange(_NODES), np.arange(_NODES), indexing="ij"))
_TERMS = np.flatnonzero(_I + _J <= _DEGREE)
_NODE = np.cos(np.pi * (np.arange(_NODES) + 0.5) / _NODES)
# Values at the nodes of a tensor grid -> coefficients of the terms, by the discrete orthogonality of the polynomials.
_FIT = chebvander(_NODE, _NODES - 1).T * np.where(np.arange(_NODES) == 0, 1.0, 2.0)[:, None] / _NODES
_PROJECTION = np.kron(_FIT, _FIT)[_TERMS]


class Expansion(NamedTuple):
    """Correlations of cells (m) with data (n), the far ones by polynomials.

    east, north  : (m, degree + 1) Chebyshev polynomials of the cells' places in their tile
    coefficients : (terms, far data)      beside : (m, near data) correlations as they are
    """

    east: FloatArray
    north: FloatArray
    coefficients: FloatArray
    beside: FloatArray
    far: IntArray
    near: IntArray

    def basis(self) -> FloatArray:
        """(m, b): what the correlations are, times the matrix that `apply` multiplies by."""
        count = len(_TERMS)
        basis = np.empty((len(self.east), count + self.beside.shape[1]))
        start = 0
        for i in range(_DEGREE + 1):
            end = start + _DEGREE + 1 - i
            np.multiply(self.east[:, i : i + 1], self.north[:, : _DEGREE + 1 - i], out=basis[:, start:end])
            start = end
        basis[:, count:] = self.beside
        return basis

    def apply(self, matrix: FloatArray) -> FloatArray:
        """(b, k): coefficients and near data times `matrix` (n, k)."""
        return np.vstack([self.coefficients @ matrix[self.far], matrix[self.near]])

    def weigh(self, matrix: FloatArray) -> FloatArray:
        """(m, k): correlations times `matrix` (n, k), of few columns one by one without the whole basis."""
        if matrix.shape[1] > _FEW_COLUMNS:
            return self.basis() @ self.apply(matrix)
        found = self.beside @ matrix[self.near]
        for k, column in enumerate((self.coefficients @ matrix[self.far]).T):
            square = np.zeros((_DEGREE + 1, _DEGREE + 1))
            square[_I[_TERMS], _J[_TERMS]] = column
            found[:, k] += np.einsum("mj,mj->m", self.east @ square, self.north)
        return found


def group_cells(cells: FloatArray) -> Iterator[IntArray]:
    """Rows of cells that lie together, by halving along the longer side until each group is small enough."""
    axes = np.ascontiguousarray(cells.T)  # the extent of a row of numbers is found faster than of a column
    waiting = [np.arange(len(cells))]
    while waiting:
        rows = waiting.pop()
        if len(rows) <= _MOST_CELLS:
            yield rows
            continue
        places = [axis[rows] for axis in axes]
        longer = max(places, key=np.ptp)
        middle = len(rows) // 2
        halves = np.argpartition(longer, middle)
        waiting += [rows[halves[middle:]], rows[halves[:middle]]]


def expand_correlations(
    cells: FloatArray, points: FloatArray, covariance: Covariance, origin: FloatArray
) -> Expansion | None:
    """The expansion for `cells` (m, 2), which should lie together; None where it would not pay.

    points : (n, 2) data scaled about `origin`. The nugget is left out.
    """
    if covariance.model not in _SMOOTH or len(cells) < _FEWEST_CELLS or len(points) < _FEWEST_DATA:
        return None
    axes = np.ascontiguousarray(cells.T)
    low, high = axes.min(axis=1), axes.max(axis=1)
    middle, half = 0.5 * (low + high), np.maximum(0.5 * (high - low), 1e-9 * np.abs(high).max() + 1e-12)
    corners = scale_coordinates(middle + half * np.array([[1, 1], [1, -1]]), covariance, origin)
    centre = scale_coordinates(middle[None], covariance, origin)
    reach = np.max(cdist(centre, corners))
    distant = cdist(centre, points)[0] > _FAR * reach
    if distant.sum() < 0.6 * len(points):
        return None
    far, near = np.flatnonzero(distant), np.flatnonzero(~distant)
    nodes = middle + half * np.column_stack([_NODE[_I], _NODE[_J]])
    at_nodes = _correlate(nodes, points[far], covariance, origin)
    east, north = ((cells - middle) / half).T
    polynomials = chebvander(east, _DEGREE), chebvander(north, _DEGREE)
    beside = _correlate(cells, points[near], covariance, origin)
    return Expansion(*polynomials, _PROJECTION @ at_nodes, beside, far, near)


def _correlate(cells: FloatArray, points: FloatArray, covariance: Covariance, origin: FloatArray) -> FloatArray:
    return correlate_in_place(cdist(scale_coordinates(cells, covariance, origin), points), covariance.model)


def choose_witnesses(cells: FloatArray) -> IntArray:
    """Rows of a few cells by which an expansion is checked: those at the corners, where it is worst, and three more."""
    east, north = cells.T
    corners = [np.argmin(east + north), np.argmax(east + north), np.argmin(east - north), np.argmax(east - north)]
    return np.array([*corners, *np.linspace(0, len(cells) - 1, 5)[1:4].astype(np.int64)])
