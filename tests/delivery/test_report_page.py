"""report.html as a reader meets it: in Chromium, from disk, with no network and no script."""

import base64
import io
import time
import unicodedata
from concurrent.futures import ThreadPoolExecutor

import attrs
import numpy as np
import pytest
from pypdf import PdfReader

from geoves.delivery.cautions import list_cautions
from geoves.delivery.report_answers import confidence_in_words, tell_limits, write_answers
from geoves.delivery.report_page import write_report_page
from geoves.delivery.report_trust import without_logarithm
from geoves.delivery.sentences import tell_sounding
from geoves.domain.grids import CrossValidation
from geoves.domain.units import Template

RECORD = {"versions": {"geoves": "0.1.0"}, "inputs": {"soundings.csv": "0" * 64}, "figures": [{"rmse": 6.123456}, {}]}


@pytest.fixture(scope="module")
def page(small_results, tmp_path_factory):
    return write_report_page(small_results, tmp_path_factory.mktemp("report") / "report.html", RECORD)


def test_two_writes_are_equal_whoever_draws(small_results, page, tmp_path):
    with ThreadPoolExecutor(2) as pool:
        again = write_report_page(small_results, tmp_path / "report.html", RECORD, map=pool.map)
    assert again.read_bytes() == page.read_bytes()


def test_nothing_is_requested_and_nothing_complains(browser, page):
    browser.open(page)
    assert browser.run("return document.querySelectorAll('section h2').length") == 8
    assert browser.requested_addresses() == [page.as_uri()]
    assert browser.complaints() == []
    assert browser.run("return document.scripts.length") == 0


def test_every_sounding_has_its_strip(browser, page, small_results):
    browser.open(page)
    strips = browser.run(
        "return [...document.querySelectorAll('.strip')].map(s => [s.querySelector('h3').textContent,"
        "s.querySelectorAll('svg').length, s.querySelector('.sentence').textContent])"
    )
    template = small_results.region.template
    columns = {one.sounding: one for one in small_results.interpretation.columns}
    assert [one[0] for one in strips] == [one.name for one in small_results.survey.soundings]
    assert all(drawings == 3 and tell_sounding(columns[name], template, "m") == said for name, drawings, said in strips)


def test_the_reading_set_aside_is_hollow_and_says_why(browser, page, small_results):
    browser.open(page)
    number = next(i for i, one in enumerate(small_results.survey.soundings) if one.name == "Larch 4")
    strip = browser.run("return document.getElementById(arguments[0]).textContent", f"sounding-{number}")
    assert "stands 90 % above its neighbours" in strip
    hollow = browser.run(
        "return document.getElementById(arguments[0]).querySelectorAll('.reading.aside').length", f"sounding-{number}"
    )
    assert hollow == 1


def test_calibration_says_what_it_changed_and_what_it_left(browser, page):
    browser.open(page)
    words = browser.run("return document.getElementById('wells').textContent")
    assert "14 to 24 (moved by 21 soundings)" in words
    assert "as given (3 soundings are too few to move it)" in words


def test_layers_stand_in_a_table_with_their_ranges(browser, page, small_results):
    """The first sounding's, by numpy's own plain quantiles: its members are equally probable."""
    browser.open(page)
    rows = browser.run(
        "return [...document.querySelectorAll('#sounding-0 table tbody tr')]"
        ".map(r => [...r.cells].map(c => c.innerText))"
    )
    ensemble = small_results.inverted[0].ensemble
    assert len(rows) == 5
    clay = ensemble.thickness[:, 2] * ensemble.resistivity[:, 2]
    shown = [float(part.replace(",", "")) for part in rows[2][6].split(" to ")]
    np.testing.assert_allclose(shown, np.quantile(clay, [0.05, 0.95]), rtol=0.03)
    assert rows[-1][3] == rows[-1][5] == "–"


def test_picks_stand_with_what_the_curve_says(browser, page):
    browser.open(page)
    words = browser.run("return document.getElementById('decisions').textContent")
    assert "would be chance in 40 of 100 cases" in words


def test_cautions_are_all_there_and_one_stays_in_sight(browser, page):
    browser.open(page)
    shown = browser.run("return document.body.textContent")
    assert all(caution in shown for caution in list_cautions())
    browser.run("window.scrollTo(0, document.body.scrollHeight)")
    assert browser.run("return document.querySelector('.caution').getBoundingClientRect().top") == 0


