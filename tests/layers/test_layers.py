"""Layers against the formulas that the surfaces were made of, and against exactextract for circles."""

import attrs
import numpy as np
import pytest
import shapely
from scipy import ndimage

from geoves.domain.grids import Grid, Surface
from geoves.domain.survey import Permit
from geoves.layers import LayerOptions, derive_layers
from geoves.layers.lines import choose_interval
from geoves.layers.sampling import sample_bilinear


@pytest.fixture(scope="module")
def layers(small_results):
    return derive_layers(small_results.stack, small_results.survey, small_results.region)


def with_surface(stack, name, estimate, **parts):
    surface = attrs.evolve(stack.surfaces[name], estimate=estimate, **parts)
    return attrs.evolve(stack, surfaces={**stack.surfaces, name: surface})


def permits_of(results, permits, stack=None):
    survey = attrs.evolve(results.survey, permits=tuple(permits))
    return derive_layers(stack or results.stack, survey, results.region)["permits"]


def test_layers_have_the_contracts_names_and_the_regions_crs(layers, small_results):
    assert set(layers) == {
        "bedrock_contours", "thickness_contours", "valley_axis", "valley_stations", "gravel_extent", "permits",
    }  # fmt: skip
    assert all(layer.crs == small_results.region.crs for layer in layers.values())
    assert all(layer.geometry.is_valid.all() and len(layer) for layer in layers.values())


def test_contours_lie_where_the_surface_has_their_value(layers, small_results):
    grid = small_results.stack.grid
    for name, field, surface in (
        ("bedrock_contours", "elevation", "bedrock_elevation"),
        ("thickness_contours", "thickness", "deep_gravel_thickness"),
    ):
        for level, line in zip(layers[name][field], layers[name].geometry, strict=True):
            x, y = np.array(line.coords).T
            found = sample_bilinear(grid, small_results.stack.surfaces[surface].estimate, x, y)
            assert np.allclose(found, level, atol=1e-6)


def test_every_fifth_contour_is_an_index_contour(layers):
    """60 m of relief in some 12 contours: every 5 m, an index contour every 25 m."""
    contours = layers["bedrock_contours"]
    levels = np.unique(contours.elevation)
    assert np.allclose(np.diff(levels), 5.0)
    assert np.array_equal(contours.major, contours.elevation % 25.0 == 0.0)


def test_contour_of_a_cone_is_a_circle(small_results):
    """Closed form: z = 400 - r/10 has the value 340 on a circle of 600 m."""
    grid = small_results.stack.grid
    x, y = np.meshgrid(grid.easting - 501_500.0, grid.northing - 4_601_200.0)
    stack = with_surface(small_results.stack, "bedrock_elevation", 400.0 - np.hypot(x, y) / 10.0)
    contours = derive_layers(stack, small_results.survey, small_results.region)["bedrock_contours"]
    ring = contours[contours.elevation == 340.0].geometry.iloc[0]
    assert ring.is_closed
    assert shapely.Polygon(ring).area == pytest.approx(np.pi * 600.0**2, rel=0.01)


@pytest.mark.parametrize(("unit", "metres"), [("m", 1.0), ("ft", 0.3048), ("us-ft", 1200.0 / 3937.0)])
def test_contour_intervals_are_round_in_the_length_unit(unit, metres):
    for span in (0.7, 8.0, 61.0, 900.0):
        step = choose_interval(0.0, span, unit, 12) / metres
        mantissa = step / 10.0 ** np.floor(np.log10(step) + 1e-9)
        assert np.isclose(mantissa, [1.0, 2.0, 5.0, 10.0], rtol=1e-9).any()
        assert 7 <= span / metres / step <= 20


