"""How the joint inference grows with soundings: time, memory, and the exponent of both.

    python -m tests.benchmarks.growth [150 600 1500 ...]
    python -m tests.benchmarks.growth --fields [150 1500 5000 ...]

The small invented county (tests/geology/county.py) is laid side by side as often as it takes, one sounding a square
kilometre. Clouds are small: what is measured is growth, not the time of a real run, whose clouds cost ten times as
much for every place alike. Each size runs in a process of its own, on one core; seconds are the
processor's, which other work on the machine alters less.
"""

import resource
import sys
import time
from multiprocessing import get_context

import attrs
import numpy as np

from geoves.domain.grids import Grid
from geoves.domain.survey import Sounding, Survey, Well
from geoves.domain.tops import Interpretation, Thickness
from geoves.domain.units import Role
from geoves.geology import GeologyOptions, infer_geology
from geoves.kernels.covariances import Covariance
from geoves.kernels.field_priors import FieldPrior
from geoves.kernels.field_windows import WindowSizes, condition_window, cut_windows, join_windows, tell
from geoves.kernels.latent_fields import Sites
from geoves.surfaces import SurfaceOptions, build_surfaces_together
from tests.geology import county

SIZES = (150, 600, 1500)
FIELD_SIZES = (150, 600, 1500, 5000)
SPACING = 1000.0
OPTIONS = GeologyOptions(
    sweeps=8, draws_at_fit=24, rounds=4, draws_a_round=16, least_effective_size=25.0, members=20, all_at_once=100
)
SQUARES_A_WELL = 12


def make_wide_county(n_soundings, seed=3):
    """The small county's geology side by side; every so manieth place a well."""
    generator, template = np.random.default_rng(seed), county.TEMPLATES["five units"]
    rock = template.units[-1].code
    side = int(np.ceil(np.sqrt(n_soundings)))
    columns, rows = (one.ravel()[:n_soundings] for one in np.meshgrid(np.arange(side), np.arange(side)))
    jitter = generator.uniform(-0.3, 0.3, (2, n_soundings))
    x, y = (np.array([columns, rows]) + 0.5 + jitter) * SPACING
    soundings, wells, tops, thicknesses = [], [], [], []
    for i in range(n_soundings):
        point = county.WEST + x[i], county.SOUTH + y[i]
        local = county.WEST + x[i] % county.WIDTH, county.SOUTH + y[i] % county.WIDTH
        truth = round_truth(template, county.truth_at(template, *local))
        sounding = Sounding(f"S{i + 1}", *point, 300.0, county.make_curve(template, truth, generator))
        guess = truth.basal_depth * float(np.exp(generator.normal(0.0, 0.15)))
        soundings.append(sounding)
        tops.append(county.say_contact(sounding, "sounding", guess, 0.15 * guess, rock))
        if i % SQUARES_A_WELL == 0:
            well = Well(f"W{i + 1}", point[0] + 200.0, point[1], 300.0, 90.0)
            wells.append(well)
            tops.append(county.say_contact(well, "well", truth.basal_depth, 0.5, rock))
            thicknesses += [
                Thickness(
                    well.name,
                    "well",
                    well.easting,
                    well.northing,
                    unit.role,
                    truth.thickness[unit.code],
                    0.5,
                    False,
                    "log",
                )
                for unit in template.units
                if unit.role in (Role.DEEP_AQUIFER, Role.SHALLOW_AQUIFER)
            ]
    inverted = tuple(county.invert_nothing(one.name) for one in soundings)
    said = Interpretation((), (), tuple(tops), tuple(thicknesses), ())
    cells = side * 2
    grid = Grid(county.WEST, county.SOUTH + side * SPACING, 500.0, cells, cells)
    return (Survey(tuple(soundings), tuple(wells)), inverted, said, template), grid


