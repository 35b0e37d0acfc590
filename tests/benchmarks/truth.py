"""Holds geoves against invented counties whose truth is known: `python -m tests.benchmarks.truth [--seeds 1 2 3]`.

For each seed the county is built in a temporary folder and the surfaces made by both methods, `together` and `each`,
from one inversion. Beside them stand the plain script and the survey's floor (every sounding's true rock, kriged);
the climatology and a map of zeros are in the columns of the gravel. `--counties` takes those in which the demo's
habits are false, `--other` one drawn by other means, `--ways` only some of the ways, `--delivery FOLDER` scores a
delivery of the committed demo.
Lengths in m. Every cell inside the boundary counts; the valley is where rock lies 15 m or more below its surroundings.
"""

import argparse
import tempfile
import time
from functools import cache
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
from geoves.checking import assign_errors
from geoves.geology import infer_geology
from geoves.interpretation import interpret
from geoves.inversion import invert
from geoves.project.engines import open_engine
from geoves.project.inputs import read_inputs
from geoves.surfaces import build_surfaces, build_surfaces_together
from tests.benchmarks.counties import COUNTIES, make_county
from tests.benchmarks.other_county import OTHER, PLAIN, OtherCounty, make_other_county
from tests.benchmarks.scores import Estimate, score_surfaces
from tests.reference.plain_script import Local, run_plain_script
from tests.reference.survey_floor import krige_true_rock

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
        "zeros_valley": "of zeros",
        "brier": "Brier",
        "climatology": "climat.",
        "shallow_log": "shallow",
        "shallow_blank": "blank",
    },
}
WAYS = ("together", "each", "plain script", "floor")


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
    return score_surfaces(read_estimate(delivery, boundary), county, round(boundary.area / CELL**2))


def read_stack(stack, boundary):
    """A stack's surfaces at the cells inside the boundary."""
    easting, northing = np.meshgrid(stack.grid.easting, stack.grid.northing)
    transform = rasterio.transform.from_origin(stack.grid.west, stack.grid.north, *[stack.grid.cell_size] * 2)
    inside = geometry_mask([boundary], stack.grid.shape, transform, invert=True)
    bedrock, blank = stack.surfaces["bedrock_elevation"], np.full(stack.grid.shape, np.nan)
    names = ("deep_gravel_thickness", "deep_gravel_probability", "shallow_aquifer_resistivity")
    others = (stack.surfaces[name].estimate if name in stack.surfaces else blank for name in names)
    values = (easting, northing, bedrock.estimate, bedrock.p05, bedrock.p95, *others)
    return Estimate(*(one[inside] for one in values))


@cache
def interpret_region(region):
    """What every place says by itself, for both methods; and the seconds it took."""
    inputs = read_inputs(region / "region.toml")
    survey, settings = assign_errors(inputs.survey), inputs.settings
    started = time.perf_counter()
    with open_engine() as engine:
        inverted = invert(survey, settings.inversion, map=engine)
        interpretation = interpret(survey, inverted, inputs.region.template, settings.interpretation, map=engine)
    return inputs, survey, inverted, interpretation, time.perf_counter() - started


def score_method(region, county, method):
    """The surfaces of one method, from one inversion and interpretation."""
    inputs, survey, inverted, interpretation, seconds = interpret_region(region)
    template, grid, settings = inputs.region.template, inputs.grid, inputs.settings
    started = time.perf_counter()
    with open_engine() as engine:
        if method == "each":
            stack = build_surfaces(interpretation, survey, template, grid, settings.surfaces, map=engine)
        else:
            geology = infer_geology(survey, inverted, interpretation, template, settings.geology, map=engine)
            stack = build_surfaces_together(
                geology, interpretation, survey, template, grid, settings.surfaces, map=engine
            )
    seconds += time.perf_counter() - started
    boundary = read_boundary(region)
    figures = score_surfaces(read_stack(stack, boundary), county, round(boundary.area / CELL**2))
    return figures | {"seconds": seconds}


def score_plain_script(region, county):
    """The plain script's surfaces on the truth's grid, its band taken as 1.645 standard errors."""
    x, y, transform = cell_centres(CELL)
    grid_x, grid_y = ORIGIN[0] + x[0], ORIGIN[1] + y[:, 0]
    started = time.perf_counter()
    bedrock, error, gravel = run_plain_script(
        region, grid_x, grid_y, PLAIN if isinstance(county, OtherCounty) else Local()
    )
    seconds = time.perf_counter() - started
    boundary = read_boundary(region)
    inside = geometry_mask([boundary], bedrock.shape, transform, invert=True)
    band = 1.645 * error
    easting, northing = np.meshgrid(grid_x, grid_y)
    surfaces = (easting, northing, bedrock, bedrock - band, bedrock + band, gravel)
    estimate = Estimate(*(values[inside] for values in surfaces))
    return score_surfaces(estimate, county, round(boundary.area / CELL**2)) | {"seconds": seconds}


