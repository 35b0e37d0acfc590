"""`geoves plan` as a job: its folder, what it refuses, and what it says."""

import json
from functools import partial

import attrs
import geopandas
import numpy as np
import pyogrio
import pytest
import shapely

from geoves.cli import main as command
from geoves.errors import DeliveryError, InputError
from geoves.planning import PlanOptions, plan_places
from geoves.project import plan as job
from geoves.project.engines import open_engine
from geoves.reading import read_region
from geoves.reading.allowed import read_allowed
from tests.project.conftest import QUICK
from tests.project.small_county import CENTRE, write_small_county

ROADS = '\n[plan]\nallowed = "roads.gpkg"\nabout = "bedrock"\n'


@pytest.fixture(scope="module")
def county(tmp_path_factory):
    """The corner with a road through it."""
    region = write_small_county(tmp_path_factory.mktemp("plan") / "county", extra=QUICK + ROADS)
    write_roads(region)
    return region


def write_roads(region, shape=None):
    x, y = CENTRE
    road = shape or shapely.LineString([(x - 5000.0, y - 1000.0), (x + 5000.0, y + 2000.0)])
    geopandas.GeoDataFrame(geometry=[road], crs="EPSG:26914").to_file(region.parent / "roads.gpkg")
    return road


@pytest.fixture
def planned(county, computed, fixed_day, monkeypatch):
    """Plans from the corner's results, which are computed once."""
    assert fixed_day
    monkeypatch.setattr(job, "work_out", lambda *_: computed)
    monkeypatch.setattr(job, "open_engine", partial(open_engine, 1))
    return partial(job.plan, county)


def test_a_plan_is_written_beside_region_toml(planned, county):
    summary = planned(places=3)
    folder = county.parent / "plan"
    assert sorted(path.name for path in folder.iterdir()) == ["plan.gpkg", "plan.html", "run.json"]
    frame = pyogrio.read_dataframe(folder / "plan.gpkg", layer="next_places")
    assert len(frame) == 3
    road = write_roads(county)
    assert all(road.distance(point) < 1e-6 for point in frame.geometry)
    record = json.loads((folder / "run.json").read_text("utf-8"))
    assert record["plan"]["places"][0]["rank"] == 1
    assert set(record["files"]) == {"plan.gpkg", "plan.html"}
    assert any("permission" in line for line in summary.lines)
    planned(places=2)  # takes the place of the first
    assert len(pyogrio.read_dataframe(folder / "plan.gpkg")) == 2


def test_one_geology_plans_for_gravel_too(computed):
    results, _ = computed
    assert results.geology is not None
    found = plan_places(results, PlanOptions(about="gravel", places=3), job.GRAVEL)
    shown = results.stack.surfaces[job.GRAVEL].estimate
    assert 0 < found.after < found.before <= 0.5
    assert found.before == pytest.approx(np.sqrt(np.nanmean(shown * (1.0 - shown))), rel=0.1)


def test_two_plans_are_the_same_to_the_byte(planned, tmp_path):
    for name in "ab":
        planned(out=tmp_path / name, places=2)
    assert (tmp_path / "a/plan.html").read_bytes() == (tmp_path / "b/plan.html").read_bytes()
    hashes = [json.loads((tmp_path / name / "run.json").read_text("utf-8"))["files"] for name in "ab"]
    assert hashes[0] == hashes[1]


def test_a_delivery_is_left_alone(planned, delivered):
    with pytest.raises(DeliveryError, match="holds a delivery"):
        planned(out=delivered)
    assert (delivered / "layers.gpkg").is_file()


def test_a_failed_plan_leaves_the_old_one(planned, tmp_path, monkeypatch):
    planned(out=tmp_path / "plan", places=1)
    before = (tmp_path / "plan/run.json").read_bytes()

    def fail(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(job, "write_plan_page", fail)
    with pytest.raises(OSError, match="No space"):
        planned(out=tmp_path / "plan", places=2)
    assert (tmp_path / "plan/run.json").read_bytes() == before


@pytest.mark.parametrize(
    ("shape", "said"),
    [(shapely.Point(CENTRE), "expected lines or polygons, found Point"), (None, "no such file beside region.toml")],
)
def test_wrong_allowed_places_are_said(tmp_path, shape, said):
    region = write_small_county(tmp_path / "county", extra=QUICK + ROADS)
    if shape is not None:
        write_roads(region, shape)
    with pytest.raises(InputError) as raised:
        job.plan(region)
    assert said in str(raised.value)
    assert not (region.parent / "plan").exists()


def test_allowed_places_come_in_the_crs_of_the_region(county, tmp_path):
    region = read_region(county)
    road = write_roads(county)
    geographic = geopandas.GeoSeries([road], crs="EPSG:26914").to_crs("EPSG:4326")
    geographic.to_file(tmp_path / "roads.geojson")
    shapes, findings = read_allowed("roads.geojson", attrs.evolve(region, path=tmp_path / "region.toml"))
    assert findings == []
    assert shapes[0].hausdorff_distance(road) < 0.1


@pytest.mark.parametrize("typed", ["0", "-1", "three"])
def test_places_are_a_number_above_0(typed, capsys):
    with pytest.raises(SystemExit):
        command.main(["plan", "region.toml", "--places", typed])
    assert "expected a whole number above 0" in capsys.readouterr().err
