"""Tables, rasters and the boundary of the region folder, and the truth beside them."""

from collections.abc import Iterable
from pathlib import Path

import numpy as np
import pandas as pd
import pyogrio
import rasterio
from affine import Affine
from geopandas import GeoDataFrame
from shapely.geometry import Point, Polygon
from shapely.prepared import prep

from demo_region.generator.columns import Column
from demo_region.generator.county import HEIGHT, ORIGIN, UNITS, WIDTH, County
from demo_region.generator.fieldwork import Inside, significant
from demo_region.generator.resolved import is_resolved

CRS = "EPSG:26914"
CELL = 100.0  # m
GROUND_CELL = 90.0  # m, another grid than the region's, as an agency's terrain model is
NODATA = -9999.0
STEP = 1.0 / 16.0  # m or ohm m; values are rounded to it so that the files stay small


def draw_boundary(county: County) -> Polygon:
    """The county's outline in EPSG:26914: section lines, a crooked side and a notch."""
    t = np.linspace(0.0, 1.0, 25)
    crooked_y = 1_500.0 + 650.0 * np.sin(9.0 * t + county.phase[0]) + 300.0 * np.sin(23.0 * t)
    south = np.column_stack([1_100.0 + 27_600.0 * t, crooked_y])
    corners = [(28_700.0, 17_900.0), (26_900.0, 18_300.0), (26_900.0, 23_800.0), (9_700.0, 23_800.0)]
    west = [(8_800.0, 24_300.0), (1_300.0, 24_300.0), (700.0, 15_300.0), (1_500.0, 9_200.0)]
    return Polygon(np.vstack([south, corners, west]) + ORIGIN)


def inside_test(boundary: Polygon) -> Inside:
    """A function of local x and y that says whether a place lies in the county, 150 m or more from its edge."""
    prepared = prep(boundary.buffer(-150.0))
    return lambda x, y: prepared.contains(Point(ORIGIN[0] + x, ORIGIN[1] + y))


def write_boundary(boundary: Polygon, path: Path) -> None:
    """One polygon; the date of the file is fixed so that two runs give the same bytes."""
    pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": "2024-11-01T00:00:00.000Z"})
    frame = GeoDataFrame({"county": ["Larkmoor County"]}, geometry=[boundary], crs=CRS)
    path.unlink(missing_ok=True)
    frame.to_file(path, layer="boundary", driver="GPKG")
    pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": None})


def write_csv(table: pd.DataFrame, path: Path) -> None:
    table.to_csv(path, index=False, lineterminator="\n")


