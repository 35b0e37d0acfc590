"""One sounding's draws as tops, thicknesses and words."""

from collections.abc import Sequence
from itertools import pairwise

import attrs
import numpy as np

from geoves.domain.arrays import BoolArray, FloatArray
from geoves.domain.earth import Inverted
from geoves.domain.survey import Pick, Sounding, Well
from geoves.domain.tops import (
    BedrockStatus,
    PickOpinion,
    PlaceKind,
    ShallowResistivity,
    Thickness,
    Top,
    TopStatus,
    UnitColumn,
)
from geoves.domain.units import THICKNESS_BY_ROLE, Z_95, Role, Template
from geoves.interpretation.options import InterpretationOptions
from geoves.interpretation.sequences import ColumnDraws, HalfSpace
from geoves.kernels import layered_earth, unit_sequence
from geoves.kernels.damped_steps import Curves

# A resistivity is a datum where the curve adds this much to what the template already knows (share of its precision).
LEAST_GAIN = 0.25
# What a basal contact is the top of, where gravel and rock are not told apart.
UNDECIDED = "basal"
# A unit's presence is decided beyond this probability, and its thickness is then known no better than this (m).
DECIDED, LEAST_THICKNESS_ERROR = 0.9, 0.5
# A bound lies no deeper than this quantile of the contact's depth where at least this share of draws still reach it.
LOWEST_ALLOWED, LEAST_ALLOWED = 0.05, 0.02
# Slices of depth of a column's profile, and how far below the contact it goes.
PROFILE_SLICES, PROFILE_MARGIN = 60, 1.3
# Present means at least this thick, m.
PRESENT = 1.0


@attrs.frozen
class BasalContact:
    """What the draws say of the basal contact and the rock under it; depths in m.

    depth, gravel : (m,) of the draws that reach it, equally probable
    bound : m, 0 where the curve excludes nothing    rock_bound : m, where the interpreter's bound on rock is deeper
    log_deviation : of the contact's depth    picks : decisions applied
    """

    depth: FloatArray
    gravel: FloatArray
    status: BedrockStatus
    bound: float
    log_deviation: float
    rock_bound: float = 0.0
    picks: tuple[Pick, ...] = ()

    @property
    def rock(self) -> FloatArray:
        return self.depth + self.gravel


def role_mask(template: Template, role: Role) -> BoolArray:
    """Which units (u,) have a role."""
    return np.array([unit.role is role for unit in template.units])


def find_basal_contact(
    draws: ColumnDraws, bound: float, template: Template, options: InterpretationOptions
) -> BasalContact:
    """The contact on which basal gravel or rock begins, and whether this curve sees it."""
    deep, rock = role_mask(template, Role.DEEP_AQUIFER), role_mask(template, Role.BEDROCK)
    thickness = draws.thickness[draws.reaches]
    depth = np.maximum(thickness[:, ~deep & ~rock].sum(axis=1), 0.1)
    gravel = thickness[:, deep].sum(axis=1)
    deviation = float(np.std(np.log(depth))) if depth.size > 1 else np.inf
    hinted = draws.log_bayes_factor > options.seen_log_bayes_factor and deviation < options.broad_log_depth_deviation
    if draws.log_bayes_factor > options.seen_log_bayes_factor and deviation < options.seen_log_depth_deviation:
        return BasalContact(depth, gravel, "seen", 0.0, deviation)
    # What sequences with the contact still allow, the curve has not excluded.
    allowed = float(np.quantile(depth, LOWEST_ALLOWED)) if depth.size > LEAST_ALLOWED * draws.reaches.size else np.inf
    bound = 0.0 if hinted else min(bound, allowed)
    return BasalContact(depth, gravel, "deeper_than" if bound > 0 else "not_distinct", bound, deviation)


