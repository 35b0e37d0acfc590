"""Potentials over horizontal layers by quadrature between Bessel zeros: the demo's own physics, apart from geoves's.

The potential of a point electrode that feeds I into the surface is, at the distance r along it (Stefanesco
and others 1930),

    V(r) = I / (2 pi) * [ rho_1 / r + Int_0^inf (T(l) - rho_1) J0(l r) dl ]

with T by the recurrence from the base upward. In x = l r the nodes and the Bessel values are the same for every r.
"""

from functools import cache
from math import comb

import numpy as np
from scipy.special import j0, jn_zeros

LOBES = 40  # half-waves of J0 that are integrated
AVERAGED = 24  # of these, the last ones enter by repeated averages of the partial sums (Euler's transformation)
OCTAVES = 26  # halvings of the first half-wave toward x = 0, where deep layers act on short spreads


@cache
def quadrature() -> tuple[np.ndarray, np.ndarray]:
    """Nodes x and weights w, both (n,): Int f(x) J0(x) dx over all x is the sum of w f(x) for a smooth, bounded f."""
    zeros = jn_zeros(0, LOBES)
    first = zeros[0] * 2.0 ** -np.arange(OCTAVES, -1.0, -1.0)
    edges = np.concatenate([[0.0], first, zeros[1:]])
    gauss, gauss_weight = np.polynomial.legendre.leggauss(10)
    middle, half = 0.5 * (edges[1:] + edges[:-1]), 0.5 * np.diff(edges)
    nodes = middle[:, None] + half[:, None] * gauss
    share = np.concatenate([np.ones(OCTAVES + 1 + LOBES - 1 - AVERAGED), euler_weights()])
    weights = half[:, None] * gauss_weight * j0(nodes) * share[:, None]
    return nodes.ravel(), weights.ravel()


def euler_weights() -> np.ndarray:
    """Share of each of the last terms of an alternating sum, (AVERAGED,): the binomial mean of its partial sums."""
    binomial = np.array([comb(AVERAGED, k) for k in range(AVERAGED + 1)]) / 2.0**AVERAGED
    return 1.0 - np.cumsum(binomial)[:-1]


def resistivity_transform(wavenumber: np.ndarray, thickness: np.ndarray, resistivity: np.ndarray) -> np.ndarray:
    """T (ohm m), of the shape of `wavenumber` (1/m); thickness (k-1,) m and resistivity (k,) ohm m, top first."""
    transform = np.full_like(wavenumber, resistivity[-1])
    for h, rho in zip(thickness[::-1], resistivity[-2::-1], strict=True):
        echo = np.exp(-2.0 * h * wavenumber)
        damped = (1.0 - echo) / (1.0 + echo)  # the hyperbolic tangent, at a third of its time
        transform = (transform + rho * damped) / (1.0 + transform * damped / rho)
    return transform


def potential(distance: np.ndarray, thickness: np.ndarray, resistivity: np.ndarray) -> np.ndarray:
    """2 pi V / I (ohm) at each distance (n,) m from one current electrode."""
    nodes, weights = quadrature()
    secondary = resistivity_transform(nodes / distance[:, None], thickness, resistivity) - resistivity[0]
    return (resistivity[0] + secondary @ weights) / distance


def geometric_factor(ab2: np.ndarray, mn2: np.ndarray) -> np.ndarray:
    """K (m) of a Schlumberger array, exact for the finite MN: pi (a^2 - b^2) / (2 b)."""
    return np.pi * (ab2**2 - mn2**2) / (2.0 * mn2)


def apparent_resistivity(
    ab2: np.ndarray, mn2: np.ndarray, thickness: np.ndarray, resistivity: np.ndarray
) -> np.ndarray:
    """Apparent resistivity (n,) ohm m from the potentials at both M and N, each of A and of B.

    ab2, mn2 : (n,) m      thickness : (k-1,) m      resistivity : (k,) ohm m, top first
    """
    near = potential(ab2 - mn2, thickness, resistivity)
    far = potential(ab2 + mn2, thickness, resistivity)
    return geometric_factor(ab2, mn2) * (near - far) / np.pi
