"""Figures: places of marks, ticks, ramps and what is said of them."""

from itertools import pairwise
from xml.etree import ElementTree as ET

import attrs
import numpy as np
import pytest
import shapely
from scipy.spatial.transform import Rotation

from geoves.delivery.figures import draw_cross_validation, draw_variogram, largest_misfits, modelled_semivariance
from geoves.delivery.markup import element, joined, text
from geoves.delivery.ramps import GREY, faded_colours, ramp_colours, value_range
from geoves.delivery.section_lines import lay_sections
from geoves.delivery.sections import (
    column_stretches,
    draw_overview,
    draw_section,
    places_near,
    sample_cells,
    sample_smoothly,
)
from geoves.delivery.sentences import tell_readings_aside
from geoves.delivery.sounding_figures import (
    depth_shown,
    draw_columns,
    draw_curve,
    draw_models,
    pick_members,
    respond,
    segment_factors,
)
from geoves.delivery.svg import Scale, even_ticks, logarithmic_ticks, staircase
from geoves.delivery.unit_look import ROLE_COLOURS, unit_colours
from geoves.domain.earth import LayeredModel
from geoves.domain.region import Section
from geoves.domain.units import Role


def parsed(svg):
    """The figure as XML: malformed markup raises."""
    return ET.fromstring(svg)  # noqa: S314 - our own figure


def drawn(results, number=0):
    sounding, inverted = results.survey.soundings[number], results.inverted[number]
    return sounding, inverted, results.interpretation.columns[number]


def test_text_is_escaped_and_control_characters_go():
    assert element("p", {"title": '"<'}, "a & b\x00\x1b") == '<p title="&quot;&lt;">a &amp; b</p>'
    assert joined(["<", text("<")]) == "&lt;&lt;"


def test_logarithmic_scale_places_the_geometric_mean_in_the_middle():
    scale = Scale(1.0, 100.0, 0.0, 200.0, logarithmic=True)
    np.testing.assert_allclose(scale.pixel([1.0, 10.0, 100.0]), [0.0, 100.0, 200.0])


@pytest.mark.parametrize(("low", "high"), [(0, 1), (312.3, 377.9), (-4, 1e4), (0.001, 0.0042)])
def test_ticks_lie_within_and_are_even(low, high):
    ticks = even_ticks(low, high, 5)
    assert 2 <= len(ticks) <= 11
    assert all(low - 1e-9 <= tick <= high + 1e-9 for tick in ticks)
    np.testing.assert_allclose(np.diff(ticks), ticks[1] - ticks[0])


def test_logarithmic_ticks_never_run_out():
    for low in (0.3, 1.7, 42.0):
        for span in (4.0, 30.0, 1e4):
            assert len(logarithmic_ticks(low, low * span)) >= 2


def test_staircase_goes_down_through_each_layer_once():
    x, depth = staircase([0.0, 3.0, 10.0], [20.0, 80.0, 40.0], 15.0)
    assert x.tolist() == [20, 20, 80, 80, 40, 40]
    assert depth.tolist() == [0, 3, 3, 10, 10, 15]


def test_place_figures_are_sound_xml_with_titles_and_units(small_results):
    template = small_results.region.template
    sounding, inverted, column = drawn(small_results)
    figures = (
        draw_curve(sounding, inverted, "ft"),
        draw_models(sounding, inverted, template, "ft", 90.0),
        draw_columns(column, inverted, template, "ft", None, 90.0),
    )
    for figure in figures:
        root = parsed(figure)
        assert root.find("title").text
    assert "AB/2 (ft)" in figures[0]
    assert "depth (ft)" in figures[1]


def test_curve_marks_stand_where_their_readings_say(small_results):
    """Equal ratios of spacing are equal steps in pixels: what a log-log plot is."""
    sounding, inverted, _ = drawn(small_results)
    root = parsed(draw_curve(sounding, inverted, "m"))
    marks = [one for one in root.iter("path") if "reading" in one.get("class", "")]
    assert len(marks) == sounding.curve.half_spacing.size
    bars = [float(one.get("x1")) for one in root.iter("line") if one.get("class") == "error-bar"]
    steps = np.diff(bars) / np.maximum(np.diff(np.log(sounding.curve.half_spacing)), 1e-12)
    known = np.diff(sounding.curve.half_spacing) > 0
    np.testing.assert_allclose(steps[known], np.median(steps[known]), rtol=0.02)


