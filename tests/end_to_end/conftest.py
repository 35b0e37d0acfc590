"""The demo region, run once through the command as a person calls it; a browser for its pages."""

import subprocess
import sys
from pathlib import Path

import attrs
import pytest

from tests.delivery.conftest import browser  # noqa: F401 - the fixture serves here too

ROOT = Path(__file__).parents[2]
DEMO = ROOT / "demo_region"


@attrs.frozen
class Finished:
    """A call that has ended, and the folder it was told to write."""

    status: int
    said: str
    complained: str
    folder: Path


def call_geoves(*arguments, folder):
    """What became of `geoves ARGUMENTS`, run in a process of its own from the project's folder."""
    call = [sys.executable, "-m", "geoves.cli.main", *map(str, arguments)]
    done = subprocess.run(call, cwd=ROOT, capture_output=True, text=True, check=False, timeout=900)
    assert "Traceback" not in done.stdout + done.stderr
    return Finished(done.returncode, done.stdout, done.stderr, folder)


@pytest.fixture(scope="session")
def demo_run(tmp_path_factory):
    """The demo's run."""
    folder = tmp_path_factory.mktemp("demo") / "delivery"
    return call_geoves("run", DEMO / "region.toml", "--out", folder, folder=folder)


@pytest.fixture(scope="session")
def delivery(demo_run):
    """The demo's delivery folder."""
    assert demo_run.status == 0, demo_run.complained
    return demo_run.folder
