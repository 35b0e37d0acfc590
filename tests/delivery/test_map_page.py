"""map.html as a reader meets it: in Chromium, from disk, with no network."""

import re

import attrs
import geopandas
import numpy as np
import pyproj
import pytest
import rasterio
import shapely
import shapely.affinity
from selenium.webdriver.common.action_chains import ActionChains
from selenium.webdriver.common.by import By
from selenium.webdriver.common.keys import Keys

from geoves.delivery.map_data import control_points, describe_region, encode_grid, thin_stack
from geoves.delivery.map_page import write_map_page
from geoves.delivery.rasters import write_rasters
from geoves.delivery.sentences import tell_opinion, tell_sounding
from geoves.domain.grids import Grid
from geoves.domain.survey import Pick

READY = "document.body.dataset.ready === 'yes'"


@pytest.fixture(scope="module")
def page(small_results, tmp_path_factory):
    return write_map_page(small_results, tmp_path_factory.mktemp("map") / "map.html")


@pytest.fixture
def opened(browser, page):
    browser.open(page)
    browser.wait_for(READY)
    return browser


def test_two_writes_are_equal(small_results, page, tmp_path):
    again = write_map_page(small_results, tmp_path / "map.html")
    assert again.read_bytes() == page.read_bytes()


def test_nothing_is_requested_and_nothing_complains(opened, page):
    assert opened.run("return document.getElementById('title').textContent") == "Larkmoor Mini"
    assert opened.run("return document.querySelectorAll('.leaflet-image-layer').length") == 1
    assert opened.requested_addresses() == [page.as_uri()]
    assert (
        opened.run("return performance.getEntriesByType('resource').filter(e => !e.name.startsWith('data:')).length")
        == 0
    )
    assert opened.complaints() == []


def test_the_page_forbids_what_it_does_not_need(page):
    policy = re.search(r'Content-Security-Policy" content="([^"]+)"', page.read_text("utf-8"))[1]
    assert policy.startswith("default-src 'none'; script-src 'sha256-")
    assert "unsafe-eval" not in policy
    assert "unsafe-inline" not in policy.split(";")[1]


# Cells whose four neighbours differ from them, and places in them away from the middle: a cell's slip would show.
@pytest.mark.parametrize("cell", [(10, 20), (18, 41), (25, 5), (31, 47)])
@pytest.mark.parametrize("within", [(0.2, 0.8), (0.8, 0.2)])
def test_readout_is_the_value_of_the_cell(opened, small_results, cell, within):
    grid, values = small_results.stack.grid, small_results.stack.surfaces["bedrock_elevation"].estimate
    row, column = cell
    neighbours = values[[row - 1, row + 1, row, row], [column, column, column - 1, column + 1]]
    assert np.abs(neighbours - values[cell]).min() > 0.2
    easting = grid.west + (column + within[0]) * grid.cell_size
    northing = grid.north - (row + within[1]) * grid.cell_size
    # pyproj is the reference for where the place lies on the globe.
    to_degrees = pyproj.Transformer.from_crs(small_results.region.crs, "EPSG:4326", always_xy=True)
    longitude, latitude = to_degrees.transform(easting, northing)
    opened.run("map_geoves.setView([arguments[0], arguments[1]], 17, {animate: false})", latitude, longitude)
    container = opened.driver.find_element(By.ID, "map_geoves")
    ActionChains(opened.driver).move_to_element_with_offset(container, 1, 1).move_to_element(container).perform()
    assert opened.wait_for("document.getElementById('value')?.textContent") == f"{values[cell]:.1f} m"


