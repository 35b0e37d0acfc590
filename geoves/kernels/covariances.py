"""Covariances of a field over a plane, experimental variograms, and covariances fitted to data.

Points are (n, 2): easting, northing, in the unit of the CRS. Lengths are in that unit, sills in the unit of the
values squared. Inputs are trusted: finite, of matching lengths.
"""

from collections.abc import Callable
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import cho_solve, cholesky, solve_triangular
from scipy.optimize import OptimizeResult, brentq, minimize, minimize_scalar, nnls
from scipy.spatial.distance import cdist
from threadpoolctl import threadpool_limits

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

# Where t of (1 + t) exp(-t), of Matérn 3/2, has fallen to 0.05; the other models have it in closed form.
_MATERN32_PRACTICAL = 4.743864518390577
_LOG_20 = float(np.log(20.0))

# Relative to the sill: less error than this is as good as none, and keeps repeated places from being singular;
# more than that says nothing, and would only spoil the condition of the system.
ERROR_FLOOR = 1e-8
ERROR_CEILING = 1e6


class Covariance(NamedTuple):
    """A stationary covariance: `partial_sill` times a correlation, plus a `nugget` of variation at no distance.

    model : "matern32", "exponential", "spherical" or "gaussian"
    length : along the direction of longest continuity, where the correlation has fallen to 0 (spherical) or to 0.05
    azimuth_deg : that direction, clockwise from north      ratio : length across it over `length`, above 0 to 1
    """

    model: str
    nugget: float
    partial_sill: float
    length: float
    azimuth_deg: float = 0.0
    ratio: float = 1.0

    @property
    def sill(self) -> float:
        """Variance of the field, the nugget included."""
        return self.nugget + self.partial_sill


class Stated(NamedTuple):
    """What a person states of a covariance, as `Covariance` has it; None is left to the fit.

    A direction is stated by its ratio and azimuth together; a length stated without one holds in every direction.
    """

    nugget: float | None = None
    partial_sill: float | None = None
    length: float | None = None
    azimuth_deg: float | None = None
    ratio: float | None = None

    def state(self, covariance: Covariance) -> Covariance:
        """The covariance with what is stated in its place."""
        return covariance._replace(**{name: value for name, value in self._asdict().items() if value is not None})


NOTHING_STATED = Stated()


def _matern32(h: FloatArray) -> tuple[FloatArray, FloatArray]:
    t = _MATERN32_PRACTICAL * h
    decay = np.exp(-t)
    return (1.0 + t) * decay, t * t * decay


def _exponential(h: FloatArray) -> tuple[FloatArray, FloatArray]:
    t = _LOG_20 * h
    decay = np.exp(-t)
    return decay, t * decay


def _spherical(h: FloatArray) -> tuple[FloatArray, FloatArray]:
    t = np.minimum(h, 1.0)
    return 1.0 - 1.5 * t + 0.5 * t**3, 1.5 * t - 1.5 * t**3


def _gaussian(h: FloatArray) -> tuple[FloatArray, FloatArray]:
    t = _LOG_20 * h * h
    decay = np.exp(-t)
    return decay, 2.0 * t * decay


# Each gives the correlation at h = distance / length, and -h times its slope.
CORRELATIONS: dict[str, Callable[[FloatArray], tuple[FloatArray, FloatArray]]] = {
    "matern32": _matern32,
    "exponential": _exponential,
    "spherical": _spherical,
    "gaussian": _gaussian,
}


def correlation(distance_in_lengths: FloatArray, model: str) -> FloatArray:
    """Correlation at distances given in lengths, the nugget left out; any shape.

    Matérn 3/2 is (1 + t) exp(-t), the others exp(-t), exp(-t²) and 1 - 1.5 t + 0.5 t³, t in proportion to distance
    (Chilès and Delfiner 2012, Geostatistics, ch. 2, from memory). Checked against GSTools.
    """
    return correlate_in_place(np.array(distance_in_lengths, dtype=float), model)


