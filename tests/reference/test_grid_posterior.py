"""The grid posterior against printed curves and a normal posterior known in closed form."""

import numpy as np
import pytest
from scipy.stats import norm

from tests.published.curve_tables import HALF_SPACING, TWO_LAYERS
from tests.reference.grid_posterior import log_evidence_on, log_likelihood, log_two_layer_curve, moments_on


@pytest.mark.parametrize("curve", TWO_LAYERS[:2], ids=lambda curve: curve.name)
def test_two_layer_curves_are_the_printed_ones(curve):
    found = np.exp(log_two_layer_curve(HALF_SPACING, curve.thickness[0], curve.resistivity, 20_000))
    np.testing.assert_allclose(found, curve.apparent_resistivity, rtol=1e-4)


def test_moments_and_evidence_of_a_normal_plane():
    x, y = np.linspace(-8.0, 8.0, 161), np.linspace(-15.0, 17.0, 161)
    log_density = 2.5 + norm.logpdf(x, 0.5, 1.0)[:, None] + norm.logpdf(y, 1.0, 2.0)
    assert log_evidence_on(log_density, x, y) == pytest.approx(2.5, abs=1e-6)
    first, second = moments_on(log_density, np.broadcast_to(x[:, None], log_density.shape), y)
    assert first == pytest.approx((0.5, 1.0), abs=1e-6)
    assert second == pytest.approx((1.0, 2.0), abs=1e-6)


def test_readings_are_normal_within_and_wide_without():
    assert log_likelihood(np.array([0.01]), 0.03) == pytest.approx(
        np.log(0.98) + norm.logpdf(0.01, scale=0.03), abs=2e-3
    )
    assert log_likelihood(np.array([0.7]), 0.03) == pytest.approx(np.log(0.02) + norm.logpdf(0.7, scale=0.6))
