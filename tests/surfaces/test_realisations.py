"""Conditional realisations against kriging, dense conditional covariances and what they were told."""

from itertools import pairwise

import numpy as np
import pytest

from geoves.domain.grids import Grid
from geoves.domain.units import Role
from geoves.kernels.covariances import Covariance
from geoves.kernels.kriging import CholeskyKriging
from geoves.surfaces import SurfaceOptions
from geoves.surfaces.canvas import Canvas
from geoves.surfaces.interpolation import Kriged
from geoves.surfaces.realisations import draw_members, match_moments, simulate_quantity, summarise_cells
from tests.reference.dense_kriging import predict_densely
from tests.surfaces.invented_county import GRID, WIDE, contact_depth, make_county, say_thickness, shallow_thickness

OPTIONS = SurfaceOptions(members=1500, random_seed=3)
SMALL = Grid(west=400_000.0, north=4_902_000.0, cell_size=100.0, n_rows=20, n_columns=20)
CANVAS = Canvas(SMALL, np.ones(SMALL.shape, dtype=bool), np.full(400, 300.0))


def krige_some(nugget=0.02, model="matern32", seed=1):
    random = np.random.default_rng(seed)
    points = random.uniform(0.0, 2000.0, (25, 2)) + np.array((400_000.0, 4_900_000.0))
    covariance = Covariance(model, nugget, 0.3, 1800.0, 50.0, 0.6)
    values, errors = 3.0 + 0.5 * random.standard_normal(25), random.uniform(0.001, 0.05, 25)
    kriged = Kriged(np.empty(0), np.empty(0), covariance, points, values, errors)
    mean, variance = CholeskyKriging(kriged.data, covariance).predict(CANVAS.cells)
    return kriged._replace(mean=mean, deviation=np.sqrt(variance))


@pytest.mark.parametrize("model", ["matern32", "exponential"])
def test_realisations_have_the_conditional_covariance(model):
    """Members before their moments are matched, at forty cells, against dense kriging's own covariance matrix.

    Products over 1500 members, five standard errors wide, and three hundredths of the sill for what lies between nodes.
    """
    kriged = krige_some(model=model)
    quantity = simulate_quantity(kriged, 0, CANVAS, OPTIONS)
    picked = np.random.default_rng(5).choice(400, 40, replace=False)
    members = draw_members(quantity, CANVAS.cells[picked], picked, SMALL, OPTIONS)
    _, expected = predict_densely(*kriged.data[:3], CANVAS.cells[picked], kriged.covariance)
    spread = np.diag(expected)
    error = np.sqrt((np.outer(spread, spread) + expected**2) / 1500)
    found = members @ members.T / 1500
    assert (np.abs(found - expected) < 5.0 * error + 0.03 * 0.32).all()
    assert np.abs(members.mean(axis=1) / np.sqrt(spread / 1500)).max() < 4.5


def test_matched_members_have_the_krigings_moments_exactly():
    kriged = krige_some()
    quantity = simulate_quantity(kriged, 0, CANVAS, OPTIONS)
    members = draw_members(quantity, CANVAS.cells, np.arange(400), SMALL, OPTIONS)
    matched = match_moments(members, kriged.mean, kriged.deviation)
    np.testing.assert_allclose(matched.mean(axis=1), kriged.mean, rtol=1e-9)
    np.testing.assert_allclose(matched.std(axis=1), kriged.deviation, rtol=1e-9)
    shape = [np.corrcoef(one, other)[0, 1] for one, other in zip(members, matched, strict=True)]
    assert min(shape) > 1.0 - 1e-9


def test_blocks_do_not_change_a_realisation():
    kriged = {"basal_depth": krige_some(), "cover": krige_some(seed=2), "shallow": krige_some(nugget=0.0, seed=4)}
    found = []
    for block in (400, 73):
        options = SurfaceOptions(members=40, block=block, random_seed=3)
        parts = summarise_cells(kriged, CANVAS, options, confining=True, map=map)
        found.append({name: np.concatenate([part[name].p95 for part in parts]) for name in parts[0]})
    assert found[0].keys() == {"cover_thickness", "shallow_aquifer_thickness", "confining_unit_thickness"}
    for name, values in found[0].items():
        np.testing.assert_allclose(values, found[1][name], rtol=1e-6, atol=1e-6, err_msg=name)
    other = summarise_cells(kriged, CANVAS, SurfaceOptions(members=40, random_seed=4), confining=True, map=map)
    assert not np.allclose(other[0]["cover_thickness"].p95, found[0]["cover_thickness"])


@pytest.fixture(scope="module")
def covered_stack():
    """A county whose every place knows a cover of 4 m too, so that the clay is what is left of the known column."""
    county = make_county()
    rows = [*county.interpretation.thicknesses]
    rows += [
        say_thickness(row.place, row.kind, (row.easting, row.northing), Role.COVER, 4.0)
        for row in rows
        if row.role == Role.SHALLOW_AQUIFER
    ]
    return county.with_thicknesses(*rows).build(WIDE)


def test_the_clay_is_what_is_left_of_the_column(covered_stack):
    surfaces, kept = covered_stack.surfaces, covered_stack.covered
    east, north = np.meshgrid(GRID.easting, GRID.northing)
    truth = contact_depth(east, north) - shallow_thickness(east, north) - 4.0
    clay = surfaces["confining_unit_thickness"]
    assert np.std((clay.estimate - truth)[kept]) < 0.2 * np.std(truth[kept])
    assert np.mean(((clay.p05 <= truth) & (truth <= clay.p95))[kept]) > 0.8
    parts = [surfaces[f"{name}_thickness"].estimate for name in ("cover", "shallow_aquifer", "confining_unit")]
    assert all((part[kept] >= 0.0).all() for part in parts)
    top = surfaces["bedrock_depth"].estimate - surfaces["deep_gravel_thickness"].estimate
    # Means over realisations keep the sum; the contact's own mean is in closed form, theirs of a hundred draws.
    assert np.abs(sum(parts) - top)[kept].max() < 0.03 * np.nanmax(top)


def test_surfaces_of_the_whole_column_do_not_cross(covered_stack):
    surfaces, kept = covered_stack.surfaces, covered_stack.covered
    depths = [
        np.zeros(GRID.shape),
        surfaces["cover_thickness"].estimate,
        surfaces["cover_thickness"].estimate + surfaces["shallow_aquifer_thickness"].estimate,
        surfaces["bedrock_depth"].estimate - surfaces["deep_gravel_thickness"].estimate,
        surfaces["bedrock_depth"].estimate,
    ]
    for upper, lower in pairwise(depths):
        assert (upper[kept] <= lower[kept] + 1e-9).all()
