"""Three and four layers against printed curves: Flathe's images (1955) and Stefanesco's integral (1930).

No book's table; computed twice outside geoves, see curve_tables.py.
"""

import numpy as np
import pytest

from geoves.kernels.layered_earth import apparent_resistivity
from tests.published.curve_tables import ALL_CURVES, HALF_SPACING, MORE_LAYERS

# The digital filter and its spline of 16 points a decade are good to some 4e-6 of the response.
KERNEL = 1e-5


@pytest.mark.parametrize("curve", MORE_LAYERS, ids=lambda curve: curve.name)
def test_curve_is_the_printed_one(curve):
    ideal = np.zeros(HALF_SPACING.size)
    found = apparent_resistivity(HALF_SPACING, ideal, np.array([curve.thickness]), np.array([curve.resistivity]))[0]
    assert np.all(np.abs(found - curve.apparent_resistivity) <= curve.rounding + KERNEL * curve.apparent_resistivity)


def test_a_batch_gives_every_printed_curve_at_once():
    three = [curve for curve in ALL_CURVES if len(curve.resistivity) == 3]
    thickness, resistivity = (np.array([getattr(c, name) for c in three]) for name in ("thickness", "resistivity"))
    found = apparent_resistivity(HALF_SPACING, np.zeros(HALF_SPACING.size), thickness, resistivity)
    expected = np.array([curve.apparent_resistivity for curve in three])
    assert found.shape == (4, HALF_SPACING.size)
    np.testing.assert_allclose(found, expected, rtol=2e-5)
