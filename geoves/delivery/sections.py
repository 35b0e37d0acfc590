"""Figures of the region: the overview map and the sections along and across the valley, as SVG."""

from collections.abc import Sequence
from typing import Any

import attrs
import numpy as np
import shapely
from scipy.ndimage import map_coordinates

from geoves.delivery.markup import Markup, element, joined, unit_label
from geoves.delivery.ramps import QUANTITY_RAMPS, embedded_image, faded_colours, ramp_colours, value_range
from geoves.delivery.section_lines import lay_sections, lines_of
from geoves.delivery.svg import (
    Frame,
    Scale,
    drawing,
    even_ticks,
    label,
    line,
    path_data,
    polyline,
    rectangle,
    tick_text,
)
from geoves.domain.arrays import FloatArray
from geoves.domain.grids import Grid
from geoves.domain.results import Results
from geoves.domain.survey import Sounding, Well
from geoves.domain.tops import BedrockStatus, UnitColumn
from geoves.domain.units import Role

SAMPLES = 500
WELL_REACH = 1500.0  # m: wells are few, and a log that far off still tells what kind of ground to expect
LIKELY = 0.66  # a probability that is called likely on the pages and in the layer of the gravel's extent
WIDTH = 900


def sample_cells(grid: Grid, values: FloatArray, points: FloatArray) -> FloatArray:
    """The value of the cell that holds each place of `points` (n, 2) in the CRS; NaN outside the grid."""
    column = np.floor((points[:, 0] - grid.west) / grid.cell_size).astype(int)
    row = np.floor((grid.north - points[:, 1]) / grid.cell_size).astype(int)
    inside = (column >= 0) & (column < grid.n_columns) & (row >= 0) & (row < grid.n_rows)
    found = np.full(len(points), np.nan)
    found[inside] = values[row[inside], column[inside]]
    return found


def sample_smoothly(grid: Grid, values: FloatArray, points: FloatArray) -> FloatArray:
    """Bilinear between the centres of the cells; NaN beside a blank cell and outside the grid."""
    row = (grid.north - points[:, 1]) / grid.cell_size - 0.5
    column = (points[:, 0] - grid.west) / grid.cell_size - 0.5
    # Half a cell at the edge has no neighbour beyond it: it takes the edge's own value.
    row = np.where((row > -0.5) & (row < grid.n_rows - 0.5), np.clip(row, 0, grid.n_rows - 1), -9.0)
    column = np.where((column > -0.5) & (column < grid.n_columns - 0.5), np.clip(column, 0, grid.n_columns - 1), -9.0)
    return map_coordinates(values, [row, column], order=1, cval=np.nan)


@attrs.frozen
class Stretch:
    """A piece of a column: depths of its top and bottom (m), the code of its unit, and how probable that is."""

    top: float
    bottom: float
    unit: str | None
    probability: float = 1.0


@attrs.frozen
class Place:
    """A sounding or a well near a section: how far along it (CRS units), its ground (m), and its stretches."""

    name: str
    kind: str
    along: float
    ground: float
    stretches: tuple[Stretch, ...]
    picks: tuple[float, ...]
    status: BedrockStatus | None = None  # of a sounding
    off: float = 0.0  # how far from the section, m


def places_near(results: Results, section: Any, within: float) -> list[Place]:
    """Soundings no farther than `within` from a line, and wells within WELL_REACH that stand beside it."""
    metres = results.region.crs_unit_metres
    columns = {column.sounding: column for column in results.interpretation.columns}
    models = {one.sounding: one for one in results.inverted}
    found = []
    for sounding in results.survey.soundings:
        point = shapely.Point(sounding.easting, sounding.northing)
        if sounding.name not in columns or section.distance(point) > within:
            continue
        column = columns[sounding.name]
        parts = column_stretches(column, models[sounding.name].model.top_depth, results.region.template.codes)
        level, picks = _ground_level(results, sounding), _pick_depths(column)
        along, status = section.project(point), column.bedrock_status
        found.append(Place(sounding.name, "sounding", along, level, parts, picks, status))
    for well in results.survey.wells:
        point = shapely.Point(well.easting, well.northing)
        along, off = section.project(point), section.distance(point)
        beside = 0.0 < along < section.length and off * metres <= WELL_REACH
        if off <= within or beside:
            readings = [one for one in results.interpretation.well_readings if one.well == well.name]
            logged = tuple(Stretch(one.top, one.bottom, one.unit) for one in readings)
            level = _ground_level(results, well)
            found.append(Place(well.name, "well", along, level, logged, (), off=off * metres))
    return sorted(found, key=lambda place: place.along)


