"""Wells: drillers' words in the order of the column, contacts and bounds from them."""

from collections.abc import Sequence

import attrs
import numpy as np

from geoves.domain.arrays import FloatArray
from geoves.domain.survey import Pick, Well
from geoves.domain.tops import PlaceKind, Thickness, Top, TopStatus, WellReading
from geoves.domain.units import Role, Template
from geoves.interpretation.options import ABOVE_CONFINING, InterpretationOptions
from geoves.interpretation.sequences import log_within
from geoves.interpretation.soundings import absent_thickness, other_picks
from geoves.interpretation.words import claim_words
from geoves.kernels.unit_sequence import ordered_transition, read_units

# What a unit pays (nats) for an interval whose words it does not claim, and for words that nothing claims.
UNCLAIMED, UNSAID = -6.0, -1.0
# Of a thickness between two contacts in a log, m.
THICKNESS_ERROR = 0.4


def read_log(well: Well, template: Template, options: InterpretationOptions) -> list[WellReading]:
    """Each interval's unit: the best path through the column's order among the units that claim the words.

    "Gravel" alone is claimed by a shallow and a deep gravel alike; the order of the column and the template's limits
    of depth decide. A typed unit is taken as it is.
    """
    if not well.intervals:
        return []
    codes = template.codes
    likelihood = np.empty((len(well.intervals), len(codes)))
    claimed = []
    for i, interval in enumerate(well.intervals):
        likeness = (
            {interval.unit: 1.0}
            if interval.unit
            else claim_words(interval.description, template, options.least_match).likeness
        )
        claimed.append(likeness)
        unsaid = UNCLAIMED if likeness else UNSAID
        likelihood[i] = [np.log(likeness[code]) if code in likeness else unsaid for code in codes]
        likelihood[i] += _log_depth(interval.top, template)
    start = np.zeros(len(codes))
    path = read_units(likelihood, start, ordered_transition(len(codes), 0.6))
    return [
        WellReading(
            well.name,
            interval.top,
            interval.bottom,
            interval.description,
            codes[unit] if codes[unit] in likeness else None,
            float(likeness.get(codes[unit], 0.0) * path.probability[i, unit]),
        )
        for i, (interval, likeness, unit) in enumerate(zip(well.intervals, claimed, path.best, strict=True))
    ]


def _log_depth(top: float, template: Template) -> FloatArray:
    """Soft limits of depth: an interval may lie deeper than its unit's top may, never shallower."""
    return np.array(
        [
            float(log_within(np.array([top]), (unit.depth_to_top[0], np.inf))[0])
            if unit.depth_to_top and top > 0
            else 0.0
            for unit in template.units
        ]
    )


def well_tops(
    well: Well, readings: list[WellReading], template: Template, options: InterpretationOptions
) -> tuple[list[Top], list[Thickness]]:
    """Contacts that the log shows, bounds where it ends above them, thicknesses of the two aquifers.

    What no unit claims, and stretches that the log leaves out, are not known: a contact below such a stretch lies
    somewhere in it, a bound goes no deeper than the last known interval, and nothing is absent that could lie there.
    """
    role = {unit.code: unit.role for unit in template.units}
    rock = next(unit.code for unit in template.units if unit.role is Role.BEDROCK)
    known = [reading for reading in readings if reading.unit]
    if not known:
        return [], []
    basal = next((r for r in known if role[r.unit or ""] in {Role.DEEP_AQUIFER, Role.BEDROCK}), None)
    bedrock = next((r for r in known if role[r.unit or ""] is Role.BEDROCK), None)
    tops = []
    for name, unit, found in (("basal", basal.unit if basal else rock, basal), ("bedrock", rock, bedrock)):
        if found is None:
            source = "driller's log ends above it"
            tops.append(_top(well, unit or rock, name, "below", known[-1].bottom, np.nan, source))
            continue
        unknown = _unknown_above(found, known)
        depth = found.top - 0.5 * unknown
        error = float(np.hypot(options.well_contact_error, options.well_relative_error * depth))
        source = "driller's log" + (f", within {unknown:.1f} m that no unit claims" if unknown else "")
        tops.append(
            _top(well, unit or rock, name, "at", depth, float(np.hypot(error, unknown / np.sqrt(12.0))), source)
        )
    no_gravel = bedrock and not any(role[r.unit or ""] is Role.DEEP_AQUIFER for r in known)
    if bedrock and no_gravel and not _unknown_above(bedrock, known):
        tops += [
            _top(well, unit.code, unit.role, "absent", np.nan, np.nan, "driller's log")
            for unit in template.with_role(Role.DEEP_AQUIFER)
        ]
    return tops, _thicknesses(well, known, role)


