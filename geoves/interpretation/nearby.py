"""A well beside a sounding: its contacts weigh the sounding's columns, the less the farther away it stands."""

from collections.abc import Sequence

import attrs
import numpy as np
from scipy.special import log_ndtr

from geoves.domain.arrays import FloatArray
from geoves.domain.survey import Sounding
from geoves.domain.tops import Top
from geoves.interpretation.options import InterpretationOptions
from geoves.interpretation.soundings import BasalContact
from geoves.kernels.ensembles import resample

# How well a well foretells the log depth of a contact at the edge of its reach, in natural logs; growing as distance.
SPREAD_AT_REACH = 0.3


def condition_on_wells(
    contact: BasalContact,
    sounding: Sounding,
    well_tops: Sequence[Top],
    options: InterpretationOptions,
    generator: np.random.Generator,
) -> BasalContact:
    """The contact with its draws weighed by wells within `well_reach` (unit of the CRS) and the wells' names noted.

    A curve that bounds the contact only, or that nothing is drawn for, is left as it is: the well has a row of its own.
    """
    beside = [
        (top, distance)
        for top in well_tops
        if top.contact in {"basal", "bedrock"}
        and (distance := float(np.hypot(top.easting - sounding.easting, top.northing - sounding.northing)))
        <= options.well_reach
    ]
    if not beside or contact.status == "deeper_than" or contact.depth.size < 2:
        return contact
    log_weight = np.zeros(contact.depth.size)
    for top, distance in beside:
        depth = contact.depth if top.contact == "basal" else contact.rock
        log_weight += _log_likelihood(depth, top, sounding, SPREAD_AT_REACH * distance / options.well_reach)
    rows = resample(log_weight, contact.depth.size, generator)
    # Few distinct draws left would look like certainty: what the weighing cannot tell apart is spread again.
    spread = SPREAD_AT_REACH * min(distance for _, distance in beside) / options.well_reach
    distinct = np.unique(rows).size / rows.size
    jitter = np.exp(np.sqrt(1.0 - distinct) * 0.5 * spread * generator.standard_normal(rows.size))
    depth = contact.depth[rows] * jitter
    return attrs.evolve(
        contact,
        depth=depth,
        gravel=contact.gravel[rows],
        log_deviation=float(np.std(np.log(depth))),
        wells=tuple(sorted({top.place for top, _ in beside})),
    )


def _log_likelihood(depth: FloatArray, top: Top, sounding: Sounding, spread: float) -> FloatArray:
    """Log weight (m,) of drawn depths, the well's contact carried over at its elevation."""
    expected = sounding.ground_elevation - top.elevation
    if not np.isfinite(expected) or expected <= 0:
        return np.zeros(depth.size)
    error = np.nan_to_num(top.standard_error, nan=0.0) / expected
    away = (np.log(depth) - np.log(expected)) / np.hypot(error, max(spread, 0.02))
    return np.asarray(log_ndtr(away) if top.status == "below" else -0.5 * away**2)
