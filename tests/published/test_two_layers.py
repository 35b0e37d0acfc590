"""Two layers against the image series, the closed form of any textbook (Hummel 1929; from memory).

The table's values were computed outside geoves, see curve_tables.py.
"""

import numpy as np
import pytest

from geoves.kernels.layered_earth import apparent_resistivity
from tests.published.curve_tables import FINITE_SPREAD, HALF_SPACING, TWO_LAYERS
from tests.reference import image_series

# The digital filter and its spline of 16 points a decade are good to some 4e-6 of the response.
KERNEL = 1e-5


def response(half_spacing, potential_half_spacing, thickness, resistivity):
    spread = np.full(np.shape(half_spacing), potential_half_spacing)
    return apparent_resistivity(np.asarray(half_spacing), spread, np.array([thickness]), np.array([resistivity]))[0]


@pytest.mark.parametrize("curve", TWO_LAYERS, ids=lambda curve: curve.name)
def test_curve_is_the_printed_one(curve):
    found = response(HALF_SPACING, 0.0, curve.thickness, curve.resistivity)
    assert np.all(np.abs(found - curve.apparent_resistivity) <= curve.rounding + KERNEL * curve.apparent_resistivity)


@pytest.mark.parametrize(("resistivity", "printed"), FINITE_SPREAD)
def test_finite_potential_spread_is_the_printed_one(resistivity, printed):
    spread = np.array(list(printed))
    expected = np.array([float(text) for text in printed.values()])
    found = apparent_resistivity(np.full(3, 20.0), spread, np.array([[10.0]]), np.array([resistivity]))[0]
    assert np.all(np.abs(found - expected) <= 0.5e-4 + KERNEL * expected)


@pytest.mark.parametrize("contrast", [0.01, 0.1, 0.5, 2.0, 10.0, 30.0])
@pytest.mark.parametrize("spread", [0.0, 0.05, 0.2, 1.0 / 3.0])
def test_response_is_the_image_series(contrast, spread):
    resistivity = (50.0, 50.0 * contrast)
    strengths = image_series.two_layer_strengths(resistivity)
    half_spacing = np.array([1.5, 8.0, 30.0, 120.0, 300.0])
    found = apparent_resistivity(half_spacing, spread * half_spacing, np.array([[12.0]]), np.array([resistivity]))[0]
    if spread:
        expected = [image_series.finite_response(s, spread * s, 12.0, 50.0, strengths) for s in half_spacing]
    else:
        expected = [image_series.ideal_response(s, 12.0, 50.0, strengths) for s in half_spacing]
    np.testing.assert_allclose(found, expected, rtol=KERNEL)


@pytest.mark.parametrize(("base", "steepest"), [(1e3, 0.7816), (1e5, 0.9956), (1e12, 1.0)])
def test_steepest_rise(base, steepest):
    # 100 ohm m, 10 m thick; printed from a coarse grid (the first is 0.78169 by finer quadrature), hence two units of
    # the last digit. No rise over flat layers is steeper than 45 degrees.
    half_spacing = np.geomspace(5.0, 500.0, 401)
    slope = np.gradient(np.log(response(half_spacing, 0.0, [10.0], [100.0, base])), np.log(half_spacing))
    assert np.max(slope) == pytest.approx(steepest, abs=2e-4)
