"""check.html in a browser: offline, every sounding there, doubted readings hollow and named, hostile text inert."""

import csv

import attrs
import numpy as np
import pytest

from geoves.checking import examine_survey
from geoves.checking.catalogue import CHECKS
from geoves.delivery.check_page import CheckedInputs, write_check_page
from tests.delivery.conftest import HOSTILE


def checked(results):
    """The small county's inputs with one reading that jumps, as the check sees them."""
    first, *others = results.survey.soundings
    apparent = np.array(first.curve.apparent_resistivity)
    apparent[4] *= 2.5
    spoilt = attrs.evolve(first, curve=attrs.evolve(first.curve, apparent_resistivity=apparent))
    survey = attrs.evolve(results.survey, soundings=(spoilt, *others))
    examination = examine_survey(survey, results.region, lambda interval: interval.unit)
    region = attrs.evolve(results.region, typed_inputs={"readings": "readings"})
    return CheckedInputs(region.name, examination, CHECKS, region, survey)


@pytest.fixture(scope="module")
def page(small_results, tmp_path_factory):
    return write_check_page(checked(small_results), tmp_path_factory.mktemp("check") / "check.html")


def test_nothing_is_requested_and_nothing_complains(browser, page):
    browser.open(page)
    assert browser.requested_addresses() == [page.as_uri()]
    assert browser.complaints() == []


def test_every_sounding_is_there_and_doubted_ones_come_first(browser, page, small_results):
    browser.open(page)
    names = browser.run(
        "return [...document.querySelectorAll('.strip')].map(s => s.querySelector('h3, summary').textContent)"
    )
    first = small_results.survey.soundings[0].name
    assert names[0] == first
    assert {name.removesuffix(": no doubts") for name in names} == {
        sounding.name for sounding in small_results.survey.soundings
    }


def test_the_doubted_reading_is_hollow_and_its_spacing_stands_beside_it(browser, page, small_results):
    browser.open(page)
    strip = "document.querySelector('article.strip')"
    words = browser.run(f"return [...{strip}.querySelectorAll('.aside.reading title')].map(t => t.textContent)")
    spacing = small_results.survey.soundings[0].curve.half_spacing[4]
    assert any(f"AB/2 {spacing:g}," in one and "jump" in one for one in words)
    assert f"{spacing:g}" in browser.run(f"return [...{strip}.querySelectorAll('text.halo')].map(t => t.textContent)")
    table = browser.run(f"return {strip}.querySelector('table').textContent")
    assert CHECKS["jump"].why in table
    assert CHECKS["jump"].advice in table


def test_the_reading_that_is_not_used_says_why(browser, page, small_results):
    browser.open(page)
    sounding = next(one for one in small_results.survey.soundings if not one.curve.used.all())
    reason = sounding.curve.reason[int(np.flatnonzero(~sounding.curve.used)[0])]
    assert reason in browser.run("return document.body.textContent")


def test_every_check_is_listed_with_its_reason_and_can_be_reached(browser, page):
    browser.open(page)
    text = browser.run("return document.getElementById('checks').textContent")
    assert [check.name for check in CHECKS.values() if check.why not in text] == []
    links = browser.run("return [...document.querySelectorAll('a')].map(a => a.getAttribute('href'))")
    assert links
    assert [link for link in links if not browser.run(f"return !!document.getElementById('{link[1:]}')")] == []


def test_phone_scrolls_downwards_only(browser, page):
    browser.open(page, width=390)
    assert browser.run("return document.documentElement.scrollWidth <= window.innerWidth")


def test_hostile_names_stay_text(browser, hostile_results, tmp_path):
    page = write_check_page(checked(hostile_results), tmp_path / "check.html")
    browser.open(page)
    assert browser.complaints() == []
    assert browser.run("return document.title") != "broken"
    assert browser.run("return document.querySelectorAll('script, img').length") == 0
    text = browser.run("return document.body.textContent")
    assert HOSTILE[0] in text
    assert HOSTILE[1] in text


def test_a_page_of_faults_alone_needs_no_survey(browser, tmp_path):
    from geoves.domain.findings import Examination, Finding

    fault = Finding("fault", "region.toml", 3, "region.crs", "EPSG:1", "no such CRS is known")
    page = write_check_page(CheckedInputs("county", Examination((fault,)), CHECKS), tmp_path / "check.html")
    browser.open(page)
    assert "no such CRS is known" in browser.run("return document.getElementById('places').textContent")


def test_the_table_is_safe_for_spreadsheets(tmp_path):
    from geoves.domain.findings import Finding
    from geoves.project.check import _write_findings

    starts = ("=1+1", "+1", "-1", "@a", "\t=1", "\r=1")
    _write_findings(tmp_path / "check.csv", [Finding("doubt", "a.csv", 1, "x", one, "words") for one in starts])
    with (tmp_path / "check.csv").open(encoding="utf-8-sig", newline="") as stream:
        assert [row["value"] for row in csv.DictReader(stream)] == [f"'{one}" for one in starts]
