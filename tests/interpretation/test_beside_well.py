"""A log beside a sounding: the columns' weights by scipy's own densities, what is shown, and what is kriged."""

import attrs
import numpy as np
import pytest
from scipy.stats import multivariate_normal, norm

from geoves.domain.survey import Pick
from geoves.interpretation import InterpretationOptions
from geoves.interpretation.beside_well import LogBeside, LogContact, weigh_columns
from geoves.interpretation.sequences import ColumnDraws
from tests.interpretation.columns import FULL, read_places, sounding_over, tops_by, well_of

EAST, NORTH = 500_000.0, 4_600_000.0
QUICK = InterpretationOptions(calibrate=False, pair_distance=0.0)
ALONE = attrs.evolve(QUICK, conditioning_distance=0.0)
# Till 3, clay 37, gravel 10 m, rock: what a curve sees of it is the contact at 40 m, and hardly the gravel.
LOG = [(0, 3, "topsoil"), (3, 40, "blue clay"), (40, 50, "gravel"), (50, 54, "limestone")]


def over_log(name="S", seed=1, **how):
    return sounding_over(name, [3, 37, 10], [40, 17, 46, 70], seed=seed, **how)


def beside(distance, log=LOG, **more):
    return attrs.evolve(well_of("W", *log), easting=EAST + distance, northing=NORTH, **more)


def column_beside(well, sounding=None, options=QUICK, picks=()):
    return read_places([sounding or over_log()], FULL, wells=[well], options=options, picks=picks).columns[0]


NAN = np.nan
# Till, upper gravel, clay, deep gravel, rock. The first two reach all; the last two end in clay.
DRAWS = ColumnDraws(
    np.array([[3, 0, 36, 8, NAN], [2, 0, 50, 0, NAN], [3, 0, NAN, 0, 0], [5, 10, NAN, 0, 0]]),
    np.zeros((4, 5)),
    np.array([True, True, False, False]),
    0.0,
)


def test_columns_within_weigh_as_a_multivariate_normal():
    """Contacts at 40 and 50 m, errors 0.5 m, 500 m away: lateral deviation 0.25 sqrt(0.5), correlation 0.8 x 40/50."""
    log = LogBeside("W", 500.0, (LogContact("basal", "at", 40.0, 0.5), LogContact("bedrock", "at", 50.0, 0.5)))
    found = weigh_columns(DRAWS, 25.0, log, FULL, QUICK)
    lateral = 0.25**2 * 0.5
    between = lateral * 0.8 * 40 / 50
    covariance = [[lateral + (0.5 / 40) ** 2, between], [between, lateral + (0.5 / 50) ** 2]]
    expected = multivariate_normal(np.log([40, 50]), covariance).logpdf(np.log([[39, 47], [52, 52]]))
    np.testing.assert_allclose(found[:2], expected)


def test_columns_that_end_above_have_the_contact_anywhere_below_the_bound():
    """Even in the log from 25 m, or from the model's foot where that is deeper, to e^1.5 times it: by integration."""
    log = LogBeside("W", 500.0, (LogContact("basal", "at", 40.0, 0.5),))
    found = weigh_columns(DRAWS, 25.0, log, FULL, QUICK)
    deviation = np.hypot(0.25 * np.sqrt(0.5), 0.5 / 40)
    depths = np.log(25.0) + np.linspace(0.0, 1.5, 20_001)
    expected = np.mean(norm.pdf(np.log(40.0), depths, deviation))
    assert found[2:] == pytest.approx(np.log(expected), rel=1e-3)


def test_a_log_that_ends_above_is_a_bound():
    log = LogBeside("W", 500.0, (LogContact("basal", "below", 45.0, 0.0),))
    found = weigh_columns(DRAWS, 25.0, log, FULL, QUICK)
    deviation = 0.25 * np.sqrt(0.5)
    np.testing.assert_allclose(found[:2], norm.logsf(np.log(45.0), np.log([39.0, 52.0]), deviation))
    assert found[0] < found[2] < found[1]