def excluded_depth(model: HalfSpace, curves: Curves, template: Template, options: InterpretationOptions) -> float:
    """Depth (m) above which basal material would have been noticed under the model that ends above it; 0 for none.

    At each depth the half-space is replaced by basal gravel or rock of every resistivity that the template allows
    (5, 50 and 95 % of each); the curve must change by `notice_chi_square` for all of them, here and at lesser depths.
    """
    basal = [unit for unit in template.units if unit.role in {Role.DEEP_AQUIFER, Role.BEDROCK}]
    levels = np.exp(
        np.concatenate(
            [unit.log_resistivity_mean + unit.log_resistivity_deviation * Z_95 * np.array([-1, 0, 1]) for unit in basal]
        )
    )
    top = float(model.thickness.sum())
    depth = np.maximum(top, 1.0) + np.geomspace(1.0, 300.0, 40)
    pairs = np.array(np.meshgrid(depth, levels, indexing="ij")).reshape(2, -1)
    thickness = np.column_stack([np.tile(model.thickness, (pairs.shape[1], 1)), pairs[0] - top])
    resistivity = np.column_stack([np.tile(model.resistivity, (pairs.shape[1], 1)), pairs[1]])
    plain = layered_earth.response(curves.weights, curves.wavenumber, model.thickness[None], model.resistivity[None])
    changed = layered_earth.response(curves.weights, curves.wavenumber, thickness, resistivity)
    chi_square = np.sum((np.log(changed / plain) / curves.deviation) ** 2, axis=1).reshape(depth.size, -1)
    noticed = np.cumprod(np.all(chi_square >= options.notice_chi_square, axis=1)).astype(bool)
    return float(depth[np.flatnonzero(noticed)[-1]]) if noticed[0] else 0.0


def apply_picks(
    contact: BasalContact, picks: Sequence[Pick], template: Template, generator: np.random.Generator
) -> BasalContact:
    """The contact as the interpreter decided it; what was not decided keeps what was inferred beside it."""
    roles = {unit.code: unit.role for unit in template.units}
    for pick in picks:
        role = roles[pick.unit]
        if role not in {Role.DEEP_AQUIFER, Role.BEDROCK}:
            continue
        if pick.status == "absent":
            contact = attrs.evolve(contact, gravel=np.zeros_like(contact.gravel))
        elif pick.status == "below" and pick.depth is not None:
            contact = _decide_below(contact, pick.depth, role)
        elif pick.depth is not None:
            contact = _decide_at(contact, pick.depth, pick.depth_error or 0.05 * pick.depth, role, generator)
        contact = attrs.evolve(contact, picks=(*contact.picks, pick))
    return contact


def _decide_at(
    contact: BasalContact, depth: float, error: float, role: Role, generator: np.random.Generator
) -> BasalContact:
    """The contact at a decided depth: of rock, with the inferred gravel on it; of gravel, with the gravel under it."""
    basal = np.maximum(depth + error * generator.standard_normal(max(contact.depth.size, 100)), 0.1)
    if role is Role.BEDROCK:
        # The gravel that is likeliest goes with the decided rock, so that the surfaces meet it.
        gravel = np.full(basal.size, np.median(contact.gravel) if contact.gravel.size else 0.0)
        gravel = np.minimum(gravel, 0.9 * basal)
        basal = basal - gravel
    else:
        # A decided top of gravel means that there is some.
        pool = contact.gravel[contact.gravel >= PRESENT]
        gravel = generator.choice(pool, basal.size) if pool.size else np.zeros(basal.size)
    deviation = float(np.std(np.log(basal)))
    return attrs.evolve(contact, depth=basal, gravel=gravel, status="seen", bound=0.0, log_deviation=deviation)


def _decide_below(contact: BasalContact, depth: float, role: Role) -> BasalContact:
    """The contact deeper than a decided depth: those draws that are, or a bound where none is.

    Rock deeper than a depth leaves room for gravel above it: the basal contact is bounded only as far as the thickest
    gravel reaches.
    """
    drawn = contact.rock if role is Role.BEDROCK else contact.depth
    deeper = drawn > depth
    if contact.status != "deeper_than" and np.count_nonzero(deeper) >= LEAST_ALLOWED * max(drawn.size, 1):
        kept, gravel = contact.depth[deeper], contact.gravel[deeper]
        return attrs.evolve(contact, depth=kept, gravel=gravel, log_deviation=float(np.std(np.log(kept))))
    room = THICKNESS_BY_ROLE[Role.DEEP_AQUIFER][1] if role is Role.BEDROCK else 0.0
    bound, rock_bound = max(contact.bound, depth - room, 1.0), max(contact.rock_bound, depth)
    return attrs.evolve(contact, status="deeper_than", bound=bound, rock_bound=rock_bound)


