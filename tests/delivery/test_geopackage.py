"""The GeoPackage, read by pyogrio and sqlite and judged by GDAL's own conformance script."""

import os
import sqlite3
import subprocess
from contextlib import closing
from pathlib import Path

import attrs
import geopandas
import numpy as np
import pyogrio
import pytest
from lxml import etree
from owslib.iso import MD_Metadata

from geoves.delivery.geopackage import write_geopackage
from geoves.delivery.layer_ranges import find_layer_ranges
from geoves.errors import DeliveryError
from tests.delivery.joint_county import MOVED, POOR, join

TAGS = {"software": "geoves", "date": "2026-06-01T09:30:00Z"}

# The contract's layers with the columns that it names, written out by hand, and the tables that have no layer there.
CONTRACT = {
    "soundings": ["sounding", "rms_percent", "n_layers", "bedrock_status"],
    "model_layers": [
        "sounding", "layer", "top_depth", "bottom_depth", "top_elevation", "resistivity", "resistivity_p05",
        "resistivity_p95", "unit", "unit_probability",
    ],
    "tops": ["place", "kind", "unit", "status", "depth", "elevation", "standard_error", "source"],
    "readings": ["sounding", "ab2", "mn2", "apparent_resistivity", "used", "reason"],
    "picks": ["place", "unit", "status", "depth", "depth_error", "interpreter", "reason"],
    "wells": ["well"],
    "well_intervals": ["well", "description", "unit", "confidence"],
    "bedrock_contours": ["elevation"],
    "thickness_contours": ["thickness"],
    "valley_axis": ["length"],
    "valley_stations": ["line", "distance", "elevation", "slope"],
    "gravel_extent": ["likelihood"],
    "sections": ["section", "kind", "length"],
    "doubts": ["place", "file", "row", "column", "value", "expected"],
    "permits": [
        "permit", "covered", "bedrock_depth", "bedrock_depth_p05", "bedrock_depth_p95", "gravel_top_depth",
        "gravel_top_depth_p05", "gravel_top_depth_p95", "gravel_thickness", "gravel_thickness_p05",
        "gravel_thickness_p95", "gravel_probability",
    ],
}  # fmt: skip


@pytest.fixture(scope="module")
def package(small_results, tmp_path_factory):
    return write_geopackage(small_results, tmp_path_factory.mktemp("package") / "layers.gpkg", TAGS)


def query(path, sql):
    with closing(sqlite3.connect(path)) as database:
        return database.execute(sql).fetchall()


def run_with_gdal(*arguments):
    """Run Debian's Python, which has GDAL's own bindings; skip where they are not there, fail where they must be."""
    python = "/usr/bin/python3"
    there = Path(python).exists()
    if there:
        probe = [python, "-c", "import osgeo_utils.samples.validate_gpkg"]
        there = subprocess.run(probe, capture_output=True, check=False).returncode == 0
    if not there:
        assert not os.environ.get("CI"), "GDAL's validate_gpkg is missing: install Debian's python3-gdal"
        pytest.skip("GDAL's validate_gpkg is not installed (Debian's python3-gdal)")
    return subprocess.run([python, *arguments], capture_output=True, text=True, check=False)


def validate(path):
    return run_with_gdal("-m", "osgeo_utils.samples.validate_gpkg", "-k", str(path))


def test_layers_and_columns_are_the_contracts(package, small_results):
    assert {name for name, _ in pyogrio.list_layers(package)} == set(CONTRACT)
    for name, columns in CONTRACT.items():
        layer = geopandas.read_file(package, layer=name)
        assert set(columns) <= set(layer.columns), name
        assert layer.crs.equals(small_results.region.crs), name
    assert len(geopandas.read_file(package, layer="soundings")) == 8
    assert len(geopandas.read_file(package, layer="model_layers")) == 8 * 5
    assert len(geopandas.read_file(package, layer="well_intervals")) == 11


def test_gdal_finds_it_conformant(package):
    result = validate(package)
    assert result.returncode == 0, result.stdout + result.stderr


def test_gdal_finds_a_planted_fault(package, tmp_path):
    spoilt = tmp_path / "spoilt.gpkg"
    spoilt.write_bytes(package.read_bytes())
    with closing(sqlite3.connect(spoilt)) as database, database:
        database.execute("UPDATE gpkg_data_columns SET column_name = 'no_such_column' WHERE column_name = 'layer'")
    assert validate(spoilt).returncode != 0


