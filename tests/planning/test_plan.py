"""Where a plan sends people, and what it says of it."""

import attrs
import numpy as np
import pytest
import shapely

from geoves.errors import EngineError
from geoves.planning import PlanOptions, plan_places
from geoves.planning.places import list_allowed, list_cells, spread_evenly
from geoves.planning.track_record import TrackRecord, advise_spreads, read_track_record, worth_for_gravel

GRAVEL = "deep_gravel_probability"


def test_places_are_ranked_mapped_and_lower_the_doubt(plannable):
    plan = plan_places(plannable, PlanOptions(places=5), GRAVEL)
    assert [place.rank for place in plan.places] == [1, 2, 3, 4, 5]
    lowering = [place.lowering for place in plan.places]
    assert sum(lowering) == pytest.approx(plan.before - plan.after)
    assert min(lowering) > 0
    for place in plan.places:
        assert 0 <= place.doubt_then < place.doubt_now
        assert place.by_test_hole >= place.by_sounding  # a log knows a contact better than any curve
    assert len({(place.easting, place.northing) for place in plan.places}) == 5


def test_the_doubt_now_is_that_of_the_map(plannable):
    plan = plan_places(plannable, PlanOptions(places=1), GRAVEL)
    surface = plannable.stack.surfaces["bedrock_elevation"]
    grid = surface.grid
    (place,) = plan.places
    row, column = int((grid.north - place.northing) / 50.0), int((place.easting - grid.west) / 50.0)
    assert place.doubt_now == pytest.approx(surface.standard_error[row, column])


def test_cheap_test_holes_are_taken_and_dear_ones_are_not(plannable):
    cheap = plan_places(plannable, PlanOptions(places=3, test_hole_costs=1.0), GRAVEL)
    dear = plan_places(plannable, PlanOptions(places=3, test_hole_costs=1000.0), GRAVEL)
    assert {place.kind for place in cheap.places} == {"test_hole"}
    assert {place.kind for place in dear.places} == {"sounding"}
    assert cheap.after < dear.after
    only = plan_places(plannable, PlanOptions(places=2, kind="test_hole", test_hole_costs=1000.0), GRAVEL)
    assert {place.kind for place in only.places} == {"test_hole"}


def test_a_plan_for_permits_goes_near_them(plannable):
    permit = plannable.survey.permits[0]
    survey = attrs.evolve(plannable.survey, permits=(permit,))
    plan = plan_places(attrs.evolve(plannable, survey=survey), PlanOptions(at="permits", places=1), GRAVEL)
    assert plan.n_asked == 1
    (place,) = plan.places
    assert np.hypot(place.easting - permit.easting, place.northing - permit.northing) < 150.0


def test_a_plan_for_gravel_speaks_in_probabilities(plannable):
    plan = plan_places(plannable, PlanOptions(about="gravel", places=4), GRAVEL)
    assert 0 < plan.after < plan.before <= 0.5
    assert all(place.doubt_now <= 0.5 for place in plan.places)
    shown = plannable.stack.surfaces[GRAVEL].estimate
    assert plan.before == pytest.approx(np.sqrt(np.nanmean(shown * (1.0 - shown))), rel=0.15)


def test_only_allowed_places_are_chosen(plannable):
    west, south, east, _ = plannable.stack.grid.bounds
    road = shapely.LineString([(west + 100.0, south + 700.0), (east - 100.0, south + 900.0)])
    field = shapely.box(west + 900.0, south + 1500.0, west + 1300.0, south + 1900.0)
    plan = plan_places(plannable, PlanOptions(places=6), GRAVEL, [road, field])
    for place in plan.places:
        point = shapely.Point(place.easting, place.northing)
        assert min(road.distance(point), field.distance(point)) < 1e-6


def test_no_allowed_place_is_said(plannable):
    with pytest.raises(EngineError, match="place where measuring is allowed"):
        plan_places(plannable, PlanOptions(), GRAVEL, [shapely.LineString([(0.0, 0.0), (9.0, 9.0)])])


def test_fewer_places_than_asked_are_said(plannable):
    cells = list_cells(plannable.stack)
    two = [shapely.Point(cells[i]).buffer(30.0) for i in (10, 500)]
    plan = plan_places(plannable, PlanOptions(places=9), GRAVEL, two)
    assert len(plan.places) == 2
    assert "2 of 9 places" in plan.remarks[0]


def test_a_survey_without_a_variogram_is_told_so(small_results):
    with pytest.raises(EngineError, match="too few places know the log depth"):
        plan_places(small_results, PlanOptions(), GRAVEL)


def test_points_are_spread_evenly_over_all_of_them(plannable):
    cells = list_allowed(plannable.stack, None)
    thinned = spread_evenly(cells, 60, 50.0)
    assert 30 <= len(thinned) <= 60
    farthest = max(np.min(np.hypot(*(thinned - cell).T)) for cell in cells)
    assert farthest < 3.0 * np.sqrt(len(cells) * 50.0**2 / 60.0)
    assert spread_evenly(cells, len(cells), 50.0) is cells


def test_the_shortest_spread_that_served_is_advised():
    """Made up: below 3 times the depth soundings knew nothing, from there on all knew to 10 %."""
    depth, ratio = (one.ravel() for one in np.meshgrid(np.geomspace(10.0, 100.0, 12), np.geomspace(0.8, 12.0, 15)))
    record = TrackRecord(
        np.log(depth), np.log(ratio), np.where(ratio > 3.0, 100.0, 0.0), np.geomspace(20.0, 1000.0, 30)
    )
    advice = advise_spreads(record, np.array([15.0, 40.0, 90.0]))
    share = advice.spacing / np.array([15.0, 40.0, 90.0])
    assert np.all((share > 3.0) & (share < 8.0))
    assert np.all((np.sqrt(advice.variance) > 0.09) & (np.sqrt(advice.variance) < 0.13))


def test_no_spread_is_long_enough_for_the_deepest_so_the_longest_is_advised():
    record = TrackRecord(np.log([20.0, 30.0]), np.log([5.0, 4.0]), np.array([80.0, 60.0]), np.array([100.0, 120.0]))
    assert advise_spreads(record, np.array([500.0])).spacing.tolist() == [120.0]


def test_the_track_record_is_that_of_the_soundings(plannable):
    record = read_track_record(plannable)
    seen = [top for top in plannable.interpretation.tops if top.contact == "basal" and top.status == "at"]
    by_curve = [top for top in seen if top.kind == "sounding"]
    assert sorted(record.precision[record.precision > 0]) == pytest.approx(
        sorted((top.depth / top.standard_error) ** 2 for top in by_curve)
    )
    assert record.spreads.tolist() == [320.0]


def test_worth_for_gravel_is_a_share(plannable):
    assert 0.0 < worth_for_gravel(plannable) <= 1.0
    unmoved = tuple(
        attrs.evolve(column, gravel_prior=column.gravel_probability) for column in plannable.interpretation.columns
    )
    still = attrs.evolve(plannable, interpretation=attrs.evolve(plannable.interpretation, columns=unmoved))
    assert worth_for_gravel(still) == 0.0
