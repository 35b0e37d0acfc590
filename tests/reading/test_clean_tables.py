"""Clean inputs come out as what they say, whatever their file, unit or coordinates."""

import math

import geopandas as gpd
import numpy as np
import openpyxl
import pyproj
import pytest
import shapely
from numpy.testing import assert_allclose, assert_array_equal

from geoves.reading.readings import geometric_factor


def test_survey_is_what_the_tables_say(folder):
    region, survey, grid = folder.read()
    assert survey.doubts == ()
    first, second = survey.soundings
    assert (first.name, first.easting, first.northing, first.ground_elevation) == ("S1", 601000.0, 4901000.0, 300.5)
    assert (first.array, first.azimuth_deg, first.date, first.note) == ("schlumberger", 45.0, "2024-05-01", "dry")
    assert dict(first.extra) == {"owner": "B. Lark"}
    assert (second.array, second.azimuth_deg) == ("wenner", None)
    (well,) = survey.wells
    assert (well.name, well.total_depth, well.water_level, well.specific_conductance) == ("W1", 50.0, 6.0, 650.0)
    assert [(one.top, one.bottom, one.description, one.unit) for one in well.intervals] == [
        (0.0, 20.0, "till with stones", None),
        (20.0, 50.0, "gray rock", "rock"),
    ]
    (permit,) = survey.permits
    assert (permit.name, permit.use) == ("P1", "domestic")
    assert (permit.requested_depth, permit.location_accuracy) == (40.0, 200.0)
    assert [(pick.place, pick.unit, pick.status, pick.depth, pick.depth_error) for pick in survey.picks] == [
        ("S1", "rock", "at", 42.0, 3.0),
        ("W1", "deep_gravel", "absent", None, None),
    ]
    assert region.template.codes == ("till", "deep_gravel", "rock")
    assert region.template.unit("deep_gravel").depth_to_top == (15.0, 90.0)
    assert (grid.west, grid.north, grid.n_rows, grid.n_columns) == (600000.0, 4903100.0, 31, 31)


def test_curve_is_in_the_order_of_segments_with_unused_readings_kept(folder):
    curve = folder.survey().soundings[0].curve
    assert_array_equal(curve.half_spacing, [10, 20, 20, 50])
    assert_array_equal(curve.potential_half_spacing, [1, 1, 5, 5])
    assert_array_equal(curve.segment, [0, 0, 1, 1])
    assert_array_equal(curve.apparent_resistivity, [100, 90, 88, np.nan])
    assert_array_equal(curve.relative_error, [np.nan, 0.025, 0.03, np.nan])
    assert_array_equal(curve.used, [True, True, True, False])
    assert curve.reason == ("", "", "", "fence")
    assert_array_equal(curve.row, [3, 4, 2, 5])


def test_wenner_spacing_is_one_segment_of_a_symmetric_array(folder):
    # a between all four electrodes: AB = 3 a, MN = a (definition of the array).
    curve = folder.survey().soundings[1].curve
    assert_allclose(curve.half_spacing, [15, 30])
    assert_allclose(curve.potential_half_spacing, [5, 10])
    assert_array_equal(curve.segment, [0, 0])


def test_wenner_given_as_half_spacings_is_the_same(folder):
    curve = folder.survey().soundings[1].curve
    folder.replace("readings.csv", "S2,,,10,", "S2,15,5,,")
    folder.replace("readings.csv", "S2,,,20,", "S2,30,10,,")
    assert folder.survey().soundings[1].curve == curve


# K = pi (a^2 - b^2) / (2 b), computed by hand from the definition of the potential of two point electrodes.
@pytest.mark.parametrize(
    ("half", "potential", "factor"),
    [
        (1.5, 0.5, 6.2832),
        (10.0, 1.0, 155.5088),
        (100.0, 5.0, 3133.7387),
        (100.0, 20.0, 753.9822),
        (200.0, 20.0, 3110.1767),
        (300.0 * 0.3048, 10.0 * 0.3048, 4304.2207),
    ],
)
def test_geometric_factor(half, potential, factor):
    assert geometric_factor(half, potential) == pytest.approx(factor, abs=6e-5)
    # From the four distances of electrodes on a half-space: K = 2 pi / (1/AM - 1/BM - 1/AN + 1/BN).
    near, far = half - potential, half + potential
    assert geometric_factor(half, potential) == pytest.approx(2 * math.pi / (2 / near - 2 / far), rel=1e-12)