def test_bilinear_is_exact_on_a_plane_and_agrees_with_scipy():
    grid = Grid(west=100.0, north=900.0, cell_size=20.0, n_rows=30, n_columns=40)
    x, y = np.meshgrid(grid.easting, grid.northing)
    random = np.random.default_rng(3)
    east, north = random.uniform(120.0, 880.0, 500), random.uniform(320.0, 880.0, 500)
    assert np.allclose(sample_bilinear(grid, 2.0 * x - 3.0 * y, east, north), 2.0 * east - 3.0 * north)
    rough = random.standard_normal(grid.shape)
    # half a cell: the first centre is at west + cell/2
    index = np.stack([(900.0 - north) / 20.0 - 0.5, (east - 100.0) / 20.0 - 0.5])
    assert np.allclose(sample_bilinear(grid, rough, east, north), ndimage.map_coordinates(rough, index, order=1))


def test_bilinear_leaves_blank_neighbours_out():
    grid = Grid(west=0.0, north=20.0, cell_size=10.0, n_rows=2, n_columns=2)
    cells = np.array([[1.0, np.nan], [3.0, np.nan]])
    found = sample_bilinear(grid, cells, np.array([8.0, 1.0, 25.0]), np.array([10.0, 19.0, 10.0]))
    assert found[:2].tolist() == [2.0, 1.0]
    assert np.isnan(found[2])


def test_valley_axis_follows_the_floor_and_its_tributary(layers, small_results):
    """The surface's own formula: axis at 1200 + 150 sin(x/700), a branch at x = 1400 from the north, falling east."""
    axis = layers["valley_axis"]
    assert axis.order.tolist() == [1, 2]
    main, branch = axis.geometry
    x, y = np.array(main.coords).T
    x, y = x - 500_000.0, y - 4_600_000.0
    assert np.abs(y - (1200.0 + 150.0 * np.sin(x / 700.0))).max() < 100.0  # two cells
    assert np.ptp(x) > 2500.0
    assert x[-1] > x[0]
    fine = np.linspace(x[0], x[-1], 2000)
    along = np.hypot(np.diff(fine), np.diff(1200.0 + 150.0 * np.sin(fine / 700.0))).sum()
    assert axis.length[0] == pytest.approx(along, rel=0.03)
    assert axis.mean_slope[0] == pytest.approx(0.004, abs=0.001)
    head = np.array(branch.coords)[0] - (500_000.0, 4_600_000.0)
    assert head[0] == pytest.approx(1400.0, abs=100.0)
    assert head[1] > 2200.0
    assert main.distance(shapely.Point(branch.coords[-1])) < 50.0
    floor = small_results.stack.surfaces["bedrock_elevation"].estimate
    assert axis.lowest_elevation[0] == pytest.approx(np.nanmin(floor), abs=1.0)


def test_a_valley_that_falls_west_is_drawn_westward(small_results):
    surface = small_results.stack.surfaces["bedrock_elevation"]
    stack = with_surface(small_results.stack, "bedrock_elevation", np.fliplr(surface.estimate))
    main = derive_layers(stack, small_results.survey, small_results.region)["valley_axis"].iloc[0]
    assert main.geometry.coords[0][0] > main.geometry.coords[-1][0]
    assert main.mean_slope > 0.0


def test_length_counts_in_metres_where_the_crs_counts_in_feet(layers, small_results):
    region = attrs.evolve(small_results.region, crs="EPSG:2267", crs_unit_metres=1200.0 / 3937.0)
    again = derive_layers(small_results.stack, small_results.survey, region)
    assert again["valley_axis"]["length"][0] == pytest.approx(layers["valley_axis"]["length"][0] * 1200.0 / 3937.0)
    assert again["gravel_extent"]["area"][0] == pytest.approx(
        layers["gravel_extent"]["area"][0] * (1200.0 / 3937.0) ** 2
    )


