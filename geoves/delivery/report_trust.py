"""The report's later chapters: why believe the surfaces, doubts, decisions, and how it was made."""

from collections.abc import Mapping, Sequence
from typing import Any

import attrs
import numpy as np

from geoves.delivery.figures import draw_cross_validation, draw_variogram, largest_misfits
from geoves.delivery.joint_words import find_moved, gather_joint, tell_found, tell_range
from geoves.delivery.markup import Markup, element, format_length, joined, place_name, table, unit_label
from geoves.delivery.report_together import MODEL_WORDS, write_one_geology, write_pick_remarks
from geoves.delivery.sentences import tell_opinion
from geoves.domain.fields import JointColumn
from geoves.domain.grids import CrossValidation, Variogram
from geoves.domain.region import LengthUnit
from geoves.domain.results import Results


def write_trust(results: Results) -> Markup:
    """Chapter 5: the one geology, variograms with pairs, left-out places, misfits by name, what fed the surfaces."""
    region, together = results.region, results.geology is not None
    crs_unit = "m" if region.crs_unit_metres == 1.0 else "ft"
    parts = [element("p", {}, remark) for remark in results.stack.remarks]
    parts += write_one_geology(results)
    drawn, left_out = ("Field", "By itself and by all others") if together else ("Variogram", "Left out in turn")
    for variogram in results.stack.variograms:
        shown = _variogram_in_unit(results, variogram)
        parts.append(element("h3", {}, f"{drawn}: {variogram.title}"))
        caption = element("figcaption", {}, _variogram_words(shown, crs_unit))
        parts.append(element("figure", {}, draw_variogram(shown, crs_unit), caption))
    for crossed in results.stack.cross_validations:
        if not np.isfinite(crossed.measured - crossed.predicted).any():
            continue
        shown_crossed = _cross_validation_in_unit(results, crossed)
        parts.append(element("h3", {}, f"{left_out}: {shown_crossed.title}"))
        misfits = _misfit_table(shown_crossed)
        parts.append(element("div", {"class": "pair"}, draw_cross_validation(shown_crossed), misfits))
    return joined([*parts, _evidence_table(results)])


def _variogram_in_unit(results: Results, variogram: Variogram) -> Variogram:
    """A variogram of metres in the region's length unit; any other as it is."""
    if variogram.unit != "m":
        return variogram
    square = results.region.metres_per_length_unit**2
    return attrs.evolve(
        variogram,
        unit=unit_label(results.region.length_unit),
        nugget=variogram.nugget / square,
        partial_sill=variogram.partial_sill / square,
        semivariance=variogram.semivariance / square,
        least_squares=_per_square(variogram.least_squares, square),
        directions=tuple(attrs.evolve(one, semivariance=one.semivariance / square) for one in variogram.directions),
    )


def _per_square(fit: tuple[float, float, float] | None, square: float) -> tuple[float, float, float] | None:
    return None if fit is None else (fit[0] / square, fit[1] / square, fit[2])


def _cross_validation_in_unit(results: Results, crossed: CrossValidation) -> CrossValidation:
    crossed = without_logarithm(crossed)
    if crossed.unit != "m":
        return crossed
    metres = results.region.metres_per_length_unit
    return attrs.evolve(
        crossed,
        unit=unit_label(results.region.length_unit),
        measured=crossed.measured / metres,
        predicted=crossed.predicted / metres,
        standard_error=crossed.standard_error / metres,
    )


def without_logarithm(crossed: CrossValidation) -> CrossValidation:
    """What was kriged as a logarithm, as the quantity itself; its standard error to first order."""
    if not crossed.unit.startswith("ln "):
        return crossed
    predicted = np.exp(crossed.predicted)
    return attrs.evolve(
        crossed,
        title=crossed.title.removeprefix("Log ").capitalize(),
        unit=crossed.unit.removeprefix("ln ").replace("ohm m", "Ω m"),
        measured=np.exp(crossed.measured),
        predicted=predicted,
        standard_error=predicted * crossed.standard_error,
    )


def _variogram_words(variogram: Variogram, crs_unit: str) -> str:
    said = (
        f"{MODEL_WORDS.get(variogram.model, variogram.model)}, nugget {variogram.nugget:.4g}, "
        f"partial sill {variogram.partial_sill:.4g}, "
        f"practical length {variogram.length:,.0f} {crs_unit} towards {variogram.azimuth_deg:.0f}°"
    )
    if variogram.ratio != 1.0:
        said += f" (line) and {variogram.ratio:.2f} times that across (dashed)"
    remark = f"; {variogram.remark}" if variogram.remark else ""
    marks = "Over each mark stands its number of pairs."
    if variogram.directions:
        along, across = (one.azimuth_deg for one in variogram.directions)
        marks += f" Small marks: pairs towards {along:.0f}° (squares) and {across:.0f}° (triangles)."
    if variogram.least_squares is not None:
        nugget, partial_sill, length = variogram.least_squares
        marks += (
            f" Thin line: the same model fitted to the marks by least squares, errors of the data in it: nugget "
            f"{nugget:.4g}, partial sill {partial_sill:.4g}, length {length:,.0f} {crs_unit}."
        )
    return f"{said}; {variogram.n_data} data{remark}. {marks}"


