"""The link from latent fields at a place to a layered column, its derivative, and what a place says of it.

All places share one order of layers, so that everything is batched. Unknowns of a place: first the fields (q,), then
the natural logs of the factors that each change of MN brings (s,). Fields, in this order:

    v            log of how far (m) the basal contact lies below the ceiling, a plane above the region's plain
    thickness    one for each unit above the basal contact but the filler: ln m for a unit that is always there,
                 otherwise a latent thickness in m whose part below 0 means absence
    presence     latent presence of each deep aquifer: there where above 0
    deep         ln thickness (m) of each deep aquifer where it is there
    resistivity  ln ohm m of each unit, from the top down
    grading      ln of how much more resistive the upper part of the filler is than its lower part

The basal contact's depth is T = s(b + exp v), b the depth of the ceiling, s a smooth ramp that keeps T above 0. What
the other units want is squeezed where T has no room for it, and the filler (the lowest confining unit) takes what they
leave: so the units above the contact always add up to T. Inputs are trusted.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.special import expit, log_ndtr

from geoves.kernels.damped_steps import Curves, robust_misfit
from geoves.kernels.layered_earth import response_and_sensitivity, response_of_many

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]

# A layer is never thinner than this (m): too thin to be noticed by any spread, and its log stays finite.
THINNEST = 1e-3
# The upper part of the filler, as a share of its thickness.
UPPER_SHARE = 1.0 / 3.0
# Smoothness (m) of the ramps that keep thicknesses and depths above 0.
RAMP = 1.0
# How suddenly units are squeezed where they want more than there is room for: at half of the room by 5e-4.
SQUEEZE = 8.0
# Less thickness than this (m) is taken for this where its log is wanted.
_LEAST = 1e-300
# Latent presence over which a deep aquifer thins out at its edge; the field's own deviation is 1.
PRESENCE_WIDTH = 0.2
# Softness, in natural logs, of the template's limits of depth.
LIMIT_DEVIATION = 0.15

# What an observation speaks of: columns of `quantities`; from FIRST_UPPER on the thickness of each upper unit, after
# those the depth of each one's top.
BASAL_DEPTH, DEEP_THICKNESS, ROCK_DEPTH, FIRST_UPPER = 0, 1, 2, 3
# What an observation says of it: nothing, a value with an error, more than a value, less than it.
NOTHING, AT, ABOVE, BELOW = 0, 1, 2, 3


class ColumnOrder(NamedTuple):
    """The order of units in every column of a region: indices into the template's units, from the top down.

    upper : (m,) those above the basal contact    filler : position in `upper` of the one that takes what is left
    always : (m,) whether a unit of `upper` is always there    deep : (d,) those on the rock    bedrock : the last
    n_units : in the template
    deep_limits, rock_limits : least and greatest depth (m) of the top of the deep aquifer and of rock, 0 and inf free
    """

    upper: tuple[int, ...]
    filler: int
    always: tuple[bool, ...]
    deep: tuple[int, ...]
    bedrock: int
    n_units: int
    deep_limits: tuple[float, float] = (0.0, np.inf)
    rock_limits: tuple[float, float] = (0.0, np.inf)

    @property
    def thickness_fields(self) -> tuple[int, ...]:
        """Positions in `upper` that have a field of their own: all but the filler."""
        return tuple(i for i in range(len(self.upper)) if i != self.filler)

    @property
    def n_fields(self) -> int:
        return 1 + len(self.thickness_fields) + 2 * len(self.deep) + self.n_units + 1

    @property
    def first_presence(self) -> int:
        return 1 + len(self.thickness_fields)

    @property
    def first_deep(self) -> int:
        return self.first_presence + len(self.deep)

    @property
    def first_resistivity(self) -> int:
        return self.first_deep + len(self.deep)

    @property
    def grading(self) -> int:
        return self.n_fields - 1

    @property
    def n_layers(self) -> int:
        """Units of the column, the filler twice."""
        return len(self.upper) + 1 + len(self.deep) + 1


class Columns(NamedTuple):
    """Columns (b,): what fields make of the ground.

    basal_depth : (b,) m    upper : (b, m) m, thickness of each unit above it    deep : (b, d) m
    log_thickness : (b, k-1), log_resistivity : (b, k) of the layers, as the response takes them
    """

    basal_depth: Floats
    upper: Floats
    deep: Floats
    log_thickness: Floats
    log_resistivity: Floats

    @property
    def rock_depth(self) -> Floats:
        return np.asarray(self.basal_depth + self.deep.sum(axis=1))


class Observations(NamedTuple):
    """What a place is known to be, apart from its curve: (b, o) each, padded with a kind of 0.

    kind : AT `value` with a normal `error`; ABOVE or BELOW it, soft by `error`; NOTHING
    quantity : column of `quantities`    value, error : m
    """

    kind: Integers
    quantity: Integers
    value: Floats
    error: Floats

    def take(self, rows: Integers) -> "Observations":
        return Observations(self.kind[rows], self.quantity[rows], self.value[rows], self.error[rows])

    def repeat(self, count: int) -> "Observations":
        """Each place's `count` times over."""
        return self.take(np.repeat(np.arange(len(self.kind)), count))


