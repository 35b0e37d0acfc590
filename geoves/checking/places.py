"""Where soundings, wells and permits stand: twice in one place, far from all others, in the other foot."""

import math
from collections.abc import Iterator, Sequence

import attrs
import numpy as np
import pyproj

from geoves.domain.arrays import FloatArray
from geoves.domain.findings import Finding
from geoves.domain.region import METRES, Region
from geoves.domain.survey import Permit, Sounding, Survey, Well

# Places of one kind nearer than this are one place, m.
SAME_PLACE = 1.0
# A place is far from all others beyond so many times the distance within which nine tenths have a neighbour, and so
# many kilometres.
FAR_TIMES, FAR_KILOMETRES = 8.0, 3.0
FEWEST_PLACES = 5
# A curve is a copy where so many readings are the same to the last digit.
FEWEST_COPIED = 6
_NEAR_TIMES = 1.5

Place = Sounding | Well | Permit


def check_places(survey: Survey, region: Region) -> list[Finding]:
    """Doubts about where things stand, and curves that stand there twice."""
    findings: list[Finding] = []
    for kind, places in (("soundings", survey.soundings), ("wells", survey.wells), ("permits", survey.permits)):
        findings += _doubt_duplicates(kind, places, region)
    findings += _doubt_copied_curves(survey.soundings)
    findings += _doubt_far(survey, region)
    return [*findings, *_doubt_feet(region)]


def _doubt_duplicates(kind: str, places: Sequence[Place], region: Region) -> Iterator[Finding]:
    first: dict[tuple[object, ...], str] = {}
    size = SAME_PLACE / region.crs_unit_metres
    for place in places:
        key: tuple[object, ...] = (round(place.easting / size), round(place.northing / size))
        if isinstance(place, Permit):  # many stand at the centre of one section: only the same wish twice is odd
            key = (*key, place.requested_depth, place.use, tuple(sorted(place.extra.items())))
        if key in first:
            value = f"{place.easting:.1f}, {place.northing:.1f}"
            words = (
                f"{first[key]} stands at the same place; a repeat belongs under one name, a slip needs its own place"
            )
            yield Finding("doubt", kind, 0, "x", value, words, place.name, "duplicate_place")
        first.setdefault(key, place.name)


def _doubt_copied_curves(soundings: Sequence[Sounding]) -> Iterator[Finding]:
    first: dict[tuple[float, ...], str] = {}
    for sounding in soundings:
        apparent = sounding.curve.apparent_resistivity[sounding.curve.used]
        key = tuple(apparent.tolist())
        if len(key) < FEWEST_COPIED or len(set(key)) < FEWEST_COPIED:
            continue
        if key in first:
            words = f"all {len(key)} readings are those of {first[key]}; no two places read the same to the last digit"
            yield Finding("doubt", "readings", 0, "sounding", "", words, sounding.name, "duplicate_curve")
        first.setdefault(key, sounding.name)


def _doubt_far(survey: Survey, region: Region) -> Iterator[Finding]:
    kinds = (("soundings", survey.soundings), ("wells", survey.wells))
    named = [(kind, place) for kind, places in kinds for place in places]
    located = np.array([(place.easting, place.northing) for _, place in named]).reshape(-1, 2)
    if len(located) < FEWEST_PLACES:
        return
    nearest = _nearest_distances(located)
    usual = float(np.quantile(nearest, 0.9))
    kilometre = 1000.0 / region.crs_unit_metres
    limit = max(FAR_TIMES * usual, FAR_KILOMETRES * kilometre)
    # Where a tenth or more is astray, quantiles say little: the middle half then sets the scale.
    limit = min(limit, max(4.0 * FAR_TIMES * float(np.median(nearest)), FAR_KILOMETRES * kilometre))
    far = nearest > limit
    for i in np.flatnonzero(far):
        kind, place = named[i]
        others = located[~far]
        hint = guess_slip(located[i], others) or "is a digit of x or y wrong?"
        words = (
            f"{nearest[i] / kilometre:.1f} km from the nearest other sounding or well, where "
            f"{usual / kilometre:.1f} km is usual; {hint}"
        )
        value = f"{place.easting:.1f}, {place.northing:.1f}"
        yield Finding("doubt", kind, 0, "x", value, words, place.name, "far_place")