def test_every_column_has_a_title_and_lengths_say_their_unit(package):
    rows = query(package, "SELECT table_name, column_name, title FROM gpkg_data_columns")
    for name in CONTRACT:
        titled = {column: title for table, column, title in rows if table == name}
        columns = [row[1] for row in query(package, f"PRAGMA table_info({name})")]
        assert set(titled) == set(columns) - {"fid", "geom"}, name
        assert all(titled.values())
    assert query(package, "SELECT title FROM gpkg_data_columns WHERE column_name = 'top_elevation'") == [
        ("Elevation of top (m), EPSG:5703",)
    ]


def test_coded_columns_have_their_domains_and_keep_to_them(package, small_results):
    domains = query(
        package,
        """SELECT table_name, column_name, value FROM gpkg_data_columns
        JOIN gpkg_data_column_constraints USING (constraint_name) WHERE constraint_type = 'enum'""",
    )
    codes = {}
    for table, column, value in domains:
        codes.setdefault((table, column), set()).add(value)
    assert codes["soundings", "bedrock_status"] == {"seen", "not_distinct", "deeper_than"}
    assert codes["tops", "status"] == {"at", "below", "absent"}
    assert codes["model_layers", "unit"] == set(small_results.region.template.codes)
    for (table, column), allowed in codes.items():
        found = {row[0] for row in query(package, f"SELECT DISTINCT {column} FROM {table}")}  # noqa: S608
        assert found - {None} <= allowed, (table, column)
    assert query(package, "SELECT count(*) FROM gpkg_extensions WHERE extension_name = 'gpkg_schema'") == [(2,)]


def test_gdal_reads_the_value_domains(package):
    script = (
        "import sys; from osgeo import gdal; gdal.UseExceptions(); d = gdal.OpenEx(sys.argv[1]);"
        "f = d.GetLayerByName('tops').GetLayerDefn(); f = f.GetFieldDefn(f.GetFieldIndex('status'));"
        "print(f.GetDomainName(), *sorted(d.GetFieldDomain(f.GetDomainName()).GetEnumeration()))"
    )
    result = run_with_gdal("-c", script, str(package))
    assert result.stdout.split() == ["tops_status", "absent", "at", "below"], result.stderr


def test_metadata_row_is_an_iso_record(package):
    ((text, uri),) = query(package, "SELECT metadata, md_standard_uri FROM gpkg_metadata")
    assert uri == "http://www.isotc211.org/2005/gmd"
    assert MD_Metadata(etree.fromstring(text.encode())).identification[0].title == "Layers, Larkmoor Mini"
    assert {row[0] for row in query(package, "SELECT last_change FROM gpkg_contents")} == {"2026-06-01T09:30:00.000Z"}


def test_values_are_the_results_own(package, small_results):
    layers = geopandas.read_file(package, layer="model_layers")
    first = layers[layers.sounding == "Larch 1"].sort_values("layer")
    found = small_results.inverted[0]
    assert np.allclose(first.resistivity, found.model.resistivity)
    assert np.allclose(first.top_depth, found.model.top_depth, atol=5e-4)
    assert np.isnan(first.bottom_depth.iloc[-1])
    assert np.allclose(
        first.top_elevation, small_results.survey.soundings[0].ground_elevation - first.top_depth, atol=1e-3
    )
    soundings = geopandas.read_file(package, layer="soundings").set_index("sounding")
    assert soundings.bedrock_status["Larch 5"] == "deeper_than"
    assert soundings.n_set_aside["Larch 4"] == 1
    assert soundings.n_set_aside["Larch 6"] == 1
    assert soundings.remarks["Larch 6"].startswith("Set aside: AB/2 4 m: far from the curve")
    assert soundings.base_contrast["Larch 1"] == pytest.approx(np.exp(0.7))
    assert np.isnan(soundings.gravel_limit["Larch 5"])
    assert np.isnan(soundings.base_contrast["Larch 5"])
    assert soundings.basal_depth_p95["Larch 2"] - soundings.basal_depth["Larch 2"] == pytest.approx(5.0, abs=2e-3)
    assert soundings.segment_factors["Larch 1"] == "1.000; 1.060"
    wells = geopandas.read_file(package, layer="wells").set_index("well")
    assert wells.reached_bedrock.astype(bool).to_dict() == {"W-1": True, "W-2": False, "W-3": True}


