"""What the demo's delivery says, held against the county's known truth and against itself.

Loose on purpose: the figures worth quoting are printed by tests/benchmarks/truth.py over several counties.
"""

import geopandas
import numpy as np
import pytest
import rasterio
from scipy.ndimage import map_coordinates

from tests.end_to_end.conftest import DEMO
from tests.project.small_county import FEET, read_table

ROUNDING = 0.02  # m: rasters to 1/64 m, the package to 1 mm


def read_cells(path):
    """Values with NaN for blanks, and the raster's transform."""
    with rasterio.open(path) as raster:
        return raster.read(1, masked=True).astype(float).filled(np.nan), raster.transform


@pytest.fixture(scope="module")
def surface(delivery):
    """Cells of a delivered surface by name."""
    return lambda name: read_cells(delivery / "surfaces" / f"{name}.tif")[0]


@pytest.fixture(scope="module")
def layer(delivery):
    """A layer of the package by name."""
    return lambda name: geopandas.read_file(delivery / "layers.gpkg", layer=name)


@pytest.fixture(scope="module")
def truth(delivery):
    """The truth beside the demo at the middle of each delivered cell, by the name of its raster."""
    cells, transform = read_cells(delivery / "surfaces" / "bedrock_elevation.tif")
    rows, columns = np.indices(cells.shape)
    places = np.array(transform @ np.array([columns.ravel() + 0.5, rows.ravel() + 0.5]))

    def sample(name):
        held, own = read_cells(DEMO / "truth" / f"{name}.tif")
        columns, rows = np.floor(~own @ places).astype(int)
        inside = (rows >= 0) & (rows < held.shape[0]) & (columns >= 0) & (columns < held.shape[1])
        values = np.full(places.shape[1], np.nan)
        values[inside] = held[rows[inside], columns[inside]]
        return values.reshape(cells.shape)

    return sample


# Held against the truth


def test_bedrock_beats_a_constant_depth_by_far(surface, truth):
    """The constant: the mean depth of rock in the wells that reached it, everywhere below the ground."""
    bedrock, true = surface("bedrock_elevation"), truth("bedrock_elevation")
    ground = bedrock + surface("bedrock_depth")
    drilled = {row["well"]: float(row["total_depth"]) * FEET for row in read_table(DEMO / "wells.csv")}
    rock = {row["well"]: float(row["bedrock_top_depth"]) for row in read_table(DEMO / "truth" / "wells.csv")}
    reached = [depth for well, depth in rock.items() if drilled[well] > depth]
    assert len(reached) >= 4
    kept = np.isfinite(bedrock) & np.isfinite(true)
    assert kept.sum() > 10_000
    error = np.sqrt(np.mean((bedrock - true)[kept] ** 2))
    constant = np.sqrt(np.mean((ground - np.mean(reached) - true)[kept] ** 2))
    assert error < 0.6 * constant
    assert error < 15.0


def test_the_band_of_bedrock_holds_seven_cells_in_ten(surface, truth):
    low, high = surface("bedrock_elevation_p05"), surface("bedrock_elevation_p95")
    true = truth("bedrock_elevation")
    kept = np.isfinite(low) & np.isfinite(true)
    assert np.mean(((low <= true) & (true <= high))[kept]) > 0.7
    # And not by being as wide as the county is deep.
    assert np.mean((high - low)[kept]) < np.ptp(true[kept])


def test_gravel_is_likelier_where_it_is(surface, truth):
    probability, thickness = surface("deep_gravel_probability"), truth("deep_gravel_thickness")
    kept = np.isfinite(probability) & np.isfinite(thickness)
    present, absent = (np.mean(probability[kept & there]) for there in (thickness >= 1.0, thickness < 1.0))
    assert present > absent + 0.05


# Held against itself


def test_bedrock_is_under_the_ground_everywhere(surface):
    with rasterio.open(DEMO / "ground.tif") as raster:
        highest = raster.read(1, masked=True).max()
    for part in ("", "_p05", "_p95"):
        assert np.nanmax(surface(f"bedrock_elevation{part}")) < highest
    depth, level = surface("bedrock_depth"), surface("bedrock_elevation")
    ground = level + depth
    assert np.nanmin(depth) > 0.0
    kept = np.isfinite(level)
    assert (surface("bedrock_elevation_p95")[kept] <= ground[kept] + ROUNDING).all()
    top = surface("deep_gravel_top_elevation")
    shown = np.isfinite(top)
    assert (top[shown] <= ground[shown] + ROUNDING).all()
    assert np.abs(top - level - surface("deep_gravel_thickness"))[shown].max() <= 2 * ROUNDING


