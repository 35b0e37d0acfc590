"""Files that promise too much or want to be run: faults in words, in seconds, in bounded memory."""

import datetime as dt
import os
import re
import resource
import sqlite3
import subprocess
import sys
import zipfile
from pathlib import Path

import openpyxl
import pytest
import rasterio
from affine import Affine

from geoves.errors import InputError
from geoves.reading import read_region, read_survey
from tests.reading.region_folder import write_clean_folder

# Bytes of address space for a call: a clean folder needs some 2 GB of it, mostly libraries that are mapped, not held.
MEMORY = 6 * 2**30
pytestmark = pytest.mark.skipif(os.name == "nt", reason="limits of memory are of POSIX")


def check(folder):
    """Exit status and lines of `geoves check`, within the limits and without a traceback."""
    environment = os.environ | {"PYTHONPATH": str(Path(__file__).parents[2]), "OPENBLAS_NUM_THREADS": "1"}
    call = [sys.executable, "-m", "geoves.cli.main", "check", str(folder / "region.toml")]
    done = subprocess.run(
        call, env=environment, capture_output=True, text=True, check=False, timeout=100, preexec_fn=_limit_memory
    )
    assert "Traceback" not in done.stderr
    assert "An error of geoves's own" not in done.stderr, done.stderr
    return done.returncode, done.stderr.splitlines()


def _limit_memory():
    resource.setrlimit(resource.RLIMIT_AS, (MEMORY, MEMORY))


@pytest.fixture
def county(tmp_path):
    """Writes the clean folder with one of its files in the format told."""

    def write(file):
        write_clean_folder(tmp_path, file)
        return tmp_path

    return write


def rewrite_archive(path, name, content):
    """Replace one member of a zip archive."""
    with zipfile.ZipFile(path) as archive:
        members = {member: archive.read(member) for member in archive.namelist()}
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        for member, held in (members | {name: content}).items():
            archive.writestr(member, held)


def is_refused(folder, file, words):
    status, lines = check(folder)
    assert status == 2
    assert any(line.startswith(file) and words in line for line in lines), lines
    return True


def test_a_clean_folder_is_read_within_the_same_limits(county):
    assert check(county("readings.xlsx"))[0] == 0
    assert check(county("permits.gpkg"))[0] == 0


# Workbooks


SHEET = (
    '<?xml version="1.0"?>{}<worksheet xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main">{}</worksheet>'
)


def test_entities_that_multiply_are_not_followed(county):
    """The billion laughs (CWE-776): ten entities, each ten of the one before."""
    folder = county("readings.xlsx")
    entities = "".join(f'<!ENTITY a{n} "{f"&a{n - 1};" * 10}">' for n in range(1, 10))
    bomb = SHEET.format(
        f'<!DOCTYPE bomb [<!ENTITY a0 "ha">{entities}]>',
        '<sheetData><row r="1"><c r="A1" t="inlineStr"><is><t>&a9;</t></is></c></row></sheetData>',
    )
    rewrite_archive(folder / "readings.xlsx", "xl/worksheets/sheet1.xml", bomb)
    assert is_refused(folder, "readings.xlsx", "")