class Places(NamedTuple):
    """All that n places say by themselves. `curves` is padded, with no reading where a place has none.

    ceiling_depth : (n,) m, b of the link    lowest, highest : (p,), of the unknowns: nothing is looked for beyond
    """

    ceiling_depth: Floats
    curves: Curves
    observations: Observations
    lowest: Floats
    highest: Floats

    def take(self, rows: Integers) -> "Places":
        return Places(
            self.ceiling_depth[rows], self.curves.take(rows), self.observations.take(rows), self.lowest, self.highest
        )

    @property
    def n_factors(self) -> int:
        return int(self.curves.segments.shape[2])


def ramp(x: Floats, scale: float = RAMP) -> Floats:
    """A smooth max(0, x), m."""
    return np.asarray(scale * np.logaddexp(0.0, x / scale))


def _fade(depth: Floats, limits: tuple[float, float]) -> tuple[Floats, Floats]:
    """0 to 1, how far a unit may begin at a depth (m), and its derivative by the depth."""
    value, slope = np.ones_like(depth), np.zeros_like(depth)
    for limit, sign in zip(limits, (1.0, -1.0), strict=True):
        if 0.0 < limit < np.inf:
            width = 0.5 * LIMIT_DEVIATION * limit
            one = expit(sign * (depth - limit) / width)
            slope = slope * one + value * one * (1.0 - one) * sign / width
            value = value * one
    return value, slope


class _Squeeze(NamedTuple):
    """How units fit into a room (m): what share of the thickness they want they get, what room is left (m), and how
    far they are squeezed, 0 to 1: minus the slope of ln share by ln (wanted / room). (b,) each.
    """

    share: Floats
    left: Floats
    tightness: Floats


def _squeeze(wanted: Floats, room: Floats) -> _Squeeze:
    """A smooth min: share = (1 + r^p)^(-1/p), r = wanted / room."""
    power = SQUEEZE * (np.log(np.maximum(wanted, _LEAST)) - np.log(np.maximum(room, _LEAST)))
    share = np.exp(-np.logaddexp(0.0, power) / SQUEEZE)
    # room - share wanted, without the loss of digits where nothing is left.
    crowded = -room * np.expm1(-np.logaddexp(0.0, -np.maximum(power, 0.0)) / SQUEEZE)
    return _Squeeze(share, np.where(power > 0.0, crowded, room - share * wanted), expit(power))


