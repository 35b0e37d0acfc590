"""Lines, areas and places drawn from the surfaces: contours, the valley's axis, the gravel's extent, the permits.

Geometries are in the region's CRS; columns are SI and named as the contract names them.
"""

from collections.abc import Mapping, Sequence
from itertools import pairwise
from typing import cast

import attrs
import geopandas
import numpy as np
import shapely
from contourpy import FillType, LineType, contour_generator
from numpy.typing import NDArray

from geoves.domain.arrays import FloatArray
from geoves.domain.grids import Grid, Surface, SurfaceStack
from geoves.domain.region import METRES, LengthUnit, Region
from geoves.domain.survey import Permit, Survey
from geoves.kernels.valley_lines import find_incision, fit_regional_plane, smooth_path, trace_valleys

GOLDEN_ANGLE = np.pi * (3.0 - np.sqrt(5.0))


@attrs.frozen
class LayerOptions:
    """How layers are drawn.

    contours            about how many contours a surface gets; the interval is 1, 2 or 5 times a power of ten
    likely, possible    least probability of gravel in either class of its extent
    least_incision      m: how far bedrock must lie below the regional plane to count as valley, at least
    incision_share      the same, as a share of the deepest incision (its 99 % quantile)
    regional_quantile   the plane passes below this share of the bedrock's relief: upland, not valley, sets it
    least_valley_length as a share of the grid's diagonal; shorter lines are not drawn
    axis_cells          a larger grid is thinned to about this many cells before valleys are traced
    circle_points       points by which a circle of location is averaged
    """

    contours: int = attrs.field(default=12, validator=attrs.validators.ge(2))
    likely: float = attrs.field(default=0.66, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    possible: float = attrs.field(default=0.33, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    least_incision: float = attrs.field(default=10.0, validator=attrs.validators.gt(0))
    incision_share: float = attrs.field(default=0.25, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    regional_quantile: float = attrs.field(default=0.75, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    least_valley_length: float = attrs.field(default=0.08, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    axis_cells: int = attrs.field(default=150_000, validator=attrs.validators.ge(100))
    circle_points: int = attrs.field(default=96, validator=attrs.validators.ge(4))

    def __attrs_post_init__(self) -> None:
        if self.possible >= self.likely:
            raise ValueError(f"possible ({self.possible}) is not below likely ({self.likely})")


def derive_layers(
    stack: SurfaceStack, survey: Survey, region: Region, options: LayerOptions | None = None
) -> Mapping[str, geopandas.GeoDataFrame]:
    """The layers bedrock_contours, thickness_contours, valley_axis, gravel_extent and permits.

    A layer whose surface the stack lacks, or that finds nothing, is empty but has its columns.
    """
    options = options or LayerOptions()
    surfaces = stack.surfaces
    bedrock = surfaces.get("bedrock_elevation")
    return {
        "bedrock_contours": _contour(bedrock, "elevation", region, options),
        "thickness_contours": _contour(surfaces.get("deep_gravel_thickness"), "thickness", region, options),
        "valley_axis": _draw_valleys(bedrock, region, options),
        "gravel_extent": _outline_gravel(surfaces.get("deep_gravel_probability"), region, options),
        "permits": _read_permits(stack, survey.permits, region, options),
    }


def choose_interval(least: float, most: float, length_unit: LengthUnit, contours: int) -> float:
    """A contour interval in m that is 1, 2 or 5 times a power of ten in the length unit: some `contours` lines.

    >>> choose_interval(300.0, 360.0, "m", 12)
    5.0
    >>> round(choose_interval(300.0, 360.0, "ft", 12) / 0.3048, 9)
    20.0
    """
    metres = METRES[length_unit]
    wanted = max((most - least) / metres / contours, 1e-3)
    power = 10.0 ** np.floor(np.log10(wanted))
    step = min((1.0, 2.0, 5.0, 10.0), key=lambda step: abs(np.log(step * power / wanted)))
    return float(step * power * metres)


def sample_bilinear(grid: Grid, cells: FloatArray, easting: FloatArray, northing: FloatArray) -> FloatArray:
    """Values at points, bilinear between cell centres; NaN off the grid and where no neighbour has a value.

    cells (rows, columns); easting, northing and the answer share one shape. Blank neighbours are left out and the
    rest weighted anew; in the outer half cell the edge's value holds.
    """
    easting, northing = np.asarray(easting, float), np.asarray(northing, float)
    column = np.clip((easting - grid.west) / grid.cell_size - 0.5, 0.0, grid.n_columns - 1.0)
    row = np.clip((grid.north - northing) / grid.cell_size - 0.5, 0.0, grid.n_rows - 1.0)
    left = np.minimum(column.astype(int), max(grid.n_columns - 2, 0))
    upper = np.minimum(row.astype(int), max(grid.n_rows - 2, 0))
    total, weights = np.zeros(column.shape), np.zeros(column.shape)
    for down in (0, 1):
        for right in (0, 1):
            across = column - left if right else 1.0 - (column - left)
            along = row - upper if down else 1.0 - (row - upper)
            found = cells[np.minimum(upper + down, grid.n_rows - 1), np.minimum(left + right, grid.n_columns - 1)]
            weight = np.where(np.isfinite(found), across * along, 0.0)
            total += weight * np.where(np.isfinite(found), found, 0.0)
            weights += weight
    inside = (weights > 1e-9) & _on_grid(grid, easting, northing)
    return np.where(inside, total / np.where(inside, weights, 1.0), np.nan)


def _on_grid(grid: Grid, easting: FloatArray, northing: FloatArray) -> NDArray[np.bool_]:
    west, south, east, north = grid.bounds
    return (easting >= west) & (easting <= east) & (northing >= south) & (northing <= north)


def _contour(surface: Surface | None, field: str, region: Region, options: LayerOptions) -> geopandas.GeoDataFrame:
    """Contours at multiples of a round interval, above 0 for a thickness; every fifth is `major`."""
    levels: list[float] = []
    lines: list[shapely.LineString] = []
    major: list[bool] = []
    if surface is not None and np.isfinite(surface.estimate).any():
        cells = surface.estimate
        least, most = float(np.nanmin(cells)), float(np.nanmax(cells))
        interval = choose_interval(least, most, region.length_unit, options.contours)
        generator = contour_generator(
            x=surface.grid.easting,
            y=surface.grid.northing,
            z=np.ma.masked_invalid(cells),
            line_type=LineType.Separate,
        )
        first = int(np.floor(least / interval)) + 1
        if field == "thickness":
            first = max(first, 1)
        for count in range(first, int(np.ceil(most / interval))):
            for line in generator.lines(count * interval):
                levels.append(count * interval)
                lines.append(shapely.LineString(np.asarray(line)))
                major.append(count % 5 == 0)
    columns = {field: np.array(levels, float), "major": np.array(major, bool)}
    return geopandas.GeoDataFrame(columns, geometry=lines, crs=region.crs)


def _outline_gravel(surface: Surface | None, region: Region, options: LayerOptions) -> geopandas.GeoDataFrame:
    """Polygons where gravel is likely and where it is possible, each class cut at its probabilities."""
    rows: list[tuple[str, float, float]] = []
    outlines: list[shapely.Polygon] = []
    classes = (("likely", options.likely, np.inf), ("possible", options.possible, options.likely))
    if surface is not None and np.isfinite(surface.estimate).any():
        generator = contour_generator(
            x=surface.grid.easting,
            y=surface.grid.northing,
            z=np.ma.masked_invalid(surface.estimate),
            fill_type=FillType.OuterOffset,
        )
        for name, lower, upper in classes:
            points, offsets = cast(tuple[list[FloatArray], list[NDArray[np.integer]]], generator.filled(lower, upper))
            for ring_points, ring_offsets in zip(points, offsets, strict=True):
                for outline in _build_polygons(ring_points, ring_offsets):
                    rows.append((name, lower, outline.area * region.crs_unit_metres**2))
                    outlines.append(outline)
    columns = {
        "likelihood": np.array([row[0] for row in rows], dtype=object),
        "least_probability": np.array([row[1] for row in rows], float),
        "area": np.array([row[2] for row in rows], float),
    }
    return geopandas.GeoDataFrame(columns, geometry=outlines, crs=region.crs)


def _build_polygons(points: FloatArray, offsets: NDArray[np.integer]) -> tuple[shapely.Polygon, ...]:
    """An outer ring with its holes as valid polygons; rings that touch themselves fall into several."""
    rings = [points[start:stop] for start, stop in pairwise(offsets)]
    valid = shapely.make_valid(shapely.Polygon(rings[0], rings[1:]))
    parts = shapely.get_parts(valid)
    return tuple(part for part in parts if part.geom_type == "Polygon" and part.area > 0.0)


def _draw_valleys(surface: Surface | None, region: Region, options: LayerOptions) -> geopandas.GeoDataFrame:
    """The valley's axis and its tributaries as lines that run downstream, a tributary to its junction."""
    shapes, rows = [], []
    if surface is not None and np.isfinite(surface.estimate).any():
        for order, easting, northing in _trace_on_thinned_grid(surface, options):
            floor = sample_bilinear(surface.grid, surface.estimate, easting, northing)
            along = np.concatenate([[0.0], np.cumsum(np.hypot(np.diff(easting), np.diff(northing)))])
            along *= region.crs_unit_metres
            fall = -float(np.polyfit(along, floor, 1)[0])
            points = np.column_stack([easting, northing])
            if fall < 0.0 and order == 1:
                points, fall = points[::-1], -fall
            shapes.append(shapely.LineString(points))
            rows.append((order, along[-1], floor.min(), floor.max(), fall))
    table = np.array(rows, float).reshape(-1, 5)
    columns = {
        "order": table[:, 0].astype(int),
        "length": table[:, 1],
        "lowest_elevation": table[:, 2],
        "highest_elevation": table[:, 3],
        "mean_slope": table[:, 4],
    }
    return geopandas.GeoDataFrame(columns, geometry=shapes, crs=region.crs)


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


def _depth_bands(stack: SurfaceStack) -> Mapping[str, FloatArray]:
    """Cells of every quantity that a permit is told, by the name of its column; a missing surface is all NaN.

    Quantiles of a depth are the ground less the opposite quantile of the elevation. Where the top of the gravel has no
    quantiles of its own, those of bedrock and thickness are added end to end, which is wider than the truth.
    """
    blank = np.full(stack.grid.shape, np.nan)

    def part(name: str, field: str) -> FloatArray:
        surface = stack.surfaces.get(name)
        cells = None if surface is None else getattr(surface, field)
        return blank if cells is None else cells

    top_p05, top_p95 = (part("deep_gravel_top_elevation", field) for field in ("p05", "p95"))
    if not np.isfinite(top_p05).any():
        shown = np.isfinite(part("deep_gravel_top_elevation", "estimate"))
        summed = {f: part("bedrock_elevation", f) + part("deep_gravel_thickness", f) for f in ("p05", "p95")}
        top_p05, top_p95 = (np.where(shown, summed[field], np.nan) for field in ("p05", "p95"))
    ground = stack.ground
    return {
        "bedrock_depth": np.maximum(ground - part("bedrock_elevation", "estimate"), 0.0),
        "bedrock_depth_p05": np.maximum(ground - part("bedrock_elevation", "p95"), 0.0),
        "bedrock_depth_p95": np.maximum(ground - part("bedrock_elevation", "p05"), 0.0),
        "gravel_top_depth": np.maximum(ground - part("deep_gravel_top_elevation", "estimate"), 0.0),
        "gravel_top_depth_p05": np.maximum(ground - top_p95, 0.0),
        "gravel_top_depth_p95": np.maximum(ground - top_p05, 0.0),
        "gravel_thickness": part("deep_gravel_thickness", "estimate"),
        "gravel_thickness_p05": part("deep_gravel_thickness", "p05"),
        "gravel_thickness_p95": part("deep_gravel_thickness", "p95"),
        "gravel_probability": part("deep_gravel_probability", "estimate"),
    }


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


def _covered(stack: SurfaceStack, easting: FloatArray, northing: FloatArray) -> NDArray[np.bool_]:
    grid = stack.grid
    column = np.clip(((easting - grid.west) / grid.cell_size).astype(int), 0, grid.n_columns - 1)
    row = np.clip(((grid.north - northing) / grid.cell_size).astype(int), 0, grid.n_rows - 1)
    return _on_grid(grid, easting, northing) & stack.covered[row, column]


def _read_permits(
    stack: SurfaceStack, permits: Sequence[Permit], region: Region, options: LayerOptions
) -> geopandas.GeoDataFrame:
    """Every permit in its order with what the surfaces say there; NaN and covered False beyond them.

    With a radius, estimates and probabilities are means over the circle's covered part and the quantiles its extremes.
    """
    easting = np.array([permit.easting for permit in permits], float)
    northing = np.array([permit.northing for permit in permits], float)
    radius = np.array([permit.location_accuracy or 0.0 for permit in permits], float) / region.crs_unit_metres
    covered = _covered(stack, easting, northing)
    columns: dict[str, NDArray] = {
        "permit": np.array([permit.name for permit in permits], dtype=object),
        "use": np.array([permit.use for permit in permits], dtype=object),
        "requested_depth": _optional([permit.requested_depth for permit in permits]),
        "location_accuracy": _optional([permit.location_accuracy for permit in permits]),
        "covered": covered,
        "covered_share": covered.astype(float),
    }
    bands = _depth_bands(stack)
    for name, cells in bands.items():
        columns[name] = np.where(covered, sample_bilinear(stack.grid, cells, easting, northing), np.nan)
    wide = np.flatnonzero(radius > 0.0)
    for chunk in np.array_split(wide, max(1, wide.size // 4096)):
        _average_circles(stack, bands, columns, (easting, northing, radius), chunk, options)
    return geopandas.GeoDataFrame(columns, geometry=geopandas.points_from_xy(easting, northing), crs=region.crs)


def _average_circles(
    stack: SurfaceStack,
    bands: Mapping[str, FloatArray],
    columns: dict[str, NDArray],
    places: tuple[FloatArray, FloatArray, FloatArray],
    chosen: NDArray[np.intp],
    options: LayerOptions,
) -> None:
    """Replace the values of the chosen permits by what their circles hold."""
    if not chosen.size:
        return
    across, along = spread_points(options.circle_points)
    radius = places[2][chosen, None]
    easting, northing = places[0][chosen, None] + radius * across, places[1][chosen, None] + radius * along
    within = _covered(stack, easting, northing)
    columns["covered_share"][chosen] = within.mean(axis=1)
    for name, cells in bands.items():
        values = np.where(within, sample_bilinear(stack.grid, cells, easting, northing), np.nan)
        known = np.isfinite(values)
        some = known.any(axis=1) & columns["covered"][chosen]
        if name.endswith("_p05"):
            summary = np.min(values, axis=1, where=known, initial=np.inf)
        elif name.endswith("_p95"):
            summary = np.max(values, axis=1, where=known, initial=-np.inf)
        else:
            summary = np.where(known, values, 0.0).sum(axis=1) / np.maximum(known.sum(axis=1), 1)
        columns[name][chosen] = np.where(some, summary, np.nan)


def _optional(values: Sequence[float | None]) -> FloatArray:
    return np.array([np.nan if value is None else value for value in values], float)