def _misfit_table(crossed: CrossValidation) -> Markup:
    rows = []
    for i in largest_misfits(crossed, 8):
        misfit = crossed.predicted[i] - crossed.measured[i]
        error = crossed.standard_error[i]
        times = f"{abs(misfit) / error:.1f}" if error > 0 else "–"
        numbers = (f"{crossed.measured[i]:.1f}", f"{crossed.predicted[i]:.1f}", f"{misfit:+.1f}", times)
        rows.append((place_name(crossed.place[i]), crossed.kind[i], *numbers))
    unit = f" ({crossed.unit})" if crossed.unit else ""
    headings = ("place", "kind", f"measured{unit}", f"predicted{unit}", "misfit", "misfit / standard error")
    return table(headings, rows, "The largest misfits")


def _evidence_table(results: Results) -> Markup:
    """How many data of each kind there are of each contact."""
    counts: dict[tuple[str, str, str], int] = {}
    for top in results.interpretation.tops:
        key = (top.contact, top.kind, top.status)
        counts[key] = counts.get(key, 0) + 1
    rows = [(*key, count) for key, count in sorted(counts.items())]
    caption = "What the surfaces rest on"
    if results.geology is not None:
        caption = "What each place says by itself: wells and picks are heard so, of soundings the readings are"
    return table(("contact", "kind of place", "status", "data"), rows, caption)


def write_doubts(results: Results) -> Markup:
    """Chapter 6: what was unlikely in the tables. Faults stop a run, so that a page can show doubts alone."""
    if not results.doubts:
        return element("p", {}, "The inputs showed no fault and raised no doubt.")
    rows = [
        (one.file, one.row or "–", one.column or "–", place_name(one.place), one.value[:80], one.expected)
        for one in results.doubts
    ]
    words = (
        "The inputs showed no fault, or there would be no page. What was unlikely is listed here; the run went on. "
        "A reading that is doubted or was set aside is hollow in its curve above."
    )
    headings = ("file", "row", "column", "place", "value", "what was expected")
    return joined([element("p", {}, words), table(headings, rows, f"Doubts: {len(rows)}")])


def write_decisions(results: Results) -> Markup:
    """Chapter 7: the picks and their reasons, with what the curve says of each."""
    unit = results.region.length_unit
    if not results.survey.picks:
        words = "No picks were given: every contact is the program’s own reading of curve, template and logs."
        return element("p", {}, words)
    opinions = [one for column in results.interpretation.columns for one in column.pick_opinions]
    said = {(one.pick.place, one.pick.unit): tell_opinion(one, unit) for one in opinions}
    joint, moved = gather_joint(results), find_moved(results)
    rows = [
        (
            place_name(pick.place),
            pick.unit,
            pick.status,
            "–" if pick.depth is None else format_length(pick.depth, unit, 1),
            "–" if pick.depth_error is None else format_length(pick.depth_error, unit, 1),
            pick.interpreter,
            pick.reason,
            said.get((pick.place, pick.unit), "–"),
            *(_others_on_pick(joint.get(pick.place), pick.place, moved, unit) if joint else ()),
        )
        for pick in results.survey.picks
    ]
    headings = ["place", "unit", "status", "depth", "error", "interpreter", "reason", "what the curve says"]
    words = "A pick outranks what the program infers; what the curve by itself says of it stands beside it."
    if joint:
        headings += ["where the others expect basal gravel or rock", "what it moved"]
        words += (
            " All picks are heard at once: a place that they moved counts at the decision nearest to it by the lengths "
            "of the basal contact’s field."
        )
    told = write_pick_remarks(results)
    return joined([element("p", {}, words), table(headings, rows, f"Picks: {len(rows)}"), *told])


def _others_on_pick(
    column: JointColumn | None, place: str, moved: Mapping[str, tuple[str, ...]], unit: LengthUnit
) -> tuple[str, str]:
    """What all other places expect where something was decided, and what the decision moved."""
    if column is None:
        return "–", "–"
    return tell_range(column.others_basal_depth, unit), f"This decision {tell_found(place, moved)}."


def write_making(results: Results, record: Mapping[str, Any]) -> Markup:
    """Chapter 8: the coordinate system, the figures of merit and the whole record of the run."""
    region = results.region
    datum = region.vertical_datum or "not declared: heights are as the inputs give them"
    grid = results.stack.grid
    facts = {
        "region": region.name,
        "coordinate system": region.crs,
        "height datum": datum,
        "lengths": {"m": "metres", "ft": "international feet", "us-ft": "US survey feet"}[region.length_unit],
        "grid": f"{grid.n_rows} rows, {grid.n_columns} columns, cells of {grid.cell_size:g} in the unit of the CRS",
        "reach": f"surfaces end {results.stack.reach:,.0f} (unit of the CRS) from the nearest datum",
        "random seed": region.random_seed,
    }
    again = element("p", {}, "To make it again: ", element("code", {}, f"geoves run {region.path.name}"))
    parts = [_fact_list(facts), again]
    if results.figures_of_merit:
        parts += [element("h3", {}, "Figures of merit"), _fact_list(results.figures_of_merit)]
    return joined([*parts, element("h3", {}, "Record"), _fact_list(record)])


def _fact_list(facts: Mapping[str, Any]) -> Markup:
    items: list[Markup] = []
    for key, value in facts.items():
        items += [element("dt", {}, key), element("dd", {}, _fact(value))]
    return element("dl", {"class": "facts"}, *items)


def _fact(value: Any) -> Markup | str:
    """A fact of any shape: nested tables as nested lists, floats to five figures, the rest as text."""
    if isinstance(value, Mapping):
        return _fact_list(value) if value else "–"
    if isinstance(value, Sequence) and not isinstance(value, str):
        if any(isinstance(one, Mapping) for one in value):
            return joined(_fact(one) for one in value)
        return ", ".join(str(_fact(one)) for one in value) or "–"
    if isinstance(value, float):
        return f"{value:.5g}"
    return "–" if value is None else str(value)