def test_readouts_at_300_places_are_the_rasters(opened, small_results, tmp_path):
    """Every surface under the cursor against the GeoTIFFs, read by rasterio; pyproj says where a place lies."""
    write_rasters(small_results.stack, small_results.region, tmp_path, {"software": "geoves", "date": "2026-06-01"})
    grid = small_results.stack.grid
    draws = np.random.default_rng(5)
    # The page places a cell to a twentieth of its side: nearer to an edge than that, the neighbour may be read.
    across, down = draws.uniform(0.06, 0.94, (2, 300))
    x = grid.west + (draws.integers(0, grid.n_columns, 300) + across) * grid.cell_size
    y = grid.north - (draws.integers(0, grid.n_rows, 300) + down) * grid.cell_size
    to_degrees = pyproj.Transformer.from_crs(small_results.region.crs, "EPSG:4326", always_xy=True)
    longitude, latitude = to_degrees.transform(x, y)
    read = opened.run(
        "return arguments[0].map(([lat, lng]) => { map_geoves.fire('mousemove', {latlng: L.latLng(lat, lng)});"
        "const others = [...document.querySelectorAll('#readout li')].map(li => [li.dataset.surface,"
        "li.querySelector('b').textContent]);"
        "return {bedrock_elevation: document.getElementById('value').textContent, ...Object.fromEntries(others)}; })",
        [list(place) for place in zip(latitude.tolist(), longitude.tolist(), strict=True)],
    )
    compared = 0
    for path in sorted((tmp_path / "surfaces").iterdir()):
        if path.stem not in small_results.stack.surfaces:
            continue
        with rasterio.open(path) as raster:
            for found, (value,) in zip(read, raster.sample(zip(x, y, strict=True), masked=True), strict=True):
                said = found.get(path.stem, "no value here")
                if value is np.ma.masked:
                    assert said == "no value here"
                    continue
                compared += 1
                assert said != "no value here", (path.stem, value)
                decimals = 0.005 if raster.units[0] == "1" else 0.5 if raster.units[0] == "ohm m" else 0.05
                # half the last figure shown, half of the raster's 1/64 and half of the page's own step
                assert float(said.split()[0].replace(",", "").replace("\u2212", "-")) == pytest.approx(
                    float(value), abs=decimals + 1 / 128 + 0.003
                ), path.stem
    assert compared > 300 * 9


def test_beds_that_the_surfaces_tell_apart_stand_in_the_column(opened, small_results):
    """4 m of cover, 5 m of shallow aquifer, and the strip's colour at their middle is that of each."""
    grid = small_results.stack.grid
    opened.driver.find_element(By.ID, "wanted").send_keys(f"{grid.easting[10]} {grid.northing[30]}", Keys.ENTER)
    answer = opened.run("return document.getElementById('answer').textContent")
    names = {unit.role.value: unit.name for unit in small_results.region.template.units}
    assert f"{names['cover']} 4 m (" in answer
    assert f"{names['shallow_aquifer']} 5 m (" in answer
    assert "not told apart" not in answer
    labels = opened.run("return [...document.querySelectorAll('#answer .strip .halo')].map(t => t.textContent)")
    assert labels[:3] == [names[role] for role in ("cover", "shallow_aquifer", "confining")]
    colours = opened.run(
        "return [...document.querySelectorAll('#answer .strip stop')].map(s => s.getAttribute('stop-color'))"
    )
    shown = {unit["role"]: unit["colour"] for unit in describe_region(small_results)["units"]}
    cover = [int(shown["cover"][i : i + 2], 16) for i in (1, 3, 5)]
    assert [int(c) for c in re.findall(r"\d+", colours[0])] == pytest.approx(cover, abs=6)


def test_tab_reaches_a_permit_and_enter_opens_it(opened, small_results):
    """From the map on, Tab alone; every permit in sight is a stop."""
    names = {one.name for one in small_results.survey.permits}
    opened.run("document.getElementById('map_geoves').focus()")
    passed = []
    for _ in range(80):
        opened.driver.switch_to.active_element.send_keys(Keys.TAB)
        name = opened.run("return document.activeElement.dataset.permit || ''")
        passed.append(name)
        if name == "P-104":
            break
    assert passed[-1] == "P-104"
    assert set(passed) - {""} <= names
    assert "P-104" in opened.run("return document.activeElement.getAttribute('aria-label')")
    opened.driver.switch_to.active_element.send_keys(Keys.ENTER)
    assert opened.run("return document.querySelector('#answer h2').textContent") == "Permit P-104"
    opened.driver.switch_to.active_element.send_keys(Keys.ESCAPE)
    assert opened.run("return document.activeElement.dataset.permit") == "P-104"


