"""The joint inference: places and fields hear each other until both agree.

Each place's likelihood is a cloud of weighed unknowns; fields hear it as a normal site (expectation propagation), and
the fields' covariances are refitted to their posterior moments (expectation maximisation) on the way.
"""

import zlib
from collections.abc import Callable, Iterable, Sequence
from functools import partial
from typing import Any, NamedTuple

import numpy as np

from geoves.domain.arrays import BoolArray, FloatArray, IntArray
from geoves.domain.fields import Ceiling
from geoves.geology.flat_layers import Misreading, Spreads, find_misreading, misread_window, no_misreading
from geoves.geology.options import GeologyOptions
from geoves.kernels import latent_fields, local_clouds
from geoves.kernels.field_priors import FieldPrior, fit_prior, own_covariance, own_variance
from geoves.kernels.field_windows import (
    NearbyPosterior,
    Window,
    condition_told,
    condition_window,
    join_windows,
    tell,
)
from geoves.kernels.flat_layers import move_normals
from geoves.kernels.joint_state import ColumnOrder, Places
from geoves.kernels.latent_fields import Posterior, Sites
from geoves.kernels.local_clouds import Cloud, Normal, Weighed

Map = Callable[[Callable[[Any], Any], Iterable[Any]], Iterable[Any]]

# Deviation, in natural logs, of the factor that a change of MN brings.
SEGMENT_DEVIATION = 0.05
# Starts of the search at a place: how far the basal contact (ln m) lies from what is expected, and gravel's presence.
STARTS = ((-0.5, -1.0), (0.0, 1.0), (0.6, -1.0), (0.6, 1.0))
# A place that is drawn anew starts with gravel this much there, and this much not.
PRESENT_AGAIN = 1.0
# How far, in deviations of the field, presence may leave the start of a search that is to hold it.
HELD = 0.5
# How far a site moves toward what it should be, a round.
DAMPING = 0.5
# Rounds before covariances are refitted, from one refit to the next, and at the end without.
FIRST_REFIT, REFIT_EVERY, ROUNDS_WITHOUT = 3, 3, 5
# The misreadings of flat layers are found anew every so manieth round.
MISREAD_EVERY = 2
# They are the same where none differs by more than this, in natural logs of the depth below the ceiling.
SAME_MISREADING = 0.005
# Places whose clouds are weighed at a time: bounds the memory.
TOGETHER = 300
# Places are drawn anew every so manieth round.
REDRAW_EVERY = 2


class Task(NamedTuple):
    """What is to be inferred: n places and the order of their columns; `steadfast` (n,) are never set aside.

    windows : of the places, none where all are solved at once    sample : (s,) rows that covariances are fitted to then
    """

    names: tuple[str, ...]
    points: FloatArray
    places: Places
    order: ColumnOrder
    ceiling: Ceiling
    spreads: Spreads
    steadfast: BoolArray
    windows: tuple[Window, ...] = ()
    sample: IntArray | None = None


class State(NamedTuple):
    """Where an inference stands.

    priors : of the fields    sites : what the places say    relief : (n,) m    posterior : of the fields at all places
    cloud : of each place    base : (n,) log evidence of each place under the priors alone
    misreading : by how much flat layers misread each place's basal contact; its cloud and its readings speak of the
    contact as read, sites and fields of the true one
    moved : root mean square movement of the basal contacts in the last rounds, in deviations, the latest last
    """

    priors: tuple[FieldPrior, ...]
    sites: Sites
    relief: FloatArray
    posterior: Posterior | NearbyPosterior
    cloud: Cloud
    base: FloatArray
    misreading: Misreading
    moved: tuple[float, ...] = ()


class Start(NamedTuple):
    """Where a search begins, unknowns (b, p), and whether it holds to presence as it is there.

    Else all searches may end on the brink between gravel and none, and neither side be drawn from.
    """

    unknowns: FloatArray
    held: bool

    def take(self, rows: IntArray) -> "Start":
        return self._replace(unknowns=self.unknowns[rows])