def column_stretches(column: UnitColumn, top_depth: FloatArray, codes: Sequence[str]) -> tuple[Stretch, ...]:
    """A sounding's column by its most probable unit at each depth, down to its bound or the 90 % band of bedrock.

    Slices that agree, and in probability to a tenth, are one stretch. A column without a profile goes by its layers.
    """
    edges, shares = column.profile_depth, column.profile
    if edges.size:
        best, chance = np.argmax(shares, axis=1), np.max(shares, axis=1)
    else:
        edges = np.append(top_depth, 1.2 * top_depth[-1] + 2.0)
        best, chance = np.array([codes.index(code) for code in column.unit]), column.unit_probability
    bottom = _column_end(column, float(edges[-1]))
    alike = np.stack([best, np.round(10.0 * chance)])
    first = np.flatnonzero(np.any(np.diff(alike, axis=1, prepend=-1.0) != 0, axis=0))
    last = np.append(first[1:], best.size)
    pieces = zip(edges[first], np.minimum(edges[last], bottom), best[first], chance[first], strict=True)
    return tuple(
        Stretch(float(top), float(end), codes[unit], float(share)) for top, end, unit, share in pieces if end > top
    )


def _column_end(column: UnitColumn, deepest: float) -> float:
    """How deep a sounding's column is drawn (m): no deeper than it knows anything of."""
    if not np.isfinite(column.bedrock_depth):
        return deepest
    if column.bedrock_status == "deeper_than":
        return column.bedrock_depth
    return min(deepest, 1.05 * column.bedrock_depth + 1.645 * float(np.nan_to_num(column.bedrock_depth_error)))


def _pick_depths(column: UnitColumn) -> tuple[float, ...]:
    return tuple(pick.depth for pick in column.picks if pick.depth is not None)


def _ground_level(results: Results, place: Sounding | Well) -> float:
    """Elevation of the ground at a place (m): its own, else the grid's."""
    if np.isfinite(place.ground_elevation):
        return place.ground_elevation
    where = np.array([[place.easting, place.northing]])
    return float(sample_cells(results.stack.grid, results.stack.ground, where)[0])


def draw_section(results: Results, title: str, section: Any) -> Markup:
    """Ground, bedrock with its 90 % band and gravel on it along a line, with the places near it."""
    stack, region = results.stack, results.region
    metres, crs_metres = region.metres_per_length_unit, region.crs_unit_metres
    distance = np.linspace(0.0, section.length, SAMPLES)
    points = shapely.get_coordinates(shapely.line_interpolate_point(section, distance))
    ground = sample_smoothly(stack.grid, stack.ground, points) / metres
    rock = stack.surfaces.get("bedrock_elevation")
    if rock is None or not np.isfinite(ground).any():
        return Markup("")
    estimate = sample_smoothly(results.stack.grid, rock.estimate, points) / metres
    low = estimate if rock.p05 is None else sample_smoothly(results.stack.grid, rock.p05, points) / metres
    high = estimate if rock.p95 is None else sample_smoothly(results.stack.grid, rock.p95, points) / metres
    places = places_near(results, section, max(4 * stack.grid.cell_size, 0.012 * section.length))
    lowest = np.nanmin([np.nanmin(low, initial=np.inf), *(_foot(place) / metres for place in places)])
    highest = np.nanmax([*ground, *(place.ground / metres for place in places)])
    margin = 0.06 * (highest - lowest)
    far, far_unit = (1609.344, "mi") if region.length_unit != "m" else (1000.0, "km")
    x = distance * crs_metres / far
    frame = Frame(Scale(0.0, float(x[-1]), 66, WIDTH - 62), Scale(lowest - margin, highest + 2.5 * margin, 306, 74))
    bedrock_index = len(region.template.units) - 1
    parts = [
        frame.band(x, np.full_like(x, lowest - margin), estimate, "section-rock"),
        _gravel(results, frame, x, estimate, points),
        frame.axes(f"distance ({far_unit})", f"elevation ({unit_label(region.length_unit)})", x_ticks=8),
        frame.band(x, low, high, "band"),
        frame.line(x, estimate, "model"),
        frame.line(x, ground, "ground"),
        *(_section_place(results, frame, place, place.along * crs_metres / far) for place in places),
    ]
    shown = {unit: i for i, unit in enumerate(region.template.codes)}
    parts[0] = element("g", {"fill": f"url(#unit-{shown[region.template.units[bedrock_index].code]})"}, parts[0])
    vertical = abs(frame.y.end - frame.y.start) / ((frame.y.high - frame.y.low) * metres)
    horizontal = (frame.x.end - frame.x.start) / (section.length * crs_metres)
    parts.append(label(66, 14, f"{title}; heights drawn {vertical / horizontal:.0f} times larger than lengths", "axis"))
    return drawing(WIDTH, 344, title, *parts)


