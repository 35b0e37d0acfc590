"""All inputs of a region together: the survey and the grid that its surfaces will stand on."""

from collections.abc import Callable, Mapping, Sequence
from typing import Any

import attrs

from geoves.domain.findings import Finding
from geoves.domain.grids import Grid
from geoves.domain.region import Region
from geoves.domain.survey import Permit, Pick, Sounding, Survey, Well
from geoves.reading.coordinates import find_stretch
from geoves.reading.delimited import read_delimited
from geoves.reading.faults import nearest
from geoves.reading.grids import Place, lay_grid, locations
from geoves.reading.permits import PERMIT_COLUMNS, read_permits
from geoves.reading.picks import PICK_COLUMNS, read_picks
from geoves.reading.places import check_elevations, doubt_bare_cells, doubt_outside
from geoves.reading.rasters import read_ground
from geoves.reading.readings import READING_COLUMNS, check_readings
from geoves.reading.soundings import SOUNDING_COLUMNS, read_soundings
from geoves.reading.sources import INPUTS, REQUIRED_INPUTS, Source, find_source
from geoves.reading.tables import Row, Table, with_places
from geoves.reading.vectors import VECTOR_SUFFIXES, read_boundary, read_point_table
from geoves.reading.wells import LOG_COLUMNS, WELL_COLUMNS, check_logs, read_wells

# The tables: their columns, and the one that names a row's place.
_TABLES = {
    "soundings": (SOUNDING_COLUMNS, "sounding"),
    "readings": (READING_COLUMNS, "sounding"),
    "wells": (WELL_COLUMNS, "well"),
    "well_logs": (LOG_COLUMNS, "well"),
    "permits": (PERMIT_COLUMNS, "permit"),
    "picks": (PICK_COLUMNS, "place"),
}


# A CRS that stretches lengths by more than this is doubted: distances, areas and the reach of data are measured in it.
_STRETCH_TOLERANCE = 0.01


@attrs.frozen
class SurveyFiles:
    """What the inputs gave. Where there are faults the survey is in pieces, and the grid may be None."""

    survey: Survey
    grid: Grid | None
    findings: tuple[Finding, ...]
    rows: Mapping[tuple[str, str], int]  # of each place, by its input and its name


def collect_survey(region: Region) -> SurveyFiles:
    """All inputs read, with all that is wrong or unlikely in them; nothing is raised."""
    findings: list[Finding] = []
    tables = {name: _read_table(region, name, findings) for name in _TABLES if name in region.files}
    soundings, wells, permits, picks = _read_places(region, tables)
    boundary = _read_with(region, "boundary", lambda source: read_boundary(source, region.crs, findings))
    places: list[Place] = [*soundings, *wells]
    grid = None
    if boundary is not None or "boundary" not in region.files:
        grid = lay_grid(region, boundary, places, findings)
    ground = _read_with(
        region, "ground", lambda source: read_ground(source, region.crs, grid, locations(places), findings)
    )
    rows = _rows_of(places, tables)
    if ground is not None or "ground" not in region.files:
        places = check_elevations(places, rows, ground)
    if boundary is not None:
        doubt_outside(places, rows, boundary)
        doubt_outside(permits, _rows_of(permits, tables), boundary)
        findings.extend(doubt_bare_cells(grid, ground, boundary))
    _check_withheld(region, tables, findings)
    findings.extend(_doubt_region(region, tables, find_stretch(locations(places), region.crs)))
    ordered = _in_order(findings, region)
    survey = Survey(
        soundings=tuple(place for place in places if isinstance(place, Sounding)),
        wells=tuple(place for place in places if isinstance(place, Well)),
        permits=tuple(permits),
        picks=tuple(picks),
        ground=None if ground is None else ground.ground,
        boundary=boundary,
        doubts=tuple(finding for finding in ordered if finding.severity == "doubt"),
        crs_unit_metres=region.crs_unit_metres,
    )
    located = {name: table for name in ("permits", "wells", "soundings") if (table := tables.get(name)) is not None}
    numbers = {(name, row.place): row.number for name, table in located.items() for row in table.rows}
    return SurveyFiles(survey, grid, ordered, numbers)


def _read_with(region: Region, name: str, read: Callable[[Source], Any]) -> Any:
    """What `read` makes of the input of that name, None where there is none."""
    source = find_source(region, name)
    return None if source is None else read(source)


def _read_table(region: Region, name: str, findings: list[Finding]) -> Table | None:
    columns, place_column = _TABLES[name]

    def read(source: Source) -> Table | None:
        if name == "permits" and source.suffix in VECTOR_SUFFIXES:
            return read_point_table(source, region.crs, columns, findings)
        return read_delimited(source, columns, findings)

    table = _read_with(region, name, read)
    if table is not None and not table.rows and name in REQUIRED_INPUTS:
        words = "headings without rows; expected at least one"
        findings.append(Finding("fault", table.file, table.header_row, "", "", words))
        return None
    return None if table is None else with_places(table, place_column)