def test_too_many_permits_in_sight_are_no_stops(browser, small_results, tmp_path):
    """600 permits at one place and one far off: only the lone one is a stop once the others are out of sight."""
    first = small_results.survey.permits[0]
    crowd = tuple(attrs.evolve(first, name=f"C-{i}") for i in range(600))
    lone = attrs.evolve(first, name="lone", easting=first.easting + 1500.0)
    survey = attrs.evolve(small_results.survey, permits=(*crowd, lone))
    layer = small_results.layers["permits"].iloc[[0] * 601].reset_index(drop=True)
    layer = layer.assign(permit=[one.name for one in survey.permits])
    results = attrs.evolve(small_results, survey=survey, layers={**small_results.layers, "permits": layer})
    browser.open(write_map_page(results, tmp_path / "map.html"))
    browser.wait_for(READY)
    stops = "return [...document.querySelectorAll('.stop')].map(s => s.dataset.permit)"
    assert browser.run(stops) == []
    browser.driver.find_element(By.ID, "wanted").send_keys("lone", Keys.ENTER)
    browser.run("map_geoves.setView(map_geoves.getCenter(), 17, {animate: false})")
    assert browser.run(stops) == ["lone"]


def test_strength_of_the_surface_can_be_turned_down(opened):
    opened.run("const o = document.getElementById('opacity'); o.value = 40; o.dispatchEvent(new Event('input'))")
    assert opened.run("return getComputedStyle(map_geoves.getPane('surface')).opacity") == "0.4"


def test_blank_cells_say_so(opened, small_results):
    grid = small_results.stack.grid
    to_degrees = pyproj.Transformer.from_crs(small_results.region.crs, "EPSG:4326", always_xy=True)
    longitude, latitude = to_degrees.transform(grid.easting[-2], grid.northing[1])
    opened.driver.find_element(By.ID, "wanted").send_keys(f"{latitude:.6f}, {longitude:.6f}", Keys.ENTER)
    assert "No prediction here" in opened.run("return document.getElementById('answer').textContent")

    answer = opened.run("return document.getElementById('answer').textContent")
    assert "The nearest places" in answer
    assert "Estimated, not measured" not in answer


def test_depth_asked_for_is_compared_with_gravel_and_rock(browser, small_results, tmp_path):
    """Gravel from 40 m at the earliest, rock between 60 and 90 m."""
    expected = {
        30.0: "very likely ends above the base here, gravel or rock; rock lies between 60 and 90 m.",
        50.0: "may reach gravel, from 40 m, and ends above rock; rock lies between 60 and 90 m.",
        70.0: "may reach rock; rock lies between 60 and 90 m.",
        95.0: "very likely reaches rock; rock lies between 60 and 90 m.",
        20.0: "no depths are predicted here to compare it with.",
    }
    first = small_results.survey.permits[0]
    permits = tuple(attrs.evolve(first, name=f"Q-{d:.0f}", requested_depth=d, location_accuracy=None) for d in expected)
    layer = small_results.layers["permits"].iloc[[0] * len(permits)].reset_index(drop=True)
    layer = layer.assign(
        permit=[one.name for one in permits], gravel_probability=0.5, gravel_top_depth_p05=40.0,
        bedrock_depth_p05=[60.0] * 4 + [np.nan], bedrock_depth_p95=90.0,
    )  # fmt: skip
    survey = attrs.evolve(small_results.survey, permits=permits)
    told = attrs.evolve(small_results, survey=survey, layers={**small_results.layers, "permits": layer})
    browser.open(write_map_page(told, tmp_path / "map.html"))
    browser.wait_for(READY)
    for permit, (depth, words) in zip(permits, expected.items(), strict=True):
        browser.run("document.getElementById('wanted').value = ''")
        browser.driver.find_element(By.ID, "wanted").send_keys(permit.name, Keys.ENTER)
        answer = browser.run("return document.getElementById('answer').textContent")
        assert f"Asks for {depth:.0f} m: {words}" in answer
        assert "location accuracy: not stated" in answer


