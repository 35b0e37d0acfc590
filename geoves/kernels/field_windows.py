"""Fields at many places: window by window, each from its own places, those about it, and some from everywhere.

One factor of all places costs their number cubed. A window of neighbouring places hears itself, a halo of the nearest
others, and a fixed few places spread over the whole, so that constants and drifts are known as from all. Cost is then
linear in places, and no array grows faster than their number. Where windows meet, what is known steps:
tests/kernels/test_field_windows.py holds the step against a tenth of the doubt.
"""

from collections.abc import Iterator, Sequence
from hashlib import sha256
from typing import NamedTuple

import numpy as np
from scipy.linalg import solve_triangular
from scipy.spatial import cKDTree

from geoves.kernels.covariances import FloatArray, IntArray
from geoves.kernels.field_priors import FieldPrior, own_covariance
from geoves.kernels.latent_fields import Posterior, Sites, condition


class WindowSizes(NamedTuple):
    """Most places of a window, places of its halo, and places from everywhere that each window hears."""

    window: int
    halo: int
    everywhere: int


class Window(NamedTuple):
    """Rows of a window's own places, and of all that it hears, its own first."""

    own: IntArray
    heard: IntArray


class NearbyPosterior(NamedTuple):
    """Fields given the sites about each place: mean (q, n), covariance (n, q, q) of each place's own fields."""

    mean: FloatArray
    covariance: FloatArray

    def at_places(self) -> tuple[FloatArray, FloatArray]:
        """Mean (n, q) and covariance (n, q, q) of each place's fields."""
        return self.mean.T.copy(), self.covariance

    def deviation(self, field: int) -> FloatArray:
        """Standard deviation (n,) of a field at the places."""
        return np.sqrt(np.maximum(self.covariance[:, field, field], 1e-300))


class Told(NamedTuple):
    """What a window hears of m places: points (m, 2), relief (m,) and sites; the first `n_own` are its own."""

    points: FloatArray
    relief: FloatArray
    sites: Sites
    n_own: int


def cut_windows(points: FloatArray, names: Sequence[str], sizes: WindowSizes) -> tuple[Window, ...]:
    """Windows of places by halving in space along the longer side; each place in one."""
    shared = choose_by_name(names, sizes.everywhere)
    tree = cKDTree(points)
    return tuple(
        Window(own, np.concatenate([own, _find_halo(own, points, tree, sizes.halo, shared)]))
        for own in _halve(np.arange(len(points)), points, sizes.window)
    )


def choose_by_name(names: Sequence[str], count: int) -> IntArray:
    """Rows of at most `count` places, by the hashes of their names: a place more or less changes one at most."""
    keys = [sha256(name.encode()).digest() for name in names]
    return np.sort(np.array(sorted(range(len(names)), key=lambda row: keys[row])[:count], dtype=np.int64))


def hear_about(centre: FloatArray, tree: cKDTree, count: int, shared: IntArray) -> IntArray:
    """Rows of the `count` places nearest to a point (2,), and of those from everywhere."""
    _, near = tree.query(centre, k=np.arange(1, min(count, tree.n) + 1))
    return np.union1d(near, shared)


def _halve(rows: IntArray, points: FloatArray, most: int) -> Iterator[IntArray]:
    if len(rows) <= most:
        yield rows
        return
    axis = int(np.argmax(np.ptp(points[rows], axis=0)))
    ordered = rows[np.argsort(points[rows, axis], kind="stable")]
    for half in np.array_split(ordered, 2):
        yield from _halve(half, points, most)


def _find_halo(own: IntArray, points: FloatArray, tree: cKDTree, count: int, shared: IntArray) -> IntArray:
    """Rows of the places nearest to the box about a window's own, and of those from everywhere."""
    low, high = points[own].min(axis=0), points[own].max(axis=0)
    many = min(len(own) + 4 * count, tree.n)
    _, near = tree.query(0.5 * (low + high), k=np.arange(1, many + 1))
    others = np.setdiff1d(near, own)
    away = np.sum(np.maximum(np.maximum(low - points[others], points[others] - high), 0.0) ** 2, axis=1)
    halo = others[np.argsort(away, kind="stable")[:count]]
    return np.union1d(halo, np.setdiff1d(shared, own))


def tell(rows: IntArray, points: FloatArray, relief: FloatArray, sites: Sites, n_own: int) -> Told:
    """What places of these rows say."""
    return Told(points[rows], relief[rows], Sites(sites.precision[rows], sites.shift[rows]), n_own)


def condition_told(told: Told, *, priors: tuple[FieldPrior, ...]) -> Posterior:
    """All fields at all places that were told of."""
    mean = np.array([prior.mean for prior in priors])
    own = np.array([own_covariance(prior, told.points, told.relief) for prior in priors])
    return condition(mean, own, told.sites)


def condition_window(told: Told, *, priors: tuple[FieldPrior, ...]) -> NearbyPosterior:
    """Fields at a window's own places."""
    posterior = condition_told(told, priors=priors)
    _, covariance = posterior.at_places()
    return NearbyPosterior(posterior.mean[:, : told.n_own], covariance[: told.n_own])


def join_windows(windows: Sequence[Window], found: Sequence[NearbyPosterior]) -> NearbyPosterior:
    """What the windows found, in the order of the places."""
    rows = np.concatenate([window.own for window in windows])
    mean = np.concatenate([one.mean for one in found], axis=1)
    covariance = np.concatenate([one.covariance for one in found])
    back = np.argsort(rows)
    # In one layout wherever they were found: sums over another may differ in the last bit.
    return NearbyPosterior(np.ascontiguousarray(mean[:, back]), np.ascontiguousarray(covariance[back]))


def draw_windows(
    windows: Sequence[Window], told: Iterator[Told], priors: tuple[FieldPrior, ...], count: int, seed: Sequence[int]
) -> FloatArray:
    """Realisations (count, q, n): each window given those of its neighbours that were drawn before it.

    Sequential simulation (Gómez-Hernández and Journel 1993, from memory), a window at a time.
    """
    n, q = sum(len(window.own) for window in windows), len(priors)
    members = np.empty((count, q, n))
    drawn = np.zeros(n, dtype=bool)
    for number, (window, said) in enumerate(zip(windows, told, strict=True)):
        posterior = condition_told(said, priors=priors)
        known = np.flatnonzero(drawn[window.heard])
        order = np.concatenate([known, np.arange(len(window.own))])
        rows = (np.arange(q)[:, None] * len(window.heard) + order).T.ravel()  # place by place, those known first
        covariance = posterior.covariance[np.ix_(rows, rows)]
        covariance[np.diag_indices_from(covariance)] += 1e-10 * np.mean(np.diag(covariance))
        factor = np.linalg.cholesky(covariance)
        mean, split = posterior.mean.ravel()[rows], q * len(known)
        normal = np.random.default_rng([*seed, number]).standard_normal((count, q * len(window.own)))
        fresh = mean[split:] + normal @ factor[split:, split:].T
        if split:
            before = members[:, :, window.heard[known]].transpose(0, 2, 1).reshape(count, split) - mean[:split]
            fresh += solve_triangular(factor[:split, :split], before.T, lower=True).T @ factor[split:, :split].T
        members[:, :, window.own] = fresh.reshape(count, len(window.own), q).transpose(0, 2, 1)
        drawn[window.own] = True
    return members