class Heard(NamedTuple):
    """Each place at the end: what others say of it, the same as its spread would read it, its cloud weighed by that,
    and the trust it has (n,).
    """

    cavity: Normal
    as_read: Normal
    weighed: Weighed
    trust: FloatArray

    def take(self, rows: IntArray) -> "Heard":
        weighed = Weighed(*(values[rows] for values in self.weighed))
        return Heard(self.cavity.take(rows), self.as_read.take(rows), weighed, self.trust[rows])


def infer(
    task: Task,
    priors: Sequence[FieldPrior],
    options: GeologyOptions,
    map: Map = map,  # noqa: A002 - the seam is named for what it replaces
) -> State:
    """Fields and covariances from nothing but the priors."""
    n, q = len(task.names), task.order.n_fields
    sites = Sites(np.zeros((n, q, q)), np.zeros((n, q)))
    relief = np.zeros(n)
    posterior = _condition(task, priors, sites, relief, map)
    cavity = _complete(*latent_fields.cavities(*posterior.at_places(), sites), task)
    starts = [Start(cavity.mean.copy(), held=True) for _ in STARTS]
    for start, (deeper, there) in zip(starts, STARTS, strict=True):
        start.unknowns[:, 0] += deeper
        start.unknowns[:, task.order.first_presence : task.order.first_deep] = there
    cloud = _draw(task, np.arange(n), cavity, starts, options, 0, map)
    base = weigh_clouds(cloud, cavity).log_evidence
    state = State(tuple(priors), sites, relief, posterior, cloud, base, no_misreading(n))
    for sweep in range(options.sweeps):
        state = _hear(task, state, sweep, options, map, refit=sweep < options.sweeps - ROUNDS_WITHOUT)
        if sweep >= options.sweeps // 2 and _has_settled(state, options):
            break
    return state


def infer_again(
    task: Task,
    state: State,
    changed: BoolArray,
    options: GeologyOptions,
    map: Map = map,  # noqa: A002
) -> State:
    """The same after places in `changed` (n,) say something else: their clouds anew, all sites heard, priors kept."""
    # What was decided there speaks of the contact as it is, and is not moved by what flat layers would have made of it.
    state = state._replace(misreading=state.misreading.without(changed))
    cavity = read_flat(find_cavity(task, state), state.misreading)
    rows = np.flatnonzero(changed)
    cloud = _redraw(task, state.cloud, rows, cavity, options, options.sweeps, map)
    alone = _complete(*_marginal_priors(task, state.priors), task)
    base = np.where(changed, weigh_clouds(cloud, alone).log_evidence, state.base)
    state = state._replace(cloud=cloud, base=base, moved=())
    for sweep in range(options.pick_sweeps):
        state = _hear(task, state, options.sweeps + 1 + sweep, options, map, refit=False)
    return state


def listen(task: Task, state: State, options: GeologyOptions) -> Heard:
    """How each place stands to the others at the end."""
    cavity = find_cavity(task, state)
    as_read = read_flat(cavity, state.misreading)
    weighed = weigh_clouds(state.cloud, as_read)
    return Heard(cavity, as_read, weighed, _trust(task, state, weighed, options))


def mind_flat_layers(task: Task, state: State, options: GeologyOptions, map: Map = map) -> State:  # noqa: A002
    """The inference gone on with, minding where flat layers mislead: what the contact's relief does to each reading.

    The geology says how it is misread, and what is read anew says more of the geology: a few times over.
    """
    for sweep in range(options.flat_layer_sweeps):
        if sweep % MISREAD_EVERY == 0:
            state = state._replace(misreading=_find_misreading(task, state, map))
        state = _hear(task, state, 2 * options.sweeps + sweep, options, map, refit=False)
    return state


def _find_misreading(task: Task, state: State, map: Map) -> Misreading:  # noqa: A002
    """At all places at once, or window by window."""
    if not isinstance(state.posterior, NearbyPosterior):
        return find_misreading(state.posterior, state.priors[0], task.points, task.ceiling, task.spreads)
    told = (
        (tell(one.heard, task.points, state.relief, state.sites, len(one.own)), task.spreads.take(one.heard))
        for one in task.windows
    )
    found = list(map(partial(misread_window, priors=state.priors, ceiling=task.ceiling), told))
    back = np.argsort(np.concatenate([one.own for one in task.windows]))
    return Misreading(*(np.concatenate(values)[back] for values in zip(*found, strict=True)))