def round_truth(template, truth):
    """Depths to the metre: so few different columns that their curves are computed once."""
    depth = float(np.round(truth.basal_depth))
    above = [unit.code for unit in template.units if unit.role is not Role.DEEP_AQUIFER][:-1]
    filler = depth - sum(truth.thickness[code] for code in above[:-1])
    return truth._replace(thickness={**truth.thickness, above[-1]: filler}, basal_depth=depth)


def measure(n_soundings):
    """Places, seconds of the inference and of the surfaces, peak memory in MB, and how far off the depths are."""
    arguments, grid = make_wide_county(n_soundings)
    before = _peak()
    start = time.process_time()
    ensemble = infer_geology(*arguments, OPTIONS)
    inferred = time.process_time()
    survey, _, said, template = arguments
    build_surfaces_together(ensemble, said, survey, template, grid, SurfaceOptions())
    end = time.process_time()
    return len(ensemble.columns), inferred - start, end - inferred, _peak() - before, grid.n_rows * grid.n_columns


def _peak():
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0


def measure_fields(n_places):
    """Seconds of a round of six fields' posterior at places that each say something of all, and added memory, MB."""
    generator = np.random.default_rng(4)
    points = generator.uniform(0.0, SPACING * np.sqrt(n_places), (n_places, 2))
    prior = FieldPrior(0.0, Covariance("matern32", 0.05, 0.95, 8000.0), 1.0, 1.0, 1.0, 0.05)
    looks = generator.standard_normal((n_places, 3, 6))
    sites = Sites(looks.transpose(0, 2, 1) @ looks, generator.standard_normal((n_places, 6)))
    sizes = WindowSizes(OPTIONS.window, OPTIONS.halo, OPTIONS.everywhere)
    before, start = _peak(), time.process_time()
    windows = cut_windows(points, [str(i) for i in range(n_places)], sizes)
    relief = np.zeros(n_places)
    told = (tell(one.heard, points, relief, sites, len(one.own)) for one in windows)
    join_windows(windows, [condition_window(one, priors=(prior,) * 6) for one in told])
    return n_places, time.process_time() - start, _peak() - before


def print_fields(sizes):
    """A table of `measure_fields`, and the exponent."""
    rows = []
    for size in sizes:
        with get_context("spawn").Pool(1) as pool:
            rows.append(pool.apply(measure_fields, (size,)))
        print("{:6d} places: {:8.2f} s a round, {:6.0f} MB added".format(*rows[-1]), flush=True)
    if len(rows) > 1:
        places, seconds, _ = zip(*rows, strict=True)
        print(f"exponent {exponent(places, seconds):.2f}")


def exponent(sizes, costs):
    """Slope of log cost over log size."""
    return float(np.polyfit(np.log(sizes), np.log(costs), 1)[0])


def main(sizes):
    print(f"windows of {OPTIONS.window}, halos of {OPTIONS.halo}, {OPTIONS.everywhere} from everywhere")
    print(f"{attrs.asdict(OPTIONS)['sweeps']} rounds at most, small clouds, one core")
    print("soundings  places  inference, s  surfaces, s  cells  added memory, MB")
    rows = []
    for size in sizes:
        with get_context("spawn").Pool(1) as pool:
            places, inference, surfaces, memory, cells = pool.apply(measure, (size,))
        rows.append((places, inference, surfaces, memory))
        print(f"{size:9d}  {places:6d}  {inference:12.1f}  {surfaces:11.1f}  {cells:5d}  {memory:16.0f}", flush=True)
    if len(rows) > 1:
        places, *costs = zip(*rows, strict=True)
        told = zip(("inference", "surfaces", "memory"), costs, strict=True)
        print("exponents: " + ", ".join(f"{name} {exponent(places, cost):.2f}" for name, cost in told))


if __name__ == "__main__":
    given = [int(one) for one in sys.argv[1:] if one.isdecimal()]
    if "--fields" in sys.argv:
        print_fields(given or FIELD_SIZES)
    else:
        main(given or SIZES)
