"""A job on a corner of the demo region, computed once for all tests of this room."""

import pytest

from geoves.project import run as job
from geoves.project.engines import open_engine
from geoves.project.progress import SilentProgress
from tests.project.small_county import write_small_county

# Options that a corner needs and a county does not: fewer layers to try, and surfaces of three data.
QUICK = "\n[inversion]\nmost_layers = 4\n\n[surfaces]\nfewest = 3\n"
EPOCH = "1780000000"  # 2026-05-28, by `date -u -d @1780000000`
DAY = "2026-05-28"


@pytest.fixture(scope="session")
def fixed_day():
    """Runs of this session are dated alike, and done in this process."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("SOURCE_DATE_EPOCH", EPOCH)
        patch.setattr(job, "open_engine", lambda *_: open_engine(1))
        yield DAY


@pytest.fixture(scope="session")
def small_county(tmp_path_factory):
    """The region.toml of the corner; nobody writes beside it but its own delivery."""
    return write_small_county(tmp_path_factory.mktemp("small") / "county", extra=QUICK)


@pytest.fixture(scope="session")
def computed(small_county, fixed_day):
    """Results and record of the corner."""
    assert fixed_day
    return job.compute(small_county, SilentProgress())


@pytest.fixture
def deliver(computed, fixed_day):
    """Writes the corner's delivery into a folder, or what is left of it."""
    assert fixed_day

    def deliver_into(folder, results=None):
        own, record = computed
        job.deliver(results or own, record, folder, SilentProgress(), map)
        return folder

    return deliver_into


@pytest.fixture(scope="session")
def delivered(computed, tmp_path_factory):
    """One delivery of the corner, for reading only."""
    folder = tmp_path_factory.mktemp("delivered") / "delivery"
    job.deliver(*computed, folder, SilentProgress(), map)
    return folder
