"""Every file of the demo's delivery, reopened by libraries that did not write it."""

import hashlib
import json
import os
import subprocess
from pathlib import Path

import geopandas
import numpy as np
import pyogrio
import pyproj
import pytest
import rasterio
from lxml import etree
from rio_cogeo import cog_validate

from tests.end_to_end.conftest import DEMO
from tests.project.small_county import read_table

PYTHON_WITH_GDAL = "/usr/bin/python3"  # Debian's, of the package python3-gdal

# The contract's names, written out by hand.
ELEVATIONS = ("bedrock_elevation", "bedrock_elevation_p05", "bedrock_elevation_p95", "deep_gravel_top_elevation")
UNITS = {
    **dict.fromkeys(ELEVATIONS, "m"),
    "bedrock_elevation_standard_error": "m",
    "bedrock_depth": "m",
    "deep_gravel_thickness": "m",
    "deep_gravel_thickness_standard_error": "m",
    "deep_gravel_thickness_p05": "m",
    "deep_gravel_thickness_p95": "m",
    "shallow_aquifer_resistivity": "ohm m",
    "shallow_aquifer_resistivity_p05": "ohm m",
    "shallow_aquifer_resistivity_p95": "ohm m",
    "deep_gravel_probability": "1",
    "shallow_aquifer_probability": "1",
    # beside the contract's
    **{f"{name}{part}": "m" for name in ("cover_thickness", "shallow_aquifer_thickness", "confining_unit_thickness")
       for part in ("", "_standard_error", "_p05", "_p95")},
    **{f"deep_gravel_top_depth{part}": "m" for part in ("", "_p05", "_p95")},
    "support": "1",
}  # fmt: skip
COLUMNS = {
    "soundings": "sounding rms_percent n_layers bedrock_status",
    "model_layers": "sounding layer top_depth bottom_depth top_elevation resistivity resistivity_p05 resistivity_p95 "
    "unit unit_probability",
    "tops": "place kind unit status depth elevation standard_error source",
    "readings": "sounding ab2 mn2 apparent_resistivity used reason",
    "picks": "place unit status depth depth_error interpreter reason",
    "wells": "well",
    "well_intervals": "well",
    "bedrock_contours": "",
    "thickness_contours": "",
    "valley_axis": "",
    "valley_stations": "line order distance elevation standard_error depth slope",
    "gravel_extent": "",
    "sections": "section kind length",
    "doubts": "severity place file row column value expected",
    "permits": "permit covered bedrock_depth bedrock_depth_p05 bedrock_depth_p95 gravel_top_depth gravel_top_depth_p05 "
    "gravel_top_depth_p95 gravel_thickness gravel_thickness_p05 gravel_thickness_p95 gravel_probability",
}
LINES = ("bedrock_contours", "thickness_contours", "valley_axis", "sections")
POINTS = ("soundings", "model_layers", "tops", "readings", "picks", "wells", "well_intervals", "permits",
          "valley_stations", "doubts")  # fmt: skip
GEOMETRIES = dict.fromkeys(POINTS, ("Point",)) | dict.fromkeys(LINES, ("LineString", "MultiLineString"))
GEOMETRIES["gravel_extent"] = ("Polygon", "MultiPolygon")


def run_with_gdal(*arguments):
    """Debian's Python with GDAL's own bindings; skips where they are not there, fails where they must be."""
    probe = [PYTHON_WITH_GDAL, "-c", "import osgeo.gdal, osgeo_utils.samples.validate_gpkg"]
    there = Path(PYTHON_WITH_GDAL).exists() and not subprocess.run(probe, capture_output=True, check=False).returncode
    if not there:
        assert not os.environ.get("CI"), "GDAL's bindings are missing: install Debian's python3-gdal"
        pytest.skip("GDAL's own bindings are not installed (Debian's python3-gdal)")
    return subprocess.run([PYTHON_WITH_GDAL, *arguments], capture_output=True, text=True, check=False)


@pytest.fixture(scope="module")
def rasters(delivery):
    return {path.stem: path for path in (delivery / "surfaces").iterdir()}


