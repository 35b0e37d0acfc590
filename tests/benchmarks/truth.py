"""Holds geoves against invented counties whose truth is known: `python -m tests.benchmarks.truth [--seeds 1 2 3 4 5]`.

For each seed the county is built in a temporary folder, `geoves run` does its job there and the delivery is read back.
`--plain` scores the plain script beside it, `--only-plain` that alone; `--delivery FOLDER` scores a delivery of the
committed demo that stands already. Lengths in m. Every cell inside the boundary counts.
"""

import argparse
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import geopandas as gpd
import numpy as np
import pandas as pd
import rasterio
from rasterio.features import geometry_mask
from rasterio.transform import xy

from demo_region.generator.county import ORIGIN, draw_county
from demo_region.generator.files import CELL, cell_centres
from demo_region.make_region import DEFAULT_SEED, HERE, make_region
from tests.benchmarks.scores import Estimate, score_soundings, score_surfaces
from tests.reference.plain_script import run_plain_script

TABLES = {
    "Bedrock elevation": {
        "bedrock": "RMSE",
        "bedrock_valley": "in valley",
        "bias": "bias",
        "bias_valley": "in valley",
        "held": "held 90 %",
        "held_valley": "in valley",
        "width": "width",
        "width_valley": "in valley",
        "blank": "blank",
        "blank_valley": "in valley",
        "seconds": "seconds",
    },
    "Deep gravel (present: 1 m or more) and shallow aquifer (ln of resistivity where it is present)": {
        "gravel": "RMSE",
        "gravel_valley": "in valley",
        "brier": "Brier",
        "climatology": "climat.",
        "shallow_log": "shallow",
        "shallow_blank": "blank",
    },
    "Soundings: bedrock_status, and the depth of rock called seen": {
        "soundings": "soundings",
        "missing": "missing",
        "seen": "seen",
        "not_distinct": "not dist.",
        "deeper_than": "deeper",
        "seen_error": "RMSE seen",
        "seen_median": "median",
        "could_be_seen": "could be",
        "seen_wrongly": "could not",
    },
}


def read_raster(path):
    """Values (rows, columns) with NaN as nodata, and the raster's transform."""
    with rasterio.open(path) as raster:
        return raster.read(1, masked=True).astype(float).filled(np.nan), raster.transform


def read_estimate(delivery, boundary):
    """The delivered surfaces at the cells inside the boundary."""
    surfaces = delivery / "surfaces"
    bedrock, transform = read_raster(surfaces / "bedrock_elevation.tif")
    inside = geometry_mask([boundary], bedrock.shape, transform, invert=True)
    rows, columns = np.nonzero(inside)
    easting, northing = (np.asarray(values) for values in xy(transform, rows, columns))
    names = {
        "bedrock_p05": "bedrock_elevation_p05",
        "bedrock_p95": "bedrock_elevation_p95",
        "gravel": "deep_gravel_thickness",
        "gravel_probability": "deep_gravel_probability",
        "shallow_resistivity": "shallow_aquifer_resistivity",
    }
    values = {field: read_raster(surfaces / f"{name}.tif")[0][inside] for field, name in names.items()}
    return Estimate(easting, northing, bedrock[inside], **values)


def read_boundary(folder):
    return gpd.read_file(folder / "boundary.gpkg").geometry.iloc[0]


def score_delivery(region, delivery, county):
    """Figures of one delivery; `region` is the folder with its tables and truth."""
    boundary = read_boundary(region)
    figures = score_surfaces(read_estimate(delivery, boundary), county, round(boundary.area / CELL**2))
    layers = {name: gpd.read_file(delivery / "layers.gpkg", layer=name) for name in ("soundings", "tops")}
    return figures | score_soundings(layers["soundings"], layers["tops"], pd.read_csv(region / "truth/soundings.csv"))


def score_geoves(region, county):
    """Run the command in a process of its own and score what it delivers."""
    delivery = region / "delivery"
    command = [sys.executable, "-m", "geoves.cli.main", "run", str(region / "region.toml"), "--quiet"]
    started = time.perf_counter()
    finished = subprocess.run([*command, "--out", str(delivery)], check=False, capture_output=True, text=True)
    seconds = time.perf_counter() - started
    if finished.returncode != 0:
        raise SystemExit(f"geoves run ended with {finished.returncode}:\n{finished.stderr}")
    return score_delivery(region, delivery, county) | {"seconds": seconds}


def score_plain_script(region, county):
    """The plain script's surfaces on the truth's grid, its band taken as 1.645 standard errors."""
    x, y, transform = cell_centres(CELL)
    grid_x, grid_y = ORIGIN[0] + x[0], ORIGIN[1] + y[:, 0]
    started = time.perf_counter()
    bedrock, error, gravel = run_plain_script(region, grid_x, grid_y)
    seconds = time.perf_counter() - started
    boundary = read_boundary(region)
    inside = geometry_mask([boundary], bedrock.shape, transform, invert=True)
    band = 1.645 * error
    easting, northing = np.meshgrid(grid_x, grid_y)
    surfaces = (easting, northing, bedrock, bedrock - band, bedrock + band, gravel)
    estimate = Estimate(*(values[inside] for values in surfaces))
    return score_surfaces(estimate, county, round(boundary.area / CELL**2)) | {"seconds": seconds}


def score_seed(seed, ways):
    """Figures of each way (name -> function of region folder and county) in the county of one seed."""
    with tempfile.TemporaryDirectory() as folder:
        county = make_region(folder, seed)
        return {name: way(Path(folder), county) for name, way in ways.items()}


def print_tables(title, rows):
    """A row a seed and the mean, in the tables above; `rows` is seed -> figures."""
    frame = pd.DataFrame(rows).T
    frame.loc["mean"] = frame.mean()
    for heading, columns in TABLES.items():
        held = {name: words for name, words in columns.items() if name in frame}
        if held:
            print(f"\n{title}. {heading}")
            print(f"{'seed':>6}" + "".join(f"{words:>10}" for words in held.values()))
            for seed, figures in frame.iterrows():
                print(f"{seed:>6}" + "".join(f"{write_figure(figures[name]):>10}" for name in held))


def write_figure(value):
    """Three significant digits or so; a dash where there is no figure."""
    if not np.isfinite(value):
        return "-"
    return f"{value:.3f}" if abs(value) < 1.0 and value != 0.0 else f"{value:.1f}"


def main():
    parser = argparse.ArgumentParser(description="Score geoves against counties whose truth is known.")
    parser.add_argument("--seeds", type=int, nargs="+", default=[1, 2, 3, 4, 5])
    parser.add_argument("--plain", action="store_true", help="score the plain script too")
    parser.add_argument("--only-plain", action="store_true", help="score the plain script alone")
    parser.add_argument("--delivery", type=Path, help="score this delivery of the committed demo, and run nothing")
    arguments = parser.parse_args()
    if arguments.delivery:
        figures = score_delivery(HERE, arguments.delivery, draw_county(DEFAULT_SEED))
        print_tables(str(arguments.delivery), {DEFAULT_SEED: figures})
        return
    ways = {} if arguments.only_plain else {"geoves": score_geoves}
    if arguments.plain or arguments.only_plain:
        ways["plain script"] = score_plain_script
    scored = {seed: score_seed(seed, ways) for seed in arguments.seeds}
    for name in ways:
        print_tables(name, {seed: figures[name] for seed, figures in scored.items()})


if __name__ == "__main__":
    main()
