"""Laws of the link from latent fields to a column, and of what a place says of it, over columns of every kind."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import norm

from geoves.kernels import joint_state
from geoves.kernels.joint_state import (
    ABOVE,
    AT,
    BASAL_DEPTH,
    BELOW,
    DEEP_THICKNESS,
    FIRST_UPPER,
    NOTHING,
    ROCK_DEPTH,
    Observations,
    differentiate,
    evaluate,
    log_likelihood,
    make_columns,
    quantities,
)
from tests.laws.column_plans import (
    FACTORS,
    HALF_SPACING,
    PLANS,
    POTENTIAL,
    SEGMENT,
    draw_fields,
    draw_observations,
    make_places,
    plans,
    respond,
)
from tests.reference import quadrature

STEP = 1e-5
quick = settings(max_examples=40, deadline=None, derandomize=True)
seeds = st.integers(0, 2**32 - 1)
FIVE = PLANS["five units"]


def difference(function, at, step=STEP):
    """Central differences (b, ..., p) of a function of (b, p) that acts on each row by itself."""
    parts = []
    for j in range(at.shape[1]):
        ahead, behind = at.copy(), at.copy()
        ahead[:, j] += step
        behind[:, j] -= step
        parts.append((function(ahead) - function(behind)) / (2.0 * step))
    return np.stack(parts, axis=-1)


def silent(count):
    nothing = np.zeros((count, 1))
    return Observations(nothing.astype(int), nothing.astype(int), nothing, nothing + 1.0)


def place_of(order, seed, count=3):
    """Unknowns (b, p) and places whose curves were made by other columns; the last place has no curve."""
    generator = np.random.default_rng(seed)
    ceiling = generator.uniform(-15.0, 20.0, count)
    fields = draw_fields(order, count, generator)
    truth = fields + generator.normal(0.0, 0.1, fields.shape)
    curve = respond(make_columns(truth, ceiling, order)) + generator.normal(0.0, 0.05, (count, HALF_SPACING.size))
    curve[0, 4] += 1.0  # an outlier
    curve[-1] = np.nan
    unknowns = np.concatenate([fields, generator.normal(0.0, 0.05, (count, FACTORS))], axis=1)
    return unknowns, make_places(order, ceiling, curve, draw_observations(order, count, generator))


# Columns


@quick
@given(plans, seeds, st.floats(-40.0, 40.0))
def test_thicknesses_add_up(order, seed, ceiling):
    fields = draw_fields(order, 20, np.random.default_rng(seed))
    columns = make_columns(fields, np.full(20, ceiling), order)
    assert np.all(columns.basal_depth > 0)
    assert np.all(columns.upper >= 0)
    assert np.all(columns.deep >= 0)
    np.testing.assert_allclose(columns.upper.sum(axis=1), columns.basal_depth, rtol=1e-12)
    layers = np.exp(columns.log_thickness) - joint_state.THINNEST
    # The least thickness taken off again leaves its own rounding.
    np.testing.assert_allclose(layers.sum(axis=1), columns.rock_depth, rtol=1e-9, atol=1e-15)
    found = quantities(columns)
    np.testing.assert_allclose(found[:, ROCK_DEPTH], found[:, BASAL_DEPTH] + found[:, DEEP_THICKNESS], rtol=1e-12)
    m = len(order.upper)
    tops = found[:, FIRST_UPPER + m :]
    assert np.all(tops[:, 0] == 0)
    np.testing.assert_allclose(np.diff(tops, axis=1), columns.upper[:, :-1], atol=1e-9)


@quick
@given(plans, seeds)
def test_derivatives_of_columns(order, seed):
    generator = np.random.default_rng(seed)
    fields, ceiling = draw_fields(order, 6, generator), generator.uniform(-15.0, 20.0, 6)
    found = differentiate(fields, ceiling, order, make_columns(fields, ceiling, order))

    def layers(at):
        columns = make_columns(at, ceiling, order)
        return np.concatenate([columns.log_thickness, columns.log_resistivity], axis=1)

    by_layers = difference(layers, fields)
    np.testing.assert_allclose(found.layers, by_layers, rtol=1e-5, atol=1e-6)
    by_quantities = difference(lambda at: quantities(make_columns(at, ceiling, order)), fields)
    np.testing.assert_allclose(found.quantities, by_quantities, rtol=1e-5, atol=1e-6)


def test_every_unit_is_in_the_column_once():
    for order in PLANS.values():
        fields = draw_fields(order, 1, np.random.default_rng(1))
        fields[:, order.grading] = 0.0
        wanted = [unit for i, unit in enumerate(order.upper) for _ in range(2 if i == order.filler else 1)]
        wanted += [*order.deep, order.bedrock]
        columns = make_columns(fields, np.zeros(1), order)
        assert columns.log_resistivity.shape == (1, order.n_layers)
        np.testing.assert_array_equal(columns.log_resistivity[0], fields[0, order.first_resistivity + np.array(wanted)])


def test_presence_that_falls_leaves_no_gravel():
    fields = np.repeat(draw_fields(FIVE, 1, np.random.default_rng(4), deep=(40.0, 50.0)), 7, axis=0)
    fields[:, FIVE.first_presence] = [-6.0, -2.0, -1.0, 0.0, 1.0, 2.0, 6.0]
    columns = make_columns(fields, np.zeros(7), FIVE)
    full = np.exp(fields[0, FIVE.first_deep])
    assert columns.deep[0, 0] < 1e-10
    assert columns.deep[3, 0] == pytest.approx(0.5 * full, rel=1e-3)
    assert columns.deep[6, 0] == pytest.approx(full, rel=1e-3)
    assert np.all(np.diff(columns.deep[:, 0]) > 0)
    # Gravel as good as not there is not there for the curve either.
    without = PLANS["no deep aquifer"]
    kept = [
        i for i in range(FIVE.n_fields) if i not in (FIVE.first_presence, FIVE.first_deep, FIVE.first_resistivity + 3)
    ]
    bare = make_columns(fields[:1, kept], np.zeros(1), without)
    np.testing.assert_allclose(respond(columns)[0], respond(bare)[0], atol=1e-4)


def test_gravel_fades_beyond_the_limits_of_its_depth():
    depth = np.array([1.0, 5.0, 15.0, 40.0, 135.0, 200.0, 600.0])
    fields = np.repeat(draw_fields(FIVE, 1, np.random.default_rng(4)), depth.size, axis=0)
    fields[:, 0], fields[:, FIVE.first_presence] = np.log(depth), 3.0
    share = make_columns(fields, np.zeros(depth.size), FIVE).deep[:, 0] / np.exp(fields[:, FIVE.first_deep])
    np.testing.assert_allclose(share[[2, 4]], 0.5, atol=0.02)
    assert np.all(share[[0, 1, 5, 6]] < 0.01)
    assert share[3] > 0.99


def test_rock_beyond_its_limits_is_unlikely_and_within_them_free():
    depth = np.array([4.0, 14.0, 60.0, 149.0, 250.0])
    fields = np.repeat(draw_fields(FIVE, 1, np.random.default_rng(4)), depth.size, axis=0)
    fields[:, 0], fields[:, FIVE.first_presence] = np.log(depth), -6.0
    unknowns = np.concatenate([fields, np.zeros((depth.size, FACTORS))], axis=1)[:, None]
    places = make_places(
        FIVE, np.zeros(depth.size), np.full((depth.size, HALF_SPACING.size), np.nan), silent(depth.size)
    )
    found = log_likelihood(unknowns, places, FIVE)[:, 0]
    off = np.log([14.0 / depth[0], 1.0, 1.0, 1.0, 250.0 / 150.0]) / joint_state.LIMIT_DEVIATION
    np.testing.assert_allclose(found, -0.5 * off**2, rtol=0.05, atol=1e-6)


# What a place says


@quick
@given(plans, seeds)
def test_gradient_of_the_likelihood(order, seed):
    unknowns, places = place_of(order, seed)
    found = evaluate(unknowns, places, order)
    one = log_likelihood(unknowns[:, None], places, order)[:, 0]
    np.testing.assert_allclose(found.log_likelihood, one, rtol=1e-10)
    slope = difference(lambda at: log_likelihood(at[:, None], places, order)[:, 0], unknowns)
    scale = np.maximum(1.0, np.abs(slope).max(axis=1, keepdims=True))
    np.testing.assert_allclose(found.gradient / scale, slope / scale, atol=2e-5)


@quick
@given(plans, seeds)
def test_curvature_is_the_hessian_where_the_curve_is_met(order, seed):
    generator = np.random.default_rng(seed)
    fields, ceiling = draw_fields(order, 2, generator), np.array([5.0, -3.0])
    columns = make_columns(fields, ceiling, order)
    order = order._replace(rock_limits=(0.0, np.inf))  # its edge is a kink
    quantity = generator.integers(0, 3 + 2 * len(order.upper), (2, 2))
    value = np.take_along_axis(quantities(columns), quantity, axis=1)
    met = Observations(np.full((2, 2), AT), quantity, value, np.full((2, 2), 2.0))
    unknowns = np.concatenate([fields, np.zeros((2, FACTORS))], axis=1)
    places = make_places(order, ceiling, respond(columns), met)
    found = evaluate(unknowns, places, order).curvature
    hessian = -difference(lambda at: evaluate(at, places, order).gradient, unknowns)
    scale = np.abs(found).max(axis=(1, 2), keepdims=True)
    np.testing.assert_allclose(found / scale, hessian / scale, atol=1e-5)
    assert np.all(np.linalg.eigvalsh(found / scale) > -1e-9)


@pytest.mark.parametrize("name", sorted(PLANS))
def test_likelihood_of_a_curve_is_the_written_one(name):
    # The response by quadrature (tests/reference), the error of the page "One geology", written out.
    order = PLANS[name]
    unknowns, places = place_of(order, 11, count=2)
    unknowns = np.round(unknowns, 3)
    places = places._replace(observations=silent(2), curves=places.curves.take(np.array([0, 0])))
    order = order._replace(rock_limits=(0.0, np.inf))
    columns = make_columns(unknowns[:, : order.n_fields], places.ceiling_depth, order)
    found = log_likelihood(unknowns[:, None], places, order)[:, 0]
    for i in range(2):
        apparent = quadrature.response(
            HALF_SPACING, POTENTIAL, np.exp(columns.log_thickness[i]), np.exp(columns.log_resistivity[i])
        )
        factors = np.array([unknowns[i, order.n_fields : order.n_fields + s].sum() for s in SEGMENT])
        off = places.curves.log_apparent_resistivity[i] - np.log(apparent) - factors
        written = np.log(0.98 * norm.pdf(off, 0.0, 0.05) + 0.02 * norm.pdf(off, 0.0, 0.6)).sum()
        assert found[i] == pytest.approx(written, rel=1e-4, abs=1e-3)


def test_what_logs_say_is_the_written_one():
    fields = draw_fields(FIVE, 1, np.random.default_rng(6), deep=(40.0, 50.0))
    order = FIVE._replace(rock_limits=(0.0, np.inf))
    columns = make_columns(fields, np.zeros(1), order)
    rock, shallow = float(columns.rock_depth[0]), float(columns.upper[0, 1])
    said = Observations(
        np.array([[AT, ABOVE, BELOW, NOTHING]]),
        np.array([[FIRST_UPPER + 1, ROCK_DEPTH, ROCK_DEPTH, BASAL_DEPTH]]),
        np.array([[shallow + 1.0, rock + 0.4, rock + 0.4, 7.0]]),
        np.array([[2.0, 0.5, 0.5, 1.0]]),
    )
    places = make_places(order, np.zeros(1), np.full((1, HALF_SPACING.size), np.nan), said)
    unknowns = np.concatenate([fields, np.zeros((1, FACTORS))], axis=1)
    written = -0.5 * 0.5**2 + norm.logcdf(-0.8) + norm.logcdf(0.8)
    assert log_likelihood(unknowns[:, None], places, order)[0, 0] == pytest.approx(written, rel=1e-9)


def test_a_far_bound_stays_finite():
    fields = draw_fields(FIVE, 2, np.random.default_rng(6))
    said = Observations(
        np.array([[ABOVE], [BELOW]]), np.full((2, 1), ROCK_DEPTH), np.array([[900.0], [0.1]]), np.full((2, 1), 0.5)
    )
    places = make_places(FIVE, np.zeros(2), np.full((2, HALF_SPACING.size), np.nan), said)
    found = evaluate(np.concatenate([fields, np.zeros((2, FACTORS))], axis=1), places, FIVE)
    assert all(np.isfinite(values).all() for values in found)


def test_nothing_lies_beyond_the_bounds():
    unknowns, places = place_of(FIVE, 3)
    places = places._replace(highest=np.where(np.arange(unknowns.shape[1]) == 2, unknowns[0, 2] - 0.1, places.highest))
    assert np.isneginf(log_likelihood(unknowns[:1, None], places.take(np.array([0])), FIVE)[0, 0])


def test_residuals_leave_out_what_is_not_there():
    unknowns, places = place_of(FIVE, 8)
    residual, weight = joint_state.standard_residuals(unknowns, places, FIVE)
    assert np.all(residual[-1] == 0)
    assert np.all(weight[-1] == 0)
    assert np.all(weight[:-1] <= 1)
    assert weight[0, 4] < 0.1  # the outlier
