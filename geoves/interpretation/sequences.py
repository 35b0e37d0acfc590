"""Every admissible sequence of units as a layered model with the template's priors, weighed by its evidence."""

from collections.abc import Sequence
from itertools import combinations

import attrs
import numpy as np
from numpy.typing import NDArray

from geoves.domain.arrays import BoolArray, FloatArray
from geoves.domain.units import Z_95, Role, Template
from geoves.interpretation.options import THICKNESS_BY_ROLE, InterpretationOptions
from geoves.kernels import damped_steps
from geoves.kernels.damped_steps import Curves, Fit, Prior

# A skin of soil above the cover proper: thickness in m, and how much wider than the cover its resistivity spreads.
SKIN_THICKNESS, SKIN_WIDENING = (0.3, 3.0), 2.0
# The template's limits of a unit's depth are soft: one standard deviation beyond them, in natural logs.
DEPTH_LIMIT_DEVIATION = 0.15
# Factors on the prior's thicknesses that the search starts from.
START_FACTORS = (0.4, 1.0, 2.5)
SEGMENT_DEVIATION = 0.05
# Sequences that weigh less than this are not drawn from.
LEAST_WEIGHT = 2e-3


@attrs.frozen
class UnitSequence:
    """Units from the top down by their index in the template. `skin`: the first layer is a skin of the second's unit.

    `reaches` is False where the sequence ends above the basal contact, its last layer being the half-space.
    """

    units: tuple[int, ...]
    skin: bool
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


def admissible_sequences(template: Template, presence: float) -> tuple[UnitSequence, ...]:
    """All sequences in the template's order: each unit above bedrock present or not, at least one of them.

    Those that end above the basal contact weigh as much together as those that reach it.
    """
    bedrock = next(i for i, unit in enumerate(template.units) if unit.role is Role.BEDROCK)
    roles = [unit.role for unit in template.units]
    sequences = []
    for reaches in (True, False):
        pool = [i for i in range(bedrock) if reaches or roles[i] is not Role.DEEP_AQUIFER]
        some = []
        for size in range(1, len(pool) + 1):
            for units in combinations(pool, size):
                log_prior = size * np.log(presence) + (len(pool) - size) * np.log1p(-presence)
                column = (*units, bedrock) if reaches else units
                skinned = roles[units[0]] is Role.COVER and (reaches or size > 1)
                some += [
                    UnitSequence(column, skin, reaches, log_prior + (np.log(0.5) if skinned else 0.0))
                    for skin in ((False, True) if skinned else (False,))
                ]
        total = np.logaddexp.reduce([sequence.log_prior for sequence in some])
        sequences += [attrs.evolve(sequence, log_prior=sequence.log_prior - total) for sequence in some]
    return tuple(sequences)


def layer_units(sequence: UnitSequence) -> tuple[int, ...]:
    """The unit of each layer of the model of a sequence."""
    return (sequence.units[0], *sequence.units) if sequence.skin else sequence.units


def sequence_prior(sequence: UnitSequence, template: Template, curves: Curves) -> tuple[Prior, FloatArray]:
    """Prior (b, p) of a sequence and the mean (p,) from which its search starts."""
    layers = layer_units(sequence)
    k, n_curves, n_segments = len(layers), curves.segments.shape[0], curves.segments.shape[2]
    ranges = [THICKNESS_BY_ROLE[template.units[unit].role] for unit in layers[:-1]]
    spread = template.log_resistivity_deviations[list(layers)]
    if sequence.skin:
        ranges[0] = SKIN_THICKNESS
        spread[0] *= SKIN_WIDENING
    log_range = np.log(np.array(ranges).reshape(-1, 2))
    mean = np.concatenate([log_range.mean(axis=1), template.log_resistivity_means[list(layers)], np.zeros(n_segments)])
    deviation = np.concatenate(
        [np.diff(log_range, axis=1)[:, 0] / (2.0 * Z_95), spread, np.full(n_segments, SEGMENT_DEVIATION)]
    )
    reach = np.full(mean.size, 5.0 * deviation)
    reach[2 * k - 1 :] = 0.7
    full = (n_curves, mean.size)
    return Prior(*(np.broadcast_to(row, full) for row in (mean, deviation, mean - reach, mean + reach))), mean


