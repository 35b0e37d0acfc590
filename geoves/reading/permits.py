"""Well permits: where wells were asked for."""

from geoves.domain.survey import Permit
from geoves.reading.coordinates import locate_rows
from geoves.reading.tables import COORDINATES, Columns, Range, Table, extras, refuse_repeated
from geoves.reading.wells import RADIUS, scaled

PERMIT_COLUMNS = Columns(
    required=("permit",), alternatives=(COORDINATES,), optional=("requested_depth", "use", "location_accuracy")
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
            location_accuracy=scaled(row.number_in("location_accuracy", RADIUS), metres),
            extra=extras(row, PERMIT_COLUMNS),
        )
        for row, place in zip(table.rows, locate_rows(table, crs), strict=True)
    ]
