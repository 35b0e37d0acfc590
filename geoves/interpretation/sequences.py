"""Every admissible sequence of units as a layered model with the template's priors, weighed by its evidence."""

from collections.abc import Sequence
from itertools import combinations

import attrs
import numpy as np

from geoves.domain.arrays import BoolArray, FloatArray
from geoves.domain.units import Z_95, Role, Template
from geoves.interpretation.options import THICKNESS_BY_ROLE, InterpretationOptions
from geoves.kernels import damped_steps, ensembles
from geoves.kernels.damped_steps import Curves, Fit, Prior

# A skin of soil above the cover proper: thickness in m, and how much wider than the cover its resistivity spreads.
SKIN_THICKNESS, SKIN_WIDENING = (0.3, 3.0), 2.0
# The two parts of a confining unit that is not of a piece: one may be siltier. Thickness of each, m.
PART_THICKNESS = (2.0, 80.0)
# The template's limits of a unit's depth are soft: one standard deviation beyond them, in natural logs.
DEPTH_LIMIT_DEVIATION = 0.15
# Factors on the prior's thicknesses that the search starts from.
START_FACTORS = (0.5, 1.8)
SEGMENT_DEVIATION = 0.05
# Members weighed in each sequence for each column that is kept in the end.
SAMPLES_PER_DRAW = 2
# Sequences this much (nats) behind the best are not drawn from, and no Bayes factor is stated beyond it.
LEAST_LOG_WEIGHT = 7.0


@attrs.frozen
class UnitSequence:
    """Layers from the top down, each by its unit's index in the template and the range of its thickness (m).

    A unit may have two layers: a skin of soil on the cover, a siltier part of the clay. `reaches` is False where the
    sequence ends above the basal contact, its last layer being the half-space. `widening` stretches the spread of a
    layer's log resistivity.
    """

    units: tuple[int, ...]
    thickness: tuple[tuple[float, float], ...]
    widening: tuple[float, ...]
    reaches: bool
    log_prior: float


@attrs.frozen
class ColumnDraws:
    """Columns drawn for one sounding from its weighed sequences.

    thickness : (m, u) m, 0 where a unit is absent, of the half-space not a number
    log_resistivity : (m, u), NaN where absent    reaches : (m,) the basal contact lies within the model
    log_bayes_factor : of sequences with the basal contact against those that end above it
    """

    thickness: FloatArray
    log_resistivity: FloatArray
    reaches: BoolArray
    log_bayes_factor: float


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


def sequence_prior(sequence: UnitSequence, template: Template, curves: Curves) -> tuple[Prior, FloatArray]:
    """Prior (b, p) of a sequence and the mean (p,) from which its search starts."""
    layers = list(sequence.units)
    k, n_curves, n_segments = len(layers), curves.segments.shape[0], curves.segments.shape[2]
    log_range = np.log(np.array(sequence.thickness).reshape(-1, 2))
    mean = np.concatenate([log_range.mean(axis=1), template.log_resistivity_means[layers], np.zeros(n_segments)])
    deviation = np.concatenate(
        [
            np.diff(log_range, axis=1)[:, 0] / (2.0 * Z_95),
            template.log_resistivity_deviations[layers] * sequence.widening,
            np.full(n_segments, SEGMENT_DEVIATION),
        ]
    )
    reach = 5.0 * deviation
    reach[2 * k - 1 :] = 0.7
    full = (n_curves, mean.size)
    return Prior(*(np.broadcast_to(row, full) for row in (mean, deviation, mean - reach, mean + reach))), mean