def test_stations_walk_down_the_axis_at_round_distances(layers, small_results):
    """The floor of the mini region's main valley, by its own formula: 372 - 0.004 x - 48, and a term below 1 m."""
    stations, axis = layers["valley_stations"], layers["valley_axis"]
    for number, line in zip(axis.line, axis.geometry, strict=True):
        mine = stations[stations.line == number]
        assert mine["distance"].iloc[0] == 0.0
        assert mine["distance"].iloc[-1] == pytest.approx(line.length)
        step = 100.0 if line.length > 2000.0 else 50.0  # some 40 steps at a round interval, a cell at least
        assert np.allclose(np.diff(mine["distance"])[:-1], step)
        for distance, point in zip(mine["distance"], mine.geometry, strict=True):
            assert line.project(point) == pytest.approx(distance, abs=1e-6)
    main = stations[stations.line == 1]
    x = main.geometry.x - 500_000.0
    assert np.allclose(main.elevation[2:-2], (372.0 - 0.004 * x - 48.0)[2:-2], atol=1.5)
    error = small_results.stack.surfaces["bedrock_elevation"].standard_error
    assert main.standard_error.between(np.nanmin(error) - 1e-9, np.nanmax(error) + 1e-9).all()
    assert main.depth.between(60.0, 90.0).all()
    # What was lost between the ends is the slope, integrated by trapezes over the stations.
    fallen = np.trapezoid(main.slope, main["distance"])
    assert fallen == pytest.approx(main.elevation.iloc[0] - main.elevation.iloc[-1], abs=0.5)


def test_a_tributary_names_the_line_it_joins(layers):
    axis = layers["valley_axis"].set_index("line")
    assert axis.joins.tolist() == [0, 1]
    assert axis.geometry[1].distance(shapely.Point(axis.geometry[2].coords[-1])) < 100.0


@pytest.mark.parametrize("shape", ["plane", "waves", "pit"])
def test_no_valley_gives_an_empty_layer_with_its_columns(small_results, shape):
    grid = small_results.stack.grid
    x, y = np.meshgrid(grid.easting - grid.west, grid.northing - grid.bounds[1])
    cells = 350.0 + 0.01 * x - 0.005 * y
    if shape == "waves":
        cells = cells + 2.0 * np.sin(x / 200.0) * np.cos(y / 150.0)
    if shape == "pit":
        cells = cells - 30.0 * np.exp(-(((x - 1500.0) / 90.0) ** 2) - ((y - 1200.0) / 90.0) ** 2)
    stack = with_surface(small_results.stack, "bedrock_elevation", cells)
    axis = derive_layers(stack, small_results.survey, small_results.region)["valley_axis"]
    assert len(axis) == 0
    assert {"order", "length", "lowest_elevation", "highest_elevation", "mean_slope"} <= set(axis.columns)


def test_a_thinned_grid_gives_the_same_valley(layers, small_results):
    options = LayerOptions(axis_cells=800)
    axis = derive_layers(small_results.stack, small_results.survey, small_results.region, options)["valley_axis"]
    assert axis.order.tolist() == [1, 2]
    assert axis.geometry[0].hausdorff_distance(layers["valley_axis"].geometry[0]) < 200.0


def test_extent_holds_the_cells_of_its_class(layers, small_results):
    grid = small_results.stack.grid
    x, y = np.meshgrid(grid.easting, grid.northing)
    probability = small_results.stack.surfaces["deep_gravel_probability"].estimate
    extent = layers["gravel_extent"]
    for name, lower, upper in (("likely", 0.66, 1.1), ("possible", 0.33, 0.66), ("not_shown", -0.1, 0.33)):
        outline = shapely.union_all(extent.geometry[extent.likelihood == name])
        inside = shapely.contains_xy(outline.buffer(1e-6), x, y)
        assert np.array_equal(inside, (probability >= lower) & (probability < upper))
        cells = np.count_nonzero(inside) * grid.cell_size**2
        assert outline.area == pytest.approx(cells, rel=0.25)