def test_wenner_factor_is_two_pi_a():
    # 2 pi a: any textbook's factor of the Wenner array.
    assert geometric_factor(1.5 * 12.0, 0.5 * 12.0) == pytest.approx(2 * math.pi * 12.0, rel=1e-14)


def test_voltage_and_resistance_give_resistivity(folder):
    folder.write(
        "readings.csv",
        "sounding,ab2,mn2,voltage_mv,current_ma,resistance_ohm\n"
        "S1,100,5,12.7643,400,\nS1,200,20,,,0.032153\nS1,300,20,,,0.02\nS2,15,5,20,10,\n",
    )
    curve = folder.survey().soundings[0].curve
    assert_allclose(curve.apparent_resistivity[:2], [100.0, 100.0], rtol=1e-4)


@pytest.mark.parametrize(("unit", "metres"), [("ft", 0.3048), ("us-ft", 1200 / 3937)])
def test_feet_are_read_as_metres(folder, unit, metres):
    _, in_metres, _ = folder.read()
    folder.replace("region.toml", 'length_unit = "m"', f'length_unit = "{unit}"')
    folder.add_table('[input_length_unit]\nground = "m"')
    folder.replace("soundings.csv", "300.5", repr(300.5 / metres))
    folder.replace("wells.csv", ",301,", f",{301 / metres!r},")
    region, survey, grid = folder.read()
    assert survey.doubts == ()
    assert_allclose(survey.soundings[0].curve.half_spacing, np.array([10, 20, 20, 50]) * metres, rtol=1e-15)
    assert survey.soundings[0].ground_elevation == pytest.approx(300.5, rel=1e-12)
    assert survey.soundings[0].easting == 601000.0
    assert survey.soundings[1].ground_elevation == in_metres.soundings[1].ground_elevation
    well = survey.wells[0]
    assert (well.total_depth, well.water_level, well.location_accuracy) == (50 * metres, 6 * metres, 25 * metres)
    assert [one.bottom for one in well.intervals] == [20 * metres, 50 * metres]
    assert survey.permits[0].requested_depth == 40 * metres
    assert (survey.picks[0].depth, survey.picks[0].depth_error) == (42 * metres, 3 * metres)
    assert region.template.unit("deep_gravel").depth_to_top == (15 * metres, 90 * metres)
    assert grid.cell_size == 100.0


def test_survey_foot_and_international_foot_differ_by_two_parts_in_a_million():
    # NIST SP 811, appendix B.6: the US survey foot is 1200/3937 m; a million feet are 0.6096 m apart.
    from geoves.domain.region import METRES

    assert 1e6 * (METRES["us-ft"] - METRES["ft"]) == pytest.approx(0.6096, abs=1e-4)


def test_one_table_in_another_unit(folder):
    folder.add_table('[input_length_unit]\nreadings = "ft"')
    survey = folder.survey()
    assert_allclose(survey.soundings[0].curve.half_spacing, np.array([10, 20, 20, 50]) * 0.3048)
    assert survey.soundings[0].ground_elevation == 300.5


def test_longitude_and_latitude_come_back_as_x_and_y(folder):
    transformer = pyproj.Transformer.from_crs("EPSG:26914", "EPSG:4326", always_xy=True)
    before = folder.survey()
    for name, old in (("soundings.csv", ("601000,4901000", "602000,4902000")), ("wells.csv", ("601500,4901500",))):
        folder.replace(name, ",x,y,", ",lon,lat,")
        for pair in old:
            lon, lat = transformer.transform(*map(float, pair.split(",")))
            folder.replace(name, pair, f"{lon:.9f},{lat:.9f}")
    after = folder.survey()
    for one, other in zip((*before.soundings, *before.wells), (*after.soundings, *after.wells), strict=True):
        assert (other.easting, other.northing) == pytest.approx((one.easting, one.northing), abs=1e-3)


