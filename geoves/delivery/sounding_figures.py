"""The three drawings of a sounding's strip, as SVG: its curve, its models, and what the ground may be."""

from collections.abc import Mapping

import attrs
import numpy as np

from geoves.delivery.markup import Markup, element, joined, unit_label
from geoves.delivery.sentences import readings_aside
from geoves.delivery.svg import (
    Frame,
    Scale,
    drawing,
    label,
    line,
    logarithmic_range,
    mark_path,
    path_data,
    polyline,
    rectangle,
    short,
    staircase,
)
from geoves.domain.arrays import FloatArray
from geoves.domain.earth import Inverted
from geoves.domain.region import METRES, LengthUnit
from geoves.domain.survey import Curve, Sounding
from geoves.domain.tops import UnitColumn, WellReading
from geoves.domain.units import Template
from geoves.kernels import layered_earth


@attrs.frozen
class NearWell:
    """A well's readings, how far it stands from the sounding (m) and how deep it went (m)."""

    readings: tuple[WellReading, ...]
    distance: float
    total_depth: float


HEIGHT, TOP, BOTTOM = 300, 12, 262
FAN = 25  # models of the ensemble that are drawn: more would be one grey area
LEFT, RIGHT = 40, 140  # the box of the probabilities, in pixels
PALEST = 0.004  # a share of a stack below this is not drawn


def pick_members(inverted: Inverted, wanted: int = FAN) -> np.ndarray:
    """Indices of some of the models that fit, spread over the ensemble."""
    count = len(inverted.ensemble.resistivity)
    return np.linspace(0, count - 1, min(wanted, count)).astype(int)


def segment_factors(curve: Curve, inverted: Inverted) -> FloatArray:
    """The factor (n,) that the fit puts on each reading: segments are counted over those with a used reading."""
    fitted = np.unique(curve.segment[curve.used])
    if not fitted.size:
        return np.ones(curve.segment.size)
    number = np.clip(np.searchsorted(fitted, curve.segment, side="right") - 1, 0, inverted.segment_factor.size - 1)
    return np.asarray(inverted.segment_factor[number])


def respond(curve: Curve, inverted: Inverted, members: np.ndarray) -> FloatArray:
    """Apparent resistivity (ohm m) of members of the ensemble at each reading, with the segments' factors, (m, n).

    NaN for what cannot be a layout, which a table may hold where it is told not to use it.
    """
    with np.errstate(invalid="ignore"):
        laid = np.isfinite(curve.half_spacing) & (curve.half_spacing > curve.potential_half_spacing)
        laid &= curve.potential_half_spacing >= 0
    responses = np.full((members.size, laid.size), np.nan)
    if not laid.any():
        return responses
    a, b = curve.half_spacing[laid], curve.potential_half_spacing[laid]
    wavenumber = layered_earth.shared_wavenumbers([(a, b)])
    weights = layered_earth.response_weights(a, b, wavenumber)
    thickness, resistivity = inverted.ensemble.thickness[members], inverted.ensemble.resistivity[members]
    responses[:, laid] = layered_earth.response(weights, wavenumber, thickness, resistivity)
    return responses * segment_factors(curve, inverted)


def draw_curve(
    sounding: Sounding, inverted: Inverted, unit: LengthUnit, doubted: Mapping[int, str] | None = None
) -> Markup:
    """AB/2 against apparent resistivity: readings by segment with error bars, the fit, curves that fit as well.

    doubted : the checks that doubt a reading, by its row in the table; such a reading is hollow as those set aside are
    """
    doubted = doubted or {}
    curve, metres = sounding.curve, METRES[unit]
    spacing, rho = curve.half_spacing / metres, curve.apparent_resistivity
    with np.errstate(invalid="ignore"):
        drawable = np.isfinite(spacing) & np.isfinite(rho) & (spacing > 0) & (rho > 0)
    fitted = segment_factors(curve, inverted) * inverted.predicted
    frame = Frame(
        Scale(*logarithmic_range(spacing[drawable], 1.3), 52, 330, logarithmic=True),
        Scale(*logarithmic_range(np.concatenate([rho[drawable], fitted]), 1.3), BOTTOM, TOP, logarithmic=True),
    )
    parts = [frame.axes(f"AB/2 ({unit_label(unit)})", "apparent resistivity (Ω m)")]
    parts.append(_curve_fan(frame, sounding, inverted, metres))
    for segment in np.unique(curve.segment):
        of_segment = curve.segment == segment
        parts.append(frame.line(spacing[of_segment], fitted[of_segment], "fit"))
    aside = readings_aside(curve, inverted)
    doubts = [doubted.get(int(row), "") for row in curve.row] or [""] * aside.size
    parts += [
        _reading(frame, curve, int(i), metres, aside=bool(aside[i]), doubt=doubts[i]) for i in np.flatnonzero(drawable)
    ]
    title = (
        f"Sounding curve of {sounding.name}: apparent resistivity against AB/2, {int(curve.used.sum())} readings used"
    )
    return drawing(340, HEIGHT, title, *parts)


