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
# Directions in which the contact's relief is looked for, and how far (in depths) most of what is seen lies.
DIRECTIONS = np.linspace(0.0, np.pi, 8, endpoint=False)
SEEN_WIDTH = 1.0
# Variance of the square of a sine over all angles: what an unknown azimuth leaves open.
SINE_SQUARED_VARIANCE = 0.125
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
    away = posterior.mean[0] - prior.mean
    known = _Known(points, away, cho_solve(factor, away), posterior.block(0), factor, prior, ceiling)
    for i in np.flatnonzero(np.isfinite(spreads.largest)):
        found, variance[i], step[i] = _misread(known, spreads, int(i))
        shift[i] = np.clip(found, -MOST, MOST)
        variance[i] += RULE_ERROR**2 + (RULE_SHARE * shift[i]) ** 2
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

    factor : of its prior covariance there    carrier : (n,) that covariance's inverse times `away`
    """

    points: FloatArray
    away: FloatArray
    carrier: FloatArray
    covariance: FloatArray
    factor: tuple[FloatArray, bool]
    prior: FieldPrior
    ceiling: Ceiling


class _Lines(NamedTuple):
    """Cells on lines through a place, (l u, 2), l u in that order; prior covariances of all places with them (n, l u);
    the contact's depth below the place's ground, and below the ceiling, m (l, u).
    """

    cells: FloatArray
    between: FloatArray
    depth: FloatArray
    below: FloatArray


def _look_along(known: _Known, spreads: Spreads, i: int, directions: FloatArray) -> _Lines:
    """The expected contact on lines in some directions (radians from north) through place i."""
    ground = spreads.ground[i]
    own = ground - known.ceiling.elevation(known.points[i : i + 1])[0] + np.exp(known.prior.mean + known.away[i])
    scale = max(own, LEAST_DEPTH) / spreads.crs_unit_metres
    compass = np.column_stack([np.sin(directions), np.cos(directions)])
    cells = (known.points[i] + scale * OFFSETS[:, None] * compass[:, None]).reshape(-1, 2)
    nowhere = np.zeros(len(known.points)), np.zeros(len(cells))
    between = prior_covariance(known.prior, known.points, cells, nowhere)
    below = np.exp(known.prior.mean + known.carrier @ between)
    depth = np.maximum(below + ground - known.ceiling.elevation(cells), LEAST_DEPTH)
    lines = len(directions), OFFSETS.size
    return _Lines(cells, between, depth.reshape(lines), below.reshape(lines))


def _misread(known: _Known, spreads: Spreads, i: int) -> tuple[float, float, float]:
    """At place i: the misreading, the variance that doubt of contact and azimuth bring, and d field / d ln depth.

    Two lines are looked along, across the contact's strike and with it, and what they say is added. A spread at an
    angle to a line reads it as one in it by the square of the cosine, as one square to it by that of the sine.
    """
    around = np.log(_look_along(known, spreads, i, DIRECTIONS).depth)
    centre = OFFSETS.size // 2
    weight = np.gradient(OFFSETS) / (1.0 + (OFFSETS / SEEN_WIDTH) ** 2)
    across = DIRECTIONS[np.argmax((around - around[:, [centre]]) ** 2 @ weight)]
    lines = _look_along(known, spreads, i, np.array([across, across + 0.5 * np.pi]))
    relative = lines.depth / lines.depth[:, [centre]]
    reach = spreads.largest[i] / lines.depth[:, centre]
    in_line, square = read_contact(relative, reach, IN_LINE), read_contact(relative, reach, SQUARE)
    azimuth = spreads.azimuth[i]
    share = np.cos(azimuth - across) ** 2 if np.isfinite(azimuth) else 0.5
    shares = np.array([share, 1.0 - share])
    shift = float(shares @ in_line.shift + (1.0 - shares) @ square.shift)
    slope = shares[:, None] * in_line.slope + (1.0 - shares)[:, None] * square.slope
    variance = _variance(known, lines, (slope * lines.below / lines.depth).ravel())
    if not np.isfinite(azimuth):
        variance += SINE_SQUARED_VARIANCE * float((in_line.shift - square.shift) @ (1.0, -1.0)) ** 2
    return shift, variance, float(lines.depth[0, centre] / lines.below[0, centre])


def _variance(known: _Known, lines: _Lines, slope: FloatArray) -> float:
    """Variance of `slope` (c,) times the contact's field at the cells of lines, given what is known at the places."""
    nowhere = np.zeros(len(lines.cells))
    own = prior_covariance(known.prior, lines.cells, lines.cells, (nowhere, nowhere))
    between = lines.between @ slope
    carried = np.asarray(cho_solve(known.factor, between))
    # What simple kriging leaves, and what the places' own doubt adds to it.
    left = slope @ own @ slope - carried @ between
    return max(float(left + carried @ known.covariance @ carried), 0.0)
