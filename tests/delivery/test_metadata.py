"""The records, read back by OWSLib."""

from pathlib import Path

import attrs
import pytest
from lxml import etree
from owslib.iso import MD_Metadata

from geoves.delivery.cautions import list_cautions
from geoves.delivery.metadata import render_geopackage_record, render_raster_record, write_metadata
from geoves.delivery.rasters import write_rasters
from geoves.domain.region import Delivery
from geoves.errors import DeliveryError

RECORD = {"date": "2026-06-01T09:30:00Z", "versions": {"geoves": "0.1.0"}, "inputs": {"soundings.csv": "ab12"}}


def read(text):
    return MD_Metadata(etree.fromstring(text.encode("utf-8")))


def test_a_record_for_each_raster_and_for_the_geopackage(small_results, tmp_path):
    rasters = write_rasters(small_results.stack, small_results.region, tmp_path, {})
    written = write_metadata(small_results, tmp_path, RECORD, (*rasters, tmp_path / "layers.gpkg"))
    assert {path.name for path in written} == {f"{path.stem}.xml" for path in rasters} | {"layers.xml"}
    records = [MD_Metadata(etree.parse(path)) for path in written]
    assert len({record.identifier for record in records}) == len(records)
    assert all(record.identification[0].title for record in records)


def test_record_says_who_where_what_and_how_far_to_trust_it(small_results):
    record = read(render_raster_record(small_results, RECORD, "bedrock_elevation", "p05"))
    identification = record.identification[0]
    assert identification.title == "Bedrock elevation, 5 % quantile, Larkmoor Mini"
    assert record.datestamp == "2026-06-01T09:30:00Z"
    assert identification.contact[0].organization == "Larkmoor Water Board"
    assert identification.contact[0].email == "maps@larkmoor.example"
    limits = " ".join(identification.uselimitation)
    assert "For planning within the county." in limits
    assert all(caution in limits for caution in list_cautions())
    # 500000 E on zone 14's central meridian is 99° W exactly (EPSG:26914)
    box = identification.extent.boundingBox
    assert float(box.minx) == pytest.approx(-99.0, abs=1e-4)
    assert 41.0 < float(box.miny) < float(box.maxy) < 42.0
    assert record.referencesystem.code == "urn:ogc:def:crs:EPSG::26914"
    assert "Larkmoor Mini" in record.dataquality.lineage
    assert "geoves 0.1.0" in record.dataquality.lineage


def test_record_holds_the_height_datum_and_the_figures_of_merit(small_results):
    text = render_raster_record(small_results, RECORD, "bedrock_elevation", "estimate")
    assert "urn:ogc:def:crs:EPSG::5703" in text
    assert "leave one out rmse m: 6.1" in text
    assert etree.fromstring(text.encode()).findtext(".//{*}DQ_QuantitativeResult//{*}Record") == "6.1"
    assert "EPSG::5703</" not in render_raster_record(small_results, RECORD, "deep_gravel_thickness", "estimate")


def test_each_raster_is_judged_by_the_surface_it_comes_of(small_results):
    depth = render_raster_record(small_results, RECORD, "bedrock_depth", "estimate")
    assert "bedrock elevation, leave one out rmse m: 6.1" in depth
    resistivity = render_raster_record(small_results, RECORD, "shallow_aquifer_resistivity", "estimate")
    assert "no figures were computed" in resistivity
    assert "DQ_QuantitativeResult" not in resistivity


def test_equal_jobs_give_equal_bytes_and_other_names_other_identifiers(small_results):
    first = render_geopackage_record(small_results, RECORD)
    assert first == render_geopackage_record(small_results, RECORD)
    other = attrs.evolve(small_results, region=attrs.evolve(small_results.region, name="Elsewhere"))
    assert read(first).identifier != read(render_geopackage_record(other, RECORD)).identifier


@pytest.mark.parametrize(
    "hostile", ["<b>&amp;\"'</b>", "{{ 7*7 }}{% raise %}", "]]><x/>", "bell\x07 and null\x00", "Ø 水"]
)
def test_hostile_text_stays_text(small_results, hostile):
    delivery = Delivery(hostile, hostile, hostile)
    region = attrs.evolve(small_results.region, name=f"Larkmoor {hostile}", delivery=delivery)
    record = read(render_geopackage_record(attrs.evolve(small_results, region=region), RECORD))
    clean = hostile.replace("\x07", "\ufffd").replace("\x00", "\ufffd")
    assert record.identification[0].title == f"Layers, Larkmoor {clean}"
    assert record.identification[0].contact[0].organization == clean


def test_a_crs_without_a_registered_code_is_written_out(small_results):
    crs = "+proj=tmerc +lat_0=41 +lon_0=-99 +k=0.9999 +x_0=500000 +y_0=4539000 +datum=NAD83 +units=m"
    results = attrs.evolve(small_results, region=attrs.evolve(small_results.region, crs=crs, vertical_datum=None))
    record = read(render_geopackage_record(results, RECORD))
    assert record.referencesystem.code.startswith("PROJCRS[")


def test_a_record_without_a_date_is_refused(small_results):
    with pytest.raises(DeliveryError, match="date"):
        render_geopackage_record(small_results, {})


def test_a_folder_that_cannot_be_written_is_said_in_words(small_results, tmp_path):
    (tmp_path / "metadata").write_text("a file stands where the folder should be", encoding="utf-8")
    with pytest.raises(DeliveryError, match="metadata"):
        write_metadata(small_results, tmp_path, RECORD, [Path("layers.gpkg")])