def score_floor(region, county):
    """Every sounding's true rock, kriged."""
    x, y, transform = cell_centres(CELL)
    boundary = read_boundary(region)
    inside = geometry_mask([boundary], x.shape, transform, invert=True)
    cells = np.column_stack([ORIGIN[0] + x[inside], ORIGIN[1] + y[inside]])
    truth = pd.read_csv(region / "truth/soundings.csv")
    estimate, band = krige_true_rock(truth[["x", "y"]].to_numpy(float), truth["bedrock_elevation"].to_numpy(), cells)
    nothing = np.full(len(cells), np.nan)
    surfaces = (*cells.T, estimate, estimate - band, estimate + band, nothing)
    return score_surfaces(Estimate(*surfaces), county, round(boundary.area / CELL**2))


def score_way(way, region, county):
    if way in ("together", "each"):
        return score_method(region, county, way)
    return {"plain script": score_plain_script, "floor": score_floor}[way](region, county)


def score_county(name, seed, ways):
    """Figures of each way in one county: the seed's own, or one of another name."""
    with tempfile.TemporaryDirectory() as folder:
        region = Path(folder)
        county = make_named(region, name, seed)
        return {way: score_way(way, region, county) for way in ways}


def make_named(region, name, seed):
    """Writes the county into the folder, and returns its truth."""
    if name == OTHER:
        return make_other_county(region, seed)
    return make_county(region, name, seed) if name in COUNTIES else make_region(region, seed)


def print_tables(title, rows):
    """A row a county and the mean, in the tables above; `rows` is its name -> figures."""
    frame = pd.DataFrame(rows).T
    frame.loc["mean"] = frame.mean()
    for heading, columns in TABLES.items():
        held = {name: words for name, words in columns.items() if name in frame and frame[name].notna().any()}
        if held:
            wide = max(6, *(len(str(name)) for name in frame.index))
            print(f"\n{title}. {heading}")
            print(f"{'county':>{wide}}" + "".join(f"{words:>10}" for words in held.values()))
            for name, figures in frame.iterrows():
                print(f"{name:>{wide}}" + "".join(f"{write_figure(figures[one]):>10}" for one in held))


def print_ratios(scored, ways):
    """Mean errors of bedrock over those of the other ways, map and valley."""
    mean = {way: pd.DataFrame({name: figures[way] for name, figures in scored.items()}).T.mean() for way in ways}
    for way in ("together", "each"):
        for other in ("plain script", "floor"):
            if way in mean and other in mean:
                ratios = [mean[way][name] / mean[other][name] for name in ("bedrock", "bedrock_valley")]
                print(f"bedrock RMSE of {way} over that of the {other}: {ratios[0]:.2f} map, {ratios[1]:.2f} valley")


def write_figure(value):
    """Three significant digits or so; a dash where there is no figure."""
    if not np.isfinite(value):
        return "-"
    return f"{value:.3f}" if abs(value) < 1.0 and value != 0.0 else f"{value:.1f}"


def main():
    parser = argparse.ArgumentParser(description="Score geoves against counties whose truth is known.")
    parser.add_argument("--seeds", type=int, nargs="+", default=list(range(41, 51)))
    parser.add_argument("--ways", nargs="+", choices=WAYS, default=list(WAYS))
    parser.add_argument("--counties", action="store_true", help="counties in which the demo's habits are false")
    parser.add_argument("--other", action="store_true", help="a county drawn by other means than the demo's")
    parser.add_argument("--delivery", type=Path, help="score this delivery of the committed demo, and run nothing")
    arguments = parser.parse_args()
    if arguments.delivery:
        figures = score_delivery(HERE, arguments.delivery, draw_county(DEFAULT_SEED))
        print_tables(str(arguments.delivery), {DEFAULT_SEED: figures})
        return
    names = [OTHER] if arguments.other else list(COUNTIES) if arguments.counties else [""]
    scored = {}
    for name in names:
        for seed in arguments.seeds:
            label = f"{name} {seed}".strip()
            scored[label] = score_county(name, seed, arguments.ways)
            print(label, "done", flush=True)
    for way in arguments.ways:
        print_tables(way, {name: figures[way] for name, figures in scored.items()})
    print()
    print_ratios(scored, arguments.ways)


if __name__ == "__main__":
    main()
