"""Coarse ground above the water level: where the level is known, how it is carried, what it does to a sounding."""

import attrs
import numpy as np
import pytest
from scipy.stats import norm

from geoves.domain.survey import Well
from geoves.domain.tops import WellReading
from geoves.domain.units import THICKNESS_BY_ROLE, Role, Template, Unit
from geoves.interpretation import InterpretationOptions, sequences
from geoves.interpretation.water import DRY_FACTORS, carry_water_level, find_water_wells
from geoves.kernels.damped_steps import Readings, stack_curves
from geoves.kernels.layered_earth import shared_wavenumbers
from tests.interpretation.columns import CLAY, COVER, FULL, ROCK, SPACING, UPPER, read_places, sounding_over, well_of

EAST, NORTH = 500_000.0, 4_600_000.0
AS_TYPED = InterpretationOptions(calibrate=False)


def water_well(name, east, north, level, *intervals, ground=400.0):
    log = well_of(name, *(intervals or [(0, 1, "topsoil"), (1, 13, "sand and gravel")]))
    return attrs.evolve(
        log, easting=EAST + east, northing=NORTH + north, ground_elevation=ground, water_level=level
    )  # fmt: skip


AROUND = [water_well("W1", 200, 0, 5.0), water_well("W2", -300, 150, 5.0), water_well("W3", 0, -250, 5.0)]


def test_dry_gravel_is_not_read_into_the_aquifer():
    """1 m of till, 4 m of dry gravel (500 ohm m), 8 m of saturated gravel (100), 30 m of clay, rock; water at 5 m.

    Without the water level the aquifer reads three times too high. With it the truth lies in the 90 % interval and the
    median is near it; the dry part is found between 1 and 5 m.
    """
    soundings = [sounding_over(f"Dry {i}", [1, 4, 8, 30], [40, 500, 100, 17, 70], seed=i) for i in range(4)]
    without = read_places(soundings, FULL, options=AS_TYPED).columns
    found = read_places(soundings, FULL, wells=AROUND, options=AS_TYPED).columns
    for plain, column in zip(without, found, strict=True):
        assert plain.shallow_resistivity[0] > 200.0
        assert plain.above_water.size == 0
        low, middle, high = column.shallow_resistivity
        assert low < 100.0 < high
        assert abs(np.log(middle / 100.0)) < 0.3
        depth = 0.5 * (column.profile_depth[1:] + column.profile_depth[:-1])
        assert np.all(column.above_water[(depth > 1.5) & (depth < 3.5)] > 0.8)
        assert np.all(column.above_water[depth > 9.0] < 0.05)
        assert column.water_level == pytest.approx([5.0, 0.76], abs=0.01)


def test_saturated_gravel_under_a_high_water_level_stays_the_aquifer():
    """Water at 1 m, in the till: the gravel is below it, as it would be read without the level."""
    soundings = [sounding_over(f"Wet {i}", [2, 9, 30], [40, 110, 17, 70], seed=i) for i in range(3)]
    high = [attrs.evolve(well, water_level=1.0) for well in AROUND]
    without = read_places(soundings, FULL, options=AS_TYPED).columns
    found = read_places(soundings, FULL, wells=high, options=AS_TYPED).columns
    for plain, column in zip(without, found, strict=True):
        depth = 0.5 * (column.profile_depth[1:] + column.profile_depth[:-1])
        assert np.all(column.above_water[depth > 3.0] < 0.1)
        assert column.shallow_resistivity[1] == pytest.approx(plain.shallow_resistivity[1], rel=0.15)


def test_no_water_table_changes_nothing():
    """No level at all, levels under a clay, words not understood, no log: to the bit what is read without wells."""
    sounding = [sounding_over("Bare", [1, 4, 8, 30], [40, 500, 100, 17, 70])]
    under_clay = water_well("C", 100, 0, 4.0, (0, 3, "topsoil"), (3, 20, "blue clay"), (20, 30, "gravel"))
    unread = water_well("U", 100, 0, 4.0, (0, 3, "topsoil"), (3, 20, "muck & stumps"))
    silent = attrs.evolve(AROUND[0], water_level=None)
    bare = Well("B", EAST, NORTH, 400.0, 12.0, water_level=4.0)
    plain = read_places(sounding, FULL, wells=[silent], options=AS_TYPED)
    assert "water level" not in " ".join(plain.remarks)
    for well in (under_clay, unread, bare):
        # An aquifer that a log shows moves the presence of its unit: compared with the same log without a level.
        same = read_places(sounding, FULL, wells=[attrs.evolve(well, water_level=None)], options=AS_TYPED)
        found = read_places(sounding, FULL, wells=[well], options=AS_TYPED)
        assert found.columns == same.columns
        assert well.name in found.remarks[0]
    switched_off = attrs.evolve(AS_TYPED, water_level_reach=0.0)
    assert np.isnan(read_places(sounding, FULL, wells=AROUND, options=switched_off).columns[0].water_level).all()


def wells_of(*wells, crs_metres=1.0):
    readings = [[WellReading(well.name, 0.0, 13.0, "gravel", "upper", 1.0)] for well in wells]
    found, _ = find_water_wells(wells, readings, FULL, crs_metres)
    return found