def test_quantiles_weigh_the_models(small_results):
    """One member with nearly all the weight is both quantiles: the definition of a weighted quantile."""
    found = small_results.inverted[0]
    weight = np.full(60, 1e-6)
    weight[17] = 1.0
    ranges = find_layer_ranges(attrs.evolve(found, ensemble=attrs.evolve(found.ensemble, weight=weight)))
    for quantile in (0, 1):
        assert np.array_equal(ranges.resistivity[quantile], found.ensemble.resistivity[17])
        assert np.array_equal(ranges.thickness[quantile, :-1], found.ensemble.thickness[17])
        assert np.isclose(ranges.top_depth[quantile, -1], found.ensemble.thickness[17].sum())
        product = found.ensemble.thickness[17] * found.ensemble.resistivity[17, :-1]
        assert np.allclose(ranges.transverse_resistance[quantile, :-1], product)
    assert np.isnan(ranges.conductance[:, -1]).all()


def test_feet_come_out_round(small_results_in_feet, tmp_path):
    foot = 1200.0 / 3937.0
    contours = small_results_in_feet.layers["bedrock_contours"].assign(elevation=[1000.0 * foot, 1020.0 * foot])
    results = attrs.evolve(small_results_in_feet, layers={**small_results_in_feet.layers, "bedrock_contours": contours})
    path = write_geopackage(results, tmp_path / "layers.gpkg", TAGS)
    assert geopandas.read_file(path, layer="bedrock_contours").elevation.tolist() == [1000.0, 1020.0]
    assert geopandas.read_file(path, layer="soundings").largest_ab2[0] == pytest.approx(320.0 / foot, abs=1e-3)
    # 1 survey mile is 5280 US survey feet (NIST SP 811, appendix B.6)
    area = small_results_in_feet.layers["gravel_extent"]["area"] / (5280.0 * foot) ** 2
    assert np.allclose(geopandas.read_file(path, layer="gravel_extent")["area"], area)
    assert geopandas.read_file(path, layer="model_layers").resistivity[0] == pytest.approx(32.0)


def test_extra_columns_are_carried_and_withheld_ones_stay_at_home(package):
    soundings = geopandas.read_file(package, layer="soundings")
    assert soundings.crew.tolist() == ["crew 1", "crew 2"] * 4
    assert geopandas.read_file(package, layer="permits").year.tolist() == list(range(2001, 2013))
    for name in CONTRACT:
        assert "owner" not in {column.casefold() for column in geopandas.read_file(package, layer=name).columns}
    assert b"withheld name" not in package.read_bytes()


def test_extra_columns_that_clash_get_a_suffix_and_keep_their_title(small_results, tmp_path):
    hostile = {
        "Date": "x",
        "fid": "7",
        "geom": "g",
        'a"; DROP TABLE wells; --': "<script>",
        "": "empty",
        "OWNER ": "no",
    }
    first, *rest = small_results.survey.soundings
    survey = attrs.evolve(small_results.survey, soundings=(attrs.evolve(first, extra=hostile), *rest))
    path = write_geopackage(attrs.evolve(small_results, survey=survey), tmp_path / "layers.gpkg", TAGS)
    row = geopandas.read_file(path, layer="soundings").iloc[0]
    assert (row.Date_typed, row.fid_typed, row.geom_typed, row.a_DROP_TABLE_wells) == ("x", "7", "g", "<script>")
    assert row.column == "empty"
    assert "OWNER" not in row
    titles = query(path, "SELECT title FROM gpkg_data_columns WHERE column_name = 'a_DROP_TABLE_wells'")
    assert titles == [('a"; DROP TABLE wells; --',)]
    assert len(geopandas.read_file(path, layer="wells")) == 3
    result = validate(path)
    assert result.returncode == 0, result.stdout + result.stderr


def test_two_runs_are_equal_to_the_byte(small_results, package, tmp_path):
    again = write_geopackage(small_results, tmp_path / "layers.gpkg", TAGS)
    assert again.read_bytes() == package.read_bytes()


def test_a_job_with_next_to_nothing_still_has_every_layer(small_results, tmp_path):
    survey = attrs.evolve(small_results.survey, wells=(), permits=(), picks=())
    nothing = attrs.evolve(small_results.interpretation, well_readings=(), tops=(), columns=())
    layers = {name: layer.iloc[:0] for name, layer in small_results.layers.items()}
    results = attrs.evolve(small_results, survey=survey, interpretation=nothing, inverted=(), layers=layers)
    path = write_geopackage(results, tmp_path / "layers.gpkg", TAGS)
    assert {name for name, _ in pyogrio.list_layers(path)} == set(CONTRACT)
    assert len(geopandas.read_file(path, layer="soundings")) == 8
    assert len(geopandas.read_file(path, layer="permits")) == 0
    result = validate(path)
    assert result.returncode == 0, result.stdout + result.stderr