def test_readings_aside_give_their_reasons(small_results):
    sounding, inverted, _ = drawn(small_results, 3)
    assert tell_readings_aside(sounding.curve, inverted, "m") == ["AB/2 15 m: stands 90 % above its neighbours"]


def test_columns_show_each_layer_filled_to_one_where_there_is_no_profile(small_results):
    _, inverted, column = drawn(small_results)
    plain = attrs.evolve(column, profile_depth=np.empty(0), profile=np.empty((0, 0)))
    root = parsed(draw_columns(plain, inverted, small_results.region.template, "m", None, 90.0))
    boxes = [one for one in root.iter("rect") if one.get("fill", "").startswith("url(")]
    widths = {}
    for box in boxes:
        widths[box.get("y")] = widths.get(box.get("y"), 0.0) + float(box.get("width"))
    np.testing.assert_allclose(list(widths.values()), 100.0, atol=0.3)


def _bands(svg):
    """The filled bands of a column, as shapely reads their corners, by the number of their unit."""
    found = {}
    for one in parsed(svg).iter("path"):
        if one.get("fill", "").startswith("url("):
            corners = [tuple(map(float, xy.split())) for xy in one.get("d").strip("MZ").split("L")]
            found[int(one.get("fill")[10:-1])] = shapely.Polygon(corners).buffer(0)
    return found


def test_profile_is_stacked_to_one_and_drawn_as_it_is(small_results):
    """Shapely measures each band along slices: as wide as its probability, and all of them as wide as the box."""
    _, inverted, column = drawn(small_results)
    deepest = depth_shown(inverted, column)
    bands = _bands(draw_columns(column, inverted, small_results.region.template, "m", None, deepest))
    assert shapely.union_all(list(bands.values())).area == pytest.approx(sum(b.area for b in bands.values()), rel=0.01)
    middle = 0.5 * (column.profile_depth[1:] + column.profile_depth[:-1])
    for depth, shares in zip(middle, column.profile, strict=True):
        y = 38.0 + 224.0 * depth / deepest
        cut = shapely.LineString([(0, y), (300, y)])
        widths = [bands[i].intersection(cut).length if i in bands else 0.0 for i in range(5)]
        np.testing.assert_allclose(widths, 100.0 * shares / shares.sum(), atol=1.2)


def test_profile_of_a_bound_ends_where_knowledge_does(small_results):
    _, inverted, column = drawn(small_results, 4)
    assert column.bedrock_status == "deeper_than"
    deepest = 2.0 * column.profile_depth[-1]
    svg = draw_columns(column, inverted, small_results.region.template, "m", None, deepest)
    assert max(band.bounds[3] for band in _bands(svg).values()) == pytest.approx(38.0 + 112.0, abs=0.2)
    assert "not known" in svg


def test_fan_of_curves_is_that_of_the_members(small_results):
    """Over equal layers the response is their resistivity (exact for any array); the segment's factor lies on it."""
    sounding, inverted, _ = drawn(small_results)
    ensemble = inverted.ensemble
    even = attrs.evolve(ensemble, resistivity=np.full_like(ensemble.resistivity, 40.0))
    curves = respond(sounding.curve, attrs.evolve(inverted, ensemble=even), np.array([0, 7]))
    wanted = np.where(sounding.curve.segment == 0, 40.0, 40.0 * 1.06)
    np.testing.assert_allclose(curves, np.tile(wanted, (2, 1)), rtol=1e-6)
    assert pick_members(inverted).size == 25
    fan = [one for one in parsed(draw_curve(sounding, inverted, "m")).iter("path") if one.get("class") == "fan"]
    assert fan[0].get("d").count("M") == 25 * 2


def test_factors_count_the_segments_that_were_fitted(small_results):
    """Where the first potential spacing has no used reading the second is the first that was fitted: factor 1."""
    sounding, inverted, _ = drawn(small_results)
    curve = sounding.curve
    used = attrs.evolve(curve, used=curve.segment > 0)
    assert segment_factors(used, inverted).tolist() == [1.0] * 14
    assert segment_factors(curve, inverted).tolist() == [1.0] * 8 + [1.06] * 6