def test_a_level_is_carried_with_a_doubt_that_grows():
    place = sounding_over("P", [2, 30], [40, 17, 70])
    near = carry_water_level(place, wells_of(water_well("A", 100, 0, 5.0)), 1.0, 2000.0)
    far = carry_water_level(place, wells_of(water_well("A", 1000, 0, 5.0)), 1.0, 2000.0)
    assert near == pytest.approx((5.0, np.hypot(0.7, 0.2)))
    assert far == pytest.approx((5.0, np.hypot(0.7, 2.0)))
    assert carry_water_level(place, wells_of(water_well("A", 2100, 0, 5.0)), 1.0, 2000.0) is None


def test_half_of_a_difference_in_elevation_is_followed_and_doubted():
    place = sounding_over("P", [2, 30], [40, 17, 70])  # ground at 400 m
    depth, deviation = carry_water_level(place, wells_of(water_well("A", 500, 0, 5.0, ground=396.0)), 1.0, 2000.0)
    assert depth == pytest.approx(7.0)
    assert deviation == pytest.approx(np.sqrt(0.7**2 + 1.0**2 + 2.0**2))


def test_wells_count_by_the_inverse_of_their_variance():
    place = sounding_over("P", [2, 30], [40, 17, 70])
    wells = wells_of(water_well("A", 500, 0, 4.0), water_well("B", 0, 1000, 8.0))
    depth, deviation = carry_water_level(place, wells, 1.0, 2000.0)
    assert depth == pytest.approx((4.0 * 4 + 8.0) / 5)  # deviations of 1 and 2 m
    assert deviation == pytest.approx(np.sqrt(0.7**2 + 1.0 / 1.25))


def test_distances_are_metres_in_a_crs_of_feet():
    foot = 1200.0 / 3937.0
    place = attrs.evolve(sounding_over("P", [2, 30], [40, 17, 70]), easting=0.0, northing=0.0)
    well = attrs.evolve(water_well("A", 0, 0, 5.0), easting=500.0 / foot, northing=0.0)
    assert carry_water_level(place, wells_of(well, crs_metres=foot), foot, 600.0)[1] == pytest.approx(np.hypot(0.7, 1))
    assert carry_water_level(place, wells_of(well, crs_metres=foot), foot, 400.0) is None


def test_drained_gravel_is_two_to_sixteen_times_as_resistive():
    """Archie's saturation exponent 2 and saturations of 0.7 to 0.25; Reynolds 2011, table 7.1: gravel dry 1400 ohm m,
    saturated 100, which must lie within.
    """
    np.testing.assert_allclose(DRY_FACTORS, (1 / 0.49, 16.0))
    assert DRY_FACTORS[0] < 1400 / 100 < DRY_FACTORS[1]


def test_a_cover_counts_as_coarse_by_its_words():
    def cover(*terms):
        return Unit("c", "Cover", Role.COVER, 50, 100, None, terms)

    assert cover("sand", "Fine sand", "gravel").is_coarse
    assert not cover("sand", "sandy loam").is_coarse
    assert not cover("sand", "till").is_coarse
    assert not cover().is_coarse
    assert UPPER.is_coarse
    assert not CLAY.is_coarse


def silent_curve():
    """A curve whose readings may be anything: what is drawn from it is the prior."""
    n = SPACING.size
    readings = Readings(SPACING, SPACING / 20.0, np.full(n, 50.0), np.full(n, 1e3), np.zeros(n, dtype=int))
    return stack_curves([readings], shared_wavenumbers([(SPACING, SPACING / 20.0)]))


def test_the_cut_is_as_probable_as_depths_and_level_make_it():
    """Under a silent curve: till over gravel over clay, water at 6 ± 1.5 m, against plain draws of all three."""
    template = Template(tuple(attrs.evolve(unit, depth_to_top=None) for unit in (COVER, UPPER, CLAY, ROCK)))
    here = attrs.evolve(template, water_level=(6.0, 1.5))
    base = next(one for one in sequences.admissible_sequences(template, np.full(4, 0.5)) if one.units == (0, 1, 2, 3))
    cut = sequences.cut_at_water([base], here)
    assert [one.dry for one in cut] == [
        (False, False, False, False), (False, True, False, False), (False, True, False, False, False)
    ]  # fmt: skip
    curves = silent_curve()
    fits = sequences.fit_sequences(cut, here, curves, [here])
    drawn = []
    for seed in range(6):
        generator, options = np.random.default_rng(seed), InterpretationOptions(draws=2000)
        draws = sequences.draw_columns(cut, fits, np.zeros(3), curves, here, options, generator)
        drawn.append((draws.dry[:, 1], draws.thickness[:, 1], draws.thickness[:, 0]))
    dry, gravel, _ = (np.concatenate(parts) for parts in zip(*drawn, strict=True))

    random, n = np.random.default_rng(99), 400_000

    def thickness(role):
        low, high = np.log(THICKNESS_BY_ROLE[role])
        return np.exp(random.normal(0.5 * (low + high), (high - low) / (2 * norm.ppf(0.95)), n))

    cover, own, level = thickness(Role.COVER), thickness(Role.SHALLOW_AQUIFER), random.normal(6.0, 1.5, n)
    expected = np.clip(level - cover, 0.0, own)
    for least in (0.0, 1.0, 3.0, 5.0):
        assert np.mean(dry > least) == pytest.approx(np.mean(expected > least), abs=0.03)
    whole, all_dry = dry >= gravel - 1e-9, expected >= own
    assert np.mean(whole) == pytest.approx(np.mean(all_dry), abs=0.03)