def test_an_archive_that_unpacks_to_gigabytes_is_refused(county):
    folder = county("readings.xlsx")
    row = b'<row r="1"><c r="A1"><v>1</v></c></row>'
    with zipfile.ZipFile(folder / "readings.xlsx") as archive:
        members = {name: archive.read(name) for name in archive.namelist()}
    with zipfile.ZipFile(folder / "readings.xlsx", "w", zipfile.ZIP_DEFLATED, compresslevel=1) as archive:
        for name, held in members.items():
            if name != "xl/worksheets/sheet1.xml":
                archive.writestr(name, held)
        with archive.open("xl/worksheets/sheet1.xml", "w", force_zip64=True) as sheet:
            sheet.write(SHEET.format("", "<sheetData>").partition("</worksheet>")[0].encode())
            for _ in range(160):
                sheet.write(row * (8 * 2**20 // len(row)))
    assert is_refused(folder, "readings.xlsx", "MB when unpacked")


def test_a_cell_at_the_far_end_of_a_sheet_promises_no_rows(county):
    """A sheet has 1 048 576 rows and 16 384 columns (ECMA-376); one cell there must not fill those between."""
    folder = county("readings.xlsx")
    workbook = openpyxl.load_workbook(folder / "readings.xlsx")
    workbook.active["XFD1048576"] = 1
    workbook.save(folder / "readings.xlsx")
    assert is_refused(folder, "readings.xlsx", "")


def test_merged_cells_formulas_and_dates_are_told_cell_by_cell(county):
    folder = county("readings.xlsx")
    workbook = openpyxl.load_workbook(folder / "readings.xlsx")
    sheet = workbook.active
    sheet["E4"] = "=1+1"  # never computed: no value is stored with it
    sheet["E2"] = dt.date(2024, 10, 3)
    sheet.merge_cells("A2:A3")
    workbook.save(folder / "readings.xlsx")
    status, lines = check(folder)
    assert status == 2
    assert any("row 4, apparent_resistivity (S1): empty" in line for line in lines), lines
    assert any("row 2" in line and "'2024-10-03'; not a number" in line for line in lines), lines
    assert any("row 3, sounding" in line for line in lines), lines  # merged away


# Tables


@pytest.mark.parametrize("name", ["soundings.csv", "readings.csv"])
def test_a_table_of_gigabytes_is_refused_before_it_is_read(county, name):
    folder = county("region.toml")
    with (folder / name).open("ab") as stream:
        stream.truncate(3 * 2**30)  # a hole: no room on the disk
    assert is_refused(folder, name, "MB; expected a table of at most")


def test_a_million_cells_in_a_row_are_a_fault(county):
    folder = county("region.toml")
    with (folder / "readings.csv").open("a", encoding="utf-8") as stream:
        stream.write("S1" + "," * 2_000_000 + "\n")
    assert is_refused(folder, "readings.csv", "row 8")


@pytest.mark.parametrize("path", ["/dev/zero", "/dev/stdin", ".", "missing.csv", "\\u0000", "/proc/self/mem"])
@pytest.mark.parametrize("name", ["readings", "ground", "boundary"])
def test_a_path_that_leads_to_no_file_is_told(county, name, path):
    folder = county("region.toml")
    text = (folder / "region.toml").read_text("utf-8")
    lines = [f'{name} = "{path}"' if line.startswith(f"{name} =") else line for line in text.splitlines()]
    (folder / "region.toml").write_text("\n".join(lines), encoding="utf-8")
    with pytest.raises(InputError, match=f"{name}|{re.escape(path)}"):
        read_survey(read_region(folder / "region.toml"))


@pytest.mark.parametrize("path", ["/dev/zero", "/dev/null", "."])
def test_a_region_file_that_is_a_device_or_a_folder_is_told(tmp_path, path):
    (tmp_path / "region.toml").symlink_to(path)
    status, lines = check(tmp_path)
    assert status == 2
    assert lines


# GeoPackages


ENDLESS = "WITH RECURSIVE n(fid) AS (SELECT 1 UNION ALL SELECT fid + 1 FROM n) SELECT fid, NULL AS geom FROM n"


@pytest.mark.parametrize("file", ["permits.gpkg", "boundary.gpkg"])
def test_a_layer_that_is_an_endless_view_is_not_asked(county, file):
    folder = county(file)
    layer = file.partition(".")[0]
    with sqlite3.connect(folder / file) as connection:
        connection.execute(f"ALTER TABLE {layer} RENAME TO hidden")
        connection.execute(f"CREATE VIEW {layer} AS {ENDLESS}")
    text = (folder / "region.toml").read_text("utf-8")
    (folder / "region.toml").write_text(text.replace(f'"{file}"', f'"{file}#{layer}"'), encoding="utf-8")
    assert is_refused(folder, file, "a view")


def test_a_catalogue_that_is_an_endless_view_is_not_asked(county):
    folder = county("permits.gpkg")
    with sqlite3.connect(folder / "permits.gpkg") as connection:
        connection.execute("ALTER TABLE gpkg_contents RENAME TO hidden")
        connection.execute(
            "CREATE VIEW gpkg_contents AS WITH RECURSIVE n(i) AS (SELECT 1 UNION ALL SELECT i + 1 FROM n) "
            "SELECT 'permits' || i AS table_name, 'features' AS data_type, 'x' AS identifier FROM n"
        )
    assert is_refused(folder, "permits.gpkg", "a view")


def test_sql_in_names_is_a_name(county):
    folder = county("permits.gpkg")
    text = (folder / "region.toml").read_text("utf-8")
    hostile = 'permits.gpkg#x"; DROP TABLE permits; --'.replace('"', '\\"')
    (folder / "region.toml").write_text(text.replace("permits.gpkg", hostile), encoding="utf-8")
    assert check(folder)[0] == 2
    with sqlite3.connect(folder / "permits.gpkg") as connection:
        assert connection.execute("SELECT count(*) FROM permits").fetchone() == (1,)


# Rasters


def write_sparse(path, cells):
    """A GeoTIFF that claims cells x cells and holds none: tiles that nobody wrote take no room."""
    size = 5000.0 / cells
    profile = {
        "driver": "GTiff", "count": 1, "dtype": "float32", "height": cells, "width": cells, "crs": "EPSG:26914",
        "nodata": -9999.0, "transform": Affine(size, 0, 599_000, 0, -size, 4_904_000), "tiled": True,
        "blockxsize": 16384, "blockysize": 16384, "SPARSE_OK": True, "BIGTIFF": "YES",
    }  # fmt: skip
    with rasterio.open(path, "w", **profile):
        pass


def test_a_raster_that_claims_a_trillion_cells_takes_no_more_than_is_asked(county):
    folder = county("ground.tif")
    write_sparse(folder / "ground.tif", 1_000_000)
    assert is_refused(folder, "ground.tif", "")


def test_a_grid_of_a_trillion_cells_is_a_fault(county):
    folder = county("region.toml")
    text = (folder / "region.toml").read_text("utf-8")
    (folder / "region.toml").write_text(text.replace("cell_size = 100.0", "cell_size = 0.003"), encoding="utf-8")
    assert is_refused(folder, "region.toml", "cell_size")


def test_a_virtual_raster_leads_nowhere(county):
    """A VRT may name other files and addresses: it is not a GeoTIFF, and not followed."""
    folder = county("ground.tif")
    vrt = """<VRTDataset rasterXSize="10" rasterYSize="10"><SRS>EPSG:26914</SRS>
    <VRTRasterBand dataType="Float32" band="1"><SimpleSource>
    <SourceFilename>/vsicurl/http://127.0.0.1:9/a.tif</SourceFilename></SimpleSource></VRTRasterBand></VRTDataset>"""
    (folder / "ground.tif").write_text(vrt, encoding="utf-8")
    assert is_refused(folder, "ground.tif", "not a raster that can be read")


def test_a_virtual_layer_leads_nowhere(county):
    """An OGR VRT names other files: what begins so is no GeoJSON, whatever its name."""
    folder = county("permits.geojson")
    (folder / "permits.geojson").write_text(
        '<OGRVRTDataSource><OGRVRTLayer name="boundary"><SrcDataSource>boundary.gpkg</SrcDataSource></OGRVRTLayer>'
        "</OGRVRTDataSource>",
        encoding="utf-8",
    )
    assert is_refused(folder, "permits.geojson", "not a GeoJSON file")


@pytest.mark.parametrize("file", ["readings.xlsx", "permits.gpkg", "ground.tif", "boundary.gpkg", "permits.geojson"])
@pytest.mark.parametrize("share", [0.0, 0.4, 0.95])
def test_a_file_that_ends_too_soon_is_told(county, file, share):
    folder = county(file)
    whole = (folder / file).read_bytes()
    (folder / file).write_bytes(whole[: int(share * len(whole))])
    with pytest.raises(InputError, match=file):
        read_survey(read_region(folder / "region.toml"))
