"""The filters of the literature: that they are typed as printed, and how well they do."""

import numpy as np
import pytest

from tests.published.curve_tables import ALL_CURVES, HALF_SPACING
from tests.reference.published_filters import GHOSH_9, GUPTASARMA_11, GUPTASARMA_19, ONEILL_20, filtered_response

FILTERS = {"Guptasarma 19": GUPTASARMA_19, "Guptasarma 11": GUPTASARMA_11, "O'Neill 20": ONEILL_20, "Ghosh 9": GHOSH_9}
POINTS = {"Guptasarma 19": 19, "Guptasarma 11": 11, "O'Neill 20": 20, "Ghosh 9": 9}
# Worst error over the printed curves, but for falls of 30 to 1 and an insulating base; computed by quadrature.
WORST = {"Guptasarma 19": 0.00024, "Guptasarma 11": 0.00063, "O'Neill 20": 0.0030, "Ghosh 9": 0.024}


@pytest.mark.parametrize("name", FILTERS)
def test_coefficients_sum_to_one(name):
    assert FILTERS[name].coefficients.size == POINTS[name]
    assert np.sum(FILTERS[name].coefficients) == pytest.approx(1.0, abs=1e-8)


@pytest.mark.parametrize("name", FILTERS)
def test_filter_reproduces_the_printed_curves(name):
    for curve in ALL_CURVES:
        if curve.name in {"Q", "insulating base"}:
            continue
        found = filtered_response(FILTERS[name], HALF_SPACING, curve.thickness, curve.resistivity)
        np.testing.assert_allclose(found, curve.apparent_resistivity, rtol=WORST[name], err_msg=curve.name)
