"""How much batching buys: ratios against references timed in the same run, on one thread; and a season on all cores.

Run as `python -m tests.benchmarks.speed`. Times are the best of several runs; on a busy machine trust the ratios alone.
"""

import time
from typing import NamedTuple

import empymod
import libdlf
import numpy as np
from scipy.optimize import least_squares
from threadpoolctl import threadpool_limits

from geoves.kernels.damped_steps import Prior, Readings, fit_layers, stack_curves
from geoves.kernels.layered_earth import (
    apparent_resistivity,
    layout,
    response,
    response_and_sensitivity,
)
from tests.benchmarks import season
from tests.reference import quadrature

HALF_SPACING = np.geomspace(1.5, 500.0, 26)
POTENTIAL_HALF_SPACING = HALF_SPACING / 10.0
N_LAYERS = 5
NOISE = 0.03


class Timing(NamedTuple):
    """What was timed, and the seconds that one sounding took."""

    name: str
    seconds: float


def timed(name, work, n_soundings, repeats=5):
    """A `Timing`: the best of several runs, after one that warms caches."""
    work()
    best = np.inf
    for _ in range(repeats):
        begin = time.perf_counter()
        work()
        best = min(best, time.perf_counter() - begin)
    return Timing(name, best / n_soundings)


def print_table(title, timings):
    """Microseconds a sounding, and how many times the first row."""
    print(f"\n{title}")
    for timing in timings:
        print(f"  {timing.name:<58} {1e6 * timing.seconds:12.1f} µs {timing.seconds / timings[0].seconds:9.1f} x")


def random_models(count, n_layers, rng):
    """Thickness (count, k-1), 2 to 60 m, and resistivity (count, k), 5 to 1000 ohm m."""
    thickness = np.exp(rng.uniform(np.log(2.0), np.log(60.0), (count, n_layers - 1)))
    return thickness, np.exp(rng.uniform(np.log(5.0), np.log(1000.0), (count, n_layers)))


def filtered_directly(base, coefficients, thickness, resistivity):
    """The filter as it is printed: its own wavenumbers at every spacing, one model, ideal array."""
    wavenumber = base / HALF_SPACING[:, None]
    excess = quadrature.resistivity_transform(wavenumber, thickness, resistivity) - resistivity[0]
    return resistivity[0] + excess @ coefficients


def modelled_fields(thickness, resistivity):
    """One dipole field of empymod at each spacing: the least that a general modeller must do for a curve."""
    return empymod.dipole(
        src=[0, 0, 1e-3],
        rec=[HALF_SPACING, np.zeros(HALF_SPACING.size), 1e-3],
        depth=np.concatenate([[0.0], np.cumsum(thickness)]),
        res=np.concatenate([[1e14], resistivity]),
        freqtime=1e-6,
        ab=11,
        verb=0,
    )


def time_responses(rng, count=256, few=12):
    """Timings of the response of the same models by four ways."""
    thickness, resistivity = random_models(count, N_LAYERS, rng)
    weights, wavenumber = layout(HALF_SPACING, POTENTIAL_HALF_SPACING)
    base, _, j1 = libdlf.hankel.key_201_2012()

    def one_at_a_time():
        for i in range(count):
            response(weights[None], wavenumber, thickness[i : i + 1], resistivity[i : i + 1])

    def directly():
        for i in range(few):
            filtered_directly(base, base * j1, thickness[i], resistivity[i])

    def by_quadrature():
        for i in range(2):
            quadrature.response(HALF_SPACING, POTENTIAL_HALF_SPACING, thickness[i], resistivity[i])

    def by_empymod():
        for i in range(few):
            modelled_fields(thickness[i], resistivity[i])

    return [
        timed(
            f"batched response, {count} models",
            lambda: response(weights[None], wavenumber, thickness, resistivity),
            count,
        ),
        timed("the same, one model at a time", one_at_a_time, count),
        timed("the filter at every spacing, one at a time (ideal array)", directly, few),
        timed("empymod, a dipole field at every spacing", by_empymod, few),
        timed("quadrature between Bessel zeros", by_quadrature, 2, repeats=1),
    ]


def time_sensitivities(rng, count=64):
    """Timings of the response alone, with its derivative, and with central differences."""
    thickness, resistivity = random_models(count, N_LAYERS, rng)
    weights, wavenumber = layout(HALF_SPACING, POTENTIAL_HALF_SPACING)

    def differences():
        for _ in range(2 * (2 * N_LAYERS - 1)):
            response(weights[None], wavenumber, thickness, resistivity)

    return [
        timed("response", lambda: response(weights[None], wavenumber, thickness, resistivity), count, 20),
        timed(
            "response and sensitivity",
            lambda: response_and_sensitivity(weights[None], wavenumber, thickness, resistivity),
            count,
            20,
        ),
        timed("central differences instead", differences, count, 20),
    ]


