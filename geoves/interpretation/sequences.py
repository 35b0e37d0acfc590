"""Every admissible sequence of units as a layered model with the template's priors, weighed by its evidence."""

from collections.abc import Sequence
from itertools import combinations

import attrs
import numpy as np

from geoves.domain.arrays import BoolArray, FloatArray, IntArray
from geoves.domain.units import THICKNESS_BY_ROLE, Z_95, Role, Template
from geoves.interpretation.options import InterpretationOptions
from geoves.interpretation.water import (
    DRY_LOG_DEVIATION,
    DRY_LOG_MEAN,
    log_normal,
    log_split_weight,
    log_water_between,
)
from geoves.kernels import damped_steps, ensembles
from geoves.kernels.damped_steps import Curves, Fit, Prior
from geoves.kernels.ensembles import Density, Effort

# A skin of soil above the cover proper: thickness in m, and how much wider than the cover its resistivity spreads.
SKIN_THICKNESS, SKIN_WIDENING = (0.3, 3.0), 2.0
# The two parts of a confining unit that is not of a piece: one may be siltier. Thickness of each, m.
PART_THICKNESS = (2.0, 80.0)
# The template's limits of a unit's depth are soft: one standard deviation beyond them, in natural logs.
DEPTH_LIMIT_DEVIATION = 0.15
# Factors on the prior's thicknesses that the search starts from.
START_FACTORS = (0.5, 1.8)
SEGMENT_DEVIATION = 0.05
# The part of a unit above the water level is searched for about this share of the level's depth, natural logs.
DRY_SHARE, DRY_THICKNESS_DEVIATION, SHALLOWEST_WATER = 0.65, 0.5, 0.5
# No sequence is left out for the water level alone before it is drawn from (nats).
MOST_AGAINST = -4.0
# Members that columns are drawn from, for each column kept in the end: first those about the most probable models, then
# a quarter each about several heaviest draws in rounds, until they are worth twice the columns.
FIRST_PER_DRAW, EACH_PER_DRAW, ENOUGH_PER_DRAW = 2.0, 0.25, 2.0
FEWEST_MEMBERS, HEAVIEST_AT_ONCE, MOST_ROUNDS = 48, 4, 20
# Sequences this much (nats) behind the best are not drawn from, and no Bayes factor is stated beyond it.
LEAST_LOG_WEIGHT = 7.0


@attrs.frozen
class UnitSequence:
    """Layers from the top down, each by its unit's index in the template and the range of its thickness (m).

    A unit may have two layers: a skin of soil on the cover, a siltier part of the clay. `reaches` is False where the
    sequence ends above the basal contact, its last layer being the half-space. `widening` stretches the spread of a
    layer's log resistivity. `dry` says which layers lie above the water level, empty where none is known.
    """

    units: tuple[int, ...]
    thickness: tuple[tuple[float, float], ...]
    widening: tuple[float, ...]
    reaches: bool
    log_prior: float
    dry: tuple[bool, ...] = ()

    @property
    def split(self) -> int | None:
        """The dry layer under which the same unit goes on below the water level."""
        wet = [not dry for dry in self.dry]
        return next(
            (i for i in range(len(wet) - 1) if wet[i + 1] > wet[i] and self.units[i] == self.units[i + 1]), None
        )


@attrs.frozen
class ColumnDraws:
    """Columns drawn for one sounding from its weighed sequences.

    thickness : (m, u) m, 0 where a unit is absent, of the half-space not a number
    log_resistivity : (m, u), NaN where absent    reaches : (m,) the basal contact lies within the model
    log_bayes_factor : of sequences with the basal contact against those that end above it
    dry : (m, u) m of each unit above the water level, empty where none is known
    """

    thickness: FloatArray
    log_resistivity: FloatArray
    reaches: BoolArray
    log_bayes_factor: float
    dry: FloatArray = attrs.field(factory=lambda: np.empty((0, 0)))

    def take(self, rows: IntArray) -> "ColumnDraws":
        """Some of the columns, or the same more than once."""
        dry = self.dry[rows] if self.dry.size else self.dry
        return ColumnDraws(
            self.thickness[rows], self.log_resistivity[rows], self.reaches[rows], self.log_bayes_factor, dry
        )


