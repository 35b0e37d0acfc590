"""The whole job on a corner of the demo region: its files, its failures, its units, its gaps."""

import hashlib
import json
import os
import shutil
import subprocess
import sys
from contextlib import nullcontext
from pathlib import Path

import attrs
import geopandas
import numpy as np
import pyogrio
import pytest
import rasterio

from geoves.delivery import folder as delivery_folder
from geoves.errors import DeliveryError, EngineError
from geoves.project import run as job
from tests.project.conftest import EPOCH, QUICK
from tests.project.small_county import FEET, put_into_feet, read_table, write_small_county, write_table

WRITERS = ("write_rasters", "write_geopackage", "write_report_page")  # the first, one amid, the last


def read_all(folder):
    """Bytes of each file by its name within the folder."""
    return {path.relative_to(folder).as_posix(): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


def read_cells(path):
    with rasterio.open(path) as raster:
        return raster.read(1, masked=True).astype(float).filled(np.nan)


# The record


def test_run_json_lists_every_file_with_its_hash(delivered):
    files = read_all(delivered)
    record = json.loads(files.pop("run.json"))
    assert record["files"] == {name: hashlib.sha256(content).hexdigest() for name, content in files.items()}
    assert len(files) > 40
    for key in ("versions", "inputs", "parameters", "reach", "remarks", "covariances", "figures_of_merit"):
        assert record[key], key


def test_run_json_is_the_last_to_move_in(deliver, tmp_path, monkeypatch):
    moved = []
    replace = Path.replace

    def watch(self, target):
        moved.append(Path(target))
        return replace(self, target)

    monkeypatch.setattr(Path, "replace", watch)
    (tmp_path / "delivery").mkdir()
    (tmp_path / "delivery" / "notes.txt").write_bytes(b"mine")  # so that files move one by one
    folder = deliver(tmp_path / "delivery")
    inside = [path for path in moved if path.is_relative_to(folder)]
    assert len(inside) == len(read_all(folder)) - 1
    assert inside[-1] == folder / "run.json"
    assert folder / "run.json" not in inside[:-1]


def test_the_pages_and_rasters_say_who_made_them(delivered, fixed_day):
    with rasterio.open(delivered / "surfaces" / "bedrock_elevation.tif") as raster:
        tags = raster.tags()
    assert tags["date"] == fixed_day
    assert tags["region"] == "Larkmoor County"


# Failure


@pytest.mark.parametrize("writer", WRITERS)
def test_a_writer_that_fails_leaves_the_old_delivery_as_it_was(deliver, tmp_path, monkeypatch, writer):
    folder = tmp_path / "delivery"
    folder.mkdir()
    for name in ("run.json", "map.html"):
        (folder / name).write_text('{"files": {"map.html": ""}}', encoding="utf-8")

    def fail(*_, **__):
        raise DeliveryError("the disk is full")

    monkeypatch.setattr(job, writer, fail)
    before = read_all(tmp_path)
    with pytest.raises(DeliveryError, match="disk is full"):
        deliver(folder)
    assert read_all(tmp_path) == before
    assert [path.name for path in tmp_path.iterdir()] == ["delivery"]


@pytest.mark.parametrize("after", [0, 30])
def test_a_move_that_fails_half_way_is_undone(deliver, delivered, tmp_path, monkeypatch, after):
    folder = shutil.copytree(delivered, tmp_path / "delivery")
    (folder / "notes.txt").write_bytes(b"mine")
    before = read_all(folder)
    left = [after]
    replace = Path.replace

    def stumble(self, target):
        if "staging" in self.parts and Path(target).is_relative_to(folder):
            left[0] -= 1
            if left[0] == -1:
                raise OSError(28, "No space left on device")
        return replace(self, target)

    monkeypatch.setattr(Path, "replace", stumble)
    with pytest.raises(DeliveryError, match="No space left"):
        deliver(folder)
    assert left[0] < 0
    monkeypatch.undo()
    assert read_all(folder) == before


# What stands in the folder already


def test_the_users_own_files_stay(deliver, delivered, tmp_path):
    folder = shutil.copytree(delivered, tmp_path / "delivery")
    own = {"notes.txt": b"mine", "surfaces/bedrock_2019.tif": b"mine too", "project.qgz": b"and this"}
    for name, content in own.items():
        (folder / name).write_bytes(content)
    deliver(folder)
    files = read_all(folder)
    assert own.items() <= files.items()
    assert not own.keys() & json.loads(files["run.json"])["files"].keys()


def test_a_file_of_the_user_under_our_name_stops_the_delivery(deliver, tmp_path):
    folder = tmp_path / "delivery"
    folder.mkdir()
    (folder / "map.html").write_bytes(b"mine")
    with pytest.raises(DeliveryError, match=r"map\.html"):
        deliver(folder)
    assert read_all(tmp_path) == {"delivery/map.html": b"mine"}


def test_what_an_earlier_run_wrote_and_this_one_does_not_is_taken_away(deliver, delivered, computed, tmp_path):
    folder = shutil.copytree(delivered, tmp_path / "delivery")
    results = computed[0]
    kept = {name: one for name, one in results.stack.surfaces.items() if not name.startswith("deep_gravel")}
    deliver(folder, attrs.evolve(results, stack=attrs.evolve(results.stack, surfaces=kept)))
    files = read_all(folder)
    assert not [name for name in files if name.startswith("surfaces/deep_gravel")]
    assert json.loads(files["run.json"])["files"].keys() == files.keys() - {"run.json"}


# Repeating


def test_another_process_with_two_workers_delivers_the_same_bytes(small_county, delivered, tmp_path):
    """The whole delivery, GeoPackage and run.json among it."""
    code = (
        "import sys\nfrom pathlib import Path\nfrom geoves.project import run as job\n"
        "if __name__ == '__main__':\n    job.run(Path(sys.argv[1]), Path(sys.argv[2]), workers=2)\n"
    )
    script, out = tmp_path / "again.py", tmp_path / "out"
    script.write_text(code, encoding="utf-8")
    environment = os.environ | {"SOURCE_DATE_EPOCH": EPOCH, "PYTHONPATH": str(Path(__file__).parents[2])}
    call = [sys.executable, str(script), str(small_county), str(out)]
    done = subprocess.run(call, env=environment, capture_output=True, text=True, check=False, timeout=600)
    assert done.returncode == 0, done.stderr
    first, second = read_all(delivered), read_all(out)
    assert first.keys() == second.keys()
    assert [name for name in first if first[name] != second[name]] == []


# Units


class CountedStep:
    """A step of which the parts are counted."""

    def __init__(self):
        self.done = 0

    def advance(self, n=1):
        self.done += n


class Watcher:
    """Keeps title, promised parts and step of all that a job tells."""

    def __init__(self):
        self.steps = []

    def step(self, title, total):
        self.steps.append((title, total, CountedStep()))
        return nullcontext(self.steps[-1][-1])


@pytest.fixture(scope="module")
def watched_in_feet(tmp_path_factory, fixed_day):
    """The same corner with its tables, template and delivery in feet: the folder, the summary, who watched."""
    assert fixed_day
    region = write_small_county(tmp_path_factory.mktemp("feet") / "county", extra=QUICK)
    put_into_feet(region)
    watcher = Watcher()
    summary = job.run(region, None, watcher)
    return region.parent / "delivery", summary, watcher


@pytest.fixture(scope="module")
def in_feet(watched_in_feet):
    return watched_in_feet[0]


def test_a_region_in_feet_has_the_geology_of_the_same_in_metres(delivered, in_feet):
    """1 ft is 0.3048 m (NIST SP 811, appendix B.6). Lengths are rounded to 1/64 of their unit, so to half of both."""
    names = sorted(path.name for path in (delivered / "surfaces").iterdir())
    assert sorted(path.name for path in (in_feet / "surfaces").iterdir()) == names
    for name in names:
        metres, feet = read_cells(delivered / "surfaces" / name), read_cells(in_feet / "surfaces" / name)
        assert np.array_equal(np.isnan(metres), np.isnan(feet)), name
        is_length = not any(word in name for word in ("probability", "resistivity", "support"))
        with rasterio.open(in_feet / "surfaces" / name) as raster:
            assert raster.units == (("ft",) if is_length else ("ohm m",) if "resistivity" in name else ("1",)), name
        told = feet * FEET if is_length else feet
        assert np.nanmax(np.abs(told - metres)) < 0.02 + 1e-3 * np.nanmax(np.abs(metres - np.nanmean(metres))), name


def test_permits_in_feet_say_the_same(delivered, in_feet):
    metres, feet = (
        geopandas.read_file(folder / "layers.gpkg", layer="permits").set_index("permit")
        for folder in (delivered, in_feet)
    )
    assert len(metres) == 12
    for column in ("bedrock_depth", "bedrock_depth_p05", "gravel_thickness_p95", "requested_depth"):
        assert np.allclose(feet[column] * FEET, metres[column], atol=0.05, equal_nan=True), column
    assert np.allclose(feet.gravel_probability, metres.gravel_probability, atol=2e-3, equal_nan=True)


# Gaps


BARE = ("wells", "well_logs", "permits", "picks", "ground", "boundary")


@pytest.fixture(scope="module")
def bare(tmp_path_factory, fixed_day):
    """The corner with nothing but soundings, their elevations and readings: the summary and the delivery."""
    assert fixed_day
    region = write_small_county(tmp_path_factory.mktemp("bare") / "county", without=BARE, extra=QUICK)
    rows = read_table(region.parent / "soundings.csv")
    write_table(
        region.parent / "soundings.csv", [row | {"ground_elevation": row["ground_elevation"] or "400"} for row in rows]
    )
    return job.run(region), region.parent / "delivery"


def test_soundings_alone_are_enough(bare):
    summary, folder = bare
    assert any(line.endswith("18 soundings, 0 wells, 0 permits.") for line in summary.lines)
    assert any("no ground raster" in line for line in summary.lines)
    bedrock = read_cells(folder / "surfaces" / "bedrock_elevation.tif")
    assert np.isfinite(bedrock).mean() > 0.3
    assert (bedrock[np.isfinite(bedrock)] < 410.0).all()
    assert json.loads((folder / "run.json").read_text("utf-8"))["inputs"].keys() == {
        "region.toml", "soundings.csv", "readings.csv",
    }  # fmt: skip


def test_soundings_alone_still_give_every_layer(bare):
    layers = {name for name, _ in pyogrio.list_layers(bare[1] / "layers.gpkg")}
    assert layers == {
        "soundings", "model_layers", "tops", "readings", "picks", "wells", "well_intervals", "bedrock_contours",
        "thickness_contours", "valley_axis", "valley_stations", "gravel_extent", "permits", "sections", "doubts",
    }  # fmt: skip
    assert len(pyogrio.read_dataframe(bare[1] / "layers.gpkg", layer="permits")) == 0
    assert len(pyogrio.read_dataframe(bare[1] / "layers.gpkg", layer="soundings")) == 18


def test_two_soundings_end_in_words_and_leave_no_folder(tmp_path, fixed_day):
    assert fixed_day
    region = write_small_county(tmp_path / "county", without=BARE, extra=QUICK)
    rows = read_table(region.parent / "soundings.csv")[:2]
    names = {row["sounding"] for row in rows}
    write_table(region.parent / "soundings.csv", [row | {"ground_elevation": "400"} for row in rows])
    readings = read_table(region.parent / "readings.csv")
    write_table(region.parent / "readings.csv", [row for row in readings if row["sounding"] in names])
    with pytest.raises(EngineError, match="at least 3 depths are needed"):
        job.run(region)
    assert not (region.parent / "delivery").exists()
    assert not delivery_folder.name_workplace(region.parent / "delivery").exists()


# What is said


def test_progress_is_told_step_by_step_and_no_further_than_promised(watched_in_feet):
    steps = watched_in_feet[2].steps
    titles = [title for title, _, _ in steps]
    assert titles[0] == "Reading the tables"
    assert titles[-1] == "Moving the delivery into place"
    assert len(titles) == len(set(titles))
    for title, total, step in steps:
        assert 0 < step.done <= total, title


def test_the_summary_says_what_was_found_in_the_regions_own_unit(watched_in_feet):
    folder, summary, _ = watched_in_feet
    told = "\n".join(summary.lines)
    assert "18 soundings, 5 wells, 12 permits" in told
    deepest = np.nanmax(read_cells(folder / "surfaces" / "bedrock_depth.tif"))
    assert f"to {deepest:.0f} ft deep" in told
    assert str(folder) in told
    assert "Reconnaissance only" in told