def _curve_fan(frame: Frame, sounding: Sounding, inverted: Inverted, metres: float) -> Markup:
    """Curves of some models that fit, one path for all: models that the readings cannot tell apart."""
    curve = sounding.curve
    x = frame.x.pixel(curve.half_spacing / metres)
    curves = frame.y.pixel(respond(curve, inverted, pick_members(inverted)))
    runs = [np.flatnonzero(curve.segment == segment) for segment in np.unique(curve.segment)]
    data = "".join(path_data(x[run], one[run]) for one in curves for run in runs if run.size > 1)
    return element("path", {"d": data, "class": "fan"})


def _reading(frame: Frame, curve: Curve, i: int, metres: float, *, aside: bool, doubt: str) -> Markup:
    x = float(frame.x.pixel(curve.half_spacing[i] / metres))
    rho, error = curve.apparent_resistivity[i], curve.relative_error[i]
    y = float(frame.y.pixel(rho))
    style = f"reading segment-{int(curve.segment[i]) % 4}{' aside' if aside or doubt else ''}"
    bar = ""
    if np.isfinite(error):
        low, high = frame.y.pixel([rho * np.exp(-error), rho * np.exp(error)])
        bar = line(x, float(low), x, float(high), "error-bar")
    words = f"AB/2 {short(curve.half_spacing[i] / metres)}, {rho:.4g} Ω m"
    if not curve.used[i]:
        words += f"; not used: {curve.reason[i] if i < len(curve.reason) else ''}"
    elif aside:
        words += "; set aside by the robust fit"
    if doubt:
        words += f"; doubted: {doubt}"
    mark = {"d": mark_path(int(curve.segment[i]), x, y), "class": style}
    return joined([bar, element("path", mark, element("title", {}, words))])


def depth_shown(inverted: Inverted, column: UnitColumn) -> float:
    """How deep the drawings of a place reach (m): past its lowest interface and its column of probabilities."""
    lowest = 1.15 * float(inverted.model.top_depth[-1])
    if column.profile_depth.size:
        return float(max(lowest, column.profile_depth[-1]))
    return float(max(lowest, min(inverted.investigated_depth, 2.0 * lowest), 10.0))


def draw_models(sounding: Sounding, inverted: Inverted, template: Template, unit: LengthUnit, deepest: float) -> Markup:
    """Resistivity against depth down to `deepest` m: models that fit as a fan, the chosen one bold, the smooth one.

    The template's ranges stand above the plot as bars and in it as tints.
    """
    metres = METRES[unit]
    ensemble, model = inverted.ensemble, inverted.model
    members = pick_members(inverted)
    ranges = [value for u in template.units for value in (u.resistivity_p05, u.resistivity_p95)]
    low, high = logarithmic_range([*ranges, *model.resistivity], 1.4)
    frame = Frame(Scale(low, high, 52, 290, logarithmic=True), Scale(0.0, deepest / metres, TOP + 26, BOTTOM))
    parts = [_template_tints(frame, template), frame.axes("resistivity (Ω m)", f"depth ({unit_label(unit)})")]

    def stairs(top_depth: FloatArray, resistivity: FloatArray) -> tuple[FloatArray, FloatArray]:
        x, depth = staircase(top_depth, resistivity, deepest)
        return frame.x.pixel(x), frame.y.pixel(depth / metres)

    tops = ensemble.top_depth[members]
    fan = [path_data(*stairs(top, rho)) for top, rho in zip(tops, ensemble.resistivity[members], strict=True)]
    parts.append(element("path", {"d": "".join(fan), "class": "fan"}))
    if inverted.smooth is not None:
        parts.append(polyline(*stairs(inverted.smooth.top_depth, inverted.smooth.resistivity), "smooth"))
    parts.append(polyline(*stairs(model.top_depth, model.resistivity), "model"))
    if inverted.investigated_depth < deepest:
        at = float(frame.y.pixel(inverted.investigated_depth / metres))
        parts += [line(52, at, 290, at, "limit"), label(287, at - 4, "what lies below goes unnoticed", "note", "end")]
    title = f"Layered model of {sounding.name}: {model.resistivity.size} layers, with {len(members)} that fit as well"
    return drawing(300, HEIGHT, title, *parts)


