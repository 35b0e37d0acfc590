"""Direct-current response of horizontal layers to a Schlumberger array, and its derivative.

The apparent resistivity is a Hankel transform of the resistivity transform T over wavenumber. It is computed as
rho_1 + W (T - rho_1): W depends on the electrodes alone (a digital linear filter [1], folded with a spline on a
shared grid of wavenumbers and with the finite potential spread), T on the layers alone. Both are batched.

[1] Key, K., 2012, Is the fast Hankel transform faster than quadrature?, Geophysics 77(3), F21-F30.
[2] Koefoed, O., 1979, Geosounding Principles 1, Elsevier: the recurrence of the resistivity transform.
"""

from collections.abc import Iterable
from functools import lru_cache

import libdlf
import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import BSpline, make_interp_spline
from scipy.sparse import csr_array
from threadpoolctl import threadpool_limits

Floats = NDArray[np.float64]

SPLINE_DEGREE = 7
POINTS_PER_DECADE = 16
# Filter abscissae (wavenumber times spacing) outside of this range add less than 1e-8 of the response.
LOWEST_ABSCISSA, HIGHEST_ABSCISSA = 3e-4, 400.0
# The grid serves spacings down to this (m) whatever the array, so that T - rho_1 has died away at its upper end
# over a first layer of a centimetre too.
SHORTEST_SERVED = 0.25
# Gauss-Legendre points over the potential spread: error 3e-8 at MN/AB = 1/5.
SPREAD_NODES, SPREAD_WEIGHTS = np.polynomial.legendre.leggauss(4)


@lru_cache(maxsize=8)
def _spline_basis(wavenumber: bytes) -> tuple[Floats, Floats]:
    """Knots and collocation matrix (l, l) of the spline through values at the wavenumbers."""
    log_grid = np.log(np.frombuffer(wavenumber))
    knots = make_interp_spline(log_grid, np.zeros_like(log_grid), k=SPLINE_DEGREE).t
    return knots, BSpline.design_matrix(log_grid, knots, SPLINE_DEGREE).toarray()


@lru_cache(maxsize=1)
def _hankel_filter() -> tuple[Floats, Floats]:
    """Abscissae and J1 weights, those for s² ∫ f(λ) J1(λs) λ dλ = Σ w f(b/s)."""
    base, _, j1 = libdlf.hankel.key_201_2012()
    return base, base * j1


def geometric_factor(half_spacing: Floats, potential_half_spacing: Floats) -> Floats:
    """Geometric factor K (m) of a symmetric array, for apparent resistivity = K ΔV / I.

    half_spacing AB/2 and potential_half_spacing MN/2 in m, of one shape. K = π (a² - b²) / (2 b), exact for point
    electrodes on a half-space (ASTM D6431 and any textbook).
    """
    a, b = np.asarray(half_spacing), np.asarray(potential_half_spacing)
    return np.asarray(np.pi * (a**2 - b**2) / (2.0 * b))


def wavenumber_grid(shortest: float, longest: float) -> Floats:
    """Wavenumbers (1/m), evenly spaced in the log, that serve all spacings from `shortest` to `longest` (m)."""
    first, last = np.log(LOWEST_ABSCISSA / longest), np.log(HIGHEST_ABSCISSA / min(shortest, SHORTEST_SERVED))
    count = int(np.ceil((last - first) / np.log(10.0) * POINTS_PER_DECADE)) + 1
    return np.exp(np.linspace(first, last, count))


def shared_wavenumbers(spacings: Iterable[tuple[Floats, Floats]]) -> Floats:
    """One grid of wavenumbers (1/m) that serves several curves, each given as (AB/2, MN/2) in m."""
    pairs = list(spacings)
    shortest = min(float(np.min(a - b)) for a, b in pairs)
    longest = max(float(np.max(a + b)) for a, b in pairs)
    return wavenumber_grid(shortest, longest)


def response_weights(half_spacing: Floats, potential_half_spacing: Floats, wavenumber: Floats) -> Floats:
    """W (n, l), so that W (T - rho_1) + rho_1 is the apparent resistivity at n electrode layouts.

    half_spacing, potential_half_spacing : (n,) m (0 for the ideal limit of a vanishing potential spread)
    wavenumber : (l,) 1/m from `wavenumber_grid`, made for spacings from min(a - b) to max(a + b)

    A finite potential spread is the mean of the ideal response over u = 1/r, u uniform on [1/(a + b), 1/(a - b)]:
    the potential difference is the integral of the field, and the field goes with rho_a(r) / r².
    """
    return _weights(
        *(
            np.ascontiguousarray(values, dtype=float).tobytes()
            for values in (half_spacing, potential_half_spacing, wavenumber)
        )
    )