def correlate_in_place(h: FloatArray, model: str, room: FloatArray | None = None) -> FloatArray:
    """The same as `correlation`, written over the distances: what a kriging spends much of its time on.

    room : an array of the same shape to write upon, so that blocks in a row need no new memory.
    """
    if model == "spherical":
        np.minimum(h, 1.0, out=h)
        room = np.multiply(h, h, out=room)
        room *= 0.5
        room -= 1.5
        h *= room
        h += 1.0
        return h
    if model == "matern32":
        h *= -_MATERN32_PRACTICAL
        decay = np.exp(h, out=room)
        np.subtract(1.0, h, out=h)
        h *= decay
        return h
    if model == "gaussian":
        h *= h
    h *= -_LOG_20
    return np.asarray(np.exp(h, out=h))


def scale_coordinates(points: FloatArray, covariance: Covariance, origin: FloatArray) -> FloatArray:
    """(n, 2) coordinates about `origin` (2,), turned and stretched so that a distance of 1 is one length any way."""
    azimuth = np.deg2rad(covariance.azimuth_deg)
    east, north = (points - origin).T
    along = east * np.sin(azimuth) + north * np.cos(azimuth)
    across = east * np.cos(azimuth) - north * np.sin(azimuth)
    return np.column_stack((along / covariance.length, across / (covariance.ratio * covariance.length)))


def scaled_distances(first: FloatArray, second: FloatArray, covariance: Covariance) -> FloatArray:
    """(n, m) distances from `first` (n, 2) to `second` (m, 2), in lengths, the anisotropy removed."""
    origin = first.mean(axis=0)
    return cdist(scale_coordinates(first, covariance, origin), scale_coordinates(second, covariance, origin))


def semivariance(distance: FloatArray, covariance: Covariance) -> FloatArray:
    """Semivariance at distances along the longest continuity, in the unit of the CRS; at 0 it is the nugget."""
    rho = correlation(np.asarray(distance, dtype=float) / covariance.length, covariance.model)
    return covariance.nugget + covariance.partial_sill * (1.0 - rho)


def covariance_matrix(first: FloatArray, second: FloatArray, covariance: Covariance) -> FloatArray:
    """(n, m) covariances of the field between `first` (n, 2) and `second` (m, 2), without the nugget."""
    matrix = correlate_in_place(scaled_distances(first, second, covariance), covariance.model)
    matrix *= covariance.partial_sill
    return matrix


def bounded_error_variance(error_variance: FloatArray, covariance: Covariance) -> FloatArray:
    """(n,) error variances kept between 1e-8 and 1e6 sills: exact data stay solvable, worthless ones harmless."""
    return np.clip(error_variance, ERROR_FLOOR * covariance.sill, ERROR_CEILING * covariance.sill)


def experimental_variogram(
    points: FloatArray,
    values: FloatArray,
    edges: FloatArray,
    azimuth_deg: float = 0.0,
    tolerance_deg: float = 90.0,
) -> tuple[FloatArray, FloatArray, IntArray]:
    """Lag (mean distance), semivariance and number of pairs, (bins,) each, by Matheron's estimator.

    edges : (bins + 1,), a pair belongs to the bin whose upper edge it does not exceed. A bin without pairs is NaN.
    Only pairs within `tolerance_deg` of `azimuth_deg` count; 90 takes all. Errors of the data are not taken off.
    Checked in tests/published/test_meuse_variogram.py. Matheron 1963, Economic Geology 58, 1246-1266 (from memory).
    """
    i, j = np.triu_indices(len(values), 1)
    east, north = (points[j] - points[i]).T
    distance = np.hypot(east, north)
    halved = 0.5 * (values[j] - values[i]) ** 2
    bins = np.searchsorted(edges, distance, side="left") - 1
    away = np.abs((np.rad2deg(np.arctan2(east, north)) - azimuth_deg + 90.0) % 180.0 - 90.0)
    inside = (bins >= 0) & (bins < len(edges) - 1) & (away <= tolerance_deg)
    count = len(edges) - 1
    pairs = np.bincount(bins[inside], minlength=count)
    divisor = np.where(pairs > 0, pairs, np.nan)
    lag = np.bincount(bins[inside], distance[inside], minlength=count) / divisor
    return lag, np.bincount(bins[inside], halved[inside], minlength=count) / divisor, pairs.astype(np.int64)


