"""The step itself: all places of a survey, block by block."""

from collections.abc import Callable, Iterable, Iterator, Sequence
from functools import partial
from itertools import chain
from typing import Any, NamedTuple

import attrs
import numpy as np

from geoves.domain.arrays import FloatArray
from geoves.domain.earth import Inverted
from geoves.domain.survey import Pick, Sounding, Survey, Well
from geoves.domain.tops import (
    Interpretation,
    PairCalibration,
    ShallowResistivity,
    Thickness,
    Top,
    UnitCalibration,
    UnitColumn,
    WellReading,
)
from geoves.domain.units import Role, Template
from geoves.interpretation import sequences, soundings, wells
from geoves.interpretation.beside_well import condition_draws
from geoves.interpretation.calibration import calibrate_template
from geoves.interpretation.options import ABOVE_CONFINING, InterpretationOptions
from geoves.interpretation.pairs import estimate_pairs, learn_from_pairs, paired_soundings, tell_pairs
from geoves.interpretation.picks import Choice, hold_to_picks, weigh_picks
from geoves.interpretation.surroundings import Surroundings, find_surroundings
from geoves.kernels import damped_steps, layered_earth
from geoves.kernels.blocks import cut_blocks, restore_order
from geoves.kernels.damped_steps import Readings

Map = Callable[[Callable[[Any], Any], Iterable[Any]], Iterable[Any]]


class Place(NamedTuple):
    """One sounding with all that its reading rests on beside the template: a block of them is whole in itself."""

    sounding: Sounding
    inverted: Inverted
    around: Surroundings
    picks: tuple[Pick, ...]


@attrs.frozen
class PlaceReading:
    """What one place adds to the interpretation."""

    column: UnitColumn | None = None
    well_readings: tuple[WellReading, ...] = ()
    tops: tuple[Top, ...] = ()
    thicknesses: tuple[Thickness, ...] = ()
    shallow_resistivities: tuple[ShallowResistivity, ...] = ()


def interpret(
    survey: Survey,
    inverted: Sequence[Inverted],
    template: Template,
    options: InterpretationOptions | None = None,
    *,
    map: Map = map,  # noqa: A002 - the seam is named for what it replaces
) -> Interpretation:
    """Every sounding that was inverted and every well, read through the template, with the picks on top.

    Columns come in the order of `inverted`. Soundings are weighed in blocks through the map-like callable.
    """
    options = options or InterpretationOptions()
    by_name = {sounding.name: sounding for sounding in survey.soundings}
    picks = {pick.place: [p for p in survey.picks if p.place == pick.place] for pick in survey.picks}
    logged = [_interpret_well(well, picks.get(well.name, []), template, options) for well in survey.wells]
    presence = _presence_at_wells(logged, template, options)
    log_readings, log_tops = [one.well_readings for one in logged], [one.tops for one in logged]
    known = find_surroundings(survey, log_readings, log_tops, template, options)
    readings: list[PlaceReading] = []
    calibration: tuple[UnitCalibration, ...] = ()
    places = [
        Place(by_name[one.sounding].measured, one, known.around[one.sounding], tuple(picks.get(one.sounding, ())))
        for one in inverted
    ]
    template, paired = _learn_from_wells(survey, places, logged, template, options)
    if places:
        wavenumber = layered_earth.shared_wavenumbers(
            (place.sounding.curve.half_spacing, place.sounding.curve.potential_half_spacing) for place in places
        )
        rows = cut_blocks([one.sounding for one in inverted], options.block)
        order = restore_order(rows)
        blocks = [[places[row] for row in block] for block in rows]
        if options.calibrate:
            sample = partial(
                _sample_block,
                template=template,
                presence=presence,
                options=options,
                wavenumber=wavenumber,
            )
            drawn = list(chain.from_iterable(map(sample, blocks)))
            # What taught the template as a pair does not teach it again.
            spoken = paired_soundings(paired)
            heard = [drawn[place] for place, one in zip(order, inverted, strict=True) if one.sounding not in spoken]
            template, calibration = calibrate_template(template, heard, options.fewest_to_calibrate)
        work = partial(
            _interpret_block,
            template=template,
            presence=presence,
            options=options,
            wavenumber=wavenumber,
        )
        read = list(chain.from_iterable(map(work, blocks)))
        readings += [read[place] for place in order]
    readings += logged
    words = tuple(chain.from_iterable(reading.well_readings for reading in readings))
    return Interpretation(
        columns=tuple(reading.column for reading in readings if reading.column),
        well_readings=words,
        tops=tuple(chain.from_iterable(reading.tops for reading in readings)),
        thicknesses=tuple(chain.from_iterable(reading.thicknesses for reading in readings)),
        shallow_resistivities=tuple(chain.from_iterable(r.shallow_resistivities for r in readings)),
        calibration=calibration,
        unmapped_words=tuple(sorted({word.description for word in words if word.unit is None})),
        remarks=(*known.remarks, *tell_pairs(paired)),
        pair_calibration=paired,
        well_waters=known.waters,
        water_shifts=known.shifts,
    )