def contact_tops(
    sounding: Sounding, contact: BasalContact, template: Template, options: InterpretationOptions
) -> list[Top]:
    """Rows of the basal contact and of bedrock at a sounding: data, bounds, or none where nothing is known.

    A row is the interpreter's where the value is; what the curve says beside a decision stays the curve's.
    """
    rock = next(unit.code for unit in template.units if unit.role is Role.BEDROCK)
    deep = [unit.code for unit in template.units if unit.role is Role.DEEP_AQUIFER]
    role = {unit.code: unit.role for unit in template.units}
    decided = {"bedrock" if role[pick.unit] is Role.BEDROCK else "basal": pick for pick in contact.picks}

    def top(unit: str, name: str, status: TopStatus, depth: float, error: float) -> Top:
        pick = decided.get(name)
        if pick is not None and pick.status == status and pick.depth is not None:
            depth = pick.depth
            error = (pick.depth_error or 0.05 * depth) if status == "at" else np.nan
            kind: PlaceKind = "pick"
            source = _name_pick(pick)
        else:
            others = "".join(f", held to what {one.interpreter} decided ({one.reason})" for one in contact.picks)
            kind, source = "sounding", _SOURCES[contact.status] + others
        elevation = sounding.ground_elevation - depth
        place = (sounding.name, kind, sounding.easting, sounding.northing)
        return Top(*place, unit, name, status, depth, elevation, error, source)

    if contact.status == "deeper_than":
        bounds = (("basal", contact.bound), ("bedrock", max(contact.bound, contact.rock_bound)))
        return [top(rock, name, "below", bound, np.nan) for name, bound in bounds]
    if not contact.depth.size or contact.log_deviation > options.broad_log_depth_deviation:
        return []
    present = float(np.mean(contact.gravel >= PRESENT)) if deep else 0.0
    upper = deep[0] if present >= DECIDED else (rock if present <= 1.0 - DECIDED else UNDECIDED)
    rows = []
    for unit, name, depth in ((upper, "basal", contact.depth), (rock, "bedrock", contact.rock)):
        middle = float(np.exp(np.mean(np.log(depth)))) if name == "basal" else float(np.mean(depth))
        error = float(np.hypot(np.std(depth), options.relative_depth_floor * middle))
        rows.append(top(unit, name, "at", middle, error))
    rows += [
        top(pick.unit, name, "below", pick.depth or 0.0, np.nan)
        for name, pick in decided.items()
        if pick.status == "below"
    ]
    if deep and not present:
        absent = next((pick for pick in contact.picks if pick.status == "absent"), None)
        source = _name_pick(absent) if absent else _SOURCES[contact.status]
        kind: PlaceKind = "pick" if absent else "sounding"
        place = (sounding.name, kind, sounding.easting, sounding.northing)
        rows.append(Top(*place, deep[0], Role.DEEP_AQUIFER, "absent", np.nan, np.nan, np.nan, source))
    return rows


def _name_pick(pick: Pick) -> str:
    return f"pick by {pick.interpreter}: {pick.reason}"


def other_picks(place: Sounding | Well, picks: Sequence[Pick], template: Template) -> list[Top]:
    """Rows for what was decided of units above the basal contact: kept and shown, though no surface is made of them."""
    role = {unit.code: unit.role for unit in template.units}
    rows = []
    for pick in picks:
        if role[pick.unit] in {Role.DEEP_AQUIFER, Role.BEDROCK}:
            continue
        depth = np.nan if pick.depth is None or pick.status == "absent" else pick.depth
        error = pick.depth_error or 0.05 * depth if pick.status == "at" else np.nan
        rows.append(
            Top(
                place.name, "pick", place.easting, place.northing, pick.unit, role[pick.unit], pick.status,
                depth, place.ground_elevation - depth, error, _name_pick(pick),
            )
        )  # fmt: skip
    return rows


def absent_thickness(place: Sounding | Well, picks: Sequence[Pick], template: Template) -> list[Thickness]:
    """A thickness of nothing for each unit that the interpreter decided to be absent."""
    role = {unit.code: unit.role for unit in template.units}
    return [
        Thickness(
            place.name, "pick", place.easting, place.northing, role[pick.unit], 0.0, LEAST_THICKNESS_ERROR, False,
            _name_pick(pick),
        )
        for pick in picks
        if pick.status == "absent"
    ]  # fmt: skip


