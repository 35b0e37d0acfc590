"""The report on one geology, as a reader meets it in Chromium; its figures by hand from the columns of joint_county."""

import re

import attrs
import numpy as np
import pytest

from geoves.delivery.joint_figures import LEFT, RIGHT, DepthRow, draw_rows
from geoves.delivery.joint_words import OwnSay
from geoves.delivery.metadata import tell_lineage
from geoves.delivery.report_answers import confidence_in_words, tell_limits, write_answers
from geoves.delivery.report_page import write_report_page
from geoves.delivery.report_together import check_wells, tell_convergence, tell_fit, tell_wells, write_one_geology
from geoves.delivery.report_trust import write_decisions, write_trust
from tests.delivery.conftest import HOSTILE
from tests.delivery.joint_county import MOVED, POOR, SET_ASIDE, join

NUMBER = r"([\d.]+)"


@pytest.fixture(scope="module")
def job(small_results):
    return join(small_results)


@pytest.fixture(scope="module")
def page(job, tmp_path_factory):
    return write_report_page(job, tmp_path_factory.mktemp("report") / "report.html", {})


def strip_of(browser, page, job, name):
    """The text of a sounding's strip and how many drawings it has."""
    browser.open(page)
    number = next(i for i, one in enumerate(job.survey.soundings) if one.name == name)
    return browser.run(
        "const s = document.getElementById(arguments[0]); return [s.textContent, s.querySelectorAll('svg').length]",
        f"sounding-{number}",
    )


def test_a_strip_says_and_draws_all_three(browser, page, job):
    said, drawings = strip_of(browser, page, job, "Larch 1")
    assert drawings == 4
    assert "By this curve alone: Basal gravel or rock begins at" in said
    assert "the others expect 71 m (60 to 83); together 66 m (59 to 72)" in said
    assert "by the others 0.66, together 0.58, which puts rock at 73 m (66 to 79)" in said
    assert browser.complaints() == []


def test_what_was_set_aside_fits_poorly_or_was_moved_is_flagged(browser, page, job):
    assert "Set aside by the one geology" in strip_of(browser, page, job, SET_ASIDE)[0]
    assert "residuals are 2.3 times their errors" in strip_of(browser, page, job, POOR)[0]
    assert "moved the contact here down by 1.4 times its doubt" in strip_of(browser, page, job, MOVED)[0]
    flags = browser.run("return document.querySelectorAll('.strip .flag').length")
    assert flags == 2


def test_without_one_geology_the_strip_has_three_drawings(browser, small_results, tmp_path):
    plain = write_report_page(small_results, tmp_path / "report.html", {})
    said, drawings = strip_of(browser, plain, small_results, "Larch 1")
    assert drawings == 3
    assert "alone" not in said
    assert "One geology of all places" not in plain.read_text("utf-8")


def test_a_phone_scrolls_downwards_only_and_paper_cuts_no_strip(browser, page):
    browser.open(page, width=390)
    assert browser.run("return document.documentElement.scrollWidth") <= 390
    browser.open(page, width=688)  # A4 within its margins: 182 mm of 1/96 inch
    browser.driver.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": "print"})
    try:
        heights = browser.run(
            "return [...document.querySelectorAll('.strip, figure')].map(e => e.getBoundingClientRect().height)"
        )
        assert browser.run("return document.documentElement.scrollWidth") <= 689
    finally:
        browser.driver.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": ""})
    assert max(heights) < 266.0 / 25.4 * 96.0


def test_bars_lie_where_their_depths_do():
    """Three depths on an axis of 0 to 1.08 times the deepest, in proportion."""
    drawn = draw_rows([DepthRow("alone", "own", np.array([20.0, 30.0, 50.0]))], "title", "m")
    (left, width), *_ = re.findall(rf'<rect x="{NUMBER}" y="[^"]+" width="{NUMBER}"', drawn)
    per_metre = (RIGHT - LEFT) / 54.0
    assert float(left) == pytest.approx(LEFT + 20.0 * per_metre, abs=0.1)
    assert float(width) == pytest.approx(30.0 * per_metre, abs=0.1)
    assert drawn.count("<rect") == 1


def test_a_bound_is_an_arrow_and_silence_is_said():
    open_ended = draw_rows([DepthRow("alone", "own", bound=40.0)], "title", "ft")
    assert open_ended.count('class="bound"') == 2
    assert "<rect" not in open_ended
    assert "rock (ft)" in open_ended
    assert "does not say" in draw_rows([DepthRow("alone", "own")], "title", "m")
    marked = DepthRow("W", "others", np.array([20.0, 30.0, 50.0]), mark=OwnSay(np.full(3, np.nan), 90.0, "the log"))
    assert marked.deepest == pytest.approx(117.0)


