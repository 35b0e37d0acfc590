"""What one geology is said to say of a place, beside what the place says by itself."""

import attrs
import numpy as np
import pytest

from geoves.delivery.joint_words import (
    OwnSay,
    find_moved,
    gather_joint,
    hear_curve,
    hear_log,
    measure_gap,
    tell_found,
    tell_gravel,
    tell_moved,
    tell_own,
    tell_state,
    tell_three,
)
from geoves.domain.survey import Pick
from geoves.domain.tops import Top, WellBeside
from tests.delivery.joint_county import MOVED, POOR, SET_ASIDE, join, joint_column

FOOT = 0.3048
CURVE = OwnSay(np.array([51.0, 62.0, 74.0]), np.nan, "this curve")
COLUMN = joint_column("A", "sounding", (59.0, 66.0, 72.0), (60.0, 71.0, 83.0))


def top(status, depth, error, kind="well"):
    return Top("W", kind, 0.0, 0.0, "rock", "basal", status, depth, -depth, error, "")


def test_three_opinions_are_told_in_numbers():
    assert tell_three(CURVE, COLUMN, "Basal gravel or rock", "m") == (
        "Basal gravel or rock: this curve alone 62 m (51 to 74); the others expect 71 m (60 to 83); "
        "together 66 m (59 to 72)."
    )


def test_they_are_told_in_the_regions_unit():
    column = joint_column("A", "sounding", np.array([59, 66, 72]) * FOOT, np.array([60, 71, 83]) * FOOT)
    own = attrs.evolve(CURVE, depth=CURVE.depth * FOOT)
    assert "alone 62 ft (51 to 74); the others expect 71 ft (60 to 83)" in tell_three(own, column, "Rock", "ft")


def test_a_bound_and_silence_are_told_as_such():
    silent = np.full(3, np.nan)
    assert tell_own(OwnSay(silent, 48.0, "this curve"), "m") == "deeper than 48 m"
    assert tell_own(OwnSay(silent, np.nan, "this curve"), "m") == "does not say"


def test_a_curve_names_the_log_and_the_pick_that_condition_it(small_results):
    column = small_results.interpretation.columns[0]
    assert hear_curve(column).source == "this curve"
    beside = WellBeside("W-1", 300.0, 0.4, agrees=True)
    assert hear_curve(attrs.evolve(column, beside=beside)).source == "this curve with the log of W-1"
    pick = Pick(column.sounding, "shale", "at", 60.0, 3.0, "Q", "line")
    assert hear_curve(attrs.evolve(column, picks=(pick,), beside=beside)).source == "this curve and the pick"
    bound = attrs.evolve(column, bedrock_status="deeper_than", bedrock_depth=33.0)
    assert (hear_curve(bound).bound, hear_curve(bound).is_known) == (33.0, False)


def test_a_log_gives_a_contact_or_its_deepest_bound():
    """The central 90 % of a normal distribution is 1.645 deviations either way."""
    met = hear_log([top("at", 70.0, 2.0)])
    np.testing.assert_allclose(met.depth, [70 - 3.29, 70.0, 70 + 3.29])
    assert hear_log([top("below", 20.0, np.nan), top("below", 31.0, np.nan)]).bound == 31.0
    assert hear_log([top("at", 70.0, 2.0, "pick")]).source == "the pick"
    assert not hear_log([]).is_known


@pytest.mark.parametrize(
    ("depth", "bound", "gap"),
    [
        # By hand: ln(66 / 62) over the own deviation, ln(74 / 51) / 3.29.
        ((51.0, 62.0, 74.0), np.nan, np.log(66 / 62) / (np.log(74 / 51) / 3.29)),
        ((np.nan,) * 3, 60.0, 0.0),
        ((np.nan,) * 3, 80.0, np.log(66 / 80) / (np.log(72 / 59) / 3.29)),
        ((np.nan,) * 3, np.nan, 0.0),
    ],
)
def test_the_gap_counts_in_doubts(depth, bound, gap):
    assert measure_gap(OwnSay(np.array(depth), bound, ""), COLUMN) == pytest.approx(gap)


def test_states_and_moves_are_said_where_they_matter(small_results):
    joint = gather_joint(join(small_results))
    assert "0.07" in tell_state(joint[SET_ASIDE])
    assert tell_state(joint[SET_ASIDE]).startswith("Set aside")
    assert "2.3 times" in tell_state(joint[POOR])
    assert tell_state(joint[MOVED]) == ""
    assert "down by 1.4 times its doubt" in tell_moved(joint[MOVED])
    assert "up by 1.4" in tell_moved(attrs.evolve(joint[MOVED], moved_by_picks=-1.4))
    assert tell_moved(joint[POOR]) == ""


def test_the_chance_of_gravel_is_told_where_the_template_has_gravel():
    assert tell_gravel(0.45, COLUMN, "basal gravel", "m").endswith(
        "alone 0.45, by the others 0.66, together 0.58, which puts rock at 73 m (66 to 79)."
    )
    assert "alone" not in tell_gravel(np.nan, COLUMN, "basal gravel", "m")
    assert tell_gravel(0.45, COLUMN, "", "m") == ""


def test_a_moved_place_counts_at_the_decision_that_the_field_holds_nearest(small_results):
    """Larch 6 lies 650 m from Larch 7 and 1,010 m from Larch 3, 1,000 m of them along the field's long axis (east);
    across, where the field is half as long, Larch 7 is 550 m away: 2 * 550 beyond 350 is more than 1,000 and 2 * 150.
    """
    job = join(small_results)
    (pick,) = job.survey.picks
    second = attrs.evolve(pick, place="Larch 3")
    survey = attrs.evolve(job.survey, picks=(pick, second))
    both = find_moved(attrs.evolve(job, survey=survey))
    assert both == {pick.place: (), "Larch 3": (MOVED,)}
    assert find_moved(job) == {pick.place: (MOVED,)}
    assert tell_found(pick.place, find_moved(job)) == f"moved 1 other place by more than its doubt: {MOVED}"
    assert tell_found("Larch 3", find_moved(job)) == "moved no other place by more than its doubt"


def test_a_job_by_the_method_each_has_no_joint_words(small_results):
    assert gather_joint(small_results) == {}
    assert find_moved(small_results) == {}
