"""Single checks against formulas from outside: Bayes error, sampled land, repeats, K and its slips."""

import math
from pathlib import Path

import numpy as np
import pytest
from scipy.stats import norm

from geoves.checking import assign_errors, examine_curves
from geoves.checking.meter import significant_digits
from geoves.checking.places import guess_slip
from geoves.checking.spreads import check_spreads, sample_ground
from geoves.checking.template import confusion, find_gaps
from geoves.curves import make_sounding
from geoves.domain.grids import Grid
from geoves.domain.region import Region
from geoves.domain.survey import Curve, Ground, Measured, Sounding, Survey
from geoves.domain.units import Z_95, Role, Template, Unit

GRID = Grid(west=600_000.0, north=4_903_000.0, cell_size=50.0, n_rows=60, n_columns=60)
AB2 = np.array([1.5, 3.0, 6.0, 12.0, 25.0, 50.0, 100.0, 200.0])


def unit_about(resistivity, deviation, code="a"):
    low, high = (resistivity * math.exp(sign * Z_95 * deviation) for sign in (-1, 1))
    return Unit(code, code, Role.COVER, low, high)


@pytest.mark.parametrize("apart", [0.0, 0.5, 1.0, 2.0])
def test_confusion_of_equally_broad_units_is_the_tail_of_a_normal(apart):
    """Two normals of one deviation, equally likely: the Bayes error is Φ(-d / 2σ) (Duda and Hart 1973, section 2.7)."""
    first, second = unit_about(40.0, 0.3), unit_about(40.0 * math.exp(apart), 0.3)
    assert confusion(first, second) == pytest.approx(norm.cdf(-apart / 0.6), abs=2e-4)
    assert confusion(second, first) == pytest.approx(confusion(first, second))


def test_gaps_lie_between_ranges_whatever_their_order():
    units = (unit_about(100.0, 0.1, "a"), unit_about(10.0, 0.1, "b"), unit_about(11.0, 0.1, "c"))
    ((low, high),) = find_gaps(Template(units))
    assert low == pytest.approx(11.0 * math.exp(0.1 * Z_95))
    assert high == pytest.approx(100.0 * math.exp(-0.1 * Z_95))


def test_ground_is_sampled_between_centres():
    east, north = np.meshgrid(GRID.easting, GRID.northing)
    ground = Ground(GRID, 300.0 + 0.01 * (east - 600_000.0) - 0.02 * (north - 4_900_000.0))
    points = np.array([[600_777.0, 4_901_333.0], [599_000.0, 4_901_000.0]])
    found = sample_ground(ground, points)
    assert found[0] == pytest.approx(300.0 + 7.77 - 26.66)  # a plane is met exactly
    assert np.isnan(found[1])


def spread(azimuth):
    curve = make_sounding("Heron 4", AB2, np.full(8, 0.5), np.full(8, 50.0)).curve
    return Sounding("Heron 4", 601_500.0, 4_901_500.0, 300.0, curve, azimuth_deg=azimuth)


def small_region():
    return Region(
        name="Larkmoor", path=Path("region.toml"), crs="EPSG:26914", crs_unit_metres=1.0, vertical_datum="EPSG:5703",
        length_unit="m", cell_size=50.0, random_seed=1, template=Template((unit_about(40.0, 0.3),)),
    )  # fmt: skip


@pytest.mark.parametrize(("azimuth", "told"), [(90.0, True), (270.0, True), (0.0, False), (None, False)])
@pytest.mark.parametrize("side", [1.0, -1.0])
def test_a_land_valley_is_told_across_it_and_not_along(azimuth, told, side):
    """A valley (or a ridge) of the land that runs north, its sides at 30 %: AB of 400 m east-west crosses it."""
    east, _ = np.meshgrid(GRID.easting, GRID.northing)
    ground = Ground(GRID, 300.0 + side * 0.3 * np.abs(east - 601_500.0))
    found = check_spreads(Survey((spread(azimuth),), ground=ground), small_region())
    assert [one.check for one in found] == (["across_valley"] if told else [])
    assert all(("valley" if side > 0 else "ridge") in one.expected for one in found)


