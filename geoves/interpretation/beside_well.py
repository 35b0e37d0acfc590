"""A log beside a sounding: of the columns that fit the curve, those that meet the log's contacts count for more.

The conditioned columns are what a sounding shows. What is kriged stays the curve's own, for the well enters the
surfaces by itself: conditioned as well, it would count twice.
"""

from collections.abc import Sequence

import attrs
import numpy as np
from scipy.special import log_ndtr, ndtr

from geoves.domain.arrays import BoolArray, FloatArray
from geoves.domain.survey import Sounding, Well
from geoves.domain.tops import Top, WellBeside, WellReading
from geoves.domain.units import Role, Template
from geoves.interpretation.options import InterpretationOptions, lateral_deviation
from geoves.interpretation.sequences import ColumnDraws
from geoves.kernels.ensembles import resample

# A contact below the model lies anywhere from there, even in the log, to this much (natural log) deeper.
ROOM_BELOW = 1.5
# Of the variance between places, so much is each contact's own: gravel thins out and thickens between them.
OWN_SHARE = 0.2
# With fewer columns worth of weight than this share, curve and log do not agree, and the curve stays as it is.
LEAST_SHARE = 0.02
LEAST_PROBABILITY = 1e-12
# Of the contacts that are compared: the top of the clay, of gravel-or-rock, of rock.
CONTACTS = ("confining", "basal", "bedrock")


@attrs.frozen
class LogContact:
    """A contact of a log: its name of CONTACTS, "at" its depth or "below" it, m, with its standard error."""

    name: str
    status: str
    depth: float
    error: float


@attrs.frozen
class LogBeside:
    """The log nearest to a sounding: how far away, m, its doubtful place included."""

    well: str
    distance: float
    contacts: tuple[LogContact, ...]


def find_log_beside(
    sounding: Sounding, logs: Sequence[tuple[Well, tuple[LogContact, ...]]], reach: float, crs_metres: float
) -> LogBeside | None:
    """The nearest log with contacts within `reach` m, None where there is none."""
    found = [
        LogBeside(well.name, _distance(sounding, well, crs_metres), contacts) for well, contacts in logs if contacts
    ]
    nearest = min(found, key=lambda one: one.distance, default=None)
    return nearest if nearest and nearest.distance <= reach else None


def _distance(sounding: Sounding, well: Well, crs_metres: float) -> float:
    away = crs_metres * np.hypot(sounding.easting - well.easting, sounding.northing - well.northing)
    return float(np.hypot(away, well.location_accuracy or 0.0))


def read_contacts(
    read: Sequence[WellReading], tops: Sequence[Top], template: Template, options: InterpretationOptions
) -> tuple[LogContact, ...]:
    """The contacts that a log shows or bounds; those of gravel and rock as decided where the interpreter did."""
    found = [
        LogContact(top.contact, top.status, top.depth, 0.0 if np.isnan(top.standard_error) else top.standard_error)
        for top in tops
        if top.contact in CONTACTS and top.status in {"at", "below"} and top.depth > 0
    ]
    clay = {unit.code for unit in template.with_role(Role.CONFINING)}
    first = next((i for i, one in enumerate(read) if one.unit in clay), None)
    # Under words that nothing claims, the clay may begin higher.
    if first and read[first - 1].unit is not None and read[first].top > 0:
        depth = read[first].top
        error = float(np.hypot(options.well_contact_error, options.well_relative_error * depth))
        found.append(LogContact("confining", "at", depth, error))
    return tuple(found)


def condition_draws(
    draws: ColumnDraws,
    bound: float,
    beside: LogBeside | None,
    template: Template,
    options: InterpretationOptions,
    generator: np.random.Generator,
) -> tuple[ColumnDraws, WellBeside | None]:
    """The columns resampled by how well they meet the log beside them, and what became of it.

    bound : depth (m) above which the curve excludes gravel and rock, for columns that do not reach them
    """
    if beside is None:
        return draws, None
    log_weight = weigh_columns(draws, bound, beside, template, options)
    share = np.exp(log_weight - np.logaddexp.reduce(log_weight))
    worth = float(1.0 / np.sum(share**2) / share.size)
    if worth < LEAST_SHARE:
        return draws, WellBeside(beside.well, beside.distance, worth, agrees=False)
    kept = draws.take(resample(log_weight, share.size, generator))
    return kept, WellBeside(beside.well, beside.distance, worth, agrees=True)


