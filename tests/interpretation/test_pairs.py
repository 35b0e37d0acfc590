"""Soundings beside wells: what the log and the curve say together, when it moves the template, and what misses."""

from functools import lru_cache

import attrs
import numpy as np
import pytest

from geoves.domain.survey import Survey
from geoves.interpretation import InterpretationOptions
from geoves.interpretation.pairs import estimate_pairs, find_population, learn_from_pairs, leave_wells_out
from geoves.interpretation.surroundings import Surroundings
from geoves.interpretation.wells import read_log
from geoves.inversion import InversionOptions, invert
from tests.interpretation.columns import CLAY, FULL, NOISE, read_places, sounding_over, tops_by, well_of

EAST, NORTH = 500_000.0, 4_600_000.0
QUICK = InterpretationOptions(draws=100, calibrate=False)


def pair_at(i, clay, *, apart=60.0):
    """A sounding and a well beside it over the same invented column; clay of so many ohm m."""
    random = np.random.default_rng(i)
    thickness = [random.uniform(*limits) for limits in ((2, 5), (5, 10), (20, 40))]
    resistivity = [40, 110, clay * np.exp(random.normal(0, 0.06)), 70]
    sounding = attrs.evolve(sounding_over(f"S{i}", thickness, resistivity, seed=i), easting=EAST + 3000.0 * i)
    a, b, c = (float(edge) for edge in np.cumsum(thickness).round(1))
    log = well_of(
        f"W{i}", (0, a, "topsoil"), (a, b, "sand and gravel"), (b, c, "blue clay"), (c, c + 3, "limestone")
    )  # fmt: skip
    return sounding, attrs.evolve(log, easting=sounding.easting + apart, northing=NORTH)


@lru_cache
def county(clay, count=6):
    return tuple(zip(*(pair_at(i, clay) for i in range(count)), strict=True))


@lru_cache
def estimates(clay, options=QUICK, crs_metres=1.0):
    soundings, wells = county(clay)
    inverted = invert(Survey(soundings), InversionOptions(draws=50, smooth_layers=6, most_layers=4))
    places = [(s, attrs.evolve(one, noise=NOISE)) for s, one in zip(soundings, inverted, strict=True)]
    around = {one.name: Surroundings() for one in soundings}
    logs = [(well, read_log(well, FULL, options)) for well in wells]
    return estimate_pairs(places, logs, around, FULL, options, crs_metres)


def test_each_pair_gives_the_resistivities_that_were_put_in():
    """Of 18 the truth lies within three errors; the clay is known to a fifth or better; gravel that is absent not."""
    found = estimates(24.5)
    assert [(one.pair.well, one.pair.sounding, one.pair.miss) for one in found] == [
        (f"W{i}", f"S{i}", "") for i in range(6)
    ]
    till, upper, clay, deep, lime = (np.array([one.value[i] for one in found]) for i in range(5))
    error = np.array([one.error for one in found])
    for values, truth, errors in ((till, 40, error[:, 0]), (upper, 110, error[:, 1]), (lime, 70, error[:, 4])):
        assert np.all(np.abs(values - np.log(truth)) < 3.0 * errors + 0.02)
    # The clay itself scatters by 6 %.
    assert np.all(np.abs(clay - np.log(24.5)) < 3.0 * np.hypot(error[:, 2], 0.06))
    assert np.all(error[:, 2] < 0.2)
    assert np.isnan(deep).all()
    assert all(0.1 < one.pair.misfit < 2.0 for one in found)


def test_the_template_learns_what_the_pairs_know():
    """Clay of 24.5 ohm m where 13 to 24 was typed: the range moves toward it, and only units that pairs know move."""
    learned, told = learn_from_pairs(FULL, estimates(24.5), QUICK)
    by_unit = {one.unit: one for one in told.units}
    assert by_unit["clay"].used
    assert by_unit["clay"].gain > 1.0
    assert by_unit["clay"].pairs == 6
    clay = learned.unit("clay")
    assert clay.resistivity_p05 < 24.5 < clay.resistivity_p95
    assert CLAY.log_resistivity_mean + 0.1 < clay.log_resistivity_mean < np.log(24.5)
    assert (by_unit["deep"].pairs, by_unit["deep"].used) == (0, False)
    assert learned.unit("deep") == FULL.unit("deep")


def test_a_template_that_learned_meets_the_contact_better():
    """Ten soundings over the same clay, far from any well: root mean square of log depth."""
    soundings, wells = county(24.5)
    far = [attrs.evolve(sounding_over(f"F{i}", [3, 7, 30], [40, 110, 24.5, 70], seed=50 + i), northing=NORTH + 9e4)
           for i in range(10)]  # fmt: skip
    error = {}
    for name, reach in (("typed", 0.0), ("learned", 250.0)):
        options = attrs.evolve(QUICK, pair_distance=reach)
        found = read_places([*soundings, *far], FULL, wells=wells, options=options)
        depth = [tops_by(found, one.name, "basal")[0].depth for one in far]
        error[name] = np.sqrt(np.mean(np.log(np.array(depth) / 40.0) ** 2))
    assert error["learned"] < 0.8 * error["typed"]


