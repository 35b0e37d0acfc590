"""Realisations against the covariance they were asked for, and against GSTools and dense draws."""

import gstools
import numpy as np
import pytest

from geoves.kernels.covariances import Covariance, covariance_matrix
from geoves.kernels.simulation import (
    Lattice,
    choose_spacing,
    draw_fields,
    embed_covariance,
    interpolation_weights,
    lay_lattice,
)

OBLIQUE = Covariance("matern32", 3.0, 40.0, 2400.0, 35.0, 0.4)
LATTICE = Lattice(400_000.0, 4_900_000.0, 100.0, 24, 30)


def nodes_of(lattice):
    """Coordinates (nodes, 2), from south to north."""
    east = lattice.west + lattice.spacing * np.arange(lattice.n_columns)
    north = lattice.south + lattice.spacing * np.arange(lattice.n_rows)
    return np.column_stack([axis.ravel() for axis in np.meshgrid(east, north)])


def drawn(covariance, lattice, count, seed=(4,)):
    """Realisations (count, nodes)."""
    return np.array([field.ravel() for field in draw_fields(embed_covariance(covariance, lattice), seed, range(count))])


@pytest.mark.parametrize("model", ["matern32", "exponential", "spherical"])
def test_the_embedding_holds_the_covariance_exactly(model):
    """The torus' covariance, which is the transform of its eigenvalues, at every lag inside the lattice."""
    covariance = OBLIQUE._replace(model=model)
    embedding = embed_covariance(covariance, LATTICE)
    assert embedding.lost < 1e-4
    power = np.abs(embedding.amplitude) ** 2
    torus = np.fft.fft2(power).real
    north, east = np.arange(-5, 24)[:, None], np.arange(-5, 30)[None, :]
    lags = np.column_stack([axis.ravel() * 100.0 for axis in np.broadcast_arrays(east, north)])
    expected = covariance_matrix(np.zeros((1, 2)), lags, covariance)[0].reshape(29, 35)
    np.testing.assert_allclose(torus[north, east], expected, atol=2e-3 * 40.0)


def test_realisations_have_the_covariance():
    """Products over 1500 realisations, four standard errors wide (Isserlis: variance (C(0)² + C(h)²) / m)."""
    fields = drawn(OBLIQUE, LATTICE, 1500)
    places = nodes_of(LATTICE)
    picked = np.random.default_rng(2).choice(len(places), 40, replace=False)
    own = covariance_matrix(places[picked], places[picked], OBLIQUE)
    error = np.sqrt((40.0**2 + own**2) / 1500)
    off = (fields[:, picked].T @ fields[:, picked] / 1500 - own) / error
    assert np.abs(off).max() < 5.0
    assert np.mean(np.abs(off) < 2.0) > 0.9


def test_two_parts_of_one_transform_are_independent():
    fields = drawn(OBLIQUE, LATTICE, 1000)
    paired = np.mean(fields[0::2] * fields[1::2], axis=0)
    assert np.sqrt(np.mean(paired**2)) < 2.0 * 40.0 / np.sqrt(500)