def _as_workbook(folder, path):
    workbook = openpyxl.Workbook()
    workbook.remove(workbook.active)
    for name in ("soundings", "readings", "wells", "well_logs", "permits", "picks"):
        sheet = workbook.create_sheet(name)
        for line in (folder.path / f"{name}.csv").read_text(encoding="utf-8").splitlines():
            sheet.append([_typed(cell) for cell in line.split(",")])
        folder.replace("region.toml", f'"{name}.csv"', f'"{path.name}#{name}"')
    workbook.save(path)


def _typed(cell):
    try:
        return float(cell) if "." in cell else int(cell)
    except ValueError:
        return cell or None


def test_workbook_equals_csv(folder):
    before = folder.survey()
    _as_workbook(folder, folder.path / "field.xlsx")
    assert folder.survey() == before


@pytest.mark.parametrize("separator", [";", "\t", ","])
@pytest.mark.parametrize("mark", ["", "\N{ZERO WIDTH NO-BREAK SPACE}"])
@pytest.mark.parametrize("line_end", ["\n", "\r\n"])
def test_separators_and_byte_order_mark(folder, separator, mark, line_end):
    before = folder.survey()
    for name in ("soundings.csv", "readings.csv", "wells.csv", "well_logs.csv", "permits.csv", "picks.csv"):
        text = (folder.path / name).read_text(encoding="utf-8").replace(",", separator).replace("\n", line_end)
        (folder.path / name).write_bytes((mark + text).encode())
    assert folder.survey() == before


def test_decimal_commas_with_semicolons(folder):
    before = folder.survey()
    text = (folder.path / "readings.csv").read_text(encoding="utf-8").replace(",", ";").replace("2.5", "2,5")
    folder.write("readings.csv", text.replace("S1;10;1", "S1;10,0;1,00"))
    assert folder.survey() == before


def test_blank_rows_and_spaces_do_not_matter_but_are_counted(folder):
    folder.replace("readings.csv", "S1,10,1,,100,", "\n,,,,,,,\n  S1 , 10 ,1,,100,")
    assert_array_equal(folder.survey().soundings[0].curve.row, [5, 6, 2, 7])


def test_headings_in_another_spelling_and_a_quoted_comma(folder):
    before = folder.survey()
    folder.replace("wells.csv", "total_depth,water_level", "Total Depth,WATER_LEVEL")
    assert folder.survey() == before
    folder.replace("well_logs.csv", "till with stones", '"till, with ""stones"""')
    assert folder.survey().wells[0].intervals[0].description == 'till, with "stones"'


@pytest.mark.parametrize("suffix", [".gpkg", ".geojson", ".shp"])
def test_permits_as_points(folder, suffix):
    before = folder.survey()
    columns = {"permit": ["P1"], "use": ["domestic"], "owner": ["nobody"]}
    points = gpd.GeoDataFrame(columns, geometry=[shapely.Point(602500, 4901200)], crs="EPSG:26914")
    points.to_crs("EPSG:4326" if suffix == ".geojson" else "EPSG:26914").to_file(folder.path / f"permits{suffix}")
    folder.replace("region.toml", "permits.csv", f"permits{suffix}")
    (permit,) = folder.survey().permits
    assert (permit.easting, permit.northing) == pytest.approx((602500.0, 4901200.0), abs=0.05)
    assert (permit.name, permit.use, dict(permit.extra)) == ("P1", before.permits[0].use, {"owner": "nobody"})