def read_flat(cavity: Normal, misreading: Misreading) -> Normal:
    """What others say of places, as spreads over flat layers would read it."""
    pull = np.matmul(cavity.precision, cavity.mean[..., None])[..., 0]
    precision, pull = move_normals(cavity.precision, pull, misreading.step, misreading.variance)
    return Normal(np.asarray(np.linalg.solve(precision, pull[..., None])[..., 0]), precision)


def find_cavity(task: Task, state: State) -> Normal:
    """What all others say of each place, with the prior of its own segments' factors."""
    return _complete(*latent_fields.cavities(*state.posterior.at_places(), state.sites), task)


def has_converged(state: State, options: GeologyOptions) -> bool:
    """Whether the last rounds left the basal contacts where they were."""
    return bool(np.mean(state.moved[-2:]) < 2.0 * options.settled)


def _has_settled(state: State, options: GeologyOptions) -> bool:
    return len(state.moved) > ROUNDS_WITHOUT and max(state.moved[-ROUNDS_WITHOUT:]) < options.settled


def _hear(task: Task, state: State, sweep: int, options: GeologyOptions, map: Map, *, refit: bool) -> State:  # noqa: A002
    """One round: cavities, clouds weighed or drawn anew, sites, covariances."""
    q = task.order.n_fields
    cavity = read_flat(find_cavity(task, state), state.misreading)
    cavity_mean, cavity_precision = cavity.mean[:, :q], cavity.precision[:, :q, :q]
    cloud = state.cloud
    weighed = weigh_clouds(cloud, cavity)
    poor = np.flatnonzero(weighed.effective_size < options.least_effective_size)
    if poor.size and sweep and sweep % REDRAW_EVERY == 0:
        cloud = _redraw(task, cloud, poor, cavity, options, sweep, map)
        weighed = weigh_clouds(cloud, cavity)
    mean, covariance = _find_moments(cloud, weighed, cavity, q)
    covariance = latent_fields.denoise(cavity_precision, covariance, weighed.effective_size)
    by_curve = np.flatnonzero(~task.steadfast)
    gravel = np.arange(task.order.first_presence, task.order.first_resistivity)
    if gravel.size and not options.curves_tell_gravel:
        cut = latent_fields.cut(
            cavity_mean[by_curve], cavity_precision[by_curve], mean[by_curve], covariance[by_curve], gravel
        )
        mean[by_curve], covariance[by_curve] = cut
    trust = _trust(task, state._replace(cloud=cloud), weighed, options)[:, None]
    away = mean - cavity_mean
    spread = (trust * (1.0 - trust) * away)[:, :, None] * away[:, None, :]
    covariance = trust[..., None] * covariance + (1.0 - trust[..., None]) * np.linalg.inv(cavity_precision) + spread
    read = latent_fields.match(cavity_mean, cavity_precision, cavity_mean + trust * away, covariance)
    wanted = Sites(*move_normals(*read, -state.misreading.step, state.misreading.variance))
    sites = Sites(*(old + DAMPING * (new - old) for old, new in zip(state.sites, wanted, strict=True)))
    priors = state.priors
    if refit and sweep >= FIRST_REFIT and sweep % REFIT_EVERY == 0:
        priors = _refit(task, state)
    relief = _relief(state.posterior, task.ceiling.margin) if sweep >= FIRST_REFIT - 1 else state.relief
    posterior = _condition(task, priors, sites, relief, map)
    shift = (posterior.mean[0] - state.posterior.mean[0]) / posterior.deviation(0)
    moved = (*state.moved, float(np.sqrt(np.mean(shift**2))))
    return state._replace(priors=priors, sites=sites, relief=relief, posterior=posterior, cloud=cloud, moved=moved)