def test_a_plain_slope_is_no_valley():
    east, _ = np.meshgrid(GRID.easting, GRID.northing)
    ground = Ground(GRID, 300.0 + 0.3 * (east - 601_500.0))
    assert check_spreads(Survey((spread(90.0),), ground=ground), small_region()) == []


def test_repeats_become_errors_with_a_floor_and_typed_errors_stay():
    a = np.array([1.5, 3.0, 6.0, 6.0, 6.0, 12.0, 25.0, 25.0, 50.0])
    typed = np.array([np.nan, np.nan, np.nan, np.nan, np.nan, 0.07, np.nan, 0.01, np.nan])
    rho = np.array([50.0, 50.0, 48.0, 52.0, 56.0, 50.0, 50.0, 50.0, 50.0])
    sounding = make_sounding("Heron 4", a, np.full(9, 0.5), rho, relative_error=typed)
    error = assign_errors(Survey((sounding,))).soundings[0].curve.relative_error
    scatter = np.var(np.log([48.0, 52.0, 56.0])) * 3.0
    expected = math.sqrt((4.0 * 0.03**2 + scatter) / 6.0)  # four repeats' worth of 3 % beforehand
    np.testing.assert_allclose(error[2:5], expected)
    assert error[5] == 0.07
    assert error[7] == 0.01
    assert error[6] == pytest.approx(max(math.sqrt(4.0 * 0.03**2 / 5.0), 0.02))
    assert np.isnan(error[[0, 1, 8]]).all()


def test_a_survey_without_repeats_stays_as_it_was():
    survey = Survey((make_sounding("Heron 4", AB2, np.full(8, 0.5), np.full(8, 50.0)),))
    assert assign_errors(survey) == survey


# K of AB/2 100 m and MN/2 20 m is 753.9822 m, of 50 and 20 164.9336, of 100 and 10 1555.0884 (π (a² - b²) / 2b).
@pytest.mark.parametrize(
    ("typed", "words"),
    [
        (753.9822, None),
        (164.9336, "half of ab2"),
        (1555.0884, "half of mn2"),
        (753.9822 * 1000.0, "1000 too much"),
        (753.9822 * 0.3048, "stand in feet"),
        (753.9822 / 0.3048, "taken with feet"),
        (785.3982, None),  # the short form π a² / 2b: within 5 % here, and so let through
        (753.9822 * 1.37, "no usual slip"),
    ],
)
def test_slips_of_k_are_named(typed, words):
    """One ohm at AB/2 100 and MN/2 20 m: apparent resistivity is K."""
    curve = Curve(
        [100.0], [20.0], [typed], [np.nan], [0], [True], ("",), [14], (), (Measured(typed, math.nan, 80.0, 80.0),)
    )  # fmt: skip
    sounding = Sounding("Heron 4", 0.0, 0.0, 300.0, curve)
    told = [one for one in examine_curves((sounding,)).findings if one.check == "arithmetic"]
    if words is None:
        assert told == []
    else:
        assert [(one.row, words in one.expected) for one in told] == [(14, True)], told


def test_significant_digits_of_what_was_typed():
    assert [significant_digits(one) for one in (120.0, 123.4, 0.05, 1e-3, 100.0, 31.47)] == [2, 4, 1, 1, 1, 4]


@pytest.mark.parametrize(
    ("place", "words"),
    [
        ((4_903_000.0, 604_000.0), "swapped"),
        ((60_400.0, 4_903_000.0), "lacks a digit"),
        ((6_040_000.0, 4_903_000.0), "a digit too many"),
        ((604_000.0 / 0.3048, 4_903_000.0 / 0.3048), "in feet where metres"),
        ((640_000.0, 4_903_000.0), "may have changed places"),
        ((700_000.0, 5_500_000.0), ""),
    ],
)
def test_the_slip_that_brings_a_place_home(place, words):
    others = np.array([[600_000.0, 4_900_000.0], [610_000.0, 4_910_000.0], [605_000.0, 4_904_000.0]])
    found = guess_slip(np.array(place), others)
    assert words in found
    assert bool(found) is bool(words)
