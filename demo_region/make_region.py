"""Builds the demo region from a known truth: `python demo_region/make_region.py [--seed N] [--out FOLDER]`.

Larkmoor County is invented, with everything in it. The tables land in FOLDER and the truth in FOLDER/truth.
"""

import argparse
import shutil
import sys
from pathlib import Path

import numpy as np

HERE = Path(__file__).resolve().parent
if str(HERE.parent) not in sys.path:  # run as a script, Python looks beside the script alone
    sys.path.insert(0, str(HERE.parent))

from demo_region.generator import files  # noqa: E402 - the path comes first
from demo_region.generator.county import County, draw_county  # noqa: E402
from demo_region.generator.fieldwork import draw_survey  # noqa: E402
from demo_region.generator.wells import draw_permits, draw_wells  # noqa: E402

DEFAULT_SEED = 1
SOUNDINGS, PERMITS = 154, 480
READING_COLUMNS = ["sounding", "ab2", "mn2", "apparent_resistivity", "voltage_mv", "current_ma", "error_percent"]


def make_region(
    folder: Path, seed: int = DEFAULT_SEED, *, planted: bool = True, county: County | None = None
) -> County:
    """Write region.toml, the tables, the rasters and the truth into `folder`; returns the county.

    The county is the seed's own unless one is given. Not `planted`: a twin whose readings, elevations, logs and permits
    hold none of the faults that crews make.
    """
    folder = Path(folder)
    truth = folder / "truth"
    truth.mkdir(parents=True, exist_ok=True)
    if folder.resolve() != HERE:
        shutil.copy(HERE / "region.toml", folder / "region.toml")
    county = county or draw_county(seed)
    boundary = files.draw_boundary(county)
    inside = files.inside_test(boundary)
    rng = np.random.default_rng([seed, 2])
    soundings, readings, columns = draw_survey(county, inside, SOUNDINGS, rng, planted)
    wells, logs, well_columns = draw_wells(county, inside, rng, planted)
    permits = draw_permits(inside, PERMITS, rng, planted)

    true_soundings = files.true_soundings(soundings, readings, columns)
    true_wells = files.true_columns(wells[["well", "x", "y"]].itertuples(index=False), well_columns)
    true_wells = true_wells.rename(columns={"place": "well"})
    bad, factors = files.true_readings(readings)
    tables = {
        "soundings": soundings,
        "readings": readings[[*READING_COLUMNS, "use", "note"]],
        "wells": wells,
        "well_logs": logs,
        "permits": permits,
        "picks": files.draw_picks(true_soundings, rng),
        "truth/soundings": true_soundings,
        "truth/wells": true_wells,
        "truth/bad_readings": bad,
        "truth/segment_factors": factors,
    }
    for name, table in tables.items():
        files.write_csv(table, folder / f"{name}.csv")
    files.write_boundary(boundary, folder / "boundary.gpkg")
    files.write_ground(county, folder / "ground.tif")
    files.write_true_surfaces(county, truth)
    return county


def main() -> None:
    parser = argparse.ArgumentParser(description="Build the demo region, or another county of its kind.")
    parser.add_argument("--seed", type=int, default=DEFAULT_SEED, help="which county (default: the committed one)")
    parser.add_argument("--out", type=Path, default=HERE, help="folder to write (default: beside this script)")
    parser.add_argument("--clean", action="store_true", help="without the faults that crews make")
    arguments = parser.parse_args()
    make_region(arguments.out, arguments.seed, planted=not arguments.clean)
    print(f"Larkmoor County, seed {arguments.seed}: {SOUNDINGS} soundings, {PERMITS} permits in {arguments.out}")


if __name__ == "__main__":
    main()
