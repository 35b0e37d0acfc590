"""The report's figures of one place and of the statistics, as SVG."""

import attrs
import numpy as np

from geoves.delivery.markup import Markup, element, joined, unit_label
from geoves.delivery.svg import (
    Frame,
    Scale,
    drawing,
    even_ticks,
    label,
    line,
    logarithmic_range,
    path_data,
    polyline,
    rectangle,
    short,
    staircase,
)
from geoves.domain.earth import Inverted
from geoves.domain.grids import CrossValidation, Variogram
from geoves.domain.region import METRES, LengthUnit
from geoves.domain.survey import Curve, Sounding
from geoves.domain.tops import UnitColumn, WellReading
from geoves.domain.units import Template
from geoves.kernels.covariances import correlation


@attrs.frozen
class NearWell:
    """A well's readings, how far it stands from the sounding (m) and how deep it went (m)."""

    readings: tuple[WellReading, ...]
    distance: float
    total_depth: float


HEIGHT, TOP, BOTTOM = 300, 12, 262
FAN = 24  # models of the ensemble that are drawn: more would be one grey area


def draw_curve(sounding: Sounding, inverted: Inverted, unit: LengthUnit) -> Markup:
    """AB/2 against apparent resistivity: readings by segment with error bars, those set aside hollow, and the fit."""
    curve, metres = sounding.curve, METRES[unit]
    spacing, rho = curve.half_spacing / metres, curve.apparent_resistivity
    drawable = (spacing > 0) & (rho > 0) & np.isfinite(spacing) & np.isfinite(rho)
    frame = Frame(
        Scale(*logarithmic_range(spacing[drawable], 1.3), 52, 330, logarithmic=True),
        Scale(
            *logarithmic_range(np.concatenate([rho[drawable], inverted.predicted]), 1.3), BOTTOM, TOP, logarithmic=True
        ),
    )
    parts = [frame.axes(f"AB/2 ({unit_label(unit)})", "apparent resistivity (Ω m)")]
    for segment in np.unique(curve.segment):
        of_segment = curve.segment == segment
        factor = inverted.segment_factor[segment] if segment < inverted.segment_factor.size else 1.0
        parts.append(frame.line(spacing[of_segment], factor * inverted.predicted[of_segment], "fit"))
    parts += [_reading(frame, curve, inverted, int(i), metres) for i in np.flatnonzero(drawable)]
    title = (
        f"Sounding curve of {sounding.name}: apparent resistivity against AB/2, {int(curve.used.sum())} readings used"
    )
    return drawing(340, HEIGHT, title, *parts)


def _reading(frame: Frame, curve: Curve, inverted: Inverted, i: int, metres: float) -> Markup:
    x = float(frame.x.pixel(curve.half_spacing[i] / metres))
    rho, error = curve.apparent_resistivity[i], curve.relative_error[i]
    y = float(frame.y.pixel(rho))
    aside = not curve.used[i] or inverted.robust_weight[i] < 0.5
    style = f"reading segment-{int(curve.segment[i]) % 4}{' aside' if aside else ''}"
    bar = ""
    if np.isfinite(error):
        low, high = frame.y.pixel([rho * np.exp(-error), rho * np.exp(error)])
        bar = line(x, float(low), x, float(high), "error-bar")
    words = f"AB/2 {short(curve.half_spacing[i] / metres)}, {rho:.4g} Ω m"
    if not curve.used[i]:
        words += f"; not used: {curve.reason[i] if i < len(curve.reason) else ''}"
    elif aside:
        words += "; set aside by the robust fit"
    mark = {"d": _segment_mark(int(curve.segment[i]), x, y), "class": style}
    return joined([bar, element("path", mark, element("title", {}, words))])


def _segment_mark(segment: int, x: float, y: float) -> str:
    """Circle, square, triangle, diamond: one for each segment in turn."""
    return (
        f"M{x - 3.6:.1f} {y:.1f}a3.6 3.6 0 1 0 7.2 0a3.6 3.6 0 1 0 -7.2 0Z",
        f"M{x - 3.3:.1f} {y - 3.3:.1f}h6.6v6.6h-6.6Z",
        f"M{x:.1f} {y - 4.4:.1f}l4.2 7.2h-8.4Z",
        f"M{x:.1f} {y - 4.6:.1f}l4.6 4.6l-4.6 4.6l-4.6 -4.6Z",
    )[segment % 4]


