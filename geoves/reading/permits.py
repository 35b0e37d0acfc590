"""Well permits: where wells were asked for, and how surely the place is known."""

import re
from types import MappingProxyType

from geoves.domain.survey import Permit
from geoves.reading.coordinates import locate_rows
from geoves.reading.tables import COORDINATES, Columns, Range, Row, Table, extras, refuse_repeated
from geoves.reading.wells import RADIUS, scaled

PERMIT_COLUMNS = Columns(
    required=("permit",),
    alternatives=(COORDINATES,),
    optional=("requested_depth", "use", "location_accuracy", "location_method"),
)
# Side (m) of the square whose centre stands for a place in the Public Land Survey System: a section is a mile square.
SQUARES = MappingProxyType(
    {"section": 1609.344, "quarter": 804.672, "quarter quarter": 402.336, "ten acre": 201.168, "10 acre": 201.168}
)
_DEPTH = Range("a depth below ground, above 0", 0.0, above=True)


def read_permits(table: Table, crs: str, metres: float) -> list[Permit]:
    """The permits, in the order of the table."""
    refuse_repeated(table.rows, "permit")
    return [
        Permit(
            name=row.required_text("permit", "the permit's name or number"),
            easting=place[0],
            northing=place[1],
            requested_depth=scaled(row.number_in("requested_depth", _DEPTH), metres),
            use=row.text("use"),
            location_accuracy=_radius(row, metres),
            location_method=row.text("location_method"),
            extra=extras(row, PERMIT_COLUMNS),
        )
        for row, place in zip(table.rows, locate_rows(table, crs), strict=True)
    ]


def _radius(row: Row, metres: float) -> float | None:
    """The typed radius in m; without one, for a place at a square's centre, that of the circle through its corners."""
    typed = scaled(row.number_in("location_accuracy", RADIUS), metres)
    method = row.text("location_method")
    return typed if typed is not None else find_square_radius(method)


def find_square_radius(method: str) -> float | None:
    """The radius (m) within which a place lies that is given as the centre of a square; None for another method.

    >>> [round(find_square_radius(words), 1) for words in ("Quarter-quarter centre", "quarter", "section centroid")]
    [284.5, 569.0, 1138.0]
    >>> find_square_radius("hand-held GPS") is None
    True
    """
    words = re.sub(r"[^a-z0-9]+", " ", method.casefold()).strip().replace("quarterquarter", "quarter quarter")
    square = re.sub(r" ?(section)? ?(centre|center|centroid)$", lambda found: found[1] or "", words).strip()
    side = SQUARES.get(square) or SQUARES.get(square.removesuffix("section").strip())
    return None if side is None else side / 2.0**0.5
