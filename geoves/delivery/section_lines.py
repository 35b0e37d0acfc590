"""Where the cross-sections run: the lines that region.toml names, one along the valley and three across it."""

from collections.abc import Iterable, Iterator
from typing import Any, Literal

import attrs
import numpy as np
import shapely

from geoves.domain.results import Results


@attrs.frozen
class SectionLine:
    """One section: its title, what marks its beginning on the map, its line in the CRS, and why it is there."""

    title: str
    mark: str
    line: Any
    kind: Literal["named", "along", "across"]


def lines_of(geometries: Iterable[Any]) -> Iterator[Any]:
    """Every plain line among geometries, the outlines of polygons too."""
    for geometry in geometries:
        if geometry is None or geometry.is_empty:
            continue
        if geometry.geom_type in ("LineString", "LinearRing"):
            yield geometry
        elif geometry.geom_type == "Polygon":
            yield from lines_of([geometry.exterior, *geometry.interiors])
        elif hasattr(geometry, "geoms"):
            yield from lines_of(geometry.geoms)


def main_axis(results: Results) -> Any:
    """The longest line of the valley's axis, None where there is none."""
    axis = results.layers.get("valley_axis")
    if axis is None or not len(axis):
        return None
    return max(lines_of(axis.geometry), key=lambda one: one.length, default=None)


def lay_sections(results: Results) -> list[SectionLine]:
    """The sections: those that are named in their order, then along the main axis, and three across it."""
    named = [
        SectionLine(one.name, one.name[:16], shapely.LineString(one.points), "named") for one in results.region.sections
    ]
    axis = main_axis(results)
    if axis is None or axis.length == 0:
        return named
    return [*named, SectionLine("Along the valley", "", axis, "along"), *_cross(axis, results)]


def _cross(axis: Any, results: Results) -> Iterator[SectionLine]:
    """Three sections at right angles to the axis, read from west to east."""
    west, south, east, north = results.stack.grid.bounds
    reach = 0.18 * float(np.hypot(east - west, north - south))
    # A wide step keeps a kink of one cell from turning the line across.
    step = max(0.05 * axis.length, 2.0 * results.stack.grid.cell_size)
    for share, name in ((0.2, "A"), (0.5, "B"), (0.8, "C")):
        at = share * axis.length
        before, here, after = (axis.interpolate(at + d) for d in (-step, 0.0, step))
        along = np.array([after.x - before.x, after.y - before.y])
        length = float(np.hypot(*along))
        if length == 0:
            continue
        across = np.array([-along[1], along[0]]) / length * reach
        if across[0] < 0 or (across[0] == 0 and across[1] < 0):
            across = -across
        centre = np.array([here.x, here.y])
        line = shapely.LineString([centre - across, centre + across])
        yield SectionLine(f"Across the valley at {name}", name, line, "across")