def depth_shown(inverted: Inverted) -> float:
    """How deep the drawings of a place reach (m): past its lowest interface, and no deeper than makes sense."""
    lowest = float(inverted.model.top_depth[-1])
    return float(max(1.35 * lowest, min(inverted.investigated_depth, 2.0 * lowest), 10.0))


def draw_models(sounding: Sounding, inverted: Inverted, template: Template, unit: LengthUnit) -> Markup:
    """Resistivity against depth: models that fit as a fan, the chosen one bold, the template's ranges as tints."""
    metres, deepest = METRES[unit], depth_shown(inverted)
    ensemble, model = inverted.ensemble, inverted.model
    chosen = np.linspace(0, len(ensemble.resistivity) - 1, min(FAN, len(ensemble.resistivity))).astype(int)
    ranges = [value for u in template.units for value in (u.resistivity_p05, u.resistivity_p95)]
    low, high = logarithmic_range([*ranges, *model.resistivity], 1.4)
    frame = Frame(Scale(low, high, 52, 290, logarithmic=True), Scale(0.0, deepest / metres, TOP + 26, BOTTOM))
    parts = [_template_tints(frame, template), frame.axes("resistivity (Ω m)", f"depth ({unit_label(unit)})")]
    fan = []
    for thickness, resistivity in zip(ensemble.thickness[chosen], ensemble.resistivity[chosen], strict=True):
        x, depth = staircase(np.append(0.0, np.cumsum(thickness)), resistivity, deepest)
        fan.append(path_data(frame.x.pixel(x), frame.y.pixel(depth / metres)))
    parts.append(element("path", {"d": "".join(fan), "class": "fan"}))
    x, depth = staircase(model.top_depth, model.resistivity, deepest)
    parts.append(polyline(frame.x.pixel(x), frame.y.pixel(depth / metres), "model"))
    if inverted.investigated_depth < deepest:
        at = float(frame.y.pixel(inverted.investigated_depth / metres))
        parts += [line(52, at, 290, at, "limit"), label(287, at - 4, "the curve reaches to here", "note", "end")]
    title = f"Layered model of {sounding.name}: {model.resistivity.size} layers, with {len(chosen)} that fit as well"
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
    column: UnitColumn, inverted: Inverted, template: Template, unit: LengthUnit, log: NearWell | None
) -> Markup:
    """Each unit's probability against depth, stacked to one, with the nearest well's log and the picks."""
    metres, deepest = METRES[unit], depth_shown(inverted)
    down = Scale(0.0, deepest / metres, TOP + 26, BOTTOM)
    frame = Frame(Scale(0.0, 1.0, 40, 140), down)
    parts = [frame.axes("probability", "", x_ticks=2)]
    tops = np.minimum(np.append(inverted.model.top_depth, np.inf), deepest)
    for layer, shares in enumerate(column.probability):
        parts.append(
            _stacked_layer(frame, shares / max(shares.sum(), 1e-9), tops[layer : layer + 2] / metres, template)
        )
    parts += [_bedrock_mark(frame, column, metres)]
    for pick in column.picks:
        if pick.depth is not None and pick.depth <= deepest:
            at = float(down.pixel(pick.depth / metres))
            parts += [line(34, at, 146, at, "pick"), label(90, at - 4, f"pick: {pick.unit}", "halo", "middle")]
    if log is not None:
        parts.append(_well_log(down, log, template, unit, deepest))
    width = 156 if log is None else 262
    return drawing(width, HEIGHT, f"Units under {column.sounding} by probability", *parts)


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
        return element("path", {"d": arrow, "class": "bound"}, element("title", {}, "bedrock is deeper than this"))
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


