"""Dar Zarrouk parameters, equivalence and suppression.

Maillet, R., 1947, The fundamental equations of electrical prospecting, Geophysics 12, 529-556. A conductive bed is
seen through S = h / rho alone, a resistive one through T = rho h. The figures were computed outside geoves, by
quadrature.
"""

import numpy as np
import pytest

from geoves.kernels.layered_earth import apparent_resistivity, dar_zarrouk

HALF_SPACING = np.geomspace(1.0, 1000.0, 61)


def curve(resistivity, thickness, half_spacing=HALF_SPACING):
    ideal = np.zeros(half_spacing.size)
    return apparent_resistivity(half_spacing, ideal, np.array([thickness]), np.array([resistivity]))[0]


def worst_difference(one, other):
    """Largest difference in percent of the second, and AB/2 (m) where it stands."""
    percent = 100.0 * np.abs(curve(*one) / curve(*other) - 1.0)
    return np.max(percent), HALF_SPACING[np.argmax(percent)]


def test_dar_zarrouk_parameters_of_a_printed_column():
    thickness, resistivity = np.array([[5.0, 10.0, 20.0]]), np.array([[100.0, 20.0, 150.0, 7.0]])
    conductance, resistance = dar_zarrouk(thickness, resistivity)
    assert conductance.shape == resistance.shape == (1,)
    depth = thickness.sum()
    along, across = depth / conductance[0], resistance[0] / depth
    assert conductance[0] == pytest.approx(0.683333, abs=5e-7)
    assert resistance[0] == pytest.approx(3700.0)
    assert along == pytest.approx(51.2195, abs=5e-5)
    assert across == pytest.approx(105.7143, abs=5e-5)
    assert np.sqrt(across / along) == pytest.approx(1.436644, abs=5e-7)
    assert np.sqrt(resistance[0] / conductance[0]) == pytest.approx(73.5842, abs=5e-5)


# In percent of the second curve, with half a unit of the last digit printed, and AB/2 where the difference is worst.
@pytest.mark.parametrize(
    ("one", "other", "percent", "digit", "spacing"),
    [
        (([100, 10, 1000], [10, 1]), ([100, 5, 1000], [10, 0.5]), 0.067, 1e-3, 15.8),
        (([100, 10, 1000], [5, 5]), ([100, 5, 1000], [5, 2.5]), 3.195, 1e-3, 12.6),
        (([100, 1000, 10], [5, 1]), ([100, 2000, 10], [5, 0.5]), 0.271, 1e-3, 44.7),
        (([20, 200, 20], [10, 2]), ([20, 400, 20], [10, 1]), 0.391, 1e-3, 25.1),
        (([20, 60, 300], [20, 2]), ([20, 300], [20]), 2.6, 1e-1, 56.2),
        (([25, 90, 60], [40, 5]), ([25, 60], [40]), 1.99, 1e-2, 112),
        (([25, 90, 60], [40, 10]), ([25, 60], [40]), 3.74, 1e-2, 112),
        (([25, 90, 60], [40, 5]), ([25, 60], [45]), 7.02, 1e-2, 100),
        (([25, 90, 60], [40, 10]), ([25, 60], [50]), 13.6, 1e-1, 112),
        (([25, 90, 12], [40, 5]), ([25, 12], [40]), 25.0, 1e-1, 112),
        (([25, 90, 12], [40, 10]), ([25, 12], [40]), 47.4, 1e-1, 126),
        (([25, 90, 12], [40, 5]), ([25, 12], [45]), 18.5, 1e-1, 126),
        (([25, 90, 12], [40, 10]), ([25, 12], [50]), 33.4, 1e-1, 141),
    ],
)
def test_difference_of_two_curves(one, other, percent, digit, spacing):
    found, where = worst_difference(one, other)
    assert found == pytest.approx(percent, abs=0.51 * digit)
    assert where == pytest.approx(spacing, rel=0.005)  # three printed digits


def test_insulating_base_gives_the_line_of_total_conductance():
    # rho_a -> s / S: S is read where the 45 degree line meets 1 ohm m (Maillet 1947).
    conductance, _ = dar_zarrouk(np.array([[10.0]]), np.array([[100.0, 1e9]]))
    found = curve([100.0, 1e9], [10.0], np.array([1000.0]))
    assert found[0] * conductance[0] / 1000.0 == pytest.approx(1.000, abs=5e-4)