def _metres(region: Region, name: str) -> float:
    source = find_source(region, name)
    return region.metres_per_length_unit if source is None else source.metres


def _read_places(
    region: Region, tables: dict[str, Table | None]
) -> tuple[list[Sounding], list[Well], list[Permit], list[Pick]]:
    """Soundings, wells, permits and picks of the tables that could be read."""
    found = {name: tables.get(name) for name in _TABLES}
    metres = {name: _metres(region, name) for name in _TABLES}
    soundings: list[Sounding] = []
    wells: list[Well] = []
    permits: list[Permit] = []
    picks: list[Pick] = []
    readings, logs = found["readings"], found["well_logs"]
    soundings_named, wells_named = _has_names(found["soundings"], "sounding"), _has_names(found["wells"], "well")
    if readings is not None and not soundings_named:
        check_readings(readings, metres["readings"])
    if logs is not None and not wells_named:
        check_logs(logs, metres["well_logs"], region.template)
    if (table := found["soundings"]) is not None:
        both = metres["soundings"], metres["readings"]
        soundings = read_soundings(table, readings if soundings_named else None, region.crs, both)
    if (table := found["wells"]) is not None:
        both = metres["wells"], metres["well_logs"]
        wells = read_wells(table, logs if wells_named else None, region.crs, both, region.template)
    if (table := found["permits"]) is not None:
        permits = read_permits(table, region.crs, metres["permits"])
    if (table := found["picks"]) is not None:
        known = soundings_named and (wells_named or "wells" not in region.files)
        names = (_names(found["soundings"], "sounding"), _names(found["wells"], "well")) if known else None
        picks = read_picks(table, metres["picks"], region.template, names)
    return soundings, wells, permits, picks


def _has_names(table: Table | None, column: str) -> bool:
    return table is not None and column not in table.missing


def _names(table: Table | None, column: str) -> set[str]:
    return set() if table is None else {row.text(column) for row in table.rows}


def _rows_of(places: Sequence[Sounding | Well | Permit], tables: dict[str, Table | None]) -> list[Row]:
    """The row of each place in its table."""
    kinds = {Sounding: "soundings", Well: "wells", Permit: "permits"}
    by_name: dict[tuple[str, str], Row] = {}
    for kind in kinds.values():
        table = tables.get(kind)
        for row in () if table is None else table.rows:
            by_name.setdefault((kind, row.place), row)
    return [by_name[kinds[type(place)], place.name] for place in places]


def _check_withheld(region: Region, tables: dict[str, Table | None], findings: list[Finding]) -> None:
    """A fault for a column to withhold that no table has: a slip there would publish what should stay at home."""
    read = {name: table for name, table in tables.items() if table is not None}
    if len(read) < len(tables):
        return
    extra = {heading for name, table in read.items() for heading in table.headings if heading not in _known(name)}
    for column in region.delivery.withhold:
        if column not in extra:
            used = any(column in _known(name) for name in _TABLES)
            words = (
                "a column that geoves itself uses; only extra columns can be withheld"
                if used
                else f"no table has such an extra column{nearest(column, sorted(extra))}"
            )
            findings.append(Finding("fault", region.path.name, 0, "delivery.withhold", column, words))


def _known(name: str) -> tuple[str, ...]:
    return _TABLES[name][0].known


def _doubt_region(region: Region, tables: dict[str, Table | None], stretch: float) -> list[Finding]:
    doubts = []
    if abs(stretch - 1.0) > _STRETCH_TOLERANCE:
        words = f"map lengths are {stretch:.3f} times those on the ground here; choose a CRS made for the region"
        doubts.append(Finding("doubt", region.path.name, 0, "region.crs", region.crs, words))
    if region.vertical_datum is None:
        words = "no vertical datum is declared: nobody can say from which zero the elevations count"
        doubts.append(
            Finding("doubt", region.path.name, 0, "region.vertical_datum", "", words, check="no_vertical_datum")
        )
    wells = tables.get("wells")
    shared = _names(tables.get("soundings"), "sounding") & _names(wells, "well")
    for row in () if wells is None else wells.rows:
        if row.place in shared:
            row.doubt("well", "a sounding has this name too")
    return doubts


def _in_order(findings: Sequence[Finding], region: Region) -> tuple[Finding, ...]:
    """By file in the order of region.toml, then by row."""
    sources = [source for name in INPUTS if (source := find_source(region, name)) is not None]
    files = [region.path.name, *(source.typed for source in sources)]
    return tuple(sorted(findings, key=lambda finding: (files.index(finding.file), finding.row)))
