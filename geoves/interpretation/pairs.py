"""Soundings beside wells: the log fixes the layers, the curve gives their resistivities, the template learns.

What several pairs say of a unit is taken as places of one population, whose mean and spread have the template as their
prior (empirical Bayes, as for the survey's own curves); it is adopted where it predicts pairs that were left out.
"""

from collections.abc import Mapping, Sequence
from itertools import product

import attrs
import numpy as np

from geoves.domain.arrays import FloatArray
from geoves.domain.earth import Inverted
from geoves.domain.survey import Sounding, Well
from geoves.domain.tops import PairCalibration, PairedUnit, WellPair, WellReading
from geoves.domain.units import Role, Template
from geoves.interpretation.calibration import MEAN_STRENGTH, ROUNDS, SETTLED, SPREAD_STRENGTH, with_range
from geoves.interpretation.options import InterpretationOptions, lateral_deviation
from geoves.interpretation.sequences import SEGMENT_DEVIATION
from geoves.interpretation.surroundings import Surroundings
from geoves.interpretation.water import log_normal
from geoves.kernels import damped_steps, layered_earth
from geoves.kernels.damped_steps import Curves, Fit, Prior, Readings

# Of a unit's log resistivity before its curve speaks: the template only says where to begin.
BROAD_DEVIATION = 1.0
# A curve that knows a unit's log resistivity worse than this beside its well says nothing of it.
LARGEST_ERROR = 0.5
# Beyond this mean square of residuals over errors, or with more of the readings set aside, the log does not fit.
LARGEST_MISFIT, MOST_ASIDE = 2.0, 0.2
# Gaps in a log up to this, m, are slips of the pen.
LEAST_GAP = 0.1
# A skin of soil as a share of the cover, and the siltier part of a clay; natural log of the doubt of that share.
SKIN_SHARE, PART_SHARE, SHARE_DEVIATION = 0.25, 0.35, 0.4
# The log's own layers stand unless finer ones have this much more evidence (natural log).
FINER_GAIN = 3.0
# Pairs of fewer wells cannot be left out to any purpose.
FEWEST_WELLS = 3


@attrs.frozen
class PairEstimate:
    """A pair, and each unit's log resistivity there with its error (u,), NaN where it says nothing."""

    pair: WellPair
    value: FloatArray
    error: FloatArray


@attrs.frozen
class LogLayers:
    """Layers of a log from the top down: each one's unit (index), its thickness, m, and how well its log is known.

    The last is a half-space of its own unit where that is rock, else of whatever lies under the well.
    """

    units: tuple[int, ...]
    thickness: tuple[float, ...]
    deviation: tuple[float, ...]
    under: int | None


def estimate_pairs(
    pairs: Sequence[tuple[Sounding, Inverted]],
    wells: Sequence[tuple[Well, Sequence[WellReading]]],
    around: Mapping[str, Surroundings],
    template: Template,
    options: InterpretationOptions,
    crs_metres: float,
) -> list[PairEstimate]:
    """Every sounding within `pair_distance` of a well with a log, as the log's layers under its curve."""
    found = []
    for (sounding, inverted), (well, read) in product(pairs, wells):
        distance = crs_metres * float(np.hypot(sounding.easting - well.easting, sounding.northing - well.northing))
        if distance > options.pair_distance or not read:
            continue
        pair = WellPair(well.name, sounding.name, distance, np.nan, _find_fault(well, read, options))
        nothing = np.full(len(template.units), np.nan)
        estimate = PairEstimate(pair, nothing, nothing)
        if not pair.miss:
            estimate = _estimate_pair(pair, read, (sounding, inverted), template, options)
            estimate = _leave_out_water(estimate, read, around[sounding.name], template)
        found.append(estimate)
    return found


def _find_fault(well: Well, read: Sequence[WellReading], options: InterpretationOptions) -> str:
    """Why a log cannot serve; empty where it can."""
    if well.location_accuracy is not None and well.location_accuracy > options.pair_distance:
        return f"the well's place is known to {well.location_accuracy:.0f} m only"
    if any(one.unit is None for one in read):
        return "the log has words that no unit claims"
    above = [0.0, *(one.bottom for one in read[:-1])]
    if any(one.top - bottom > LEAST_GAP for one, bottom in zip(read, above, strict=True)):
        return "the log has gaps"
    return "" if len({one.unit for one in read}) > 1 else "the log has one unit only"


def _estimate_pair(
    pair: WellPair,
    read: Sequence[WellReading],
    place: tuple[Sounding, Inverted],
    template: Template,
    options: InterpretationOptions,
) -> PairEstimate:
    sounding, inverted = place
    readings = Readings(*sounding.curve.readings(inverted.noise))
    wavenumber = layered_earth.shared_wavenumbers([(readings.half_spacing, readings.potential_half_spacing)])
    curves = damped_steps.stack_curves([readings], wavenumber)
    tries = []
    for layers in _layer_variants(read, template, lateral_deviation(pair.distance, options), options):
        prior, start = _layer_prior(layers, template, curves)
        tries.append(
            (damped_steps.fit_layers(start, len(layers.units) + (layers.under is None), curves, prior), layers)
        )
    plain = float(tries[0][0].log_evidence[0]) + FINER_GAIN
    fit, layers = max(tries, key=lambda one: max(float(one[0].log_evidence[0]), plain if one is tries[0] else -np.inf))
    misfit, aside = _judge_fit(fit, len(layers.units) + (layers.under is None), curves)
    miss = "" if misfit <= LARGEST_MISFIT and aside <= MOST_ASIDE else "the curve does not fit the log's layers"
    pair = attrs.evolve(pair, misfit=misfit, miss=miss)
    value, error = np.full(len(template.units), np.nan), np.full(len(template.units), np.nan)
    if not miss:
        value, error = _read_resistivities(fit, layers, template)
    return PairEstimate(pair, value, error)