def test_too_few_pairs_move_nothing_and_that_is_said():
    soundings, wells = county(24.5)
    found = read_places(soundings[:3], FULL, wells=wells[:3], options=QUICK)
    assert not any(unit.used for unit in found.pair_calibration.units)
    assert "4, of 3 wells, are needed, so that no range was moved" in found.remarks[-1]
    nowhere = read_places(soundings[:1], FULL, wells=wells[3:], options=QUICK)
    assert nowhere.pair_calibration.pairs == ()
    assert "0 pairs" in nowhere.remarks[-1]
    assert read_places(soundings[:1], FULL, options=QUICK).pair_calibration is None


def miss_of(well, sounding=None):
    sounding = sounding or county(24.5)[0][0]
    (pair,) = read_places([sounding], FULL, wells=[well], options=QUICK).pair_calibration.pairs
    return pair.miss


def test_misses_are_named_with_their_reason():
    log = county(24.5)[1][0]
    first, *rest = log.intervals
    assert miss_of(log) == ""
    assert miss_of(attrs.evolve(log, location_accuracy=650.0)) == "the well's place is known to 650 m only"
    assert miss_of(attrs.evolve(log, intervals=(first, *rest[1:]))) == "the log has gaps"
    strange = attrs.evolve(first, description="muck & stumps")
    assert miss_of(attrs.evolve(log, intervals=(strange, *rest))) == "the log has words that no unit claims"
    wrong = sounding_over("S0", [3, 5, 90], [40, 110, 9, 300])
    assert miss_of(log, attrs.evolve(wrong, easting=EAST)) == "the curve does not fit the log's layers"


def test_distance_is_in_metres_whatever_the_crs():
    """60 units apart: 60 m, or 18 m in a CRS of feet, or 60 km in one of kilometres: no pair."""
    assert estimates(24.5, QUICK, 0.3048)[0].pair.distance == pytest.approx(60 * 0.3048)
    assert estimates(24.5, QUICK, 1000.0) == []


def test_soundings_that_taught_as_pairs_do_not_teach_again():
    soundings, wells = county(24.5)
    options = InterpretationOptions(draws=100, fewest_to_calibrate=1)
    with_pairs = read_places(soundings, FULL, wells=wells, options=options)
    without = read_places(soundings, FULL, wells=wells, options=attrs.evolve(options, pair_distance=0.0))
    assert max(one.soundings for one in without.calibration) > 5.0
    assert with_pairs.calibration == ()


def test_a_well_that_ends_in_clay_teaches_of_what_it_passed():
    sounding, log = (one[0] for one in county(24.5))
    short = attrs.evolve(log, intervals=(*log.intervals[:2], attrs.evolve(log.intervals[2], bottom=20.0)))
    inverted = invert(Survey((sounding,)), InversionOptions(draws=50, smooth_layers=6, most_layers=4))
    places = [(sounding, attrs.evolve(inverted[0], noise=NOISE))]
    (found,) = estimate_pairs(places, [(short, read_log(short, FULL, QUICK))], {sounding.name: Surroundings()}, FULL,
                              QUICK, 1.0)  # fmt: skip
    assert found.pair.miss == ""
    assert np.isfinite(found.value[:2]).all()
    assert np.isnan(found.value[4])


def test_population_of_exact_values_is_the_weighted_mean_with_the_prior():
    """No errors: the mean of the values and of four more at the prior's (conjugate normal, any textbook)."""
    value = np.array([0.3, 0.5, 0.4, 0.6, 0.2, 0.4])
    mean, deviation = find_population(value, np.full(6, 1e-9), (0.0, 0.3))
    assert mean == pytest.approx(value.sum() / 10.0, abs=1e-6)
    assert deviation == pytest.approx(np.sqrt((np.sum((value - mean) ** 2) + 20 * 0.09) / 26.0), abs=1e-6)


def test_values_with_large_errors_teach_little():
    value = np.full(6, 0.4)
    sure, unsure = (find_population(value, np.full(6, error), (0.0, 0.3))[0] for error in (0.05, 1.5))
    assert unsure < 0.4 * sure


def test_leaving_out_tells_a_shift_from_a_stray_well():
    """Six wells that agree on a shift gain; five at the template and one far off lose by whatever they teach."""
    prior, error, wells = (0.0, 0.2), np.full(6, 0.05), np.array(list("abcdef"))
    assert leave_wells_out(np.full(6, 0.4), error, wells, prior) > 1.0
    assert leave_wells_out(np.array([0, 0, 0, 0, 0, 0.75]), error, wells, prior) < 0.0