def _template_tints(frame: Frame, template: Template) -> Markup:
    """Each unit's resistivity range as a bar over the plot: one lane a unit, so that overlaps show."""
    lane = 24.0 / len(template.units)
    bars = []
    for index, unit in enumerate(template.units):
        left, right = frame.x.pixel([unit.resistivity_p05, unit.resistivity_p95])
        box = {"fill": f"url(#unit-{index})", "class": "swatch"}
        bar = rectangle(float(left), TOP + index * lane, float(right - left), lane - 0.8, box)
        tint = {"fill": f"url(#unit-{index})", "class": "tint"}
        bars += [bar, rectangle(float(left), frame.y.start, float(right - left), BOTTOM - frame.y.start, tint)]
    return joined(bars)


def draw_columns(
    column: UnitColumn, inverted: Inverted, template: Template, unit: LengthUnit, log: NearWell | None, deepest: float
) -> Markup:
    """Each unit's probability against depth down to `deepest` m, stacked to one; the nearest well's log, the picks."""
    metres = METRES[unit]
    down = Scale(0.0, deepest / metres, TOP + 26, BOTTOM)
    frame = Frame(Scale(0.0, 1.0, LEFT, RIGHT), down)
    parts = [frame.axes("probability", "", x_ticks=2)]
    if column.profile_depth.size:
        parts += _stacked_profile(frame, column, template, metres, deepest)
    else:
        tops = np.minimum(np.append(inverted.model.top_depth, np.inf), deepest)
        for layer, shares in enumerate(column.probability):
            even = shares / max(shares.sum(), 1e-9)
            parts.append(_stacked_layer(frame, even, tops[layer : layer + 2] / metres, template))
    parts.append(_bedrock_mark(frame, column, metres))
    for pick in column.picks:
        if pick.depth is not None and pick.depth <= deepest:
            at = float(down.pixel(pick.depth / metres))
            parts += [line(34, at, 146, at, "pick"), label(90, at - 4, f"pick: {pick.unit}"[:24], "halo", "middle")]
    if log is not None:
        parts.append(_well_log(down, log, template, unit, deepest))
    width = 170 if log is None else 262
    return drawing(width, HEIGHT, f"Units under {column.sounding} by probability", *parts)


def _stacked_profile(
    frame: Frame, column: UnitColumn, template: Template, metres: float, deepest: float
) -> list[Markup]:
    """The profile as bands that run into each other, each named where it is broadest; empty below what is known."""
    edges, shares = column.profile_depth, column.profile / np.maximum(column.profile.sum(axis=1, keepdims=True), 1e-9)
    middle = 0.5 * (edges[1:] + edges[:-1])
    # Nothing is said below a bound's profile; below a contact that was found lies what lies at its end.
    ends = float(edges[-1]) if column.bedrock_status == "deeper_than" else deepest
    depth = np.concatenate([[0.0], middle, [ends]])
    shares = np.vstack([shares[:1], shares, shares[-1:]])
    y = frame.y.pixel(depth / metres)
    x = frame.x.pixel(np.hstack([np.zeros((len(shares), 1)), np.cumsum(shares, axis=1)]))
    bands, names = [], []
    for i, unit in enumerate(template.units):
        if shares[:, i].max() <= PALEST:
            continue
        outline = [*_bends(x[:, i + 1], y), *_bends(x[:, i], y)[::-1]]
        bands.append(element("path", {"d": path_data(*zip(*outline, strict=True)) + "Z", "fill": f"url(#unit-{i})"}))
        best = np.flatnonzero(np.argmax(shares, axis=1) == i)
        if best.size and y[best[-1]] - y[best[0]] > 13:
            name = unit.name if len(unit.name) < 18 else unit.name[:16] + "…"
            names.append(label(90, (y[best[0]] + y[best[-1]]) / 2 + 4, name, "halo", "middle"))
    bands.append(_above_water(frame, column, template, metres))
    if ends < deepest:
        at = float(frame.y.pixel(0.5 * (ends + deepest) / metres))
        names.append(label(90, at + 4, "not known", "note", "middle"))
    return [*bands, *names]


def _above_water(frame: Frame, column: UnitColumn, template: Template, metres: float) -> Markup:
    """Steps over the coarse units' bands: how probable drained ground, above the water level, is at each depth."""
    if not column.above_water.size or column.above_water.max() <= PALEST:
        return Markup("")
    first = next(i for i, unit in enumerate(template.units) if unit.is_coarse)
    shares = column.profile / np.maximum(column.profile.sum(axis=1, keepdims=True), 1e-9)
    left = shares[:, :first].sum(axis=1)
    # Under a pick the bands are the decided ones: drained ground is drawn no wider than they are.
    coarse = [i for i, unit in enumerate(template.units) if unit.is_coarse]
    drained = np.minimum(column.above_water, shares[:, coarse].sum(axis=1))
    edges = frame.y.pixel(column.profile_depth / metres)
    boxes = [
        rectangle(float(x), float(a), float(b - x), float(c - a), {"class": "above-water"})
        for x, b, a, c, share in zip(
            frame.x.pixel(left), frame.x.pixel(left + drained), edges[:-1], edges[1:], drained, strict=True
        )
        if share > PALEST
    ]
    return element("g", {}, element("title", {}, "above the water level: drained"), *boxes)


