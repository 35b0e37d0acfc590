"""Blind inversion of published models: what comes back, how sure, and through which seam.

Models: the curves of tests/published/curve_tables.py, computed here by images (Flathe 1955), not by the kernels.
"""

from concurrent.futures import ThreadPoolExecutor
from functools import lru_cache

import attrs
import numpy as np
import pytest
from scipy.stats import binom

from geoves.domain.survey import Curve, Sounding, Survey
from geoves.inversion import InversionOptions, _fit_all_counts, _merge_layers, invert, invert_block
from geoves.kernels.damped_steps import Readings, fit_layers, stack_curves
from geoves.kernels.layered_earth import shared_wavenumbers
from tests.published.curve_tables import ALL_CURVES
from tests.reference.image_series import finite_response, ideal_response, layered_strengths, two_layer_strengths

SPACING = np.array([1, 1.5, 2, 3, 4, 6, 8, 10, 15, 20, 30, 40, 60, 80, 100, 150, 200.0])
NOISE, DRAWS = 0.03, 40
QUICK = InversionOptions(draws=100, smooth_layers=12)
MODELS = {curve.name: curve for curve in ALL_CURVES}


def sounding_of(name, apparent, *, spacing=SPACING, mn2=None, error=np.nan, array="schlumberger"):
    n = len(spacing)
    mn2 = np.zeros(n) if mn2 is None else mn2
    curve = Curve(spacing, mn2, apparent, np.full(n, error), np.zeros(n, dtype=int), np.ones(n, dtype=bool))
    return Sounding(name, 500_000.0, 4_600_000.0, 400.0, curve, array=array)


@lru_cache
def printed_ground(name):
    model = MODELS[name]
    strengths = layered_strengths(model.thickness, model.resistivity, 8000)
    return np.array([ideal_response(s, 1.0, model.resistivity[0], strengths) for s in SPACING])


def noisy_survey(name, count, noise=NOISE, *, error=np.nan, seed=11):
    generator = np.random.default_rng(seed)
    return Survey(
        tuple(
            sounding_of(f"{name} {i}", printed_ground(name) * np.exp(noise * generator.standard_normal(SPACING.size)),
                        error=error)
            for i in range(count)
        )
    )  # fmt: skip


@lru_cache
def inverted(name):
    """With the noise known, so that one pass is enough."""
    soundings = noisy_survey(name, DRAWS).soundings
    wavenumber = shared_wavenumbers((s.curve.half_spacing, s.curve.potential_half_spacing) for s in soundings)
    return invert_block(soundings, options=QUICK, wavenumber=wavenumber, noise=NOISE)


def hits(found, quantity, truth):
    """How many ensembles hold the truth between their 5 and 95 % quantiles."""
    bands = [np.quantile(quantity(one.ensemble), [0.05, 0.95]) for one in found]
    return sum(low <= truth <= high for low, high in bands)


def base_depth(ensemble):
    return ensemble.top_depth[:, -1]


# Fewest hits that a true 90 % misses once in 10 000 such tests.
FEWEST = int(binom.ppf(1e-4, DRAWS, 0.9))


@pytest.mark.parametrize("name", ["conductive base", "resistive base", "H", "Q"])
def test_depth_of_the_base_lies_within_its_own_band(name):
    found = inverted(name)
    assert hits(found, base_depth, sum(MODELS[name].thickness)) >= FEWEST
    # And the band says something: a third of the depth at most, either way.
    assert np.median([np.std(np.log(base_depth(one.ensemble))) for one in found]) < 0.35


@pytest.mark.parametrize("name", ["conductive base", "resistive base", "H", "K", "A", "Q", "HK, outwash"])
def test_outer_resistivities_lie_within_their_bands(name):
    """The first layer and the half-space: what every curve ends in, whatever lies between."""
    found = inverted(name)
    assert hits(found, lambda e: e.resistivity[:, 0], MODELS[name].resistivity[0]) >= FEWEST - 2
    assert hits(found, lambda e: e.resistivity[:, -1], MODELS[name].resistivity[-1]) >= FEWEST - 2


