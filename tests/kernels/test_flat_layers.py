"""The rule of misreadings against the 2.5-dimensional response it was fitted to, and the laws that it must keep."""

import numpy as np
import pytest

from geoves.kernels.flat_layers import IN_LINE, OFFSETS, SQUARE, move_normals, read_contact
from tests.reference.flat_layer_readings import contact_of, misread, read_table

TABLE = read_table()


def rule(rows, footprint):
    """What the rule says of rows of the table (n,)."""
    depth = np.array([float(contact_of(row)(np.array(row["x"]))) for row in rows])
    line = np.array([contact_of(row)(row["x"] + OFFSETS * one) for row, one in zip(rows, depth, strict=True)])
    reach = np.array([row["largest_ab2"] for row in rows]) / depth
    return read_contact(line / depth[:, None], reach, footprint).shift


@pytest.mark.parametrize(("azimuth", "footprint", "tolerance"), [(0.0, SQUARE, 0.016), (90.0, IN_LINE, 0.022)])
def test_the_rule_is_near_the_table(azimuth, footprint, tolerance):
    """A spread along strike has the relief square to it, one across has it in its own line."""
    rows = [row for row in TABLE if row["azimuth"] == azimuth]
    read = np.array([row["misread"] for row in rows])
    off = rule(rows, footprint) - read
    assert np.sqrt(np.mean(read**2)) > 0.09
    assert np.sqrt(np.mean(off**2)) < tolerance
    assert abs(np.mean(off)) < 0.3 * tolerance
    plain = np.abs(read) > 0.05
    assert np.all(np.sign(rule(rows, footprint)[plain]) == np.sign(read[plain]))


@pytest.mark.parametrize("number", [40, 290])
def test_the_table_is_what_the_response_says(number):
    assert misread(TABLE[number]) == pytest.approx(TABLE[number]["misread"], abs=0.006)


@pytest.mark.parametrize("footprint", [IN_LINE, SQUARE])
def test_a_flat_contact_is_read_right_and_signs_are_those_of_the_ground(footprint):
    flat = np.ones((1, OFFSETS.size))
    valley = 1.0 - 0.6 * (1.0 - np.exp(-((OFFSETS / 2.0) ** 2)))[None]
    reach = np.array([3.5])
    assert read_contact(flat, reach, footprint).shift == pytest.approx(0.0, abs=1e-12)
    assert read_contact(valley, reach, footprint).shift[0] < -0.05
    assert read_contact(2.0 - valley, reach, footprint).shift[0] > 0.05
    longer, shorter = (read_contact(valley, np.array([one]), footprint).shift[0] for one in (6.0, 2.0))
    assert longer < shorter < 0.0


def test_a_narrower_valley_and_a_spread_across_mislead_more():
    def floor(width, footprint):
        return read_contact(
            1.0 - 0.6 * (1.0 - np.exp(-((OFFSETS / width) ** 2)))[None], np.array([3.5]), footprint
        ).shift[0]

    assert floor(1.0, SQUARE) < floor(3.0, SQUARE) < floor(9.0, SQUARE) < 0.0
    assert floor(6.0, IN_LINE) < floor(6.0, SQUARE)


def test_slopes_are_those_of_differences():
    rng = np.random.default_rng(1)
    line = np.exp(0.3 * rng.standard_normal((1, OFFSETS.size)))
    line /= line[:, [OFFSETS.size // 2]]
    reach = np.array([4.0])
    found = read_contact(line, reach, SQUARE)
    for j in (3, OFFSETS.size // 2, 40):
        moved = line.copy()
        moved[:, j] *= np.exp(1e-6)
        moved /= moved[:, [OFFSETS.size // 2]]
        difference = (read_contact(moved, reach, SQUARE).shift - found.shift) / 1e-6
        assert found.slope[0, j] == pytest.approx(difference[0], abs=1e-5)


def test_normals_moved_are_normals_moved():
    """Mean and covariance by hand: the first entry gains the step and the variance."""
    rng = np.random.default_rng(2)
    root = rng.standard_normal((5, 4, 4))
    covariance = root @ root.transpose(0, 2, 1) + 0.1 * np.eye(4)
    mean, step, variance = rng.standard_normal((5, 4)), rng.standard_normal(5), rng.uniform(0.0, 2.0, 5)
    precision = np.linalg.inv(covariance)
    found, pull = move_normals(precision, np.einsum("bij,bj->bi", precision, mean), step, variance)
    covariance[:, 0, 0] += variance
    mean[:, 0] += step
    assert np.allclose(np.linalg.inv(found), covariance)
    assert np.allclose(np.linalg.solve(found, pull[..., None])[..., 0], mean)


def test_what_says_nothing_goes_on_to_say_nothing():
    precision, pull = np.zeros((1, 3, 3)), np.zeros((1, 3))
    precision[0, 1, 1], pull[0, 1] = 2.0, 3.0
    found, moved = move_normals(precision, pull, np.array([0.5]), np.array([0.2]))
    assert np.array_equal(found, precision)
    assert np.array_equal(moved, pull)
