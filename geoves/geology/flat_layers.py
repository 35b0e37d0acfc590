"""At which soundings flat layers mislead, by how much and how surely: from the geology so far and the spreads."""

from typing import NamedTuple

import numpy as np
from scipy.linalg import cho_factor, cho_solve

from geoves.domain.arrays import BoolArray, FloatArray, IntArray
from geoves.domain.fields import Ceiling
from geoves.domain.survey import Survey
from geoves.geology.evidence import PlaceList
from geoves.kernels.field_priors import FieldPrior, own_covariance, prior_covariance
from geoves.kernels.field_windows import Told, condition_told
from geoves.kernels.flat_layers import IN_LINE, OFFSETS, SQUARE, read_contact
from geoves.kernels.latent_fields import Posterior

# Error of the fitted rule: of itself, and as a share of what it says.
RULE_ERROR, RULE_SHARE = 0.015, 0.25
# Nothing is moved by more than this, in natural logs of depth.
MOST = 0.5
# Azimuths tried where a spread's is not known.
TRIED = 4
# Depths (m) below this are not told apart.
LEAST_DEPTH = 1.0
# Of the depth below the ceiling no less than this share is left.
LEAST_LEFT = 0.2


class Spreads(NamedTuple):
    """Of n places: azimuth (n,) in radians clockwise from north, NaN where unknown; largest AB/2 (n,) m, NaN without a
    curve; ground (n,) m; metres in a unit of the CRS.
    """

    azimuth: FloatArray
    largest: FloatArray
    ground: FloatArray
    crs_unit_metres: float

    def take(self, rows: IntArray) -> "Spreads":
        return Spreads(self.azimuth[rows], self.largest[rows], self.ground[rows], self.crs_unit_metres)


class Misreading(NamedTuple):
    """By how much flat layers misread the basal contact at n places: natural log of the depth read over the true one.

    log_depth, deviation : (n,), 0 without a curve    step, variance : the same in the field of the contact
    """

    log_depth: FloatArray
    deviation: FloatArray
    step: FloatArray
    variance: FloatArray

    def take(self, rows: IntArray) -> "Misreading":
        return Misreading(*(values[rows] for values in self))

    def without(self, places: BoolArray) -> "Misreading":
        """The same, where `places` (n,) are taken at their word; what flat layers would make of them is still told."""
        return self._replace(step=np.where(places, 0.0, self.step), variance=np.where(places, 0.0, self.variance))


def list_spreads(survey: Survey, listed: PlaceList) -> Spreads:
    """The spreads of the places."""
    by_name = {one.name: one for one in survey.soundings}
    soundings = [by_name.get(name) if kind == "sounding" else None
                 for name, kind in zip(listed.names, listed.kinds, strict=True)]  # fmt: skip
    known = [one is not None and one.azimuth_deg is not None for one in soundings]
    azimuth = [one.azimuth_deg if one is not None and there else np.nan
               for one, there in zip(soundings, known, strict=True)]  # fmt: skip
    largest = [np.nan if one is None else float(one.curve.half_spacing[one.curve.used].max()) for one in soundings]
    return Spreads(np.deg2rad(np.array(azimuth, float)), np.array(largest), listed.ground, survey.crs_unit_metres)


def no_misreading(n: int) -> Misreading:
    """Of n places at which flat layers are taken at their word."""
    return Misreading(*np.zeros((4, n)))