def test_permits_tell_what_the_surfaces_say(layers, small_results):
    permits = layers["permits"]
    assert permits.permit.tolist() == [p.name for p in small_results.survey.permits]
    last = permits.iloc[-1]
    assert not last.covered
    assert last[[c for c in permits.columns if c.startswith(("bedrock", "gravel"))]].isna().all()
    inside = permits[permits.covered]
    for name in ("bedrock_depth", "gravel_thickness"):
        assert (inside[f"{name}_p05"] <= inside[name]).all()
        assert (inside[name] <= inside[f"{name}_p95"]).all()
    point = permits[permits.location_accuracy.isna() & permits.covered].iloc[0]
    x, y = point.geometry.x - 500_000.0, point.geometry.y - 4_600_000.0
    # the mini region's own formulas, at the point and not at a cell's centre
    axis = 1200.0 + 150.0 * np.sin(x / 700.0)
    branch = np.exp(-(((x - 1400.0) / 180.0) ** 2)) / (1.0 + np.exp(-(y - 1200.0) / 60.0))
    incision = max(np.exp(-(((y - axis) / 260.0) ** 2)), 0.6 * branch)
    rock = 372.0 - 0.004 * x - 48.0 * incision + 0.002 * abs(y - 1200.0)
    assert point.bedrock_depth == pytest.approx(402.0 - 0.003 * x + 3.0 * np.sin(y / 600.0) - rock, abs=0.5)


def test_a_circle_gives_its_mean_and_the_extremes_of_its_band(small_results):
    """The mean over the circle by exactextract, which weighs cells by the share of them that it holds."""
    exactextract = pytest.importorskip("exactextract")
    rasterio = pytest.importorskip("rasterio")
    import geopandas

    stack, grid = small_results.stack, small_results.stack.grid
    place = (500_900.0, 4_601_050.0)
    row = permits_of(small_results, [Permit("wide", *place, location_accuracy=328.0)]).iloc[0]
    point = permits_of(small_results, [Permit("sharp", *place)]).iloc[0]
    thickness = stack.surfaces["deep_gravel_thickness"].estimate
    circle = geopandas.GeoDataFrame(geometry=[shapely.Point(*place).buffer(328.0, quad_segs=64)], crs="EPSG:26914")
    transform = rasterio.Affine(grid.cell_size, 0.0, grid.west, 0.0, -grid.cell_size, grid.north)
    with rasterio.MemoryFile() as memory:
        shape = {"height": grid.n_rows, "width": grid.n_columns, "count": 1, "dtype": "float64"}
        with memory.open(driver="GTiff", transform=transform, crs="EPSG:26914", nodata=np.nan, **shape) as target:
            target.write(thickness, 1)
        with memory.open() as source:
            mean = exactextract.exact_extract(source, circle, ["mean"])[0]["properties"]["mean"]
    assert row.gravel_thickness == pytest.approx(mean, rel=0.02)
    assert row.bedrock_depth_p05 < point.bedrock_depth_p05
    assert row.bedrock_depth_p95 > point.bedrock_depth_p95
    assert row.covered_share == 1.0


def test_a_circle_half_off_the_map_says_so(small_results):
    stack = small_results.stack
    row = permits_of(small_results, [Permit("edge", 500_001.0, 4_600_600.0, location_accuracy=200.0)]).iloc[0]
    assert row.covered
    assert row.covered_share == pytest.approx(0.5, abs=0.05)
    assert np.isfinite(row.bedrock_depth)
    off = permits_of(small_results, [Permit("off", 499_950.0, 4_600_600.0, location_accuracy=200.0)], stack).iloc[0]
    assert not off.covered
    assert np.isnan(off.bedrock_depth)


def test_roles_that_are_missing_leave_empty_layers_and_blank_columns(small_results):
    stack = attrs.evolve(small_results.stack, surfaces={})
    layers = derive_layers(stack, small_results.survey, small_results.region)
    assert [len(layers[name]) for name in ("bedrock_contours", "thickness_contours", "valley_axis")] == [0, 0, 0]
    assert len(layers["gravel_extent"]) == 0
    assert layers["permits"].bedrock_depth.isna().all()
    assert layers["permits"].covered.any()


def test_no_permits_is_an_empty_layer(small_results):
    empty = permits_of(small_results, [])
    assert len(empty) == 0
    assert "gravel_probability" in empty.columns