def fit_sequences(sequences: Sequence[UnitSequence], template: Template, curves: Curves) -> list[Fit]:
    """The most probable model of each sequence for each curve, the best of several starts."""
    fits = []
    for sequence in sequences:
        prior, mean = sequence_prior(sequence, template, curves)
        k = len(layer_units(sequence))
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
    """Log of prior times evidence (q, b), with the template's limits of depth as a soft condition on the best model."""
    return np.array(
        [
            sequence.log_prior + fit.log_evidence + _log_depth_limits(sequence, fit, template)
            for sequence, fit in zip(sequences, fits, strict=True)
        ]
    )


def _log_depth_limits(sequence: UnitSequence, fit: Fit, template: Template) -> FloatArray:
    layers = layer_units(sequence)
    k = len(layers)
    top = np.cumsum(np.exp(fit.unknowns[:, : k - 1]), axis=1)
    total = np.zeros(fit.unknowns.shape[0])
    for i, unit in enumerate(layers[1:]):
        limits = template.units[unit].depth_to_top
        if limits and unit != layers[i]:
            total += log_within(top[:, i], limits)
    return total


def log_within(depth: FloatArray, limits: tuple[float, float]) -> FloatArray:
    """Log weight of a depth (m) under soft limits: 0 inside, falling as a normal tail in log depth outside."""
    shallow = np.log(max(limits[0], 0.1)) - np.log(np.maximum(depth, 0.1))
    beyond = np.maximum(np.maximum(shallow, np.log(np.maximum(depth, 0.1) / limits[1])), 0.0)
    return np.asarray(-0.5 * (beyond / DEPTH_LIMIT_DEVIATION) ** 2)


def draw_columns(
    sequences: Sequence[UnitSequence],
    fits: Sequence[Fit],
    log_weight: FloatArray,
    template: Template,
    options: InterpretationOptions,
    generator: np.random.Generator,
) -> ColumnDraws:
    """Columns of one curve; `fits` are batches of one, `log_weight` (q,)."""
    reaches = np.array([sequence.reaches for sequence in sequences])
    bayes = np.logaddexp.reduce(log_weight[reaches]) - np.logaddexp.reduce(log_weight[~reaches])
    weight = np.exp(log_weight - log_weight.max())
    weight[weight < LEAST_WEIGHT * weight.sum()] = 0.0
    counts = generator.multinomial(options.draws, weight / weight.sum())
    thickness, log_resistivity, reached = [], [], []
    for q in np.flatnonzero(counts).tolist():
        h, r = _draw_sequence(sequences[q], fits[q], counts[q], len(template.units), generator)
        thickness.append(h)
        log_resistivity.append(r)
        reached.append(np.full(counts[q], sequences[q].reaches))
    return ColumnDraws(
        np.concatenate(thickness), np.concatenate(log_resistivity), np.concatenate(reached), float(bayes)
    )


def _draw_sequence(
    sequence: UnitSequence, fit: Fit, count: int, n_units: int, generator: np.random.Generator
) -> tuple[FloatArray, FloatArray]:
    layers = layer_units(sequence)
    k = len(layers)
    normal = generator.standard_normal((count, 1, fit.unknowns.shape[1]))
    draws = damped_steps.laplace_draws(fit, normal)[:, 0]
    thickness, log_resistivity = np.zeros((count, n_units)), np.full((count, n_units), np.nan)
    for i, unit in enumerate(layers):
        thickness[:, unit] += np.exp(draws[:, i]) if i < k - 1 else np.nan
        log_resistivity[:, unit] = draws[:, k - 1 + i]
    return thickness, log_resistivity


def best_half_space(
    sequences: Sequence[UnitSequence], fits: Sequence[Fit], log_weight: FloatArray
) -> tuple[HalfSpace, NDArray[np.int64]]:
    """The most probable model of one curve that ends above the basal contact, with the unit of each layer."""
    ending = [q for q, sequence in enumerate(sequences) if not sequence.reaches]
    q = max(ending, key=lambda index: log_weight[index])
    layers = layer_units(sequences[q])
    k = len(layers)
    model = np.exp(fits[q].unknowns[0, : 2 * k - 1])
    return HalfSpace(model[: k - 1], model[k - 1 :]), np.array(layers)