@lru_cache(maxsize=1024)
@threadpool_limits.wrap(limits=1)  # what is remembered must not hang on how many threads first asked for it
def _weights(half_spacing: bytes, potential_half_spacing: bytes, wavenumber_bytes: bytes) -> Floats:
    """`response_weights`, remembered: crews keep to a few electrode layouts. Some 30 kB each."""
    a, b = np.frombuffer(half_spacing)[:, None], np.frombuffer(potential_half_spacing)[:, None]
    wavenumber = np.frombuffer(wavenumber_bytes)
    near, far = 1.0 / (a - b), 1.0 / (a + b)
    spacing = 1.0 / (0.5 * (near + far) + 0.5 * (near - far) * SPREAD_NODES)
    base, weight = _hankel_filter()
    knots, collocation = _spline_basis(wavenumber_bytes)
    log_grid = np.log(wavenumber)
    log_points = (np.log(base) - np.log(spacing)[..., None]).reshape(-1)
    # Below the grid the transform is flat, above it T - rho_1 is nothing.
    basis = BSpline.design_matrix(np.clip(log_points, log_grid[0], log_grid[-1]), knots, SPLINE_DEGREE)
    folded = np.tile(np.outer(0.5 * SPREAD_WEIGHTS, weight).reshape(-1), a.shape[0]) * (log_points <= log_grid[-1])
    row = np.repeat(np.arange(a.shape[0]), folded.size // a.shape[0])
    fold = csr_array((folded, (row, np.arange(folded.size))), shape=(a.shape[0], folded.size))
    weights = np.linalg.solve(collocation.T, (fold @ basis).toarray().T).T
    weights.flags.writeable = False
    return np.asarray(weights)


def _excess_transform(wavenumber: Floats, thickness: Floats, resistivity: Floats) -> Floats:
    """The resistivity transform less the first layer's resistivity, (b, l), from the base upward."""
    transform = np.broadcast_to(resistivity[:, -1:], (resistivity.shape[0], wavenumber.size))
    excess = np.zeros_like(transform)
    for i in range(resistivity.shape[1] - 2, -1, -1):
        rho = resistivity[:, i, None]
        echo = (transform - rho) / (transform + rho) * np.exp(-2.0 * wavenumber * thickness[:, i, None])
        excess = 2.0 * rho * echo / (1.0 - echo)
        transform = rho + excess
    return excess


def response(weights: Floats, wavenumber: Floats, thickness: Floats, resistivity: Floats) -> Floats:
    """Apparent resistivity (ohm m), (b, n), of b models at b (or one) sets of n layouts.

    weights : (b or 1, n, l) from `response_weights`    wavenumber : (l,) 1/m
    thickness : (b, k-1) m    resistivity : (b, k) ohm m, top first
    Inputs are trusted: positive and finite, k >= 1. Checked in tests/published and tests/reference.
    """
    excess = _excess_transform(wavenumber, thickness, resistivity)
    if len(weights) == 1:  # one layout for all: a plain product of matrices
        return np.asarray(resistivity[:, :1] + excess @ weights[0].T)
    return np.asarray(resistivity[:, :1] + np.matmul(weights, excess[..., None])[..., 0])


def response_of_many(weights: Floats, wavenumber: Floats, thickness: Floats, resistivity: Floats) -> Floats:
    """Apparent resistivity (ohm m), (b, m, n), of m models at each of b sets of n layouts.

    weights : (b, n, l)    wavenumber : (l,) 1/m    thickness : (b, m, k-1) m    resistivity : (b, m, k) ohm m
    """
    b, m, k = resistivity.shape
    excess = _excess_transform(wavenumber, thickness.reshape(b * m, k - 1), resistivity.reshape(b * m, k))
    return np.asarray(resistivity[:, :, :1] + np.matmul(excess.reshape(b, m, -1), weights.transpose(0, 2, 1)))


def response_and_sensitivity(
    weights: Floats, wavenumber: Floats, thickness: Floats, resistivity: Floats
) -> tuple[Floats, Floats]:
    """Apparent resistivity (ohm m), (b, n), and d ln rho_a / d (ln thickness, ln resistivity), (b, n, 2k-1).

    Arguments as for `response`. Reverse-mode derivative of the recurrence: some 2.5 times the cost of the response.
    """
    n_models, k = resistivity.shape
    fall = -2.0 * wavenumber
    transform = np.broadcast_to(resistivity[:, -1:], (n_models, wavenumber.size))
    excess = np.zeros_like(transform)
    # From the base upward, d T_i / d T_{i+1}, and in the rows of the gradient d (T_i - rho_i) / d ln h_i, d ln rho_i
    through = np.empty((max(k - 1, 0), n_models, wavenumber.size))
    gradient = np.zeros((n_models, 2 * k - 1, wavenumber.size))
    for i in range(k - 2, -1, -1):
        rho, exponent = resistivity[:, i, None], thickness[:, i, None] * fall
        decay = np.exp(exponent)
        total = transform + rho
        echo = (transform - rho) / total * decay
        inverse = 1.0 / (1.0 - echo)
        excess = 2.0 * rho * echo * inverse
        by_echo = 2.0 * rho * inverse * inverse
        by_transform = by_echo * decay * (2.0 * rho) / (total * total)
        through[i] = by_transform
        gradient[:, i] = by_echo * echo * exponent
        gradient[:, k - 1 + i] = excess - by_transform * transform
        transform = rho + excess
    apparent = resistivity[:, :1] + np.matmul(weights, excess[..., None])[..., 0]
    passed = None
    for i in range(k - 1):
        if passed is not None:
            gradient[:, i] *= passed
            # T_i holds rho_i itself too; at the top that part is the rho_1 outside of the transform.
            gradient[:, k - 1 + i] = (gradient[:, k - 1 + i] + resistivity[:, i, None]) * passed
        passed = through[i] if passed is None else passed * through[i]
    if passed is not None:
        gradient[:, -1] = passed * resistivity[:, -1:]
    sensitivity = np.matmul(weights, gradient.transpose(0, 2, 1))
    sensitivity[:, :, k - 1] += resistivity[:, :1]
    return apparent, sensitivity / apparent[..., None]


def apparent_resistivity(
    half_spacing: Floats, potential_half_spacing: Floats, thickness: Floats, resistivity: Floats
) -> Floats:
    """Apparent resistivity (ohm m) of a Schlumberger array over horizontal layers.

    half_spacing AB/2, potential_half_spacing MN/2 : (n,) m, MN/2 = 0 for the ideal limit
    thickness : (b, k-1) m    resistivity : (b, k) ohm m, top first
    Returns (b, n) ohm m. Inputs are trusted: positive, finite, k >= 1.
    """
    weights, wavenumber = layout(half_spacing, potential_half_spacing)
    return response(weights[None], wavenumber, np.asarray(thickness), np.asarray(resistivity))


def apparent_resistivity_and_sensitivity(
    half_spacing: Floats, potential_half_spacing: Floats, thickness: Floats, resistivity: Floats
) -> tuple[Floats, Floats]:
    """`apparent_resistivity`, and d ln rho_a / d (ln thickness, ln resistivity), (b, n, 2k-1)."""
    weights, wavenumber = layout(half_spacing, potential_half_spacing)
    return response_and_sensitivity(weights[None], wavenumber, np.asarray(thickness), np.asarray(resistivity))


def layout(half_spacing: Floats, potential_half_spacing: Floats) -> tuple[Floats, Floats]:
    """`response_weights` (n, l) with a grid of wavenumbers (l,) of their own."""
    a, b = np.asarray(half_spacing, dtype=float), np.asarray(potential_half_spacing, dtype=float)
    wavenumber = shared_wavenumbers([(a, b)])
    return response_weights(a, b, wavenumber), wavenumber


def dar_zarrouk(thickness: Floats, resistivity: Floats) -> tuple[Floats, Floats]:
    """Longitudinal conductance S (siemens) and transverse resistance T (ohm m²) above the base, (b,) each.

    thickness : (b, k-1) m    resistivity : (b, k) ohm m. S = Σ h/ρ, T = Σ h ρ (Maillet, R., 1947, Geophysics 12, 529).
    """
    above = np.asarray(resistivity)[:, :-1]
    return np.sum(thickness / above, axis=1), np.sum(thickness * above, axis=1)
