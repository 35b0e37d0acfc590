"""Files that are not what their names say are refused in words; nothing else ever comes out of reading."""

import hashlib
import io
import zipfile

import geopandas as gpd
import numpy as np
import openpyxl
import pytest
import rasterio
import shapely
from affine import Affine
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from geoves.errors import InputError
from geoves.reading import fingerprint_files, read_region, read_survey


def _the_fault(folder):
    (fault,) = folder.faults()
    return fault


@pytest.mark.parametrize(
    ("raw", "row", "says"),
    [
        (b"", 0, "empty"),
        (b"\n\n,,\n", 0, "empty"),
        (b"permit,x,y\nP1,602500,4901200\nP\xfc,1,2\n", 3, "UTF-8"),
        ("permit,x,y\n".encode("utf-16"), 1, "UTF-8"),
        (b"permit,x,y\nP1,1\x00,2\n", 0, "bytes of another kind"),
        (b"PK\x03\x04rest", 0, "workbook"),
        (b'permit,x,y\nP1,"602500,4901200\nP2,1,2\n', 3, "quotation marks"),
        (b'permit,x,y\n"P1"1,602500,4901200\n', 2, "quotation marks"),
    ],
)
def test_a_text_file_that_is_none(folder, raw, row, says):
    (folder.path / "permits.csv").write_bytes(raw)
    fault = _the_fault(folder)
    assert (fault.file, fault.row) == ("permits.csv", row)
    assert says in fault.expected


def _zipped(name, text):
    stream = io.BytesIO()
    with zipfile.ZipFile(stream, "w") as archive:
        archive.writestr(name, text)
    return stream.getvalue()


@pytest.mark.parametrize(
    "raw", [b"", b"permit,x,y\n", b"PK\x03\x04rest", _zipped("a.txt", "a"), _zipped("[Content_Types].xml", "<Types/>")]
)
def test_a_workbook_that_is_none(folder, raw):
    (folder.path / "permits.xlsx").write_bytes(raw)
    folder.replace("region.toml", "permits.csv", "permits.xlsx")
    fault = _the_fault(folder)
    assert fault.file == "permits.xlsx"
    assert "not a workbook" in fault.expected


@pytest.mark.parametrize("name", ["soundings.csv", "readings.csv"])
def test_required_tables_need_rows(folder, name):
    folder.write(name, (folder.path / name).read_text(encoding="utf-8").splitlines()[0])
    told = [(fault.file, fault.row) for fault in folder.faults() if "without rows" in fault.expected]
    assert told == [(name, 1)]


def test_other_tables_may_be_headings_alone(folder):
    folder.write("permits.csv", "permit,x,y\n")
    assert folder.survey().permits == ()


def test_sheets_have_to_be_named(folder):
    workbook = openpyxl.Workbook()
    workbook.active.title = "north"
    workbook.create_sheet("south")
    workbook.save(folder.path / "permits.xlsx")
    folder.replace("region.toml", "permits.csv", "permits.xlsx")
    assert "several sheets (north, south)" in _the_fault(folder).expected
    folder.replace("region.toml", "permits.xlsx", "permits.xlsx#east")
    fault = _the_fault(folder)
    assert (fault.file, "one of north, south" in fault.expected) == ("permits.xlsx#east", True)


def test_rows_of_a_sheet_are_counted_as_the_sheet_counts_them(folder):
    workbook = openpyxl.Workbook()
    sheet = workbook.active
    for column, heading in enumerate(("permit", "x", "y"), start=1):
        sheet.cell(2, column, heading)
    for column, cell in enumerate(("P1", "east", 4901200.0), start=1):
        sheet.cell(7, column, cell)
    workbook.save(folder.path / "permits.xlsx")
    folder.replace("region.toml", "permits.csv", "permits.xlsx")
    fault = _the_fault(folder)
    assert (fault.row, fault.column, fault.value) == (7, "x", "east")


