"""The rasters, reopened by rasterio and checked by GDAL's own rules for cloud-optimised GeoTIFF (rio-cogeo)."""

import attrs
import numpy as np
import pyproj
import pytest
import rasterio
from rio_cogeo import cog_validate

from geoves.delivery.rasters import BLOCK, NODATA, _verify, write_rasters
from geoves.errors import DeliveryError

TAGS = {"software": "geoves", "date": "2026-06-01"}

# The names of the contract, written out by hand.
NAMES = {
    "bedrock_elevation", "bedrock_elevation_standard_error", "bedrock_elevation_p05", "bedrock_elevation_p95",
    "deep_gravel_thickness", "deep_gravel_thickness_standard_error", "deep_gravel_thickness_p05",
    "deep_gravel_thickness_p95", "shallow_aquifer_resistivity", "shallow_aquifer_resistivity_p05",
    "shallow_aquifer_resistivity_p95", "deep_gravel_top_elevation", "deep_gravel_probability",
    "shallow_aquifer_probability", "bedrock_depth",
}  # fmt: skip
# Beside the contract's: parts of the column that the surfaces may tell apart.
PARTS = {
    "deep_gravel_top_depth", "deep_gravel_top_depth_p05", "deep_gravel_top_depth_p95",
    *(f"{name}{part}" for name in ("cover_thickness", "shallow_aquifer_thickness", "confining_unit_thickness")
      for part in ("", "_standard_error", "_p05", "_p95")),
}  # fmt: skip


def test_every_raster_of_the_contract_is_a_valid_cog(small_results, tmp_path):
    paths = write_rasters(small_results.stack, small_results.region, tmp_path, TAGS)
    assert {path.stem for path in paths} == NAMES | PARTS
    assert {path.name for path in (tmp_path / "surfaces").iterdir()} == {path.name for path in paths}
    for path in paths:
        assert cog_validate(path, strict=True, quiet=True)[0], path.name
        with rasterio.open(path) as source:
            assert (source.count, source.dtypes, source.nodata) == (1, ("float32",), NODATA)
            assert source.transform.c == 500_000.0
            assert source.transform.f == 4_602_400.0
            assert source.tags()["software"] == "geoves"
            assert source.descriptions[0]
            assert "STATISTICS_MEAN" in source.tags(1)


def test_values_are_rounded_by_less_than_a_hundredth_and_blank_where_not_covered(small_results, tmp_path):
    write_rasters(small_results.stack, small_results.region, tmp_path, TAGS)
    with rasterio.open(tmp_path / "surfaces" / "bedrock_elevation.tif") as source:
        read = source.read(1, masked=True)
        assert source.units == ("m",)
    estimate = small_results.stack.surfaces["bedrock_elevation"].estimate
    assert np.array_equal(read.mask, np.isnan(estimate))
    assert np.nanmax(np.abs(read.filled(np.nan) - estimate)) <= 1.0 / 128.0


def test_feet_are_delivered_in_feet(small_results_in_feet, tmp_path):
    results = small_results_in_feet
    write_rasters(results.stack, results.region, tmp_path, TAGS)
    with rasterio.open(tmp_path / "surfaces" / "bedrock_elevation.tif") as source:
        read = source.read(1, masked=True).filled(np.nan)
        assert source.units == ("us-ft",)
    # 1 US survey foot is 1200/3937 m (NIST SP 811, appendix B.6)
    expected = results.stack.surfaces["bedrock_elevation"].estimate * 3937.0 / 1200.0
    assert np.nanmax(np.abs(read - expected)) <= 1.0 / 128.0 + 1e-4
    with rasterio.open(tmp_path / "surfaces" / "shallow_aquifer_resistivity.tif") as source:
        resistivity = source.read(1, masked=True).filled(np.nan)
    assert np.allclose(resistivity, results.stack.surfaces["shallow_aquifer_resistivity"].estimate, equal_nan=True)