def make_columns(fields: Floats, ceiling_depth: Floats, order: ColumnOrder) -> Columns:
    """Columns of fields (b, q) at ceilings (b,)."""
    basal = ramp(ceiling_depth + np.exp(fields[:, 0]))
    upper = np.empty((len(fields), len(order.upper)))
    for i, position in enumerate(order.thickness_fields, start=1):
        upper[:, position] = np.exp(fields[:, i]) if order.always[position] else ramp(fields[:, i])
    upper[:, order.filler] = 0.0
    squeeze = _squeeze(upper.sum(axis=1), basal)
    upper *= squeeze.share[:, None]
    upper[:, order.filler] = squeeze.left
    share, _ = _fade(basal, order.deep_limits)
    there = expit(fields[:, order.first_presence : order.first_deep] / PRESENCE_WIDTH)
    deep = np.exp(fields[:, order.first_deep : order.first_resistivity]) * there * share[:, None]
    parts, rows = [], []
    resistivity = fields[:, order.first_resistivity : order.grading]
    for i, unit in enumerate(order.upper):
        if i == order.filler:
            parts += [UPPER_SHARE * upper[:, i], (1.0 - UPPER_SHARE) * upper[:, i]]
            rows += [resistivity[:, unit] + fields[:, order.grading], resistivity[:, unit]]
        else:
            parts.append(upper[:, i])
            rows.append(resistivity[:, unit])
    parts += list(deep.T)
    rows += [resistivity[:, unit] for unit in (*order.deep, order.bedrock)]
    log_thickness = np.log(THINNEST + np.column_stack(parts))
    return Columns(basal, upper, deep, log_thickness, np.column_stack(rows))


class Derivatives(NamedTuple):
    """By the fields: of (ln thickness, ln resistivity) of the layers (b, 2k-1, q), of the quantities (b, 3+2m, q)."""

    layers: Floats
    quantities: Floats


def quantities(columns: Columns) -> Floats:
    """(b, 3+2m) m: depth of the basal contact, deep thickness, depth of rock, thickness and top of each upper unit."""
    deep = columns.deep.sum(axis=1)
    tops = np.cumsum(columns.upper, axis=1) - columns.upper
    return np.column_stack([columns.basal_depth, deep, columns.basal_depth + deep, columns.upper, tops])


def differentiate(fields: Floats, ceiling_depth: Floats, order: ColumnOrder, columns: Columns) -> Derivatives:
    """Derivatives of `make_columns`; checked against differences in tests/laws."""
    n, q, m = len(fields), order.n_fields, len(order.upper)
    depth_below = np.exp(fields[:, 0])
    by_basal = expit((ceiling_depth + depth_below) / RAMP) * depth_below
    of_upper = _differentiate_upper(fields, order, columns, by_basal)
    _, slope = _fade(columns.basal_depth, order.deep_limits)
    of_deep = np.zeros((n, len(order.deep), q))
    for j in range(len(order.deep)):
        there = expit(fields[:, order.first_presence + j] / PRESENCE_WIDTH)
        full = np.exp(fields[:, order.first_deep + j])
        of_deep[:, j, order.first_presence + j] = columns.deep[:, j] * (1.0 - there) / PRESENCE_WIDTH
        of_deep[:, j, order.first_deep + j] = columns.deep[:, j]
        of_deep[:, j, 0] = full * there * slope * by_basal
    of_layers = np.zeros((n, 2 * order.n_layers - 1, q))
    row = 0
    first = order.n_layers - 1
    for i, unit in enumerate(order.upper):
        shares = (UPPER_SHARE, 1.0 - UPPER_SHARE) if i == order.filler else (1.0,)
        for part, portion in enumerate(shares):
            inverse = portion / (THINNEST + portion * columns.upper[:, i])
            of_layers[:, row] = of_upper[:, i] * inverse[:, None]
            of_layers[:, first + row, order.first_resistivity + unit] = 1.0
            if i == order.filler and part == 0:
                of_layers[:, first + row, order.grading] = 1.0
            row += 1
    for j, unit in enumerate(order.deep):
        of_layers[:, row] = of_deep[:, j] / (THINNEST + columns.deep[:, j])[:, None]
        of_layers[:, first + row, order.first_resistivity + unit] = 1.0
        row += 1
    of_layers[:, first + row, order.first_resistivity + order.bedrock] = 1.0
    of_quantities = np.zeros((n, FIRST_UPPER + 2 * m, q))
    of_quantities[:, BASAL_DEPTH, 0] = by_basal
    of_quantities[:, DEEP_THICKNESS] = of_deep.sum(axis=1)
    of_quantities[:, ROCK_DEPTH] = of_quantities[:, BASAL_DEPTH] + of_quantities[:, DEEP_THICKNESS]
    of_quantities[:, FIRST_UPPER : FIRST_UPPER + m] = of_upper
    of_quantities[:, FIRST_UPPER + m :] = np.cumsum(of_upper, axis=1) - of_upper
    return Derivatives(of_layers, of_quantities)