def _layer_variants(
    read: Sequence[WellReading], template: Template, lateral: float, options: InterpretationOptions
) -> list[LogLayers]:
    """The log's layers as they are, first; with a skin on the cover, with a clay of two parts, and with both."""
    units: list[int] = []
    edges = [0.0]
    for one in read:
        code = template.codes.index(one.unit or "")
        if units and units[-1] == code:
            edges[-1] = one.bottom
        else:
            units.append(code)
            edges.append(one.bottom)
    rock = template.units[units[-1]].role is Role.BEDROCK
    ways: list[list[tuple[int, float, float]]] = [[]]
    for position, unit in enumerate(units[:-1] if rock else units):
        top, bottom = edges[position], edges[position + 1]
        error = np.hypot(options.well_contact_error, options.well_relative_error * bottom)
        deviation = float(np.hypot(lateral, np.sqrt(2.0) * error / (bottom - top)))
        whole = [(unit, bottom - top, deviation)]
        choices = [whole]
        role, last = template.units[unit].role, not rock and position == len(units) - 1
        if not last and ((role is Role.COVER and position == 0) or role is Role.CONFINING):
            share, spread = (
                (SKIN_SHARE if role is Role.COVER else PART_SHARE),
                float(np.hypot(deviation, SHARE_DEVIATION)),
            )
            choices.append([(unit, share * (bottom - top), spread), (unit, (1.0 - share) * (bottom - top), deviation)])
        if last:
            # The well ends in it: it goes on for as much again, or several times that.
            choices = [[(unit, 2.0 * (bottom - top), 1.0)]]
        ways = [way + choice for way in ways for choice in choices]
    under = units[-1] if rock else None
    return [
        LogLayers((*(u for u, _, _ in way), *units[len(units) - rock :]), tuple(h for _, h, _ in way),
                  tuple(d for _, _, d in way), under)
        for way in ways
    ]  # fmt: skip


def _layer_prior(layers: LogLayers, template: Template, curves: Curves) -> tuple[Prior, FloatArray]:
    """Thicknesses from the log, resistivities all but free, so that of what lies under the well too."""
    n_segments = curves.segments.shape[2]
    middle = float(np.mean(curves.log_apparent_resistivity))
    log_resistivity = [template.log_resistivity_means[unit] for unit in layers.units]
    log_resistivity += [middle] if layers.under is None else []
    k = len(log_resistivity)
    mean = np.concatenate([np.log(layers.thickness), log_resistivity, np.zeros(n_segments)])
    deviation = np.concatenate([layers.deviation, np.full(k, BROAD_DEVIATION), np.full(n_segments, SEGMENT_DEVIATION)])
    reach = np.concatenate([4.0 * deviation[: 2 * k - 1], np.full(n_segments, 0.7)])
    prior = Prior(*(row[None] for row in (mean, deviation, mean - reach, mean + reach)))
    return prior, mean[None]


def _judge_fit(fit: Fit, n_layers: int, curves: Curves) -> tuple[float, float]:
    """Mean square of residuals over errors, bad readings down-weighted, and the share of readings set aside."""
    factors = curves.segments[0] @ fit.unknowns[0, 2 * n_layers - 1 :]
    residual = (curves.log_apparent_resistivity[0] - fit.log_response[0] - factors) / curves.deviation[0]
    weight = fit.robust_weight[0]
    return float(np.sum(weight * residual**2) / max(weight.sum(), 1e-9)), float(np.mean(weight < 0.5))


def _read_resistivities(fit: Fit, layers: LogLayers, template: Template) -> tuple[FloatArray, FloatArray]:
    """Each unit's log resistivity and error (u,) by the curve alone, the prior taken out; the thickest layer's."""
    thickness = np.append(fit.unknowns[0, : len(layers.thickness)], np.inf)
    first = len(layers.thickness)
    variance = np.diag(np.linalg.inv(fit.hessian[0]))[first:]
    value, error = np.full(len(template.units), np.nan), np.full(len(template.units), np.nan)
    for unit in set(layers.units):
        layer = max((i for i, one in enumerate(layers.units) if one == unit), key=lambda i: thickness[i])
        gain = 1.0 / variance[layer] - BROAD_DEVIATION**-2
        if gain < LARGEST_ERROR**-2:
            continue
        before = template.log_resistivity_means[unit] / BROAD_DEVIATION**2
        value[unit] = (fit.unknowns[0, first + layer] / variance[layer] - before) / gain
        error[unit] = gain**-0.5
    return value, error