def test_a_sounding_that_could_not_be_inverted_is_still_there(small_results, tmp_path):
    kept = small_results.inverted[1:]
    columns = attrs.evolve(small_results.interpretation, columns=small_results.interpretation.columns[1:])
    results = attrs.evolve(small_results, inverted=kept, interpretation=columns)
    path = write_geopackage(results, tmp_path / "layers.gpkg", TAGS)
    row = geopandas.read_file(path, layer="soundings").set_index("sounding").loc["Larch 1"]
    assert row[["rms_percent", "n_layers", "bedrock_status", "sentence"]].isna().all()
    assert row.largest_ab2 == 320.0


def test_failure_leaves_the_old_file_and_no_litter(small_results, tmp_path):
    path = tmp_path / "layers.gpkg"
    path.write_text("old", encoding="utf-8")
    with pytest.raises(DeliveryError, match="date"):
        write_geopackage(small_results, path, {})
    assert path.read_text(encoding="utf-8") == "old"
    assert [p.name for p in tmp_path.iterdir()] == ["layers.gpkg"]


def test_extra_columns_of_readings_and_picks_are_carried_through(small_results, tmp_path):
    soundings = []
    for sounding in small_results.survey.soundings:
        size = sounding.curve.half_spacing.size
        extra = tuple({"operator": f"crew {i}"} for i in range(size))
        soundings.append(attrs.evolve(sounding, curve=attrs.evolve(sounding.curve, extra=extra)))
    picks = tuple(attrs.evolve(pick, extra={"meeting": "in May"}) for pick in small_results.survey.picks)
    survey = attrs.evolve(small_results.survey, soundings=tuple(soundings), picks=picks)
    path = write_geopackage(attrs.evolve(small_results, survey=survey), tmp_path / "layers.gpkg", TAGS)
    readings = geopandas.read_file(path, layer="readings")
    assert len(readings) == sum(one.curve.half_spacing.size for one in soundings)
    assert readings["operator"].str.startswith("crew ").all()
    assert set(geopandas.read_file(path, layer="picks")["meeting"]) == {"in May"}


@pytest.mark.parametrize("unit", [1.0, 1200 / 3937])
def test_one_geology_stands_beside_what_each_place_says(small_results, small_results_in_feet, tmp_path, unit):
    """Metres and US survey feet of 1200/3937 m (NIST SP 811, appendix B.6), with the state's value domain."""
    job = join(small_results if unit == 1.0 else small_results_in_feet)
    path = write_geopackage(job, tmp_path / "layers.gpkg", TAGS)
    soundings = geopandas.read_file(path, layer="soundings").set_index("sounding")
    row = soundings.loc["Larch 1"]
    for name, metres in (
        ("together_basal_depth", (66.0, 59.0, 72.0)),
        ("together_bedrock_depth", (73.0, 66.0, 79.0)),
        ("others_basal_depth", (71.0, 60.0, 83.0)),
    ):
        np.testing.assert_allclose(
            [row[name], row[f"{name}_p05"], row[f"{name}_p95"]], np.array(metres) / unit, atol=1e-3
        )
    assert (row["together_gravel_probability"], row["others_gravel_probability"]) == (0.58, 0.66)
    assert soundings["together_state"].value_counts().to_dict() == {"heard": 6, "set_aside": 1, "poor_fit": 1}
    assert soundings.loc[POOR, "together_misfit"] == 2.34
    assert soundings.loc[MOVED, "moved_by_picks"] == 1.43
    assert row["flat_layer_bias"] == -0.08
    assert np.isnan(soundings.loc[POOR, "flat_layer_bias"])
    well = geopandas.read_file(path, layer="wells").iloc[0]
    assert well["others_basal_depth"] == pytest.approx(68.0 / unit, abs=1e-3)
    domain = query(
        path, "SELECT value FROM gpkg_data_column_constraints WHERE constraint_name = 'wells_together_state'"
    )
    assert {code for (code,) in domain} == {"heard", "set_aside", "poor_fit"}


def test_without_one_geology_its_columns_are_empty(package):
    soundings = geopandas.read_file(package, layer="soundings")
    columns = [name for name in soundings if name.startswith(("together_", "others_", "moved_"))]
    assert len(columns) == 15
    assert soundings[columns].isna().all().all()