def test_a_date_and_a_formula_error_of_a_sheet(folder):
    import datetime as dt

    workbook = openpyxl.Workbook()
    workbook.active.append(["permit", "x", "y", "requested_depth", "issued"])
    workbook.active.append([17, 602500, 4901200.5, 40, dt.datetime(2024, 5, 1)])  # noqa: DTZ001 - a sheet has no zone
    workbook.save(folder.path / "permits.xlsx")
    folder.replace("region.toml", "permits.csv", "permits.xlsx")
    (permit,) = folder.survey().permits
    assert (permit.name, permit.northing, dict(permit.extra)) == ("17", 4901200.5, {"issued": "2024-05-01"})
    workbook.active["D2"] = "#DIV/0!"
    workbook.save(folder.path / "permits.xlsx")
    fault = _the_fault(folder)
    assert (fault.row, fault.column, fault.value) == (2, "requested_depth", "#DIV/0!")


@pytest.mark.parametrize("name", ["permits.xls", "permits.pdf", "permits"])
def test_a_table_of_another_kind(folder, name):
    folder.write(name, "permit,x,y\n")
    folder.replace("region.toml", "permits.csv", name)
    assert ".csv" in _the_fault(folder).expected


@pytest.mark.parametrize("name", ["boundary.gpkg", "boundary.geojson", "boundary.shp"])
def test_a_vector_file_that_is_none(folder, name):
    folder.write(name, "nothing of the kind")
    folder.replace("region.toml", "boundary.gpkg", name)
    fault = _the_fault(folder)
    assert (fault.file, fault.row) == (name, 0)


def _write_boundary(folder, shapes, crs="EPSG:26914", name="boundary.shp"):
    gpd.GeoDataFrame({"n": range(len(shapes))}, geometry=shapes, crs=crs).to_file(folder.path / name)
    folder.replace("region.toml", "boundary.gpkg", name)


def test_a_boundary_has_to_enclose_something(folder):
    _write_boundary(folder, [shapely.LineString([(601000, 4901000), (602000, 4902000)])])
    assert "found LineString" in _the_fault(folder).expected


@pytest.mark.filterwarnings("ignore:'crs' was not provided")
def test_a_shapefile_without_crs(folder):
    _write_boundary(folder, [shapely.box(600000, 4900000, 603000, 4903000)], crs=None)
    assert ".prj" in _the_fault(folder).expected


def test_a_boundary_in_degrees_of_two_parts_one_crossing_itself(folder):
    bow = shapely.Polygon([(600000, 4900000), (603000, 4903000), (603000, 4900000), (600000, 4903000)])
    parts = gpd.GeoSeries([bow, shapely.box(600000, 4900000, 603000, 4903000)], crs="EPSG:26914").to_crs("EPSG:4326")
    _write_boundary(folder, list(parts), crs="EPSG:4326", name="boundary.geojson")
    survey = folder.survey()
    assert survey.boundary.area == pytest.approx(9e6, rel=1e-3)
    assert any("mended" in doubt.expected for doubt in survey.doubts)


def test_layers_have_to_be_named(folder):
    for layer in ("north", "south"):
        square = gpd.GeoDataFrame(geometry=[shapely.box(600050, 4900050, 603050, 4903050)], crs="EPSG:26914")
        square.to_file(folder.path / "two.gpkg", layer=layer)
    folder.replace("region.toml", "boundary.gpkg", "two.gpkg")
    assert "several layers" in _the_fault(folder).expected
    folder.replace("region.toml", "two.gpkg", "two.gpkg#south")
    assert folder.survey().boundary.area == pytest.approx(9e6)


def test_permits_without_a_place_or_as_parcels(folder):
    shapes = [shapely.box(602400, 4901100, 602600, 4901300), None]
    parcels = gpd.GeoDataFrame({"permit": ["P1", "P2"]}, geometry=shapes, crs="EPSG:26914")
    parcels.to_file(folder.path / "permits.gpkg")
    folder.replace("region.toml", "permits.csv", "permits.gpkg")
    assert {(fault.row, fault.column) for fault in folder.faults()} == {(2, "x"), (2, "y")}
    parcels.iloc[:1].to_file(folder.path / "permits.gpkg")
    survey = folder.survey()
    assert [(doubt.row, doubt.column) for doubt in survey.doubts] == [(1, "geometry")]
    assert shapes[0].contains(shapely.Point(survey.permits[0].easting, survey.permits[0].northing))