@attrs.frozen
class HalfSpace:
    """The best model that ends above the basal contact: (k-1,) m, (k,) ohm m."""

    thickness: FloatArray
    resistivity: FloatArray


def admissible_sequences(template: Template, presence: FloatArray) -> tuple[UnitSequence, ...]:
    """All sequences in the template's order: each unit above bedrock present or not, at least one of them.

    presence : (u,) prior probability of each unit. Those sequences that end above the basal contact weigh as much
    together as those that reach it.
    """
    bedrock = next(i for i, unit in enumerate(template.units) if unit.role is Role.BEDROCK)
    roles = [unit.role for unit in template.units]
    sequences: list[UnitSequence] = []
    for reaches in (True, False):
        pool = [i for i in range(bedrock) if reaches or roles[i] is not Role.DEEP_AQUIFER]
        some = []
        for size in range(1, len(pool) + 1):
            for units in combinations(pool, size):
                log_prior = sum(np.log(presence[i] if i in units else 1.0 - presence[i]) for i in pool)
                column = (*units, bedrock) if reaches else units
                variants = _layer_variants(column, template)
                some += [
                    UnitSequence(*variant, reaches=reaches, log_prior=log_prior - np.log(len(variants)))
                    for variant in variants
                ]
        total = np.logaddexp.reduce([sequence.log_prior for sequence in some])
        sequences += [attrs.evolve(sequence, log_prior=sequence.log_prior - total) for sequence in some]
    return tuple(sequences)


def cut_at_water(sequences: Sequence[UnitSequence], template: Template) -> tuple[UnitSequence, ...]:
    """Every sequence with its coarse layers below the water level, above it, or one cut by it, from the top down.

    Each keeps the sequence's prior: how probable the cut is follows from the water level and the layers' depths.
    """
    cut: list[UnitSequence] = []
    for sequence in sequences:
        cut.append(attrs.evolve(sequence, dry=(False,) * len(sequence.units)))
        coarse = [i for i, unit in enumerate(sequence.units) if template.units[unit].is_coarse]
        for last in coarse:
            dry = tuple(i in coarse and i <= last for i in range(len(sequence.units)))
            if last < len(sequence.units) - 1:
                cut.append(attrs.evolve(sequence, dry=dry))
            cut.append(_split_layer(sequence, last, dry))
    return tuple(cut)


def _split_layer(sequence: UnitSequence, layer: int, dry: tuple[bool, ...]) -> UnitSequence:
    """A sequence with one layer in two, the upper one dry."""
    after = layer + 1
    unit, widening, ranges = sequence.units[layer], sequence.widening[layer], sequence.thickness
    own = ranges[layer] if layer < len(ranges) else THICKNESS_BY_ROLE[Role.SHALLOW_AQUIFER]
    return attrs.evolve(
        sequence,
        units=(*sequence.units[:after], unit, *sequence.units[after:]),
        thickness=(*ranges[:layer], own, *ranges[layer:]),
        widening=(*sequence.widening[:after], widening, *sequence.widening[after:]),
        dry=(*dry[:after], False, *dry[after:]),
    )


def _layer_variants(
    column: tuple[int, ...], template: Template
) -> list[tuple[tuple[int, ...], tuple[tuple[float, float], ...], tuple[float, ...]]]:
    """A column with its units of one layer each, with a skin, with a clay of two parts, and with both.

    Units, thicknesses and widenings of the layers; the half-space has no thickness and is never doubled.
    """
    roles = [template.units[unit].role for unit in column]
    variants: list[list[tuple[int, tuple[float, float], float]]] = [[]]
    for position, (unit, role) in enumerate(zip(column, roles, strict=True)):
        last = position == len(column) - 1
        plain = [(unit, THICKNESS_BY_ROLE.get(role, (0.0, 0.0)), 1.0)]
        ways = [plain]
        if position == 0 and role is Role.COVER and not last:
            ways.append([(unit, SKIN_THICKNESS, SKIN_WIDENING), *plain])
        if role is Role.CONFINING and not last:
            ways.append([(unit, PART_THICKNESS, 1.0)] * 2)
        variants = [[*variant, *way] for variant in variants for way in ways]
    return [
        (tuple(u for u, _, _ in variant), tuple(h for _, h, _ in variant[:-1]), tuple(w for _, _, w in variant))
        for variant in variants
    ]


