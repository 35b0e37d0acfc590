"""What the survey's own curves say of the template: each unit's resistivities, their mean and their spread.

The template is a judgement made before the survey; where many curves pass through a unit they know it better. Every
unit's log resistivities are one normal population whose mean and spread have the template as their prior; the
population is found by expectation maximisation over the columns drawn under the template as it was typed
(empirical Bayes: Efron and Morris 1975, Journal of the American Statistical Association 70, 311-319, from memory).
"""

from collections.abc import Sequence

import attrs
import numpy as np

from geoves.domain.arrays import FloatArray
from geoves.domain.tops import UnitCalibration
from geoves.domain.units import Z_95, Template, Unit

# The template speaks like so many places for the mean, and for the spread.
MEAN_STRENGTH, SPREAD_STRENGTH = 4.0, 20.0
ROUNDS, SETTLED = 30, 1e-3


def calibrate_template(
    template: Template, log_resistivity: Sequence[FloatArray], fewest: int
) -> tuple[Template, tuple[UnitCalibration, ...]]:
    """The template with ranges that the survey bears out, and what was changed.

    log_resistivity : for each sounding (m, u), of equally probable columns drawn under the template, NaN where absent
    fewest : soundings' worth of presence that a unit needs to be calibrated at all
    """
    mean, deviation = template.log_resistivity_means, template.log_resistivity_deviations
    if not log_resistivity:
        return template, ()
    draws = np.array(log_resistivity)
    present = ~np.isnan(draws)
    values = np.where(present, draws, 0.0)
    new_mean, new_deviation = mean.copy(), deviation.copy()
    for _ in range(ROUNDS):
        log_ratio = np.where(
            present, _log_normal(values, new_mean, new_deviation) - _log_normal(values, mean, deviation), 0
        )
        weight = np.exp(log_ratio.sum(axis=2) - log_ratio.sum(axis=2).max(axis=1, keepdims=True))
        weight /= weight.sum(axis=1, keepdims=True)
        share = weight[..., None] * present
        count = share.sum(axis=(0, 1))
        before = new_mean
        new_mean = ((share * values).sum(axis=(0, 1)) + MEAN_STRENGTH * mean) / (count + MEAN_STRENGTH)
        square = (share * (values - new_mean) ** 2).sum(axis=(0, 1)) + SPREAD_STRENGTH * deviation**2
        new_deviation = np.sqrt(square / (count + SPREAD_STRENGTH))
        if np.max(np.abs(new_mean - before)) < SETTLED:
            break
    told = count >= fewest
    new_mean, new_deviation = np.where(told, new_mean, mean), np.where(told, new_deviation, deviation)
    units = tuple(with_range(unit, m, s) for unit, m, s in zip(template.units, new_mean, new_deviation, strict=True))
    return attrs.evolve(template, units=units), tuple(
        UnitCalibration(
            old.code, (old.resistivity_p05, old.resistivity_p95), (new.resistivity_p05, new.resistivity_p95),
            float(n), bool(used),
        )
        for old, new, n, used in zip(template.units, units, count, told, strict=True)
    )  # fmt: skip


def _log_normal(values: FloatArray, mean: FloatArray, deviation: FloatArray) -> FloatArray:
    """Log density up to a constant."""
    return np.asarray(-0.5 * ((values - mean) / deviation) ** 2 - np.log(deviation))


def with_range(unit: Unit, mean: float, deviation: float) -> Unit:
    """A unit whose log resistivity has this mean and deviation."""
    low, high = np.exp(mean - Z_95 * deviation), np.exp(mean + Z_95 * deviation)
    return attrs.evolve(unit, resistivity_p05=float(low), resistivity_p95=float(high))