def test_variogram_equals_that_of_gstools_and_of_dense_draws():
    """Semivariance along the axis of continuity and across it, from 150 realisations each.

    GSTools draws by the randomisation method, dense draws by Cholesky's factor: three ways, one law. The mean over a
    field of a semivariance at a quarter of the length has some 8 % of error from 150 fields.
    """
    covariance = OBLIQUE._replace(azimuth_deg=0.0, nugget=0.0)
    lattice = LATTICE._replace(n_rows=16, n_columns=14)
    places = nodes_of(lattice)
    # Practical length 4.74 over root 1.5, as in test_covariances.py; its angle turns from east.
    length = 2400.0 * np.sqrt(1.5) / 4.743864518390577
    shape = gstools.Matern(dim=2, nu=1.5, var=40.0, rescale=1.0, len_scale=length, anis=0.4, angles=np.pi / 2)
    draw = np.random.default_rng(1).standard_normal((len(places), 150))
    factor = np.linalg.cholesky(covariance_matrix(places, places, covariance) + 1e-8 * np.eye(len(places)))
    ways = (
        drawn(covariance, lattice, 150),
        np.array([gstools.SRF(shape, seed=i, mode_no=200)(places.T, mesh_type="unstructured") for i in range(150)]),
        (factor @ draw).T,
    )
    grids = [fields.reshape(150, 16, 14) for fields in ways]
    along = [0.5 * np.mean((one[:, 6:] - one[:, :-6]) ** 2) for one in grids]
    across = [0.5 * np.mean((one[:, :, 3:] - one[:, :, :-3]) ** 2) for one in grids]
    lags = np.array([[0.0, 600.0], [300.0, 0.0]])
    expected = 40.0 - covariance_matrix(np.zeros((1, 2)), lags, covariance)[0]
    np.testing.assert_allclose(along, expected[0], rtol=0.25)
    np.testing.assert_allclose(across, expected[1], rtol=0.25)


def test_a_realisation_hangs_on_its_number_alone():
    embedding = embed_covariance(OBLIQUE, LATTICE)
    whole = list(draw_fields(embedding, (7, 1), range(6)))
    for chosen in (range(3, 4), range(2, 5), range(5, 6)):
        for member, field in zip(chosen, draw_fields(embedding, (7, 1), chosen), strict=True):
            assert np.array_equal(field, whole[member])
    other = next(draw_fields(embedding, (7, 2), range(1)))
    assert not np.allclose(other, whole[0])


def test_a_smooth_field_longer_than_the_lattice_keeps_its_variance():
    """The Gaussian model needs a torus of many lengths: what cannot be embedded is small, and told."""
    covariance = Covariance("gaussian", 0.0, 5.0, 6000.0)
    embedding = embed_covariance(covariance, LATTICE)
    assert embedding.lost < 1e-3
    fields = np.array([field.ravel() for field in draw_fields(embedding, (1,), range(600))])
    assert np.mean(fields**2) == pytest.approx(5.0, rel=0.2)


@pytest.mark.parametrize("model", ["matern32", "gaussian"])
def test_between_nodes_the_field_has_its_own_covariance(model):
    """Weights' own covariance at scattered points against the covariance itself: exact variance, near enough beside."""
    covariance = Covariance(model, 1.0, 40.0, 2400.0, 60.0, 0.5)
    points = np.random.default_rng(3).uniform(0.0, 2000.0, (60, 2)) + np.array((400_000.0, 4_900_000.0))
    lattice = lay_lattice(points, choose_spacing(covariance, 10.0), points[0])
    assert lattice.spacing == pytest.approx({"matern32": 75.0, "gaussian": 100.0}[model])
    weights = interpolation_weights(lattice, points, covariance)
    own = weights @ covariance_matrix(nodes_of(lattice), nodes_of(lattice), covariance) @ weights.T
    expected = covariance_matrix(points, points, covariance)
    np.testing.assert_allclose(np.diag(own), 40.0, rtol=1e-9)
    np.testing.assert_allclose(own, expected, atol=0.01 * 40.0)


def test_points_on_nodes_take_the_nodes_values():
    lattice = lay_lattice(np.array([[0.0, 0.0], [900.0, 500.0]]), 100.0, np.array([5000.0, -300.0]))
    assert (lattice.n_rows, lattice.n_columns) == (10, 14)
    weights = interpolation_weights(lattice, np.array([[0.0, 0.0], [300.0, 500.0], [900.0, 0.0]]), OBLIQUE).toarray()
    expected = np.zeros((3, lattice.size))
    for row, (i, j) in enumerate([(2, 2), (7, 5), (2, 11)]):
        expected[row, i * lattice.n_columns + j] = 1.0
    np.testing.assert_allclose(weights, expected, atol=1e-12)
