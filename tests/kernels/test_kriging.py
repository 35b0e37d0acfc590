"""Kriging with errors against GSTools, a dense reference, and the deed itself."""

import gstools
import numpy as np
import pytest
from pykrige.ok import OrdinaryKriging

from geoves.kernels import kriging
from geoves.kernels.covariances import Covariance
from geoves.kernels.kriging import CholeskyKriging, FieldData, krige, leave_one_out
from geoves.kernels.reference_kriging import ReferenceKriging
from tests.reference.dense_kriging import krige_densely

MODELS = ("matern32", "exponential", "spherical", "gaussian")


def county(n=40, seed=1):
    """Points in projected coordinates, values, error variances, and cells."""
    generator = np.random.default_rng(seed)
    points = generator.uniform(0.0, 20_000.0, (n, 2)) + np.array((500_000.0, 5_000_000.0))
    values = 250.0 + 20.0 * generator.standard_normal(n)
    cells = generator.uniform(-2000.0, 22_000.0, (60, 2)) + np.array((500_000.0, 5_000_000.0))
    return points, values, generator.uniform(0.5, 60.0, n), cells


@pytest.mark.parametrize("model", MODELS)
def test_equals_dense_reference(model):
    points, values, errors, cells = county()
    covariance = Covariance(model, 12.0, 300.0, 9000.0, 40.0, 0.35)
    estimate, variance = krige(points, values, errors, cells, covariance)
    dense_estimate, dense_variance = krige_densely(points, values, errors, cells, covariance)
    np.testing.assert_allclose(estimate, dense_estimate, rtol=1e-7)
    np.testing.assert_allclose(variance, dense_variance, rtol=1e-6)


def test_equals_gstools_with_errors():
    """GSTools `cond_err`, which takes the place of the nugget there: so ours is put into the errors.

    Its angle turns counter-clockwise from east; 50 degrees is our azimuth of 40.
    """
    points, values, errors, cells = county()
    covariance = Covariance("exponential", 0.0, 300.0, 9000.0, 40.0, 0.35)
    shape = gstools.Exponential(
        dim=2, var=300.0, len_scale=9000.0 / np.log(20.0), anis=0.35, angles=np.deg2rad(90.0 - 40.0)
    )
    theirs = gstools.krige.Ordinary(shape, points.T, values, cond_err=list(errors), exact=False)
    expected, expected_variance = theirs(cells.T, mesh_type="unstructured")
    estimate, variance = krige(points, values, errors, cells, covariance)
    np.testing.assert_allclose(estimate, expected, rtol=1e-8)
    np.testing.assert_allclose(variance, expected_variance, rtol=1e-7)


def test_the_private_member_is_there_and_is_asked(monkeypatch):
    """A PyKrige that renamed or bypassed `_get_kriging_matrix` would drop every error variance in silence."""
    assert callable(OrdinaryKriging._get_kriging_matrix)
    asked = []
    stock = OrdinaryKriging._get_kriging_matrix

    def counted(self, n):
        asked.append(n)
        return stock(self, n)

    monkeypatch.setattr(OrdinaryKriging, "_get_kriging_matrix", counted)
    points, values, errors, cells = county()
    covariance = Covariance("matern32", 0.0, 300.0, 9000.0)
    engine = ReferenceKriging(FieldData(points, values, errors), covariance)
    with_errors = engine._engine._get_kriging_matrix(40)
    np.testing.assert_allclose(np.diag(with_errors)[:40], errors / 300.0)
    asked.clear()
    engine.predict(cells)
    assert asked == [40]


@pytest.mark.parametrize("numbers", [1, 100, 10**7])
def test_blocks_do_not_show(numbers, monkeypatch):
    points, values, errors, cells = county(5)
    engine = CholeskyKriging(FieldData(points, values, errors), Covariance("matern32", 5.0, 300.0, 9000.0))
    whole = engine.predict(cells)
    monkeypatch.setattr(kriging, "_BLOCK", numbers)
    np.testing.assert_allclose(engine.predict(cells), whole, rtol=1e-10)
    np.testing.assert_allclose(engine.estimate(cells), whole[0], rtol=1e-10)


@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize("n_drifts", [0, 1, 2])
def test_engines_agree(model, n_drifts):
    """PyKrige, ordinary and universal, against the factor: 1e-8 of the values' own range and of the sill."""
    points, values, errors, cells = county(120)
    generator = np.random.default_rng(6)
    drift = generator.normal(40.0, 9.0, (120, n_drifts)) if n_drifts else None
    there = generator.normal(40.0, 9.0, (60, n_drifts)) if n_drifts else None
    data = FieldData(points, values if drift is None else values + drift.sum(axis=1), errors, drift)
    covariance = Covariance(model, 12.0, 300.0, 9000.0, 40.0, 0.35)
    estimate, variance = CholeskyKriging(data, covariance).predict(cells, there)
    expected, expected_variance = ReferenceKriging(data, covariance).predict(cells, there)
    np.testing.assert_allclose(estimate, expected, atol=1e-8 * np.ptp(values))
    np.testing.assert_allclose(variance, expected_variance, atol=1e-8 * 312.0)


def test_a_drift_is_followed_beyond_the_data():
    """Data that are linear in the drift alone are met wherever the drift is known, with errors or not."""
    points, _, errors, cells = county(30)
    height = np.sin(points[:, 0] / 3000.0) + points[:, 1] / 10_000.0
    there = np.sin(cells[:, 0] / 3000.0) + cells[:, 1] / 10_000.0
    data = FieldData(points, 7.0 - 3.0 * height, errors, height[:, None])
    engine = CholeskyKriging(data, Covariance("matern32", 5.0, 300.0, 3000.0))
    np.testing.assert_allclose(engine.predict(cells, there[:, None])[0], 7.0 - 3.0 * there, atol=1e-8)
    with pytest.raises(ValueError, match="drift"):
        engine.predict(cells)