def _trust(task: Task, state: State, weighed: Weighed, options: GeologyOptions) -> FloatArray:
    """Probability (n,) that each place's evidence is of this ground, not of some other that the priors allow."""
    against = np.log(options.contradiction / (1.0 - options.contradiction)) + state.base - weighed.log_evidence
    return np.where(task.steadfast, 1.0, 1.0 / (1.0 + np.exp(np.clip(against, -50.0, 50.0))))


def weigh_clouds(cloud: Cloud, prior: Normal) -> Weighed:
    """`local_clouds.weigh`, some places at a time."""
    parts = [
        local_clouds.weigh(Cloud(*(values[rows] for values in cloud)), prior.take(rows))
        for rows in split_rows(len(cloud.unknowns))
    ]
    return Weighed(*(np.concatenate(values) for values in zip(*parts, strict=True)))


def _find_moments(cloud: Cloud, weighed: Weighed, prior: Normal, q: int) -> tuple[FloatArray, FloatArray]:
    """Mean (n, q) and covariance (n, q, q) of the fields in each cloud, some places at a time.

    The mean without chance; the covariance is the plain one, for what chance does to it is taken out afterwards.
    """
    parts = []
    for rows in split_rows(len(cloud.unknowns)):
        some, weights = Cloud(*(values[rows] for values in cloud)), Weighed(*(values[rows] for values in weighed))
        mean, _ = local_clouds.sharp_moments(some, weights, prior.take(rows))
        _, covariance = local_clouds.moments(some.unknowns, weights.weight)
        parts.append((mean[:, :q], covariance[:, :q, :q]))
    mean, covariance = (np.concatenate(values) for values in zip(*parts, strict=True))
    return mean, covariance


def split_rows(n: int) -> list[IntArray]:
    """Rows of n places, some at a time."""
    return [np.arange(i, min(i + TOGETHER, n)) for i in range(0, n, TOGETHER)]


def _condition(
    task: Task,
    priors: Sequence[FieldPrior],
    sites: Sites,
    relief: FloatArray,
    map: Map,  # noqa: A002
) -> Posterior | NearbyPosterior:
    """Fields given the sites: all at once, or window by window through the map."""
    if task.windows:
        told = (tell(one.heard, task.points, relief, sites, len(one.own)) for one in task.windows)
        return join_windows(task.windows, list(map(partial(condition_window, priors=tuple(priors)), told)))
    mean = np.array([prior.mean for prior in priors])
    return latent_fields.condition(
        mean, np.array([own_covariance(prior, task.points, relief) for prior in priors]), sites
    )


def _marginal_priors(task: Task, priors: Sequence[FieldPrior]) -> tuple[FloatArray, FloatArray]:
    """Mean (n, q) and precision (n, q, q) of each place's fields before anything is heard."""
    n = len(task.names)
    variance = np.array([own_variance(prior) for prior in priors])
    return np.tile([prior.mean for prior in priors], (n, 1)), np.tile(np.eye(len(priors)) / variance, (n, 1, 1))


def _refit(task: Task, state: State) -> tuple[FieldPrior, ...]:
    """Every field's covariance from its posterior moments: at all places, or at the sample given the sample alone."""
    posterior, rows = state.posterior, np.arange(len(task.names))
    if isinstance(posterior, NearbyPosterior):
        rows = rows if task.sample is None else task.sample
        posterior = condition_told(tell(rows, task.points, state.relief, state.sites, len(rows)), priors=state.priors)
    fitted = []
    for f, prior in enumerate(state.priors):
        away = posterior.mean[f] - prior.mean
        moment = posterior.block(f) + np.outer(away, away)
        fitted.append(fit_prior(prior, task.points[rows], state.relief[rows], moment))
    return tuple(fitted)


def _relief(posterior: Posterior | NearbyPosterior, margin: float) -> FloatArray:
    """How far (n,) m the basal contact is expected below the plain."""
    return np.asarray(np.exp(posterior.mean[0] + 0.5 * posterior.deviation(0) ** 2) - margin)