def find_misreading(
    posterior: Posterior, prior: FieldPrior, points: FloatArray, ceiling: Ceiling, spreads: Spreads
) -> Misreading:
    """What flat layers make of the basal contact that is expected along and across each spread.

    The contact's own doubt goes into the deviation, and so does the rule's.
    """
    n = len(points)
    shift, variance, step = np.zeros((3, n))
    factor = cho_factor(own_covariance(prior, points, np.zeros(n)), lower=True)
    known = _Known(points, posterior.mean[0] - prior.mean, posterior.block(0), factor, prior, ceiling)
    for i in np.flatnonzero(np.isfinite(spreads.largest)):
        azimuth = spreads.azimuth[i]
        azimuths = [azimuth] if np.isfinite(azimuth) else np.arange(TRIED) * np.pi / TRIED
        found = np.array([_misread(known, spreads, int(i), float(one)) for one in azimuths])
        shift[i], step[i] = np.clip(found[:, 0].mean(), -MOST, MOST), found[:, 2].mean()
        variance[i] = found[:, 1].mean() + found[:, 0].var() + RULE_ERROR**2 + (RULE_SHARE * shift[i]) ** 2
    # A depth is the ceiling's and what lies below it: only that is the field's.
    moved = np.log(np.maximum(1.0 + step * np.expm1(shift), LEAST_LEFT))
    return Misreading(shift, np.sqrt(variance), moved, step**2 * variance)


def misread_window(said: tuple[Told, Spreads], *, priors: tuple[FieldPrior, ...], ceiling: Ceiling) -> Misreading:
    """The same of a window's own places, from all that it hears."""
    told, spreads = said
    own = np.arange(told.n_own)
    asked = np.full(len(spreads.largest), np.nan)
    asked[own] = spreads.largest[own]
    posterior = condition_told(told, priors=priors)
    return find_misreading(posterior, priors[0], told.points, ceiling, spreads._replace(largest=asked)).take(own)


class _Known(NamedTuple):
    """What is known of the basal contact's field at the places: away from its mean (n,), covariance (n, n).

    factor : of its prior covariance there
    """

    points: FloatArray
    away: FloatArray
    covariance: FloatArray
    factor: tuple[FloatArray, bool]
    prior: FieldPrior
    ceiling: Ceiling


def _misread(known: _Known, spreads: Spreads, i: int, azimuth: float) -> tuple[float, float, float]:
    """At place i: the misreading, the part of its variance that the contact's doubt brings, and d field / d ln depth.

    The lines on which the spread lies and square to it are looked at one after the other, and what they say is added.
    """
    ground, centre, cells = spreads.ground[i], OFFSETS.size // 2, []
    own = ground - known.ceiling.elevation(known.points[i : i + 1])[0]
    scale = max(own + np.exp(known.prior.mean + known.away[i]), LEAST_DEPTH) / spreads.crs_unit_metres
    for direction in (azimuth, azimuth + 0.5 * np.pi):
        away = scale * OFFSETS[:, None] * np.array([np.sin(direction), np.cos(direction)])
        cells.append(known.points[i] + away)
    both = np.concatenate(cells)
    nowhere = np.zeros(len(known.points)), np.zeros(len(both))
    between = prior_covariance(known.prior, known.points, both, nowhere)
    weights = np.asarray(cho_solve(known.factor, between))
    below = np.exp(known.prior.mean + known.away @ weights).reshape(2, -1)
    depth = np.maximum(below + ground - known.ceiling.elevation(both).reshape(2, -1), LEAST_DEPTH)
    reach = np.array([spreads.largest[i] / depth[0, centre]])
    read = [read_contact(line[None] / line[centre], reach, print_)
            for line, print_ in zip(depth, (IN_LINE, SQUARE), strict=True)]  # fmt: skip
    slope = np.concatenate([one.slope[0] for one in read]) * (below / depth).ravel()
    return (
        float(sum(one.shift[0] for one in read)),
        _variance(known, (both, between, weights), slope),
        float(depth[0, centre] / below[0, centre]),
    )


def _variance(known: _Known, line: tuple[FloatArray, FloatArray, FloatArray], slope: FloatArray) -> float:
    """Variance of `slope` (c,) times the fields at cells (c, 2), given what is known at the places.

    line : the cells, prior covariances of places with them (n, c), and weights that carry the field to them (n, c)
    """
    cells, between, weights = line
    nowhere = np.zeros(len(cells))
    own = prior_covariance(known.prior, cells, cells, (nowhere, nowhere))
    carried = weights @ slope
    # What simple kriging leaves, and what the places' own doubt adds to it.
    left = slope @ own @ slope - carried @ (between @ slope)
    return max(float(left + carried @ known.covariance @ carried), 0.0)
