"""Control wells and their drillers' logs."""

import math
from collections.abc import Sequence

from geoves.domain.survey import LogInterval, Well
from geoves.domain.units import Template
from geoves.reading.coordinates import locate_rows
from geoves.reading.faults import in_words, nearest
from geoves.reading.soundings import read_elevation
from geoves.reading.tables import COORDINATES, Columns, Range, Row, Table, extras, refuse_repeated

WELL_COLUMNS = Columns(
    required=("well", "total_depth"),
    alternatives=(COORDINATES,),
    optional=("ground_elevation", "water_level", "specific_conductance", "location_accuracy"),
)
LOG_COLUMNS = Columns(required=("well", "top", "bottom", "description"), optional=("unit",))
_DEPTH = Range("a depth below ground, above 0", 0.0, above=True)
_TOP = Range("a depth below ground, 0 or more", 0.0)
_WATER = Range("a depth below ground, negative where water stands above it")
_CONDUCTANCE = Range("a specific conductance in µS/cm, above 0", 0.0, above=True)
RADIUS = Range("a radius, 0 or more", 0.0)


def scaled(value: float | None, metres: float) -> float | None:
    """The length in m, None where there is none."""
    return None if value is None else value * metres


def read_wells(
    table: Table, logs: Table | None, crs: str, metres: tuple[float, float], template: Template
) -> list[Well]:
    """The wells with their logs, in the order of depth; ground elevation NaN where none is typed.

    `metres` in the length unit of the wells and of the logs.
    """
    refuse_repeated(table.rows, "well")
    depths = {row.text("well"): row.required_number("total_depth", _DEPTH) * metres[0] for row in table.rows}
    intervals = {} if logs is None else _read_logs(logs, metres[1], template, depths)
    wells = []
    for row, place in zip(table.rows, locate_rows(table, crs), strict=True):
        name = row.required_text("well", "the well's name")
        water = scaled(row.number_in("water_level", _WATER), metres[0])
        if water is not None and water > depths[name]:
            row.doubt("water_level", f"deeper than the well's total depth of {row.text('total_depth')}")
        if logs is not None and name not in intervals and "well" not in logs.missing:
            row.doubt("well", "the table of well logs has none of this well")
        wells.append(
            Well(
                name=name,
                easting=place[0],
                northing=place[1],
                ground_elevation=read_elevation(row, metres[0]),
                total_depth=depths[name],
                intervals=tuple(intervals.get(name, ())),
                water_level=water,
                specific_conductance=row.number_in("specific_conductance", _CONDUCTANCE),
                location_accuracy=scaled(row.number_in("location_accuracy", RADIUS), metres[0]),
                extra=extras(row, WELL_COLUMNS),
            )
        )
    return wells


def check_logs(table: Table, metres: float, template: Template) -> None:
    """Note the faults of the logs by themselves, where the table of their wells could not be read."""
    _read_logs(table, metres, template, {row.text("well"): math.inf for row in table.rows})


def _read_logs(
    table: Table, metres: float, template: Template, depths: dict[str, float]
) -> dict[str, list[LogInterval]]:
    by_well: dict[str, list[tuple[Row, LogInterval]]] = {}
    for row in table.rows:
        name = row.required_text("well", "the name of a well")
        if name and name not in depths:
            row.complain("well", "the table of wells has no such name; add the well or correct the name")
        interval = _read_interval(row, metres, template)
        if interval is not None and name in depths:
            by_well.setdefault(name, []).append((row, interval))
    for name, found in by_well.items():
        found.sort(key=lambda pair: (pair[1].top, pair[1].bottom))
        _check_sequence(found, depths[name])
    return {name: [interval for _, interval in found] for name, found in by_well.items()}


def _read_interval(row: Row, metres: float, template: Template) -> LogInterval | None:
    top = row.required_number("top", _TOP) * metres
    bottom = row.required_number("bottom", _DEPTH) * metres
    if bottom <= top:
        row.complain("bottom", f"expected a depth below the interval's top of {row.text('top')}")
    unit = row.text("unit")
    if unit and template.units and unit not in template.codes:
        row.complain(
            "unit", f"expected a code of the template: {in_words(template.codes)}{nearest(unit, template.codes)}"
        )
    if not unit:
        row.required_text("description", "the driller's words, or a unit's code in `unit`")
    if not top < bottom:
        return None
    return LogInterval(top, bottom, row.text("description"), unit or None, extras(row, LOG_COLUMNS))


def _check_sequence(found: Sequence[tuple[Row, LogInterval]], total_depth: float) -> None:
    """Overlaps are faults; gaps and what lies below the total depth are doubts."""
    reached, reached_row = 0.0, 0
    for row, interval in found:
        if interval.top < reached and not math.isclose(interval.top, reached):
            row.complain("top", f"the interval overlaps that of row {reached_row}; correct top or bottom")
        elif interval.top > reached and not math.isclose(interval.top, reached):
            above = f"row {reached_row}" if reached_row else "the ground"
            words = f"a gap in the log between this interval and {above}; the gap is read as not known"
            row.doubt("top", words, "log_gap")
        if interval.bottom > total_depth and not math.isclose(interval.bottom, total_depth):
            row.doubt("bottom", "deeper than the well's total depth", "log_below_depth")
        if interval.bottom > reached:
            reached, reached_row = interval.bottom, row.number
