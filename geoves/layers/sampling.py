"""Values of grids at places, and the points that stand for a circle."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from geoves.domain.arrays import FloatArray
from geoves.domain.grids import Grid, SurfaceStack

GOLDEN_ANGLE = np.pi * (3.0 - np.sqrt(5.0))


def sample_bilinear(grid: Grid, values: FloatArray, easting: FloatArray, northing: FloatArray) -> FloatArray:
    """Values at points, bilinear between cell centres; NaN off the grid and where no neighbour has a value.

    values (rows, columns); easting, northing and the answer share one shape. Blank neighbours are left out and the
    rest weighted anew; in the outer half cell the edge's value holds.
    """
    easting, northing = np.asarray(easting, float), np.asarray(northing, float)
    cells, weights = weigh_neighbours(grid, easting, northing)
    return np.where(on_grid(grid, easting, northing), average_neighbours(values, cells, weights), np.nan)


def average_neighbours(
    values: FloatArray, cells: Sequence[NDArray[np.intp]], weights: Sequence[FloatArray]
) -> FloatArray:
    """The weighted mean of the known ones among the neighbours that `weigh_neighbours` found, NaN where none is."""
    flat = values.ravel()
    total = np.zeros(cells[0].shape)
    for cell, share in zip(cells, weights, strict=True):
        total += share * flat.take(cell)
    lacking = ~np.isfinite(total)  # few: beside blank cells and outside
    if lacking.any():
        total[lacking] = _average_known(flat, [one[lacking] for one in cells], [one[lacking] for one in weights])
    return total


def _average_known(flat: FloatArray, cells: Sequence[NDArray[np.intp]], weights: Sequence[FloatArray]) -> FloatArray:
    """The same where a neighbour is blank: the rest weighted anew."""
    total, weight = np.zeros(cells[0].shape), np.zeros(cells[0].shape)
    for cell, share in zip(cells, weights, strict=True):
        found = flat.take(cell)
        known = np.isfinite(found)
        total += np.where(known, share * found, 0.0)
        weight += np.where(known, share, 0.0)
    enough = weight > 1e-9
    return np.where(enough, total / np.where(enough, weight, 1.0), np.nan)


def weigh_neighbours(
    grid: Grid, easting: FloatArray, northing: FloatArray
) -> tuple[list[NDArray[np.intp]], list[FloatArray]]:
    """Of the four cells whose centres surround each point, the index into the flat grid and the bilinear weight."""
    column = np.clip((easting - grid.west) / grid.cell_size - 0.5, 0.0, grid.n_columns - 1.0)
    row = np.clip((grid.north - northing) / grid.cell_size - 0.5, 0.0, grid.n_rows - 1.0)
    left = np.minimum(column.astype(np.intp), max(grid.n_columns - 2, 0))
    upper = np.minimum(row.astype(np.intp), max(grid.n_rows - 2, 0))
    across, down = column - left, row - upper
    right, lower = np.minimum(left + 1, grid.n_columns - 1), np.minimum(upper + 1, grid.n_rows - 1)
    wide = grid.n_columns
    cells = [upper * wide + left, upper * wide + right, lower * wide + left, lower * wide + right]
    weights = [(1.0 - down) * (1.0 - across), (1.0 - down) * across, down * (1.0 - across), down * across]
    return cells, weights


def on_grid(grid: Grid, easting: FloatArray, northing: FloatArray) -> NDArray[np.bool_]:
    west, south, east, north = grid.bounds
    return (easting >= west) & (easting <= east) & (northing >= south) & (northing <= north)


def spread_points(count: int) -> tuple[FloatArray, FloatArray]:
    """A fixed pattern of points that share a unit circle's area evenly: Vogel's sunflower spiral.

    H. Vogel, 1979, A better way to construct the sunflower head, Mathematical Biosciences 44, 179-189.

    >>> x, y = spread_points(96)
    >>> bool(abs(np.mean(x**2 + y**2) - 0.5) < 1e-12)  # mean squared radius of a uniform disc
    True
    """
    index = np.arange(count)
    radius = np.sqrt((index + 0.5) / count)
    return radius * np.cos(index * GOLDEN_ANGLE), radius * np.sin(index * GOLDEN_ANGLE)


def find_covered(stack: SurfaceStack, easting: FloatArray, northing: FloatArray) -> NDArray[np.bool_]:
    grid = stack.grid
    column = np.clip(((easting - grid.west) / grid.cell_size).astype(int), 0, grid.n_columns - 1)
    row = np.clip(((grid.north - northing) / grid.cell_size).astype(int), 0, grid.n_rows - 1)
    return on_grid(grid, easting, northing) & stack.covered[row, column]