def test_smooth_model_is_drawn_where_there_is_one(small_results):
    sounding, inverted, _ = drawn(small_results)
    smooth = LayeredModel(np.full(9, 8.0), np.geomspace(30.0, 70.0, 10))
    drawn_with = draw_models(sounding, attrs.evolve(inverted, smooth=smooth), small_results.region.template, "m", 90.0)
    assert 'class="smooth"' in drawn_with
    assert 'class="smooth"' not in draw_models(sounding, inverted, small_results.region.template, "m", 90.0)


def test_variograms_reach_95_percent_of_the_sill_at_their_practical_length(small_results):
    """Chilès and Delfiner (2012), section 2.5; the spherical model reaches all of it."""
    (variogram,) = small_results.stack.variograms
    for model, share in (("exponential", 0.95), ("gaussian", 0.95), ("matern32", 0.95), ("spherical", 1.0)):
        one = attrs.evolve(variogram, model=model)
        value = modelled_semivariance(one, np.array([1.0]))[0]
        assert value == pytest.approx(one.nugget + share * one.partial_sill, rel=2e-3)
    assert parsed(draw_variogram(variogram, "m")).find("title").text == "Variogram of Bedrock elevation"


def test_cross_validation_names_the_worst(small_results):
    (crossed,) = small_results.stack.cross_validations
    assert [crossed.place[i] for i in largest_misfits(crossed, 2)] == ["Larch 6", "Larch 3"]
    assert "Larch 6" in "".join(parsed(draw_cross_validation(crossed)).itertext())


def test_doubt_fades_the_colour_and_blank_is_clear(small_results):
    surface = small_results.stack.surfaces["bedrock_elevation"]
    colours = faded_colours(surface)
    assert (colours[np.isnan(surface.estimate)][:, 3] == 0).all()
    width = surface.p95 - surface.p05
    sure = np.unravel_index(np.nanargmin(width), width.shape)
    unsure = np.unravel_index(np.nanargmax(width), width.shape)
    low, high = value_range(surface.estimate)
    full = ramp_colours("cividis")[int(np.clip((surface.estimate[sure] - low) / (high - low) * 255, 0, 255))]
    assert np.abs(colours[sure][:3].astype(int) - full).max() <= 1
    assert np.abs(colours[unsure][:3].astype(int) - GREY).max() < 25


def test_sections_sample_a_plane_exactly(small_results):
    """Bilinear between cells reproduces a plane: checked against the plane itself."""
    grid = small_results.stack.grid
    x, y = np.meshgrid(grid.easting, grid.northing)
    plane = 3.0 + 0.01 * (x - grid.west) - 0.02 * (y - grid.north)
    points = np.array([[grid.west + 533.0, grid.north - 777.0], [grid.west + 2000.0, grid.north - 60.0]])
    wanted = 3.0 + 0.01 * (points[:, 0] - grid.west) - 0.02 * (points[:, 1] - grid.north)
    np.testing.assert_allclose(sample_smoothly(grid, plane, points), wanted, atol=1e-6)
    assert np.abs(sample_cells(grid, plane, points) - wanted).max() < 0.03 * grid.cell_size
    outside = np.array([[grid.west - 1.0, grid.north - 5.0]])
    assert np.isnan(sample_smoothly(grid, plane, outside)).all()
    assert np.isnan(sample_cells(grid, plane, outside)).all()


def test_sections_and_overview_are_sound_xml(small_results, small_results_in_feet):
    lines = lay_sections(small_results)
    assert lines[0].title == "Along the valley"
    assert len(lines) == 4
    for one in lines:
        words = "".join(parsed(draw_section(small_results, one.title, one.line)).itertext())
        assert "times larger than lengths" in words
    assert "elevation (US ft)" in draw_section(small_results_in_feet, lines[0].title, lines[0].line)
    marks = [one for one in parsed(draw_overview(small_results)).iter("path") if "mark" in one.get("class", "").split()]
    assert len(marks) == len(small_results.survey.soundings) + len(small_results.survey.wells)


def test_a_named_section_comes_first_with_the_places_near_it(small_results):
    """Along the wells' own line: they stand on it, and the overview marks where it begins."""
    first, second = ((one.easting, one.northing) for one in small_results.survey.wells[:2])
    region = attrs.evolve(small_results.region, sections=(Section("Mill Road <1>", (first, second)),))
    named = attrs.evolve(small_results, region=region)
    lines = lay_sections(named)
    assert [one.kind for one in lines] == ["named", "along", "across", "across", "across"]
    drawing = parsed(draw_section(named, lines[0].title, lines[0].line))
    said = [one.text for one in drawing.iter("text")]
    assert any(words.startswith("Mill Road <1>; heights drawn") for words in said if words)
    assert {one.name for one in places_near(named, lines[0].line, 1.0)} >= {w.name for w in named.survey.wells[:2]}
    assert "Mill Road <1>" in [one.text for one in parsed(draw_overview(named)).iter("text")]
    nowhere = attrs.evolve(named, layers={**named.layers, "valley_axis": named.layers["valley_axis"].iloc[:0]})
    assert [one.kind for one in lay_sections(nowhere)] == ["named"]


