"""Spreads that leave flat layers sideways: across a valley narrower than AB, on the land or in the rock."""

from collections.abc import Iterator, Mapping

import numpy as np

from geoves.checking.places import spread_line
from geoves.domain.arrays import FloatArray
from geoves.domain.findings import Finding
from geoves.domain.region import Region
from geoves.domain.survey import Ground, Sounding, Survey
from geoves.domain.units import Role

# The land may rise this steeply from a sounding towards both electrodes: 10 degrees, beyond which topography bends
# curves (Fox and others 1980, Topographic effects in resistivity and induced-polarization surveys, Geophysics 45).
STEEPEST_LAND = 0.176
# Known rock is far deeper in the middle than beside it where the flanks would dip more than this.
STEEPEST_ROCK = 0.25
# A place counts as on the line of a spread within this share of its length to the side.
BESIDE = 0.25
_SAMPLES = 9


def check_spreads(survey: Survey, region: Region) -> list[Finding]:
    """Doubts about soundings whose spread crosses a valley narrower than itself, by azimuth."""
    rock = dict(_known_rock(survey, region))
    findings: list[Finding] = []
    for sounding in survey.soundings:
        if survey.ground is not None:
            findings += _doubt_land(sounding, survey.ground, region)
        findings += _doubt_rock(sounding, rock, region)
    return findings


def _doubt_land(sounding: Sounding, ground: Ground, region: Region) -> Iterator[Finding]:
    line = spread_line(sounding, region.crs_unit_metres)
    if line is None:
        return
    share = np.linspace(-1.0, 1.0, 2 * _SAMPLES + 1)
    points = line.middle + line.along * (share * line.half_length)[:, None]
    height = sample_ground(ground, points)
    if not np.isfinite(height).all():
        return
    distance = np.abs(share) * line.half_length * region.crs_unit_metres
    with np.errstate(divide="ignore", invalid="ignore"):
        grade = np.where(distance > 0, (height - height[_SAMPLES]) / distance, 0.0)
    for side, name in ((1.0, "valley"), (-1.0, "ridge")):
        left, right = float((side * grade[:_SAMPLES]).max()), float((side * grade[_SAMPLES + 1 :]).max())
        if min(left, right) > STEEPEST_LAND:
            words = (
                f"the spread of AB {2 * line.half_length * region.crs_unit_metres:.0f} m at {sounding.azimuth_deg:g}° "
                f"crosses a {name} of the land: it {'rises' if side > 0 else 'falls'} {min(left, right):.0%} or more "
                f"to both sides; expected {STEEPEST_LAND:.0%} at most"
            )
            yield _doubt(sounding, words)


def _known_rock(survey: Survey, region: Region) -> Iterator[tuple[str, tuple[FloatArray, float, bool]]]:
    """Place, elevation of rock and whether rock is only known to be below it, of wells and picks."""
    rock = {unit.code for unit in region.template.with_role(Role.BEDROCK)}
    terms = {term.casefold() for unit in region.template.with_role(Role.BEDROCK) for term in unit.log_terms}
    for well in survey.wells:
        at = np.array([well.easting, well.northing])
        tops = [
            one.top
            for one in well.intervals
            if one.unit in rock or (one.unit is None and " ".join(one.description.casefold().split()) in terms)
        ]
        if tops:
            yield well.name, (at, well.ground_elevation - min(tops), False)
    places: dict[str, Sounding] = {sounding.name: sounding for sounding in survey.soundings}
    wells = {well.name: well for well in survey.wells}
    for pick in survey.picks:
        place = places.get(pick.place) or wells.get(pick.place)
        if place is not None and pick.unit in rock and pick.depth is not None:
            at = np.array([place.easting, place.northing])
            yield pick.place, (at, place.ground_elevation - pick.depth, pick.status == "below")


def _doubt_rock(
    sounding: Sounding, rock: Mapping[str, tuple[FloatArray, float, bool]], region: Region
) -> Iterator[Finding]:
    """Wells and picks along the spread, within its length, that have rock far higher or lower than here."""
    line = spread_line(sounding, region.crs_unit_metres)
    if line is None:
        return
    across = np.array([line.along[1], -line.along[0]])
    near = []
    for name, (at, elevation, is_below) in rock.items():
        offset = at - line.middle
        along, beside = float(offset @ line.along), abs(float(offset @ across))
        if abs(along) <= 2.0 * line.half_length and beside <= BESIDE * 2.0 * line.half_length:
            near.append((along * region.crs_unit_metres, elevation, is_below, name))
    for i, (first, high, bound, name) in enumerate(near):
        for second, low, other_bound, other in near[i + 1 :]:
            apart, drop = abs(first - second), abs(high - low)
            # A bound only speaks where it is the lower of the two: rock is then lower still.
            lower_is_bound = bound if high < low else other_bound
            higher_is_bound = other_bound if high < low else bound
            if higher_is_bound and not lower_is_bound:
                continue
            if drop > STEEPEST_ROCK * max(apart, 1.0) and drop > 10.0:
                words = (
                    f"along the spread of AB {2 * line.half_length * region.crs_unit_metres:.0f} m at "
                    f"{sounding.azimuth_deg:g}° rock lies {drop:.0f} m higher or lower at {name} than at {other}, "
                    f"{apart:.0f} m away: a valley flank under the spread"
                )
                yield _doubt(sounding, words)
                return


def sample_ground(ground: Ground, points: FloatArray) -> FloatArray:
    """Elevation (n,) m of points (n, 2) between the centres of the grid's cells; NaN outside."""
    grid = ground.grid
    column = (points[:, 0] - grid.west) / grid.cell_size - 0.5
    row = (grid.north - points[:, 1]) / grid.cell_size - 0.5
    found = np.full(len(points), np.nan)
    inside = (column >= 0) & (column <= grid.n_columns - 1) & (row >= 0) & (row <= grid.n_rows - 1)
    c, r = column[inside], row[inside]
    left, top = np.minimum(c.astype(int), grid.n_columns - 2), np.minimum(r.astype(int), grid.n_rows - 2)
    if grid.n_columns < 2 or grid.n_rows < 2:
        return found
    x, y, z = c - left, r - top, ground.elevation
    upper = z[top, left] * (1 - x) + z[top, left + 1] * x
    lower = z[top + 1, left] * (1 - x) + z[top + 1, left + 1] * x
    found[inside] = upper * (1 - y) + lower * y
    return found


def _doubt(sounding: Sounding, words: str) -> Finding:
    azimuth = f"{sounding.azimuth_deg:g}"
    return Finding("doubt", "soundings", 0, "azimuth", azimuth, words, sounding.name, "across_valley")
