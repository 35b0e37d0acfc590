"""Kriging from many data: all cells of a tile share the data nearest to it, and one small factor."""

from collections.abc import Iterator

import numpy as np
from scipy.spatial import cKDTree

from geoves.kernels.covariances import Covariance, FloatArray, IntArray, scale_coordinates
from geoves.kernels.inequality import Bounds, bounds_as_values
from geoves.kernels.kriging import CholeskyKriging, FieldData, leave_one_out

# Data of a tile's neighbourhood, and how many of those nearest to a datum's tile speak when it is left out.
NEIGHBOURS = 128
# Data left out together share a neighbourhood with this many about them.
_LEFT_OUT_TOGETHER = 32


class TiledKriging:
    """Kriging cell by tile of `tile` (unit of the CRS) a side, each from its `neighbours` nearest data.

    Tiles hang on the coordinates alone, so that a cell has one answer whatever other cells are asked for. Nearness is
    counted in lengths of the covariance. Cost grows linearly with cells and nearly so with data. Where neighbourhoods
    change, estimates step: tests/benchmarks/surfaces.py measures by how much.
    """

    def __init__(self, data: FieldData, covariance: Covariance, tile: float, *, neighbours: int = NEIGHBOURS) -> None:
        self.data, self.covariance, self.tile = data, covariance, tile
        self._origin = data.points.mean(axis=0)
        self._tree = cKDTree(scale_coordinates(data.points, covariance, self._origin))
        self._neighbours = min(neighbours, len(data.values))

    def predict(self, cells: FloatArray, drift: FloatArray | None = None) -> tuple[FloatArray, FloatArray]:
        """Estimate and variance (m,) at `cells` (m, 2), as `CholeskyKriging.predict` means them."""
        estimate, variance = np.empty(len(cells)), np.empty(len(cells))
        for inside, engine in self._tiles(cells):
            here = None if drift is None else drift[inside]
            estimate[inside], variance[inside] = engine.predict(cells[inside], here)
        return estimate, variance

    def estimate_many(self, values: FloatArray, cells: FloatArray, drift: FloatArray | None = None) -> FloatArray:
        """Estimates (m, r) from other `values` (n, r) at the same points with the same errors."""
        estimate = np.empty((len(cells), values.shape[1]))
        for inside, near in self._neighbourhoods(cells):
            here = None if drift is None else drift[inside]
            estimate[inside] = self._factor(near).estimate_many(values[near], cells[inside], here)
        return estimate

    def _tiles(self, cells: FloatArray) -> Iterator[tuple[IntArray, CholeskyKriging]]:
        for inside, near in self._neighbourhoods(cells):
            yield inside, self._factor(near)

    def _factor(self, near: IntArray) -> CholeskyKriging:
        return CholeskyKriging(select_data(self.data, near), self.covariance)

    def _neighbourhoods(self, cells: FloatArray) -> Iterator[tuple[IntArray, IntArray]]:
        """Cells of each tile, and the data that are nearest to its centre, both by their rows."""
        for inside, centre in group_by_tile(cells, self.tile):
            _, near = self._tree.query(
                scale_coordinates(centre[None], self.covariance, self._origin)[0], self._neighbours
            )
            yield inside, np.sort(np.atleast_1d(near))


def select_data(data: FieldData, rows: IntArray) -> FieldData:
    """The same field known at fewer places."""
    drift = None if data.drift is None else data.drift[rows]
    return FieldData(data.points[rows], data.values[rows], data.error_variance[rows], drift)


def group_by_tile(points: FloatArray, tile: float) -> Iterator[tuple[IntArray, FloatArray]]:
    """Rows of the points that lie in each tile that holds any, and the tile's centre (2,)."""
    index = np.floor(points / tile).astype(np.int64)
    order = np.lexsort((index[:, 0], index[:, 1]))
    ends = np.flatnonzero(np.any(np.diff(index[order], axis=0) != 0, axis=1)) + 1
    for rows in np.split(order, ends):
        if rows.size:
            yield rows, (index[rows[0]] + 0.5) * tile


def leave_one_out_nearby(data: FieldData, covariance: Covariance) -> tuple[FloatArray, FloatArray]:
    """`leave_one_out` (predicted and variance, (n,)) for many data: each from those about it.

    Data are taken some 32 at a time, by the tree that halves them in space, each such group with the data nearest to
    its middle.
    """
    scaled = scale_coordinates(data.points, covariance, data.points.mean(axis=0))
    tree = cKDTree(scaled)
    predicted, variance = np.empty(len(scaled)), np.empty(len(scaled))
    for group in _halve(np.arange(len(scaled)), scaled):
        count = min(NEIGHBOURS + _LEFT_OUT_TOGETHER, len(scaled))
        _, near = tree.query(scaled[group].mean(axis=0), count)
        near = np.union1d(group, near)
        chosen = select_data(data, near)
        found = leave_one_out(chosen.points, chosen.values, chosen.error_variance, covariance)
        own = np.searchsorted(near, group)
        predicted[group], variance[group] = found[0][own], found[1][own]
    return predicted, variance


def _halve(rows: IntArray, points: FloatArray) -> Iterator[IntArray]:
    """Groups of at most `_LEFT_OUT_TOGETHER` rows, by halving along the longer side."""
    if len(rows) <= _LEFT_OUT_TOGETHER:
        yield rows
        return
    axis = int(np.argmax(np.ptp(points[rows], axis=0)))
    ordered = rows[np.argsort(points[rows, axis], kind="stable")]
    for half in np.array_split(ordered, 2):
        yield from _halve(half, points)


def bounds_as_values_nearby(data: FieldData, bounds: Bounds, covariance: Covariance) -> tuple[FloatArray, FloatArray]:
    """`bounds_as_values` for many data: some 32 bounds at a time, with data and bounds nearest to them."""
    origin = data.points.mean(axis=0)
    own, others = (scale_coordinates(points, covariance, origin) for points in (data.points, bounds.points))
    data_tree, bound_tree = cKDTree(own), cKDTree(others)
    value, variance = np.empty(len(others)), np.empty(len(others))
    for group in _halve(np.arange(len(others)), others) if len(others) else ():
        middle = others[group].mean(axis=0)
        _, near = data_tree.query(middle, min(2 * NEIGHBOURS, len(own)))
        _, beside = bound_tree.query(middle, min(NEIGHBOURS, len(others)))
        chosen, heard = select_data(data, np.atleast_1d(near)), np.union1d(group, beside)
        found = bounds_as_values(*chosen[:3], Bounds(*(part[heard] for part in bounds)), covariance)
        at = np.searchsorted(heard, group)
        value[group], variance[group] = found[0][at], found[1][at]
    return value, variance