def _learn_from_wells(
    survey: Survey,
    places: Sequence[Place],
    logged: Sequence[PlaceReading],
    template: Template,
    options: InterpretationOptions,
) -> tuple[Template, PairCalibration | None]:
    """The template as pairs of soundings and wells would have it, None for what they said where none was looked for."""
    if not survey.wells or options.pair_distance <= 0:
        return template, None
    read = [(well, reading.well_readings) for well, reading in zip(survey.wells, logged, strict=True)]
    pairs = [(place.sounding, place.inverted) for place in places]
    around = {place.sounding.name: place.around for place in places}
    estimates = estimate_pairs(pairs, read, around, template, options, survey.crs_unit_metres)
    return learn_from_pairs(template, estimates, options)


def _presence_at_wells(
    logged: Sequence[PlaceReading], template: Template, options: InterpretationOptions
) -> FloatArray:
    """Prior probability (u,) of each unit: for the aquifers, what the wells that passed or met them say.

    The option stands for two wells more, so that no few wells make a unit certain or impossible.
    """
    presence = np.full(len(template.units), options.presence)
    for i, unit in enumerate(template.units):
        told = [row.thickness > 0 for reading in logged for row in reading.thicknesses if row.role == unit.role]
        presence[i] = (sum(told) + 2.0 * options.presence) / (len(told) + 2.0)
    return presence


def _sample_block(
    places: Sequence[Place],
    *,
    template: Template,
    presence: FloatArray,
    options: InterpretationOptions,
    wavenumber: FloatArray,
) -> list[FloatArray]:
    """Log resistivities (m, u) of the columns drawn for each sounding, for the calibration: as under typical water."""
    local = [place.around.localise(template) for place in places]
    weighed = _weigh_block(places, local, presence, options, wavenumber)
    shifts = [one.log_resistivity_means - template.log_resistivity_means for one in local]
    return [draws.log_resistivity - shift for shift, (draws, *_) in zip(shifts, weighed, strict=True)]


def _weigh_block(
    places: Sequence[Place],
    local: Sequence[Template],
    presence: FloatArray,
    options: InterpretationOptions,
    wavenumber: FloatArray,
) -> Iterator[tuple[sequences.ColumnDraws, float, Choice]]:
    """Columns drawn for each sounding of a block, the depth above which basal material is excluded, and the choice.

    local : the template as it stands at each sounding
    """
    curves = damped_steps.stack_curves(
        [Readings(*one.sounding.curve.readings(one.inverted.noise)) for one in places], wavenumber
    )
    wet = np.array([one.water_level is not None for one in local])
    weighed: dict[int, tuple[Sequence[sequences.UnitSequence], list[damped_steps.Fit], FloatArray]] = {}
    for rows in (np.flatnonzero(~wet).tolist(), np.flatnonzero(wet).tolist()):
        if rows:
            alike = [local[i] for i in rows]
            weighed |= dict(zip(rows, _weigh_alike(alike, curves.take(np.array(rows)), presence), strict=True))
    for i, (sounding, *_) in enumerate(places):
        generator = np.random.default_rng([options.random_seed, *sounding.name.encode()])
        admissible, own_fits, own_weight = weighed[i]
        own_curve = curves.take(np.array([i]))
        draws = sequences.draw_columns(admissible, own_fits, own_weight, own_curve, local[i], options, generator)
        half_space = sequences.best_half_space(admissible, own_fits, own_weight)
        bound = soundings.excluded_depth(half_space, own_curve, local[i], options)
        yield draws, bound, Choice(admissible, own_fits, own_weight, own_curve)