def test_every_file_of_the_contract_is_there_and_nothing_is_left_over(delivery):
    names = {path.relative_to(delivery).as_posix() for path in delivery.rglob("*") if path.is_file()}
    expected = {"layers.gpkg", "permit_answers.csv", "map.html", "report.html", "run.json", "metadata/layers.xml"}
    expected |= {f"surfaces/{name}.tif" for name in UNITS} | {f"metadata/{name}.xml" for name in UNITS}
    expected |= {f"styles/{name}.sld" for name in (*UNITS, *COLUMNS)}
    assert names == expected
    assert {path.name for path in delivery.parent.iterdir()} == {"delivery", ".geoves_memory"}


def test_run_json_is_right_about_inputs_and_files(delivery):
    record = json.loads((delivery / "run.json").read_text(encoding="utf-8"))
    files = {path.relative_to(delivery).as_posix(): path for path in delivery.rglob("*") if path.is_file()}
    del files["run.json"]
    digests = {name: hashlib.sha256(path.read_bytes()).hexdigest() for name, path in files.items()}
    assert record["files"] == digests
    for name, digest in record["inputs"].items():
        assert digest == hashlib.sha256((DEMO / name).read_bytes()).hexdigest(), name
    assert len(record["inputs"]) == 9


def test_rasterio_reads_each_raster_as_the_contract_says(rasters):
    assert rasters.keys() == UNITS.keys()
    grids, horizontal = set(), pyproj.CRS("EPSG:26914")
    for name, path in rasters.items():
        with rasterio.open(path) as raster:
            assert (raster.driver, raster.count, raster.dtypes) == ("GTiff", 1, ("float32",)), name
            assert raster.nodata is not None, name
            assert raster.units == (UNITS[name],), name
            assert raster.descriptions[0], name
            cells = raster.read(1, masked=True)
            assert 0.1 < 1.0 - np.mean(np.ma.getmaskarray(cells)) < 1.0, name
            assert np.isfinite(cells.compressed()).all(), name
            crs = pyproj.CRS.from_wkt(raster.crs.to_wkt())
            grids.add((raster.transform, raster.shape))
        if name in ELEVATIONS:
            assert crs.is_compound, name
            assert crs.sub_crs_list[1].equals(pyproj.CRS("EPSG:5703")), name
            crs = crs.sub_crs_list[0]
        assert crs.equals(horizontal), name
    (grid,) = grids
    assert (grid[0].a, grid[0].e) == (100.0, -100.0)


def test_each_raster_is_a_valid_cog(rasters):
    for name, path in rasters.items():
        valid, errors, warnings = cog_validate(path, strict=True, quiet=True)
        assert valid, (name, errors, warnings)


def test_gdal_reads_the_same_as_rasterio(rasters):
    script = (
        "import json, sys\nfrom osgeo import gdal, osr\ngdal.UseExceptions()\nread = {}\n"
        "for path in sys.argv[1:]:\n"
        "    source = gdal.Open(path)\n    band = source.GetRasterBand(1)\n    crs = source.GetSpatialRef()\n"
        "    read[path] = [source.GetDriver().ShortName, source.RasterCount, gdal.GetDataTypeName(band.DataType),\n"
        "        band.GetUnitType(), band.GetDescription(), band.GetNoDataValue(), band.Checksum(),\n"
        "        source.GetMetadataItem('LAYOUT', 'IMAGE_STRUCTURE'), bool(crs.IsProjected()),\n"
        "        bool(crs.IsCompound())]\n"
        "print(json.dumps(read))\n"
    )
    done = run_with_gdal("-c", script, *map(str, rasters.values()))
    assert done.returncode == 0, done.stderr
    read = json.loads(done.stdout)
    for name, path in rasters.items():
        with rasterio.open(path) as raster:
            expected = ["GTiff", 1, "Float32", UNITS[name], raster.descriptions[0], raster.nodata, raster.checksum(1)]
        assert read[str(path)] == [*expected, "COG", True, name in ELEVATIONS], name


