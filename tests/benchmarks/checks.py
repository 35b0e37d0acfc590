"""How often planted faults are found, and how often a clean county is doubted: `python -m tests.benchmarks.checks`.

For each seed a county without faults is drawn (tests/checking/planted.py), looked at, and then each fault is planted
in it by itself. Printed are the share of seeds in which a fault was told where it stands, and all doubts of clean
counties.
"""

import argparse
import tempfile
import time
from collections import Counter
from pathlib import Path

import numpy as np

from geoves.project.check import examine_inputs
from geoves.reading import look_at_inputs
from tests.checking.planted import OF_THE_TEMPLATE, PLANTS, draw_sheets


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--seeds", type=int, default=20, help="counties (default 20)")
    parser.add_argument("--soundings", type=int, default=40, help="soundings of each (default 40)")
    arguments = parser.parse_args()
    found: Counter[str] = Counter()
    false: Counter[str] = Counter()
    readings, started = 0, time.perf_counter()
    for seed in range(1, arguments.seeds + 1):
        before = sum(found.values()), sum(false.values())
        with tempfile.TemporaryDirectory() as name:
            readings += judge_county(Path(name), seed, arguments.soundings, found, false)
        told, alarms = sum(found.values()) - before[0], sum(false.values()) - before[1]
        print(f"county {seed}: {told} of {len(PLANTS)} planted faults found, {alarms} false alarms", flush=True)
    print(f"{arguments.seeds} counties of {arguments.soundings} soundings, {time.perf_counter() - started:.0f} s\n")
    for plant in PLANTS:
        print(f"  {plant.__name__.replace('_', ' '):42s} {found[plant.__name__] / arguments.seeds:6.0%}")
    total = sum(found.values()) / (len(PLANTS) * arguments.seeds)
    print(f"  {'all planted faults':42s} {total:6.1%}")
    told = ", ".join(f"{check} {count}" for check, count in false.most_common()) or "none"
    print(
        f"\nFalse alarms in {arguments.seeds} clean counties with {readings} readings: {sum(false.values())} ({told})"
    )


def judge_county(folder: Path, seed: int, soundings: int, found: Counter[str], false: Counter[str]) -> int:
    """Count what is found in one county; its number of readings comes back."""
    sheets = draw_sheets(seed, soundings)
    sheets.write(folder)
    clean = examine_inputs(look_at_inputs(folder / "region.toml")).findings
    false.update(one.check for one in clean if one.check not in OF_THE_TEMPLATE)
    for plant in PLANTS:
        planted = sheets.copy()
        told = plant(planted, np.random.default_rng([seed, 5]))
        planted.write(folder, rasters=False)
        findings = examine_inputs(look_at_inputs(folder / "region.toml")).findings
        found[plant.__name__] += told.is_in(findings)
    return len(sheets.readings)


if __name__ == "__main__":
    main()