_SOURCES = {
    "seen": "curve: basal contact seen",
    "not_distinct": "curve: basal contact not distinct, broad datum",
    "deeper_than": "curve: basal material above this depth would have been noticed",
}


def role_thickness(sounding: Sounding, values: FloatArray, role: Role, source: str) -> list[Thickness]:
    """The thickness of a role where the draws (m,) decide whether it is there at all; nothing where they do not.

    A curve that only forbids a thick layer says nothing for or against a thin one: taken as a datum it would bring
    the prior's own mean into every surface, once for each sounding.
    """
    present = float(np.mean(values >= PRESENT))
    if 1.0 - DECIDED < present < DECIDED:
        return []
    there = values[values >= PRESENT] if present >= DECIDED else np.zeros(1)
    error = float(np.hypot(np.std(there), LEAST_THICKNESS_ERROR))
    middle = float(np.mean(there))
    return [
        Thickness(sounding.name, "sounding", sounding.easting, sounding.northing, role, middle, error, False, source)
    ]


def shallow_resistivity(sounding: Sounding, draws: ColumnDraws, template: Template) -> list[ShallowResistivity]:
    """Log resistivity of the shallow aquifer where it is probably present, the template's prior taken out."""
    shallow = np.flatnonzero(role_mask(template, Role.SHALLOW_AQUIFER))
    rows = []
    for unit in shallow:
        values = draws.log_resistivity[~np.isnan(draws.log_resistivity[:, unit]), unit]
        if values.size < 0.5 * draws.log_resistivity.shape[0]:
            continue
        prior_mean = template.log_resistivity_means[unit]
        prior_variance = template.log_resistivity_deviations[unit] ** 2
        variance = float(np.var(values))
        gain = 1.0 / variance - 1.0 / prior_variance
        if gain * prior_variance < LEAST_GAIN:
            continue
        value = (float(np.mean(values)) / variance - prior_mean / prior_variance) / gain
        rows.append(
            ShallowResistivity(
                sounding.name, sounding.easting, sounding.northing, float(value), float(np.sqrt(1.0 / gain))
            )
        )
    return rows[:1]


def read_column(
    inverted: Inverted, draws: ColumnDraws, contact: BasalContact, template: Template, opinions: tuple[PickOpinion, ...]
) -> UnitColumn:
    """The layers of the blocky model, and the ground slice by slice, each with the probability of every unit."""
    top = inverted.model.top_depth
    bottom = np.append(top[1:], max(1.5 * top[-1], inverted.investigated_depth, 1.0))
    share = np.array([_unit_share(draws.thickness, a, b) for a, b in zip(top, bottom, strict=True)])
    share = (share + 1e-6) / (share + 1e-6).sum(axis=1, keepdims=True)
    flat = np.zeros(len(template.units))
    down = np.where(np.triu(np.ones((flat.size, flat.size))) > 0, 0.0, -np.inf)
    best = unit_sequence.read_units(np.log(share), flat, down).best
    rock = contact.rock
    bounded = contact.status == "deeper_than"
    depth = max(contact.bound, contact.rock_bound) if bounded else (float(np.mean(rock)) if rock.size else np.nan)
    error = np.nan if bounded or not rock.size else float(np.std(rock))
    deepest = max(
        10.0, contact.bound, contact.rock_bound, *(np.quantile(rock, [0.95]) if rock.size and not bounded else [0.0])
    )
    edges = np.linspace(0.0, PROFILE_MARGIN * deepest, PROFILE_SLICES + 1)
    known = rock.size > 0 and not bounded
    shallow_probability, shallow = _shallow_quantiles(draws, template)
    return UnitColumn(
        sounding=inverted.sounding,
        unit=tuple(template.codes[unit] for unit in best),
        unit_probability=share[np.arange(best.size), best],
        probability=share,
        bedrock_status=contact.status,
        bedrock_depth=depth,
        bedrock_depth_error=error,
        picks=contact.picks,
        pick_opinions=opinions,
        profile_depth=edges,
        profile=_profile(draws, contact, template, edges),
        basal_depth=np.quantile(contact.depth, [0.05, 0.5, 0.95]) if known else np.full(3, np.nan),
        gravel_probability=float(np.mean(contact.gravel >= PRESENT)) if known else np.nan,
        gravel_limit=float(np.quantile(contact.gravel, 0.95)) if known else np.nan,
        shallow_probability=shallow_probability,
        shallow_resistivity=shallow,
        base_contrast=_base_contrast(draws, template),
        water_level=np.array(template.water_level or (np.nan, np.nan)),
        above_water=_above_water(draws, edges),
    )


