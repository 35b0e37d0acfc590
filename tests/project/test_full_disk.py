"""A disk that takes no more, by a limit on the size of files (setrlimit(2)): one line, status 1, the old delivery."""

import os
import resource
import subprocess
import sys
from pathlib import Path

import pytest

from tests.project.eight_soundings import write_eight_soundings
from tests.project.test_run import read_all


def geoves_run(region, limit=None):
    environment = os.environ | {"PYTHONPATH": str(Path(__file__).parents[2]), "OPENBLAS_NUM_THREADS": "1"}
    limits = (lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (limit, limit))) if limit else None
    call = [sys.executable, "-m", "geoves.cli.main", "run", str(region), "--workers", "1", "--quiet"]
    return subprocess.run(
        call, env=environment, capture_output=True, text=True, check=False, timeout=300, preexec_fn=limits
    )


@pytest.fixture(scope="module")
def region(tmp_path_factory):
    """A job that has been run once."""
    path = write_eight_soundings(tmp_path_factory.mktemp("full") / "county")
    done = geoves_run(path)
    assert (done.returncode, done.stderr) == (0, "")
    return path


@pytest.mark.parametrize("kilobytes", [3, 200])
def test_a_full_disk_is_said_in_a_line_and_the_old_delivery_stands(region, kilobytes):
    before = read_all(region.parent / "delivery")
    done = geoves_run(region, limit=1024 * kilobytes)
    assert done.returncode == 1
    assert "Traceback" not in done.stderr
    line = done.stderr.splitlines()[-1]  # libraries may have said something before
    assert "cannot be written: File too large; the old delivery still stands" in line
    assert read_all(region.parent / "delivery") == before
    assert not (region.parent / ".geoves-delivery").exists()
