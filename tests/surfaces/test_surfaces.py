"""Surfaces of a county that is known cell by cell."""

from concurrent.futures import ThreadPoolExecutor

import attrs
import numpy as np
import pytest
import shapely
from scipy.special import ndtri

from geoves.domain.units import Z_95, Role
from geoves.errors import EngineError
from geoves.kernels.covariances import Covariance
from geoves.surfaces import SurfaceOptions
from tests.reference.dense_kriging import krige_densely
from tests.surfaces.invented_county import (
    GRID,
    WIDE,
    cell_at,
    cell_centres,
    contact_depth,
    gravel_thickness,
    ground_elevation,
    make_county,
    say_thickness,
    shallow_resistivity,
)

MAIN = ("bedrock_elevation", "bedrock_depth", "deep_gravel_thickness", "deep_gravel_probability",
        "shallow_aquifer_probability")  # fmt: skip


@pytest.fixture(scope="module")
def county():
    return make_county()


@pytest.fixture(scope="module")
def stack(county):
    return county.build(SurfaceOptions(reach=600.0))


@pytest.fixture(scope="module")
def bare_stack(county):
    """The same without a deep aquifer: its bedrock is the basal contact alone."""
    return county.without_role(Role.DEEP_AQUIFER).build(SurfaceOptions(reach=600.0))


def estimate(stack, name):
    return stack.surfaces[name].estimate


def at_covered(stack, surface, part):
    return getattr(stack.surfaces[surface], part)[stack.covered]


# What the field is


def test_surfaces_come_close_to_the_known_field(stack):
    """Errors well below the field's own spread, and the band holds nine cells in ten or nearly so."""
    east, north = cell_centres()
    thickness = gravel_thickness(east, north)
    depth = contact_depth(east, north) + thickness
    kept = stack.covered
    bedrock = stack.surfaces["bedrock_depth"]
    assert np.std((bedrock.estimate - depth)[kept]) < 0.2 * np.std(depth[kept])
    assert np.mean(((bedrock.p05 <= depth) & (depth <= bedrock.p95))[kept]) > 0.8
    gravel = estimate(stack, "deep_gravel_thickness")
    assert np.std((gravel - thickness)[kept]) < 0.35 * np.std(thickness[kept])
    assert np.mean(estimate(stack, "deep_gravel_probability")[kept & (thickness > 6.0)]) > 0.9
    assert np.mean(estimate(stack, "deep_gravel_probability")[kept & (thickness <= 0.0)]) < 0.3
    resistivity = estimate(stack, "shallow_aquifer_resistivity")
    shown = np.isfinite(resistivity)
    assert shown.sum() > 200
    ratio = np.log(resistivity / shallow_resistivity(east, north))[shown]
    assert np.sqrt(np.mean(ratio**2)) < 0.1


def test_bedrock_is_the_basal_contact_plus_the_gravel_cell_by_cell(stack, bare_stack):
    contact = estimate(bare_stack, "bedrock_depth")
    thickness = estimate(stack, "deep_gravel_thickness")
    assert np.allclose(estimate(stack, "bedrock_depth"), contact + thickness, rtol=1e-12, equal_nan=True)
    assert np.nanmax(thickness) > 10.0
    bedrock = estimate(stack, "bedrock_elevation")
    assert np.allclose(stack.ground - estimate(stack, "bedrock_depth"), bedrock, equal_nan=True)


def test_top_of_gravel_is_bedrock_plus_thickness_where_gravel_is_possible(stack):
    top = estimate(stack, "deep_gravel_top_elevation")
    drawn = stack.covered & (estimate(stack, "deep_gravel_probability") >= 0.05)
    assert np.array_equal(np.isfinite(top), drawn)
    assert 0 < drawn.sum() < stack.covered.sum()
    sum_of_both = estimate(stack, "bedrock_elevation") + estimate(stack, "deep_gravel_thickness")
    assert np.allclose(top[drawn], sum_of_both[drawn])


def test_no_surface_stands_above_the_ground_and_no_thickness_is_negative(stack):
    ground = stack.ground[stack.covered]
    for part in ("estimate", "p05", "p95"):
        assert (at_covered(stack, "bedrock_elevation", part) < ground).all()
        assert (at_covered(stack, "bedrock_depth", part) > 0).all()
        assert (at_covered(stack, "deep_gravel_thickness", part) >= 0).all()
        assert (stack.surfaces["shallow_aquifer_resistivity"].p05[stack.covered] > 0)[
            np.isfinite(at_covered(stack, "shallow_aquifer_resistivity", "estimate"))
        ].all()
    top = at_covered(stack, "deep_gravel_top_elevation", "estimate")
    assert (top[np.isfinite(top)] < ground[np.isfinite(top)]).all()


