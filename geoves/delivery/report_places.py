"""The report's strips, one for each sounding."""

from collections.abc import Iterator, Mapping

import attrs
import numpy as np

from geoves.delivery.joint_figures import draw_three
from geoves.delivery.joint_words import gather_joint, hear_curve, name_voice, tell_joint, tell_state
from geoves.delivery.layer_ranges import find_layer_ranges
from geoves.delivery.markup import Markup, element, format_length, place_name, table, unit_label
from geoves.delivery.sentences import (
    STATUS_WORDS,
    doubted_rows,
    tell_beside,
    tell_doubt,
    tell_opinion,
    tell_readings_aside,
    tell_sounding,
    tell_trade_offs,
    tell_water_level,
)
from geoves.delivery.sounding_figures import NearWell, depth_shown, draw_columns, draw_curve, draw_models
from geoves.domain.arrays import FloatArray
from geoves.domain.earth import Inverted
from geoves.domain.fields import JointColumn
from geoves.domain.region import METRES, LengthUnit
from geoves.domain.results import Results
from geoves.domain.survey import Sounding
from geoves.domain.tops import UnitColumn
from geoves.domain.units import Template

NEAR_WELL = 3000.0  # m: a log farther away would suggest a likeness that nothing supports


@attrs.frozen
class StripJob:
    """All that one sounding's strip is drawn from."""

    number: int
    sounding: Sounding
    inverted: Inverted | None
    column: UnitColumn | None
    near_well: NearWell | None
    unit: LengthUnit
    doubted: Mapping[int, str] = attrs.field(factory=dict)  # checks that doubt a reading, by its row
    joint: JointColumn | None = None  # what one geology says of this place


def gather_strips(results: Results) -> Iterator[StripJob]:
    models = {one.sounding: one for one in results.inverted}
    columns = {one.sounding: one for one in results.interpretation.columns}
    joint = gather_joint(results)
    doubted: dict[str, dict[int, str]] = {}
    for (place, row), checks in doubted_rows(results).items():
        doubted.setdefault(place, {})[row] = checks
    for number, sounding in enumerate(results.survey.soundings):
        near, unit, name = nearest_logged_well(results, sounding), results.region.length_unit, sounding.name
        yield StripJob(
            number, sounding, models.get(name), columns.get(name), near, unit, doubted.get(name, {}), joint.get(name)
        )


def nearest_logged_well(results: Results, sounding: Sounding) -> NearWell | None:
    """The nearest well with a log within NEAR_WELL, None where there is none."""
    crs_metres, nearest = results.region.crs_unit_metres, None
    for well in results.survey.wells:
        distance = crs_metres * np.hypot(well.easting - sounding.easting, well.northing - sounding.northing)
        if well.intervals and distance <= NEAR_WELL and (nearest is None or distance < nearest[0]):
            nearest = (float(distance), well)
    if nearest is None:
        return None
    readings = tuple(one for one in results.interpretation.well_readings if one.well == nearest[1].name)
    return NearWell(readings, nearest[0], nearest[1].total_depth) if readings else None


def draw_strip(job: StripJob, *, template: Template) -> str:
    """One sounding's strip: curve, models, columns, the sentence, what was set aside and what to know."""
    sounding, unit = job.sounding, job.unit
    heading = element("h3", {}, place_name(sounding.name))
    if job.inverted is None or job.column is None:
        body = element("p", {"class": "sentence"}, "No model was made of this sounding.")
        return element("article", {"class": "strip", "id": f"sounding-{job.number}"}, heading, body)
    deepest = depth_shown(job.inverted, job.column)
    drawings = element(
        "div",
        {"class": "drawings"},
        draw_curve(sounding, job.inverted, unit, job.doubted),
        draw_models(sounding, job.inverted, template, unit, deepest),
        draw_columns(job.column, job.inverted, template, unit, job.near_well, deepest),
    )
    notes = _strip_notes(job, job.inverted, job.column)
    voice = name_voice(job.column, job.joint)
    sentence = element("p", {"class": "sentence"}, voice + tell_sounding(job.column, template, unit))
    doubts = [tell_trade_offs(job.inverted), *tell_doubt(job.column, template, unit)]
    doubt = element("p", {}, " ".join(words for words in doubts if words))
    facts = element("p", {"class": "under"}, _strip_facts(job, job.inverted, job.column))
    layers = _layer_table(job.inverted, job.column, template, unit)
    parts = (heading, facts, sentence, doubt, drawings, _joint_part(job, job.column, template), layers, notes)
    return element("article", {"class": "strip", "id": f"sounding-{job.number}"}, *parts)