def _write_raster(folder, values, crs="EPSG:26914", west=599000.0, north=4904000.0, size=100.0, nodata=None):
    values = np.atleast_3d(values.T).T
    count, height, width = values.shape
    profile = {"driver": "GTiff", "count": count, "height": height, "width": width, "dtype": values.dtype}
    transform = Affine(size, 0, west, 0, -size, north)
    with rasterio.open(
        folder.path / "ground.tif", "w", crs=crs, transform=transform, nodata=nodata, **profile
    ) as raster:
        raster.write(values)


def test_a_raster_that_is_none_or_unfit(folder):
    folder.replace("soundings.csv", "4902000,,", "4902000,302,")
    folder.write("ground.tif", "no raster")
    assert "not a raster" in _the_fault(folder).expected
    _write_raster(folder, np.full((3, 50, 50), 300, np.float32))
    assert "3 bands" in _the_fault(folder).expected
    _write_raster(folder, np.full((50, 50), 300, np.float32), crs=None)
    assert "does not say its CRS" in _the_fault(folder).expected
    _write_raster(folder, np.full((50, 50), 300, np.float32), west=900000.0)
    assert "covers" in _the_fault(folder).expected
    values = np.full((50, 50), 300, np.float32)
    values[10, 30] = -9999
    _write_raster(folder, values)
    fault = _the_fault(folder)
    assert (fault.value, "nodata" in fault.expected) == ("-9999", True)


def test_a_hole_in_the_ground_stays_a_hole(folder):
    values = np.full((50, 50), 300, np.int16)
    values[20:25, 20:25] = -32768
    _write_raster(folder, values, nodata=-32768)
    survey = folder.survey()
    elevation = survey.ground.elevation
    assert_allclose(elevation[np.isfinite(elevation)], 300.0)
    assert 9 <= np.isnan(elevation).sum() <= 25
    (doubt,) = survey.doubts
    assert "no elevation in" in doubt.expected


def test_whole_numbers_are_resampled_between(folder):
    # 200 m cells of whole metres that rise by 1 m each: 100 m cells lie at halves between them.
    values = np.broadcast_to(300 + np.arange(25, dtype=np.int16), (25, 25))
    _write_raster(folder, values.copy(), west=599000.0, size=200.0, nodata=-32768)
    _, survey, grid = folder.read()
    expected = np.broadcast_to(300.0 + (grid.easting - 599100.0) / 200.0, grid.shape)
    assert_allclose(survey.ground.elevation, expected, atol=1e-3)
    assert survey.soundings[1].ground_elevation == pytest.approx(300.0 + (602000.0 - 599100.0) / 200.0, abs=1e-9)


def test_ground_in_another_crs_and_in_feet(folder):
    _write_raster(folder, np.full((60, 60), 1000, np.float32), crs="EPSG:4326", west=-97.8, north=44.5, size=0.02)
    folder.add_table('[input_length_unit]\nground = "ft"')
    folder.replace("soundings.csv", ",300.5,", ",304.8,")
    folder.replace("wells.csv", ",301,", ",305,")
    survey = folder.survey()
    assert survey.doubts == ()
    assert_allclose(survey.ground.elevation, 304.8, rtol=1e-6)
    assert survey.soundings[1].ground_elevation == pytest.approx(304.8)


def test_the_unit_that_a_raster_states_is_compared(folder):
    with rasterio.open(folder.path / "ground.tif", "r+") as raster:
        raster.units = ("US survey foot",)
    (doubt,) = folder.doubts()
    assert (doubt.file, doubt.value) == ("ground.tif", "US survey foot")


def test_without_raster_every_place_needs_its_elevation(folder):
    folder.drop_inputs("ground")
    fault = _the_fault(folder)
    assert (fault.file, fault.row, fault.column) == ("soundings.csv", 3, "ground_elevation")


def test_fingerprints_are_those_of_the_bytes(folder):
    region = read_region(folder.region_file)
    prints = fingerprint_files(region)
    assert set(prints) == {"region.toml", *region.typed_inputs.values()}
    for name, fingerprint in prints.items():
        assert fingerprint == hashlib.sha256((folder.path / name).read_bytes()).hexdigest()


