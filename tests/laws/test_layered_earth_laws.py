"""Laws that the response of any layered ground obeys, on models that hypothesis invents.

Each follows from the physics alone (Ohm's law in horizontal layers): scaling, merging, limits, the two asymptotes of
Maillet 1947, and a derivative that is the slope of the response.
"""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from geoves.kernels.layered_earth import (
    apparent_resistivity,
    apparent_resistivity_and_sensitivity,
    dar_zarrouk,
)
from tests.reference import quadrature

HALF_SPACING = np.array([1.0, 2.5, 6.0, 15.0, 40.0, 100.0, 250.0, 600.0])
IDEAL = np.zeros(HALF_SPACING.size)
# The digital filter and its spline of 16 points a decade are good to some 4e-6 of the larger of rho_1 and the response.
KERNEL = 1e-5

quick = settings(max_examples=50, deadline=None, derandomize=True)
logs = st.floats(0.0, 1.0)
ratios = st.just(0.0) | st.floats(0.01, 0.33)


@st.composite
def models(draw, fewest=2, most=6):
    """Thickness (1, k-1), 1 to 60 m, and resistivity (1, k), 3 to 3000 ohm m, evenly in the logarithm."""
    n_layers = draw(st.integers(fewest, most))
    thickness = [60.0 ** draw(logs) for _ in range(n_layers - 1)]
    resistivity = [3.0 * 1000.0 ** draw(logs) for _ in range(n_layers)]
    return np.array([thickness]), np.array([resistivity])


def off(found, expected, resistivity):
    """Largest error, in units of what the kernel promises."""
    scale = np.maximum(np.abs(expected), resistivity[0, 0])
    return np.max(np.abs(found - expected) / scale) / KERNEL


@settings(quick, max_examples=30)
@given(models(), ratios, st.sampled_from([1.0, 4.0, 30.0]))
def test_response_is_the_integral(model, ratio, shortest):
    half_spacing = shortest * np.array([1.0, 3.0, 10.0, 30.0])
    spread = ratio * half_spacing
    found = apparent_resistivity(half_spacing, spread, *model)[0]
    expected = quadrature.response(half_spacing, spread, model[0][0], model[1][0])
    assert off(found, expected, model[1]) < 1.0


@pytest.mark.parametrize("resistivity", [(3000.0, 3.0), (3.0, 3000.0), (300.0, 30.0, 100.0), (30.0, 300.0, 30.0)])
@pytest.mark.parametrize("thin", [1 / 50, 1 / 100, 1 / 1000])
def test_layer_much_thinner_than_the_shortest_array(resistivity, thin):
    # A dry crust of 0.1 m under a curve that begins at 10 m: short wavelengths count though no array is short.
    half_spacing = 10.0 * np.array([1.0, 3.0, 10.0])
    thickness = 10.0 * np.array([thin, 0.5])[: len(resistivity) - 1]
    found = apparent_resistivity(half_spacing, np.zeros(3), thickness[None], np.array([resistivity]))[0]
    expected = quadrature.response(half_spacing, np.zeros(3), thickness, resistivity)
    np.testing.assert_allclose(found, expected, rtol=1e-4)


@quick
@given(models(most=5), st.integers(0, 3), st.floats(0.05, 0.95), ratios)
def test_equal_layers_merge(model, layer, share, ratio):
    thickness, resistivity = model
    split = layer % thickness.shape[1]
    parts = thickness[0, split] * np.array([share, 1.0 - share])
    finer = np.concatenate([thickness[0, :split], parts, thickness[0, split + 1 :]])[None]
    repeated = np.insert(resistivity, split, resistivity[:, split], axis=1)
    one = apparent_resistivity(HALF_SPACING, ratio * HALF_SPACING, thickness, resistivity)
    two = apparent_resistivity(HALF_SPACING, ratio * HALF_SPACING, finer, repeated)
    np.testing.assert_allclose(two, one, rtol=1e-9)


@quick
@given(models(), st.floats(1.0, 5000.0), ratios)
def test_uniform_ground_shows_its_resistivity(model, value, ratio):
    resistivity = np.full(model[1].shape, value)
    found = apparent_resistivity(HALF_SPACING, ratio * HALF_SPACING, model[0], resistivity)
    np.testing.assert_allclose(found, value, rtol=1e-12)


def test_ground_without_layers():
    found = apparent_resistivity(HALF_SPACING, IDEAL, np.empty((2, 0)), np.array([[30.0], [400.0]]))
    np.testing.assert_allclose(found, np.repeat([[30.0], [400.0]], HALF_SPACING.size, axis=1), rtol=1e-12)


@quick
@given(models(), st.floats(0.01, 100.0), ratios)
def test_response_goes_with_resistivity(model, factor, ratio):
    one = apparent_resistivity(HALF_SPACING, ratio * HALF_SPACING, *model)
    scaled = apparent_resistivity(HALF_SPACING, ratio * HALF_SPACING, model[0], factor * model[1])
    np.testing.assert_allclose(scaled, factor * one, rtol=1e-9)


@quick
@given(models(), st.floats(0.1, 10.0), ratios)
def test_response_does_not_know_the_metre(model, factor, ratio):
    spread = ratio * HALF_SPACING
    one = apparent_resistivity(HALF_SPACING, spread, *model)
    scaled = apparent_resistivity(factor * HALF_SPACING, factor * spread, factor * model[0], model[1])
    assert off(scaled, one, model[1]) < 1.0  # a rounded point count may shift the grid of wavenumbers