def _weigh_alike(
    local: Sequence[Template], curves: damped_steps.Curves, presence: FloatArray
) -> Iterator[tuple[Sequence[sequences.UnitSequence], list[damped_steps.Fit], FloatArray]]:
    """The sequences that stand to choice at places that all know their water level, or all don't; for each place
    their fits and log weights.
    """
    template = local[0]
    admissible = sequences.admissible_sequences(template, presence)
    if template.water_level is not None:
        admissible = sequences.cut_at_water(admissible, template)
    fits = sequences.fit_sequences(admissible, template, curves, local)
    log_weight = sequences.weigh_sequences(admissible, fits, template, local)
    for i in range(len(local)):
        yield admissible, [fit.take(i) for fit in fits], log_weight[:, i]


def _interpret_block(
    places: Sequence[Place],
    *,
    template: Template,
    presence: FloatArray,
    options: InterpretationOptions,
    wavenumber: FloatArray,
) -> list[PlaceReading]:
    local = [place.around.localise(template) for place in places]
    weighed = _weigh_block(places, local, presence, options, wavenumber)
    deep = soundings.role_mask(template, Role.DEEP_AQUIFER)
    gravel_prior = float(1.0 - np.prod(1.0 - presence[deep])) if np.any(deep) else np.nan
    results = []
    for place, here, (draws, bound, choice) in zip(places, local, weighed, strict=True):
        reading = _read_sounding(place, draws, bound, choice, here, options)
        column = None if reading.column is None else attrs.evolve(reading.column, gravel_prior=gravel_prior)
        results.append(attrs.evolve(reading, column=column))
    return results


def _read_sounding(
    place: Place,
    draws: sequences.ColumnDraws,
    bound: float,
    choice: Choice,
    template: Template,
    options: InterpretationOptions,
) -> PlaceReading:
    """What a sounding adds, its inferred contact overruled by the interpreter's picks.

    What is kriged is the curve's own; the column that is shown is conditioned by the log beside it.
    """
    sounding, inverted, around, picks = place
    inferred = soundings.find_basal_contact(draws, bound, template, options)
    opinions = weigh_picks(inferred, picks, choice, template, options)
    seed = [options.random_seed, *sounding.name.encode(), len(picks)]
    draws = hold_to_picks(draws, picks, template, np.random.default_rng(seed))
    held = attrs.evolve(
        soundings.find_basal_contact(draws, bound, template, options), status=inferred.status, bound=inferred.bound
    )
    contact = soundings.apply_picks(held, picks, template, np.random.default_rng(seed))
    shown, beside = condition_draws(draws, bound, around.beside, template, options, np.random.default_rng(seed))
    shown_contact = contact
    if beside is not None and beside.agrees:
        met = soundings.find_basal_contact(shown, bound, template, options)
        met = attrs.evolve(met, status=inferred.status, bound=inferred.bound)
        shown_contact = soundings.apply_picks(met, picks, template, np.random.default_rng(seed))
    decided = contact.picks[-1] if contact.picks else None
    source = f"pick by {decided.interpreter}: {decided.reason}" if decided else "curve"
    thicknesses: list[Thickness] = []
    for role, values in (
        (Role.DEEP_AQUIFER, contact.gravel if contact.status != "deeper_than" else np.empty(0)),
        *((role, draws.thickness[:, soundings.role_mask(template, role)].sum(axis=1)) for role in ABOVE_CONFINING),
    ):
        known = values[~np.isnan(values)]
        if template.with_role(role) and known.size:
            thicknesses += soundings.role_thickness(sounding, known, role, source)
    decided_absent = soundings.absent_thickness(sounding, picks, template)
    replaced = {row.role for row in decided_absent}
    tops = soundings.contact_tops(sounding, contact, template, options)
    return PlaceReading(
        column=attrs.evolve(soundings.read_column(inverted, shown, shown_contact, template, opinions), beside=beside),
        tops=(*tops, *soundings.other_picks(sounding, picks, template)),
        thicknesses=(*(row for row in thicknesses if row.role not in replaced), *decided_absent),
        shallow_resistivities=tuple(soundings.shallow_resistivity(sounding, draws, template)),
    )


def _interpret_well(well: Well, picks: list[Pick], template: Template, options: InterpretationOptions) -> PlaceReading:
    readings = wells.read_log(well, template, options)
    tops, thicknesses = wells.well_tops(well, readings, template, options)
    tops, thicknesses = wells.apply_well_picks(tops, thicknesses, well, picks, template)
    return PlaceReading(well_readings=tuple(readings), tops=tuple(tops), thicknesses=tuple(thicknesses))