def test_what_equivalence_leaves_known_is_known():
    """H: conductance S = Σ h/ρ above the base, 0.55 S; K: transverse resistance T = Σ h ρ, 2100 Ω m² (Maillet 1947)."""
    above = [one for one in inverted("H") if one.n_layers == 3]
    assert len(above) > DRAWS / 2
    assert hits(above, lambda e: e.conductance.sum(axis=1), 0.55) >= binom.ppf(1e-4, len(above), 0.9)
    above = [one for one in inverted("K") if one.n_layers == 3]
    assert len(above) > DRAWS / 2
    assert hits(above, lambda e: e.transverse_resistance[:, 1], 2000.0) >= binom.ppf(1e-4, len(above), 0.9)


@pytest.mark.parametrize("name", ["conductive base", "resistive base", "H", "K", "A", "Q", "HK, outwash"])
def test_layers_are_counted_with_restraint(name):
    counts = np.array([one.n_layers for one in inverted(name)])
    true = len(MODELS[name].resistivity)
    assert np.mean(counts > true + 1) <= 0.05
    assert np.mean(counts > true) <= 0.2
    assert np.mean(counts < true) <= 0.2
    for one in inverted(name):
        assert min(one.criterion, key=one.criterion.get) == one.n_layers


@pytest.mark.parametrize("noise", [0.02, 0.06])
def test_noise_of_the_survey_is_found_from_its_residuals(noise):
    soundings = [s for name in ("H", "A", "conductive base") for s in noisy_survey(name, 8, noise).soundings]
    found = invert(Survey(tuple(soundings)), QUICK)
    # 24 curves of 17 readings, median absolute residual: 5 % of standard error, and the degrees of freedom a guess.
    assert found[0].noise == pytest.approx(noise, rel=0.25)
    assert {one.noise for one in found} == {found[0].noise}
    assert np.median([one.rms_percent for one in found]) == pytest.approx(100.0 * noise, rel=0.3)


def correlated_survey(lag_one, count=20, seed=1):
    """Errors of NOISE with correlation lag_one to the power of the readings between (AR(1))."""
    generator = np.random.default_rng(seed)
    apart = np.abs(np.subtract.outer(np.arange(SPACING.size), np.arange(SPACING.size)))
    factor = NOISE * np.linalg.cholesky(lag_one**apart)
    return Survey(
        tuple(
            sounding_of(f"{name} {i}", printed_ground(name) * np.exp(factor @ generator.standard_normal(SPACING.size)))
            for name in ("H", "A", "conductive base")
            for i in range(count)
        )
    )


def test_errors_alike_at_neighbouring_spacings_are_noticed_and_widen_the_bands():
    found = invert(correlated_survey(0.5), QUICK)
    assert {one.error_correlation for one in found} == {found[0].error_correlation}
    assert found[0].error_correlation == pytest.approx(0.5, abs=0.2)
    assert found[0].noise > 1.4 * NOISE
    held = sum(
        hits([one], base_depth, sum(MODELS[one.sounding.rsplit(" ", 1)[0]].thickness))
        + hits([one], lambda e: e.resistivity[:, 0], MODELS[one.sounding.rsplit(" ", 1)[0]].resistivity[0])
        for one in found
    )
    # 120 bands, pairs of them of one curve: with the correlation ignored some 75 held.
    assert held >= 93
    assert np.mean([one.n_layers > len(MODELS[one.sounding.rsplit(" ", 1)[0]].resistivity) for one in found]) < 0.05


def test_independent_errors_change_nothing():
    survey = correlated_survey(0.0)
    for one in (found := invert(survey, QUICK)):
        assert one.error_correlation == 0.0
    assert found[0].noise == pytest.approx(NOISE, rel=0.15)


def test_a_typed_error_is_believed():
    found = invert(noisy_survey("H", 4, error=0.08), QUICK)
    sure = invert(noisy_survey("H", 4, error=0.03), QUICK)
    for loose, tight in zip(found, sure, strict=True):
        assert np.std(np.log(loose.ensemble.resistivity[:, 0])) > np.std(np.log(tight.ensemble.resistivity[:, 0]))


@pytest.mark.parametrize("name", ["conductive base", "resistive base", "H", "K", "A", "Q", "HK, outwash"])
def test_the_search_finds_what_a_start_at_the_truth_finds(name):
    """The true model is a start that the search does not have: all but few of the curves need none of it."""
    model, soundings = MODELS[name], noisy_survey(name, DRAWS).soundings
    k = len(model.resistivity)
    wavenumber = shared_wavenumbers((s.curve.half_spacing, s.curve.potential_half_spacing) for s in soundings)
    curves = stack_curves([Readings(*s.curve.readings(NOISE)) for s in soundings], wavenumber)
    fit, prior = _fit_all_counts(curves, soundings, QUICK)[k]
    true = np.log([*model.thickness, *model.resistivity])
    from_truth = fit_layers(np.tile(true, (DRAWS, 1)), k, curves, prior)
    assert np.mean(fit.objective > from_truth.objective + 0.5) <= 0.05