def fit_by_least_squares(
    lag: FloatArray, semivariance: FloatArray, pairs: IntArray, model: str = "spherical"
) -> Covariance:
    """Isotropic covariance fitted to an experimental variogram with weights pairs / lag²; NaN bins are left out.

    Nugget and sill are linear and not negative, so that only the length is searched for: over a grid, then refined.
    Checked in tests/published/test_meuse_variogram.py. Weights: Cressie 1985, Math. Geology 17, 563-586 (from memory).
    """
    used = (pairs > 0) & (lag > 0.0)
    lag, semivariance = lag[used], semivariance[used]
    root_weight = np.sqrt(pairs[used]) / lag

    def solve(log_length: float) -> tuple[FloatArray, float]:
        rise = 1.0 - correlation(lag / np.exp(log_length), model)
        design = np.column_stack((np.ones_like(lag), rise)) * root_weight[:, None]
        coefficients, norm = nnls(design, semivariance * root_weight)
        return coefficients, float(norm)

    grid = np.linspace(np.log(lag.min() / 2.0), np.log(lag.max() * 4.0), 40)
    best = int(np.argmin([solve(step)[1] for step in grid]))
    around = (grid[max(best - 1, 0)], grid[min(best + 1, len(grid) - 1)])
    refined = minimize_scalar(lambda step: solve(step)[1], bounds=around, method="bounded", options={"xatol": 1e-7})
    (nugget, partial_sill), _ = solve(float(refined.x))
    return Covariance(model, float(nugget), float(partial_sill), float(np.exp(refined.x)))


def variance_between_places(values: FloatArray, error_variance: FloatArray) -> float:
    """Variance of the values that their own errors do not explain; never below a hundredth of what their middle shows.

    Solves sum (y - m)² / (e + v) = n - 1 for v, m the weighted mean (Paule and Mandel 1982, J. Res. NBS 87, 377-385,
    from memory), so that a few values with large errors cannot inflate it. All values equal give a tiny number.
    """
    seen = float(np.var(values))
    middle = float(np.subtract(*np.percentile(values, (75, 25)))) / 1.349  # the deviation, were they normal
    floor = max(0.01 * middle**2, 1e-6 * float(np.mean(values) ** 2), 1e-12)

    def excess(variance: float) -> float:
        weight = 1.0 / (error_variance + variance)
        mean = weight @ values / weight.sum()
        return float(weight @ (values - mean) ** 2 - (len(values) - 1))

    if excess(floor) <= 0.0:
        return floor
    return float(brentq(excess, floor, 2.0 * seen * len(values) + floor, rtol=1e-6))


# Widths of the weak priors, in natural logs: a factor 4.5 for the sill about the variance between places, a factor e
# for the length about a third of the extent, a factor 2.2 for the ratio about 1.
_SILL_WIDTH = 1.5
_LENGTH_WIDTH = 1.0
_LENGTH_CENTRE = float(np.log(1.0 / 3.0))
_RATIO_WIDTH = 0.8
_RATIO_LIMIT = 1.6
# Restricted likelihood costs n³ a step: beyond so many data, an arbitrary but fixed choice of them speaks for all.
_LARGEST_FIT = 600
# So many of them tell the starts apart; the best start alone is then followed on all.
_SCOUTS = 150
# Fewer data than this cannot tell a direction.
FEWEST_FOR_DIRECTION = 20


class SquaredDistances(NamedTuple):
    """Over pairs (n, n), in units of the extent: dn² + de², dn² - de² and 2 dn de of northing and easting."""

    plus: FloatArray
    minus: FloatArray
    cross: FloatArray

    def take(self, count: int) -> "SquaredDistances":
        """Those of the first `count` places."""
        square = (slice(count), slice(count))
        return SquaredDistances(*(values[square] for values in self))