def weigh_columns(
    draws: ColumnDraws, bound: float, beside: LogBeside, template: Template, options: InterpretationOptions
) -> FloatArray:
    """Log density (m,) of the log's contacts, given each column.

    Between places a contact's log depth differs by a normal deviate that grows with the root of the distance; the
    contacts of a place differ alike, the more the closer they lie: but for a share of its own, their correlation is
    the ratio of their depths. A contact below the model may lie anywhere under it.
    """
    lateral = lateral_deviation(beside.distance, options)
    total = np.zeros(len(draws.thickness))
    at = [one for one in beside.contacts if one.status == "at"]
    tops = [find_depths(draws, one.name, template, bound) for one in at]
    if at:
        log_depth = np.log([one.depth for one in at])
        alike = np.exp(-np.abs(log_depth[:, None] - log_depth))
        covariance = lateral**2 * ((1.0 - OWN_SHARE) * alike + OWN_SHARE * np.eye(len(at)))
        covariance += np.diag([(one.error / one.depth) ** 2 for one in at])
        residual = np.log(np.array([top for top, _ in tops])) - log_depth[:, None]
        known = np.array([within for _, within in tops])
        total += _log_jointly_normal(residual, known, covariance)
        total += _log_below(residual, ~known, np.sqrt(np.diag(covariance)))
    for one in beside.contacts:
        if one.status == "below":
            total += _log_deeper(*find_depths(draws, one.name, template, bound), one.depth, max(lateral, 0.01))
    return total


def find_depths(draws: ColumnDraws, contact: str, template: Template, bound: float) -> tuple[FloatArray, BoolArray]:
    """Depth (m,) of a contact in each column, and whether it lies within the model; else at least how deep it is."""
    roles = [unit.role for unit in template.units]
    ends = {
        "confining": {Role.CONFINING, Role.DEEP_AQUIFER, Role.BEDROCK},
        "basal": {Role.DEEP_AQUIFER, Role.BEDROCK},
        "bedrock": {Role.BEDROCK},
    }[contact]
    above = next(i for i, role in enumerate(roles) if role in ends)
    upper = draws.thickness[:, :above]
    within = np.asarray(~np.isnan(upper).any(axis=1), dtype=bool)
    depth = np.maximum(np.nansum(upper, axis=1), 0.1)
    # Gravel and rock that a column does not reach lie below what the curve excludes; clay may begin anywhere under it.
    least = depth if contact == "confining" else np.maximum(depth, bound)
    return np.where(within, depth, least), within


def _log_jointly_normal(residual: FloatArray, known: BoolArray, covariance: FloatArray) -> FloatArray:
    """Log normal density (m,) of those residuals (c, m) of each column that are known."""
    total = np.zeros(residual.shape[1])
    for pattern in np.unique(known, axis=1).T:
        if not pattern.any():
            continue
        rows = np.flatnonzero(np.all(known == pattern[:, None], axis=0))
        some = covariance[np.ix_(pattern, pattern)]
        own = residual[np.ix_(pattern, rows)]
        _, log_determinant = np.linalg.slogdet(2.0 * np.pi * some)
        total[rows] = -0.5 * (np.sum(own * np.linalg.solve(some, own), axis=0) + log_determinant)
    return total


def _log_below(residual: FloatArray, hidden: BoolArray, deviation: FloatArray) -> FloatArray:
    """Log density (m,) of contacts (c, m) that lie below the model: even from its foot to ROOM_BELOW under it."""
    low, high = -residual / deviation[:, None], (-residual - ROOM_BELOW) / deviation[:, None]
    density = np.maximum(ndtr(low) - ndtr(high), LEAST_PROBABILITY) / ROOM_BELOW
    return np.asarray(np.sum(np.where(hidden, np.log(density), 0.0), axis=0))


def _log_deeper(depth: FloatArray, within: BoolArray, bound: float, deviation: float) -> FloatArray:
    """Log probability (m,) that a contact lies deeper than a log's end."""
    beyond = np.log(depth / bound)
    hidden = np.clip((ROOM_BELOW + beyond) / ROOM_BELOW, 0.05, 1.0)
    return np.where(within, log_ndtr(beyond / deviation), np.log(hidden))