def _foot(place: Place) -> float:
    return place.ground - max((stretch.bottom for stretch in place.stretches), default=0.0)


def _gravel(results: Results, frame: Frame, x: FloatArray, rock: FloatArray, points: FloatArray) -> Markup:
    """Gravel on bedrock where it is likely."""
    thickness = results.stack.surfaces.get("deep_gravel_thickness")
    present = results.stack.surfaces.get("deep_gravel_probability")
    units = results.region.template.with_role(Role.DEEP_AQUIFER)
    if thickness is None or present is None or not units:
        return Markup("")
    likely = sample_smoothly(results.stack.grid, present.estimate, points) >= LIKELY
    top = rock + sample_smoothly(results.stack.grid, thickness.estimate, points) / results.region.metres_per_length_unit
    fill = f"url(#unit-{results.region.template.codes.index(units[0].code)})"
    return element("g", {"fill": fill}, frame.band(x, rock, np.where(likely, top, np.nan), "section-gravel"))


def _section_place(results: Results, frame: Frame, place: Place, at: float) -> Markup:
    metres, codes = results.region.metres_per_length_unit, results.region.template.codes
    x, half = float(frame.x.pixel(at)), 4.0 if place.kind == "sounding" else 2.5
    boxes = []
    for stretch in place.stretches:
        y = frame.y.pixel((place.ground - np.array([stretch.top, stretch.bottom])) / metres)
        fill = f"url(#unit-{codes.index(stretch.unit)})" if stretch.unit in codes else "none"
        faded = None if stretch.probability > 0.95 else f"{max(stretch.probability, 0.2) ** 1.5:.2f}"
        box = {"fill": fill, "fill-opacity": faded, "class": "piece"}
        boxes.append(rectangle(x - half, float(y[0]), 2 * half, float(y[1] - y[0]), box))
    boxes = _column_outline(frame, place, x, half, metres, boxes)
    for depth in place.picks:
        y_pick = float(frame.y.pixel((place.ground - depth) / metres))
        boxes.append(line(x - 8, y_pick, x + 8, y_pick, "pick"))
    top_pixel = float(frame.y.pixel(place.ground / metres))
    turned = {"transform": f"translate({x + 3:.1f} {top_pixel - 5:.1f}) rotate(-50)", "class": "halo small"}
    boxes.append(element("text", turned, _section_label(results, place)))
    return joined(boxes)


def _section_label(results: Results, place: Place) -> str:
    if place.kind == "sounding":
        return place.name[:16]
    far, name = (1000.0, "km") if results.region.length_unit == "m" else (1609.344, "mi")
    return f"{place.name[:16]} ({place.off / far:.1f} {name})"


def _column_outline(
    frame: Frame, place: Place, x: float, half: float, metres: float, pieces: list[Markup]
) -> list[Markup]:
    """Pieces on paper within an outline; at its foot an arrow: a bound; a diamond: base not distinct."""
    if not place.stretches:
        return pieces
    top, foot = (float(y) for y in frame.y.pixel(np.array([place.ground, _foot(place)]) / metres))
    paper = rectangle(x - half, top, 2 * half, foot - top, {"class": "paper"})
    outline = rectangle(x - half, top, 2 * half, foot - top, {"class": f"column {place.kind} {place.status or ''}"})
    marks = {
        "deeper_than": f"M{x:.1f} {foot:.1f}v10m-3.5 -4.5l3.5 4.5l3.5 -4.5",
        "not_distinct": f"M{x:.1f} {foot:.1f}l4 4l-4 4l-4 -4Z",
    }
    if place.status not in marks:
        return [paper, *pieces, outline]
    return [paper, *pieces, outline, element("path", {"d": marks[place.status], "class": f"foot {place.status}"})]