def test_geopandas_reads_the_layers_of_the_contract(delivery):
    package = delivery / "layers.gpkg"
    assert {name for name, _ in pyogrio.list_layers(package)} == set(COLUMNS)
    for name, columns in COLUMNS.items():
        layer = geopandas.read_file(package, layer=name)
        assert set(columns.split()) <= set(layer.columns), name
        assert layer.crs.equals(pyproj.CRS("EPSG:26914")), name
        assert len(layer), name
        placed = layer[layer.geometry.notna()]  # a doubt may belong to no place
        assert len(placed) == len(layer) or name == "doubts"
        assert set(placed.geom_type) <= set(GEOMETRIES[name]), name
        assert placed.geometry.is_valid.all(), name


def test_no_row_of_the_tables_is_lost(delivery):
    package = delivery / "layers.gpkg"
    tables = {"soundings": "sounding", "wells": "well", "permits": "permit"}
    for name, key in tables.items():
        typed = [row[key] for row in read_table(DEMO / f"{name}.csv")]
        assert sorted(geopandas.read_file(package, layer=name)[key]) == sorted(typed), name
    typed = read_table(DEMO / "well_logs.csv")
    assert len(geopandas.read_file(package, layer="well_intervals")) == len(typed)
    layers = geopandas.read_file(package, layer="model_layers")
    counted = geopandas.read_file(package, layer="soundings").set_index("sounding").n_layers
    assert layers.groupby("sounding").size().to_dict() == counted.dropna().astype(int).to_dict()


def test_columns_withheld_stay_at_home(delivery):
    owners = {row["owner"] for row in read_table(DEMO / "permits.csv")}
    assert len(owners) > 100
    content = (delivery / "layers.gpkg").read_bytes() + (delivery / "map.html").read_bytes()
    assert not [owner for owner in owners if owner.encode() in content]


def test_gdal_finds_the_geopackage_conformant(delivery):
    done = run_with_gdal("-m", "osgeo_utils.samples.validate_gpkg", "-k", str(delivery / "layers.gpkg"))
    assert done.returncode == 0, done.stdout + done.stderr


def test_metadata_and_styles_are_well_formed_and_carry_the_caution(delivery):
    for path in (delivery / "metadata").iterdir():
        root = etree.parse(path).getroot()
        assert etree.QName(root).localname == "MD_Metadata", path.name
        assert "reconnaissance" in " ".join(root.itertext()).casefold(), path.name
    for path in (delivery / "styles").iterdir():
        assert etree.QName(etree.parse(path).getroot()).localname == "StyledLayerDescriptor", path.name


# The pages, in a browser that reaches no network


def test_map_opens_alone_and_shows_every_sounding(browser, delivery):
    browser.open(delivery / "map.html")
    browser.wait_for("document.body.dataset.ready === 'yes'")
    assert browser.run("return document.getElementById('title').textContent") == "Larkmoor County"
    markers = browser.run(
        "return [...document.querySelectorAll('.marker')].map(m => m.getAttribute('aria-label') || '')"
        ".filter(l => l.startsWith('Sounding '))"
    )
    assert len(markers) == len(read_table(DEMO / "soundings.csv"))
    assert browser.run("return document.querySelectorAll('.leaflet-image-layer').length") == 1
    assert browser.requested_addresses() == [(delivery / "map.html").as_uri()]
    assert browser.complaints() == []


def test_report_opens_alone_and_shows_every_sounding(browser, delivery):
    browser.open(delivery / "report.html")
    names = browser.run("return [...document.querySelectorAll('.strip h3')].map(h => h.textContent)")
    assert names == [row["sounding"] for row in read_table(DEMO / "soundings.csv")]
    assert browser.run("return document.querySelectorAll('.strip svg').length") >= len(names)
    assert "reconnaissance" in browser.run("return document.body.textContent").casefold()
    assert browser.requested_addresses() == [(delivery / "report.html").as_uri()]
    assert browser.complaints() == []
