"""The water table that wells show, carried to soundings, and what it does to coarse ground above it.

Coarse ground above the water level keeps little water and is several times as resistive as below it: a class of its
own, without which a curve's high resistivities would be read into the aquifer under it.
"""

from collections.abc import Sequence

import attrs
import numpy as np
from scipy.special import log_ndtr, ndtr

from geoves.domain.arrays import FloatArray
from geoves.domain.survey import Sounding, Well
from geoves.domain.tops import WellReading
from geoves.domain.units import Z_95, Role, Template
from geoves.kernels.petrophysics import saturation_factor

# Share of the pores that water fills in drained gravel and sand, moist to dry, and Archie's exponent (common practice;
# Reynolds 2011, table 7.1, has dry gravel at 14 times saturated gravel).
SATURATIONS, SATURATION_EXPONENT = (0.7, 0.25), 2.0
DRY_FACTORS = tuple(saturation_factor(np.array(SATURATIONS), SATURATION_EXPONENT).tolist())
DRY_LOG_MEAN = float(np.mean(np.log(DRY_FACTORS)))
DRY_LOG_DEVIATION = float(np.diff(np.log(DRY_FACTORS))[0] / (2.0 * Z_95))
# Of a water level between the driller's day and the survey's, m, and what each metre of distance adds to its doubt.
WATER_LEVEL_ERROR, WATER_LEVEL_GROWTH = 0.7, 0.002
# A well is never nearer than this, m: places of wells and spreads are known no better.
NEAREST = 50.0
LEAST_PROBABILITY = 1e-9


@attrs.frozen
class WaterWell:
    """A well that shows the water table: coordinates in m, ground elevation m (NaN where unknown), depth to water m."""

    name: str
    easting: float
    northing: float
    ground_elevation: float
    depth: float


def find_water_wells(
    wells: Sequence[Well], readings: Sequence[Sequence[WellReading]], template: Template, crs_metres: float
) -> tuple[list[WaterWell], list[str]]:
    """Wells whose water level is the water table, and the names of those with a level that may be another aquifer's.

    Under a confining unit water stands at the head of the aquifer below. A level counts as the water table where all
    of the log's words are understood and none of its intervals is confining.
    """
    confining = {unit.code for unit in template.with_role(Role.CONFINING)}
    shown, not_shown = [], []
    for well, read in zip(wells, readings, strict=True):
        if well.water_level is None:
            continue
        units = {one.unit for one in read}
        if not units or None in units or units & confining:
            not_shown.append(well.name)
            continue
        place = well.easting * crs_metres, well.northing * crs_metres
        shown.append(WaterWell(well.name, *place, well.ground_elevation, well.water_level))
    return shown, not_shown


def carry_water_level(
    sounding: Sounding, wells: Sequence[WaterWell], crs_metres: float, reach: float
) -> tuple[float, float] | None:
    """Depth of the water table at a sounding and its standard deviation (m), None where no well is within `reach` m.

    Between wells a water table follows the ground in part: half of the difference in elevation is taken, and as much
    stands for its doubt. Wells count by the inverse of their variance.
    """
    depths, variances = [], []
    for well in wells:
        east, north = sounding.easting * crs_metres - well.easting, sounding.northing * crs_metres - well.northing
        distance = np.hypot(east, north)
        if distance > reach:
            continue
        half = float(np.nan_to_num(0.5 * (sounding.ground_elevation - well.ground_elevation)))
        depths.append(well.depth + half)
        variances.append((WATER_LEVEL_GROWTH * max(distance, NEAREST)) ** 2 + half**2)
    if not depths:
        return None
    weight = 1.0 / np.array(variances)
    depth = float(np.sum(weight * depths) / weight.sum())
    return depth, float(np.hypot(WATER_LEVEL_ERROR, weight.sum() ** -0.5))


def log_water_between(upper: FloatArray, lower: FloatArray, water: FloatArray) -> FloatArray:
    """Log probability (m,) that the water level lies between two depths (m,); water : (m, 2), mean and deviation."""
    low, high = ((edge - water[:, 0]) / water[:, 1] for edge in (upper, lower))
    return np.asarray(np.log(np.maximum(ndtr(high) - ndtr(low), LEAST_PROBABILITY)))


def log_split_weight(
    dry: FloatArray, wet: FloatArray | None, level: FloatArray, water: FloatArray, own: tuple[float, float]
) -> FloatArray:
    """Log density (m,) of a unit cut by the water level, over the logs of the thicknesses of its two parts.

    dry, wet : (m,) log thickness, `wet` None where it is the half-space    level : (m,) m, where the cut lies
    own : mean and deviation of the whole unit's log thickness. The whole has its own prior, the cut that of the water
    level; a wet half-space is at least thicker than nothing.
    """
    at_level = log_normal(level, water[:, 0], water[:, 1])
    if wet is None:
        return np.asarray(at_level + dry + log_ndtr((own[0] - dry) / own[1]))
    whole = np.logaddexp(dry, wet)
    return np.asarray(at_level + log_normal(whole, *own) - whole + dry + wet)


def log_normal(values: FloatArray, mean: FloatArray | float, deviation: FloatArray | float) -> FloatArray:
    """Log density of a normal distribution."""
    return np.asarray(-0.5 * ((values - mean) / deviation) ** 2 - np.log(deviation) - 0.5 * np.log(2.0 * np.pi))
