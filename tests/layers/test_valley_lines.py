"""Valley lines on surfaces whose plane, floor and forks are known."""

import numpy as np
import pytest

from geoves.kernels.valley_lines import find_incision, fit_regional_plane, smooth_path, trace_valleys

ROW, COLUMN = np.indices((120, 160)).astype(float)


@pytest.mark.parametrize("quantile", [0.5, 0.75, 0.9])
def test_the_regional_plane_leaves_its_quantile_below(quantile):
    """Koenker and Bassett 1978, theorem 3.4: the share of residuals below is the quantile, to within 3 points of n."""
    noise = np.random.default_rng(5).gamma(2.0, 4.0, ROW.shape)
    surface = 300.0 + 0.2 * ROW - 0.1 * COLUMN + noise
    plane = fit_regional_plane(surface, quantile)
    assert np.mean(surface < plane) == pytest.approx(quantile, abs=0.01)
    slopes = np.diff(plane, axis=0)[0, 0], np.diff(plane, axis=1)[0, 0]
    assert slopes == pytest.approx((0.2, -0.1), abs=0.02)


def test_a_valley_does_not_tilt_the_plane_and_blanks_are_left_out():
    valley = 60.0 * np.exp(-(((ROW - 40.0) / 8.0) ** 2))
    surface = 300.0 + 0.05 * ROW + 0.02 * COLUMN - valley
    surface[:, :20] = np.nan
    plane = fit_regional_plane(surface, 0.75)
    assert np.isfinite(plane).all()
    assert np.abs(plane - (300.0 + 0.05 * ROW + 0.02 * COLUMN)).max() < 1.5


def test_incision_needs_the_threshold_once_and_half_of_it_throughout():
    depth = np.zeros((5, 12))
    depth[2, 1:6] = (6.0, 6.0, 11.0, 6.0, 6.0)
    depth[2, 8:11] = 9.0
    depth[0, 0] = np.nan
    found = find_incision(depth, 10.0)
    assert np.argwhere(found).tolist() == [[2, c] for c in range(1, 6)]


def test_a_fork_is_a_main_line_and_a_tributary_on_their_floors():
    stem = 80.0 * np.exp(-(((ROW - 60.0) / 7.0) ** 2))
    branch = np.where(ROW < 60.0, 45.0 * np.exp(-(((COLUMN - 50.0) / 6.0) ** 2)), 0.0)
    depth = np.maximum(stem, branch)
    lines = trace_valleys(depth, find_incision(depth, 20.0), 16.0)
    assert [order for order, _, _ in lines] == [1, 2]
    _, rows, columns = lines[0]
    assert np.abs(rows - 60.0).max() <= 2  # an end may lie a tenth above the floor
    assert np.ptp(columns) > 150
    _, rows, columns = lines[1]
    assert np.abs(columns - 50.0).max() <= 2
    assert rows[0] < 5  # runs from its head
    assert (rows[-1], columns[-1]) in set(zip(lines[0][1].tolist(), lines[0][2].tolist(), strict=True))


def test_two_valleys_apart_are_two_main_lines():
    depth = 50.0 * (np.exp(-(((ROW - 25.0) / 5.0) ** 2)) + np.exp(-(((ROW - 95.0) / 5.0) ** 2)))
    lines = trace_valleys(depth, find_incision(depth, 20.0), 16.0)
    assert [order for order, _, _ in lines] == [1, 1]


def test_smoothing_keeps_the_ends_and_a_straight_line():
    path = np.arange(10, 31, 2)
    assert np.allclose(smooth_path(path, 3), path)
    stairs = np.repeat(np.arange(8), 3)
    assert smooth_path(stairs, 3)[[0, -1]].tolist() == [0.0, 7.0]