def test_a_probability_fades_towards_even_odds(opened):
    """The legend's middle is nearly grey, its ends are not; without doubt in the colour none of it is."""
    choose = (
        "const [surface, mode] = ['surface', 'mode'].map(id => document.getElementById(id));"
        "surface.value = 'deep_gravel_probability'; mode.value = arguments[0];"
        "surface.dispatchEvent(new Event('change'));"
        "return [...document.querySelectorAll('#legend rect')]"
        ".map(r => r.getAttribute('fill').match(/\\d+/g).map(Number))"
    )
    start, middle, end = (np.ptp(opened.run(choose, "both")[i]) for i in (0, 24, 48))
    assert middle < 20
    assert min(start, end) > 60
    assert "not decided" in opened.run("return document.getElementById('legend').textContent")
    assert np.ptp(opened.run(choose, "value")[24]) > 60


def test_one_colour_end_is_deep_rock(small_results):
    """The shallowest depth is painted as the highest rock: light; the deepest as the lowest: dark."""
    ramps = describe_region(small_results)["ramps"]
    named = {one["name"]: one["ramp"] for one in describe_region(small_results)["surfaces"]}
    depth, elevation = (ramps[named[name]] for name in ("bedrock_depth", "bedrock_elevation"))
    assert depth[:6] == elevation[-6:]
    assert depth[-6:] == elevation[:6]


