"""The slow response against the printed curves and against images, before anything else is held against it."""

import numpy as np
import pytest

from tests.published.curve_tables import ALL_CURVES, FINITE_SPREAD, HALF_SPACING
from tests.reference import image_series, quadrature


@pytest.mark.parametrize("curve", ALL_CURVES, ids=lambda curve: curve.name)
def test_curve_is_the_printed_one(curve):
    found = [quadrature.ideal_response(s, curve.thickness, curve.resistivity) for s in HALF_SPACING]
    # Half a unit of the last digit, and a little: over the insulator 500.0005 stands as 500.000.
    assert np.all(np.abs(found - curve.apparent_resistivity) <= 1.05 * curve.rounding)


@pytest.mark.parametrize(("resistivity", "printed"), FINITE_SPREAD)
def test_finite_potential_spread_is_the_printed_one(resistivity, printed):
    for spread, text in printed.items():
        assert quadrature.finite_response(20.0, spread, (10.0,), resistivity) == pytest.approx(float(text), abs=5.1e-5)


@pytest.mark.parametrize("curve", ALL_CURVES, ids=lambda curve: curve.name)
def test_more_nodes_change_nothing(curve):
    for s in HALF_SPACING:
        coarse, fine = (quadrature.ideal_response(s, curve.thickness, curve.resistivity, nodes) for nodes in (12, 20))
        assert coarse == pytest.approx(fine, rel=1e-10)


def test_finite_spread_agrees_with_images():
    thickness, resistivity = (5.0, 25.0, 15.0), (35.0, 20.0, 90.0, 12.0)
    strengths = image_series.layered_strengths((1, 5, 3), resistivity)
    for half_spacing in (3.0, 30.0, 300.0):
        for ratio in (0.02, 0.2, 0.4):
            found = quadrature.finite_response(half_spacing, ratio * half_spacing, thickness, resistivity)
            expected = image_series.finite_response(half_spacing, ratio * half_spacing, 5.0, 35.0, strengths)
            assert found == pytest.approx(expected, rel=1e-7)


def test_uniform_ground_and_many_arrays_at_once():
    half_spacing, spread = np.array([5.0, 50.0]), np.array([0.0, 10.0])
    np.testing.assert_allclose(quadrature.response(half_spacing, spread, (), (80.0,)), 80.0, rtol=1e-12)
    np.testing.assert_allclose(quadrature.response(half_spacing, spread, (4.0, 9.0), (80.0,) * 3), 80.0, rtol=1e-10)
