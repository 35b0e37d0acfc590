"""Rasters beside the contract's: codes and thresholds, through every file that speaks of them."""

import attrs
import numpy as np
import pytest
import rasterio
from lxml import etree

from geoves.delivery.dictionary import MORE_RASTERS, find_raster, list_rasters
from geoves.delivery.metadata import write_metadata
from geoves.delivery.rasters import write_rasters
from geoves.delivery.styles import write_styles
from geoves.domain.grids import Surface

RECORD = {"date": "2026-06-01T09:30:00Z", "versions": {"geoves": "0.1.0"}, "inputs": {"soundings.csv": "ab12"}}
THRESHOLD = "deep_gravel_thicker_than_7.5_m"


@pytest.fixture
def results(small_results):
    stack = small_results.stack
    code = np.where(stack.covered, np.arange(stack.covered.size).reshape(stack.grid.shape) % 4.0, np.nan)
    probability = stack.surfaces["deep_gravel_probability"].estimate ** 2
    more = (
        Surface("support", "What a cell rests on", "code", stack.grid, code),
        Surface(THRESHOLD, "Probability of much gravel", "probability", stack.grid, probability),
        Surface("of_no_name", "A surface that nobody delivers", "thickness", stack.grid, probability),
    )
    surfaces = {**stack.surfaces, **{one.name: one for one in more}}
    return attrs.evolve(small_results, stack=attrs.evolve(stack, surfaces=surfaces))


def test_codes_and_thresholds_are_delivered_and_described(results, tmp_path):
    files = write_rasters(results.stack, results.region, tmp_path, {"software": "geoves 0.1.0"})
    names = {path.stem for path in files}
    assert {"support", THRESHOLD} <= names
    assert "of_no_name" not in names
    with rasterio.open(tmp_path / "surfaces/support.tif") as raster:
        codes = raster.read(1, masked=True)
        assert set(np.unique(codes.compressed())) == {0.0, 1.0, 2.0, 3.0}
        assert "2: soundings alone" in raster.tags()["codes"]
    with rasterio.open(tmp_path / f"surfaces/{THRESHOLD}.tif") as raster:
        assert raster.tags()["title"] == "Probability that the deep gravel is thicker than 7.5 m"
        expected = results.stack.surfaces[THRESHOLD].estimate
        np.testing.assert_allclose(raster.read(1, masked=True).filled(np.nan), expected, rtol=1e-6)
    records = {path.stem for path in write_metadata(results, tmp_path, RECORD, files)}
    assert names == records
    assert "2, soundings alone" in (tmp_path / "metadata/support.xml").read_text("utf-8")


def test_a_raster_of_codes_is_drawn_by_its_values(results, tmp_path):
    write_styles(results, tmp_path)
    root = etree.parse(tmp_path / "styles/support.sld").getroot()
    (ramp,) = root.iter("{http://www.opengis.net/sld}ColorMap")
    assert ramp.get("type") == "values"
    entries = {entry.get("quantity"): entry.get("label") for entry in ramp}
    assert entries == {str(code): meaning for code, meaning in MORE_RASTERS["support"].codes.items()}
    assert (tmp_path / f"styles/{THRESHOLD}.sld").exists()


def test_words_stand_in_the_order_of_the_delivery():
    names = [words.name for words in list_rasters(["support", THRESHOLD, "bedrock_depth", "of_no_name"])]
    assert names == ["bedrock_depth", "support", THRESHOLD]
    assert find_raster("of_no_name") is None
