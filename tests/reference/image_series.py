"""The layered-earth response by images: no integral, no Bessel function, nothing shared with geoves or quadrature.py.

Two layers: the current is mirrored at depths 2 n h with strength k^n, k = (rho_2 - rho_1) / (rho_2 + rho_1)
(Hummel 1929; any textbook; from memory). More layers, all thicknesses whole multiples of one h: the transform T is a
quotient of polynomials in u = exp(-2 l h), whose power series gives the strengths (Flathe 1955, Geophys. Prosp. 3, from
memory).
"""

import numpy as np
from scipy.signal import lfilter

IMAGES = 20_000


def two_layer_strengths(resistivity, count=IMAGES):
    """k^n for n = 1 .. count."""
    upper, lower = resistivity
    return ((lower - upper) / (lower + upper)) ** np.arange(1, count + 1)


def layered_strengths(multiples, resistivity, count=IMAGES):
    """q_n of T = rho_1 (1 + 2 sum q_n u^n), n = 1 .. count; `multiples` (k-1,) are the thicknesses in steps of h.

    T_{i+1} = P / Q makes T_i = rho_i [(P + rho_i Q) + (P - rho_i Q) u^m] / [(P + rho_i Q) - (P - rho_i Q) u^m].
    """
    numerator, denominator = np.array([float(resistivity[-1])]), np.array([1.0])
    for multiple, rho in zip(multiples[::-1], resistivity[-2::-1], strict=True):
        total, contrast = numerator + rho * denominator, numerator - rho * denominator
        above, below = np.zeros(total.size + multiple), np.zeros(total.size + multiple)
        above[: total.size], below[: total.size] = total, total
        above[multiple:] += contrast
        below[multiple:] -= contrast
        numerator, denominator = rho * above / total[0], below / total[0]
    impulse = np.zeros(count + 1)
    impulse[0] = 1.0
    return lfilter(numerator, denominator, impulse)[1:] / (2.0 * resistivity[0])


def ideal_response(half_spacing, step, first_resistivity, strengths):
    """Apparent resistivity (ohm m) for a vanishing MN: rho_1 [1 + 2 sum q_n (1 + (2 n h / s)²)^(-3/2)]."""
    depth = 2.0 * step * np.arange(1, strengths.size + 1)
    return first_resistivity * (1.0 + 2.0 * np.sum(strengths * (1.0 + (depth / half_spacing) ** 2) ** -1.5))


def finite_response(half_spacing, potential_half_spacing, step, first_resistivity, strengths):
    """Apparent resistivity (ohm m) from the image potentials at M and N, at ±MN/2, of A and B, at ±AB/2."""
    depth = 2.0 * step * np.arange(1, strengths.size + 1)

    def potential(distance):
        return first_resistivity * (1.0 / distance + 2.0 * np.sum(strengths / np.hypot(distance, depth)))

    near, far = half_spacing - potential_half_spacing, half_spacing + potential_half_spacing
    return (potential(near) - potential(far)) / (1.0 / near - 1.0 / far)