@pytest.mark.parametrize("upper", [0, 1, 2])
def test_merged_layers_keep_what_lies_above_and_below(upper):
    thickness, resistivity = np.array([2.0, 6.0, 20.0]), np.array([100.0, 10.0, 50.0, 300.0])
    (merged,) = _merge_layers(np.log([[*thickness, *resistivity, 1.05]]), 4, upper)
    h, rho = np.exp(merged[:2]), np.exp(merged[2:5])
    expected = {
        0: ([8.0, 20.0], [100.0**0.25 * 10.0**0.75, 50.0, 300.0]),
        1: ([2.0, 26.0], [100.0, 10.0 ** (6 / 26) * 50.0 ** (20 / 26), 300.0]),
        2: ([2.0, 6.0], [100.0, 10.0, 300.0]),
    }[upper]
    np.testing.assert_allclose(h, expected[0])
    np.testing.assert_allclose(rho, expected[1])
    assert np.exp(merged[5]) == pytest.approx(1.05)


# The minimum of H is at AB/2 = 20 m, reading 9: about there a bad reading looks most like another layer.
@pytest.mark.parametrize(
    ("spoilt", "factor"), [(5, 1.5), (5, 1.3), (9, 1.5), (10, 1.5), (10, 1.3), (14, 1.5), (14, 1.3)]
)
def test_an_outlier_is_set_aside(spoilt, factor):
    survey = noisy_survey("H", 4, error=NOISE)
    bad = []
    for sounding in survey.soundings:
        apparent = sounding.curve.apparent_resistivity.copy()
        apparent[spoilt] *= factor
        bad.append(attrs.evolve(sounding, curve=attrs.evolve(sounding.curve, apparent_resistivity=apparent)))
    for found, clean in zip(invert(Survey(tuple(bad)), QUICK), invert(survey, QUICK), strict=True):
        assert np.argmin(found.robust_weight) == spoilt
        assert found.robust_weight[spoilt] < 0.05
        assert found.predicted[spoilt] == pytest.approx(clean.predicted[spoilt], rel=0.07)


def test_factor_of_a_shifted_segment_comes_back():
    spacing = np.concatenate([SPACING[:10], SPACING[8:]])
    late = np.arange(spacing.size) >= 10
    apparent = np.interp(np.log(spacing), np.log(SPACING), printed_ground("H")) * np.where(late, 1.08, 1.0)
    sounding = sounding_of("shifted", apparent, spacing=spacing, error=0.02)
    shifted = attrs.evolve(sounding, curve=attrs.evolve(sounding.curve, segment=late.astype(int)))
    (found,) = invert(Survey((shifted,)), QUICK)
    np.testing.assert_allclose(found.segment_factor, [1.0, 1.08], atol=0.02)
    np.testing.assert_allclose(found.predicted * np.where(late, found.segment_factor[1], 1.0), apparent, rtol=0.03)


def test_soundings_with_too_few_readings_are_left_out_in_order():
    first, second, third = noisy_survey("H", 3).soundings
    few = attrs.evolve(second, curve=attrs.evolve(second.curve, used=np.arange(SPACING.size) < 4))
    found = invert(Survey((third, few, first)), QUICK)
    assert [one.sounding for one in found] == [third.name, first.name]
    assert invert(Survey((few,)), QUICK) == ()
    assert invert(Survey(()), QUICK) == ()


def test_readings_out_of_use_are_predicted_and_not_fitted():
    (sounding,) = noisy_survey("A", 1, error=NOISE).soundings
    apparent, used = sounding.curve.apparent_resistivity.copy(), np.ones(SPACING.size, dtype=bool)
    apparent[5], used[5] = 10.0 * apparent[5], False
    spoilt = attrs.evolve(sounding, curve=attrs.evolve(sounding.curve, apparent_resistivity=apparent, used=used))
    (found,) = invert(Survey((spoilt,)), QUICK)
    assert found.predicted[5] == pytest.approx(printed_ground("A")[5], rel=0.05)
    assert found.robust_weight[5] == 0.0
    assert found.robust_weight[used].min() > 0.5