def test_a_contact_at_the_very_surface_stays_under_it(county):
    """Rock at 0.2 m: an elevation kriged by itself would come out above ground beside it."""
    tops = [top for top in county.interpretation.tops if top.contact == "basal"]
    shallow = [attrs.evolve(top, depth=0.2, standard_error=0.05) for top in tops if top.place.endswith("1")]
    stack = county.with_tops(*shallow, *(top for top in tops if not top.place.endswith("1"))).build(WIDE)
    assert np.nanmin(estimate(stack, "bedrock_depth")) < 3.0
    assert (at_covered(stack, "bedrock_elevation", "p95") < stack.ground[stack.covered]).all()


def test_bands_are_in_order(stack):
    for name in ("bedrock_elevation", "bedrock_depth"):
        low, middle, high = (at_covered(stack, name, part) for part in ("p05", "estimate", "p95"))
        assert (low < middle).all()
        assert (middle < high).all()
    low, middle, high = (at_covered(stack, "deep_gravel_thickness", part) for part in ("p05", "estimate", "p95"))
    likely = at_covered(stack, "deep_gravel_probability", "estimate") >= 0.5
    assert (low <= middle).all()
    assert (middle[likely] <= high[likely]).all()
    resistivity = stack.surfaces["shallow_aquifer_resistivity"]
    shown = np.isfinite(resistivity.estimate)
    assert (resistivity.p05 < resistivity.estimate)[shown].all()
    assert (resistivity.estimate < resistivity.p95)[shown].all()
    assert resistivity.standard_error is None
    depth, level = stack.surfaces["bedrock_depth"], stack.surfaces["bedrock_elevation"]
    assert np.allclose(stack.ground - depth.p05, level.p95, equal_nan=True)
    assert np.allclose(depth.standard_error, level.standard_error, equal_nan=True)
    for name in ("deep_gravel_probability", "shallow_aquifer_probability"):
        values = at_covered(stack, name, "estimate")
        assert ((values >= 0) & (values <= 1)).all()


