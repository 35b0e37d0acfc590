"""The interpreter's own decisions."""

from collections.abc import Collection
from typing import cast, get_args

from geoves.domain.survey import Pick, PickStatus
from geoves.domain.units import Template
from geoves.reading.faults import in_words, nearest
from geoves.reading.tables import Columns, Range, Row, Table, extras, refuse_repeated
from geoves.reading.wells import scaled

PICK_COLUMNS = Columns(required=("place", "unit", "status"), optional=("depth", "depth_error", "interpreter", "reason"))
_DEPTH = Range("a depth below ground, 0 or more", 0.0)
_ERROR = Range("one standard deviation of the depth, above 0", 0.0, above=True)


def read_picks(
    table: Table, metres: float, template: Template, names: tuple[Collection[str], Collection[str]] | None
) -> list[Pick]:
    """The picks, in the order of the table, at places of the names of soundings and of wells; None where not known."""
    refuse_repeated(table.rows, "unit", key=lambda row: (row.text("place"), row.text("unit")))
    if names is not None:
        for row in table.rows:
            _check_place(row, *names)
    return [_read_pick(row, metres, template) for row in table.rows]


def _check_place(row: Row, soundings: Collection[str], wells: Collection[str]) -> None:
    place = row.required_text("place", "the name of a sounding or a well")
    if place in soundings and place in wells:
        row.complain("place", "both a sounding and a well have this name; give each its own")
    elif place and place not in soundings and place not in wells:
        row.complain("place", f"no sounding and no well has this name{nearest(place, [*soundings, *wells])}")


def _read_pick(row: Row, metres: float, template: Template) -> Pick:
    unit = row.required_text("unit", "a code of the template")
    if unit and template.units and unit not in template.codes:
        row.complain(
            "unit", f"expected a code of the template: {in_words(template.codes)}{nearest(unit, template.codes)}"
        )
    statuses = get_args(PickStatus)
    status = row.text("status").lower()
    if status not in statuses:
        row.complain("status", f"expected {in_words(statuses)}")
    depth = row.number_in("depth", _DEPTH)
    if status in ("at", "below") and not row.text("depth"):
        row.complain("depth", f"empty; a pick that says {status!r} needs the depth of the top")
    if status == "absent" and depth is not None:
        row.doubt("depth", "a unit that is absent has no depth; not used")
        depth = None
    return Pick(
        place=row.text("place"),
        unit=unit,
        status=cast(PickStatus, status),
        depth=scaled(depth, metres),
        depth_error=scaled(row.number_in("depth_error", _ERROR), metres),
        interpreter=row.text("interpreter"),
        reason=row.text("reason"),
        extra=extras(row, PICK_COLUMNS),
    )