def _profile(draws: ColumnDraws, contact: BasalContact, template: Template, edges: FloatArray) -> FloatArray:
    """Probability (d, u) of each unit in slices of depth; where the interpreter decided, by the decided contact."""
    thickness = draws.thickness
    if any(pick.status != "below" for pick in contact.picks) and contact.depth.size:
        thickness = _decided_columns(draws, contact, template)
    return np.array([_unit_share(thickness, a, b) for a, b in pairwise(edges)])


def _above_water(draws: ColumnDraws, edges: FloatArray) -> FloatArray:
    """Share (d,) of each slice of depth that is coarse ground above the water level; empty where that is not known."""
    if not draws.dry.size:
        return np.empty(0)
    h = np.where(np.isnan(draws.thickness), 1e5, draws.thickness)
    top = np.cumsum(h, axis=1) - h
    shares = []
    for a, b in pairwise(edges):
        inside = np.clip(np.minimum(top + draws.dry, b) - np.maximum(top, a), 0.0, None)
        shares.append(np.mean(inside.sum(axis=1)) / (b - a))
    return np.array(shares)


def _decided_columns(draws: ColumnDraws, contact: BasalContact, template: Template) -> FloatArray:
    """Columns (m, u) whose upper units are stretched to end at the decided contact, the decided gravel under them."""
    deep, rock = role_mask(template, Role.DEEP_AQUIFER), role_mask(template, Role.BEDROCK)
    rows = np.arange(contact.depth.size) % len(draws.thickness)
    upper = np.where(deep | rock, 0.0, np.nan_to_num(draws.thickness[rows]))
    total = upper.sum(axis=1)
    columns = upper * (contact.depth / np.where(total > 0, total, 1.0))[:, None]
    columns[:, np.flatnonzero(deep)[:1]] = contact.gravel[:, None]
    columns[:, rock] = np.nan
    return np.asarray(columns)


def _shallow_quantiles(draws: ColumnDraws, template: Template) -> tuple[float, FloatArray]:
    """Probability of the shallow aquifer, and quantiles (3,) of its resistivity where the draws have it, ohm m."""
    shallow = role_mask(template, Role.SHALLOW_AQUIFER)
    if not np.any(shallow):
        return np.nan, np.full(3, np.nan)
    thickness = np.nan_to_num(draws.thickness[:, shallow], nan=np.inf).sum(axis=1)
    values = draws.log_resistivity[:, shallow]
    values = values[~np.isnan(values)]
    quantiles = np.exp(np.quantile(values, [0.05, 0.5, 0.95])) if values.size else np.full(3, np.nan)
    return float(np.mean(thickness >= PRESENT)), np.asarray(quantiles)


def _base_contrast(draws: ColumnDraws, template: Template) -> float:
    """Mean log ratio of rock's resistivity to that of the unit on it, over the draws that reach it."""
    rock = int(np.flatnonzero(role_mask(template, Role.BEDROCK))[0])
    reached = draws.log_resistivity[draws.reaches]
    if not len(reached):
        return np.nan
    above = ~np.isnan(reached[:, :rock])
    last = rock - 1 - np.argmax(above[:, ::-1], axis=1)
    contrast = reached[:, rock] - reached[np.arange(len(reached)), last]
    known = contrast[~np.isnan(contrast)]
    return float(np.mean(known)) if known.size else np.nan


def _unit_share(thickness: FloatArray, top: float, bottom: float) -> FloatArray:
    """Mean share (u,) of each unit in a stretch of depth over columns (m, u); NaN thickness is the half-space."""
    h = np.where(np.isnan(thickness), 1e5, thickness)
    base = np.cumsum(h, axis=1)
    inside = np.clip(np.minimum(base, bottom) - np.maximum(base - h, top), 0.0, None)
    return np.asarray(np.mean(inside, axis=0) / (bottom - top))