def _joint_part(job: StripJob, column: UnitColumn, template: Template) -> Markup:
    """The basal contact alone, by all others and together, drawn and in words; nothing without one geology."""
    joint, unit = job.joint, job.unit
    if joint is None:
        return Markup("")
    words = element("p", {"class": "together"}, " ".join(tell_joint(column, joint, template, unit)))
    warning = tell_state(joint)
    flag = element("p", {"class": "flag"}, warning) if warning else ""
    return element("div", {"class": "three"}, flag, draw_three(hear_curve(column), joint, unit), words)


def _layer_table(inverted: Inverted, column: UnitColumn, template: Template, unit: LengthUnit) -> Markup:
    """Each layer of the chosen model: its most probable unit, and what the models that fit allow, 5 to 95 %."""
    ranges, metres = find_layer_ranges(inverted), METRES[unit]
    names = {one.code: one.name for one in template.units}
    rows = [
        (
            str(layer + 1),
            f"{names[column.unit[layer]]} ({column.unit_probability[layer]:.2f})",
            _span(ranges.top_depth[:, layer] / metres) if layer else "0",
            _span(ranges.thickness[:, layer] / metres),
            _span(ranges.resistivity[:, layer]),
            _span(ranges.conductance[:, layer]),
            _span(ranges.transverse_resistance[:, layer]),
        )
        for layer in range(inverted.n_layers)
    ]
    length = unit_label(unit)
    top, thick = f"top ({length})", f"thickness ({length})"
    headings = (
        "layer",
        "most like",
        top,
        thick,
        "resistivity (Ω m)",
        "conductance S (siemens)",
        "transverse resistance T (Ω m²)",
    )
    return table(headings, rows, "Layers: what the models that fit allow, 5 to 95 %")


def _span(ends: FloatArray) -> str:
    """A range, or its one number where both ends read the same; an en dash where there is none."""
    if not np.isfinite(ends).all():
        return "–"
    low, high = (few_figures(float(end)) for end in ends)
    return low if low == high else f"{low} to {high}"


def few_figures(value: float) -> str:
    """Two figures, three from 100 on: a range is known no better.

    >>> few_figures(0.01234), few_figures(31.44), few_figures(4321.0), few_figures(0.00004)
    ('0.012', '31', '4,320', '0.00004')
    """
    if value >= 100.0:
        return f"{float(f'{value:.3g}'):,.0f}"
    return np.format_float_positional(float(f"{value:.2g}"), trim="-")


def _strip_facts(job: StripJob, inverted: Inverted, column: UnitColumn) -> str:
    spacing = job.sounding.curve.half_spacing
    facts = [
        STATUS_WORDS[column.bedrock_status],
        f"{inverted.n_layers} layers",
        f"misfit {inverted.rms_percent:.1f} %",
        f"AB/2 to {format_length(float(np.nanmax(spacing)), job.unit)}" if spacing.size else "",
        f"halving or doubling all below {format_length(inverted.investigated_depth, job.unit)} would go unnoticed",
        f"spread towards {job.sounding.azimuth_deg:.0f}°" if job.sounding.azimuth_deg is not None else "",
        job.sounding.date,
    ]
    return "; ".join(fact for fact in facts if fact)


def _strip_notes(job: StripJob, inverted: Inverted, column: UnitColumn) -> Markup:
    notes: list[str] = []
    factors = [f"{factor:.2f}" for factor in inverted.segment_factor[1:] if abs(factor - 1.0) > 0.005]
    if factors:
        notes.append(f"Later potential spacings were found shifted by a factor of {', '.join(factors)}.")
    notes += [f"Set aside: {words}." for words in tell_readings_aside(job.sounding.curve, inverted, job.unit)]
    notes += [f"{words[:1].upper()}{words[1:].rstrip('.')}." for words in inverted.remarks]
    notes += [words for words in (tell_water_level(column, job.unit), tell_beside(column, job.unit)) if words]
    notes += [tell_opinion(opinion, job.unit) for opinion in column.pick_opinions]
    if job.sounding.note:
        notes.append(f"Field note: {job.sounding.note}")
    if not notes:
        return Markup("")
    return element("ul", {"class": "under"}, *(element("li", {}, note) for note in notes))
