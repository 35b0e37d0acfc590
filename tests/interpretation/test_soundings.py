"""What a sounding says of its basal contact: seen, not distinct or deeper than, and the interpreter above it."""

from functools import lru_cache

import numpy as np
import pytest
from scipy.optimize import least_squares
from scipy.stats import binom

from geoves.domain.survey import Pick
from geoves.domain.units import Z_95, Template
from geoves.interpretation import InterpretationOptions
from geoves.kernels.layered_earth import apparent_resistivity
from tests.interpretation.columns import (
    CLAY,
    CLAYLIKE_ROCK,
    COVER,
    FULL,
    PLAIN,
    UPPER,
    read_places,
    sounding_over,
    tops_by,
)


def test_a_clear_contact_is_seen_within_its_band():
    """Till 3 m, clay 32 m, limestone of 70 ohm m: three contrasts, a spread nine times the depth."""
    soundings = [sounding_over(f"Seen {i}", [3, 32], [40, 17, 70], seed=i) for i in range(6)]
    found = read_places(soundings, PLAIN)
    for column in found.columns:
        assert column.bedrock_status == "seen"
        assert column.bedrock_depth == pytest.approx(35.0, abs=2.5 * column.bedrock_depth_error + 1.0)
        assert column.bedrock_depth_error < 6.0
        assert column.unit[0] == "till"
        assert column.unit[-1] == "lime"
        assert list(column.unit) == sorted(column.unit, key=PLAIN.codes.index)
        np.testing.assert_allclose(column.probability.sum(axis=1), 1.0)
        (top,) = tops_by(found, column.sounding, "bedrock")
        assert (top.status, top.unit, top.kind) == ("at", "lime", "sounding")
        assert top.elevation == pytest.approx(400.0 - top.depth)
        assert top.source == "curve: basal contact seen"


def test_a_short_spread_gives_a_bound_shallower_than_the_truth():
    """Rock at 90 m under a spread to AB/2 = 60 m: nothing of it shows, and shallow rock would have."""
    soundings = [sounding_over(f"Short {i}", [3, 87], [40, 17, 70], longest=60.0, seed=i) for i in range(6)]
    found = read_places(soundings, PLAIN)
    for column in found.columns:
        assert column.bedrock_status == "deeper_than"
        assert 5.0 < column.bedrock_depth < 90.0
        assert np.isnan(column.bedrock_depth_error)
        for contact in ("basal", "bedrock"):
            (top,) = tops_by(found, column.sounding, contact)
            assert top.status == "below"
            assert top.depth == column.bedrock_depth
            assert np.isnan(top.standard_error)


def test_rock_like_clay_is_not_distinct_and_gets_no_false_depth():
    """Clay of 17 on shale of 17: no curve can tell, so neither a bound nor a depth known well."""
    template = Template((COVER, CLAY, CLAYLIKE_ROCK))
    soundings = [sounding_over(f"Alike {i}", [3, 40], [40, 17, 17], seed=i) for i in range(6)]
    found = read_places(soundings, template)
    for column in found.columns:
        assert column.bedrock_status == "not_distinct"
        tops = tops_by(found, column.sounding, "bedrock")
        assert all(top.status == "at" for top in tops)
        assert all(top.standard_error > 0.25 * top.depth for top in tops)


def pick_of(status, depth, unit="lime", *, place="Picked", error=2.0):
    return Pick(place, unit, status, depth, error, "R. Alder", "tied to the quarry face")


def picked(*picks):
    return read_places([sounding_over("Picked", [3, 32], [40, 17, 70])], FULL, picks=picks)


def test_a_pick_at_a_depth_outranks_the_curve():
    found = picked(pick_of("at", 55.0))
    (column,) = found.columns
    assert column.bedrock_status == "seen"
    assert column.bedrock_depth == pytest.approx(55.0, abs=0.7)
    (top,) = tops_by(found, "Picked", "bedrock")
    assert (top.status, top.kind) == ("at", "pick")
    assert top.depth == pytest.approx(55.0, abs=0.7)
    assert top.standard_error == pytest.approx(2.0, rel=0.25)
    assert top.source == "pick by R. Alder: tied to the quarry face"
    assert column.picks == (pick_of("at", 55.0),)


def test_a_pick_below_makes_a_bound_of_a_contact_that_was_seen():
    """Rock is bounded by the pick; the basal contact may lie higher by as much as gravel may be thick, 30 m."""
    found = picked(pick_of("below", 70.0))
    assert found.columns[0].bedrock_status == "deeper_than"
    for contact, bound, kind in (("basal", 40.0, "sounding"), ("bedrock", 70.0, "pick")):
        (top,) = tops_by(found, "Picked", contact)
        assert (top.status, top.depth, top.kind) == ("below", bound, kind)
        assert "R. Alder" in top.source


def test_a_pick_of_absent_gravel_leaves_none():
    found = picked(pick_of("absent", None, "deep", error=None))
    (absent,) = [top for top in found.tops if top.status == "absent"]
    assert (absent.unit, absent.kind) == ("deep", "pick")
    assert "R. Alder" in absent.source
    (deep,) = [row for row in found.thicknesses if row.role == "deep_aquifer"]
    assert deep.thickness == 0.0
    assert "R. Alder" in deep.source
    (basal,), (rock,) = (tops_by(found, "Picked", contact) for contact in ("basal", "bedrock"))
    assert basal.depth == pytest.approx(rock.depth, rel=0.01)
    assert basal.unit == "lime"


def opinion_on(pick, template=PLAIN):
    (column,) = read_places([sounding_over("Picked", [3, 32], [40, 17, 70])], template, picks=[pick]).columns
    return column.pick_opinions[0]