def _leave_out_water(
    estimate: PairEstimate, read: Sequence[WellReading], here: Surroundings, template: Template
) -> PairEstimate:
    """An estimate as under typical water; of coarse units that the water level may reach, nothing."""
    value = estimate.value - np.array([here.log_shift.get(unit.role, 0.0) for unit in template.units])
    if here.water_level is not None:
        deepest = sum(here.water_level)
        dry = {one.unit for one in read if one.top < deepest}
        value = np.where([unit.is_coarse and unit.code in dry for unit in template.units], np.nan, value)
    return attrs.evolve(estimate, value=value, error=np.where(np.isnan(value), np.nan, estimate.error))


def learn_from_pairs(
    template: Template, estimates: Sequence[PairEstimate], options: InterpretationOptions
) -> tuple[Template, PairCalibration]:
    """The template with the ranges that the pairs bear out, and what they said.

    A unit's range moves where `fewest_pairs` pairs of three wells know it and the moved range, learned without the
    pairs of a well, gives those a higher probability than the typed one, summed over the wells (natural log: `gain`).
    """
    units, told = [], []
    for i, unit in enumerate(template.units):
        known = [one for one in estimates if np.isfinite(one.value[i])]
        value, error = np.array([one.value[i] for one in known]), np.array([one.error[i] for one in known])
        well = np.array([one.pair.well for one in known])
        prior = unit.log_resistivity_mean, unit.log_resistivity_deviation
        gain = np.nan
        new = unit
        if len(known) >= options.fewest_pairs and len(set(well.tolist())) >= FEWEST_WELLS:
            gain = leave_wells_out(value, error, well, prior)
            new = with_range(unit, *find_population(value, error, prior))
        used = bool(gain > 0.0)
        before, after = ((one.resistivity_p05, one.resistivity_p95) for one in (unit, new))
        told.append(PairedUnit(unit.code, before, after, len(known), gain, used))
        units.append(new if used else unit)
    pairs = tuple(one.pair for one in estimates)
    calibration = PairCalibration(options.pair_distance, options.fewest_pairs, pairs, tuple(told))
    return attrs.evolve(template, units=tuple(units)), calibration


def find_population(value: FloatArray, error: FloatArray, prior: tuple[float, float]) -> tuple[float, float]:
    """Mean and spread of the places that values (n,) with errors were measured at, the prior speaking like some more.

    Expectation maximisation; a value counts the less, the greater its error beside the spread.
    """
    mean, deviation = prior
    for _ in range(ROUNDS):
        before = mean
        share = deviation**2 / (deviation**2 + error**2)
        place = share * value + (1.0 - share) * mean
        mean = float((np.sum(place) + MEAN_STRENGTH * prior[0]) / (value.size + MEAN_STRENGTH))
        square = np.sum((place - mean) ** 2 + share * error**2) + SPREAD_STRENGTH * prior[1] ** 2
        deviation = float(np.sqrt(square / (value.size + SPREAD_STRENGTH)))
        if abs(mean - before) < SETTLED:
            break
    return mean, deviation


def leave_wells_out(value: FloatArray, error: FloatArray, well: FloatArray, prior: tuple[float, float]) -> float:
    """By how much (natural log) the pairs of each well are more probable under what the other wells' pairs teach."""
    gain = 0.0
    for name in np.unique(well):
        out = well == name
        for sign, (mean, deviation) in ((1.0, find_population(value[~out], error[~out], prior)), (-1.0, prior)):
            gain += sign * float(np.sum(log_normal(value[out], mean, np.hypot(deviation, error[out]))))
    return gain


def paired_soundings(calibration: PairCalibration | None) -> set[str]:
    """Soundings whose pairs moved the template."""
    if calibration is None or not any(unit.used for unit in calibration.units):
        return set()
    return {pair.sounding for pair in calibration.pairs if not pair.miss}


def tell_pairs(calibration: PairCalibration | None) -> tuple[str, ...]:
    """What the pairs did, and which of them missed."""
    if calibration is None:
        return ()
    found, missed = calibration.pairs, [pair for pair in calibration.pairs if pair.miss]
    many = (
        "1 pair of a sounding and a logged well stands"
        if len(found) == 1
        else (f"{len(found)} pairs of a sounding and a logged well stand")
    )
    near = f"{many} within {calibration.distance:.0f} m"
    words = f"{near}; {len(found) - len(missed)} of them can serve to calibrate the template"
    moved = [unit.unit for unit in calibration.units if unit.used]
    tried = [unit for unit in calibration.units if np.isfinite(unit.gain)]
    if moved:
        words += f": the ranges of {', '.join(moved)} were moved, which predicts left-out wells better"
    elif tried:
        words += ": no range was moved, since none would predict left-out wells better"
    else:
        words += f"; {calibration.fewest}, of {FEWEST_WELLS} wells, are needed, so that no range was moved by them"
    names = "; ".join(f"{one.well} with {one.sounding} ({one.miss})" for one in missed)
    return (f"{words}." + (f" Missed: {names}." if missed else ""),)