@quick
@given(models())
def test_short_arrays_see_the_first_layer(model):
    found = apparent_resistivity(1e-3 * model[0][:, 0], np.zeros(1), *model)
    np.testing.assert_allclose(found[0], model[1][0, 0], rtol=1e-6)  # off by (s / 2 h)³ and the filter


@quick
@given(models())
def test_long_arrays_see_the_base(model):
    thickness, resistivity = model
    conductance, resistance = dar_zarrouk(thickness, resistivity)
    base = resistivity[:, -1]
    reach = thickness.sum(axis=1) + conductance * base + resistance / base
    found = apparent_resistivity(1e3 * reach, np.zeros(1), thickness, resistivity)
    np.testing.assert_allclose(found[0], base, rtol=1e-2)


@quick
@given(models())
def test_small_potential_spread_is_the_ideal_limit(model):
    ideal, narrow = (apparent_resistivity(HALF_SPACING, m * HALF_SPACING, *model) for m in (0.0, 1e-3))
    assert off(narrow, ideal, model[1]) < 1.0


@quick
@given(st.lists(models(fewest=4, most=4), min_size=2, max_size=5), ratios)
def test_each_model_of_a_batch_is_alone(several, ratio):
    thickness, resistivity = (np.concatenate([model[i] for model in several]) for i in (0, 1))
    spread = ratio * HALF_SPACING
    together, slopes = apparent_resistivity_and_sensitivity(HALF_SPACING, spread, thickness, resistivity)
    for i, model in enumerate(several):
        alone, slope = apparent_resistivity_and_sensitivity(HALF_SPACING, spread, *model)
        np.testing.assert_allclose(together[i], alone[0], rtol=1e-10)
        np.testing.assert_allclose(slopes[i], slope[0], rtol=1e-8, atol=1e-10)


@quick
@given(models(), ratios)
def test_sensitivity_is_the_slope_of_the_response(model, ratio):
    spread, step, n_thick = ratio * HALF_SPACING, 1e-4, model[0].shape[1]
    found, sensitivity = apparent_resistivity_and_sensitivity(HALF_SPACING, spread, *model)
    np.testing.assert_allclose(found, apparent_resistivity(HALF_SPACING, spread, *model), rtol=1e-12)
    shifts = step * np.eye(sensitivity.shape[2])
    up, down = (
        apparent_resistivity(
            HALF_SPACING, spread, model[0] * np.exp(shift[:, :n_thick]), model[1] * np.exp(shift[:, n_thick:])
        )
        for shift in (shifts, -shifts)
    )
    differences = (np.log(up) - np.log(down)).T / (2.0 * step)
    # Central differences leave out step² times the third derivative, some 1e-7 here.
    np.testing.assert_allclose(sensitivity[0], differences, rtol=1e-5, atol=1e-6)


@quick
@given(models(), ratios)
def test_sensitivities_to_resistivity_sum_to_one(model, ratio):
    # Euler's rule for the scale law of resistivity.
    _, sensitivity = apparent_resistivity_and_sensitivity(HALF_SPACING, ratio * HALF_SPACING, *model)
    np.testing.assert_allclose(sensitivity[..., model[0].shape[1] :].sum(axis=2), 1.0, rtol=1e-9)


@quick
@given(models())
def test_no_rise_is_steeper_than_45_degrees(model):
    half_spacing = np.geomspace(1.0, 1000.0, 121)
    found = apparent_resistivity(half_spacing, np.zeros(121), *model)[0]
    assert np.max(np.diff(np.log(found)) / np.diff(np.log(half_spacing))) <= 1.0 + 1e-3


@quick
@given(models(most=4))
def test_insulating_base_gives_the_line_of_total_conductance(model):
    # rho_a -> s / S at spacings long against the layers (Maillet 1947).
    thickness, resistivity = model[0], model[1].copy()
    resistivity[:, -1] = 1e12
    conductance, resistance = dar_zarrouk(thickness, resistivity)
    # Under a resistive layer the current needs sqrt(S T) to reach the layers below it.
    half_spacing = 300.0 * (thickness.sum(axis=1) + np.sqrt(conductance * resistance))
    found = apparent_resistivity(half_spacing, np.zeros(1), thickness, resistivity)
    np.testing.assert_allclose(found[0] * conductance / half_spacing, 1.0, rtol=1e-2)


@pytest.mark.parametrize("kept", ["conductance", "resistance"])
@quick
@given(thickness=st.floats(2.0, 40.0), cover=st.floats(10.0, 200.0), base=st.floats(0.2, 5.0))
def test_thin_layer_shows_only_its_product(kept, thickness, cover, base):
    # A bed of a hundredth of its cover and a hundredfold contrast: halved in thickness with S (conductive) or
    # T (resistive) kept, the curve stays (Maillet 1947). What is left goes with thickness over depth, here 1/100.
    contrast = 0.01 if kept == "conductance" else 100.0
    refined = 0.5 if kept == "conductance" else 2.0
    thin = 0.01 * thickness
    one = apparent_resistivity(
        HALF_SPACING, IDEAL, np.array([[thickness, thin]]), cover * np.array([[1.0, contrast, base]])
    )
    two = apparent_resistivity(
        HALF_SPACING, IDEAL, np.array([[thickness, 0.5 * thin]]), cover * np.array([[1.0, contrast * refined, base]])
    )
    np.testing.assert_allclose(two, one, rtol=0.01)