def cell_centres(cell: float, margin: float = 0.0) -> tuple[np.ndarray, np.ndarray, Affine]:
    """Local x and y (rows, columns) of the centres, north first, and the transform of that grid."""
    columns, rows = int((WIDTH + 2.0 * margin) // cell), int((HEIGHT + 2.0 * margin) // cell)
    x = -margin + cell * (np.arange(columns) + 0.5)
    y = -margin + cell * (rows - np.arange(rows) - 0.5)
    grid = np.meshgrid(x, y)
    return *grid, Affine(cell, 0.0, ORIGIN[0] - margin, 0.0, -cell, ORIGIN[1] - margin + rows * cell)


def write_raster(values: np.ndarray, transform: Affine, path: Path) -> None:
    """A small Float32 GeoTIFF, NaN as nodata."""
    rounded = np.where(np.isfinite(values), np.round(values / STEP) * STEP, NODATA).astype("float32")
    profile = {"driver": "GTiff", "count": 1, "dtype": "float32", "crs": CRS, "transform": transform, "nodata": NODATA}
    size = {"height": rounded.shape[0], "width": rounded.shape[1]}
    packing = {"compress": "deflate", "predictor": 2, "zlevel": 9, "tiled": True}
    with rasterio.open(path, "w", **profile, **size, **packing) as raster:
        raster.write(rounded, 1)


def write_ground(county: County, path: Path) -> None:
    x, y, transform = cell_centres(GROUND_CELL, margin=900.0)
    write_raster(county.ground(x, y), transform, path)


TRUE_SURFACES = (
    "bedrock_elevation",
    "bedrock_relief",
    "deep_gravel_thickness",
    "shallow_aquifer_thickness",
    "shallow_aquifer_resistivity",
    "bedrock_resistivity",
)


def write_true_surfaces(county: County, folder: Path) -> None:
    """The truth on the region's grid; the shallow aquifer's resistivity is blank where there is none."""
    x, y, transform = cell_centres(CELL)
    for name in TRUE_SURFACES:
        values = getattr(county, name)(x, y)
        if name == "shallow_aquifer_resistivity":
            values = np.where(county.shallow_aquifer_thickness(x, y) > 0.0, values, np.nan)
        write_raster(values, transform, folder / f"{name}.tif")


def true_columns(places: Iterable[tuple[str, float, float]], columns: list[Column]) -> pd.DataFrame:
    """A row a place: tops (depth, m), thicknesses (m) and resistivities (ohm m) as they were drawn."""
    rows = []
    for (name, x, y), column in zip(places, columns, strict=True):
        row = {"place": name, "x": x, "y": y, "ground_elevation": column.ground}
        row |= {f"{unit}_top_depth": column.top(unit) for unit in UNITS[1:]}
        row |= {"bedrock_elevation": column.ground - column.top("bedrock")}
        row |= {f"{unit}_thickness": column.thickness_of(unit) for unit in UNITS[:-1]}
        row |= {f"{unit}_resistivity": column.resistivity_of(unit) for unit in UNITS}
        rows.append(row)
    return pd.DataFrame(rows).round(2)


def true_soundings(soundings: pd.DataFrame, readings: pd.DataFrame, columns: list[Column]) -> pd.DataFrame:
    """true_columns, and whether the rock and the top of gravel-or-rock could be told from the readings at all."""
    table = true_columns(soundings[["sounding", "x", "y"]].itertuples(index=False), columns)
    seen = []
    for name, column in zip(soundings["sounding"], columns, strict=True):
        rows = readings[readings["sounding"] == name]
        ab2, mn2 = rows["ab2"].to_numpy(), rows["mn2"].to_numpy()
        rock, signal, deviation = is_resolved(column, ab2, mn2, "bedrock")
        basal = "deep_gravel" if "deep_gravel" in column.units else "bedrock"
        top = rock if basal == "bedrock" else is_resolved(column, ab2, mn2, basal)[0]
        seen.append((ab2.max(), int(top), int(rock), round(signal, 1), round(deviation, 3)))
    names = ["largest_ab2", "basal_top_seen", "bedrock_seen", "bedrock_signal", "bedrock_log_depth_deviation"]
    return table.rename(columns={"place": "sounding"}).join(pd.DataFrame(seen, columns=names))


def true_readings(readings: pd.DataFrame) -> tuple[pd.DataFrame, pd.DataFrame]:
    """What went wrong in the field: the bad readings, and the factor of each later segment of each sounding."""
    bad = readings.loc[readings["fault"] != "", ["sounding", "ab2", "mn2", "fault"]]
    factors = readings.drop_duplicates(["sounding", "mn2"])[["sounding", "mn2", "segment_factor"]]
    return bad, factors[factors["segment_factor"] != 1.0].round(4)


def draw_picks(truth: pd.DataFrame, rng: np.random.Generator) -> pd.DataFrame:
    """The interpreter's decisions: rock at a depth, rock deeper than a depth, and no gravel."""
    deep = truth[truth["bedrock_top_depth"] > 70.0]
    transparent = deep[(deep["bedrock_seen"] == 0) & (deep["largest_ab2"] > 200.0)]
    at = pick_one(transparent if len(transparent) else deep, rng)
    short = deep[(deep["largest_ab2"] <= 120.0) & (deep["sounding"] != at["sounding"])]
    below = pick_one(short if len(short) else deep, rng)
    bare = deep[(deep["deep_gravel_thickness"] == 0.0) & ~deep["sounding"].isin([at["sounding"], below["sounding"]])]
    absent = pick_one(bare, rng)
    at_depth = np.round(at["bedrock_top_depth"] + rng.normal(0.0, 3.0))
    below_depth = significant([0.6 * below["bedrock_top_depth"]], 2)[0]
    seismic = "seismic refraction line past this station; the curve alone does not tell rock from gravel"
    flat = "no rise by the last reading; the spread is too short to see the floor"
    drilled = "test hole beside the station went from blue clay into limestone"
    rows = [
        (at["sounding"], "bedrock", "at", at_depth, 5.0, "Q.V.", seismic),
        (below["sounding"], "bedrock", "below", below_depth, np.nan, "Q.V.", flat),
        (absent["sounding"], "deep_gravel", "absent", np.nan, np.nan, "T.O.", drilled),
    ]
    return pd.DataFrame(rows, columns=["place", "unit", "status", "depth", "depth_error", "interpreter", "reason"])


def pick_one(table: pd.DataFrame, rng: np.random.Generator) -> pd.Series:
    return table.iloc[rng.integers(len(table))]
