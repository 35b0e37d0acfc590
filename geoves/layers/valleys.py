"""The axis of the buried valley with its tributaries, and stations along them."""

import attrs
import geopandas
import numpy as np
import shapely

from geoves.domain.arrays import FloatArray
from geoves.domain.grids import Surface, SurfaceStack
from geoves.domain.region import Region
from geoves.kernels.valley_lines import find_incision, fit_regional_plane, smooth_path, trace_valleys
from geoves.layers.lines import choose_interval
from geoves.layers.options import LayerOptions
from geoves.layers.sampling import sample_bilinear

AXIS_COLUMNS = ("line", "order", "joins", "length", "lowest_elevation", "highest_elevation", "mean_slope")
STATION_COLUMNS = ("line", "order", "distance", "elevation", "standard_error", "depth", "slope")


@attrs.frozen
class Valley:
    """One traced line, downstream: its number, its order, the line that it joins (0: none), its shape in the CRS."""

    number: int
    order: int
    joins: int
    line: shapely.LineString


def draw_valleys(
    stack: SurfaceStack, region: Region, options: LayerOptions
) -> tuple[geopandas.GeoDataFrame, geopandas.GeoDataFrame]:
    """The valley's axis and its tributaries as lines that run downstream, a tributary to its junction, and stations.

    Stations stand at round distances from each line's upper end, and at its lower end.
    """
    bedrock = stack.surfaces.get("bedrock_elevation")
    valleys: list[Valley] = []
    if bedrock is not None and np.isfinite(bedrock.estimate).any():
        valleys = _find_valleys(bedrock, options)
    measured = [_measure_axis(valley, bedrock, region) for valley in valleys if bedrock is not None]
    lines = [valley.line for valley in valleys]
    told = [_place_stations(valley, stack, bedrock, region) for valley in valleys if bedrock is not None]
    rows = [row for rows, _ in told for row in rows]
    points = [point for _, points in told for point in points]
    return (
        geopandas.GeoDataFrame(_columns(AXIS_COLUMNS, measured), geometry=lines, crs=region.crs),
        geopandas.GeoDataFrame(_columns(STATION_COLUMNS, rows), geometry=points, crs=region.crs),
    )


def _columns(names: tuple[str, ...], rows: list[tuple[float, ...]]) -> dict[str, FloatArray]:
    """Rows as columns; those that count are whole numbers."""
    table = np.array(rows, float).reshape(-1, len(names))
    counts = ("line", "order", "joins")
    return {name: table[:, i].astype(int) if name in counts else table[:, i] for i, name in enumerate(names)}


def _find_valleys(bedrock: Surface, options: LayerOptions) -> list[Valley]:
    found: list[Valley] = []
    for number, (order, easting, northing) in enumerate(_trace_on_thinned_grid(bedrock, options), start=1):
        floor = sample_bilinear(bedrock.grid, bedrock.estimate, easting, northing)
        along = np.concatenate([[0.0], np.cumsum(np.hypot(np.diff(easting), np.diff(northing)))])
        points = np.column_stack([easting, northing])
        if order == 1 and np.polyfit(along, floor, 1)[0] > 0.0:
            points = points[::-1]
        end = shapely.Point(points[-1])
        larger = [valley for valley in found if valley.order == order - 1]
        joined = min(larger, key=lambda valley: valley.line.distance(end), default=None)
        found.append(Valley(number, order, 0 if joined is None else joined.number, shapely.LineString(points)))
    return found


def _measure_axis(valley: Valley, bedrock: Surface, region: Region) -> tuple[float, ...]:
    """The columns of one line; its slope is that of the straight line through its floor."""
    easting, northing = shapely.get_coordinates(valley.line).T
    floor = sample_bilinear(bedrock.grid, bedrock.estimate, easting, northing)
    along = np.concatenate([[0.0], np.cumsum(np.hypot(np.diff(easting), np.diff(northing)))]) * region.crs_unit_metres
    fall = -float(np.polyfit(along, floor, 1)[0])
    return valley.number, valley.order, valley.joins, along[-1], floor.min(), floor.max(), fall


def _place_stations(
    valley: Valley, stack: SurfaceStack, bedrock: Surface, region: Region
) -> tuple[list[tuple[float, ...]], list[shapely.Point]]:
    """Rows and points at round distances along a line: the floor there, and its fall between the neighbours."""
    metres = region.crs_unit_metres
    length = valley.line.length * metres
    step = max(choose_interval(0.0, length, region.length_unit, 40), stack.grid.cell_size * metres)
    distance = np.append(np.arange(0.0, length - 0.25 * step, step), length)
    points = shapely.line_interpolate_point(valley.line, distance / metres)
    easting, northing = shapely.get_x(points), shapely.get_y(points)
    floor = sample_bilinear(stack.grid, bedrock.estimate, easting, northing)
    ground = sample_bilinear(stack.grid, stack.ground, easting, northing)
    error = np.full(floor.shape, np.nan)
    if bedrock.standard_error is not None:
        error = sample_bilinear(stack.grid, bedrock.standard_error, easting, northing)
    told = np.column_stack([distance, floor, error, ground - floor, -np.gradient(floor, distance)])
    return [(valley.number, valley.order, *row) for row in told.tolist()], list(points)


def _trace_on_thinned_grid(surface: Surface, options: LayerOptions) -> list[tuple[int, FloatArray, FloatArray]]:
    """Order, easting and northing of each valley line, traced where bedrock lies well below the regional plane."""
    grid = surface.grid
    every = max(1, int(np.ceil(np.sqrt(grid.n_rows * grid.n_columns / options.axis_cells))))
    bedrock = surface.estimate[::every, ::every]
    depth = fit_regional_plane(bedrock, options.regional_quantile) - bedrock
    threshold = max(options.least_incision, options.incision_share * float(np.nanquantile(depth, 0.99)))
    if surface.standard_error is not None:
        threshold = max(threshold, float(np.nanmedian(surface.standard_error)))
    least_length = max(options.least_valley_length * float(np.hypot(*bedrock.shape)), 6.0)
    cell = grid.cell_size * every
    return [
        (order, grid.easting[0] + smooth_path(columns, 3) * cell, grid.northing[0] - smooth_path(rows, 3) * cell)
        for order, rows, columns in trace_valleys(depth, find_incision(depth, threshold), least_length)
        if np.median(depth[rows, columns]) >= threshold
    ]
