"""plan.html in a browser and plan.gpkg read back: offline, every place there with its reasons, hostile text inert."""

import sqlite3

import pyogrio
import pytest

from geoves.delivery.plan_layer import write_plan_layer
from geoves.delivery.plan_page import write_plan_page
from geoves.domain.plans import NextPlace, Plan

FEET = 1200.0 / 3937.0  # m, US survey foot (NIST SP 811, appendix B.6)
SURFACES = {"bedrock": "bedrock_elevation", "gravel": "deep_gravel_probability"}


def make_plan(about="bedrock", nearest="Larch 3"):
    doubts = (12.0, 5.0, 1.5, 1.5, 2.0) if about == "bedrock" else (0.4, 0.2, 0.05, 0.05, 0.07)
    places = tuple(
        NextPlace(
            rank, kind, 500_300.0 + 700.0 * rank, 4_601_000.0 + 200.0 * rank, 250.0, *doubts, 61.0, 0.12, nearest, 640.0
        )
        for rank, kind in ((1, "sounding"), (2, "test_hole"))
    )
    before, after = (8.0, 5.0) if about == "bedrock" else (0.3, 0.2)
    return Plan(about, "grid", 0.0, places, before, after, 400, 1000, ("2 of 9 places: no other would",))


@pytest.fixture(scope="module")
def page(small_results, tmp_path_factory):
    path = tmp_path_factory.mktemp("plan") / "plan.html"
    return write_plan_page(make_plan(), small_results, SURFACES["bedrock"], path)


def test_nothing_is_requested_and_nothing_complains(browser, page):
    browser.open(page)
    assert browser.requested_addresses() == [page.as_uri()]
    assert browser.complaints() == []


def test_every_place_stands_in_the_table_the_map_and_the_reasons(browser, page):
    browser.open(page)
    rows = browser.run("return [...document.querySelectorAll('tbody tr')].map(r => r.textContent)")
    assert [row[:10] for row in rows] == ["1sounding2", "2test hole"]
    assert browser.run("return document.querySelectorAll('.mark.next').length") == 2
    reasons = browser.run("return [...document.querySelectorAll('#reasons ~ h3')].map(h => h.textContent)")
    assert reasons == ["1: sounding at 501000, 4601200", "2: test hole at 501700, 4601400"]
    words = browser.run("return document.body.textContent")
    assert "12.0 m here now" in words
    assert "2 of 9 places: no other would." in words


def test_cautions_stand_there(browser, page):
    browser.open(page)
    said = browser.run("return document.querySelector('ul.cautions').textContent")
    for words in ("hundreds of volts", "whoever owns", "buried lines", "local codes", "no decision on siting"):
        assert words in said


def test_a_narrow_screen_scrolls_no_page(browser, page):
    browser.open(page, width=380)
    assert browser.run("return document.documentElement.scrollWidth <= window.innerWidth")


def test_hostile_text_stays_text(browser, hostile_results, tmp_path):
    name = hostile_results.survey.soundings[1].name
    path = write_plan_page(make_plan(nearest=name), hostile_results, SURFACES["bedrock"], tmp_path / "plan.html")
    browser.open(path)
    assert browser.run("return document.title") == f"{hostile_results.region.name}: where to measure next"
    assert browser.run("return document.querySelectorAll('script, img').length") == 0
    assert name in browser.run("return document.body.textContent")


def test_a_plan_for_gravel_speaks_in_per_cent(browser, small_results, tmp_path):
    path = write_plan_page(make_plan("gravel"), small_results, SURFACES["gravel"], tmp_path / "plan.html")
    browser.open(path)
    assert "40.0 %" in browser.run("return document.querySelector('tbody').textContent")


@pytest.mark.parametrize(("about", "metres"), [("bedrock", FEET), ("gravel", 1.0)])
def test_the_layer_is_in_the_unit_of_the_region(small_results_in_feet, tmp_path, about, metres):
    path = write_plan_layer(make_plan(about), small_results_in_feet, tmp_path / "plan.gpkg", {"date": "2026-05-28"})
    frame = pyogrio.read_dataframe(path, layer="next_places")
    expected = make_plan(about).places[0]
    assert frame["rank"].tolist() == [1, 2]
    assert frame["kind"].tolist() == ["sounding", "test_hole"]
    assert frame["lowering"][0] == pytest.approx(expected.lowering / metres, abs=1e-3)
    assert frame["ab2"][0] == pytest.approx(250.0 / FEET, abs=1e-3)
    assert (frame.geometry.x[0], frame.geometry.y[0]) == (expected.easting, expected.northing)
    assert (frame["x"][0], frame["y"][0]) == (expected.easting, expected.northing)


def test_the_layer_names_its_columns_and_units(small_results_in_feet, tmp_path):
    path = write_plan_layer(make_plan(), small_results_in_feet, tmp_path / "plan.gpkg", {"date": "2026-05-28"})
    with sqlite3.connect(path) as database:
        titles = dict(database.execute("SELECT column_name, title FROM gpkg_data_columns"))
        tables = {name for (name,) in database.execute("SELECT name FROM sqlite_master WHERE type = 'table'")}
        extensions = {name for (name,) in database.execute("SELECT extension_name FROM gpkg_extensions")}
    database.close()
    assert titles["ab2"] == "AB/2 (us-ft)"
    assert "gpkg_metadata" not in tables
    assert "gpkg_metadata" not in extensions