def square_distances(points: FloatArray, extent: float) -> SquaredDistances:
    """Of `points` (n, 2) over `extent`."""
    east, north = (np.subtract.outer(axis, axis) for axis in (points - points.mean(axis=0)).T / extent)
    return SquaredDistances(north**2 + east**2, north**2 - east**2, 2.0 * north * east)


def stretch_distances(
    squares: SquaredDistances, log_length: float, p: float, q: float
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Squared distances in lengths d' exp(-S) d / length², S = ((p, q), (q, -p)) over north and east; with its
    derivatives by p and q. The length is the geometric mean, exp(-|S|) the ratio, so that isotropy is smooth.
    """
    a = float(np.hypot(p, q))
    g = float(np.sinh(a) / a) if a > 1e-4 else 1.0 + a * a / 6.0
    k = float((np.cosh(a) - g) / (a * a)) if a > 1e-2 else 1.0 / 3.0 + a * a / 30.0
    turned = p * squares.minus + q * squares.cross
    scale = np.exp(-2.0 * log_length)
    squared = scale * (np.cosh(a) * squares.plus - g * turned)
    by_p = scale * (g * p * squares.plus - k * p * turned - g * squares.minus)
    by_q = scale * (g * q * squares.plus - k * q * turned - g * squares.cross)
    return np.maximum(squared, 0.0), by_p, by_q


def unpack_direction(log_length: float, p: float, q: float) -> tuple[float, float, float]:
    """Length along the longest continuity (in extents), its azimuth in degrees and the ratio, from log_length, p, q."""
    elongation = float(np.hypot(p, q))
    azimuth = float(np.rad2deg(0.5 * np.arctan2(q, p)) % 180.0)
    return float(np.exp(log_length + 0.5 * elongation)), azimuth, float(np.exp(-elongation))


class _Restricted(NamedTuple):
    """A restricted-likelihood problem, centred and scaled to unit variance and unit extent."""

    model: str
    squares: SquaredDistances
    values: FloatArray
    error_variance: FloatArray


def _negative_restricted(parameters: FloatArray, problem: _Restricted) -> tuple[float, FloatArray]:
    """Minus the log restricted likelihood without its constant, and its gradient by (5,) parameters.

    parameters : log sill, log nugget, log length, p, q. Patterson and Thompson 1971, Biometrika 58, 545-554; in
    geostatistics Kitanidis 1983, Water Resources Research 19, 909-921 (both from memory).
    """
    partial_sill, nugget = np.exp(parameters[:2])
    squared, by_p, by_q = stretch_distances(problem.squares, *parameters[2:])
    rho, fall = CORRELATIONS[problem.model](np.sqrt(squared))
    n = len(problem.values)
    noise = nugget + np.maximum(problem.error_variance, ERROR_FLOOR * (partial_sill + nugget))
    factor = cholesky(partial_sill * rho + np.diag(noise), lower=True, check_finite=False)
    inverse_factor = solve_triangular(factor, np.eye(n), lower=True, check_finite=False)
    inverse = inverse_factor.T @ inverse_factor
    row_sums = inverse.sum(axis=0)
    information = row_sums.sum()
    projection = inverse - np.outer(row_sums, row_sums) / information
    weighted = projection @ problem.values
    value = np.log(np.diag(factor)).sum() + 0.5 * (np.log(information) + problem.values @ weighted)
    slope = 0.5 * (projection - np.outer(weighted, weighted))
    by_squared = -0.5 * partial_sill * fall / np.where(squared > 0.0, squared, 1.0) * slope
    gradient = np.array(
        [
            partial_sill * np.sum(slope * rho),
            nugget * np.trace(slope),
            partial_sill * np.sum(slope * fall),
            np.sum(by_squared * by_p),
            np.sum(by_squared * by_q),
        ]
    )
    return float(value), gradient


def _penalty(parameters: FloatArray) -> tuple[float, FloatArray]:
    """Weak priors that hold back what the data do not say; and their gradient."""
    log_sill, log_nugget, log_length, p, q = parameters
    nugget = np.exp(log_nugget)
    away = (log_length - _LENGTH_CENTRE) / _LENGTH_WIDTH**2
    value = 0.5 * (log_sill / _SILL_WIDTH) ** 2 + nugget + 0.5 * away * (log_length - _LENGTH_CENTRE)
    value += 0.5 * (p * p + q * q) / _RATIO_WIDTH**2
    gradient = np.array([log_sill / _SILL_WIDTH**2, nugget, away, p / _RATIO_WIDTH**2, q / _RATIO_WIDTH**2])
    return float(value), gradient


def _penalised(parameters: FloatArray, problem: _Restricted) -> tuple[float, FloatArray]:
    value, gradient = _negative_restricted(parameters, problem)
    penalty, penalty_gradient = _penalty(parameters)
    return value + penalty, gradient + penalty_gradient


def _chosen_rows(points: FloatArray, values: FloatArray) -> IntArray:
    """Rows that take part in a fit: all, or a fixed choice among many that does not hang on their order."""
    in_order = np.lexsort((values, points[:, 1], points[:, 0]))
    return in_order[np.random.default_rng(0).permutation(len(values))[:_LARGEST_FIT]]


def _first(problem: _Restricted, count: int) -> _Restricted:
    """The same problem for its first `count` data alone."""
    return _Restricted(
        problem.model, problem.squares.take(count), problem.values[:count], problem.error_variance[:count]
    )


def _pin(stated: Stated, variance: float, extent: float) -> FloatArray:
    """(5,) parameters that are stated, scaled as the problem is; NaN for those that are free."""
    elongation = -np.log(stated.ratio or 1.0)
    turn = np.deg2rad(2.0 * (stated.azimuth_deg or 0.0))
    pinned = np.full(5, np.nan)
    for i, value, scale in (
        (0, stated.partial_sill, variance),
        (1, stated.nugget, variance),
        (2, stated.length, extent),
    ):
        if value is not None:
            pinned[i] = np.log(max(value / scale, 1e-6))
    pinned[2] -= 0.5 * elongation
    if stated.ratio is not None or stated.length is not None:
        pinned[3:] = elongation * np.cos(turn), elongation * np.sin(turn)
    return pinned


def _search(problem: _Restricted, pinned: FloatArray, *, anisotropic: bool) -> FloatArray:
    """(5,) parameters of the best of several starts: lengths short to long and, with a direction, four of those.

    pinned : (5,), NaN where a parameter is free
    """
    nearest = np.sqrt(np.median(np.min(np.where(problem.squares.plus > 0.0, problem.squares.plus, 4.0), axis=1)))
    shortest, longest = np.log(0.5 * nearest), np.log(3.0)
    limit = _RATIO_LIMIT if anisotropic else 0.0
    bounds = [(-7.0, 5.0), (-14.0, 3.0), (min(shortest, -2.0), longest), (-limit, limit), (-limit, limit)]
    turns = [(0.7, 0.0), (0.0, 0.7), (-0.7, 0.0), (0.0, -0.7)] if anisotropic else [(0.0, 0.0)]
    lengths = [-1.0] if anisotropic else [-2.0, -1.0, 0.0]
    free = np.isnan(pinned)
    bounds = [limits if unknown else (at, at) for limits, unknown, at in zip(bounds, free, pinned, strict=True)]
    starts = [np.where(free, [-0.2, -2.5, length, *turn], pinned) for length in lengths for turn in turns]

    def descend(part: _Restricted, start: FloatArray) -> OptimizeResult:
        options = {"maxiter": 80}
        return minimize(_penalised, start, (part,), jac=True, method="L-BFGS-B", bounds=bounds, options=options)

    scouts = _first(problem, _SCOUTS)
    best = min((descend(scouts, start) for start in starts), key=lambda fit: float(fit.fun))
    return np.asarray(best.x if len(problem.values) <= _SCOUTS else descend(problem, best.x).x)


@threadpool_limits.wrap(limits=1)  # many small factors: threads cost more than they bring
def fit_by_restricted_likelihood(
    points: FloatArray,
    values: FloatArray,
    error_variance: FloatArray,
    model: str = "matern32",
    stated: Stated = NOTHING_STATED,
    *,
    anisotropic: bool,
) -> tuple[Covariance, float]:
    """Covariance of a field of unknown constant mean by restricted maximum likelihood, and its log likelihood.

    points : (n, 2)    values, error_variance : (n,), the errors' own variances, which the nugget does not repeat.
    Needs three data or more at two places or more; beyond 600 data a fixed choice of 600 takes part.
    Weak priors keep out absurd answers: log sill about the variance between places (width 1.5), log length about a
    third of the extent (1.0), log ratio about 0 (0.8), nugget exponential with that variance as its mean. The
    log likelihood is the restricted one alone, so that fits to the same data can be compared. What is `stated` stays.
    """
    rows = _chosen_rows(points, values)
    points, values, error_variance = points[rows], values[rows], error_variance[rows]
    extent = float(np.hypot(*np.ptp(points, axis=0)))
    variance = variance_between_places(values, error_variance)
    problem = _Restricted(
        model,
        square_distances(points, extent),
        (values - np.median(values)) / np.sqrt(variance),
        error_variance / variance,
    )
    best = _search(problem, _pin(stated, variance, extent), anisotropic=anisotropic)
    length, azimuth_deg, ratio = unpack_direction(*best[2:])
    sill, nugget = (float(one) * variance for one in np.exp(best[:2]))
    covariance = Covariance(model, nugget, sill, length * extent, azimuth_deg, ratio)
    constant = 0.5 * (len(values) - 1) * np.log(2.0 * np.pi * variance)
    return stated.state(covariance), -_negative_restricted(best, problem)[0] - float(constant)


def leave_one_out_score(
    points: FloatArray, values: FloatArray, error_variance: FloatArray, covariance: Covariance
) -> float:
    """Mean log density that a covariance gives each datum from all others: higher is better, calibration included.

    Ordinary kriging in closed form (Dubrule 1983), scored by the logarithm (Gneiting and Raftery 2007, J. Am. Stat.
    Assoc. 102, 359-378; both from memory). Beyond 600 data a fixed choice of 600 takes part.
    """
    rows = _chosen_rows(points, values)
    points, values, error_variance = points[rows], values[rows], error_variance[rows]
    matrix = covariance_matrix(points, points, covariance)
    matrix[np.diag_indices_from(matrix)] += covariance.nugget + bounded_error_variance(error_variance, covariance)
    inverse = cho_solve((cholesky(matrix, lower=True), True), np.eye(len(values)))
    row_sums = inverse.sum(axis=0)
    projection = inverse - np.outer(row_sums, row_sums) / row_sums.sum()
    precision = np.maximum(np.diag(projection), 1e-300)
    squared = (projection @ (values - values.mean())) ** 2 / precision
    return float(-0.5 * np.mean(squared - np.log(precision / (2.0 * np.pi))))


def fit_covariance(
    points: FloatArray,
    values: FloatArray,
    error_variance: FloatArray,
    model: str = "matern32",
    stated: Stated = NOTHING_STATED,
) -> Covariance:
    """Covariance by restricted likelihood; with a direction where that pays and predicts data left out no worse.

    It pays where Akaike's criterion allows its two parameters, and predicts by `leave_one_out_score`. Fewer than 20
    data are fitted without a direction. Arguments as in `fit_by_restricted_likelihood`; what is stated is not fitted.
    """
    if None not in stated[:3]:
        return stated.state(Covariance(model, 0.0, 1.0, 1.0))
    data = points, values, error_variance
    alike, log_likelihood = fit_by_restricted_likelihood(*data, model, stated, anisotropic=False)
    if len(values) < FEWEST_FOR_DIRECTION or stated.ratio is not None or stated.length is not None:
        return alike
    directed, directed_likelihood = fit_by_restricted_likelihood(*data, model, stated, anisotropic=True)
    if directed_likelihood - log_likelihood <= 2.0:
        return alike
    return directed if leave_one_out_score(*data, directed) >= leave_one_out_score(*data, alike) else alike
