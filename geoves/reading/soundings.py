"""The table of soundings, joined with their curves."""

import math

from geoves.domain.survey import Array, Curve, Sounding
from geoves.reading.coordinates import locate_rows
from geoves.reading.faults import in_words
from geoves.reading.readings import read_curves
from geoves.reading.tables import COORDINATES, Columns, Range, Row, Table, extras, refuse_repeated

SOUNDING_COLUMNS = Columns(
    required=("sounding",),
    alternatives=(COORDINATES,),
    optional=("ground_elevation", "array", "azimuth", "date", "note"),
)
ELEVATION = Range("an elevation between -500 m and 9000 m", -500.0, 9000.0)
_AZIMUTH = Range("the direction of the spread, 0 to 360 degrees clockwise from north", 0.0, 360.0)
_NO_CURVE = Curve((), (), (), (), (), ())
_ARRAYS: dict[str, Array] = {"": "schlumberger", "schlumberger": "schlumberger", "wenner": "wenner"}


def read_soundings(table: Table, readings: Table | None, crs: str, metres: tuple[float, float]) -> list[Sounding]:
    """The soundings with their curves, empty without a table of readings; ground elevation NaN where none is typed.

    `metres` in the length unit of the soundings and of the readings.
    """
    refuse_repeated(table.rows, "sounding")
    places = locate_rows(table, crs)
    named = [(row, place) for row, place in zip(table.rows, places, strict=True) if _has_name(row)]
    arrays = {row.text("sounding"): _read_array(row) for row, _ in named}
    curves = {} if readings is None else read_curves(readings, metres[1], arrays)
    soundings = []
    for row, place in named:
        name = row.text("sounding")
        if readings is not None and name not in curves and "sounding" not in readings.missing:
            row.complain("sounding", "the table of readings has none of this sounding; add them, or delete the row")
        curve = curves.get(name, _NO_CURVE)
        if curve.used.size and not curve.used.any():
            row.doubt("sounding", "none of its readings is used; the sounding says nothing")
        soundings.append(
            Sounding(
                name=name,
                easting=place[0],
                northing=place[1],
                ground_elevation=read_elevation(row, metres[0]),
                curve=curve,
                array=arrays[name],
                azimuth_deg=row.number_in("azimuth", _AZIMUTH),
                date=row.text("date"),
                note=row.text("note"),
                extra=extras(row, SOUNDING_COLUMNS),
            )
        )
    return soundings


def read_elevation(row: Row, metres: float) -> float:
    """The typed ground elevation in m, NaN where none is typed."""
    value = row.number_in(
        "ground_elevation", Range(ELEVATION.words, ELEVATION.lower / metres, ELEVATION.upper / metres)
    )
    return math.nan if value is None else value * metres


def _has_name(row: Row) -> bool:
    return bool(row.required_text("sounding", "the sounding's name"))


def _read_array(row: Row) -> Array:
    typed = row.text("array").lower()
    if typed not in _ARRAYS:
        row.complain("array", f"expected {in_words(['schlumberger', 'wenner'])}")
    return _ARRAYS.get(typed, "schlumberger")