def test_ground_fills_missing_elevations_and_the_grid(folder):
    # The raster is a plane: 300 m at x = 600 000, 1 m higher each km eastwards, which bilinear weights reproduce.
    _, survey, grid = folder.read()
    assert survey.soundings[1].ground_elevation == pytest.approx(302.0, abs=1e-3)
    expected = np.broadcast_to(300.0 + (grid.easting - 600000.0) / 1000.0, grid.shape)
    assert_allclose(survey.ground.elevation, expected, atol=1e-3)


def test_without_ground_and_boundary_the_grid_is_laid_over_the_places(folder):
    folder.drop_inputs("ground", "boundary", "picks", "permits")
    folder.replace("soundings.csv", "4902000,,", "4902000,302,")
    _, survey, grid = folder.read()
    assert (survey.ground, survey.boundary) == (None, None)
    west, south, east, north = grid.bounds
    assert (west, south, east, north) == (600500.0, 4900500.0, 602500.0, 4902500.0)


def test_feet_crs_keeps_its_unit(folder):
    # EPSG:2225 is in US survey feet (EPSG registry).
    folder.replace("region.toml", "EPSG:26914", "EPSG:2225")
    folder.drop_inputs("ground", "boundary")
    folder.replace("soundings.csv", "4902000,,", "4902000,302,")
    region, survey, grid = folder.read()
    assert region.crs_unit_metres == pytest.approx(1200 / 3937, rel=1e-12)
    assert (survey.soundings[0].easting, grid.cell_size) == (601000.0, 100.0)


def test_step_options_are_kept_as_typed(folder):
    folder.add_table('[interpretation]\nmethod = "each"\nlimit = 2\n[curves]')
    region, _, _ = folder.read()
    assert (region.settings, region.method) == ({"interpretation": {"limit": 2}}, "each")


def test_extra_columns_are_carried_through(folder):
    for name, heading, cell in (
        ("readings.csv", "crew", "east"),
        ("picks.csv", "sheet", "7"),
        ("well_logs.csv", "rig", "9"),
    ):
        lines = (folder.path / name).read_text(encoding="utf-8").splitlines()
        folder.write(name, "\n".join([f"{lines[0]},{heading}", *(f"{line},{cell}" for line in lines[1:])]))
    survey = folder.survey()
    assert [dict(extra) for extra in survey.soundings[0].curve.extra] == [
        *({"crew": "east"},) * 3,
        {"crew": "east", "note": "fence"},
    ]
    assert dict(survey.picks[0].extra) == {"sheet": "7"}
    assert dict(survey.wells[0].intervals[1].extra) == {"rig": "9"}


@pytest.mark.parametrize(
    ("method", "radius"),
    [
        # Corners of squares of 1609.344 m and its halves from their centre: the side over the root of two, by hand.
        ("section", 1138.0),
        ("Quarter", 569.0),
        ("quarter-quarter", 284.5),
        ("QUARTER QUARTER centroid", 284.5),
        ("10-acre", 142.2),
        ("hand-held GPS", None),
        ("", None),
    ],
)
def test_a_permit_at_the_centre_of_a_square_lies_within_its_corners(folder, method, radius):
    table = (
        f"permit,x,y,location_method,location_accuracy\nP1,602500,4901200,{method},\nP2,602500,4901200,{method},40\n"
    )
    folder.write("permits.csv", table)
    first, typed = folder.survey().permits
    assert first.location_method == method
    assert first.location_accuracy == (None if radius is None else pytest.approx(radius, abs=0.05))
    assert typed.location_accuracy == 40.0


def test_named_sections_come_out_in_their_order(folder):
    folder.add_table(
        '[[section]]\nname = "Mill Road"\npoints = [[601000, 4901000], [602000.5, 4901500]]\n'
        '[[section]]\nname = "East"\npoints = [[601000, 4901000], [601500, 4901000], [602000, 4902000]]'
    )
    region, _, _ = folder.read()
    assert [one.name for one in region.sections] == ["Mill Road", "East"]
    assert region.sections[0].points == ((601000.0, 4901000.0), (602000.5, 4901500.0))
    assert len(region.sections[1].points) == 3
