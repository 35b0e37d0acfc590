"""Wells: logs that end short of the hole, and logs that the nearest sounding cannot have stood on."""

import math
from collections.abc import Callable, Iterator, Sequence

import numpy as np

from geoves.domain.arrays import FloatArray
from geoves.domain.findings import Finding
from geoves.domain.region import METRES, Region
from geoves.domain.survey import FEWEST_READINGS, LogInterval, Sounding, Survey, Well
from geoves.domain.units import Template
from geoves.kernels.layered_earth import layout, response

# A log that ends above this share of the hole's depth leaves it untold.
TOLD_SHARE = 0.9
# A sounding is held against a log within this distance, m, and the well's own location accuracy.
NEAR_WELL = 400.0
# Columns drawn from the log through the template, and the score of the median reading from which on they disagree.
COLUMNS, DISAGREE = 400, 3.5
# Share of the log's depth that must be claimed by units for it to be held against a curve.
CLAIMED_SHARE = 0.8
# Half of this: what the ground between well and sounding, and contacts told in round feet, add to each column.
CONTACT_DEVIATION, BETWEEN_DEVIATION = 0.15, 0.15
_SEED = 21

UnitOf = Callable[[LogInterval], str | None]


def check_wells(survey: Survey, region: Region, unit_of: UnitOf) -> list[Finding]:
    """Doubts about wells; `unit_of` gives the template's code for an interval, None where nothing claims it."""
    findings: list[Finding] = []
    for well in survey.wells:
        findings += _doubt_short_log(well)
        findings += _doubt_soundings(well, survey.soundings, region, unit_of)
    return findings


def _doubt_short_log(well: Well) -> Iterator[Finding]:
    if not well.intervals:
        return
    reached = max(interval.bottom for interval in well.intervals)
    share = reached / well.total_depth
    if share >= TOLD_SHARE:
        return
    feet = math.isclose(share, METRES["ft"], rel_tol=0.03)
    hint = (
        "the log is in metres and the depth in feet, or one of them in the wrong unit" if feet else "what lies below?"
    )
    words = f"the log ends at {share:.0%} of the well's total depth; {hint}"
    yield Finding("doubt", "wells", 0, "total_depth", "", words, well.name, "log_short")


def _doubt_soundings(well: Well, soundings: Sequence[Sounding], region: Region, unit_of: UnitOf) -> Iterator[Finding]:
    """The nearest sounding within reach whose curve the log contradicts."""
    reach = (NEAR_WELL + (well.location_accuracy or 0.0)) / region.crs_unit_metres
    near = []
    for sounding in soundings:
        distance = math.hypot(sounding.easting - well.easting, sounding.northing - well.northing)
        if distance <= reach and int(np.sum(sounding.curve.used)) >= FEWEST_READINGS:
            near.append((distance, sounding))
    if not near:
        return
    column = _read_log(well, region.template, unit_of)
    if column is None:
        return
    distance, sounding = min(near, key=lambda pair: pair[0])
    score = compare_curve(sounding, *column, region.template)
    if score > DISAGREE:
        words = (
            f"{distance * region.crs_unit_metres:.0f} m away the log of {well.name} lets expect another curve through "
            f"the template: the middle reading is {score:.1f} standard deviations off, expected {DISAGREE} at most"
        )
        yield Finding("doubt", "readings", 0, "", "", words, sounding.name, "well_against_sounding")


def _read_log(well: Well, template: Template, unit_of: UnitOf) -> tuple[FloatArray, np.ndarray] | None:
    """Thickness (k,) m and unit's index (k,) of the layers of a log; None where too little is told."""
    codes = list(template.codes)
    layers: list[tuple[float, int]] = []
    claimed = 0.0
    for interval in well.intervals:
        code = unit_of(interval)
        thickness = interval.bottom - interval.top
        if code not in codes:
            if not layers:
                return None
            layers[-1] = (layers[-1][0] + thickness, layers[-1][1])
            continue
        claimed += thickness
        index = codes.index(code)
        if layers and layers[-1][1] == index:
            layers[-1] = (layers[-1][0] + thickness, index)
        else:
            layers.append((thickness, index))
    if not layers or claimed < CLAIMED_SHARE * well.total_depth:
        return None
    return np.array([one for one, _ in layers]), np.array([unit for _, unit in layers])


def compare_curve(sounding: Sounding, thickness: FloatArray, unit: np.ndarray, template: Template) -> float:
    """Median score of a curve's readings against the curves of a log through the template, in standard deviations.

    Each unit's resistivity is drawn from its range, contacts from 15 % about the log's; only readings whose AB/2 is
    within twice the log's depth are asked, as nothing is known of what lies below.
    """
    a, b, apparent, error, _ = sounding.curve.readings(0.03)
    asked = a <= 2.0 * thickness.sum()
    if asked.sum() < FEWEST_READINGS:
        return 0.0
    generator = np.random.default_rng(_SEED)
    mean, deviation = template.log_resistivity_means[unit], template.log_resistivity_deviations[unit]
    resistivity = np.exp(mean + deviation * generator.standard_normal((COLUMNS, unit.size)))
    depth = np.cumsum(thickness)[:-1] * np.exp(CONTACT_DEVIATION * generator.standard_normal((COLUMNS, unit.size - 1)))
    drawn = np.diff(np.sort(depth, axis=1), prepend=0.0)
    weights, wavenumber = layout(a[asked], b[asked])
    logs = np.log(response(weights[None], wavenumber, np.maximum(drawn, 1e-3), resistivity))
    spread = np.sqrt(logs.var(axis=0) + BETWEEN_DEVIATION**2 + error[asked] ** 2)
    return float(np.median(np.abs(np.log(apparent[asked]) - logs.mean(axis=0)) / spread))