def test_trust_tells_fields_fit_and_what_changed(job):
    shown = write_trust(job)
    assert "Presence of Basal gravel" in shown
    assert "90° (0.50 across)" in shown
    assert "its last round the basal contacts moved by 0.02 of their doubt" in " ".join(tell_convergence(job.geology))
    fit, states = tell_fit(job.geology)
    assert f"the largest are {POOR} (2.3)" in fit
    assert states.startswith("1 set aside")
    assert "1 heard but fitted worse" in states
    assert "Field: " in shown
    assert "Variogram: " not in shown


def test_an_inference_that_did_not_settle_is_told(job):
    restless = attrs.evolve(job.geology, diagnostics={"converged": False, "moved_in_the_last_round": 0.31})
    assert next(tell_convergence(restless)).startswith("The inference had not settled: take its surfaces with care")


def test_the_table_of_differences_has_the_flagged_and_the_moved_alone(job):
    """Of Larch 1 the curve's own band is its depth and 5 m either way: 1.52 m of deviation."""
    shown = "".join(write_one_geology(job))
    table = shown[shown.index("Depth of basal gravel or rock, alone and together") :]
    table = table[: table.index("</table>")]
    assert "set aside" in table
    assert "fitted poorly" in table
    assert SET_ASIDE in table
    own = job.interpretation.columns[0].basal_depth
    assert (abs(np.log(66.0 / own[1])) > np.log(own[2] / own[0]) / 3.29) == ("Larch 1" in table)


def test_wells_are_held_against_all_others(job):
    """W-1 at 70 m where the others expect 58 to 80 m: within. Those that ended above 80 m end in what is allowed."""
    checks = check_wells(job)
    assert [check.column.place for check in checks] == [well.name for well in job.survey.wells]
    doubt = np.hypot(np.log(80 / 58) / 3.29, np.log(70.8225 / 69.1775) / 3.29)
    assert checks[0].away == pytest.approx(np.log(70 / 68) / doubt, rel=1e-6)
    assert all(np.isnan(check.away) for check in checks[1:])
    ended = sum(well.total_depth <= 80.0 for well in job.survey.wells[1:])
    said = tell_wells(checks)
    assert "Wells that know the contact: 1; 1 of them agree" in said
    assert f"Wells that ended above it: 2; {ended} of them end within" in said
    beyond = attrs.evolve(checks[1], own=attrs.evolve(checks[1].own, bound=81.0))
    assert not beyond.agrees


def test_decisions_say_what_they_moved_and_what_contradicts_them(job, small_results):
    shown = write_decisions(job)
    assert f"This decision moved 1 other place by more than its doubt: {MOVED}." in shown
    assert "71 m (60 to 83)" in shown
    assert "lies 3.4 deviations below where all others expect it" in shown
    agreed = attrs.evolve(job, geology=attrs.evolve(job.geology, remarks=()))
    assert "No decision is contradicted" in write_decisions(agreed)
    assert "what it moved" not in write_decisions(small_results)


def test_answers_speak_of_places_against_all_others(job):
    (said,) = confidence_in_words(job)
    assert said.startswith("Depth of the basal contact: what each of 3 places says by itself was held against")
    assert "curves, which seldom tell it from rock" in tell_limits(job)[0]


def test_a_remark_on_the_geology_is_no_answer_on_gravel(job):
    """A unit may be called deep gravel: what is remarked of its range does not belong beside its area."""
    words = "the curves put deep gravel at 60 ohm m on the whole"
    stack = attrs.evolve(job.stack, remarks=(words, *job.stack.remarks))
    told = attrs.evolve(job, stack=stack, geology=attrs.evolve(job.geology, remarks=(words, *job.geology.remarks)))
    assert words[4:] not in write_answers(told)
    assert words[4:] in write_trust(told)


def test_lineage_names_the_method_that_was_used(job, small_results):
    assert "method 'together'" in tell_lineage(job, {})
    assert "kriged" not in tell_lineage(job, {})
    assert "kriged (method 'each')" in tell_lineage(small_results, {})


def test_hostile_names_stay_text(browser, hostile_results, tmp_path):
    hostile = join(hostile_results)
    browser.open(write_report_page(hostile, tmp_path / "report.html", {}))
    shown = browser.run("return document.body.textContent")
    assert all(name in shown for name in HOSTILE)
    assert browser.run("return document.scripts.length + document.images.length") == 0
    assert browser.complaints() == []
