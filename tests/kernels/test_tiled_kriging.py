"""Tiles of cells that share a neighbourhood, against one factor of all data."""

import numpy as np
import pytest

from geoves.kernels.covariances import Covariance
from geoves.kernels.inequality import Bounds, bounds_as_values
from geoves.kernels.kriging import CholeskyKriging, FieldData, leave_one_out
from geoves.kernels.tiled_kriging import TiledKriging, bounds_as_values_nearby, group_by_tile, leave_one_out_nearby

COVARIANCE = Covariance("matern32", 0.05, 1.0, 5000.0, 30.0, 0.5)


def county(n=700, seed=2):
    random = np.random.default_rng(seed)
    points = random.uniform(0.0, 40_000.0, (n, 2)) + np.array((400_000.0, 4_900_000.0))
    values = np.sin(points[:, 0] / 3000.0) + np.cos(points[:, 1] / 2500.0)
    return FieldData(points, values, random.uniform(0.005, 0.1, n))


def cells_of(n, seed=3):
    return np.random.default_rng(seed).uniform(10_000.0, 20_000.0, (n, 2)) + np.array((400_000.0, 4_900_000.0))


def test_with_all_data_in_the_neighbourhood_it_is_the_one_factor():
    data, cells = county(90), cells_of(200)
    tiled = TiledKriging(data, COVARIANCE, 3200.0).predict(cells)
    np.testing.assert_allclose(tiled, CholeskyKriging(data, COVARIANCE).predict(cells), rtol=1e-9, atol=1e-10)


def test_neighbours_say_nearly_all():
    """Screening: off by a small share of the standard error, and never surer than all data together."""
    data, cells = county(), cells_of(2000)
    estimate, variance = TiledKriging(data, COVARIANCE, 3200.0).predict(cells)
    expected, least = CholeskyKriging(data, COVARIANCE).predict(cells)
    assert np.abs((estimate - expected) / np.sqrt(least)).max() < 0.2
    assert (variance >= least * (1.0 - 1e-9)).all()
    assert variance == pytest.approx(least, rel=0.02)


def test_a_cell_has_one_answer_whatever_else_is_asked():
    data, cells = county(), cells_of(500)
    engine = TiledKriging(data, COVARIANCE, 3200.0)
    whole = np.array(engine.predict(cells))
    order = np.random.default_rng(1).permutation(500)[:80]
    np.testing.assert_allclose(engine.predict(cells[order]), whole[:, order], rtol=1e-9, atol=1e-10)


def test_a_drift_and_many_values_go_through_tiles_too():
    data, cells = county(90), cells_of(100)
    drift, there = (0.001 * (points[:, :1] - 400_000.0) for points in (data.points, cells))
    leaning = data._replace(values=data.values + drift[:, 0], drift=drift)
    tiled, whole = TiledKriging(leaning, COVARIANCE, 3200.0), CholeskyKriging(leaning, COVARIANCE)
    np.testing.assert_allclose(tiled.predict(cells, there), whole.predict(cells, there), rtol=1e-8, atol=1e-9)
    many = np.column_stack([leaning.values, leaning.values[::-1]])
    expected = whole.estimate_many(many, cells, there)
    np.testing.assert_allclose(tiled.estimate_many(many, cells, there), expected, rtol=1e-8, atol=1e-9)


def test_tiles_part_the_cells():
    points = np.array([[0.5, 0.5], [1.5, 0.2], [0.9, 0.1], [-0.1, 0.1], [1.1, 0.9]])
    found = {tuple(centre.tolist()): rows.tolist() for rows, centre in group_by_tile(points, 1.0)}
    assert found == {(0.5, 0.5): [0, 2], (1.5, 0.5): [1, 4], (-0.5, 0.5): [3]}


def test_leaving_out_nearby_is_leaving_out():
    data = county(600)
    predicted, variance = leave_one_out_nearby(data, COVARIANCE)
    expected, spread = leave_one_out(*data[:3], COVARIANCE)
    assert np.abs((predicted - expected) / np.sqrt(spread)).max() < 0.2
    assert variance == pytest.approx(spread, rel=0.05)
    few = FieldData(*(part[:100] for part in data[:3]))
    np.testing.assert_allclose(
        leave_one_out_nearby(few, COVARIANCE), leave_one_out(*few[:3], COVARIANCE), rtol=1e-8, atol=1e-9
    )


def test_bounds_heard_nearby_are_bounds_heard():
    """Pseudo-data by groups against all at once: they lead kriging to the same surface."""
    data, places = county(300), cells_of(60)
    truth, _ = CholeskyKriging(data, COVARIANCE).predict(places)
    bounds = Bounds(places, truth + 0.3, np.ones(60), np.full(60, 0.05))
    found = bounds_as_values_nearby(data, bounds, COVARIANCE)
    expected = bounds_as_values(*data[:3], bounds, COVARIANCE)
    cells = cells_of(200, 9)

    def krige_with(value, variance):
        known = FieldData(
            np.vstack([data.points, places]),
            np.concatenate([data.values, value]),
            np.concatenate([data.error_variance, variance]),
        )
        return CholeskyKriging(known, COVARIANCE).predict(cells)

    (near, _), (whole, spread), (without, _) = (
        krige_with(*found),
        krige_with(*expected),
        (CholeskyKriging(data, COVARIANCE).predict(cells)),
    )
    off = np.abs(near - whole) / np.sqrt(spread)
    assert off.max() < 0.1
    assert off.max() < 0.1 * np.max(np.abs(without - whole) / np.sqrt(spread))
    assert all(part.size == 0 for part in bounds_as_values_nearby(data, Bounds(*(b[:0] for b in bounds)), COVARIANCE))
