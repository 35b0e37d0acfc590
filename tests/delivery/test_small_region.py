"""The shared mini region holds what the rest of the tests take for granted."""

import numpy as np


def test_mini_region_is_complete(small_results):
    assert {s.name for s in small_results.survey.soundings} == {i.sounding for i in small_results.inverted}
    assert set(small_results.layers) == {
        "bedrock_contours", "thickness_contours", "valley_axis", "valley_stations", "gravel_extent", "permits",
    }  # fmt: skip
    for surface in small_results.stack.surfaces.values():
        assert surface.estimate.shape == small_results.stack.grid.shape
        assert np.isnan(surface.estimate[~small_results.stack.covered]).all()