def test_search_finds_a_permit_and_tells_its_column(opened, small_results):
    opened.driver.find_element(By.ID, "wanted").send_keys("p-104", Keys.ENTER)
    answer = opened.run("return document.getElementById('answer').textContent")
    permit = next(one for one in small_results.survey.permits if one.name == "P-104")
    grid, depth = small_results.stack.grid, small_results.stack.surfaces["bedrock_depth"]
    row = int((grid.north - permit.northing) // grid.cell_size)
    column = int((permit.easting - grid.west) // grid.cell_size)
    low, high = depth.p05[row, column], depth.p95[row, column]
    assert answer.startswith("ClosePermit P-104")
    assert f"Rock at {depth.estimate[row, column]:.0f} m, between {low:.0f} and {high:.0f} m." in answer
    assert opened.run("return document.querySelectorAll('#answer .strip').length") == 1


def test_search_takes_coordinates_of_the_region(opened, small_results):
    grid = small_results.stack.grid
    opened.driver.find_element(By.ID, "wanted").send_keys(f"{grid.easting[10]} {grid.northing[30]}", Keys.ENTER)
    title = opened.run("return document.querySelector('#answer h2').textContent")
    assert title == f"At {grid.easting[10]:,.0f}, {grid.northing[30]:,.0f}"


def test_keyboard_opens_a_sounding_and_closes_it(opened):
    marker = opened.driver.find_element(By.CSS_SELECTOR, ".marker[aria-label^='Sounding Larch 4']")
    assert marker.get_attribute("tabindex") == "0"
    opened.run("arguments[0].focus()", marker)
    marker.send_keys(Keys.ENTER)
    assert opened.run("return document.querySelector('#answer h2').textContent") == "Sounding Larch 4"
    words = opened.run("return [...document.querySelectorAll('#answer svg text')].map(t => t.textContent)")
    assert "AB/2 (m)" in words
    assert "apparent resistivity (Ω m)" in words
    # One reading of this sounding was set aside: it is drawn hollow.
    assert opened.run("return document.querySelectorAll('#answer .reading.aside').length") == 1
    opened.driver.switch_to.active_element.send_keys(Keys.ESCAPE)
    assert opened.run("return document.querySelector('#answer h2').textContent") == "What is under a place?"
    assert opened.run("return document.activeElement.getAttribute('aria-label')").startswith("Sounding Larch 4")


def test_enter_on_the_map_asks_at_its_middle(opened):
    opened.driver.find_element(By.ID, "map_geoves").send_keys(Keys.ENTER)
    assert opened.run("return document.querySelector('#answer h2').textContent").startswith("At ")
    assert opened.run("return document.querySelectorAll('#answer li').length") == 3


def test_support_is_said_before_the_numbers(opened):
    """Larch 8 saw the base; beside it, 300 m away, the page says so, and farther off that nothing was measured."""
    opened.driver.find_element(By.ID, "wanted").send_keys("502700 4600200", Keys.ENTER)
    words = "return document.getElementById('answer').textContent"
    assert "Measured nearby: the base (gravel or rock) was seen 300 m away." in opened.run(words)
    opened.run("document.getElementById('wanted').value = ''")
    opened.driver.find_element(By.ID, "wanted").send_keys("501800 4600200", Keys.ENTER)
    far = "Estimated, not measured here: the nearest place that saw the base (gravel or rock) is 950 m away."
    assert far in opened.run(words)


@pytest.mark.parametrize("mode", ["both", "value", "width"])
def test_every_surface_draws_in_every_mode(opened, mode):
    names = opened.run("return [...document.getElementById('surface').options].map(o => o.value)")
    assert set(names) >= {"bedrock_elevation", "deep_gravel_thickness", "shallow_aquifer_resistivity"}
    seen = set()
    for name in names:
        opened.run(
            "for (const [id, value] of [['surface', arguments[0]], ['mode', arguments[1]]]) {"
            "const e = document.getElementById(id); e.value = value; e.dispatchEvent(new Event('change')); }",
            name,
            mode,
        )
        seen.add(opened.run("return document.querySelector('.leaflet-image-layer').src"))
    assert len(seen) == len(names)
    assert opened.complaints() == []


def test_caution_stays_in_sight_and_the_facts_stand_as_tables(opened, small_results):
    opened.run("window.scrollTo(0, document.body.scrollHeight)")
    box = opened.run("const r = document.getElementById('caution').getBoundingClientRect(); return [r.top, r.bottom]")
    assert box[0] == 0
    assert box[1] > 20
    rows = opened.run("return [...document.querySelectorAll('main tbody')].map(t => t.rows.length)")
    survey = small_results.survey
    assert rows == [len(survey.soundings), len(survey.wells), len(survey.permits)]


def test_phone_scrolls_downwards_only(browser, page):
    browser.open(page, width=390)
    browser.wait_for(READY)
    assert browser.run("return document.documentElement.scrollWidth") <= 390
    browser.run("document.querySelector('.marker').click()")
    assert browser.run("return document.documentElement.scrollWidth") <= 390


def test_feet_stay_feet(browser, small_results_in_feet, tmp_path):
    browser.open(write_map_page(small_results_in_feet, tmp_path / "map.html"))
    browser.wait_for(READY)
    browser.driver.find_element(By.ID, "wanted").send_keys("Larch 1", Keys.ENTER)
    words = browser.run("return document.getElementById('answer').textContent")
    assert "AB/2 (US ft)" in words
    ground = small_results_in_feet.stack.ground
    assert np.nanmax(ground) < 500 < np.nanmax(ground) * 3937 / 1200


def test_hostile_names_stay_text(browser, hostile_results, tmp_path):
    browser.open(write_map_page(hostile_results, tmp_path / "map.html"))
    browser.wait_for(READY)
    for kind in ("Sounding", "Well"):
        for marker in browser.driver.find_elements(By.CSS_SELECTOR, f".marker[aria-label^='{kind}']"):
            browser.run("arguments[0].click()", marker)
    for index in range(12):
        browser.run(
            "document.querySelectorAll('main table')[2].rows[arguments[0]].querySelector('button').click()", index + 1
        )
    shown = browser.run("return document.body.textContent")
    for name in (one.name for one in hostile_results.survey.soundings):
        assert name in shown
    assert browser.run("return document.getElementById('title').textContent") == hostile_results.region.name
    assert browser.run("return document.title") == f"{hostile_results.region.name}: map"
    assert browser.run("return document.querySelectorAll('main img, aside img, main script, aside script').length") == 0
    assert browser.complaints() == []


def test_a_heavy_grid_is_thinned_to_middles_of_cells(small_results):
    stack = small_results.stack
    coarse = thin_stack(stack, most=400)
    grid, old = coarse.grid, stack.grid
    every = round(grid.cell_size / old.cell_size)
    assert every == 3
    assert grid.n_rows * grid.n_columns <= 400
    for row, column in ((0, 0), (5, 11), (15, 19)):
        fine_row = int((old.north - grid.northing[row]) // old.cell_size)
        fine_column = int((grid.easting[column] - old.west) // old.cell_size)
        for name, surface in coarse.surfaces.items():
            np.testing.assert_equal(surface.estimate[row, column], stack.surfaces[name].estimate[fine_row, fine_column])
    assert thin_stack(stack) is stack


def test_packed_grid_unpacks_to_within_half_a_step():
    values = np.random.default_rng(1).uniform(280.0, 420.0, (7, 9))
    values[2, 3] = np.nan
    import base64
    import zlib

    packed = encode_grid(values)
    differences = np.frombuffer(zlib.decompress(base64.b64decode(packed["packed"])), "<u2").reshape(7, 9)
    codes = np.cumsum(differences, axis=1, dtype=np.uint16)
    found = np.where(codes == 0, np.nan, packed["low"] + (codes.astype(float) - 1) * packed["step"])
    np.testing.assert_allclose(found, values, atol=packed["step"] / 2 * 1.001)
    assert packed["step"] < 0.003


@pytest.mark.parametrize("crs", ["EPSG:26914", "EPSG:5070"])
def test_lattice_places_cells_as_pyproj_does(crs):
    grid = Grid(west=200_000.0, north=2_100_000.0, cell_size=100.0, n_rows=250, n_columns=300)
    lattice = control_points(grid, crs)
    count = lattice["count"]
    x = np.linspace(*lattice["x"], count)
    y = np.linspace(*lattice["y"], count)
    to_crs = pyproj.Transformer.from_crs("EPSG:3857", crs, always_xy=True)
    random = np.random.default_rng(2)
    i, j = random.integers(0, count - 1, (2, 200))
    u, v = random.uniform(0, 1, (2, 200))
    true = np.stack(to_crs.transform(x[i] + u * (x[1] - x[0]), y[j] + v * (y[1] - y[0])))
    for known, wanted in zip((lattice["easting"], lattice["northing"]), true, strict=True):
        k = np.reshape(known, (count, count))
        guessed = (1 - v) * ((1 - u) * k[j, i] + u * k[j, i + 1]) + v * ((1 - u) * k[j + 1, i] + u * k[j + 1, i + 1])
        assert np.abs(guessed - wanted).max() < 0.06 * grid.cell_size


def test_clicking_a_permit_opens_it_and_not_the_ground_beside(opened):
    opened.run("map_geoves.setZoom(15, {animate: false})")
    dot = opened.run("return [...document.querySelectorAll('.leaflet-permits-pane path')].find(p => {"
                     "const b = p.getBoundingClientRect(); return b.width && document.elementFromPoint("
                     "b.x + b.width / 2, b.y + b.height / 2) === p})")  # fmt: skip
    ActionChains(opened.driver).move_to_element(dot).click().perform()
    assert opened.run("return document.querySelector('#answer h2').textContent").startswith("Permit P-1")


def test_paper_shows_what_the_screen_showed(opened):
    before = opened.run("return map_geoves.getBounds().toBBoxString()").split(",")
    opened.run("window.dispatchEvent(new Event('beforeprint'))")
    assert opened.run("const s = map_geoves.getSize(); return [s.x, s.y]") == [640, 480]
    seen = opened.run("return map_geoves.getBounds().toBBoxString()").split(",")
    assert float(seen[0]) <= float(before[0]) < float(before[2]) <= float(seen[2])
    opened.run("window.dispatchEvent(new Event('afterprint'))")
    assert opened.run("return map_geoves.getSize().x") > 640


def test_contour_numbers_keep_apart_on_a_steep_flank(browser, small_results, tmp_path):
    """Twelve contours 40 m apart. Boxes of the browser's own layout: none that is shown meets another."""
    axis = small_results.layers["valley_axis"].geometry.iloc[0]
    flank = [shapely.affinity.translate(axis, 0.0, 40.0 * i) for i in range(12)]
    contours = geopandas.GeoDataFrame(
        {"elevation": 300.0 + 5.0 * np.arange(12)}, geometry=flank, crs=small_results.region.crs
    )
    layers = {**small_results.layers, "bedrock_contours": contours}
    browser.open(write_map_page(attrs.evolve(small_results, layers=layers), tmp_path / "map.html"))
    browser.wait_for(READY)
    counts = []
    for zoom in (13, 14, 15, 16):
        browser.run("map_geoves.setZoom(arguments[0], {animate: false})", zoom)
        boxes = browser.run(
            "return [...document.querySelectorAll('.contour')].filter(c => c.style.opacity !== '0')"
            ".map(c => {const b = c.querySelector('text').getBoundingClientRect();"
            "return [b.left, b.right, b.top, b.bottom]})"
        )
        counts.append(len(boxes))
        for k, one in enumerate(boxes):
            for other in boxes[:k]:
                assert one[1] < other[0] or other[1] < one[0] or one[3] < other[2] or other[3] < one[2]
    assert 0 < counts[0] < counts[-1] <= 12


@pytest.mark.parametrize("width", [390, 900, 1020, 1300])
def test_the_legend_covers_no_mark(browser, page, width):
    browser.open(page, width=width)
    browser.wait_for(READY)
    meets = browser.run(
        "const meet = (a, b) => a.left < b.right && b.left < a.right && a.top < b.bottom && b.top < a.bottom;"
        "const box = q => document.querySelector(q).getBoundingClientRect();"
        "return ['#legend', '#readout', '.panel'].map(q => meet(box(q), box('#map_geoves')))"
    )
    assert meets == [False, False, False]
    # Nor does it press the map into a corner: 850 pixels are the window's height.
    assert browser.run("return map_geoves.getSize().y") > 400


def test_panel_shows_the_profile_and_says_what_the_report_says(opened, small_results):
    template = small_results.region.template
    column = next(one for one in small_results.interpretation.columns if one.sounding == "Larch 7")
    opened.driver.find_element(By.ID, "wanted").send_keys("Larch 7", Keys.ENTER)
    words = opened.run("return document.getElementById('answer').textContent")
    assert tell_sounding(column, template, "m") in words
    assert tell_opinion(column.pick_opinions[0], "m") in words
    assert opened.run("return document.querySelectorAll('#answer .pick').length") == 1
    # Bands of units, stacked: their outermost edges are the box of the probabilities, 114 pixels wide.
    ends = opened.run(
        "const b = [...document.querySelectorAll('#answer svg.figure path[fill^=\"#\"]')].map(p => p.getBBox());"
        "return [Math.min(...b.map(o => o.x)), Math.max(...b.map(o => o.x + o.width))]"
    )
    np.testing.assert_allclose(ends, [222.0, 336.0], atol=0.2)


def test_a_pick_at_a_well_is_told_in_its_panel(browser, small_results, tmp_path):
    pick = Pick("W-2", "shale", "at", 42.0, 3.0, "A. Reader", "deepened by hand")
    survey = attrs.evolve(small_results.survey, picks=(*small_results.survey.picks, pick))
    browser.open(write_map_page(attrs.evolve(small_results, survey=survey), tmp_path / "map.html"))
    browser.wait_for(READY)
    browser.driver.find_element(By.ID, "wanted").send_keys("W-2", Keys.ENTER)
    words = browser.run("return document.getElementById('answer').textContent")
    assert "Decided by A. Reader: Shale & siltstone at 42 m ± 3 (deepened by hand)." in words
