"""The report's first chapter: the map, three numbers with their ranges, the confidence in plain words, the cautions."""

import numpy as np
import shapely

from geoves.delivery.cautions import list_cautions
from geoves.delivery.markup import Markup, element, format_length, joined
from geoves.delivery.section_lines import main_axis
from geoves.delivery.sections import LIKELY, draw_overview
from geoves.domain.grids import CrossValidation
from geoves.domain.results import Results
from geoves.domain.units import Role

FEW_THICKNESSES = 10  # fewer measured thicknesses than this make no variogram


def write_answers(results: Results) -> Markup:
    numbers = [_valley_length(results), _gravel_area(results), _deepest_rock(results)]
    shown = [
        element("div", {}, element("dt", {}, asked), element("dd", {}, element("strong", {}, number), words))
        for asked, number, words in numbers
    ]
    caption = (
        "Black circle: base seen (basal gravel or rock, which a curve seldom tells apart); grey diamond: base not "
        "distinct; white triangle: base deeper than the curve reached; square: well. White line: the valley’s axis; "
        "dashed: the other sections, each marked where it begins."
    )
    scroll = {"class": "scroll", "tabindex": "0", "role": "region", "aria-label": "Map of bedrock elevation"}
    return joined(
        [
            element("dl", {"class": "numbers"}, *shown),
            element("figure", {}, element("div", scroll, draw_overview(results)), element("figcaption", {}, caption)),
            element("h3", {}, "How sure"),
            *(element("p", {}, words) for words in (*confidence_in_words(results), *tell_limits(results))),
            element("h3", {}, "Cautions"),
            element("ul", {"class": "cautions"}, *(element("li", {}, caution) for caution in list_cautions())),
        ]
    )


def _far(results: Results, metres: float) -> str:
    """A long distance: km, or miles in a region that counts in feet."""
    return f"{metres / 1000:.1f} km" if results.region.length_unit == "m" else f"{metres / 1609.344:.1f} mi"


def _wide(results: Results, square_metres: float) -> str:
    if results.region.length_unit == "m":
        return f"{square_metres / 1e6:.1f} km²"
    return f"{square_metres / 1609.344**2:.1f} sq mi"


def _valley_length(results: Results) -> tuple[str, str, str]:
    axis = results.layers.get("valley_axis")
    asked = "Length of valley found"
    if axis is None or not len(axis):
        return asked, "none", "no axis could be followed"
    metres = results.region.crs_unit_metres
    main = main_axis(results)
    supported = _supported_length(results)
    near = "1 km" if results.region.length_unit == "m" else "0.6 mi"
    words = (
        f"of it {_far(results, main.length * metres)} in the main valley; {_far(results, supported)} of the whole lies "
        f"within {near} of a sounding that saw the base or a well that reached rock"
    )
    return asked, _far(results, float(axis.length.sum()) * metres), words


def _supported_length(results: Results) -> float:
    """Length of the axis (m) within 1 km of a place where the depth to bedrock is known."""
    known = [
        shapely.Point(top.easting, top.northing)
        for top in results.interpretation.tops
        if top.contact in ("bedrock", "basal") and top.status == "at"
    ]
    if not known:
        return 0.0
    metres = results.region.crs_unit_metres
    near = shapely.union_all(known).buffer(1000.0 / metres)
    return float(results.layers["valley_axis"].geometry.intersection(near).length.sum()) * metres


def _gravel_area(results: Results) -> tuple[str, str, str]:
    asked = "Area where deep gravel is likely"
    surface = results.stack.surfaces.get("deep_gravel_probability")
    remarks = _remarks_with(results, "deep gravel")
    if surface is None or not np.isfinite(surface.estimate).any():
        named = bool(results.region.template.with_role(Role.DEEP_AQUIFER))
        unknown = " ".join(remarks) or "nowhere could its probability be estimated"
        return asked, "not mapped", unknown if named else "the template names no deep aquifer"
    cell = (results.stack.grid.cell_size * results.region.crs_unit_metres) ** 2
    likely, nearly_sure, possible = (float((surface.estimate >= p).sum()) * cell for p in (LIKELY, 0.9, 0.33))
    words = (
        f"where the probability is {LIKELY} or more; {_wide(results, nearly_sure)} at 0.9 or more, "
        f"{_wide(results, possible)} at 0.33 or more"
    )
    words = ". ".join((words, *remarks)) + ("." if remarks else "")
    return asked, _wide(results, likely), words


