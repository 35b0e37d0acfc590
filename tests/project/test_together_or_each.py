"""Which method a job ends with, and that it says so."""

from functools import partial

import pytest

from geoves.project import run as job
from geoves.project.engines import open_engine
from geoves.project.progress import SilentProgress
from tests.project.eight_soundings import write_eight_soundings
from tests.project.small_county import read_table, write_table


@pytest.fixture
def four_soundings(tmp_path, monkeypatch):
    """The region.toml of four soundings and no more, with the method `together`."""
    monkeypatch.setattr(job, "open_engine", partial(open_engine, 1))
    region = write_eight_soundings(tmp_path / "county")
    for name in ("soundings", "readings"):
        path = region.parent / f"{name}.csv"
        rows = read_table(path)
        kept = list(dict.fromkeys(row["sounding"] for row in read_table(region.parent / "soundings.csv")))[:4]
        write_table(path, [row for row in rows if row["sounding"] in kept])
    text = region.read_text(encoding="utf-8").replace('method = "each"', 'method = "together"')
    assert 'method = "together"' in text
    region.write_text(text, encoding="utf-8")
    return region


def test_too_few_soundings_fall_back_on_each_and_it_is_said(four_soundings):
    results, record = job.compute(four_soundings, SilentProgress())
    assert results.geology is None
    said = results.stack.remarks[0]
    assert said.startswith("the method is 'each', not 'together': 4 soundings with a curve")
    assert said in record["remarks"]
    assert record["method"] == "each"
    assert record["geology"] is None
    assert "bedrock_elevation" in results.stack.surfaces


def test_the_inference_is_first_made_without_picks(computed):
    results, record = computed
    assert results.survey.picks
    undecided = results.interpretation.undecided
    assert undecided is not None
    assert not any(top.kind == "pick" for top in undecided.tops)
    assert any(top.kind == "pick" for top in results.interpretation.tops)
    assert record["method"] == "together"
