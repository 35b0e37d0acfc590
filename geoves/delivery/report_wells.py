"""The report's chapter on wells and the template: words, ranges, waters."""

from collections import Counter

import numpy as np

from geoves.delivery.markup import Markup, element, format_length, joined, place_name, table
from geoves.domain.results import Results
from geoves.domain.tops import PairedUnit, UnitCalibration


def write_wells_and_template(results: Results) -> Markup:
    """Chapter 4: what the drillers' words were taken to mean, and what each unit shows against the template."""
    found = results.interpretation
    names = {unit.code: unit.name for unit in results.region.template.units}
    mapped = Counter((reading.description, reading.unit) for reading in found.well_readings)
    confidence = {(one.description, one.unit): one.confidence for one in found.well_readings}
    rows = [
        (
            words,
            names.get(code, code) if code else "no unit claims these words",
            count,
            f"{confidence[words, code]:.2f}",
        )
        for (words, code), count in sorted(mapped.items(), key=lambda one: (one[0][1] or "", one[0][0]))
    ]
    parts = [table(("driller’s words", "taken as", "times", "confidence"), rows, "Words of the logs")]
    if found.unmapped_words:
        unmapped = joined((element("q", {}, words) for words in found.unmapped_words), ", ")
        parts.insert(0, element("p", {}, "Words that no unit claims, and that decide nothing: ", unmapped, "."))
    else:
        parts.insert(0, element("p", {}, "Every word of the logs was claimed by a unit."))
    remarks = [element("p", {}, remark) for remark in found.remarks]
    tables = (_template_table(results), *_pair_tables(results), _wells_table(results), *_waters_tables(results))
    return joined([*parts, *remarks, *tables])


def _template_table(results: Results) -> Markup:
    """Each unit's range as given, against what the soundings' layers of that unit show."""
    models = {one.sounding: one.model for one in results.inverted}
    shown: dict[str, list[float]] = {unit.code: [] for unit in results.region.template.units}
    for column in results.interpretation.columns:
        for code, rho, share in zip(
            column.unit, models[column.sounding].resistivity, column.unit_probability, strict=True
        ):
            if share >= 0.5:
                shown[code].append(float(rho))
    calibrated = {one.unit: _calibration_words(one) for one in results.interpretation.calibration}
    rows = []
    for unit in results.region.template.units:
        values = np.array(shown[unit.code])
        spread = "–" if not values.size else f"{np.quantile(values, 0.05):.0f} to {np.quantile(values, 0.95):.0f}"
        given = f"{unit.resistivity_p05:g} to {unit.resistivity_p95:g}"
        rows.append((place_name(unit.name), given, calibrated.get(unit.code, "as given"), spread, values.size))
    headings = ("unit", "template (Ω m, central 90 %)", "as used", "layers read as it (Ω m, central 90 %)", "layers")
    return table(headings, rows, "The template and what the layers show")


def _calibration_words(one: UnitCalibration) -> str:
    """The range that was used, and how many soundings' worth of evidence moved it or was too little to."""
    if not one.used:
        return f"as given ({one.soundings:.0f} soundings are too few to move it)"
    low, high = one.after
    return f"{low:.0f} to {high:.0f} (moved by {one.soundings:.0f} soundings)"


def _wells_table(results: Results) -> Markup:
    unit, rock = results.region.length_unit, results.region.template.units[-1].code
    rows = []
    for well in results.survey.wells:
        readings = [one for one in results.interpretation.well_readings if one.well == well.name]
        top = min((one.top for one in readings if one.unit == rock), default=None)
        total = format_length(well.total_depth, unit)
        said = f"rock at {format_length(top, unit, 1)}" if top is not None else f"rock is deeper than {total}"
        rows.append((place_name(well.name), total, said, len(well.intervals)))
    return table(("well", "total depth", "what it says of rock", "intervals"), rows, "Control wells")


def _waters_tables(results: Results) -> list[Markup]:
    """The waters of the aquifers, and each range that they shifted; nothing where no water is known."""
    found, template = results.interpretation, results.region.template
    if not found.well_waters:
        return []
    by_role = {unit.role.value: unit for unit in template.units}
    waters = [
        (
            place_name(one.well),
            place_name(by_role[one.role].name),
            f"{one.specific_conductance:,.0f}",
            f"{one.resistivity:.1f}",
            f"{np.exp(by_role[one.role].log_resistivity_mean) / (one.resistivity / one.factor):.1f}",
            f"{one.factor:.2f}",
        )
        for one in found.well_waters
    ]
    headings = (
        "well",
        "water of",
        "conductance at 25 °C (µS/cm)",
        "resistivity in the ground (Ω m)",
        "formation factor under typical water",
        "over typical water",
    )
    tables = [table(headings, waters, "Waters of the aquifers")]
    if found.water_shifts:
        unit = results.region.length_unit
        shifted = [
            (
                place_name(one.sounding),
                place_name(by_role[one.role].name),
                f"× {one.factor:.2f}",
                place_name(one.well),
                format_length(one.distance, unit),
            )
            for one in found.water_shifts
        ]
        headed = ("sounding", "range of", "shifted by", "nearest well of it", "away")
        tables.append(table(headed, shifted, "Ranges shifted by the wells’ water"))
    return tables


def _pair_tables(results: Results) -> list[Markup]:
    """Soundings beside wells: which could serve, and what they would make of each range; nothing without pairs."""
    found, names = (
        results.interpretation.pair_calibration,
        {one.code: one.name for one in results.region.template.units},
    )
    if found is None or not found.pairs:
        return []
    unit = results.region.length_unit
    pairs = [
        (
            place_name(one.well),
            place_name(one.sounding),
            format_length(one.distance, unit),
            "–" if np.isnan(one.misfit) else f"{one.misfit:.1f}",
            one.miss or "serves",
        )
        for one in found.pairs
    ]
    headings = ("well", "sounding", "apart", "mean square of residuals over errors", "what of it")
    units = [
        (
            place_name(names[one.unit]),
            f"{one.before[0]:.3g} to {one.before[1]:.3g}",
            one.pairs,
            "–" if np.isnan(one.gain) else f"{one.after[0]:.3g} to {one.after[1]:.3g}",
            "–" if np.isnan(one.gain) else f"{one.gain:+.2f}",
            _paired_words(one, found.fewest),
        )
        for one in found.units
    ]
    headed = ("unit", "typed (Ω m)", "pairs that know it", "by the pairs (Ω m)", "gain at wells left out", "what of it")
    return [
        table(headings, pairs, "Soundings beside wells"),
        table(headed, units, "The template by the soundings beside wells"),
    ]


def _paired_words(one: PairedUnit, fewest: int) -> str:
    if one.used:
        return "moved"
    if np.isnan(one.gain):
        return f"as typed: fewer than {fewest} pairs, or of too few wells"
    return "as typed: moved, it would predict wells left out no better"
