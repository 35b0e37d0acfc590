"""Short linear filters of the literature for the ideal Schlumberger array: rho_a(s) = sum f_j T(10^a_j / s).

They serve as cross-checks only: geoves uses a longer filter. The coefficients of every set must sum to 1, since the
response of uniform ground is its resistivity; so a mistyped one shows at once.
"""

from typing import NamedTuple

import numpy as np

from tests.reference.quadrature import resistivity_transform


class LinearFilter(NamedTuple):
    """Where the filter was printed, its abscissae (log10 of wavenumber times AB/2) and coefficients."""

    source: str
    abscissae: np.ndarray
    coefficients: np.ndarray


def linear_filter(source, first, step, coefficients):
    """A `LinearFilter` with evenly spaced abscissae."""
    return LinearFilter(source, first + step * np.arange(len(coefficients)), np.array(coefficients))


def filtered_response(chosen, half_spacing, thickness, resistivity):
    """Apparent resistivity (ohm m), (n,), of one model at AB/2 = half_spacing (n,) m."""
    wavenumber = 10.0**chosen.abscissae / np.asarray(half_spacing)[:, None]
    return resistivity_transform(wavenumber, thickness, resistivity) @ chosen.coefficients


GUPTASARMA_19 = linear_filter(
    "Guptasarma 1982, Geophys. Prosp. 30, 501-514 (pages from memory), 19 points",
    -0.980685,
    0.20869,
    [
        *(0.00097112, -0.00102152, 0.00906965, 0.01404316, 0.09012, 0.30171582, 0.99627084, 1.3690832, -2.99681171),
        *(1.65463068, -0.59399277, 0.22329813, -0.10119309, 0.05186135, -0.02748647, 0.01384932, -0.00599074),
        *(0.00190463, -0.0003216),
    ],
)
GUPTASARMA_11 = linear_filter(
    "Guptasarma 1982, 11 points",
    -0.420625,
    0.21796875,
    [0.041873, -0.022258, 0.38766, 0.647103, 1.84873, -2.96084, 1.358412, -0.37759, 0.097107, -0.024243, 0.004046],
)
ONEILL_20 = linear_filter(
    "20 points, six a decade, attributed to O'Neill 1975 (from memory)",
    -0.776,
    1.0 / 6.0,
    [
        *(0.003042, -0.001198, 0.01284, 0.0235, 0.08688, 0.2374, 0.6194, 1.1817, 0.4248, -3.4507, 2.7044, -1.1324),
        *(0.393, -0.1436, 0.05812, -0.02521, 0.01125, -0.004978, 0.002072, -0.000318),
    ],
)
GHOSH_9 = linear_filter(
    "Ghosh 1971, Geophys. Prosp. 19 (from memory), 9 points, three a decade",
    -1.020,
    1.0 / 3.0,
    [0.0225, -0.0499, 0.1064, 0.1854, 1.9720, -1.5716, 0.4018, -0.0814, 0.0148],
)