def _complete(mean: FloatArray, precision: FloatArray, task: Task) -> Normal:
    """Normals of the fields, completed by the prior of the segments' factors."""
    n, q = mean.shape
    p = q + task.places.n_factors
    full_mean, full = np.zeros((n, p)), np.zeros((n, p, p))
    full_mean[:, :q], full[:, :q, :q] = mean, precision
    factors = np.arange(q, p)
    full[:, factors, factors] = SEGMENT_DEVIATION**-2
    return Normal(full_mean, full)


def _redraw(
    task: Task,
    cloud: Cloud,
    rows: IntArray,
    cavity: Normal,
    options: GeologyOptions,
    sweep: int,
    map: Map,  # noqa: A002
) -> Cloud:
    """The clouds with those of some rows drawn anew, from what they had found and from what the others expect."""
    if not rows.size:
        return cloud
    old = Cloud(*(values[rows] for values in cloud))
    found = np.einsum("bm,bmp->bp", local_clouds.weigh(old, cavity.take(rows)).weight, old.unknowns)
    presence = slice(task.order.first_presence, task.order.first_deep)
    there, gone = found.copy(), found.copy()
    there[:, presence] = np.maximum(found[:, presence], PRESENT_AGAIN)
    gone[:, presence] = np.minimum(found[:, presence], -PRESENT_AGAIN)
    free = Start(found, held=False), Start(cavity.mean[rows], held=False)
    starts = [*free, Start(there, held=True), Start(gone, held=True)]
    fresh = _draw(task, rows, cavity.take(rows), starts, options, sweep, map)
    renewed = Cloud(*(values.copy() for values in cloud))
    for values, new in zip(renewed, fresh, strict=True):
        values[rows] = new
    return renewed


def _draw(
    task: Task,
    rows: IntArray,
    cavity: Normal,
    starts: Sequence[Start],
    options: GeologyOptions,
    sweep: int,
    map: Map,  # noqa: A002
) -> Cloud:
    """Clouds of some places, block by block through the map; every place has a stream of chance of its own."""
    seeds = [(options.random_seed, zlib.crc32(task.names[row].encode()), sweep) for row in rows]
    parts = []
    for i in range(0, len(rows), options.block):
        part = np.arange(i, min(i + options.block, len(rows)))
        places = task.places.take(rows[part])
        parts.append((places, cavity.take(part), [start.take(part) for start in starts], [seeds[j] for j in part]))
    size = (options.draws_at_fit, options.rounds, options.draws_a_round)
    clouds = list(map(partial(_draw_block, order=task.order, size=size), parts))
    # In one layout wherever they were drawn: sums over another may differ in the last bit.
    return Cloud(*(np.ascontiguousarray(np.concatenate(values)) for values in zip(*clouds, strict=True)))


def _draw_block(
    part: tuple[Places, Normal, list[Start], list[tuple[int, int, int]]],
    *,
    order: ColumnOrder,
    size: tuple[int, int, int],
) -> Cloud:
    places, prior, starts, seeds = part
    fits = [
        local_clouds.fit_places(
            start.unknowns, _hold_presence(prior, start.unknowns, order) if start.held else prior, places, order
        )
        for start in starts
    ]
    generators = [np.random.default_rng(seed) for seed in seeds]
    return local_clouds.draw_clouds(fits, prior, places, order, generators, size)


def _hold_presence(prior: Normal, at: FloatArray, order: ColumnOrder) -> Normal:
    """A prior that keeps the presence of gravel near where it is at `at` (b, p)."""
    presence = np.arange(order.first_presence, order.first_deep)
    precision = prior.precision.copy()
    precision[:, presence, presence] += HELD**-2
    pull = np.zeros_like(at)
    pull[:, presence] = HELD**-2 * (at - prior.mean)[:, presence]
    return Normal(prior.mean + np.linalg.solve(precision, pull[..., None])[..., 0], precision)


def all_priors(priors: Sequence[FieldPrior]) -> tuple[FloatArray, FloatArray]:
    """Mean and deviation (q,) of each field before anything is heard, drifts included."""
    total = [prior.covariance.sill + prior.drift_variance + prior.relief_variance for prior in priors]
    return np.array([prior.mean for prior in priors]), np.sqrt(total)
