"""The demo's generator: its physics against published values, its tables against the contract, its county as told."""

import ast
import importlib
import importlib.util
import sys
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import rasterio

ROOT = Path(__file__).resolve().parents[2]
DEMO = ROOT / "demo_region"


@pytest.fixture(scope="module")
def generator():
    """The script as a module; importing it lets Python find the generator's own modules."""
    spec = importlib.util.spec_from_file_location("make_region", DEMO / "make_region.py")
    module = importlib.util.module_from_spec(spec)
    path = list(sys.path)
    spec.loader.exec_module(module)
    yield module
    sys.path[:] = path


@pytest.fixture(scope="module")
def forward(generator):
    return importlib.import_module(f"{generator.files.__package__}.forward")


@pytest.fixture(scope="module")
def made(generator, tmp_path_factory):
    """The committed demo made anew."""
    folder = tmp_path_factory.mktemp("region")
    generator.make_region(folder)
    return folder


def read_truth(name):
    with rasterio.open(DEMO / "truth" / f"{name}.tif") as raster:
        return raster.read(1, masked=True).filled(np.nan)


# Schlumberger limit of layered half-spaces at AB/2 = 1, 2, 5, ... 1000 m, computed for these tests by two other ways
# that agree to every digit: series of images (20 000 of them) and Gauss-Legendre quadrature of Stefanesco's integral.
SPACINGS = np.array([1.0, 2.0, 5.0, 10.0, 20.0, 50.0, 100.0, 200.0, 500.0, 1_000.0])
CURVES = {
    ((10.0,), (100.0, 10.0)): "99.9813 99.8524 97.8737 86.9089 51.5589 13.0336 10.3362 10.0762 10.0119 10.0030",
    ((5.0, 10.0), (100.0, 20.0, 500.0)): (
        "99.8809 99.0914 89.4875 61.8502 41.9190 78.4522 138.0498 223.9272 355.6429 434.1972"
    ),
    ((5.0, 10.0), (300.0, 60.0, 10.0)): (
        "299.629 297.1646 266.8134 173.9871 65.9304 14.6795 10.5073 10.1100 10.0171 10.0043"
    ),
    ((5.0, 25.0, 15.0), (35.0, 20.0, 90.0, 12.0)): (
        "34.9819 34.8616 33.3744 28.7782 23.6713 25.1428 26.1872 19.0059 12.8032 12.1673"
    ),
}


@pytest.mark.parametrize("model", CURVES)
def test_response_equals_the_tabulated_curves(forward, model):
    expected = np.array(CURVES[model].split(), dtype=float)
    thickness, resistivity = map(np.array, model)
    # MN/2 of a thousandth of AB/2 departs from the limit by about its square, far below the printed digits.
    found = forward.apparent_resistivity(SPACINGS, 1e-3 * SPACINGS, thickness, resistivity)
    np.testing.assert_allclose(found, expected, rtol=6e-6)


@pytest.mark.parametrize(
    ("lower", "expected"), [(10.0, [51.6930, 52.0955, 53.7078]), (1_000.0, [175.5099, 174.8657, 172.2924])]
)
def test_response_holds_for_finite_potential_spacings(forward, lower, expected):
    """AB/2 = 20 m and MN/2 = 1, 2, 4 m over 10 m of 100 ohm m: image potentials at both electrodes, computed."""
    found = forward.apparent_resistivity(
        np.full(3, 20.0), np.array([1.0, 2.0, 4.0]), np.array([10.0]), np.array([100.0, lower])
    )
    np.testing.assert_allclose(found, expected, rtol=2e-6)


@pytest.mark.parametrize("ratio", [0.1, 0.9, 5.0])
def test_potential_over_two_layers_equals_its_series_of_images(forward, ratio):
    """V = I rho_1 / (2 pi r) [1 + 2 sum k^n (1 + (2 n h / r)^2)^(-1/2)], the textbook series (from memory)."""
    distance, h = np.geomspace(0.8, 350.0, 40), 3.0
    k = (ratio - 1.0) / (ratio + 1.0)
    n = np.arange(1, 4_000)[:, None]
    series = 100.0 / distance * (1.0 + 2.0 * np.sum(k**n / np.sqrt(1.0 + (2.0 * n * h / distance) ** 2), axis=0))
    found = forward.potential(distance, np.array([h]), np.array([100.0, 100.0 * ratio]))
    np.testing.assert_allclose(found, series, rtol=1e-9)