def test_fingerprints_take_in_what_belongs_to_a_shapefile(folder):
    _write_boundary(folder, [shapely.box(600050, 4900050, 603050, 4903050)])
    prints = fingerprint_files(read_region(folder.region_file))
    assert {"boundary.shp", "boundary.dbf", "boundary.shx", "boundary.prj"} <= set(prints)


@pytest.mark.parametrize(
    "text", [b"", b"[", b"\xff", b"a = 1", b"[[region]]", b"unit = 3", b"[region]\n[inputs]", b"[" * 3000]
)
def test_a_region_file_that_is_none(folder, text):
    folder.region_file.write_bytes(text)
    assert all(fault.file.endswith("region.toml") for fault in folder.faults())


def test_a_region_file_that_is_missing_or_a_folder(tmp_path):
    for path in (tmp_path, tmp_path / "region.toml"):
        with pytest.raises(InputError) as raised:
            read_region(path)
        assert str(path) in raised.value.lines[0]


_CELLS = st.one_of(
    st.sampled_from(["S1", "S2", "", "0", "-1", "1e400", "1e-300", "nan", "3,5", "1;2", '"', "'", "=A1", "10", "2.5"]),
    st.text(max_size=6),
    st.floats().map(str),
)
_TABLES_AT_RANDOM = st.lists(st.lists(_CELLS, max_size=9), max_size=5).map(
    lambda rows: "\n".join(",".join(row) for row in rows).encode("utf-8", "surrogatepass")
)
_NAMES = st.sampled_from(["soundings.csv", "readings.csv", "wells.csv", "well_logs.csv", "permits.csv", "picks.csv"])


def _lines_of_faults(folder):
    """The lines of an InputError, none where nothing is raised; any other error fails the test."""
    try:
        read_survey(read_region(folder.region_file))
    except InputError as error:
        return error.lines or ("an error without a line:\n",)
    return ()


@settings(max_examples=80, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(name=_NAMES, body=st.one_of(_TABLES_AT_RANDOM, st.binary(max_size=60)), keep_headings=st.booleans())
def test_garbage_raises_nothing_but_input_errors(folder, name, body, keep_headings):
    path = folder.path / name
    clean = path.read_bytes()
    path.write_bytes(clean.split(b"\n")[0] + b"\n" + body if keep_headings else body)
    lines = _lines_of_faults(folder)
    path.write_bytes(clean)
    assert all(line.isprintable() for line in lines)


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    line=st.integers(0, 34),
    text=st.one_of(
        st.text(max_size=20),
        st.sampled_from(["crs = '+proj=utm +zone=14'", "cell_size = nan", "code = '\\u0000'", "wells = '\\u0000.csv'",
                         "resistivity = [[1], 2]", "role = 3", "log_terms = [1]", "crs = ''", "ground = 'wells.csv'"]),
    ),
)  # fmt: skip
def test_garbage_in_region_file_raises_nothing_but_input_errors(folder, line, text):
    clean = folder.region_file.read_text(encoding="utf-8")
    lines = clean.splitlines()
    lines[line] = text
    folder.region_file.write_bytes("\n".join(lines).encode("utf-8", "surrogatepass"))
    lines = _lines_of_faults(folder)
    folder.write("region.toml", clean)
    assert all(line.isprintable() for line in lines)


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(changes=st.lists(st.tuples(st.floats(0, 1, exclude_max=True), st.integers(0, 255)), min_size=1, max_size=8))
def test_a_damaged_workbook_raises_nothing_but_input_errors(folder, changes):
    workbook = openpyxl.Workbook()
    workbook.active.append(["permit", "x", "y"])
    workbook.active.append(["P1", 602500, 4901200])
    stream = io.BytesIO()
    workbook.save(stream)
    raw = bytearray(stream.getvalue())
    for place, byte in changes:
        raw[int(place * len(raw))] = byte
    (folder.path / "permits.xlsx").write_bytes(raw)
    text = folder.region_file.read_text(encoding="utf-8")
    folder.write("region.toml", text.replace("permits.csv", "permits.xlsx"))
    assert all(line.startswith("permits.xlsx") for line in _lines_of_faults(folder))
