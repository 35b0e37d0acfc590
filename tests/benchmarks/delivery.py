"""How fast and how small the delivery is: permits by the million, rasters of 1e8 cells, a map of a large survey.

`python -m tests.benchmarks.delivery [permits|rasters|map]`; all three without an argument. Times are those of this
machine, alone or not: compare runs with each other. The aims stand beside the numbers.
"""

import resource
import sys
import tempfile
import time
from pathlib import Path

import attrs
import geopandas
import numpy as np

from geoves.delivery.map_page import write_map_page
from geoves.delivery.permit_table import write_permit_table
from geoves.delivery.rasters import write_rasters
from geoves.domain.grids import Grid, SurfaceStack
from geoves.domain.survey import Permit
from geoves.layers.options import LayerOptions
from geoves.layers.permits import judge_permits
from tests.conftest import build_small_results
from tests.delivery.conftest import Browser, find_browser


def time_permits(count=1_000_000):
    """Permits told over a county of 1000 x 1000 cells, half of them over circles of a quarter-quarter section."""
    results = build_small_results()
    side = 1000
    grid = Grid(500_000.0, 4_700_000.0, 100.0, side, side)
    rows, columns = (np.linspace(0, n - 1, side).round().astype(int) for n in results.stack.grid.shape)

    def widen(values):
        return None if values is None else values[np.ix_(rows, columns)]

    surfaces = {
        name: attrs.evolve(
            one,
            grid=grid,
            **{part: widen(getattr(one, part)) for part in ("estimate", "standard_error", "p05", "p95")},
        )
        for name, one in results.stack.surfaces.items()
    }
    covered = widen(results.stack.covered.astype(float)) > 0
    stack = SurfaceStack(grid, widen(results.stack.ground), covered, surfaces)
    draws = np.random.default_rng(1)
    x, y = draws.uniform(500_000, 600_000, count).tolist(), draws.uniform(4_600_000, 4_700_000, count).tolist()
    depth = draws.uniform(10, 120, count).tolist()
    permits = tuple(Permit(f"P{i}", x[i], y[i], depth[i], "domestic", 284.5 if i % 2 else None) for i in range(count))
    begun, worked = time.perf_counter(), time.process_time()
    told = judge_permits(stack, permits, results.region, LayerOptions())
    judged, worked = time.perf_counter() - begun, time.process_time() - worked
    survey = attrs.evolve(results.survey, permits=permits)
    wide = attrs.evolve(results, survey=survey, layers={**results.layers, "permits": told})
    with tempfile.TemporaryDirectory() as folder:
        begun = time.perf_counter()
        table = write_permit_table(wide, Path(folder))
        written = time.perf_counter() - begun
        size = table.stat().st_size / 1e6
    share = told.covered.mean()
    print(f"{count:,} permits, half of them circles: told in {judged:.0f} s, {worked:.0f} s of them at work "
          f"(aim: 60 s), {share:.0%} covered")  # fmt: skip
    print(f"    their table: {written:.0f} s, {size:.0f} MB")


def time_raster(side=10_000):
    """One surface of side x side cells written and verified; the memory is the peak beyond the cells themselves."""
    results = build_small_results()
    grid = Grid(500_000.0, 5_600_000.0, 100.0, side, side)
    row = np.linspace(0.0, 40.0, side, dtype=np.float32)
    depth = np.broadcast_to(row, grid.shape)
    shared = np.broadcast_to(np.float64(1.0), grid.shape)
    surface = _Uncopied("bedrock_depth", "Depth to bedrock", "depth", grid, depth)
    stack = _Stack({"bedrock_depth": surface}, grid, shared)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    with tempfile.TemporaryDirectory() as folder:
        begun = time.perf_counter()
        (path,) = write_rasters(stack, results.region, Path(folder), {"software": "geoves"})
        took, size = time.perf_counter() - begun, path.stat().st_size / 1e6
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    print(f"{side**2:.0e} cells: {took:.0f} s, {size:.0f} MB; {peak - before:.0f} MB of memory beside the cells, "
          f"{peak:.0f} MB in all (aim: 500 MB)")  # fmt: skip


@attrs.frozen
class _Uncopied:
    """A surface that is a view of one row, so that the writer's own memory is measured."""

    name: str
    title: str
    quantity: str
    grid: Grid
    estimate: np.ndarray
    standard_error: np.ndarray | None = None
    p05: np.ndarray | None = None
    p95: np.ndarray | None = None


@attrs.frozen
class _Stack:
    surfaces: dict[str, _Uncopied]
    grid: Grid
    ground: np.ndarray


def build_large_survey(soundings=2000, permits=20_000):
    """The mini region's job with so many soundings and permits, spread over its grid."""
    results = build_small_results()
    west, south, east, north = results.stack.grid.bounds
    draws = np.random.default_rng(2)

    def places(count):
        return zip(draws.uniform(west, east, count).tolist(), draws.uniform(south, north, count).tolist(), strict=True)

    kept, models, columns = [], [], []
    for i, (x, y) in enumerate(places(soundings)):
        k = i % len(results.survey.soundings)
        name = f"S{i:04d}"
        kept.append(attrs.evolve(results.survey.soundings[k], name=name, easting=x, northing=y))
        models.append(attrs.evolve(results.inverted[k], sounding=name))
        columns.append(attrs.evolve(results.interpretation.columns[k], sounding=name))
    asked = tuple(Permit(f"P{i:05d}", x, y, 40.0, "domestic", 200.0) for i, (x, y) in enumerate(places(permits)))
    told = judge_permits(results.stack, asked, results.region, LayerOptions())
    survey = attrs.evolve(results.survey, soundings=tuple(kept), permits=asked)
    interpretation = attrs.evolve(results.interpretation, columns=tuple(columns))
    layers = {**results.layers, "permits": geopandas.GeoDataFrame(told)}
    return attrs.evolve(results, survey=survey, inverted=tuple(models), interpretation=interpretation, layers=layers)


def time_map():
    """A map of 2000 soundings and 20 000 permits: written, opened in headless Chromium until it answers."""
    results = build_large_survey()
    with tempfile.TemporaryDirectory() as folder:
        begun = time.perf_counter()
        path = write_map_page(results, Path(folder) / "map.html")
        written = time.perf_counter() - begun
        browser = Browser(*find_browser())
        begun = time.perf_counter()
        browser.open(path)
        browser.wait_for("document.body.dataset.ready === 'yes'", 120)
        opened = time.perf_counter() - begun
        begun = time.perf_counter()
        browser.run("map_geoves.setView(map_geoves.getCenter(), 14, {animate: false})")
        moved = time.perf_counter() - begun
        complaints = browser.complaints()
        browser.driver.quit()
        print(f"map of 2000 soundings and 20 000 permits: {path.stat().st_size / 1e6:.1f} MB (aim: 25), written in "
              f"{written:.1f} s, ready in {opened:.1f} s (aim: 5), zoomed in {moved:.1f} s; {len(complaints)} "
              "complaints")  # fmt: skip


BENCHMARKS = {"permits": time_permits, "rasters": time_raster, "map": time_map}

if __name__ == "__main__":
    for name in sys.argv[1:] or BENCHMARKS:
        BENCHMARKS[name]()
