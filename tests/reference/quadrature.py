"""The layered-earth response by plain quadrature: slow, obvious, and sharing nothing with geoves.

Stefanesco and others 1930, J. Phys. Radium 1, 132-140 (from memory): a current I at the surface of layered ground
makes at distance r the potential V(r) = I / (2 pi) U(r), U(r) = int T(l) J0(l r) dl, T the resistivity transform.
T by the recurrence from the base upward, Koefoed 1979, Geosounding Principles 1 (from memory).

The integral of T - rho_1 runs by Gauss-Legendre over pieces that end at every zero of the Bessel function and at
the points of a logarithmic grid, so that neither the oscillation nor the shape of T is crossed in one step.
"""

import numpy as np
from scipy.special import j0, j1

NODES = 12
PIECES_PER_DECADE = 16
# Ends of the integral, in l r and l h_1. T - rho_1 falls as exp(-2 l h_1), to 1e-13 at the upper end.
LOWEST, HIGHEST = 1e-9, 15.0


def resistivity_transform(wavenumber, thickness, resistivity):
    """T (ohm m) at each wavenumber (1/m): T_i = (T_{i+1} + rho_i tanh(l h_i)) / (1 + T_{i+1} tanh(l h_i) / rho_i)."""
    transform = np.full(np.shape(wavenumber), float(resistivity[-1]))
    for h, rho in zip(thickness[::-1], resistivity[-2::-1], strict=True):
        tanh = np.tanh(wavenumber * h)
        transform = (transform + rho * tanh) / (1.0 + transform * tanh / rho)
    return transform


def quadrature(distance, first_thickness, nodes=NODES):
    """Wavenumbers (1/m) and weights of the integral over l, for Bessel functions of l times `distance` (m)."""
    lowest, highest = LOWEST / distance, HIGHEST / first_thickness
    count = int(PIECES_PER_DECADE * np.log10(highest / lowest)) + 1
    zeros = (np.arange(1, int(highest * distance / np.pi) + 1) + 0.25) * np.pi / distance  # of J1, near enough for J0
    edges = np.unique(np.concatenate([np.geomspace(lowest, highest, count), zeros[zeros < highest]]))
    x, w = np.polynomial.legendre.leggauss(nodes)
    middle, half = 0.5 * (edges[1:] + edges[:-1]), 0.5 * np.diff(edges)
    return (middle[:, None] + half[:, None] * x).ravel(), (half[:, None] * w).ravel()


def potential(distance, thickness, resistivity, nodes=NODES):
    """U(r) = 2 pi V / I, ohm, of one point electrode at the surface; `distance` in m, one number."""
    if len(thickness) == 0:
        return resistivity[0] / distance
    wavenumber, weight = quadrature(distance, thickness[0], nodes)
    excess = resistivity_transform(wavenumber, thickness, resistivity) - resistivity[0]
    return resistivity[0] / distance + np.sum(weight * excess * j0(wavenumber * distance))


def ideal_response(half_spacing, thickness, resistivity, nodes=NODES):
    """Apparent resistivity (ohm m) for a vanishing MN: rho_1 + s² int (T - rho_1) J1(l s) l dl; one model, one AB/2."""
    if len(thickness) == 0:
        return float(resistivity[0])
    wavenumber, weight = quadrature(half_spacing, thickness[0], nodes)
    excess = resistivity_transform(wavenumber, thickness, resistivity) - resistivity[0]
    return resistivity[0] + half_spacing**2 * np.sum(weight * excess * j1(wavenumber * half_spacing) * wavenumber)


def finite_response(half_spacing, potential_half_spacing, thickness, resistivity):
    """Apparent resistivity (ohm m) from the four electrodes themselves: A, B at ±AB/2, M, N at ±MN/2."""
    near, far = half_spacing - potential_half_spacing, half_spacing + potential_half_spacing
    difference = potential(near, thickness, resistivity) - potential(far, thickness, resistivity)
    return difference / (1.0 / near - 1.0 / far)


def response(half_spacing, potential_half_spacing, thickness, resistivity):
    """Apparent resistivity (n,) for arrays of AB/2 and MN/2 (m); MN/2 = 0 is the ideal limit."""
    return np.array(
        [
            finite_response(a, b, thickness, resistivity) if b > 0 else ideal_response(a, thickness, resistivity)
            for a, b in zip(half_spacing, potential_half_spacing, strict=True)
        ]
    )