def test_elevations_carry_the_height_datum_and_thicknesses_do_not(small_results, tmp_path):
    write_rasters(small_results.stack, small_results.region, tmp_path, TAGS)

    def crs_of(name):
        with rasterio.open(tmp_path / "surfaces" / f"{name}.tif") as source:
            return pyproj.CRS.from_wkt(source.crs.to_wkt()), source.tags()

    crs, tags = crs_of("bedrock_elevation")
    assert crs.is_compound
    assert crs.sub_crs_list[0].equals(pyproj.CRS(small_results.region.crs))
    assert crs.sub_crs_list[1].equals(pyproj.CRS("EPSG:5703"))
    assert "EPSG:5703" in tags["height_datum"]
    for name in ("deep_gravel_thickness", "bedrock_elevation_standard_error", "deep_gravel_probability"):
        assert crs_of(name)[0].equals(pyproj.CRS(small_results.region.crs)), name


def test_a_datum_in_another_unit_is_stated_and_not_put_into_the_crs(small_results, tmp_path):
    region = attrs.evolve(small_results.region, vertical_datum="EPSG:6360")  # NAVD88 height (ftUS)
    write_rasters(small_results.stack, region, tmp_path, TAGS)
    with rasterio.open(tmp_path / "surfaces" / "bedrock_elevation.tif") as source:
        assert not pyproj.CRS.from_wkt(source.crs.to_wkt()).is_compound
        assert "US survey foot" in source.tags()["height_datum"]


def test_two_runs_are_equal_to_the_byte(small_results, tmp_path):
    first = write_rasters(small_results.stack, small_results.region, tmp_path / "a", TAGS)
    second = write_rasters(small_results.stack, small_results.region, tmp_path / "b", TAGS)
    for left, right in zip(first, second, strict=True):
        assert left.read_bytes() == right.read_bytes(), left.name


def test_a_role_that_the_template_lacks_writes_no_surface(small_results, tmp_path):
    kept = {k: v for k, v in small_results.stack.surfaces.items() if not k.startswith("shallow")}
    paths = write_rasters(attrs.evolve(small_results.stack, surfaces=kept), small_results.region, tmp_path, TAGS)
    assert {path.stem for path in paths} == {name for name in NAMES | PARTS if not name.startswith("shallow")}


def test_a_surface_without_any_value_is_still_a_raster(small_results, tmp_path):
    surface = small_results.stack.surfaces["bedrock_depth"]
    blank = attrs.evolve(surface, estimate=np.full(surface.estimate.shape, np.nan))
    stack = attrs.evolve(small_results.stack, surfaces={"bedrock_depth": blank})
    (path,) = write_rasters(stack, small_results.region, tmp_path, TAGS)
    with rasterio.open(path) as source:
        assert source.read(1, masked=True).mask.all()


def test_large_surfaces_have_overviews(small_results, tmp_path):
    grid = attrs.evolve(small_results.stack.grid, n_rows=600, n_columns=1100)
    cells = np.add.outer(np.arange(600.0), np.arange(1100.0))
    surface = attrs.evolve(small_results.stack.surfaces["bedrock_depth"], grid=grid, estimate=cells)
    stack = attrs.evolve(small_results.stack, grid=grid, surfaces={"bedrock_depth": surface})
    (path,) = write_rasters(stack, small_results.region, tmp_path, TAGS)
    with rasterio.open(path) as source:
        assert source.overviews(1) == [2, 4]
        assert np.array_equal(source.read(1), cells)


def test_a_raster_that_reads_back_otherwise_is_refused(small_results, tmp_path):
    (path, *_) = write_rasters(small_results.stack, small_results.region, tmp_path, TAGS)
    grid = small_results.stack.grid
    with rasterio.open(path) as source:
        cells = source.read(1)
    strips = [cells[row : row + BLOCK] for row in range(0, len(cells), BLOCK)]
    _verify(path, strips, grid)
    with pytest.raises(DeliveryError, match="other values"):
        _verify(path, [strip + 1 for strip in strips], grid)
    with pytest.raises(DeliveryError, match="place"):
        _verify(path, strips, attrs.evolve(grid, west=grid.west + 1.0))


def test_a_folder_that_cannot_be_written_is_said_in_words(small_results, tmp_path):
    (tmp_path / "surfaces").write_text("a file stands where the folder should be", encoding="utf-8")
    with pytest.raises(DeliveryError, match="surfaces"):
        write_rasters(small_results.stack, small_results.region, tmp_path, TAGS)
