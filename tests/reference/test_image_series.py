"""The image series against the printed curves, its own special case, and its own convergence."""

import numpy as np
import pytest

from tests.published.curve_tables import ALL_CURVES, FINITE_SPREAD, HALF_SPACING
from tests.reference import image_series


@pytest.mark.parametrize("curve", ALL_CURVES, ids=lambda curve: curve.name)
def test_curve_is_the_printed_one(curve):
    step = np.gcd.reduce(curve.thickness)
    strengths = image_series.layered_strengths([h // step for h in curve.thickness], curve.resistivity)
    found = [image_series.ideal_response(s, step, curve.resistivity[0], strengths) for s in HALF_SPACING]
    # Over an insulator 20 000 images leave out 3e-6 at AB/2 = 1000 m.
    assert np.all(np.abs(found - curve.apparent_resistivity) <= curve.rounding + 5e-6 * curve.apparent_resistivity)


@pytest.mark.parametrize(("resistivity", "printed"), FINITE_SPREAD)
def test_finite_potential_spread_is_the_printed_one(resistivity, printed):
    strengths = image_series.two_layer_strengths(resistivity)
    for spread, text in printed.items():
        found = image_series.finite_response(20.0, spread, 10.0, 100.0, strengths)
        assert found == pytest.approx(float(text), abs=5.1e-5)


@pytest.mark.parametrize("resistivity", [(100.0, 10.0), (10.0, 300.0)])
def test_two_layers_are_the_general_series(resistivity):
    general = image_series.layered_strengths([1], resistivity, count=200)
    np.testing.assert_allclose(general, image_series.two_layer_strengths(resistivity, count=200), rtol=1e-9, atol=1e-15)


def test_few_images_are_not_enough():
    # Printed: 0.5 m between images, 6000 of them give 10.0432 at AB/2 = 1000 m where 10.0038 is right.
    resistivity = (100.0, 1000.0, 10.0)
    few, many = (
        image_series.ideal_response(1000.0, 0.5, 100.0, image_series.layered_strengths([10, 2], resistivity, count))
        for count in (6_000, 60_000)
    )
    assert few == pytest.approx(10.0432, abs=5e-5)
    assert many == pytest.approx(10.0038, abs=5e-5)