def _nearest_distances(located: FloatArray) -> FloatArray:
    """Distance from each place to its nearest other one, by blocks so that thousands take little memory."""
    nearest = np.empty(len(located))
    for start in range(0, len(located), 512):
        block = located[start : start + 512]
        squared = ((block[:, None, :] - located[None, :, :]) ** 2).sum(axis=2)
        squared[np.arange(len(block)), start + np.arange(len(block))] = np.inf
        nearest[start : start + 512] = np.sqrt(squared.min(axis=1))
    return nearest


def guess_slip(place: FloatArray, others: FloatArray) -> str:
    """The slip that would bring a place among the others, in words; empty where none does.

    >>> others = np.array([[600_000.0, 4_900_000.0], [610_000.0, 4_910_000.0], [605_000.0, 4_904_000.0]])
    >>> guess_slip(np.array([4_903_000.0, 604_000.0]), others)
    'x and y are swapped: the other way round it would lie among the others'
    """
    if not len(others):
        return ""
    low, high = others.min(axis=0), others.max(axis=0)
    margin = np.maximum(0.1 * (high - low), 1.0)
    x, y = place
    feet = METRES["ft"]
    guesses = {
        "x and y are swapped: the other way round": (y, x),
        "x has a digit too many or its point misplaced: divided by ten": (x / 10.0, y),
        "y has a digit too many or its point misplaced: divided by ten": (x, y / 10.0),
        "x lacks a digit: times ten": (x * 10.0, y),
        "y lacks a digit: times ten": (x, y * 10.0),
        "x and y are in feet where metres are meant: as metres": (x * feet, y * feet),
        "x and y are in metres where feet are meant: as feet": (x / feet, y / feet),
        "a minus sign is missing or too many before x: without it": (-x, y),
    }
    for words, guess in guesses.items():
        if np.all(np.array(guess) >= low - margin) and np.all(np.array(guess) <= high + margin):
            return f"{words} it would lie among the others"
    return _guess_digit(place, low - margin, high + margin)


def _guess_digit(place: FloatArray, low: FloatArray, high: FloatArray) -> str:
    """Whether two neighbouring digits of x or y changed places."""
    for axis, name in ((0, "x"), (1, "y")):
        other = 1 - axis
        if not low[other] <= place[other] <= high[other]:
            continue
        digits = f"{abs(place[axis]):.0f}"
        for i in range(len(digits) - 1):
            turned = float(digits[:i] + digits[i + 1] + digits[i] + digits[i + 2 :])
            if digits[i] != digits[i + 1] and low[axis] <= turned <= high[axis]:
                return f"two digits of {name} may have changed places: with {turned:.0f} it would lie among the others"
    return ""


def _doubt_feet(region: Region) -> Iterator[Finding]:
    """Two feet in one job: 2 parts in a million, which are 1.2 m at two million feet."""
    unit = pyproj.CRS(region.crs).axis_info[0]
    survey_foot = math.isclose(unit.unit_conversion_factor, METRES["us-ft"], rel_tol=1e-9)
    foot = math.isclose(unit.unit_conversion_factor, METRES["ft"], rel_tol=1e-9)
    declared = {region.length_unit, *region.input_length_units.values()}
    mixed = (survey_foot and "ft" in declared) or (foot and "us-ft" in declared) or {"ft", "us-ft"} <= declared
    if mixed:
        shift = 2e6 * (METRES["us-ft"] - METRES["ft"])
        words = (
            f"{unit.unit_name} in the CRS beside lengths in {' and '.join(sorted(declared))}: taken for each other the "
            f"two feet move a place at 2 000 000 ft by {shift:.1f} m; say of each table which foot it has"
        )
        yield Finding("doubt", region.path.name, 0, "region.length_unit", region.length_unit, words, "", "two_feet")


@attrs.frozen
class _Line:
    """A spread on the map: its middle, its direction as a unit vector (east, north), half its length, CRS units."""

    middle: FloatArray
    along: FloatArray
    half_length: float


def spread_line(sounding: Sounding, unit_metres: float) -> _Line | None:
    """The line of the longest used AB; None where no azimuth is known or nothing is used."""
    used = sounding.curve.half_spacing[sounding.curve.used]
    if sounding.azimuth_deg is None or not used.size:
        return None
    angle = math.radians(sounding.azimuth_deg)
    along = np.array([math.sin(angle), math.cos(angle)])
    return _Line(np.array([sounding.easting, sounding.northing]), along, float(used.max()) / unit_metres)
