"""What the specific conductance of wells' water says of an aquifer's resistivity around them.

In clean gravel resistivity goes with that of the water in its pores, the formation factor staying what it is (Archie
1942). Wells whose water differs from the survey's typical water shift the range around them.
"""

from collections.abc import Mapping, Sequence

import attrs
import numpy as np

from geoves.domain.arrays import FloatArray
from geoves.domain.survey import Sounding, Well
from geoves.domain.tops import WaterShift, WellReading, WellWater
from geoves.domain.units import Role, Template
from geoves.interpretation.options import InterpretationOptions
from geoves.kernels.petrophysics import water_resistivity

# With fewer waters of one aquifer there is no typical water to compare them with.
FEWEST_WATERS = 3
# Natural log: a sample's conductance as that of the water in the pores around a well, its season and mixing included.
WATER_ERROR = 0.1
# A shift smaller than this (natural log) is not worth telling.
LEAST_TOLD = 0.02
SHIFTED_ROLES = (Role.SHALLOW_AQUIFER, Role.DEEP_AQUIFER)


def find_well_waters(
    wells: Sequence[Well], readings: Sequence[Sequence[WellReading]], template: Template, options: InterpretationOptions
) -> tuple[WellWater, ...]:
    """Waters of the aquifers that wells end in; a well that ends in rock or clay, or without a log, tells of neither.

    The water's resistivity is that at the ground's temperature. Its factor is that on the aquifer's resistivity, over
    the median of the waters of the same aquifer; 1 where there are too few of them.
    """
    role = {unit.code: unit.role for unit in template.units}
    found = []
    for well, read in zip(wells, readings, strict=True):
        ends_in = next((role[one.unit] for one in reversed(read) if one.unit), None)
        if well.specific_conductance is None or ends_in not in SHIFTED_ROLES:
            continue
        resistivity = float(water_resistivity(np.array(well.specific_conductance), options.ground_temperature))
        found.append(WellWater(well.name, ends_in.value, well.specific_conductance, resistivity, 1.0))
    by_role = {one: [water.resistivity for water in found if water.role == one] for one in SHIFTED_ROLES}
    typical = {one: np.median(all_of) for one, all_of in by_role.items() if len(all_of) >= FEWEST_WATERS}
    return tuple(
        attrs.evolve(water, factor=float(water.resistivity / typical[Role(water.role)]))
        if water.role in typical
        else water
        for water in found
    )


def shift_by_water(
    soundings: Sequence[Sounding], wells: Sequence[Well], waters: Sequence[WellWater], reach: float, crs_metres: float
) -> dict[str, dict[Role, float]]:
    """Natural log of the factor on each aquifer's resistivity at each sounding; aquifers without one are left out.

    Simple kriging of the log factors about 0, their covariance falling by e over `reach` m: close to a well its own
    factor, all but a share for its error; far from all wells none.
    """
    place = {well.name: (well.easting * crs_metres, well.northing * crs_metres) for well in wells}
    shifts: dict[str, dict[Role, float]] = {sounding.name: {} for sounding in soundings}
    for role in SHIFTED_ROLES:
        mine = [water for water in waters if water.role == role]
        values = np.log([water.factor for water in mine])
        if reach <= 0 or len(mine) < FEWEST_WATERS or not np.any(values):
            continue
        at = np.array([place[water.well] for water in mine])
        sill = float(np.mean(values**2))
        weight = np.linalg.solve(sill * _fall(at, at, reach) + WATER_ERROR**2 * np.eye(len(mine)), values)
        to = np.array([(one.easting * crs_metres, one.northing * crs_metres) for one in soundings]).reshape(-1, 2)
        for sounding, shift in zip(soundings, sill * _fall(to, at, reach) @ weight, strict=True):
            shifts[sounding.name][role] = float(shift)
    return shifts


def _fall(to: FloatArray, at: FloatArray, reach: float) -> FloatArray:
    """Correlation (n, m) of places (n, 2) and (m, 2), m."""
    return np.asarray(np.exp(-np.hypot(*(to[:, None] - at[None]).transpose(2, 0, 1)) / reach))


def name_shifts(
    shifts: Mapping[str, Mapping[Role, float]],
    soundings: Sequence[Sounding],
    wells: Sequence[Well],
    waters: Sequence[WellWater],
    crs_metres: float,
) -> tuple[WaterShift, ...]:
    """The shifts that are worth telling, each with the nearest well of that aquifer and its distance (m)."""
    place = {well.name: well for well in wells}
    told = []
    for sounding in soundings:
        for role, shift in shifts[sounding.name].items():
            if abs(shift) < LEAST_TOLD:
                continue
            near = [
                (
                    crs_metres * np.hypot(place[one.well].easting - sounding.easting,
                                          place[one.well].northing - sounding.northing),
                    one.well,
                )
                for one in waters
                if one.role == role
            ]  # fmt: skip
            distance, well = min(near)
            told.append(WaterShift(sounding.name, role.value, float(np.exp(shift)), well, float(distance)))
    return tuple(told)
