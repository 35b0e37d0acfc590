"""Variograms and bands as the report shows them, on fields whose law is known."""

import attrs
import numpy as np
import pytest

from geoves.domain.units import Role
from geoves.kernels.covariances import Covariance, covariance_matrix
from geoves.kernels.inequality import Bounds
from geoves.surfaces import SurfaceOptions
from geoves.surfaces.checks import calibrate_on_wells, describe_variogram, widen
from geoves.surfaces.evidence import Evidence
from geoves.surfaces.interpolation import Kriged
from geoves.surfaces.stated import StatedVariogram, StatedVariograms
from tests.surfaces.invented_county import WIDE, make_county

NO_BOUNDS = Bounds(np.empty((0, 2)), np.empty(0), np.empty(0), np.empty(0))
FIELD = Covariance("exponential", 0.01, 0.2, 4000.0, 90.0, 0.4)


def known_field(n=120, n_wells=30, stretch=1.0, seed=5):
    """A field of the covariance FIELD, its wells off by `stretch` times what that covariance allows."""
    random = np.random.default_rng(seed)
    points = random.uniform(0.0, 9000.0, (n, 2))
    own = covariance_matrix(points, points, FIELD) + 0.01 * np.eye(n)
    values = 3.0 + np.linalg.cholesky(own) @ random.standard_normal(n)
    kind = ("well",) * n_wells + ("sounding",) * (n - n_wells)
    errors = np.full(n, 1e-4)
    values[:n_wells] += np.sqrt(stretch**2 - 1.0) * 0.25 * random.standard_normal(n_wells)
    evidence = Evidence("Log depth", "ln m", tuple(map(str, range(n))), kind, points, values, errors, NO_BOUNDS)
    return evidence, Kriged(np.empty(0), np.empty(0), FIELD, points, values, errors)


def test_variograms_by_direction_part_the_pairs_and_grow_faster_across():
    shown = describe_variogram(*known_field(400, seed=0), WIDE)
    along, across = shown.directions
    assert (along.azimuth_deg, across.azimuth_deg) == (90.0, 0.0)
    assert np.array_equal(along.pairs + across.pairs, shown.pairs)
    assert across.semivariance[:4].sum() > 1.2 * along.semivariance[:4].sum()


def test_the_fit_by_least_squares_passes_through_the_marks():
    shown = describe_variogram(*known_field(300, seed=2), WIDE)
    nugget, sill, length = shown.least_squares
    fitted = nugget + sill * (1.0 - 0.05 ** (shown.lag / length))
    assert np.sqrt(np.mean((fitted / shown.semivariance - 1.0)[:8] ** 2)) < 0.15


def test_it_is_said_what_a_covariance_rests_on():
    county = make_county()
    (basal, *_) = county.build(WIDE).variograms
    assert "by restricted likelihood" in basal.remark
    assert "direction" in basal.remark
    few = attrs.evolve(county, interpretation=attrs.evolve(county.interpretation, thicknesses=()))
    tops = [top for top in few.interpretation.tops if top.contact == "basal"][:9]
    (basal, *_) = few.with_tops(*tops).build(WIDE).variograms
    assert "fewer than 20 data and bounds: the length leans on a weak prior" in basal.remark


def test_a_stated_variogram_is_kriged_with_and_named():
    stated = StatedVariogram(length=2500.0, sill=0.3, nugget=0.01, azimuth=80.0, ratio=0.5)
    options = attrs.evolve(
        WIDE, variogram=StatedVariograms(basal_depth=stated, deep_gravel=StatedVariogram(nugget=2.0))
    )
    basal, gravel, *_ = make_county().build(options).variograms
    found = (basal.nugget, basal.partial_sill, basal.length, basal.azimuth_deg, basal.ratio)
    assert found == (0.01, 0.3, 2500.0, 80.0, 0.5)
    assert "stated in region.toml: length = 2500.0" in basal.remark
    assert "by restricted likelihood" not in basal.remark
    assert gravel.nugget == 2.0
    assert "nugget = 2.0" in gravel.remark


def test_bands_that_are_wide_enough_are_left_alone():
    factors = [calibrate_on_wells(*known_field(seed=seed), WIDE).factor for seed in range(20)]
    assert sum(factor > 1.0 for factor in factors) <= 4  # one in twenty by its own word


def test_bands_too_narrow_for_the_wells_are_widened_as_far_as_the_wells_ask():
    evidence, kriged = known_field(stretch=3.0)
    found = calibrate_on_wells(evidence, kriged, WIDE)
    assert 1.2 < found.factor <= 3.0
    assert "widened" in found.words
    left = calibrate_on_wells(evidence, kriged, attrs.evolve(WIDE, calibrate_bands=False))
    assert left.factor == 1.0
    assert "left as they are" in left.words


def test_too_few_wells_do_not_speak_of_bands():
    found = calibrate_on_wells(*known_field(n_wells=7), WIDE)
    assert found.factor == 1.0
    assert "7 wells and picks are too few" in found.words


def test_the_factor_brings_squares_to_one():
    random = np.random.default_rng(3)
    field, own = random.uniform(0.5, 2.0, 4000), random.uniform(0.1, 0.4, 4000)
    residual = np.sqrt(1.7**2 * field + own) * random.standard_normal(4000)
    assert widen(residual, field, own) == pytest.approx(1.7, rel=0.03)
    assert widen(0.2 * residual, field, own) == 1.0
    assert widen(50.0 * residual, field, own) == 3.0


def test_widened_bands_reach_the_surface():
    """Wells that contradict their neighbours by half: bedrock's band grows by what is said."""
    county = make_county(n_wells=14).without_role(Role.DEEP_AQUIFER)
    random = np.random.default_rng(1)
    tops = [
        attrs.evolve(top, depth=top.depth * np.exp(0.5 * random.choice([-1.0, 1.0]))) if top.kind == "well" else top
        for top in county.interpretation.tops
    ]
    stated = StatedVariograms(basal_depth=StatedVariogram(length=2500.0, sill=0.15, nugget=0.002, ratio=1.0))
    options = SurfaceOptions(reach=10_000.0, tie_deviation=0.0, variogram=stated)
    left = attrs.evolve(options, calibrate_bands=False)
    wide, narrow = (county.with_tops(*tops).build(one) for one in (options, left))
    factor = float(next(words for words in wide.remarks if "widened" in words).split("widened ")[1].split(" times")[0])
    ratio = [
        np.log(stack.surfaces["bedrock_depth"].p95 / stack.surfaces["bedrock_depth"].p05)[stack.covered]
        for stack in (wide, narrow)
    ]
    assert ratio[0] / ratio[1] == pytest.approx(np.full(ratio[0].shape, factor), rel=0.01)
