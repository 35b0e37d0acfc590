"""The interpreter's picks held against a sounding's columns: which meet a pick, and what the curve pays for it."""

from collections.abc import Sequence

import attrs
import numpy as np
from scipy.special import ndtr

from geoves.domain.arrays import FloatArray
from geoves.domain.survey import Pick
from geoves.domain.tops import PickOpinion
from geoves.domain.units import Role, Template
from geoves.interpretation.beside_well import LEAST_SHARE
from geoves.interpretation.options import InterpretationOptions
from geoves.interpretation.sequences import ColumnDraws, UnitSequence, sequence_prior
from geoves.interpretation.soundings import PRESENT, BasalContact
from geoves.kernels import damped_steps
from geoves.kernels.damped_steps import Curves, Fit
from geoves.kernels.ensembles import resample

# A pick that the curve holds to be less probable than this is flagged; it is never overruled.
CONTRADICTED = 0.01
# A pick without an error, and a bound, is this soft: a share of its depth. An absence, m.
SOFTNESS, ABSENT_SOFTNESS = 0.05, 0.5
# What a column pays (nats) that has not the unit whose top was decided; that ends above it.
LACKING, ENDING_ABOVE = -50.0, -8.0
# Sequences that a pick is tried on, the heaviest first, and fits in a row that move the layer above it into place.
SEQUENCES_TRIED, ROUNDS = 12, 4
# Of the layer above a decided contact: its share where the others take up all the depth; deviation of its log.
LEAST_REST, HELD = 0.1, 0.01


@attrs.frozen
class Choice:
    """One curve with every sequence that was weighed for it, its fit and its log weight (q,)."""

    sequences: Sequence[UnitSequence]
    fits: Sequence[Fit]
    log_weight: FloatArray
    curve: Curves


def hold_to_picks(
    draws: ColumnDraws, picks: Sequence[Pick], template: Template, generator: np.random.Generator
) -> ColumnDraws:
    """The columns resampled by how well they meet the picks; as they are where hardly any does."""
    if not picks:
        return draws
    log_weight = np.sum([_meet_pick(draws, pick, template) for pick in picks], axis=0)
    share = np.exp(log_weight - np.logaddexp.reduce(log_weight))
    if log_weight.max() <= ENDING_ABOVE or 1.0 / np.sum(share**2) < LEAST_SHARE * share.size:
        return draws
    return draws.take(resample(log_weight, share.size, generator))


def _meet_pick(draws: ColumnDraws, pick: Pick, template: Template) -> FloatArray:
    """Log weight (m,) of a pick on each column."""
    unit = template.codes.index(pick.unit)
    above, own = draws.thickness[:, :unit], draws.thickness[:, unit]
    ends_above = np.isnan(above).any(axis=1)
    top = np.nansum(above, axis=1)
    lacking = ~ends_above & (own == 0.0)
    if pick.status == "absent" or pick.depth is None:
        there = np.where(np.isnan(own), np.inf, own)
        weight = -0.5 * (np.where(ends_above, 0.0, there) / ABSENT_SOFTNESS) ** 2
        return np.asarray(np.maximum(weight, LACKING))
    softness = SOFTNESS * max(pick.depth, 1.0)
    if pick.status == "below":
        weight = -0.5 * (np.maximum(pick.depth - top, 0.0) / softness) ** 2
        return np.where(lacking | ends_above, 0.0, weight)
    weight = -0.5 * ((top - pick.depth) / (pick.depth_error or softness)) ** 2
    return np.where(lacking, LACKING, np.where(ends_above, ENDING_ABOVE, np.maximum(weight, LACKING)))


def weigh_picks(
    contact: BasalContact, picks: Sequence[Pick], choice: Choice, template: Template, options: InterpretationOptions
) -> tuple[PickOpinion, ...]:
    """What the curve, before the picks were applied, says of each pick that speaks of the basal contact or the rock."""
    roles = {unit.code: unit.role for unit in template.units}
    basal = (Role.DEEP_AQUIFER, Role.BEDROCK)
    opinions = []
    for pick in picks:
        if roles[pick.unit] not in basal:
            continue
        said = _weigh_pick(contact, pick, roles[pick.unit])
        paid = pay_for_pick(pick, choice, template)
        against = said.against or paid.chi_square > options.notice_chi_square
        opinions.append(
            attrs.evolve(said, against=against, rms_percent=paid.rms_percent, free_rms_percent=paid.free_rms_percent)
        )
    return tuple(opinions)