def test_a_log_close_by_decides_what_the_curve_leaves_open():
    """50 m from a log with 10 m of gravel at 40 m, truth alike: both come out, narrower than by the curve alone."""
    well = beside(50.0)
    shown, alone = column_beside(well), column_beside(well, options=ALONE)
    assert shown.beside.agrees
    assert shown.gravel_probability > 0.9 > alone.gravel_probability
    assert shown.basal_depth[0] < 40.0 < shown.basal_depth[2]
    assert np.diff(shown.basal_depth[[0, 2]]) < 0.7 * np.diff(alone.basal_depth[[0, 2]])
    assert shown.bedrock_depth == pytest.approx(50.0, abs=3.0)


def test_what_is_kriged_is_the_curves_own():
    """To the bit: tops, thicknesses, resistivities, status, and what the curve says of a pick."""
    pick = Pick("S", "lime", "at", 47.0, 3.0, "R. Alder", "refraction")
    for picks in ((), (pick,)):
        found, alone = (read_places([over_log()], FULL, wells=[beside(50.0)], options=options, picks=picks)
                        for options in (QUICK, ALONE))  # fmt: skip
        assert found.tops == alone.tops
        assert found.thicknesses == alone.thicknesses
        assert found.shallow_resistivities == alone.shallow_resistivities
        (shown,), (own,) = found.columns, alone.columns
        assert shown.bedrock_status == own.bedrock_status
        assert shown.pick_opinions == own.pick_opinions
        assert not np.array_equal(shown.profile, own.profile)


def test_a_pick_outranks_the_log_beside():
    pick = Pick("S", "lime", "at", 62.0, 1.0, "R. Alder", "test hole")
    assert column_beside(beside(50.0), picks=[pick]).bedrock_depth == pytest.approx(62.0, abs=0.5)


def test_the_log_says_less_the_farther_it_is():
    widths = [float(np.diff(column_beside(beside(away)).basal_depth[[0, 2]])[0]) for away in (20.0, 200.0, 900.0)]
    alone = float(np.diff(column_beside(beside(20.0), options=ALONE).basal_depth[[0, 2]])[0])
    assert widths[0] < widths[1] < widths[2] < 1.1 * alone
    assert column_beside(beside(1100.0)).beside is None


def test_a_doubtful_place_counts_as_distance():
    assert column_beside(beside(300.0, location_accuracy=400.0)).beside.distance == pytest.approx(500.0)
    assert column_beside(beside(300.0, location_accuracy=1000.0)).beside is None


def test_a_log_that_the_curve_contradicts_changes_nothing_and_is_named():
    """Rock at 8 m in the log, 40 m under the sounding 30 m away."""
    shallow = beside(30.0, [(0, 3, "topsoil"), (3, 8, "blue clay"), (8, 12, "limestone")])
    shown, alone = column_beside(shallow), column_beside(shallow, options=ALONE)
    assert not shown.beside.agrees
    assert shown.beside.well == "W"
    assert attrs.evolve(shown, beside=None) == alone


def test_a_short_spread_shows_the_contact_of_the_log():
    """AB/2 to 60 m over rock at 90 m: the curve has a bound, and what is shown is clay as in the log."""
    short = sounding_over("S", [3, 87], [40, 17, 70], longest=60.0)
    log = [(0, 3, "topsoil"), (3, 90, "blue clay"), (90, 94, "limestone")]
    found = read_places([short], FULL, wells=[beside(40.0, log)], options=QUICK)
    (column,) = found.columns
    assert column.bedrock_status == "deeper_than"
    (top,) = tops_by(found, "S", "basal")
    assert top.depth == column.bedrock_depth < 90.0
    clay = column.profile[:, 2]
    depth = 0.5 * (column.profile_depth[1:] + column.profile_depth[:-1])
    assert np.all(clay[(depth > 5.0) & (depth < 70.0)] > 0.8)