def _bends(x: FloatArray, y: FloatArray) -> list[tuple[float, float]]:
    """The points of a line less those that a straight line between their neighbours meets within a third of a pixel."""
    kept = [0]
    for i in range(1, len(x) - 1):
        start = kept[-1]
        share = (y[start + 1 : i + 1] - y[start]) / max(y[i + 1] - y[start], 1e-9)
        straight = x[start] + share * (x[i + 1] - x[start])
        if np.abs(straight - x[start + 1 : i + 1]).max() > 0.33:
            kept.append(i)
    return [(float(x[i]), float(y[i])) for i in [*kept, len(x) - 1]]


def _stacked_layer(frame: Frame, shares: np.ndarray, depths: np.ndarray, template: Template) -> Markup:
    top, bottom = (float(y) for y in frame.y.pixel(depths))
    edges = frame.x.pixel(np.append(0.0, np.cumsum(shares)))
    boxes = [
        rectangle(float(edges[i]), top, float(edges[i + 1] - edges[i]), bottom - top, {"fill": f"url(#unit-{i})"})
        for i in np.flatnonzero(shares > 0.004)
    ]
    best = int(np.argmax(shares))
    if bottom - top > 13:
        name = template.units[best].name
        # In the middle of the whole layer: that of a narrow share would push the name out of the drawing.
        boxes.append(label(90, (top + bottom) / 2 + 4, name if len(name) < 18 else name[:16] + "…", "halo", "middle"))
    return joined([*boxes, line(40, top, 140, top, "contact")])


def _bedrock_mark(frame: Frame, column: UnitColumn, metres: float) -> Markup:
    """A bracket at the right as long as the 90 % band of the depth to bedrock; an arrow down where it is a bound."""
    if not np.isfinite(column.bedrock_depth):
        return Markup("")
    if column.bedrock_status == "deeper_than":
        at = float(frame.y.pixel(column.bedrock_depth / metres))
        arrow = f"M148 {at:.1f}v14m-4 -5l4 5l4 -5"
        return element("path", {"d": arrow, "class": "bound"}, element("title", {}, "the base is deeper than this"))
    band = 1.645 * np.nan_to_num(column.bedrock_depth_error)
    top, at, bottom = frame.y.pixel((column.bedrock_depth + np.array([-band, 0.0, band])) / metres)
    bracket = f"M143 {top:.1f}h5V{bottom:.1f}h-5M143 {at:.1f}h9"
    return element("path", {"d": bracket, "class": "bound"}, element("title", {}, "bedrock, with its 90 % band"))


def _well_log(down: Scale, log: NearWell, template: Template, unit: LengthUnit, deepest: float) -> Markup:
    metres, codes = METRES[unit], list(template.codes)
    distance = f"{log.distance / 1000:.1f} km away" if unit == "m" else f"{log.distance / 1609.344:.1f} mi away"
    parts = [
        label(205, TOP + 8, f"well {log.readings[0].well}"[:22], "axis", "middle"),
        label(205, TOP + 20, distance, "tick", "middle"),
    ]
    for reading in log.readings:
        if reading.top >= deepest:
            continue
        top, bottom = (float(y) for y in down.pixel([reading.top / metres, min(reading.bottom, deepest) / metres]))
        fill = f"url(#unit-{codes.index(reading.unit)})" if reading.unit in codes else "none"
        words = element("title", {}, f"{reading.description} ({reading.unit or 'no unit claims these words'})")
        box = {"x": 165, "y": f"{top:.1f}", "width": 80, "height": f"{max(bottom - top, 0.5):.1f}", "fill": fill}
        parts.append(element("rect", {**box, "class": "interval"}, words))
        if bottom - top > 13:
            shown = reading.description if len(reading.description) < 17 else reading.description[:15] + "…"
            parts.append(label(205, (top + bottom) / 2 + 4, shown, "halo", "middle"))
    if log.total_depth <= deepest:
        at = float(down.pixel(log.total_depth / metres))
        parts.append(label(205, min(at + 13, BOTTOM + 12), "end of hole", "tick", "middle"))
    return joined(parts)