def _unknown_above(found: WellReading, known: Sequence[WellReading]) -> float:
    """Metres right above an interval that no known interval covers."""
    above = max((reading.bottom for reading in known if reading.bottom <= found.top + 1e-6), default=found.top)
    return max(found.top - above, 0.0)


def _top(well: Well, unit: str, contact: str, status: TopStatus, depth: float, error: float, source: str) -> Top:
    kind: PlaceKind = "well"
    elevation = well.ground_elevation - depth
    return Top(well.name, kind, well.easting, well.northing, unit, contact, status, depth, elevation, error, source)


def _thicknesses(well: Well, known: list[WellReading], role: dict[str, Role]) -> list[Thickness]:
    """Thickness of each aquifer and of the cover where the log passes it or meets it.

    What is not known beside it is its error.
    """
    order = list(Role)
    rows = []
    for which in (*ABOVE_CONFINING, Role.DEEP_AQUIFER):
        if which not in role.values():
            continue
        mine = [reading for reading in known if role[reading.unit or ""] is which]
        below = next((r for r in known if order.index(role[r.unit or ""]) > order.index(which)), None)
        # A log that ends above a unit, or does not tell what lies where it would be, says nothing of it.
        if not mine and (below is None or _unknown_above(below, known)):
            continue
        open_ended = bool(mine) and mine[-1] is known[-1]
        thickness = sum(reading.bottom - reading.top for reading in mine)
        unknown = sum(_unknown_above(reading, known) for reading in (*mine, *([below] if below else [])))
        error = float(np.hypot(THICKNESS_ERROR, unknown / np.sqrt(12.0)))
        rows.append(
            Thickness(
                well.name, "well", well.easting, well.northing, which, thickness, error, open_ended, "driller's log"
            )
        )
    return rows


def apply_well_picks(
    tops: list[Top], thicknesses: list[Thickness], well: Well, picks: Sequence[Pick], template: Template
) -> tuple[list[Top], list[Thickness]]:
    """The log's contacts with the interpreter's decisions in their place.

    A decided top of rock carries the gravel that the log shows on it: the basal contact is that much higher.
    """
    role = {unit.code: unit.role for unit in template.units}
    for pick in picks:
        if role[pick.unit] not in {Role.BEDROCK, Role.DEEP_AQUIFER} or pick.status == "absent" or pick.depth is None:
            continue
        name = "bedrock" if role[pick.unit] is Role.BEDROCK else "basal"
        tops = [*(top for top in tops if top.contact != name), _decided_top(well, pick, name, pick.depth)]
        if name == "bedrock" and pick.status == "at":
            logged = next((top for top in tops if top.contact == "basal" and top.status == "at"), None)
            if logged is None or logged.depth >= pick.depth or logged.unit == pick.unit:
                tops = [*(top for top in tops if top.contact != "basal"), _decided_top(well, pick, "basal", pick.depth)]
            else:
                thicknesses = [_decided_gravel(row, pick.depth - logged.depth, pick) for row in thicknesses]
    decided = absent_thickness(well, picks, template)
    replaced = {row.role for row in decided}
    kept = [row for row in thicknesses if row.role not in replaced]
    return [*tops, *other_picks(well, picks, template)], [*kept, *decided]


def _decided_top(well: Well, pick: Pick, contact: str, depth: float) -> Top:
    error = (pick.depth_error or 0.05 * depth) if pick.status == "at" else np.nan
    source = f"pick by {pick.interpreter}: {pick.reason}"
    row = _top(well, pick.unit, contact, pick.status, depth, error, source)
    return attrs.evolve(row, kind="pick")


def _decided_gravel(row: Thickness, thickness: float, pick: Pick) -> Thickness:
    """The deep gravel's thickness down to the decided rock; other rows as they are."""
    if row.role != Role.DEEP_AQUIFER:
        return row
    return attrs.evolve(
        row,
        thickness=thickness,
        standard_error=float(np.hypot(row.standard_error, pick.depth_error or 0.05 * (pick.depth or 0.0))),
        at_least=False,
        kind="pick",
        source=f"pick by {pick.interpreter}: {pick.reason}",
    )