def sequence_prior(
    sequence: UnitSequence, template: Template, curves: Curves, local: Sequence[Template] = ()
) -> tuple[Prior, FloatArray]:
    """Prior (b, p) of a sequence and the mean (p,) from which its search starts.

    local : the template as it stands at the place of each curve, where that differs
    """
    places = local or (template,)
    layers = list(sequence.units)
    k, n_curves, n_segments = len(layers), curves.segments.shape[0], curves.segments.shape[2]
    thickness_mean, thickness_deviation = _thickness_prior(sequence, _water_levels(places))
    dry = np.array(sequence.dry or (False,) * k)
    resistivity_mean = np.array([one.log_resistivity_means[layers] for one in places]) + dry * DRY_LOG_MEAN
    own = np.array([one.log_resistivity_deviations[layers] for one in places]) * sequence.widening
    shift = np.zeros((len(places), n_segments))
    mean = np.hstack([thickness_mean, resistivity_mean, shift])
    deviation = np.hstack([thickness_deviation, np.hypot(own, dry * DRY_LOG_DEVIATION), shift + SEGMENT_DEVIATION])
    reach = 5.0 * deviation
    reach[:, 2 * k - 1 :] = 0.7
    full = (n_curves, mean.shape[1])
    prior = Prior(*(np.broadcast_to(rows, full) for rows in (mean, deviation, mean - reach, mean + reach)))
    return prior, mean.mean(axis=0)


def _water_levels(places: Sequence[Template]) -> FloatArray:
    """Depth of the water level and its deviation (b, 2), m, NaN where none is known."""
    return np.array([one.water_level or (np.nan, np.nan) for one in places])