def test_moments_and_quantiles_are_those_of_a_million_draws(stack, bare_stack):
    """Monte Carlo: contact log-normal, gravel a normal cut at nought, both independent.

    Their parameters are taken back out of what is delivered: the contact's from the bare stack's band, the gravel's
    from its probability and its upper quantile, where that is above nought.
    """
    thickness, depth = stack.surfaces["deep_gravel_thickness"], stack.surfaces["bedrock_depth"]
    probability = estimate(stack, "deep_gravel_probability")
    contact = bare_stack.surfaces["bedrock_depth"]
    told = np.argwhere(stack.covered & (np.nan_to_num(thickness.p95) > 2.0) & (np.abs(probability - 0.5) < 0.4999))
    random = np.random.default_rng(11)
    unsure = 0
    for row, column in told[:: max(1, len(told) // 12)]:
        cell = row, column
        score = ndtri(probability[cell])
        deviation = (thickness.p95[cell] - 1.0) / (score + Z_95)
        centre = 1.0 + score * deviation
        unsure += probability[cell] < 0.8
        gravel = np.maximum(random.normal(centre, deviation, 1_000_000), 0.0)
        log_low, log_high = np.log([contact.p05[cell], contact.p95[cell]])
        log_depth = random.normal((log_low + log_high) / 2, (log_high - log_low) / (2 * Z_95), gravel.size)
        total = np.exp(log_depth) + gravel
        assert thickness.estimate[cell] == pytest.approx(gravel.mean(), abs=0.01 * deviation)
        assert thickness.standard_error[cell] == pytest.approx(gravel.std(), rel=0.01)
        assert thickness.p05[cell] == pytest.approx(np.quantile(gravel, 0.05), abs=0.02 * deviation)
        assert depth.estimate[cell] == pytest.approx(total.mean(), abs=0.01 * total.std())
        assert depth.standard_error[cell] == pytest.approx(total.std(), rel=0.01)
        # Quantiles of the sum come from 60 and 20 even shares of the summands.
        width = np.subtract(*np.quantile(total, [0.95, 0.05]))
        assert depth.p05[cell] == pytest.approx(np.quantile(total, 0.05), abs=0.02 * width)
        assert depth.p95[cell] == pytest.approx(np.quantile(total, 0.95), abs=0.02 * width)
    assert unsure >= 3


# Where surfaces are drawn


def test_blank_outside_the_boundary_and_the_reach_and_alike_for_all(stack, county):
    """By hand: the least of all distances to a place, and an L-shaped boundary of two comparisons."""
    east, north = cell_centres()
    places = [*county.survey.soundings, *county.survey.wells]
    distance = np.min([np.hypot(east - place.easting, north - place.northing) for place in places], axis=0)
    _, _, right, top = GRID.bounds
    outside = (east > right - 900.0) & (north > top - 730.0)
    expected = (distance <= 600.0) & ~outside
    assert np.array_equal(stack.covered, expected)
    assert (outside & (distance <= 600.0)).any()
    assert (~outside & (distance > 600.0)).any()
    for name in MAIN:
        for part in ("estimate", "standard_error", "p05", "p95"):
            values = getattr(stack.surfaces[name], part)
            assert values is None or np.array_equal(np.isfinite(values), expected), (name, part)
    assert stack.reach == 600.0


def test_reach_follows_the_spacing_of_places_where_none_is_given(county):
    stack = county.build()
    places = np.array([[p.easting, p.northing] for p in (*county.survey.soundings, *county.survey.wells)])
    gaps = np.hypot(*(places[:, None] - places[None]).transpose(2, 0, 1))
    np.fill_diagonal(gaps, np.inf)
    assert stack.reach == pytest.approx(3.0 * np.quantile(gaps.min(axis=1), 0.9))


def test_cells_without_ground_are_blank(county):
    holes = np.array(county.survey.ground.elevation)
    holes[10:13, 5:9] = np.nan
    survey = attrs.evolve(county.survey, ground=attrs.evolve(county.survey.ground, elevation=holes))
    stack = attrs.evolve(county, survey=survey).build(WIDE)
    assert not stack.covered[10:13, 5:9].any()
    assert np.isnan(estimate(stack, "bedrock_depth")[10:13, 5:9]).all()


def test_places_far_from_the_boundary_are_refused_in_words(county):
    survey = attrs.evolve(county.survey, boundary=shapely.transform(county.survey.boundary, lambda xy: xy + 90_000.0))
    with pytest.raises(EngineError, match="boundary"):
        attrs.evolve(county, survey=survey).build(WIDE)


# Bounds, absences, wells


def valley_split(county):
    """The basal tops apart: those in the west of the valley, deep, and all others."""
    tops = [top for top in county.interpretation.tops if top.contact == "basal"]
    deep = [top for top in tops if top.depth > 45.0 and top.kind == "sounding"]
    return deep, [top for top in tops if top not in deep]


def test_bounds_deepen_what_shallower_places_would_fill(county):
    """Soundings in the valley that say only "deeper than": dropped, the valley is filled; heard, it is not.

    The truth is known here, so the gain is counted against it.
    """
    deep, rest = valley_split(county)
    assert len(deep) >= 8
    bounds = [attrs.evolve(top, status="below", depth=0.8 * top.depth, standard_error=np.nan) for top in deep]
    without = county.without_role(Role.DEEP_AQUIFER).with_tops(*rest).build(WIDE)
    heard = county.without_role(Role.DEEP_AQUIFER).with_tops(*rest, *bounds).build(WIDE)
    cells = tuple(np.array([cell_at(top.easting, top.northing) for top in deep]).T)
    before, after = estimate(without, "bedrock_depth")[cells], estimate(heard, "bedrock_depth")[cells]
    truth, said = np.array([top.depth for top in deep]), np.array([top.depth for top in bounds])
    short = before < said
    assert short.sum() >= 4
    assert (after[short] > before[short] + 5.0).all()
    assert (after > 0.9 * said).all()
    assert np.mean(np.abs(after - truth)) < 0.6 * np.mean(np.abs(before - truth))
    # A bound is no datum: what is below it stays open.
    upper = heard.surfaces["bedrock_depth"].p95[cells]
    assert np.mean(upper > 1.1 * said) > 0.8


def test_a_bound_that_says_nothing_new_changes_next_to_nothing(county):
    deep, rest = valley_split(county)
    idle = [attrs.evolve(top, status="below", depth=5.0, standard_error=np.nan) for top in deep]
    bare = county.without_role(Role.DEEP_AQUIFER)
    with_bounds, without = (bare.with_tops(*tops).build(WIDE) for tops in ((*rest, *deep, *idle), (*rest, *deep)))
    change = np.abs(np.log(estimate(with_bounds, "bedrock_depth") / estimate(without, "bedrock_depth")))
    assert np.nanmax(change) < 0.02


def test_absence_in_a_well_lowers_the_probability_around_it_and_not_far_off(county):
    east, north = 402_950.0, 4_901_450.0  # amid the gravel
    rows = county.interpretation.thicknesses
    near = [row for row in rows if np.hypot(row.easting - east, row.northing - north) > 400.0]
    before = county.with_thicknesses(*near).build(WIDE)
    dry = say_thickness("dry", "well", (east, north), Role.DEEP_AQUIFER, 0.0)
    after = county.with_thicknesses(*near, dry).build(WIDE)
    cell, far = cell_at(east, north), cell_at(400_250.0, 4_900_250.0)
    probability = [estimate(stack, "deep_gravel_probability") for stack in (before, after)]
    assert probability[0][cell] > 0.9
    assert probability[1][cell] < 0.2
    assert abs(probability[1][far] - probability[0][far]) < 0.2
    thickness = [estimate(stack, "deep_gravel_thickness") for stack in (before, after)]
    assert thickness[1][cell] < 0.2 * thickness[0][cell]


def test_gravel_not_passed_is_at_least_so_thick(county):
    east, north = 402_950.0, 4_901_450.0
    rows = [row for row in county.interpretation.thicknesses if row.role == Role.DEEP_AQUIFER]
    far = [row for row in rows if np.hypot(row.easting - east, row.northing - north) > 400.0]
    ended = say_thickness("ended", "well", (east, north), Role.DEEP_AQUIFER, 40.0, at_least=True)
    before, after = county.with_thicknesses(*far).build(WIDE), county.with_thicknesses(*far, ended).build(WIDE)
    cell = cell_at(east, north)
    assert estimate(before, "deep_gravel_thickness")[cell] < 25.0
    assert estimate(after, "deep_gravel_thickness")[cell] > 36.0


def test_wells_are_honoured_within_their_error(county):
    stack = county.without_role(Role.DEEP_AQUIFER).build(WIDE)
    surface = stack.surfaces["bedrock_depth"]
    wells = [top for top in county.interpretation.tops if top.kind == "well" and stack.covered[cell_at(
        top.easting, top.northing)]]  # fmt: skip
    assert len(wells) >= 5
    for top in wells:
        cell = cell_at(top.easting, top.northing)
        doubt = np.hypot(top.standard_error, surface.standard_error[cell])
        assert abs(surface.estimate[cell] - top.depth) < 2.0 * top.standard_error, top.place
        assert doubt < 1.5, top.place


# What the template and the tables lack


def test_without_a_deep_aquifer_there_is_no_gravel_and_it_is_said(bare_stack):
    assert not [name for name in bare_stack.surfaces if name.startswith("deep_gravel")]
    assert "bedrock_elevation" in bare_stack.surfaces
    assert any("no deep aquifer" in remark for remark in bare_stack.remarks)


def test_without_a_shallow_aquifer_there_is_no_such_surface_and_it_is_said(county):
    stack = county.without_role(Role.SHALLOW_AQUIFER).build(WIDE)
    assert not [name for name in stack.surfaces if name.startswith("shallow")]
    assert "deep_gravel_thickness" in stack.surfaces
    assert any("no shallow aquifer" in remark for remark in stack.remarks)


def test_too_few_thicknesses_are_said_and_never_mapped(county):
    """One doubtful thickness for the whole region: rock is never the top of the gravel for want of data."""
    rows = [row for row in county.interpretation.thicknesses if row.role == Role.DEEP_AQUIFER]
    stack = county.with_thicknesses(*rows[:3]).build(WIDE)
    assert not [name for name in stack.surfaces if name.startswith(("deep_gravel", "shallow"))]
    said = [remark for remark in stack.remarks if "too few" in remark]
    assert len(said) == 2
    assert "deep gravel" in said[0]
    assert "shallow aquifer" in said[1]
    bare = county.without_role(Role.DEEP_AQUIFER).with_thicknesses().build(WIDE)
    deeper = estimate(stack, "bedrock_depth") - estimate(bare, "bedrock_depth")
    assert np.ptp(deeper[np.isfinite(deeper)]) < 1e-9
    assert np.nanmin(deeper) > 0.5


def test_soundings_are_tied_to_the_wells(county):
    """All soundings 15 % too deep: most of it is found and taken off, by what the wells among them say."""
    off = [
        attrs.evolve(top, depth=1.15 * top.depth) if top.kind == "sounding" and top.status == "at" else top
        for top in county.interpretation.tops
    ]
    stretched = county.with_tops(*off)
    tied, free = stretched.build(WIDE), stretched.build(attrs.evolve(WIDE, tie_deviation=0.0))
    right = estimate(county.build(attrs.evolve(WIDE, tie_deviation=0.0)), "bedrock_depth")
    found, lost = (np.nanmean(np.abs(np.log(estimate(one, "bedrock_depth") / right))) for one in (tied, free))
    assert found < 0.6 * lost
    assert any("deeper than wells" in remark for remark in tied.remarks)
    assert not any("than wells" in remark for remark in free.remarks)


@pytest.mark.parametrize("n_depths", [0, 1, 2])
def test_fewer_than_three_depths_end_in_words(county, n_depths):
    tops = [top for top in county.interpretation.tops if top.contact == "basal"]
    bounds = [attrs.evolve(top, status="below", standard_error=np.nan) for top in tops[5:15]]
    with pytest.raises(EngineError, match=rf"{n_depths} places know the depth .* and 10 a bound; at least 3"):
        county.with_tops(*tops[:n_depths], *bounds).build(WIDE)


def test_three_depths_are_enough(county):
    tops = [top for top in county.interpretation.tops if top.contact == "basal"]
    stack = county.without_role(Role.DEEP_AQUIFER).with_tops(*tops[:3]).build(WIDE)
    assert np.isfinite(estimate(stack, "bedrock_depth")[stack.covered]).all()


def test_without_a_ground_raster_the_places_give_the_ground_and_it_is_said(county, stack):
    blank = attrs.evolve(county, survey=attrs.evolve(county.survey, ground=None)).build(WIDE)
    assert any("no ground raster" in remark for remark in blank.remarks)
    assert not any("no ground raster" in remark for remark in stack.remarks)
    error = (blank.ground - ground_elevation(*cell_centres()))[blank.covered]
    assert np.abs(error).max() < 1.0
    depth, level = estimate(blank, "bedrock_depth"), estimate(blank, "bedrock_elevation")
    assert np.allclose(blank.ground - depth, level, equal_nan=True)


# What must not matter


def moved(county, *, east=0.0, north=0.0, scale=1.0):
    """The county with all coordinates shifted, or counted in a unit of which `scale` make a metre."""

    def move(thing):
        return attrs.evolve(thing, easting=scale * thing.easting + east, northing=scale * thing.northing + north)

    found, survey = county.interpretation, county.survey
    grid = attrs.evolve(
        county.grid,
        west=scale * county.grid.west + east,
        north=scale * county.grid.north + north,
        cell_size=scale * county.grid.cell_size,
    )
    return attrs.evolve(
        county,
        grid=grid,
        survey=attrs.evolve(
            survey,
            soundings=tuple(map(move, survey.soundings)),
            wells=tuple(map(move, survey.wells)),
            ground=attrs.evolve(survey.ground, grid=grid),
            boundary=shapely.transform(survey.boundary, lambda xy: scale * xy + [east, north]),
        ),
        interpretation=attrs.evolve(
            found,
            tops=tuple(map(move, found.tops)),
            thicknesses=tuple(map(move, found.thicknesses)),
            shallow_resistivities=tuple(map(move, found.shallow_resistivities)),
        ),
    )


def assert_alike(left, right, rtol):
    assert left.surfaces.keys() == right.surfaces.keys()
    for name, surface in left.surfaces.items():
        for part in ("estimate", "standard_error", "p05", "p95"):
            one, other = getattr(surface, part), getattr(right.surfaces[name], part)
            assert (one is None) == (other is None)
            assert one is None or np.allclose(one, other, rtol=rtol, atol=rtol, equal_nan=True), (name, part)


def test_a_shift_of_all_coordinates_leaves_the_surfaces_alone(county, stack):
    shifted = moved(county, east=-312_800.0, north=-4_300_000.0).build(SurfaceOptions(reach=600.0))
    assert_alike(stack, shifted, 1e-3)


def test_a_crs_in_feet_leaves_the_surfaces_alone(county, stack):
    in_feet = moved(county, scale=3937.0 / 1200.0).build(SurfaceOptions(reach=600.0 * 3937.0 / 1200.0))
    assert_alike(stack, in_feet, 1e-3)


def test_who_works_the_blocks_does_not_matter(county):
    options = SurfaceOptions(reach=600.0, block=97)
    serial = county.build(options)
    with ThreadPoolExecutor(2) as pool:
        concurrent = county.build(options, map=pool.map)
    assert_alike(serial, concurrent, 0.0)
    assert_alike(serial, county.build(SurfaceOptions(reach=600.0)), 1e-9)


# Figures of merit


def test_leaving_one_out_is_leaving_one_out(county):
    """Against dense kriging that never saw the place (tests/reference), with the covariance that was fitted."""
    stack = county.without_role(Role.DEEP_AQUIFER).build(attrs.evolve(WIDE, tie_deviation=0.0))
    crossed = next(one for one in stack.cross_validations if one.title.startswith("Log depth"))
    fitted = next(one for one in stack.variograms if one.title == crossed.title)
    covariance = Covariance(
        fitted.model, fitted.nugget, fitted.partial_sill, fitted.length, fitted.azimuth_deg, fitted.ratio
    )
    tops = {top.place: top for top in county.interpretation.tops if top.contact == "basal"}
    points = np.array([[tops[name].easting, tops[name].northing] for name in crossed.place])
    ratio = np.array([tops[name].standard_error / tops[name].depth for name in crossed.place])
    # The log variance v of a log-normal depth: (e^v - 1) e^v = ratio².
    error = np.log((1.0 + np.sqrt(1.0 + 4.0 * ratio**2)) / 2.0)
    assert np.allclose(np.exp(crossed.measured), [tops[name].depth for name in crossed.place])
    for left_out in (0, 7, 23, len(points) - 1):
        others = np.arange(len(points)) != left_out
        mean, variance = krige_densely(
            points[others], crossed.measured[others], error[others], points[[left_out]], covariance
        )
        assert crossed.predicted[left_out] == pytest.approx(mean[0], abs=1e-4)
        assert crossed.standard_error[left_out] ** 2 == pytest.approx(variance[0] + error[left_out], rel=1e-3)


def test_figures_count_places_proper_and_no_bounds(county):
    deep, rest = valley_split(county)
    bounds = [attrs.evolve(top, status="below", depth=0.8 * top.depth, standard_error=np.nan) for top in deep]
    stack = county.with_tops(*rest, *bounds).build(WIDE)
    crossed = {one.title: one for one in stack.cross_validations}
    contact = crossed["Log depth of the basal contact"]
    assert contact.place == tuple(top.place for top in rest)
    assert contact.kind == tuple(top.kind for top in rest)
    assert len(contact.measured) == len(contact.predicted) == len(contact.standard_error) == len(rest)
    thickness = crossed["Thickness of the deep gravel"]
    present = [row for row in county.interpretation.thicknesses if row.role == Role.DEEP_AQUIFER and row.thickness > 0]
    assert thickness.place == tuple(row.place for row in present)
    assert np.allclose(thickness.measured, [row.thickness for row in present])
    fitted = {one.title: one for one in stack.variograms}
    assert fitted.keys() == crossed.keys()
    for title, one in fitted.items():
        assert one.n_data == len(crossed[title].place)
    assert f"{len(rest)} data and {len(bounds)} bounds" in fitted["Log depth of the basal contact"].remark


# Who kriges


@pytest.mark.parametrize("engine", ["cholesky", "tiles", "pykrige"])
def test_engines_give_one_answer(county, stack, engine):
    """Fewer than 128 data: the tiles' neighbourhoods hold them all."""
    assert_alike(stack, county.build(SurfaceOptions(reach=600.0, engine=engine)), 1e-6)


def test_many_data_are_kriged_by_tiles(county):
    """Beyond `all_at_once` the tiles take over, leaving out included."""
    tiled = county.build(SurfaceOptions(reach=600.0, all_at_once=20))
    assert_alike(tiled, county.build(SurfaceOptions(reach=600.0)), 1e-6)
    one, other = (built.cross_validations[0] for built in (tiled, county.build(SurfaceOptions(reach=600.0))))
    assert np.allclose(one.predicted, other.predicted, atol=1e-8)