def _differentiate_upper(fields: Floats, order: ColumnOrder, columns: Columns, by_basal: Floats) -> Floats:
    """Derivative (b, m, q) of the thickness of each unit above the basal contact; `by_basal` (b,) of that by v."""
    n, q, m = len(fields), order.n_fields, len(order.upper)
    wanted, by_fields = np.zeros((n, m)), np.zeros((n, m, q))
    for i, position in enumerate(order.thickness_fields, start=1):
        wanted[:, position] = np.exp(fields[:, i]) if order.always[position] else ramp(fields[:, i])
        by_fields[:, position, i] = wanted[:, position] if order.always[position] else expit(fields[:, i] / RAMP)
    total, by_total = wanted.sum(axis=1), by_fields.sum(axis=1)
    squeeze = _squeeze(total, columns.basal_depth)
    by_log_ratio = by_total / np.maximum(total, _LEAST)[:, None]
    by_log_ratio[:, 0] -= by_basal / np.maximum(columns.basal_depth, _LEAST)
    got = squeeze.share[:, None] * wanted
    found = squeeze.share[:, None, None] * by_fields
    found -= got[:, :, None] * (squeeze.tightness[:, None] * by_log_ratio)[:, None, :]
    found[:, order.filler] = -found.sum(axis=1)
    found[:, order.filler, 0] += by_basal
    return found


def _observed(columns: Columns, observations: Observations) -> tuple[Floats, Floats]:
    """The quantities observed (b, o), and how far each lies from its value in errors."""
    values = np.take_along_axis(quantities(columns), observations.quantity, axis=1)
    return values, (values - observations.value) / observations.error


def _beyond(depth: Floats, limits: tuple[float, float]) -> tuple[Floats, Floats]:
    """How far a depth lies beyond soft limits, in their deviations, and its derivative by the depth (1/m)."""
    log_depth = np.log(THINNEST + depth)
    low = np.log(max(limits[0], 1e-9)) - log_depth
    high = log_depth - np.log(limits[1]) if np.isfinite(limits[1]) else np.full_like(depth, -np.inf)
    beyond = np.maximum(np.maximum(low, high), 0.0) / LIMIT_DEVIATION
    sign = np.where(low > 0, -1.0, np.where(high > 0, 1.0, 0.0))
    return beyond, sign / (LIMIT_DEVIATION * (THINNEST + depth))


def log_likelihood(unknowns: Floats, places: Places, order: ColumnOrder) -> Floats:
    """Log likelihood (b, m) of all that b places say at m sets of unknowns each, (b, m, p).

    Readings, observations and the template's limits of rock's depth; minus infinity outside of the bounds.
    """
    b, m, p = unknowns.shape
    q, curves = order.n_fields, places.curves
    inside = np.all((unknowns >= places.lowest) & (unknowns <= places.highest), axis=2)
    unknowns = np.clip(unknowns, places.lowest, places.highest)
    columns = make_columns(unknowns.reshape(b * m, p)[:, :q], np.repeat(places.ceiling_depth, m), order)
    k = order.n_layers
    apparent = response_of_many(
        curves.weights,
        curves.wavenumber,
        np.exp(columns.log_thickness).reshape(b, m, k - 1),
        np.exp(columns.log_resistivity).reshape(b, m, k),
    )
    factors = np.matmul(unknowns[:, :, q:], curves.segments.transpose(0, 2, 1))
    residual = (curves.log_apparent_resistivity[:, None] - np.log(apparent) - factors).reshape(b * m, -1)
    misfit, _, _ = robust_misfit(residual, np.repeat(curves.deviation, m, axis=0))
    observations = places.observations.repeat(m)
    _, off = _observed(columns, observations)
    beyond, _ = _beyond(columns.rock_depth, order.rock_limits)
    value = -misfit + _log_observations(observations.kind, off).sum(axis=1) - 0.5 * beyond**2
    return np.where(inside, value.reshape(b, m), -np.inf)


def _log_observations(kind: Integers, off: Floats) -> Floats:
    """Log likelihood (b, o) of each observation."""
    return np.select([kind == AT, kind == ABOVE, kind == BELOW], [-0.5 * off**2, log_ndtr(off), log_ndtr(-off)], 0.0)