def test_missing_quantiles_of_the_top_widen_rather_than_vanish(small_results):
    stack = small_results.stack
    top = stack.surfaces["deep_gravel_top_elevation"]
    bare = Surface(top.name, top.title, top.quantity, top.grid, top.estimate)
    place = [Permit("deep", 500_900.0, 4_601_350.0)]
    row = permits_of(small_results, place, attrs.evolve(stack, surfaces={**stack.surfaces, top.name: bare})).iloc[0]
    assert row.gravel_top_depth_p05 < row.gravel_top_depth < row.gravel_top_depth_p95


def split_county(results, probability, radius=300.0, depth=80.0):
    """A permit on a line, west of which gravel has the first probability and east of it the second; rock at 70 m."""
    stack, grid = results.stack, results.stack.grid
    west = np.broadcast_to(grid.easting < 501_000.0, grid.shape)
    chance = np.where(west, *probability)
    flat = np.full(grid.shape, 1.0)
    ground = 400.0 * flat
    surfaces = dict(stack.surfaces)
    parts = {
        "bedrock_elevation": (330.0, 5.0),
        "deep_gravel_thickness": (20.0 * chance, np.sqrt(400.0 * chance * (1.0 - chance))),
        "deep_gravel_probability": (chance, None),
        "deep_gravel_top_elevation": (330.0 + 20.0 * chance, None),
    }
    for name, (estimate, error) in parts.items():
        spread = 0.0 if error is None else 1.6449 * error
        surfaces[name] = attrs.evolve(
            stack.surfaces[name],
            estimate=estimate * flat,
            standard_error=None if error is None else error * flat,
            p05=(estimate - spread) * flat,
            p95=(estimate + spread) * flat,
        )
    even = attrs.evolve(stack, surfaces=surfaces, ground=ground, covered=flat > 0)
    place = Permit("P", 501_000.0, 4_601_000.0, requested_depth=depth, location_accuracy=radius)
    return permits_of(results, [place], even).iloc[0]


def test_a_circle_that_straddles_is_undetermined(small_results):
    """On the line between sure gravel and none neither word is true; away from it each is."""
    assert split_county(small_results, (0.98, 0.02)).over_gravel == "undetermined"
    assert split_county(small_results, (0.98, 0.98)).over_gravel == "likely"
    assert split_county(small_results, (0.02, 0.02)).over_gravel == "unlikely"
    assert split_county(small_results, (0.5, 0.5)).over_gravel == "undetermined"
    # Near enough to the line a small circle does not reach over it.
    assert split_county(small_results, (0.98, 0.02), radius=None).over_gravel == "undetermined"


@pytest.mark.parametrize("depth", [30.0, 45.0, 50.0, 55.0, 70.0, 200.0])
def test_reaching_gravel_is_the_share_of_draws_that_do(small_results, depth):
    """Monte Carlo: rock at 70 m with an error of 5 m, gravel of 20 m on it in seven of ten draws."""
    row = split_county(small_results, (0.7, 0.7), depth=depth)
    draws = np.random.default_rng(1)
    rock = draws.normal(70.0, 5.0, 200_000)
    there = draws.random(rock.size) < 0.7
    share = np.mean(there & (rock - 20.0 < depth))
    assert row.reach_probability == pytest.approx(share, abs=0.01)
    expected = "likely" if share >= 0.66 else "unlikely" if share <= 0.34 else "undetermined"
    assert row.reaches_gravel == expected


def test_without_a_requested_depth_nothing_is_said_of_reaching(small_results):
    row = split_county(small_results, (0.9, 0.9), depth=None)
    assert row.reaches_gravel is None
    assert np.isnan(row.reach_probability)
    assert row.over_gravel == "likely"


def test_a_permit_outside_has_no_answer(layers):
    outside = layers["permits"][~layers["permits"].covered]
    assert len(outside)
    assert outside.over_gravel.isna().all()
    assert outside.reaches_gravel.isna().all()
