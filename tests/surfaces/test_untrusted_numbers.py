"""Data that no surface can be trusted to: a useful answer or a clear line, never a number out of nothing."""

import attrs
import numpy as np
import pytest

from geoves.domain.survey import Sounding
from geoves.errors import EngineError
from geoves.kernels.covariances import experimental_variogram
from tests.surfaces.invented_county import CURVE, GRID, WIDE, contact_depth, ground_elevation, make_county, say_contact


@pytest.fixture(scope="module")
def county():
    return make_county(n_soundings=20, n_wells=0)


def covered(stack, name):
    return stack.surfaces[name].estimate[stack.covered]


def basal(county):
    return [top for top in county.interpretation.tops if top.contact == "basal"]


def test_no_wells_still_maps_and_ties_nothing(county):
    stack = county.build(WIDE)
    assert np.isfinite(covered(stack, "bedrock_depth")).all()
    assert not any("than wells" in remark for remark in stack.remarks)


def test_all_depths_equal_give_a_flat_surface_with_an_error_of_its_own(county):
    points = [(top.easting, top.northing) for top in basal(county)]
    tops = [say_contact(f"S{i}", "sounding", point, 40.0, 2.0) for i, point in enumerate(points)]
    stack = county.with_tops(*tops).build(WIDE)
    depth = covered(stack, "bedrock_depth")
    assert np.isfinite(depth).all()
    thickness = covered(stack, "deep_gravel_thickness") if "deep_gravel_thickness" in stack.surfaces else 0.0
    np.testing.assert_allclose(depth - thickness, 40.0, atol=2.0)
    error = stack.surfaces["bedrock_depth"].standard_error
    if error is not None:
        assert (error[stack.covered] > 0.0).all()


def test_soundings_on_one_line_give_a_finite_surface(county):
    eastings = GRID.easting[2:38:2]
    points = [(float(easting), float(GRID.northing[15])) for easting in eastings]
    tops = [
        say_contact(f"S{i}", "sounding", point, float(contact_depth(*point)), 2.0) for i, point in enumerate(points)
    ]
    soundings = tuple(Sounding(f"S{i}", x, y, float(ground_elevation(x, y)), CURVE) for i, (x, y) in enumerate(points))
    line = attrs.evolve(county.with_tops(*tops), survey=attrs.evolve(county.survey, soundings=soundings))
    stack = line.build(WIDE)
    depth = covered(stack, "bedrock_depth")
    assert np.isfinite(depth).all()
    assert (depth > 0.0).all()
    assert depth.max() < 5.0 * max(top.depth for top in tops)


def test_one_sounding_ends_in_words_that_count(county):
    with pytest.raises(EngineError, match=r"1 places know the depth .* at least 3"):
        county.with_tops(basal(county)[0]).build(WIDE)


def test_no_bedrock_anywhere_ends_in_words(county):
    bounds = [attrs.evolve(top, status="below", standard_error=np.nan) for top in basal(county)]
    with pytest.raises(EngineError, match=r"0 places know the depth .* 20 a bound; at least 3"):
        county.with_tops(*bounds).build(WIDE)


def test_a_variogram_without_pairs_is_empty_and_no_number():
    lag, semivariance, pairs = experimental_variogram(np.array([[0.0, 0.0]]), np.array([1.0]), np.array([0.0, 50.0]))[
        :3
    ]
    assert pairs.sum() == 0
    assert not np.isfinite(semivariance).any() or semivariance.size == 0
    assert lag.size == semivariance.size == pairs.size