class LocalState(NamedTuple):
    """At some unknowns (b, p): log likelihood (b,), its gradient (b, p), and its Gauss-Newton curvature (b, p, p)."""

    log_likelihood: Floats
    gradient: Floats
    curvature: Floats
    robust_weight: Floats


def evaluate(unknowns: Floats, places: Places, order: ColumnOrder) -> LocalState:
    """Log likelihood of each place with its derivatives; batches as in `log_likelihood`, b places each."""
    q = order.n_fields
    fields, curves, observations = unknowns[:, :q], places.curves, places.observations
    columns = make_columns(fields, places.ceiling_depth, order)
    by_fields = differentiate(fields, places.ceiling_depth, order, columns)
    apparent, sensitivity = response_and_sensitivity(
        curves.weights, curves.wavenumber, np.exp(columns.log_thickness), np.exp(columns.log_resistivity)
    )
    factors = np.matmul(curves.segments, unknowns[:, q:, None])[..., 0]
    residual = curves.log_apparent_resistivity - np.log(apparent) - factors
    misfit, robust_weight, weight = robust_misfit(residual, curves.deviation)
    jacobian = np.concatenate([np.matmul(sensitivity, by_fields.layers), curves.segments], axis=2)
    weighted = (jacobian * weight[..., None]).transpose(0, 2, 1)
    gradient = np.matmul(weighted, residual[..., None])[..., 0]
    curvature = np.matmul(weighted, jacobian)

    _, off = _observed(columns, observations)
    slope, bend = _observation_slopes(observations.kind, off)
    rows = np.take_along_axis(by_fields.quantities, observations.quantity[..., None], axis=1)
    rows = rows / observations.error[..., None]
    gradient[:, :q] += np.matmul(rows.transpose(0, 2, 1), slope[..., None])[..., 0]
    curvature[:, :q, :q] += np.matmul((rows * bend[..., None]).transpose(0, 2, 1), rows)

    beyond, by_depth = _beyond(columns.rock_depth, order.rock_limits)
    row = by_fields.quantities[:, ROCK_DEPTH] * by_depth[:, None]
    gradient[:, :q] -= beyond[:, None] * row
    curvature[:, :q, :q] += np.where(beyond > 0, 1.0, 0.0)[:, None, None] * row[:, :, None] * row[:, None, :]
    log_l = -misfit + _log_observations(observations.kind, off).sum(axis=1) - 0.5 * beyond**2
    return LocalState(log_l, gradient, curvature, robust_weight)


def _observation_slopes(kind: Integers, off: Floats) -> tuple[Floats, Floats]:
    """First derivative and minus the second (b, o) of the log likelihood by `off`."""
    sign = np.where(kind == BELOW, -1.0, 1.0)
    z = sign * off
    hazard = np.exp(-0.5 * z * z - 0.5 * np.log(2.0 * np.pi) - log_ndtr(z))
    slope = np.select([kind == AT, kind >= ABOVE], [-off, sign * hazard], 0.0)
    bend = np.select([kind == AT, kind >= ABOVE], [np.ones_like(off), hazard * (hazard + z)], 0.0)
    return slope, bend


def standard_residuals(unknowns: Floats, places: Places, order: ColumnOrder) -> tuple[Floats, Floats]:
    """Residuals of the readings over their errors (b, n), 0 where padded, and the weight each has as no outlier."""
    q, curves = order.n_fields, places.curves
    columns = make_columns(unknowns[:, :q], places.ceiling_depth, order)
    apparent = response_of_many(
        curves.weights,
        curves.wavenumber,
        np.exp(columns.log_thickness)[:, None],
        np.exp(columns.log_resistivity)[:, None],
    )[:, 0]
    factors = np.matmul(curves.segments, unknowns[:, q:, None])[..., 0]
    residual = curves.log_apparent_resistivity - np.log(apparent) - factors
    _, robust_weight, _ = robust_misfit(residual, curves.deviation)
    known = np.isfinite(curves.deviation)
    return np.where(known, residual / np.where(known, curves.deviation, 1.0), 0.0), robust_weight * known
