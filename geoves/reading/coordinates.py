"""Where the rows of a table lie, in the region's CRS."""

from collections.abc import Sequence

import numpy as np
import pyproj

from geoves.domain.arrays import FloatArray
from geoves.domain.findings import Finding
from geoves.domain.region import METRES
from geoves.reading.conversions import note_missing_grid
from geoves.reading.tables import Range, Row, Table

LONGITUDE_LATITUDE = "EPSG:4326"
_COORDINATE = Range("a coordinate in the region's CRS")
_LONGITUDE = Range("a longitude in degrees, -180 to 180", -180.0, 180.0)
_LATITUDE = Range("a latitude in degrees, -90 to 90", -90.0, 90.0)
# Degrees beyond the area for which a CRS is declared: zones are used a little over their edges.
_ZONE_OVERLAP = 1.0
# Coordinates of one row nearer than this are the same place, m.
SAME_PLACE = 0.5
METRES_IN_A_DEGREE = 111_320.0


def locate_rows(table: Table, crs: str) -> list[tuple[float, float]]:
    """Easting and northing of each row in the CRS, from x and y where the table has them, else from lon and lat.

    NaN, with a fault, where a row has none; a doubt where the place is outside the area that the CRS is made for.
    """
    if table.has("x", "y"):
        typed = [(row.required_number("x", _COORDINATE), row.required_number("y", _COORDINATE)) for row in table.rows]
        column = "x"
        if table.has("lon", "lat"):
            compare_coordinates(table, typed, crs)
    else:
        degrees = [
            (row.required_number("lon", _LONGITUDE), row.required_number("lat", _LATITUDE)) for row in table.rows
        ]
        known = [pair for pair in degrees if np.isfinite(pair).all()]
        if known:
            (west, south), (east, north) = np.min(known, axis=0).tolist(), np.max(known, axis=0).tolist()
            first = table.rows[0].findings
            note_missing_grid(table.file, LONGITUDE_LATITUDE, crs, (west, south, east, north), first)
        typed = _project(degrees, crs)
        column = "lon"
        for row, pair, place in zip(table.rows, degrees, typed, strict=True):
            if np.isfinite(pair).all() and not np.isfinite(place).all():
                row.complain(column, f"the place cannot be shown in {crs}; check lon, lat and the region's crs")
    _doubt_far_places(table.rows, typed, crs, column)
    return typed


def compare_coordinates(table: Table, typed: Sequence[tuple[float, float]], crs: str) -> None:
    """Doubts where a row's x and y are not the place of its lon and lat; x and y are taken.

    Where most rows are off it is one doubt of the table, with what would make them so.
    """
    heard = [row.without_complaints() for row in table.rows]
    degrees = [(row.number_in("lon", _LONGITUDE), row.number_in("lat", _LATITUDE)) for row in heard]
    pairs = [(np.nan if lon is None else lon, np.nan if lat is None else lat) for lon, lat in degrees]
    metres = pyproj.CRS(crs).axis_info[0].unit_conversion_factor
    here, there = np.array(typed).reshape(-1, 2), np.array(_project(pairs, crs)).reshape(-1, 2)
    shift = (here - there) * metres
    apart = np.hypot(shift[:, 0], shift[:, 1])
    both = np.isfinite(apart)
    off = both & (apart > np.array([_tolerance(row) for row in table.rows]))
    if off.sum() > 0.5 * both.sum():
        words = f"x, y and lon, lat are {np.median(apart[off]):.1f} m apart in {off.sum()} of {both.sum()} rows"
        words += _explain_shift(here[off] * metres, shift[off])
        finding = Finding("doubt", table.file, table.header_row, "x", "", words, check="two_coordinates")
        table.rows[0].findings.append(finding)
        return
    for i in np.flatnonzero(off):
        table.rows[i].doubt("x", f"x, y and lon, lat are {apart[i]:.1f} m apart; x and y are taken", "two_coordinates")


def _tolerance(row: Row) -> float:
    """How far (m) x, y and lon, lat may be apart: half a metre, and what the last typed digit of the degrees leaves."""
    digits = min(len(row.text(name).partition(",")[2] or row.text(name).partition(".")[2]) for name in ("lon", "lat"))
    return SAME_PLACE + METRES_IN_A_DEGREE * 0.75 * 10.0**-digits


def _explain_shift(here: FloatArray, shift: FloatArray) -> str:
    """What would move all places so: the other foot, or another datum; empty where neither would."""
    foot = METRES["us-ft"] / METRES["ft"] - 1.0
    share = np.median(shift / here, axis=0)
    if np.all(np.abs(np.abs(share) - foot) < 0.3 * foot):
        return ": 2 parts in a million of x and y, as where one of the two feet is taken for the other"
    east, north = np.median(shift, axis=0)
    scatter = np.median(np.abs(shift - (east, north)))
    if scatter < 0.1 * np.hypot(east, north):
        return f": all by {east:+.1f} m east and {north:+.1f} m north, as where two datums are taken for one"
    return "; is the region's crs that of x and y?"


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
            words = f"the place lies far outside the area of {crs} ({area.name}); are x and y swapped?"
            row.doubt(column, words, "outside_crs")


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
