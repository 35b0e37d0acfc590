"""Expansions of far data against the correlations themselves, and where they must not be used."""

import numpy as np
import pytest

from geoves.kernels import kriging
from geoves.kernels.covariances import Covariance, correlation, scale_coordinates, scaled_distances
from geoves.kernels.far_field import choose_witnesses, expand_correlations, group_cells
from geoves.kernels.kriging import CholeskyKriging, FieldData
from geoves.kernels.reference_kriging import ReferenceKriging

OBLIQUE = Covariance("matern32", 0.05, 1.0, 15_000.0, 30.0, 0.4)


def county(n=400, seed=4):
    random = np.random.default_rng(seed)
    points = random.uniform(0.0, 60_000.0, (n, 2)) + np.array((400_000.0, 4_900_000.0))
    drift = np.sin(points[:, :1] / 9000.0)
    return FieldData(points, random.standard_normal(n), random.uniform(1e-4, 0.3, n), drift)


def tile(n_rows=32, n_columns=40, cell=100.0):
    east, north = np.meshgrid(np.arange(n_columns) * cell, np.arange(n_rows) * cell)
    return np.column_stack([east.ravel(), north.ravel()]) + np.array((420_000.0, 4_930_000.0))


@pytest.mark.parametrize("model", ["matern32", "exponential", "gaussian"])
def test_an_expansion_is_the_correlations(model):
    data, cells, covariance = county(), tile(), OBLIQUE._replace(model=model)
    origin = data.points.mean(axis=0)
    points = scale_coordinates(data.points, covariance, origin)
    expansion = expand_correlations(cells, points, covariance, origin)
    assert expansion.far.size > 300
    assert np.array_equal(np.sort(np.concatenate([expansion.far, expansion.near])), np.arange(400))
    expected = correlation(scaled_distances(cells, data.points, covariance), model)
    np.testing.assert_allclose(expansion.basis() @ expansion.apply(np.eye(400)), expected, atol=1e-8)
    weights = np.random.default_rng(2).standard_normal((400, 7))
    np.testing.assert_allclose(expansion.weigh(weights), expected @ weights, atol=1e-7)
    np.testing.assert_allclose(expansion.weigh(weights[:, :2]), expected @ weights[:, :2], atol=1e-7)


@pytest.mark.parametrize("model", ["matern32", "exponential", "spherical", "gaussian"])
def test_kriging_with_expansions_is_pykriges(model):
    """1e-8 of the sill and of its root, with a drift, on cells enough for expansions."""
    data, cells, covariance = county(), tile(), OBLIQUE._replace(model=model)
    there = np.sin(cells[:, :1] / 9000.0)
    engine = CholeskyKriging(data, covariance)
    found, expected = (one.predict(cells, there) for one in (engine, ReferenceKriging(data, covariance)))
    for ours, theirs in zip(found, expected, strict=True):
        np.testing.assert_allclose(ours, theirs, atol=1e-8)
    np.testing.assert_allclose(engine.estimate(cells, there), expected[0], atol=1e-8)


def test_an_expansion_that_is_wrong_is_not_used(monkeypatch):
    """Coefficients spoilt in the seventh digit: the witnesses see it, and the cells are kriged as they are."""
    data, cells = county()._replace(drift=None), tile()
    engine = CholeskyKriging(data, OBLIQUE)
    expected = engine._predict_exactly(cells, None)
    genuine, asked = kriging.expand_correlations, []

    def spoilt(*arguments):
        expansion = genuine(*arguments)
        asked.append(expansion)
        return expansion._replace(coefficients=expansion.coefficients * (1.0 + 1e-6))

    monkeypatch.setattr(kriging, "expand_correlations", spoilt)
    estimate, variance = engine.predict(cells)
    assert len(asked) == 1
    np.testing.assert_allclose(estimate, engine._level + expected[0], rtol=1e-12)
    np.testing.assert_allclose(variance, OBLIQUE.sill * expected[1], rtol=1e-12)


@pytest.mark.parametrize(("shape", "model"), [((10, 10), "matern32"), ((32, 40), "spherical")])
def test_no_expansion_where_it_does_not_pay_or_hold(shape, model):
    data, covariance = county(), OBLIQUE._replace(model=model)
    points = scale_coordinates(data.points, covariance, data.points.mean(axis=0))
    assert expand_correlations(tile(*shape), points, covariance, data.points.mean(axis=0)) is None
    wide = tile(32, 40, 1500.0)  # the tile is as wide as the county: nothing is far
    assert expand_correlations(wide, points, covariance, data.points.mean(axis=0)) is None


def test_groups_part_the_cells_and_lie_together():
    cells = np.random.default_rng(1).permutation(tile(100, 150))
    groups = list(group_cells(cells))
    assert np.array_equal(np.sort(np.concatenate(groups)), np.arange(15_000))
    assert max(map(len, groups)) <= 2048
    extents = np.array([np.ptp(cells[rows], axis=0) for rows in groups])
    assert extents.max() < 6500.0
    assert set(choose_witnesses(tile())[:4].tolist()) == {0, 39, 31 * 40, 32 * 40 - 1}
