"""What minding flat layers does: `python -m tests.benchmarks.flat_layers [--seeds 1 2] [--only 450]`, minutes a county.

Counties of one section repeated, their curves from the 2.5-dimensional response. Printed for each, layers taken for
flat and not: errors of ln depth at the soundings over the deep ground, of depth (m) over a map, how often 90 % bands
hold the truth at the soundings and, over the deep ground, on the map.
"""

import argparse

import numpy as np

from geoves.domain.grids import Grid
from geoves.geology import GeologyOptions, infer_geology
from geoves.interpretation import interpret
from geoves.inversion import invert
from geoves.surfaces import SurfaceOptions, build_surfaces_together
from tests.reference.section_counties import GROUND, SHAPES, TEMPLATE, make_survey

GRID = Grid(west=500.0, north=7_200.0, cell_size=100.0, n_rows=64, n_columns=70)
DEEP = 45.0  # m
OPTIONS = {"flat": GeologyOptions(flat_layer_sweeps=0), "minded": GeologyOptions()}


def score(shape, true, geology, stack):
    """Errors and coverages, in the order in which they are printed."""
    quantiles = np.array([column.basal_depth for column in geology.columns[: true.size]])
    off = np.log(quantiles[:, 1] / true)
    deep = true > DEEP
    held = (quantiles[:, 0] <= true) & (true <= quantiles[:, 2])
    surface = stack.surfaces["bedrock_elevation"]
    truth = GROUND - np.broadcast_to(
        shape.depth(GRID.west + GRID.cell_size * (np.arange(GRID.n_columns) + 0.5)), stack.covered.shape
    )
    error = np.where(stack.covered, truth - surface.estimate, np.nan)
    over = stack.covered & (GROUND - truth > DEEP)
    inside = (surface.p05 <= truth) & (truth <= surface.p95)
    return (
        np.sqrt(np.mean(off**2)), np.sqrt(np.mean(off[deep] ** 2)), np.mean(off[deep]), np.mean(held),
        np.sqrt(np.nanmean(error**2)), np.sqrt(np.mean(error[over] ** 2)), np.mean(error[over]), np.mean(inside[over]),
    )  # fmt: skip


def main():
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seeds", type=int, nargs="+", default=[1])
    parser.add_argument("--only", default="", help="counties whose name holds this")
    given = parser.parse_args()
    print(f"{'county':20}{'seed':>5} layers  site rms  deep rms deep bias   held   map rms  deep rms deep bias   held")
    for name, shape in ((name, shape) for name, shape in SHAPES.items() if given.only in name):
        for seed in given.seeds:
            survey, true = make_survey(shape, np.random.default_rng([seed, len(name)]))
            inverted = invert(survey)
            interpretation = interpret(survey, inverted, TEMPLATE)
            for label, options in OPTIONS.items():
                geology = infer_geology(survey, inverted, interpretation, TEMPLATE, options)
                stack = build_surfaces_together(geology, interpretation, survey, TEMPLATE, GRID, SurfaceOptions())
                found = score(shape, true, geology, stack)
                numbers = "".join(f"{one:10.3f}" if i % 4 != 3 else f"{one:7.2f}" for i, one in enumerate(found))
                print(f"{name:20}{seed:5d} {label:6}{numbers}", flush=True)


if __name__ == "__main__":
    main()
