"""A season's soundings, inverted and read through the template: `python -m tests.benchmarks.season [--memory]`.

Seconds of the whole and of each part on as many workers as there are cores, and of processor time, which other work on
the machine alters less, with sequences, calibration and ensembles
of 200. With `--memory` the peak of the whole is printed for 150 and for 600 soundings, each in a process of its own:
blocks bound it, so it grows by what is kept of each sounding alone.
"""

import argparse
import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import attrs

from demo_region.make_region import make_region
from geoves.interpretation import InterpretationOptions, interpret
from geoves.inversion import InversionOptions, invert
from geoves.project.engines import open_engine
from geoves.reading import read_region, read_survey

SEED, DRAWS = 21, 200


def read_season(count):
    """A survey of `count` soundings and its template; beyond a county's own they come again under other names."""
    with tempfile.TemporaryDirectory() as folder:
        make_region(folder, SEED)
        region = read_region(Path(folder) / "region.toml")
        survey, _ = read_survey(region)
    own = survey.soundings
    repeated = [attrs.evolve(own[i % len(own)], name=f"{i}") for i in range(count)]
    return attrs.evolve(survey, soundings=tuple(repeated), picks=()), region.template


def time_season(count):
    """Seconds of the inversion and of the interpretation."""
    survey, template = read_season(count)
    with open_engine() as engine:
        list(engine(str, range(8)))  # the workers are up
        begin = time.perf_counter()
        inverted = invert(survey, InversionOptions(draws=DRAWS), map=engine)
        middle = time.perf_counter()
        interpret(survey, inverted, template, InterpretationOptions(draws=DRAWS), map=engine)
        return middle - begin, time.perf_counter() - middle


def print_season(count):
    inversion, interpretation = time_season(count)
    usage = [resource.getrusage(who) for who in (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN)]
    own, worker = (one.ru_maxrss / 1024 for one in usage)
    processor = sum(one.ru_utime + one.ru_stime for one in usage)
    print(
        f"  {count} soundings: {inversion + interpretation:.1f} s, inversion {inversion:.1f}, interpretation "
        f"{interpretation:.1f}; {processor:.0f} s of processor time with reading;\n"
        f"  peak memory {own:.0f} MB here, {worker:.0f} MB in the largest worker",
        flush=True,
    )


def main():
    parser = argparse.ArgumentParser(description="Time a season of soundings.")
    parser.add_argument("--memory", action="store_true", help="also with four times the soundings")
    parser.add_argument("--count", type=int, help="this many soundings alone")
    arguments = parser.parse_args()
    if arguments.count:
        print_season(arguments.count)
        return
    print(f"\nA season: inversion and interpretation, calibrated, ensembles of {DRAWS}")
    for count in (150, 600) if arguments.memory else (150,):
        subprocess.run([sys.executable, "-m", "tests.benchmarks.season", "--count", str(count)], check=True)


if __name__ == "__main__":
    main()