def _weigh_pick(contact: BasalContact, pick: Pick, role: Role) -> PickOpinion:
    depth = contact.rock if role is Role.BEDROCK else contact.depth
    if contact.status == "deeper_than" or not depth.size:
        excluded = pick.status == "at" and pick.depth is not None and pick.depth < contact.bound
        return PickOpinion(pick, np.nan, np.nan, contact.bound, excluded)
    probability = np.nan
    if pick.status == "absent":
        probability = float(np.mean(contact.gravel < PRESENT))
    elif pick.status == "below" and pick.depth is not None:
        probability = float(np.mean(depth > pick.depth))
    elif pick.depth is not None:
        spread = np.hypot(np.std(np.log(depth)), (pick.depth_error or 0.05 * pick.depth) / pick.depth)
        away = abs(np.log(pick.depth) - np.mean(np.log(depth))) / spread
        probability = float(2.0 * ndtr(-away))
    return PickOpinion(pick, probability, float(np.median(depth)), contact.bound, probability < CONTRADICTED)


@attrs.frozen
class Payment:
    """Root mean square misfit, %, with a pick and without, and how much chi-square it adds; NaN and 0 where untried."""

    rms_percent: float
    free_rms_percent: float
    chi_square: float


def pay_for_pick(pick: Pick, choice: Choice, template: Template) -> Payment:
    """How much worse the best model fits that honours a pick, readings weighed as in the best model of all.

    A decided contact is tried at its depth and one error to either side; the layer above it takes up what the others
    leave. "below" is met by models that end above the contact, or have it deeper.
    """
    ranked = np.argsort(-choice.log_weight)
    best = choice.fits[ranked[0]]
    weight = best.robust_weight[0]
    curve = choice.curve
    known = np.isfinite(curve.deviation[0])
    scale = np.where(known, curve.deviation[0], 1.0)

    def square(fit: Fit, n_layers: int) -> FloatArray:
        factors = curve.segments[0] @ fit.unknowns[0, 2 * n_layers - 1 :]
        return np.where(known, (curve.log_apparent_resistivity[0] - fit.log_response[0] - factors) ** 2, 0.0)

    tried = [q for q in ranked.tolist() if _may_honour(choice.sequences[q], pick, template)][:SEQUENCES_TRIED]
    squares = [
        square(fit, len(choice.sequences[q].units))
        for q in tried
        for fit in _honour(pick, choice.sequences[q], choice.fits[q], curve, template)
    ]
    if not squares:
        return Payment(np.nan, np.nan, 0.0)
    free = [square(choice.fits[q], len(choice.sequences[q].units)) for q in ranked[:SEQUENCES_TRIED].tolist()]

    def chi(one: FloatArray) -> float:
        return float(np.sum(weight * one / scale**2))

    held = min(squares, key=chi)
    # What honours the pick may fit as well as anything.
    unheld = min([*free, held], key=chi)
    total = max(float(np.sum(weight * known)), 1e-9)
    rms, free_rms = (100.0 * float(np.sqrt(np.sum(weight * one) / total)) for one in (held, unheld))
    return Payment(rms, free_rms, chi(held) - chi(unheld))


def _may_honour(sequence: UnitSequence, pick: Pick, template: Template) -> bool:
    """Whether a sequence can meet a pick at all."""
    has = template.codes.index(pick.unit) in sequence.units
    return not has if pick.status == "absent" else has or pick.status == "below"


def _honour(pick: Pick, sequence: UnitSequence, fit: Fit, curve: Curves, template: Template) -> list[Fit]:
    """Fits of a sequence that meet a pick."""
    unit = template.codes.index(pick.unit)
    if pick.status == "absent" or pick.depth is None or unit not in sequence.units:
        return [fit]
    first = sequence.units.index(unit)
    depth = float(np.exp(fit.unknowns[0, :first]).sum())
    if pick.status == "below" and depth > pick.depth:
        return [fit]
    error = (pick.depth_error or SOFTNESS * pick.depth) if pick.status == "at" else 0.0
    depths = {max(pick.depth + step * error, 0.2 * pick.depth) for step in (-1.0, 0.0, 1.0)}
    return [_hold_depth(one, first, sequence, fit, curve, template) for one in sorted(depths)] if first else []


def _hold_depth(
    depth: float, first: int, sequence: UnitSequence, fit: Fit, curve: Curves, template: Template
) -> Fit:  # fmt: skip
    """The sequence fitted anew with the top of its layer `first` held at a depth (m)."""
    prior, _ = sequence_prior(sequence, template, curve, [template])
    mean, deviation, lowest, highest = (rows.copy() for rows in prior)
    last, k = first - 1, len(sequence.units)
    unknowns = fit.unknowns.copy()
    for _ in range(ROUNDS):
        others = float(np.exp(unknowns[0, :last]).sum())
        if others > (1.0 - LEAST_REST) * depth:
            unknowns[0, :last] += np.log((1.0 - LEAST_REST) * depth / others)
            others = (1.0 - LEAST_REST) * depth
        rest = np.log(depth - others)
        unknowns[0, last] = mean[0, last] = rest
        deviation[0, last] = HELD
        lowest[0, last], highest[0, last] = rest - 3.0 * HELD, rest + 3.0 * HELD
        held = damped_steps.fit_layers(unknowns, k, curve, damped_steps.Prior(mean, deviation, lowest, highest))
        unknowns = held.unknowns.copy()
    return held
