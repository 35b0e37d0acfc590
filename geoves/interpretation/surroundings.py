"""What the wells around a sounding say of its ground before its curve speaks."""

from collections.abc import Mapping, Sequence

import attrs
import numpy as np

from geoves.domain.survey import Survey
from geoves.domain.tops import Top, WaterShift, WellReading, WellWater
from geoves.domain.units import Role, Template, Unit
from geoves.interpretation.beside_well import LogBeside, find_log_beside, read_contacts
from geoves.interpretation.conductance import FEWEST_WATERS, find_well_waters, name_shifts, shift_by_water
from geoves.interpretation.options import InterpretationOptions
from geoves.interpretation.water import carry_water_level, find_water_wells


@attrs.frozen
class Surroundings:
    """Of one sounding.

    water_level : depth of the water table and its deviation, m; None where it is not known
    log_shift : natural log of the factor that the wells' water puts on the resistivity of the units of a role
    beside : the nearest log, None where none is near enough
    """

    water_level: tuple[float, float] | None = None
    log_shift: Mapping[Role, float] = attrs.field(factory=dict)
    beside: LogBeside | None = None

    def localise(self, template: Template) -> Template:
        """The template as it stands here."""
        units = tuple(_shift_unit(unit, self.log_shift.get(unit.role, 0.0)) for unit in template.units)
        return attrs.evolve(template, units=units, water_level=self.water_level)


def _shift_unit(unit: Unit, log_shift: float) -> Unit:
    factor = float(np.exp(log_shift))
    low, high = factor * unit.resistivity_p05, factor * unit.resistivity_p95
    return attrs.evolve(unit, resistivity_p05=low, resistivity_p95=high) if log_shift else unit


@attrs.frozen
class Wells:
    """What the wells of a survey say around them: surroundings by sounding, and in words and numbers what was done."""

    around: Mapping[str, Surroundings]
    waters: tuple[WellWater, ...]
    shifts: tuple[WaterShift, ...]
    remarks: tuple[str, ...]


def find_surroundings(
    survey: Survey,
    readings: Sequence[Sequence[WellReading]],
    tops: Sequence[Sequence[Top]],
    template: Template,
    options: InterpretationOptions,
) -> Wells:
    """What each well's log (`readings` and `tops`), water level and water say of the soundings around it."""
    metres, reach = survey.crs_unit_metres, options.water_level_reach
    water_wells, heads = find_water_wells(survey.wells, readings, template, metres) if reach else ([], [])
    levels = {one.name: carry_water_level(one, water_wells, metres, reach) for one in survey.soundings}
    waters = find_well_waters(survey.wells, readings, template, options)
    shifts = shift_by_water(survey.soundings, survey.wells, waters, options.conductance_range, metres)
    told = name_shifts(shifts, survey.soundings, survey.wells, waters, metres)
    remarks = (*_tell_water(levels, [well.name for well in water_wells], heads), *_tell_waters(waters, told, survey))
    contacts = [read_contacts(read, top, template, options) for read, top in zip(readings, tops, strict=True)]
    logs = list(zip(survey.wells, contacts, strict=True)) if options.conditioning_distance > 0 else []
    beside = {one.name: find_log_beside(one, logs, options.conditioning_distance, metres) for one in survey.soundings}
    around = {name: Surroundings(levels[name], shifts[name], beside[name]) for name in levels}
    return Wells(around, waters, told, remarks)


def _tell_waters(waters: Sequence[WellWater], told: Sequence[WaterShift], survey: Survey) -> tuple[str, ...]:
    """What the specific conductances did, where any was typed."""
    typed = sum(well.specific_conductance is not None for well in survey.wells)
    if not typed:
        return ()
    counts = {role: sum(water.role == role for water in waters) for role in (Role.SHALLOW_AQUIFER, Role.DEEP_AQUIFER)}
    known = f"Of {typed} wells with a specific conductance {len(waters)} end in an aquifer"
    if all(count < FEWEST_WATERS for count in counts.values()):
        return (f"{known}; {FEWEST_WATERS} of one aquifer are needed, so that no range was shifted by its water.",)
    if not told:
        return (f"{known}; their water differs too little, or too far away, to shift a range.",)
    low, high = min(one.factor for one in told), max(one.factor for one in told)
    places = len({one.sounding for one in told})
    by = f"by factors of {low:.2f} to {high:.2f}"
    return (f"{known}; by their water the aquifers' ranges were shifted at {places} soundings, {by}.",)


def _tell_water(
    levels: Mapping[str, tuple[float, float] | None], shown: Sequence[str], heads: Sequence[str]
) -> tuple[str, ...]:
    remarks = []
    reached = sum(level is not None for level in levels.values())
    if shown:
        remarks.append(
            f"The water level of {_name(shown)} was carried to {reached} soundings: coarse ground above it is read as "
            "drained, more resistive than the template's range."
        )
    if heads:
        remarks.append(
            f"The water level of {_name(heads)} was not taken as the water table: a confining unit lies above the "
            "well's end, or its log is not wholly understood."
        )
    return tuple(remarks)


def _name(wells: Sequence[str], most: int = 4) -> str:
    """Names of a few wells, the number of more.

    >>> _name(["W-1"]), _name(["W-1", "W-2", "W-3"], most=2)
    ('well W-1', 'wells W-1, W-2 and 1 more')
    """
    more = f" and {len(wells) - most} more" if len(wells) > most else ""
    return f"well{'s' if len(wells) > 1 else ''} {', '.join(wells[:most])}{more}"