def draw_variogram(variogram: Variogram, crs_unit: str) -> Markup:
    """Experimental semivariance with the number of pairs at each lag, and the fitted model along and across."""
    lag, semivariance = variogram.lag, variogram.semivariance
    known = np.isfinite(lag) & np.isfinite(semivariance)
    sill = variogram.nugget + variogram.partial_sill
    highest = 1.15 * max([sill, *semivariance[known]], default=1.0) or 1.0
    furthest = 1.05 * max([*lag[known], 0.5 * variogram.length], default=1.0) or 1.0
    frame = Frame(Scale(0.0, furthest, 66, 400), Scale(0.0, highest, BOTTOM, TOP))
    power = f"({variogram.unit})²" if " " in variogram.unit else f"{variogram.unit}²"
    parts = [frame.axes(f"distance ({crs_unit})", f"semivariance ({power})")]
    distances = np.linspace(0.0, furthest, 80)
    for ratio, style in ((1.0, "fit"), (variogram.ratio, "fit across")):
        length = max(variogram.length * ratio, 1e-9)
        parts.append(frame.line(distances, modelled_semivariance(variogram, distances / length), style))
    for at, value, pairs in zip(lag[known], semivariance[known], variogram.pairs[known], strict=True):
        x, y = float(frame.x.pixel(at)), float(frame.y.pixel(value))
        parts += [
            element("circle", {"cx": f"{x:.1f}", "cy": f"{y:.1f}", "r": 3.5, "class": "reading segment-0"}),
            label(x, y - 7, str(int(pairs)), "tick", "middle"),
        ]
    return drawing(420, HEIGHT, f"Variogram of {variogram.title}", *parts)


def modelled_semivariance(variogram: Variogram, share: np.ndarray) -> np.ndarray:
    """The fitted model at distances given as shares of its practical length; 0 at no distance."""
    grown = variogram.partial_sill * (1.0 - correlation(share, variogram.model))
    return np.where(share > 0, variogram.nugget, 0.0) + grown


def draw_cross_validation(crossed: CrossValidation) -> Markup:
    """Measured against predicted where each place was left out, with the band that was promised; the worst by name."""
    measured, predicted, error = crossed.measured, crossed.predicted, 1.645 * crossed.standard_error
    ends = np.concatenate([measured, predicted])
    ends = ends[np.isfinite(ends)]
    span = max(float(np.ptp(ends)), 1e-6)
    low, high = float(ends.min()) - 0.08 * span, float(ends.max()) + 0.08 * span
    frame = Frame(Scale(low, high, 66, 400), Scale(low, high, BOTTOM, TOP))
    unit = f" ({crossed.unit})" if crossed.unit else ""
    parts = [
        frame.axes(f"predicted without it{unit}", f"measured{unit}"),
        frame.line([low, high], [low, high], "equal"),
    ]
    x, y = frame.x.pixel(predicted), frame.y.pixel(measured)
    left, right = frame.x.pixel(predicted - error), frame.x.pixel(predicted + error)
    worst = largest_misfits(crossed, 4)
    for i, place in enumerate(crossed.place):
        if not (np.isfinite(x[i]) and np.isfinite(y[i])):
            continue
        words = element("title", {}, f"{place}: measured {measured[i]:.1f}, predicted {predicted[i]:.1f}{unit}")
        mark = {"d": _segment_mark(0 if crossed.kind[i] == "sounding" else 1, x[i], y[i]), "class": "reading segment-0"}
        if np.isfinite(left[i]) and np.isfinite(right[i]):
            parts.append(line(float(left[i]), float(y[i]), float(right[i]), float(y[i]), "error-bar"))
        parts.append(element("path", mark, words))
        if i in worst:
            parts.append(label(x[i] + 6, y[i] - 5, place[:18], "halo small"))
    return drawing(420, HEIGHT, f"Left out in turn: {crossed.title}", *parts)


def largest_misfits(crossed: CrossValidation, wanted: int) -> list[int]:
    """Indices of the places that were predicted worst, the worst first."""
    misfit = np.nan_to_num(np.abs(crossed.measured - crossed.predicted), nan=-1.0)
    return [int(i) for i in np.argsort(-misfit, kind="stable")[:wanted] if misfit[i] >= 0]


def scale_bar_length(width: float) -> float:
    """A round length that is about a quarter of `width`."""
    return max(even_ticks(0.0, width, 4)[1], 1e-9)