def _deepest_rock(results: Results) -> tuple[str, str, str]:
    asked = "Deepest bedrock"
    surface = results.stack.surfaces.get("bedrock_depth")
    if surface is None or not np.isfinite(surface.estimate).any():
        return asked, "not mapped", "no depth to bedrock could be estimated"
    row, column = np.unravel_index(int(np.nanargmax(surface.estimate)), surface.estimate.shape)
    unit = results.region.length_unit
    best = format_length(float(surface.estimate[row, column]), unit)
    median = format_length(float(np.nanmedian(surface.estimate)), unit)
    words = "the deepest cell of an uncertain surface tends to be overstated"
    over = f"over the region the median is {median}"
    if surface.p05 is None or surface.p95 is None:
        return asked, best, f"below the ground; {words}; {over}"
    metres = results.region.metres_per_length_unit
    low, high = (float(band[row, column]) for band in (surface.p05, surface.p95))
    number = f"{low / metres:,.0f} to {format_length(high, unit)}"
    return asked, number, f"below the ground with 90 % probability, {best} on average; {words}; {over}"


def _remarks_with(results: Results, words: str) -> list[str]:
    """The surfaces' own remarks that hold these words, each with a capital and without its full stop."""
    of_geology = () if results.geology is None else results.geology.remarks
    remarks = [one for one in results.stack.remarks if one not in of_geology]
    return [f"{one[:1].upper()}{one[1:].rstrip('.')}" for one in remarks if words in one]


def tell_limits(results: Results) -> list[str]:
    """What leaving places out cannot show: how little the gravel rests on, and errors that all soundings share."""
    shared = (
        "Leaving places out one at a time cannot see an error that all soundings share, such as a template that is off "
        "or ground that is not layered flat."
    )
    tied = [f"{one}." for one in _remarks_with(results, "than wells and picks do")]
    return [*_gravel_support(results), " ".join((shared, *tied))]


def _gravel_support(results: Results) -> list[str]:
    units = results.region.template.with_role(Role.DEEP_AQUIFER)
    if not units:
        return []
    rows = [one for one in results.interpretation.thicknesses if one.role == Role.DEEP_AQUIFER]
    curves = ""
    if results.geology is not None:
        rows = [one for one in rows if one.kind != "sounding"]
        curves = (
            ", and on how it follows the relief of the rock; curves, which seldom tell it from rock, were not asked"
        )
        if results.geology.diagnostics.get("curves_tell_gravel"):
            curves = f", and on what {len(results.inverted)} curves, which seldom tell it from rock, say of it together"
    measured = [one.kind for one in rows if one.thickness > 0 and not one.at_least]
    counted = [f"{measured.count(kind)} at {kind}s" for kind in ("well", "sounding", "pick") if kind in measured]
    by_kind = f" ({', '.join(counted)})" if counted else ""
    number = f"{len(measured)} thickness{'' if len(measured) == 1 else 'es'}{by_kind}"
    bounds = len(rows) - len(measured)
    others = f"{bounds} absence or bound" if bounds == 1 else f"{bounds} absences or bounds"
    guess = "between them it is a guess" if len(measured) < FEW_THICKNESSES else "between them it is interpolated"
    return [f"{units[0].name}: its thickness rests on {number} and on {others}{curves}; {guess}."]


def confidence_in_words(results: Results) -> list[str]:
    """What leaving out each place in turn says of the surfaces, in sentences."""
    said = [_confidence(results, crossed) for crossed in results.stack.cross_validations]
    return [words for words in said if words] or ["No surface could be tested by leaving places out."]


def _confidence(results: Results, crossed: CrossValidation) -> str:
    misfit = np.abs(crossed.measured - crossed.predicted)
    known = np.isfinite(misfit)
    if known.sum() < 3:
        return ""
    inside = misfit[known] <= 1.645 * crossed.standard_error[known]
    half_said, most_said = (
        _misfit_words(results, crossed.unit, float(value)) for value in np.quantile(misfit[known], [0.5, 0.9])
    )
    share = float(inside.mean())
    if share > 0.96:
        verdict = "The bands are wider than they need be: treat them as cautious."
    elif share >= 0.85:
        verdict = "The bands are about as wide as they should be."
    elif share >= 0.75:
        verdict = "The bands are somewhat too narrow: treat them as optimistic."
    else:
        verdict = "The bands are too narrow: treat every range on this page as too hopeful."
    title = crossed.title.removeprefix("Log ").capitalize()
    how = f"each of {int(known.sum())} places was left out in turn and predicted from the others"
    if results.geology is not None:
        how = f"what each of {int(known.sum())} places says by itself was held against what all others expect there"
    return (
        f"{title}: {how}. "
        f"Half were met within {half_said}, nine in ten within {most_said}. "
        f"The 90 % bands held {100 * share:.0f} % of them. {verdict}"
    )


def _misfit_words(results: Results, unit: str, misfit: float) -> str:
    """A misfit in the region's unit; that of a logarithm as the percentage it stands for."""
    if unit == "m":
        return format_length(misfit, results.region.length_unit, 1)
    return f"{100 * np.expm1(misfit):.0f} %" if unit.startswith("ln ") else f"{misfit:.2g} {unit}"