class Task(NamedTuple):
    """Curves of 4-layer models with noise, and what an inversion starts from; all that both solvers are given."""

    observed: np.ndarray
    weights: np.ndarray
    wavenumber: np.ndarray
    prior: Prior
    start: np.ndarray


def inversion_task(rng, count, n_layers):
    """A `Task`: broad priors, one start of geometric interface depths and the curve's mean resistivity."""
    weights, wavenumber = layout(HALF_SPACING, POTENTIAL_HALF_SPACING)
    true = apparent_resistivity(HALF_SPACING, POTENTIAL_HALF_SPACING, *random_models(count, n_layers, rng))
    observed = np.log(true) + NOISE * rng.standard_normal(true.shape)
    depths = np.geomspace(2.0, 100.0, n_layers - 1)
    start = np.empty((count, 2 * n_layers - 1))
    start[:, : n_layers - 1] = np.log(np.diff(depths, prepend=0.0))
    start[:, n_layers - 1 :] = observed.mean(axis=1, keepdims=True)
    deviation = np.full_like(start, 1.5)
    return Task(observed, weights, wavenumber, Prior(start, deviation, start - 6.0, start + 6.0), start)


def solved_by_batch(task, n_layers):
    """Unknowns (b, p) by `fit_layers`, all curves together."""
    segment, error = np.zeros(HALF_SPACING.size, dtype=np.int64), np.full(HALF_SPACING.size, NOISE)
    readings = [Readings(HALF_SPACING, POTENTIAL_HALF_SPACING, np.exp(row), error, segment) for row in task.observed]
    return fit_layers(task.start, n_layers, stack_curves(readings, task.wavenumber), task.prior).unknowns


def solved_one_by_one(task, n_layers, *, differences):
    """Unknowns (b, p) by scipy's `least_squares`, with the same response and prior."""
    n_thick = n_layers - 1
    answers = np.empty_like(task.start)
    for i, start in enumerate(task.start):
        deviation = task.prior.deviation[i]

        def residual(x, i=i, start=start, deviation=deviation):
            h, rho = np.exp(x[None, :n_thick]), np.exp(x[None, n_thick:])
            predicted = np.log(response(task.weights[None], task.wavenumber, h, rho)[0])
            return np.concatenate([(predicted - task.observed[i]) / NOISE, (x - start) / deviation])

        def slope(x, deviation=deviation):
            h, rho = np.exp(x[None, :n_thick]), np.exp(x[None, n_thick:])
            _, sensitivity = response_and_sensitivity(task.weights[None], task.wavenumber, h, rho)
            return np.concatenate([sensitivity[0] / NOISE, np.diag(1.0 / deviation)])

        bounds = task.prior.lowest[i], task.prior.highest[i]
        answers[i] = least_squares(residual, start, "2-point" if differences else slope, bounds=bounds).x
    return answers


def share_fitted(task, unknowns, n_layers):
    """Share of the curves that are met to 1.1 of their noise or better."""
    h, rho = np.exp(unknowns[:, : n_layers - 1]), np.exp(unknowns[:, n_layers - 1 :])
    misfit = (np.log(response(task.weights[None], task.wavenumber, h, rho)) - task.observed) / NOISE
    return np.mean(np.mean(misfit**2, axis=1) <= 1.1)


def time_inversions(rng, count=64, n_layers=4):
    """Timings of the inversion of the same curves from the same start, and how many were fitted."""
    task = inversion_task(rng, count, n_layers)
    ways = {
        "batched damped steps": (lambda: solved_by_batch(task, n_layers), 3),
        "scipy least_squares, the same derivative": (lambda: solved_one_by_one(task, n_layers, differences=False), 1),
        "scipy least_squares, finite differences": (lambda: solved_one_by_one(task, n_layers, differences=True), 1),
    }
    timings = []
    for name, (work, repeats) in ways.items():
        fitted = share_fitted(task, work(), n_layers)
        timings.append(timed(f"{name} ({fitted:.0%} fitted)", work, count, repeats))
    return timings


def main():
    """Print the tables."""
    rng = np.random.default_rng(20)
    with threadpool_limits(1):
        print_table(f"Response: {HALF_SPACING.size} spacings, {N_LAYERS} layers, finite MN", time_responses(rng))
        print_table(f"Derivative: {HALF_SPACING.size} spacings, {N_LAYERS} layers", time_sensitivities(rng))
        print_table("Inversion: 64 curves, 4 layers, 3 % noise, one start", time_inversions(rng))
    print(f"\nA season on all cores: inversion and interpretation, calibrated, ensembles of {season.DRAWS}")
    season.print_season(150)


if __name__ == "__main__":
    main()