def test_phone_scrolls_downwards_only(browser, page):
    browser.open(page, width=390)
    assert browser.run("return document.documentElement.scrollWidth") <= 390


def test_contrast_meets_wcag_aa(browser, page):
    """Body, soft and caution text against their grounds: 4.5 to 1 (WCAG 2.2, success criterion 1.4.3)."""
    browser.open(page)
    pairs = browser.run(
        "return ['body', '.aside', '.caution', 'a', '.tick'].map(q => {const e = document.querySelector(q);"
        "let g = e; while (g && getComputedStyle(g).backgroundColor === 'rgba(0, 0, 0, 0)') g = g.parentElement;"
        "const s = getComputedStyle(e); return [s[q === '.tick' ? 'fill' : 'color'],"
        "g ? getComputedStyle(g).backgroundColor : getComputedStyle(document.documentElement).backgroundColor]})"
    )
    for ink, ground in pairs:
        assert _contrast(ink, ground) >= 4.5


def _contrast(one, other):
    """Contrast ratio and relative luminance as WCAG 2.2 defines them."""

    def luminance(colour):
        channels = [float(part) / 255 for part in colour[colour.index("(") + 1 : -1].split(",")[:3]]
        red, green, blue = (c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels)
        return 0.2126 * red + 0.7152 * green + 0.0722 * blue

    high, low = sorted((luminance(one), luminance(other)), reverse=True)
    return (high + 0.05) / (low + 0.05)


def test_hostile_names_stay_text(browser, hostile_results, tmp_path):
    record = {"<b>key</b>": "<script>document.title='broken'</script>", "list": ["{{7*7}}", "<i>"]}
    browser.open(write_report_page(hostile_results, tmp_path / "report.html", record))
    shown = browser.run("return document.body.textContent")
    for sounding in hostile_results.survey.soundings:
        assert sounding.name in shown
    assert "<b>key</b>" in shown
    assert "{{7*7}}, <i>" in shown
    assert browser.run("return document.title") == f"{hostile_results.region.name}: report"
    assert browser.run("return document.scripts.length + document.images.length") == 0
    assert browser.complaints() == []


def test_confidence_counts_what_the_bands_held(small_results):
    """Misfits of 1, 2, 3, 4, 5, 6, 9 and 11 m: by hand the median is 4.5; bands of 1.645 times 6 m hold 7 of 8."""
    (said,) = confidence_in_words(small_results)
    assert "Half were met within 4.5 m" in said
    assert "held 88 %" in said


def test_gravel_is_told_with_its_caution_and_what_no_test_can_see(small_results):
    few = "Thickness of the deep gravel: only 2 thicknesses beside 11 absences"
    tie = "soundings put the basal contact 1% deeper than wells and picks do"
    told = attrs.evolve(small_results, stack=attrs.evolve(small_results.stack, remarks=(few, tie)))
    assert few in write_answers(told)
    gravel, shared = tell_limits(told)
    rows = [one for one in small_results.interpretation.thicknesses if one.role == "deep_aquifer"]
    measured = sum(one.thickness > 0 and not one.at_least for one in rows)
    assert f"rests on {measured} thickness" in gravel
    assert "cannot see an error that all soundings share" in shared
    assert shared.endswith(f"S{tie[1:]}.")


def test_unmapped_gravel_is_told_by_its_true_reason(small_results):
    stack = attrs.evolve(small_results.stack, surfaces={}, remarks=())
    unmapped = attrs.evolve(small_results, stack=stack)
    assert "names no deep aquifer" not in write_answers(unmapped)
    units = tuple(one for one in small_results.region.template.units if one.role != "deep_aquifer")
    without = attrs.evolve(unmapped, region=attrs.evolve(small_results.region, template=Template(units)))
    assert "names no deep aquifer" in write_answers(without)
    assert len(tell_limits(without)) == 1


def test_logarithms_are_told_as_percentages_and_drawn_as_lengths(small_results):
    """The ln of 1.10 is a misfit of 10 %; the depth itself is its exponential."""
    depth = np.array([40.0, 60.0, 80.0])
    crossed = CrossValidation(
        "Log depth of the basal contact", "ln m", ("a", "b", "c"), ("sounding",) * 3,
        np.log(depth), np.log(1.10 * depth), np.full(3, 0.1),
    )  # fmt: skip
    stack = attrs.evolve(small_results.stack, cross_validations=(crossed,))
    (said,) = confidence_in_words(attrs.evolve(small_results, stack=stack))
    assert said.startswith("Depth of the basal contact: each of 3 places")
    assert "Half were met within 10 %" in said
    plain = without_logarithm(crossed)
    assert (plain.title, plain.unit) == ("Depth of the basal contact", "m")
    np.testing.assert_allclose(plain.measured, depth)
    np.testing.assert_allclose(plain.standard_error, 0.11 * depth)