def fit_sequences(sequences: Sequence[UnitSequence], template: Template, curves: Curves) -> list[Fit]:
    """The most probable model of each sequence for each curve, the best of several starts."""
    fits = []
    for sequence in sequences:
        prior, mean = sequence_prior(sequence, template, curves)
        k = len(sequence.units)
        best: Fit | None = None
        for factor in START_FACTORS if k > 1 else (1.0,):
            start = mean.copy()
            start[: k - 1] += np.log(factor)
            fit = damped_steps.fit_layers(np.tile(start, (prior.mean.shape[0], 1)), k, curves, prior)
            best = fit if best is None else damped_steps.keep_better(best, fit)
        if best is not None:
            fits.append(best)
    return fits


def weigh_sequences(sequences: Sequence[UnitSequence], fits: Sequence[Fit], template: Template) -> FloatArray:
    """Log of prior times evidence (q, b) by Laplace's approximation, the limits of depth applied to the best model."""
    log_weight = []
    for sequence, fit in zip(sequences, fits, strict=True):
        thickness, _ = _unit_columns(sequence, fit.unknowns, len(template.units))
        log_weight.append(sequence.log_prior + fit.log_evidence + _log_depth_limits(sequence, thickness, template))
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

    Sequences within reach of the best are sampled by importance, which corrects both their weight and their draws;
    what is pooled from them is resampled to `options.draws` columns of equal weight.
    """
    kept = np.flatnonzero(log_weight > log_weight.max() - LEAST_LOG_WEIGHT)
    per_sequence = SAMPLES_PER_DRAW * options.draws
    thickness, log_resistivity, reaches, weight = [], [], [], []
    for q in kept.tolist():
        sequence = sequences[q]
        prior, _ = sequence_prior(sequence, template, curves)
        members = ensembles.sample_importance(fits[q], len(sequence.units), curves, prior, per_sequence, generator)
        h, r = _unit_columns(sequence, members.unknowns, len(template.units))
        thickness.append(h)
        log_resistivity.append(r)
        reaches.append(np.full(len(h), sequence.reaches))
        # Of one sequence, members share its prior; their mean weight is its evidence.
        weight.append(
            sequence.log_prior + members.log_weight - np.log(len(h)) + _log_depth_limits(sequence, h, template)
        )
    h, r, reached, pooled = (np.concatenate(parts) for parts in (thickness, log_resistivity, reaches, weight))
    rows = ensembles.resample(pooled, options.draws, generator)
    with_contact, without = (np.logaddexp.reduce(pooled[mask], initial=-np.inf) for mask in (reached, ~reached))
    bayes = float(np.clip(with_contact - without, -LEAST_LOG_WEIGHT, LEAST_LOG_WEIGHT))
    return ColumnDraws(h[rows], r[rows], reached[rows], bayes)


def _unit_columns(sequence: UnitSequence, unknowns: FloatArray, n_units: int) -> tuple[FloatArray, FloatArray]:
    """Thickness and log resistivity (m, u) of each unit; of its layers, thicknesses add up and the thickest speaks."""
    k = len(sequence.units)
    thickness, log_resistivity = np.zeros((len(unknowns), n_units)), np.full((len(unknowns), n_units), np.nan)
    thickest = np.zeros_like(thickness)
    for i, unit in enumerate(sequence.units):
        own = np.exp(unknowns[:, i]) if i < k - 1 else np.full(len(unknowns), np.inf)
        thickness[:, unit] += own if i < k - 1 else np.nan
        thicker = own > thickest[:, unit]
        log_resistivity[thicker, unit] = unknowns[thicker, k - 1 + i]
        thickest[thicker, unit] = own[thicker]
    return thickness, log_resistivity


def best_half_space(sequences: Sequence[UnitSequence], fits: Sequence[Fit], log_weight: FloatArray) -> HalfSpace:
    """The most probable model of one curve that ends above the basal contact."""
    ending = [q for q, sequence in enumerate(sequences) if not sequence.reaches]
    q = max(ending, key=lambda index: log_weight[index])
    k = len(sequences[q].units)
    model = np.exp(fits[q].unknowns[0, : 2 * k - 1])
    return HalfSpace(model[: k - 1], model[k - 1 :])
