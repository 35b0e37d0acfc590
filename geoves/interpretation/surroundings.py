"""What the wells around a sounding say of its ground before its curve speaks."""

from collections.abc import Mapping, Sequence

import attrs

from geoves.domain.survey import Survey
from geoves.domain.tops import WellReading
from geoves.domain.units import Template
from geoves.interpretation.options import InterpretationOptions
from geoves.interpretation.water import carry_water_level, find_water_wells


@attrs.frozen
class Surroundings:
    """Of one sounding. water_level : depth of the water table and its deviation, m; None where it is not known."""

    water_level: tuple[float, float] | None = None

    def localise(self, template: Template) -> Template:
        """The template as it stands here."""
        return attrs.evolve(template, water_level=self.water_level)


def find_surroundings(
    survey: Survey, readings: Sequence[Sequence[WellReading]], template: Template, options: InterpretationOptions
) -> tuple[Mapping[str, Surroundings], tuple[str, ...]]:
    """Surroundings by sounding, and remarks on what was done with the wells. readings : of each well's log."""
    metres, reach = survey.crs_unit_metres, options.water_level_reach
    water_wells, heads = find_water_wells(survey.wells, readings, template, metres) if reach else ([], [])
    levels = {one.name: carry_water_level(one, water_wells, metres, reach) for one in survey.soundings}
    remarks = _tell_water(levels, [well.name for well in water_wells], heads)
    return {name: Surroundings(level) for name, level in levels.items()}, remarks


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