@pytest.mark.usefixtures("generator")
def test_misplaced_electrode_reads_as_published():
    """An electrode left at 80 or 90 m, or carried to 120 m, for 100 m planned, MN/2 = 5, on uniform ground.

    Factors from the half-space potential of each electrode alone; the directions stand in the Federal Institute for
    Geosciences' "The smooth sounding graph, a manual for field work", section 2.2: left behind, the point jumps up.
    """
    from demo_region.generator.columns import Column
    from demo_region.generator.fieldwork import misplaced_electrode

    uniform = Column(0.0, ("cover", "bedrock"), np.array([10.0]), np.array([50.0, 50.0]))
    found = [misplaced_electrode(100.0, actual, 5.0, uniform) / 50.0 for actual in (80.0, 90.0, 120.0)]
    np.testing.assert_allclose(found, [1.2824, 1.1176, 0.8470], atol=6e-5)


TABLES = ("soundings", "readings", "wells", "well_logs", "permits", "picks", "truth/soundings", "truth/wells")


@pytest.mark.parametrize("name", TABLES)
def test_committed_tables_are_what_the_script_makes(made, name):
    """Numbers to the last digit but one: another processor may round the last one otherwise."""
    committed, anew = pd.read_csv(DEMO / f"{name}.csv"), pd.read_csv(made / f"{name}.csv")
    pd.testing.assert_frame_equal(committed, anew, rtol=2e-3, atol=0.02)


@pytest.mark.parametrize("name", ["ground", "truth/bedrock_elevation", "truth/deep_gravel_thickness"])
def test_committed_rasters_are_what_the_script_makes(made, name):
    with rasterio.open(DEMO / f"{name}.tif") as committed, rasterio.open(made / f"{name}.tif") as anew:
        assert committed.transform == anew.transform
        assert committed.crs == anew.crs
        np.testing.assert_allclose(committed.read(1), anew.read(1), atol=0.13)


@pytest.mark.usefixtures("generator")
def test_another_seed_makes_another_county():
    from demo_region.generator.county import draw_county

    x, y = np.meshgrid(np.arange(500.0, 30_000.0, 1_000.0), np.arange(500.0, 25_000.0, 1_000.0))
    first, again, other = (draw_county(seed).bedrock_elevation(x, y) for seed in (3, 3, 4))
    np.testing.assert_array_equal(first, again)
    assert np.abs(first - other).max() > 40.0


COLUMNS = {
    "soundings": {"sounding", "x", "y", "ground_elevation", "array", "azimuth", "date", "note"},
    "readings": {"sounding", "ab2", "mn2", "apparent_resistivity", "voltage_mv", "current_ma", "error_percent", "use"},
    "wells": {"well", "x", "y", "ground_elevation", "total_depth", "water_level", "specific_conductance"},
    "well_logs": {"well", "top", "bottom", "description", "unit"},
    "permits": {"permit", "lon", "lat", "requested_depth", "use", "location_accuracy"},
    "picks": {"place", "unit", "status", "depth", "depth_error", "interpreter", "reason"},
}


@pytest.mark.parametrize("name", COLUMNS)
def test_tables_have_the_documented_columns(name):
    assert set(pd.read_csv(DEMO / f"{name}.csv").columns) >= COLUMNS[name]


def test_readings_are_a_crew_s():
    readings = pd.read_csv(DEMO / "readings.csv")
    used = readings[readings["use"] == 1]
    value = used["apparent_resistivity"].fillna(used["voltage_mv"] * used["current_ma"])
    assert (value > 0.0).all()
    assert (readings["mn2"] < readings["ab2"]).all()
    assert readings.loc[readings["use"] == 0, "note"].notna().all()
    assert readings["voltage_mv"].notna().groupby(readings["sounding"]).all().sum() >= 3
    repeated = readings.groupby(["sounding", "ab2"]).size() > 1
    assert (repeated.groupby("sounding").sum() >= 2).all()
    assert readings["ab2"].min() == 1.5
    assert readings["ab2"].max() == 320.0


