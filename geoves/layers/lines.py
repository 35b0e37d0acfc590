"""Contours and the gravel's extent."""

from itertools import pairwise
from typing import cast

import geopandas
import numpy as np
import shapely
from contourpy import FillType, LineType, contour_generator
from numpy.typing import NDArray

from geoves.domain.arrays import FloatArray
from geoves.domain.grids import Surface
from geoves.domain.region import METRES, LengthUnit, Region
from geoves.layers.options import LayerOptions


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


def draw_contours(surface: Surface | None, field: str, region: Region, options: LayerOptions) -> geopandas.GeoDataFrame:
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


def outline_gravel(surface: Surface | None, region: Region, options: LayerOptions) -> geopandas.GeoDataFrame:
    """Polygons where gravel is likely, possible and not shown, each class cut at its probabilities."""
    rows: list[tuple[str, float, float]] = []
    outlines: list[shapely.Polygon] = []
    classes = (
        ("likely", options.likely, np.inf),
        ("possible", options.possible, options.likely),
        ("not_shown", -np.inf, options.possible),
    )
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
                    rows.append((name, max(lower, 0.0), outline.area * region.crs_unit_metres**2))
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
