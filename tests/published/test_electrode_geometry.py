"""Geometric factor, and what a misplaced current electrode does.

K = pi (a² - b²) / (2 b) follows from the potential of a point electrode, rho I / (2 pi r), alone (any textbook).
Direction of the errors: BGR, "The smooth sounding graph, a manual for field work", section 2.2, p. 42: an electrode
left behind makes the point jump up, one carried too far makes it drop. Factors computed outside geoves.
"""

import numpy as np
import pytest

from geoves.kernels.layered_earth import geometric_factor

FOOT = 0.3048


def measured_per_current(places):
    """Voltage over current (ohm) on ground of 1 ohm m, electrodes on one line at places A, M, N, B (m)."""
    a, m, n, b = places
    return (1 / abs(m - a) - 1 / abs(n - a) - 1 / abs(m - b) + 1 / abs(n - b)) / (2 * np.pi)


@pytest.mark.parametrize(
    ("half_spacing", "potential_half_spacing", "factor"),
    [
        (1.5, 0.5, 6.2832),
        (10.0, 1.0, 155.5088),
        (100.0, 5.0, 3133.7387),
        (100.0, 20.0, 753.9822),
        (200.0, 20.0, 3110.1767),
        (300 * FOOT, 10 * FOOT, 4304.2207),
    ],
)
def test_factor_is_the_printed_one(half_spacing, potential_half_spacing, factor):
    found = geometric_factor(np.array([half_spacing]), np.array([potential_half_spacing]))
    np.testing.assert_allclose(found, [factor], atol=5e-5, rtol=0)
    a, b = half_spacing, potential_half_spacing
    np.testing.assert_allclose(found * measured_per_current([-a, -b, b, a]), [1.0], rtol=1e-12)


@pytest.mark.parametrize(("ratio", "percent"), [(1 / 20, 0.25), (1 / 5, 4.2)])
def test_short_form_is_too_high(ratio, percent):
    short = np.pi * 100.0**2 / (2 * 100.0 * ratio)
    exact = geometric_factor(np.array([100.0]), np.array([100.0 * ratio]))[0]
    assert 100 * (short / exact - 1) == pytest.approx(percent, abs=0.05)


@pytest.mark.parametrize(("place", "factor"), [(80.0, 1.2824), (90.0, 1.1176), (120.0, 0.8470)])
def test_misplaced_electrode_on_uniform_ground(place, factor):
    # Planned AB/2 = 100, MN/2 = 5; one current electrode stands at `place`, K is taken for the plan.
    planned = geometric_factor(np.array([100.0]), np.array([5.0]))[0]
    reported = planned * measured_per_current([-place, -5.0, 5.0, 100.0])
    assert reported == pytest.approx(factor, abs=5e-5)
    # Each current electrode gives half of what the symmetric array of its own spacing would.
    actual = geometric_factor(np.array([place]), np.array([5.0]))[0]
    assert 0.5 * (planned / actual + 1.0) == pytest.approx(factor, abs=5e-5)
