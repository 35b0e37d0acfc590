"""Which places are weighed, and where the doubt is counted."""

from typing import Any

import numpy as np
import shapely

from geoves.domain.arrays import BoolArray, FloatArray, IntArray
from geoves.domain.grids import Grid, SurfaceStack
from geoves.domain.survey import Permit

# Lines are walked in steps of so many cells.
STEP_IN_CELLS = 0.5


def list_cells(stack: SurfaceStack) -> FloatArray:
    """Centres (c, 2) of the cells in which bedrock is mapped."""
    return _centres(stack.grid)[np.isfinite(stack.surfaces["bedrock_elevation"].estimate).ravel()]


def list_allowed(stack: SurfaceStack, allowed: Any) -> FloatArray:
    """Places (c, 2) where measuring is allowed: in mapped cells, and along the lines or in the polygons of `allowed`.

    allowed : shapely geometries, None for everywhere
    """
    if allowed is None:
        return list_cells(stack)
    parts = [part for shape in allowed for part in shapely.get_parts(shape)]
    found = [_walk(part, STEP_IN_CELLS * stack.grid.cell_size) for part in parts if part.geom_type == "LineString"]
    areas = [part for part in parts if part.geom_type == "Polygon"]
    if areas:
        area = shapely.union_all(areas)
        shapely.prepare(area)
        cells = list_cells(stack)
        found.append(cells[shapely.contains_xy(area, *cells.T)])
    points = np.concatenate([np.empty((0, 2)), *found])
    return points[is_mapped(stack, points)]


def _walk(line: Any, step: float) -> FloatArray:
    """Points (c, 2) along a line."""
    along = np.arange(0.5 * min(step, line.length), line.length, step)
    return np.asarray(shapely.get_coordinates(shapely.line_interpolate_point(line, along)))


def list_permits(stack: SurfaceStack, permits: tuple[Permit, ...]) -> FloatArray:
    """Places (c, 2) of the permits in mapped cells."""
    points = np.array([[one.easting, one.northing] for one in permits]).reshape(-1, 2)
    return points[is_mapped(stack, points)]


def is_mapped(stack: SurfaceStack, points: FloatArray) -> BoolArray:
    """Whether each point (c,) lies in a cell in which bedrock is mapped."""
    rows, columns = find_cells(stack.grid, points)
    inside = (rows >= 0) & (rows < stack.grid.n_rows) & (columns >= 0) & (columns < stack.grid.n_columns)
    mapped = np.isfinite(stack.surfaces["bedrock_elevation"].estimate)
    inside[inside] = mapped[rows[inside], columns[inside]]
    return np.asarray(inside)


def find_cells(grid: Grid, points: FloatArray) -> tuple[IntArray, IntArray]:
    """Row and column (c,) of the cell that holds each point, wherever that is."""
    columns = np.floor((points[:, 0] - grid.west) / grid.cell_size).astype(np.int64)
    return np.floor((grid.north - points[:, 1]) / grid.cell_size).astype(np.int64), columns


def spread_evenly(points: FloatArray, most: int, cell: float) -> FloatArray:
    """At most `most` of the points (c, 2): of each square of a lattice the one nearest to its middle, the squares as
    small as that allows. `cell` is the least side.
    """
    side = cell
    while len(points) > most:
        square = np.floor(points / side).astype(np.int64)
        away = np.sum((points / side - square - 0.5) ** 2, axis=1)
        order = np.lexsort((away, square[:, 0], square[:, 1]))
        first = np.ones(len(points), dtype=bool)
        first[1:] = np.any(np.diff(square[order], axis=0) != 0, axis=1)
        if first.sum() <= most:
            return points[np.sort(order[first])]
        side *= 1.1
    return points


def _centres(grid: Grid) -> FloatArray:
    easting, northing = np.meshgrid(grid.easting, grid.northing)
    return np.column_stack([easting.ravel(), northing.ravel()])
