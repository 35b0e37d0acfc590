"""The command on whole regions: what it says, where, and with which exit status."""

import re
import shutil

from tests.end_to_end.conftest import DEMO, call_geoves
from tests.project.small_county import read_table, write_small_county, write_table

QUICK = "\n[inversion]\nmost_layers = 3\n"
INPUTS = ("region.toml", "soundings.csv", "readings.csv", "wells.csv", "well_logs.csv", "permits.csv", "ground.tif",
          "boundary.gpkg", "picks.csv")  # fmt: skip


def copy_demo(folder):
    folder.mkdir()
    for name in INPUTS:
        shutil.copy(DEMO / name, folder / name)
    return folder / "region.toml"


def test_the_demo_ends_with_0_and_a_summary(demo_run):
    assert demo_run.status == 0
    assert demo_run.complained == ""
    told = demo_run.said
    n_soundings, n_wells, n_permits = (len(read_table(DEMO / f"{name}.csv")) for name in ("soundings", "wells", "permits"))  # fmt: skip  # noqa: E501
    assert f"Larkmoor County: {n_soundings} soundings, {n_wells} wells, {n_permits} permits." in told
    counts = re.search(r"seen at (\d+) soundings; not distinct at (\d+); deeper than the curve reaches at (\d+)", told)
    assert sum(map(int, counts.groups())) == n_soundings
    assert min(map(int, counts.groups())) > 0
    assert "Left out one at a time" in told
    assert f"Everything is in {demo_run.folder}" in told
    assert told.splitlines()[-1].startswith("Reconnaissance only")


def test_progress_is_told_in_plain_lines_where_nobody_sits_at_a_terminal(demo_run):
    steps = [line for line in demo_run.said.splitlines() if re.search(r": \d+\.\d s$", line)]
    assert steps[0].startswith("Reading the tables")
    assert steps[-1].startswith("Moving the delivery into place")
    assert "\x1b" not in demo_run.said


def test_quiet_says_nothing_and_still_delivers(tmp_path):
    region = write_small_county(tmp_path / "county", extra=QUICK)
    done = call_geoves("run", region, "--quiet", folder=region.parent / "delivery")
    assert (done.status, done.said, done.complained) == (0, "", "")
    assert (done.folder / "run.json").is_file()


def test_broken_cells_end_with_2_and_a_line_each_and_nothing_written(tmp_path):
    region = copy_demo(tmp_path / "county")
    readings = read_table(region.parent / "readings.csv")
    readings[12]["ab2"] = "0"
    readings[40]["apparent_resistivity"] = "twelve"
    write_table(region.parent / "readings.csv", readings)
    wells = read_table(region.parent / "wells.csv")
    wells[3]["total_depth"] = "-5"
    write_table(region.parent / "wells.csv", wells)
    done = call_geoves("run", region, folder=region.parent / "delivery")
    assert done.status == 2
    faults = done.complained.splitlines()
    # Rows as a spreadsheet numbers them: the headings are row 1.
    expected = [
        ("readings.csv, row 14, ab2", "'0'"),
        ("readings.csv, row 42, apparent_resistivity", "'twelve'"),
        ("wells.csv, row 5, total_depth", "'-5'"),
    ]
    for where, value in expected:
        assert sum(line.startswith(where) and value in line for line in faults) == 1, where
    assert len(faults) == 3
    assert sorted(path.name for path in region.parent.iterdir()) == sorted(INPUTS)


def test_inputs_are_left_as_they_were(tmp_path):
    region = write_small_county(tmp_path / "county", extra='\n[surfaces]\nmodel = "matern32"\nreach = "far"\n')
    before = {path.name: path.read_bytes() for path in region.parent.iterdir()}
    done = call_geoves("run", region, folder=None)
    assert done.status == 2
    assert done.complained.startswith("region.toml")
    assert "[surfaces], reach: 'far'; expected a number" in done.complained
    assert {path.name: path.read_bytes() for path in region.parent.iterdir()} == before