def draw_overview(results: Results) -> Markup:
    """The region from above: bedrock elevation faded by doubt, the valley's axis, sections, soundings and wells."""
    grid, region = results.stack.grid, results.region
    west, south, east, north = grid.bounds
    scale = min(640 / (east - west), 560 / (north - south))
    wide, high = (east - west) * scale, (north - south) * scale
    frame = Frame(Scale(west, east, 8, 8 + wide), Scale(south, north, 8 + high, 8))
    surface = results.stack.surfaces.get("bedrock_elevation")
    parts: list[Markup] = [rectangle(8, 8, wide, high, {"class": "frame nodata"})]
    if surface is not None:
        box = {"x": 8, "y": 8, "width": f"{wide:.1f}", "height": f"{high:.1f}"}
        parts.append(embedded_image(faded_colours(surface), box))
    if results.survey.boundary is not None:
        parts += [_line(frame, one, "boundary") for one in lines_of([results.survey.boundary])]
    axis = results.layers.get("valley_axis")
    for one in () if axis is None else lines_of(axis.geometry):
        parts += [_line(frame, one, "valley casing"), _line(frame, one, "valley")]
    for section in lay_sections(results):
        if section.kind != "along":
            end = section.line.coords[0]
            at = float(frame.x.pixel(end[0])), float(frame.y.pixel(end[1]))
            parts += [_line(frame, section.line, "cut"), label(*at, section.mark, "halo", "middle")]
    parts += _overview_places(results, frame)
    parts.append(draw_scale_bar(frame, region.crs_unit_metres, region.length_unit != "m"))
    if surface is not None:
        parts.append(_ramp_legend(results, 8 + wide + 24))
    title = f"{region.name}: bedrock elevation, soundings and wells"
    return drawing(int(wide + 170), int(max(high, 230) + 16), title, *parts)


def _line(frame: Frame, one: Any, style: str) -> Markup:
    x, y = np.asarray(one.coords)[:, :2].T
    return polyline(frame.x.pixel(x), frame.y.pixel(y), style)


def _overview_places(results: Results, frame: Frame) -> list[Markup]:
    status = {column.sounding: column.bedrock_status for column in results.interpretation.columns}
    marks = []
    for sounding in results.survey.soundings:
        x, y = float(frame.x.pixel(sounding.easting)), float(frame.y.pixel(sounding.northing))
        shape = status_mark(status.get(sounding.name, "not_distinct"), x, y)
        words = element("title", {}, sounding.name)
        marks.append(element("path", {"d": shape, "class": f"mark {status.get(sounding.name, '')}"}, words))
    for well in results.survey.wells:
        x, y = float(frame.x.pixel(well.easting)), float(frame.y.pixel(well.northing))
        cross = {"d": f"M{x - 4:.1f} {y - 4:.1f}h8v8h-8Z", "class": "mark well"}
        marks.append(element("path", cross, element("title", {}, f"well {well.name}")))
    return marks


def status_mark(status: str, x: float, y: float) -> str:
    """Circle: base seen; diamond: not distinct; triangle pointing down: deeper than."""
    return {
        "seen": f"M{x - 4:.1f} {y:.1f}a4 4 0 1 0 8 0a4 4 0 1 0 -8 0Z",
        "not_distinct": f"M{x:.1f} {y - 5:.1f}l5 5l-5 5l-5 -5Z",
        "deeper_than": f"M{x - 4.6:.1f} {y - 4:.1f}h9.2l-4.6 8.4Z",
    }[status]


def draw_scale_bar(frame: Frame, crs_metres: float, miles: bool) -> Markup:
    """A round length at the foot of a map's frame, and north at its top."""
    far, name = (1609.344, "mi") if miles else (1000.0, "km")
    length = even_ticks(0.0, (frame.x.high - frame.x.low) * crs_metres / far, 5)[1]
    pixels = length * far / crs_metres * (frame.x.end - frame.x.start) / (frame.x.high - frame.x.low)
    x, y = 20.0, frame.y.start - 14
    ends = path_data([x, x, x + pixels, x + pixels], [y - 5, y, y, y - 5])
    return joined(
        [
            element("path", {"d": ends, "class": "scale-bar"}),
            label(x + pixels / 2, y - 7, f"{tick_text(length)} {name}", "halo", "middle"),
            element("path", {"d": f"M{x + 6} 50l6 -24l6 24l-6 -6Z", "class": "north"}),
            label(x + 12, 22, "N", "halo", "middle"),
        ]
    )


def _ramp_legend(results: Results, x: float) -> Markup:
    surface = results.stack.surfaces["bedrock_elevation"]
    low, high = value_range(surface.estimate)
    metres = results.region.metres_per_length_unit
    bar = ramp_colours(QUANTITY_RAMPS[surface.quantity])[::-1, None, :]
    scale = Scale(low / metres, high / metres, 200, 34)
    box = {"x": f"{x:.1f}", "y": 34, "width": 16, "height": 166}
    return joined(
        [
            label(x, 20, f"bedrock elevation ({unit_label(results.region.length_unit)})", "axis"),
            embedded_image(bar, box),
            *(label(x + 22, float(scale.pixel(tick)) + 4, tick_text(tick), "tick") for tick in scale.ticks(6)),
            label(x, 222, "greyer: less sure", "tick"),
        ]
    )