def test_any_order_keeping_map_gives_the_same_to_the_bit():
    """The builtin, threads, and a second run: nothing depends on who computes a block, or when."""
    survey, options = noisy_survey("HK, outwash", 7), attrs.evolve(QUICK, block=2)
    plain = invert(survey, options)
    with ThreadPoolExecutor(2) as threads:
        assert invert(survey, options, map=threads.map) == plain
    assert invert(survey, options) == plain
    assert [one.sounding for one in plain] == [s.name for s in survey.soundings]


def test_the_size_of_a_block_does_not_matter():
    survey = noisy_survey("A", 5, error=NOISE)
    small, large = (invert(survey, attrs.evolve(QUICK, block=block)) for block in (1, 5))
    for one, other in zip(small, large, strict=True):
        assert one.n_layers == other.n_layers
        np.testing.assert_allclose(one.model.resistivity, other.model.resistivity, rtol=1e-5)
        np.testing.assert_allclose(one.ensemble.thickness, other.ensemble.thickness, rtol=1e-4)


def test_another_seed_draws_other_models_of_the_same_ground():
    survey = noisy_survey("A", 1, error=NOISE)
    (one,), (other,) = invert(survey, QUICK), invert(survey, attrs.evolve(QUICK, random_seed=1))
    assert one.model == other.model
    assert one.ensemble != other.ensemble


def wenner_two_layers(spacing_a, thickness, resistivity):
    """Wenner's curve by images: ρ₁ [1 + 4 Σ kⁿ (1/√(1 + (2nh/a)²) - 1/√(4 + (2nh/a)²))] (textbooks, from memory)."""
    strengths = two_layer_strengths(resistivity, 4000)
    depth = 2.0 * thickness * np.arange(1, 4001)[:, None] / spacing_a
    sums = strengths @ (1.0 / np.sqrt(1.0 + depth**2) - 1.0 / np.sqrt(4.0 + depth**2))
    return resistivity[0] * (1.0 + 4.0 * sums)


A_SPACING = np.geomspace(1.0, 120.0, 16)


def wenner_sounding(apparent):
    """AB/2 = 1.5 a and MN/2 = 0.5 a, as the tables bring it."""
    return sounding_of(
        "Wenner", apparent, spacing=1.5 * A_SPACING, mn2=0.5 * A_SPACING, error=0.02, array="wenner"
    )  # fmt: skip


def test_wenner_over_uniform_ground():
    (found,) = invert(Survey((wenner_sounding(np.full(A_SPACING.size, 47.0)),)), QUICK)
    np.testing.assert_allclose(found.model.resistivity, 47.0, rtol=0.05)
    np.testing.assert_allclose(found.predicted, 47.0, rtol=0.01)
    assert found.n_layers == 2


@pytest.mark.parametrize("resistivity", [(100.0, 15.0), (20.0, 90.0)])
def test_wenner_tells_the_same_ground_as_schlumberger(resistivity):
    wenner = wenner_sounding(wenner_two_layers(A_SPACING, 10.0, resistivity))
    strengths = two_layer_strengths(resistivity, 4000)
    plain = [finite_response(s, s / 10.0, 10.0, resistivity[0], strengths) for s in SPACING]
    schlumberger = sounding_of("Schlumberger", np.array(plain), mn2=SPACING / 10.0, error=0.02)
    for found in invert(Survey((wenner, schlumberger)), QUICK):
        assert found.n_layers == 2
        np.testing.assert_allclose(found.model.thickness, [10.0], rtol=0.03)
        np.testing.assert_allclose(found.model.resistivity, resistivity, rtol=0.03)
        assert found.rms_percent < 0.5


def test_depth_of_investigation_grows_with_the_spread():
    short = np.arange(SPACING.size) < 10
    (sounding,) = noisy_survey("conductive base", 1, error=NOISE).soundings
    cut = attrs.evolve(sounding, name="short", curve=attrs.evolve(sounding.curve, used=short))
    full, less = invert(Survey((sounding, cut)), QUICK)
    assert 0.0 < less.investigated_depth < full.investigated_depth
    assert less.investigated_depth < SPACING[short][-1]