def test_many_values_at_once_are_each_as_if_alone():
    points, values, errors, cells = county(30)
    covariance = Covariance("matern32", 5.0, 300.0, 6000.0)
    many = np.column_stack([values, np.cos(values), np.zeros(30)])
    data = FieldData(points, values, errors)
    together = CholeskyKriging(data, covariance).estimate_many(many, cells)
    np.testing.assert_allclose(ReferenceKriging(data, covariance).estimate_many(many, cells), together, atol=1e-8)
    for column in range(3):
        alone, _ = krige(points, many[:, column], errors, cells, covariance)
        np.testing.assert_allclose(together[:, column], alone, rtol=1e-9, atol=1e-9)


def test_a_cell_at_a_datum_is_a_new_place():
    """No spike: the estimate goes on smoothly through a datum although there is a nugget, and its variance too."""
    points, values, _, _ = county()
    covariance = Covariance("matern32", 50.0, 300.0, 9000.0)
    around = points[0] + np.array([(0.0, 0.0), (0.001, 0.0), (0.0, -0.001)])
    estimate, variance = krige(points, values, np.zeros(40), around, covariance)
    np.testing.assert_allclose(estimate, estimate[0], rtol=1e-6)
    np.testing.assert_allclose(variance, variance[0], rtol=1e-6)
    assert variance[0] > 50.0


def test_repeated_places_are_averaged_by_their_errors():
    """Two readings of one place stand for their mean, weighted by 1 / variance (common practice); exact ones too."""
    points, values, errors, cells = county(12)
    covariance = Covariance("matern32", 0.0, 300.0, 9000.0)
    doubled = np.vstack((points, points[:1])), np.append(values, values[0] + 6.0), np.append(errors, 3.0)
    weight = np.array([1.0 / errors[0], 1.0 / 3.0])
    merged_values, merged_errors = values.copy(), errors.copy()
    merged_values[0] = (weight[0] * values[0] + weight[1] * (values[0] + 6.0)) / weight.sum()
    merged_errors[0] = 1.0 / weight.sum()
    expected = krige(points, merged_values, merged_errors, cells, covariance)
    np.testing.assert_allclose(krige(*doubled, cells, covariance), expected, rtol=1e-8)
    estimate, variance = krige(doubled[0], doubled[1], np.zeros(13), points[:1], covariance)
    assert estimate[0] == pytest.approx(values[0] + 3.0, abs=1e-3)
    assert 0.0 <= variance[0] < 1e-3


def test_worthless_data_change_nothing():
    points, values, errors, cells = county(20)
    covariance = Covariance("matern32", 5.0, 300.0, 9000.0)
    errors[10:] = 1e30
    with_them = krige(points, values, errors, cells, covariance)
    without = krige(points[:10], values[:10], errors[:10], cells, covariance)
    np.testing.assert_allclose(with_them, without, rtol=1e-4)


@pytest.mark.parametrize("model", MODELS)
def test_leave_one_out_equals_leaving_out(model):
    points, values, errors, _ = county(25)
    covariance = Covariance(model, 12.0, 300.0, 9000.0, 40.0, 0.35)
    predicted, variance = leave_one_out(points, values, errors, covariance)
    for i in range(25):
        others = np.arange(25) != i
        estimate, spread = krige(points[others], values[others], errors[others], points[i : i + 1], covariance)
        assert predicted[i] == pytest.approx(estimate[0], rel=1e-8)
        assert variance[i] == pytest.approx(spread[0], rel=1e-6)


def test_bands_hold_what_they_promise():
    """1000 new places of a field with this covariance: nine tenths within the 90 % band, four standard errors wide.

    The places share one field, so that they count for fewer; they are spread over forty fields.
    """
    covariance = Covariance("matern32", 20.0, 300.0, 6000.0, 30.0, 0.5)
    inside = []
    for seed in range(40):
        points, _, errors, cells = county(40, seed)
        places = np.vstack((points, cells[:25]))
        own = kriging.covariance_matrix(places, places, covariance) + 20.0 * np.eye(65)
        generator = np.random.default_rng(100 + seed)
        truth = 250.0 + np.linalg.cholesky(own) @ generator.standard_normal(65)
        measured = truth[:40] + np.sqrt(errors) * generator.standard_normal(40)
        estimate, variance = krige(points, measured, errors, cells[:25], covariance)
        inside.append(np.mean(np.abs(truth[40:] - estimate) < 1.6449 * np.sqrt(variance)))
    assert np.mean(inside) == pytest.approx(0.9, abs=4.0 * np.std(inside) / np.sqrt(40.0))


def test_a_cell_on_a_datum_among_cells_close_by_has_its_distance():
    """Distances counted from the middle of a block cancel; a rough field would show it first."""
    points, values, errors, _ = county(60)
    covariance = Covariance("exponential", 0.0, 300.0, 9000.0)
    cells = points[7] + np.array([(0.0, 0.0), (3.0, 0.0), (4000.0, 0.0), (-900.0, 1500.0)])
    found = krige(points, values, errors, cells, covariance)
    expected = krige_densely(points, values, errors, cells, covariance)
    np.testing.assert_allclose(found[0], expected[0], atol=1e-7 * np.ptp(values))
    np.testing.assert_allclose(found[1], expected[1], atol=1e-7 * 300.0)