def test_noise_is_what_the_truth_says(forward):
    """Residuals of the good readings against the true layers and segment factors: 3 % about nothing."""
    truth = pd.read_csv(DEMO / "truth/soundings.csv").set_index("sounding")
    readings = pd.read_csv(DEMO / "readings.csv").merge(
        pd.read_csv(DEMO / "truth/bad_readings.csv"), how="left", on=["sounding", "ab2", "mn2"]
    )
    readings = readings.merge(pd.read_csv(DEMO / "truth/segment_factors.csv"), how="left", on=["sounding", "mn2"])
    good = readings[readings["fault"].isna() & (readings["use"] == 1) & readings["apparent_resistivity"].notna()]
    residuals = []
    for name, rows in good.groupby("sounding"):
        place = truth.loc[name]
        layers = [(place[f"{u}_thickness"], place[f"{u}_resistivity"]) for u in ("cover", "shallow_aquifer")]
        layers = [layer for layer in layers if layer[0] > 0.0]
        # Spacings within the upper layers' reach, where neither the clay's own layering nor the rock shows.
        near = rows[rows["ab2"] <= 1.5 * sum(h for h, _ in layers)]
        thickness = np.array([h for h, _ in layers])
        resistivity = np.array([*(rho for _, rho in layers), place["confining_resistivity"]])
        true = forward.apparent_resistivity(near["ab2"].to_numpy(), near["mn2"].to_numpy(), thickness, resistivity)
        residuals.extend(np.log(near["apparent_resistivity"] / near["segment_factor"].fillna(1.0) / true))
    assert len(residuals) > 300
    assert abs(np.mean(residuals)) < 0.012
    assert 0.027 < np.std(residuals) < 0.042


def test_county_is_as_hard_as_the_field():
    relief, gravel = read_truth("bedrock_relief"), read_truth("deep_gravel_thickness")
    soundings, wells = pd.read_csv(DEMO / "truth/soundings.csv"), pd.read_csv(DEMO / "truth/wells.csv")
    with rasterio.open(DEMO / "truth/bedrock_elevation.tif") as raster:
        places = [(raster.xy(row, column), row, column) for row, column in np.argwhere(relief > 80.0)[::400]]
    with rasterio.open(DEMO / "ground.tif") as raster:
        ground = np.array([value[0] for value in raster.sample([place for place, _, _ in places])])
    rock = read_truth("bedrock_elevation")[[row for _, row, _ in places], [column for _, _, column in places]]
    assert np.median(ground - rock) > 100.0  # on the axis

    plain = soundings[soundings["bedrock_top_depth"] < 60.0]["bedrock_top_depth"]
    assert plain.between(20.0, 50.0).mean() > 0.8
    assert np.mean(read_truth("bedrock_resistivity") <= 55.0) == pytest.approx(1.0 / 3.0, abs=0.04)
    assert np.mean(soundings["largest_ab2"] <= 130.0) == pytest.approx(0.2, abs=0.03)
    floor = relief > 60.0
    assert 0.25 < np.mean(gravel[floor] >= 1.0) < 0.85  # patchy
    assert 0.5 < soundings["bedrock_seen"].mean() < 0.9

    drilled = pd.read_csv(DEMO / "wells.csv").set_index("well")["total_depth"] * 0.3048
    above = drilled < wells.set_index("well")["bedrock_top_depth"]
    assert 3 <= above.sum() <= 9
    assert 12 <= len(wells) <= 20
    assert 120 <= len(soundings) <= 160
    assert 400 <= len(pd.read_csv(DEMO / "permits.csv")) <= 600


def test_picks_agree_with_the_truth():
    picks = pd.read_csv(DEMO / "picks.csv").set_index("status")
    truth = pd.read_csv(DEMO / "truth/soundings.csv").set_index("sounding")
    at, below, absent = (picks.loc[status] for status in ("at", "below", "absent"))
    assert abs(at["depth"] - truth.loc[at["place"], "bedrock_top_depth"]) < 2.0 * at["depth_error"]
    assert below["depth"] < truth.loc[below["place"], "bedrock_top_depth"]
    assert truth.loc[absent["place"], "deep_gravel_thickness"] == 0.0


def test_generator_stands_apart_from_the_package():
    for path in (DEMO / "make_region.py", *(DEMO / "generator").glob("*.py")):
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if isinstance(node, ast.Import | ast.ImportFrom):
                names = [alias.name for alias in node.names] + [getattr(node, "module", None) or ""]
                assert not any(name.split(".")[0] == "geoves" for name in names), path


def test_demo_is_small():
    sizes = [path.stat().st_size for pattern in ("*.csv", "*.tif", "*.gpkg", "truth/*") for path in DEMO.glob(pattern)]
    assert max(sizes) < 500_000
    assert sum(sizes) < 2_000_000