def _thickness_prior(sequence: UnitSequence, water: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Mean and deviation (b, k-1) of the log thicknesses; of a part above the water level from that level (b, 2)."""
    log_range = np.log(np.array(sequence.thickness).reshape(-1, 2))
    full = (len(water), len(log_range))
    mean = np.broadcast_to(log_range.mean(axis=1), full).copy()
    deviation = np.broadcast_to(np.diff(log_range, axis=1)[:, 0] / (2.0 * Z_95), full).copy()
    if sequence.split is not None:
        mean[:, sequence.split] = np.log(DRY_SHARE * np.maximum(water.max(axis=1), SHALLOWEST_WATER))
        deviation[:, sequence.split] = DRY_THICKNESS_DEVIATION
    return mean, deviation


def _log_water(sequence: UnitSequence, unknowns: FloatArray, template: Template, water: FloatArray) -> FloatArray:
    """Log weight (m,) of the water level on models of a sequence; water : (m or 1, 2), its depth and deviation, m.

    The part above it enters the fit with a prior of its own; the weight puts the true one in its place.
    """
    if not sequence.dry:
        return np.zeros(len(unknowns))
    k = len(sequence.units)
    water = np.broadcast_to(water, (len(unknowns), 2))
    edge = np.zeros((len(unknowns), 1))
    edges = np.hstack([edge, np.cumsum(np.exp(unknowns[:, : k - 1]), axis=1), edge + np.inf])
    split = sequence.split
    if split is None:
        coarse = [i for i, unit in enumerate(sequence.units) if template.units[unit].is_coarse]
        dry = [i for i in coarse if sequence.dry[i]]
        wet = [i for i in coarse if not sequence.dry[i]]
        return log_water_between(edges[:, dry[-1] + 1] if dry else -edges[:, k], edges[:, wet[0] if wet else k], water)
    mean, deviation = _thickness_prior(sequence, water)
    wet_part = split + 1 if split + 1 < k - 1 else None
    low, high = np.log(sequence.thickness[split])
    weight = log_split_weight(
        unknowns[:, split],
        None if wet_part is None else unknowns[:, wet_part],
        edges[:, split + 1],
        water,
        (0.5 * (low + high), (high - low) / (2.0 * Z_95)),
    )
    for part in (split, wet_part):
        if part is not None:
            weight = weight - log_normal(unknowns[:, part], mean[:, part], deviation[:, part])
    return weight


def fit_sequences(
    sequences: Sequence[UnitSequence], template: Template, curves: Curves, local: Sequence[Template] = ()
) -> list[Fit]:
    """The most probable model of each sequence for each curve, the best of several starts; local as for the prior."""
    fits = []
    for sequence in sequences:
        prior, mean = sequence_prior(sequence, template, curves, local)
        k = len(sequence.units)
        best: Fit | None = None
        for factor in START_FACTORS if k > 1 else (1.0,):
            start = mean.copy()
            start[: k - 1] += np.log(factor)
            fit = damped_steps.fit_from_afar(np.tile(start, (prior.mean.shape[0], 1)), k, curves, prior)
            best = fit if best is None else damped_steps.keep_better(best, fit)
        if best is not None:
            fits.append(best)
    return fits


def weigh_sequences(
    sequences: Sequence[UnitSequence], fits: Sequence[Fit], template: Template, local: Sequence[Template] = ()
) -> FloatArray:
    """Log of prior times evidence (q, b) by Laplace's approximation, the limits of depth applied to the best model."""
    water = _water_levels(local or (template,))
    log_weight = []
    for sequence, fit in zip(sequences, fits, strict=True):
        thickness, _ = _unit_columns(sequence, fit.unknowns, len(template.units))
        limits = _log_depth_limits(sequence, thickness, template)
        # At one model alone the water level is told too sharply; the draws weigh it in full.
        level = np.maximum(_log_water(sequence, fit.unknowns, template, water), MOST_AGAINST)
        log_weight.append(sequence.log_prior + fit.log_evidence + limits + level)
    return np.array(log_weight)


def _log_depth_limits(sequence: UnitSequence, thickness: FloatArray, template: Template) -> FloatArray:
    """Log weight (m,) of the template's limits on the depth of each unit's top, for unit thicknesses (m, u)."""
    top = np.cumsum(np.nan_to_num(thickness), axis=1) - np.nan_to_num(thickness)
    total = np.zeros(len(thickness))
    for unit in sorted(set(sequence.units)):
        limits = template.units[unit].depth_to_top
        # A unit that begins the column may be cut off by the ground; a buried aquifer may not.
        if limits and (unit != sequence.units[0] or template.units[unit].role is Role.DEEP_AQUIFER):
            total += log_within(top[:, unit], limits)
    return total


def log_within(depth: FloatArray, limits: tuple[float, float]) -> FloatArray:
    """Log weight of a depth (m) under soft limits: 0 inside, falling as a normal tail in log depth outside."""
    log_depth = np.log(np.maximum(depth, 0.1))
    beyond = np.maximum(np.maximum(np.log(max(limits[0], 0.1)) - log_depth, log_depth - np.log(limits[1])), 0.0)
    return np.asarray(-0.5 * (beyond / DEPTH_LIMIT_DEVIATION) ** 2)


def draw_columns(
    sequences: Sequence[UnitSequence],
    fits: Sequence[Fit],
    log_weight: FloatArray,
    curves: Curves,
    template: Template,
    options: InterpretationOptions,
    generator: np.random.Generator,
) -> ColumnDraws:
    """Columns of one curve; `fits` and `curves` are batches of one, `log_weight` (q,) by Laplace's approximation.

    Sequences within reach of the best are sampled together by importance, which corrects both their weights and their
    draws; what is pooled from them is resampled to `options.draws` columns of equal weight.
    """
    kept = np.flatnonzero(log_weight > log_weight.max() - LEAST_LOG_WEIGHT)
    densities = [_as_density(sequences[q], fits[q], curves, template) for q in kept.tolist()]
    sampled = ensembles.sample_densities(densities, curves, _effort(options), generator)
    columns = [
        (
            *_unit_columns(sequences[q], members.unknowns, len(template.units)),
            _dry_columns(sequences[q], members.unknowns, len(template.units)),
        )
        for q, members in zip(kept.tolist(), sampled, strict=True)
    ]
    h, r, above = (np.concatenate(parts) for parts in zip(*columns, strict=True))
    reached = np.repeat([sequences[q].reaches for q in kept.tolist()], [len(own) for own, *_ in columns])
    pooled = np.concatenate([members.log_weight for members in sampled])
    # In the order of the columns' depth, an even spread over the weights is one over depths.
    order = np.lexsort((np.nansum(h, axis=1), reached))
    rows = order[ensembles.resample(pooled[order], options.draws, generator)]
    with_contact, without = (np.logaddexp.reduce(pooled[mask], initial=-np.inf) for mask in (reached, ~reached))
    bayes = float(np.clip(with_contact - without, -LEAST_LOG_WEIGHT, LEAST_LOG_WEIGHT))
    drawn_dry = above[rows] if template.water_level else np.empty((0, 0))
    return ColumnDraws(h[rows], r[rows], reached[rows], bayes, drawn_dry)


def _effort(options: InterpretationOptions) -> Effort:
    return Effort(
        first=round(FIRST_PER_DRAW * options.draws),
        fewest=FEWEST_MEMBERS,
        each=round(EACH_PER_DRAW * options.draws),
        at_once=HEAVIEST_AT_ONCE,
        rounds=MOST_ROUNDS,
        enough=ENOUGH_PER_DRAW * options.draws,
    )


def _as_density(sequence: UnitSequence, fit: Fit, curves: Curves, template: Template) -> Density:
    """A sequence of one curve as a density to sample from, with limits of depth and the water level."""
    prior, _ = sequence_prior(sequence, template, curves)

    def log_limits(unknowns: FloatArray) -> FloatArray:
        thickness, _ = _unit_columns(sequence, unknowns, len(template.units))
        water = _log_water(sequence, unknowns, template, _water_levels([template]))
        return _log_depth_limits(sequence, thickness, template) + water

    return Density(fit, len(sequence.units), prior, sequence.log_prior, log_limits)


def _unit_columns(sequence: UnitSequence, unknowns: FloatArray, n_units: int) -> tuple[FloatArray, FloatArray]:
    """Thickness and log resistivity (m, u) of each unit; of its layers, thicknesses add up and the thickest speaks.

    A layer above the water level adds to its unit's thickness and does not speak for its resistivity.
    """
    k = len(sequence.units)
    thickness, log_resistivity = np.zeros((len(unknowns), n_units)), np.full((len(unknowns), n_units), np.nan)
    thickest = np.zeros_like(thickness)
    for i, unit in enumerate(sequence.units):
        own = np.exp(unknowns[:, i]) if i < k - 1 else np.full(len(unknowns), np.inf)
        thickness[:, unit] += own if i < k - 1 else np.nan
        if sequence.dry and sequence.dry[i]:
            continue
        thicker = own > thickest[:, unit]
        log_resistivity[thicker, unit] = unknowns[thicker, k - 1 + i]
        thickest[thicker, unit] = own[thicker]
    return thickness, log_resistivity


def _dry_columns(sequence: UnitSequence, unknowns: FloatArray, n_units: int) -> FloatArray:
    """Thickness (m, u) of each unit above the water level, m."""
    dry = np.zeros((len(unknowns), n_units))
    for i, unit in enumerate(sequence.units):
        if sequence.dry and sequence.dry[i]:
            dry[:, unit] += np.exp(unknowns[:, i])
    return dry


def best_half_space(sequences: Sequence[UnitSequence], fits: Sequence[Fit], log_weight: FloatArray) -> HalfSpace:
    """The most probable model of one curve that ends above the basal contact."""
    ending = [q for q, sequence in enumerate(sequences) if not sequence.reaches]
    q = max(ending, key=lambda index: log_weight[index])
    k = len(sequences[q].units)
    model = np.exp(fits[q].unknowns[0, : 2 * k - 1])
    return HalfSpace(model[: k - 1], model[k - 1 :])
