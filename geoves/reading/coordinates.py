"""Where the rows of a table lie, in the region's CRS."""

from collections.abc import Sequence

import numpy as np
import pyproj

from geoves.domain.arrays import FloatArray
from geoves.reading.tables import Range, Row, Table

LONGITUDE_LATITUDE = "EPSG:4326"
_COORDINATE = Range("a coordinate in the region's CRS")
_LONGITUDE = Range("a longitude in degrees, -180 to 180", -180.0, 180.0)
_LATITUDE = Range("a latitude in degrees, -90 to 90", -90.0, 90.0)
# Degrees beyond the area for which a CRS is declared: zones are used a little over their edges.
_ZONE_OVERLAP = 1.0


def locate_rows(table: Table, crs: str) -> list[tuple[float, float]]:
    """Easting and northing of each row in the CRS, from x and y where the table has them, else from lon and lat.

    NaN, with a fault, where a row has none; a doubt where the place is outside the area that the CRS is made for.
    """
    if table.has("x", "y"):
        typed = [(row.required_number("x", _COORDINATE), row.required_number("y", _COORDINATE)) for row in table.rows]
        column = "x"
    else:
        degrees = [
            (row.required_number("lon", _LONGITUDE), row.required_number("lat", _LATITUDE)) for row in table.rows
        ]
        typed = _project(degrees, crs)
        column = "lon"
        for row, known, place in zip(table.rows, degrees, typed, strict=True):
            if np.isfinite(known).all() and not np.isfinite(place).all():
                row.complain(column, f"the place cannot be shown in {crs}; check lon, lat and the region's crs")
    _doubt_far_places(table.rows, typed, crs, column)
    return typed


def _project(degrees: Sequence[tuple[float, float]], crs: str) -> list[tuple[float, float]]:
    transformer = pyproj.Transformer.from_crs(LONGITUDE_LATITUDE, crs, always_xy=True)
    longitude, latitude = _columns(degrees)
    easting, northing = transformer.transform(longitude, latitude)
    places = np.column_stack([easting, northing])
    places[~np.isfinite(places).all(axis=1)] = np.nan
    return [(float(east), float(north)) for east, north in places]


def _doubt_far_places(rows: Sequence[Row], places: Sequence[tuple[float, float]], crs: str, column: str) -> None:
    area = pyproj.CRS(crs).area_of_use
    if area is None:
        return
    easting, northing = _columns(places)
    transformer = pyproj.Transformer.from_crs(crs, LONGITUDE_LATITUDE, always_xy=True)
    longitude, latitude = transformer.transform(easting, northing)
    with np.errstate(invalid="ignore"):  # of places that no longitude belongs to
        east = np.mod(longitude - area.west + _ZONE_OVERLAP, 360.0)
    width = (area.east - area.west) % 360.0 or 360.0
    inside = (east <= width + 2.0 * _ZONE_OVERLAP) & (latitude >= area.south - _ZONE_OVERLAP)
    inside &= latitude <= area.north + _ZONE_OVERLAP
    for row, is_inside, known in zip(rows, inside, np.isfinite(easting), strict=True):
        if known and not is_inside:
            row.doubt(column, f"the place lies far outside the area of {crs} ({area.name}); are x and y swapped?")


def find_stretch(places: Sequence[tuple[float, float]], crs: str) -> float:
    """Length on the map over length on the ground in the middle of the places; NaN where there are none."""
    located = np.array(places, dtype=np.float64).reshape(-1, 2)
    located = located[np.isfinite(located).all(axis=1)]
    if not len(located):
        return np.nan
    middle = np.median(located, axis=0)
    longitude, latitude = pyproj.Transformer.from_crs(crs, LONGITUDE_LATITUDE, always_xy=True).transform(*middle)
    if not np.isfinite([longitude, latitude]).all():
        return np.nan
    factors = pyproj.Proj(crs).get_factors(longitude, latitude, errcheck=False)
    return float(np.sqrt(factors.areal_scale))


def _columns(pairs: Sequence[tuple[float, float]]) -> tuple[FloatArray, FloatArray]:
    array = np.array(pairs, dtype=np.float64).reshape(-1, 2)
    return array[:, 0], array[:, 1]
