"""kill -9 at 50 seeded instants of a run on eight soundings, most of them within its publication."""

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

from tests.project.eight_soundings import write_eight_soundings
from tests.project.run_and_die import PUBLICATIONS, WHOLE_RUNS

SCRIPT = Path(__file__).parent / "run_and_die.py"
pytestmark = pytest.mark.skipif(os.name == "nt", reason="SIGKILL and fork are of POSIX")


@pytest.fixture(scope="module")
def kills(tmp_path_factory):
    """A row a kill, of whole runs, of publications, and of publications beside a person's own files."""
    where = tmp_path_factory.mktemp("killed")
    region = write_eight_soundings(where / "inputs")
    environment = os.environ | {"PYTHONPATH": str(Path(__file__).parents[2]), "OPENBLAS_NUM_THREADS": "1"}
    call = [sys.executable, str(SCRIPT), str(region), str(where)]
    done = subprocess.run(call, env=environment, capture_output=True, text=True, check=False, timeout=900)
    assert done.returncode == 0, done.stderr
    rows = [json.loads(line) for line in done.stdout.splitlines()]
    return {kind: [row for row in rows if row["kind"] == kind] for kind in ("run", "publication", "own", "resumed")}


@pytest.mark.parametrize(("kind", "count"), [("run", WHOLE_RUNS), ("publication", PUBLICATIONS // 2)])
def test_a_killed_run_leaves_the_old_delivery_or_the_new(kills, kind, count):
    assert len(kills[kind]) == count
    for row in kills[kind]:
        assert row["killed"] in (["old", False], ["new", False])
        assert row["mended"] == row["killed"]
        assert [name for name in row["litter"] if name not in ("delivery", ".geoves_memory", "timed")] == []


def test_beside_own_files_it_leaves_the_old_the_new_or_no_record_until_the_next_start(kills):
    assert len(kills["own"]) == PUBLICATIONS // 2
    states = [row["killed"][0] for row in kills["own"]]
    assert set(states) <= {"old", "new", "none"}
    assert "none" in states, "no kill met the swap itself"
    for row in kills["own"]:
        assert row["killed"][1], "a person's file is gone"
        assert row["mended"][1]
        assert row["mended"][0] in {"old": ("old", "new"), "none": ("new",), "new": ("new",)}[row["killed"][0]]


def test_a_run_after_the_kills_gives_the_bytes_of_one_that_was_not_interrupted(kills):
    (row,) = kills["resumed"]
    assert row["killed"] == ["new", False]