def least_misfit():
    """Root mean square log misfit in percent of the best till, clay and rock, by scipy's search from four starts."""
    curve = sounding_over("Picked", [3, 32], [40, 17, 70]).curve

    def residual(logs):
        layers = np.exp(logs[None, :2]), np.exp(logs[None, 2:])
        fitted = apparent_resistivity(curve.half_spacing, curve.potential_half_spacing, *layers)[0]
        return np.log(curve.apparent_resistivity / fitted)

    starts = [np.log([till, 30.0, 40.0, clay, 70.0]) for till in (2.0, 4.0) for clay in (12.0, 20.0)]
    return 100.0 * min(np.sqrt(np.mean(least_squares(residual, start).fun ** 2)) for start in starts)


def test_the_opinion_says_how_much_worse_the_curve_fits():
    """Rock at 35 m, no gravel in the template: a pick there costs nothing; the farther away, the more is paid, and at
    twice the depth it is flagged. Free, the misfit is that of the best layers of all.
    """
    near, away, far = (opinion_on(pick_of("at", depth, error=0.5)) for depth in (35.0, 50.0, 70.0))
    assert near.rms_percent == pytest.approx(near.free_rms_percent, rel=0.05)
    assert not near.against
    assert near.rms_percent < away.rms_percent < far.rms_percent
    assert far.rms_percent > 1.5 * far.free_rms_percent
    assert far.against
    assert far.free_rms_percent == pytest.approx(least_misfit(), rel=0.25)


def test_gravel_lets_rock_lie_deeper_at_no_cost():
    """20 m of gravel at 35 m on rock at 55 m makes the curve of rock at 35 m: the pick is paid for by no misfit."""
    opinion = opinion_on(pick_of("at", 55.0, error=0.5), FULL)
    assert opinion.rms_percent == pytest.approx(opinion.free_rms_percent, rel=0.1)


def test_picks_below_and_absent_cost_nothing_where_the_curve_allows_them():
    for pick in (pick_of("below", 20.0), pick_of("absent", None, "deep", error=None)):
        opinion = opinion_on(pick, FULL)
        assert opinion.rms_percent == pytest.approx(opinion.free_rms_percent, rel=0.05)
        assert not opinion.against
    excluded = opinion_on(pick_of("below", 70.0))
    assert excluded.rms_percent > 1.5 * excluded.free_rms_percent
    assert excluded.against


def test_a_pick_conditions_the_models_above_it():
    """Clay of 17 on rock at 35 m, picked at 30 m within what the curve allows: the columns' clay ends there too, and
    the profile with it; a pick of the clay's own top conditions the till.
    """
    free, held = picked().columns[0], picked(pick_of("at", 32.0, error=0.7)).columns[0]
    assert held.basal_depth[1] < free.basal_depth[1]
    assert abs(held.basal_depth[1] - 32.0) < 2.0
    tops = [picked(*picks).columns[0] for picks in ((), (pick_of("at", 2.6, "clay", error=0.1),))]
    depth = 0.5 * (tops[0].profile_depth[1:] + tops[0].profile_depth[:-1])
    clay = [np.interp(3.0, depth, column.profile[:, 2]) for column in tops]
    assert clay[1] > clay[0]


def test_a_pick_of_another_place_changes_nothing():
    own, other = picked(), picked(pick_of("at", 55.0, place="Elsewhere"))
    assert own == other


def test_a_second_run_gives_the_same_to_the_bit():
    assert picked() == picked()


def random_columns(count, seed):
    """Columns of the template's kind: thicknesses even in the log, resistivities from the template's own ranges."""
    generator = np.random.default_rng(seed)

    def between(low, high):
        return float(np.exp(generator.uniform(np.log(low), np.log(high))))

    def of(unit):
        return float(np.exp(unit.log_resistivity_mean + unit.log_resistivity_deviation * generator.standard_normal()))

    for _ in range(count):
        thickness, units = [between(1.5, 6.0)], [COVER]
        if generator.random() < 0.5:
            thickness.append(between(3.0, 15.0))
            units.append(UPPER)
        thickness.append(between(8.0, 70.0))
        units.append(CLAY)
        basal = sum(thickness)
        below = [FULL.units[4]]
        if generator.random() < 0.5:
            thickness.append(between(3.0, 20.0))
            below = [FULL.units[3], *below]
        yield basal, thickness, [of(unit) for unit in (*units, *below)]


@lru_cache
def sixty():
    truth, soundings = [], []
    for i, (basal, thickness, resistivity) in enumerate(random_columns(60, 5)):
        truth.append(basal)
        soundings.append(sounding_over(f"R{i}", thickness, resistivity, seed=100 + i))
    return np.array(truth), read_places(soundings, FULL, options=InterpretationOptions(draws=200))


def test_contacts_called_seen_lie_within_their_bands():
    """Nominal 90 %; sixty columns not of the prior's own shape, so 80 to 98 % is asked."""
    truth, found = sixty()
    inside = []
    for depth, column in zip(truth, found.columns, strict=True):
        if column.bedrock_status != "seen":
            continue
        (top,) = tops_by(found, column.sounding, "basal")
        inside.append(abs(depth - top.depth) <= Z_95 * top.standard_error)
    assert len(inside) >= 35
    assert 0.80 <= np.mean(inside) <= 0.98


def test_bounds_hold_and_nothing_is_dropped():
    truth, found = sixty()
    assert len(found.columns) == truth.size
    bounded = [
        (depth, column.bedrock_depth)
        for depth, column in zip(truth, found.columns, strict=True)
        if column.bedrock_status == "deeper_than"
    ]
    wrong = sum(bound > depth for depth, bound in bounded)
    # A bound is meant to be wrong once in twenty at most.
    assert wrong <= binom.ppf(0.999, max(len(bounded), 1), 0.05)
