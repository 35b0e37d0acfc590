"""Places held against the ground raster and the boundary."""

import math
from collections.abc import Sequence
from typing import Any

import attrs
import numpy as np
import shapely

from geoves.domain.findings import Finding
from geoves.domain.grids import Grid
from geoves.domain.region import METRES
from geoves.domain.survey import Permit
from geoves.reading.grids import Place
from geoves.reading.rasters import GroundReading
from geoves.reading.tables import Row

# A typed elevation further than this from the ground raster is doubted, m.
ELEVATION_TOLERANCE = 10.0
# One offset of a whole table is told from this on, m, and from so many places on.
LEAST_OFFSET, FEWEST_FOR_OFFSET = 2.0, 8
# Elevations in this ratio, either way, look like feet taken for metres.
_FEET_IN_A_METRE = 1.0 / METRES["ft"]


def check_elevations(places: Sequence[Place], rows: Sequence[Row], ground: GroundReading | None) -> list[Place]:
    """The places, elevations that are not typed taken from the ground raster.

    A fault where neither has one; a doubt where the typed one is further than ELEVATION_TOLERANCE from the raster.
    """
    at_places = [math.nan] * len(places) if ground is None else ground.at_places.tolist()
    checked = []
    offsets = _find_offsets(places, rows, at_places)
    for place, row, elevation in zip(places, rows, at_places, strict=True):
        typed = place.ground_elevation
        located = math.isfinite(place.easting) and math.isfinite(place.northing)
        if located and math.isnan(elevation) and not row.text("ground_elevation"):
            where = "no ground raster is given" if ground is None else "the ground raster has none here"
            row.complain("ground_elevation", f"empty; expected the elevation of the ground, as {where}")
        elif abs(typed - elevation - offsets.get(row.file, 0.0)) > ELEVATION_TOLERANCE:
            _doubt_elevation(row, typed, elevation)
        checked.append(attrs.evolve(place, ground_elevation=elevation) if math.isnan(typed) else place)
    return checked


def _find_offsets(places: Sequence[Place], rows: Sequence[Row], at_places: Sequence[float]) -> dict[str, float]:
    """By how much (m) all typed elevations of a table lie over the ground raster, where they do, with a doubt."""
    offsets = {}
    for file in dict.fromkeys(row.file for row in rows):
        mine = [i for i, row in enumerate(rows) if row.file == file]
        apart = np.array([places[i].ground_elevation - at_places[i] for i in mine])
        apart = apart[np.isfinite(apart)]
        if apart.size < FEWEST_FOR_OFFSET:
            continue
        offset = float(np.median(apart))
        scatter = 1.4826 * float(np.median(np.abs(apart - offset)))
        if abs(offset) < LEAST_OFFSET or abs(offset) < 5.0 * 1.2533 * scatter / math.sqrt(apart.size):
            continue
        words = (
            f"the typed elevations lie {offset:+.1f} m (median of {apart.size}) off the ground raster's: do both count "
            "from the same height datum?"
        )
        finding = Finding("doubt", file, 0, "ground_elevation", "", words, check="ground_offset")
        rows[mine[0]].findings.append(finding)
        offsets[file] = offset
    return offsets


def _doubt_elevation(row: Row, typed: float, elevation: float) -> None:
    ratio = typed / elevation if elevation else 0.0
    feet = any(abs(ratio / factor - 1.0) < 0.05 for factor in (_FEET_IN_A_METRE, 1.0 / _FEET_IN_A_METRE))
    hint = "; feet taken for metres, or the other way round?" if feet else "; is the place or the elevation right?"
    words = f"{typed:.1f} m, but the ground raster has {elevation:.1f} m here{hint}"
    row.doubt("ground_elevation", words, "ground_elevation")


def doubt_outside(places: Sequence[Place | Permit], rows: Sequence[Row], boundary: Any) -> None:
    """A doubt for each place outside the boundary."""
    shapely.prepare(boundary)
    for place, row in zip(places, rows, strict=True):
        known = math.isfinite(place.easting) and math.isfinite(place.northing)
        if known and not shapely.intersects_xy(boundary, place.easting, place.northing):
            row.doubt("x" if "x" in row.cells else "lon", "the place lies outside the boundary", "outside_boundary")


def doubt_bare_cells(grid: Grid | None, ground: GroundReading | None, boundary: Any) -> list[Finding]:
    """A doubt where the ground raster leaves a part of the region without elevations."""
    if grid is None or ground is None or ground.ground is None:
        return []
    inside = shapely.contains_xy(boundary, *np.meshgrid(grid.easting, grid.northing))
    bare = inside & np.isnan(ground.ground.elevation)
    if not bare.any():
        return []
    words = f"the ground raster has no elevation in {bare.sum()} of the region's {inside.sum()} cells"
    return [Finding("doubt", ground.file, 0, "", "", words)]
