"""Guptasarma, D., 1982, Optimization of short digital linear filters, Geophys. Prosp. 30, 501-514 (pages from memory).

The filters, not geoves, set the tolerance: their worst errors over these curves, found by quadrature, are 0.024 and
0.063 %. On falls of 30 to 1 and over an insulator they do less well, and are not asked.
"""

import numpy as np
import pytest

from geoves.kernels.layered_earth import apparent_resistivity
from tests.published.curve_tables import ALL_CURVES, HALF_SPACING
from tests.reference.published_filters import GUPTASARMA_11, GUPTASARMA_19, filtered_response

CURVES = [curve for curve in ALL_CURVES if curve.name not in {"Q", "insulating base"}]


@pytest.mark.parametrize(
    ("chosen", "tolerance"), [(GUPTASARMA_19, 0.00025), (GUPTASARMA_11, 0.00065)], ids=["19", "11"]
)
@pytest.mark.parametrize("curve", CURVES, ids=lambda curve: curve.name)
def test_response_is_that_of_the_filter(curve, chosen, tolerance):
    ideal = np.zeros(HALF_SPACING.size)
    found = apparent_resistivity(HALF_SPACING, ideal, np.array([curve.thickness]), np.array([curve.resistivity]))[0]
    expected = filtered_response(chosen, HALF_SPACING, curve.thickness, curve.resistivity)
    np.testing.assert_allclose(found, expected, rtol=tolerance)