def test_columns_of_a_section_say_the_most_probable_unit_and_end_where_knowledge_does(small_results):
    codes = small_results.region.template.codes
    for number in (0, 4):
        _, inverted, column = drawn(small_results, number)
        pieces = column_stretches(column, inverted.model.top_depth, codes)
        assert pieces[0].top == 0.0
        assert all(one.bottom == other.top for one, other in pairwise(pieces))
        middle = 0.5 * (column.profile_depth[1:] + column.profile_depth[:-1])
        for depth, shares in zip(middle, column.profile, strict=True):
            at = [one for one in pieces if one.top <= depth < one.bottom]
            assert all(codes[int(np.argmax(shares))] == one.unit for one in at)
            assert all(abs(one.probability - shares.max()) <= 0.1 for one in at)
    assert pieces[-1].bottom == column.bedrock_depth  # the last of the two is a bound
    plain = attrs.evolve(column, profile_depth=np.empty(0), profile=np.empty((0, 0)), bedrock_depth=np.nan)
    assert [one.unit for one in column_stretches(plain, inverted.model.top_depth, codes)] == list(codes)


def test_section_marks_bounds_and_what_is_not_distinct(small_results):
    along = lay_sections(small_results)[0]
    title, line = along.title, along.line
    feet = [one.get("class") for one in parsed(draw_section(small_results, title, line)).iter("path")]
    near = {place.status for place in places_near(small_results, line, 250.0)}
    assert "deeper_than" in near
    assert ("foot deeper_than" in feet) == ("deeper_than" in near)


def test_wells_beside_a_section_stand_on_it_with_their_distance(small_results):
    """A line 1 km beside a well shows it and says so; one whose end is 1 km short of it, or 2 km off, does not."""
    well = small_results.survey.wells[0]
    x, y = well.easting, well.northing
    beside = shapely.LineString([(x - 3000, y + 1000), (x + 3000, y + 1000)])
    (found,) = (one for one in places_near(small_results, beside, 100.0) if one.name == well.name)
    assert (found.along, found.off) == pytest.approx((3000.0, 1000.0))
    drawn_words = [one.text for one in parsed(draw_section(small_results, "Beside", beside)).iter("text")]
    assert f"{well.name[:16]} (1.0 km)" in drawn_words
    for away in ([(x - 3000, y), (x - 1000, y)], [(x - 3000, y + 2000), (x + 3000, y + 2000)]):
        assert well.name not in {one.name for one in places_near(small_results, shapely.LineString(away), 100.0)}


def test_sections_cross_the_axis_at_right_angles(small_results):
    """A quarter turn by scipy's rotations carries the axis's direction onto the section's."""
    axis, *across = (one.line for one in lay_sections(small_results))
    quarter = Rotation.from_euler("z", 90, degrees=True)
    for share, line in zip((0.2, 0.5, 0.8), across, strict=True):
        at, step = share * axis.length, 0.05 * axis.length
        before, after = axis.interpolate(at - step), axis.interpolate(at + step)
        turned = quarter.apply([after.x - before.x, after.y - before.y, 0.0])[:2]
        (x0, y0), (x1, y1) = line.coords
        cosine = abs(np.dot(turned, [x1 - x0, y1 - y0])) / np.hypot(*turned) / line.length
        assert cosine == pytest.approx(1.0, abs=1e-9)


def test_units_take_the_role_colour_unless_they_have_their_own(small_results):
    template = small_results.region.template
    units = [attrs.evolve(template.units[0], colour="#123456"), *template.units[1:], template.units[-1]]
    doubled = attrs.evolve(template, units=(*units[:-1], attrs.evolve(units[-1], code="other_rock")))
    colours = unit_colours(doubled)
    assert colours["till"] == "#123456"
    assert colours["shale"] == ROLE_COLOURS[Role.BEDROCK]
    assert colours["other_rock"] != colours["shale"]