# Paper inside the page's margins of 12 mm at the sides, 11 above and 14 below, in CSS pixels of 1/96 inch.
PAPER = {"A4": (210.0, 297.0), "Letter": (215.9, 279.4)}


def inside(paper):
    wide, high = PAPER[paper]
    return (wide - 24.0) / 25.4 * 96.0, (high - 25.0) / 25.4 * 96.0


@pytest.mark.parametrize("paper", PAPER)
def test_it_prints_with_numbered_pages(browser, page, paper):
    """Chromium's PDF, its text read by pypdf: every page bears its number and the caution."""
    browser.open(page)
    wide, high = (side / 25.4 for side in PAPER[paper])
    sheet = {"paperWidth": wide, "paperHeight": high, "printBackground": True, "preferCSSPageSize": False}
    printed = browser.driver.execute_cdp_cmd("Page.printToPDF", sheet)
    pages = PdfReader(io.BytesIO(base64.b64decode(printed["data"]))).pages
    assert len(pages) > 3
    for number, one in enumerate(pages, start=1):
        words = " ".join(unicodedata.normalize("NFKC", one.extract_text()).split())
        assert f"{number} of {len(pages)}" in words
        assert "Reconnaissance only: test drilling first." in words


@pytest.mark.parametrize("paper", PAPER)
def test_no_figure_is_cut_in_print(browser, page, paper):
    """On paper each figure fits a page, may not break across two, and nothing runs beyond the right margin."""
    wide, high = inside(paper)
    browser.open(page, width=round(wide))
    browser.driver.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": "print"})
    try:
        boxes = browser.run(
            "return [...document.querySelectorAll('figure, .strip, .pair, .drawings svg, figure svg')].map(e => {"
            "const r = e.getBoundingClientRect(), s = getComputedStyle(e);"
            "return [e.tagName + '.' + e.getAttribute('class'), r.height, r.right, s.breakInside]; })"
        )
        assert len(boxes) > 20
        for name, height, right, breaks in boxes:
            assert height < high, name
            assert right <= wide + 1.0, name
            assert "svg" in name.lower() or breaks == "avoid", name
        assert browser.run("return document.documentElement.scrollWidth") <= round(wide) + 1
    finally:
        browser.driver.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": ""})


def test_no_wells_no_axis_no_gravel_still_reads(small_results, tmp_path):
    survey = attrs.evolve(small_results.survey, wells=(), permits=(), picks=(), boundary=None)
    keep = {"bedrock_elevation": small_results.stack.surfaces["bedrock_elevation"]}
    stack = attrs.evolve(small_results.stack, surfaces=keep, variograms=(), cross_validations=())
    found = attrs.evolve(small_results.interpretation, well_readings=(), unmapped_words=(), remarks=())
    layers = {name: frame.iloc[:0] for name, frame in small_results.layers.items()}
    bare = attrs.evolve(small_results, survey=survey, stack=stack, interpretation=found, layers=layers, doubts=())
    words = write_report_page(bare, tmp_path / "report.html", {}).read_text("utf-8")
    assert "no valley axis was found" in words
    assert "No surface could be tested" in words


def test_150_strips_are_quick_and_small(small_results, tmp_path):
    """A county's worth of soundings: under 20 s and 15 MB."""
    many, inverted, columns = [], [], []
    for i in range(150):
        k = i % len(small_results.survey.soundings)
        name = f"S{i:03d}"
        many.append(attrs.evolve(small_results.survey.soundings[k], name=name))
        inverted.append(attrs.evolve(small_results.inverted[k], sounding=name))
        columns.append(attrs.evolve(small_results.interpretation.columns[k], sounding=name))
    results = attrs.evolve(
        small_results,
        survey=attrs.evolve(small_results.survey, soundings=tuple(many)),
        inverted=tuple(inverted),
        interpretation=attrs.evolve(small_results.interpretation, columns=tuple(columns)),
    )
    begun = time.perf_counter()
    page = write_report_page(results, tmp_path / "report.html", RECORD)
    assert time.perf_counter() - begun < 20
    assert page.stat().st_size < 15e6