def test_bands_are_in_order_and_blanks_alike(surface):
    for name in ("bedrock_elevation", "deep_gravel_thickness"):
        low, middle, high = (surface(f"{name}{part}") for part in ("_p05", "", "_p95"))
        kept = np.isfinite(middle)
        assert (low[kept] <= middle[kept]).all(), name
        assert (low[kept] <= high[kept]).all(), name
    assert (surface("bedrock_elevation")[kept] <= surface("bedrock_elevation_p95")[kept]).all()
    assert np.nanmin(surface("deep_gravel_thickness_p05")) >= 0.0
    for name in ("bedrock_elevation_standard_error", "bedrock_depth", "deep_gravel_thickness_p95",
                 "deep_gravel_probability", "shallow_aquifer_probability"):  # fmt: skip
        assert np.array_equal(np.isfinite(surface(name)), kept), name
    for name in ("deep_gravel_probability", "shallow_aquifer_probability"):
        assert 0.0 <= np.nanmin(surface(name)) <= np.nanmax(surface(name)) <= 1.0, name


def test_every_permit_is_told_its_ranges_in_order(layer):
    permits = layer("permits")
    covered = permits[permits.covered.astype(bool)]
    assert len(covered) > 0.9 * len(permits)
    for name in ("bedrock_depth", "gravel_thickness"):
        assert covered[[name, f"{name}_p05", f"{name}_p95"]].notna().all(axis=None), name
        assert (covered[f"{name}_p05"] <= covered[f"{name}_p95"]).all(), name
        assert (covered[f"{name}_p05"] >= 0.0).all(), name
    told = covered[covered.gravel_top_depth.notna()]
    assert (told.gravel_top_depth_p05 <= told.gravel_top_depth_p95).all()
    assert covered.gravel_probability.between(0.0, 1.0).all()
    assert permits[~permits.covered.astype(bool)].bedrock_depth.isna().all()


@pytest.mark.parametrize(
    ("column", "raster"),
    [
        ("bedrock_depth", "bedrock_depth"),
        ("gravel_thickness", "deep_gravel_thickness"),
        ("gravel_thickness_p95", "deep_gravel_thickness_p95"),
        ("gravel_probability", "deep_gravel_probability"),
    ],
)
def test_permits_say_what_the_rasters_hold_at_their_place(delivery, layer, column, raster):
    """Between the middles of the four cells around, by scipy's own bilinear interpolation."""
    permits = layer("permits")
    exact = permits[permits.covered.astype(bool) & permits.location_accuracy.isna()]
    assert len(exact) > 100
    cells, transform = read_cells(delivery / "surfaces" / f"{raster}.tif")
    columns, rows = ~transform @ np.array([exact.geometry.x, exact.geometry.y])
    expected = map_coordinates(cells, [rows - 0.5, columns - 0.5], order=1, cval=np.nan)
    amid = np.isfinite(expected)  # all four cells have a value
    assert amid.sum() > 100
    assert np.abs(expected - exact[column].to_numpy())[amid].max() < ROUNDING


def test_picks_are_named_as_the_source_wherever_they_are_used(layer):
    tops = layer("tops")
    picks = read_table(DEMO / "picks.csv")
    assert len(picks) == 3
    for pick in picks:
        rows = tops[(tops.place == pick["place"]) & (tops.kind == "pick") & (tops.unit == pick["unit"])]
        assert (rows.status == pick["status"]).any(), pick["place"]
        assert rows.source.str.contains(pick["interpreter"], regex=False).all()
        assert rows.source.str.contains(pick["reason"], regex=False).all()
    assert set(tops.kind) == {"sounding", "well", "pick"}
    assert set(tops[tops.kind == "pick"].place) == {pick["place"] for pick in picks}
    assert not tops[tops.kind != "pick"].source.str.contains("pick by").any()


def test_words_that_no_unit_claims_are_listed_and_decide_nothing(delivery, layer):
    intervals = layer("well_intervals")
    unclaimed = set(intervals[intervals.unit.fillna("") == ""].description)
    assert {"muck", "gumbo"} <= unclaimed  # the generator plants them, and no term of the template is like them
    report = (delivery / "report.html").read_text(encoding="utf-8")
    doubts = [words for words in unclaimed if words not in report]
    assert doubts == []


def test_every_sounding_says_what_it_sees_of_bedrock(layer):
    soundings = layer("soundings")
    assert set(soundings.bedrock_status) == {"seen", "not_distinct", "deeper_than"}
    assert soundings.rms_percent.between(0.0, 20.0).all()
    tops = layer("tops")
    bounds = tops[(tops.kind == "sounding") & (tops.status == "below")]
    decided = set(tops[tops.kind == "pick"].place)
    assert set(bounds.place) - decided == set(soundings[soundings.bedrock_status == "deeper_than"].sounding) - decided
