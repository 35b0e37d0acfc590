"""No text is code: whatever the tables hold reaches every file as text alone, and nothing is written elsewhere."""

import csv
import json
import re

import attrs
import geopandas
import lxml.html
import pytest
from lxml import etree
from owslib.iso import MD_Metadata

from geoves.delivery.geopackage import write_geopackage
from geoves.delivery.map_page import write_map_page
from geoves.delivery.metadata import write_metadata
from geoves.delivery.permit_table import NAME, write_permit_table
from geoves.delivery.rasters import write_rasters
from geoves.delivery.report_page import write_report_page
from geoves.delivery.styles import write_styles
from geoves.domain.findings import Finding
from geoves.domain.region import Delivery, Section
from geoves.domain.units import Template

RECORD = {"date": "2026-06-01", "software": "geoves", "inputs": {}, "versions": {"geoves": "0"}}
HOSTILE = {
    "html": "<b onclick='x()'>bold</b><img src=x onerror=\"document.title='broken'\">",
    "script": "</script><script>document.title='broken'</script>",
    "style": "</style><style>*{display:none}</style>",
    "comment": "--><!-- ]]> <![CDATA[ x",
    "literal": "${7*7}`;document.title='broken';`\\u003cb\\n",
    "expression": "{{ 7*7 }} {{ cycler.__init__ }}",
    "statement": "{% raw %}{% for x in y %}",
    "remark": "{# hidden #}",
    "entity": '&lol; &#60;b&#62; &amp;lt; <!DOCTYPE x [<!ENTITY lol "lol">]>',
    "path": "../../../tmp/escaped",
    "windows": "..\\..\\C:\\escaped|:*?",
    "backwards": "\u202eevil\u202c \u2066x\u2069 \u0634\u0645\u0627\u0644",
    "formula": "=cmd|' /C calc'!A0",
    "sql": "'; DROP TABLE soundings; --\"",
    "placeholder": "@@DATA@@ %s %(x)s {0} \\1 \\g<0>",
    "long": "x<&" + "0123456789" * 1000,
    "controls": "a\x01b\x0bc\ufffe\U0001f600",
}
# XML 1.0 cannot hold these; they come out as the replacement character.
NOT_XML = re.compile("[^\t\n\r\u0020-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")
# A parser of HTML makes a line feed of CR, and drops or replaces what is no character.
SHOWN = re.compile(r"[\x00-\x08\x0b\x0e-\x1f\ufffe\ufffd]")


def poison(results, words):
    """The job with `words` in every text field of its inputs; names stay unlike each other by a number behind."""
    survey, found, region = results.survey, results.interpretation, results.region
    soundings = {one.name: f"{words} s{i}" for i, one in enumerate(survey.soundings)}
    wells = {one.name: f"{words} w{i}" for i, one in enumerate(survey.wells)}
    names = soundings | wells
    extra = {words: words, "remark": words}

    def curve(one):
        reasons = tuple(words for _ in one.used)
        return attrs.evolve(one, reason=reasons, extra=tuple(extra for _ in one.used))

    def pick(one):
        return attrs.evolve(one, place=names[one.place], interpreter=words, reason=words, extra=extra)

    def column(one):
        said = tuple(attrs.evolve(opinion, pick=pick(opinion.pick)) for opinion in one.pick_opinions)
        return attrs.evolve(
            one, sounding=soundings[one.sounding], picks=tuple(map(pick, one.picks)), pick_opinions=said
        )

    permits = tuple(
        attrs.evolve(one, name=f"{words} p{i}", use=words, location_method=words, extra=extra)
        for i, one in enumerate(survey.permits)
    )
    layer = results.layers["permits"].assign(
        permit=[one.name for one in permits], use=words, location_method=words
    )  # fmt: skip
    corners = [(one.easting, one.northing) for one in survey.soundings[:2]]
    doubt = Finding("doubt", words, 3, words, words, words, soundings[survey.soundings[0].name], words)
    return attrs.evolve(
        results,
        region=attrs.evolve(
            region,
            name=words,
            delivery=Delivery(words, words, words),
            sections=(Section(words, tuple(corners)),),
            template=Template(tuple(attrs.evolve(unit, name=words) for unit in region.template.units)),
        ),
        survey=attrs.evolve(
            survey,
            soundings=tuple(
                attrs.evolve(s, name=soundings[s.name], curve=curve(s.curve), date=words, note=words, extra=extra)
                for s in survey.soundings
            ),
            wells=tuple(attrs.evolve(one, name=wells[one.name], extra=extra) for one in survey.wells),
            permits=permits,
            picks=tuple(map(pick, survey.picks)),
        ),
        inverted=tuple(attrs.evolve(one, sounding=soundings[one.sounding]) for one in results.inverted),
        interpretation=attrs.evolve(
            found,
            columns=tuple(map(column, found.columns)),
            well_readings=tuple(
                attrs.evolve(one, well=wells[one.well], description=words) for one in found.well_readings
            ),
            tops=tuple(attrs.evolve(one, place=names.get(one.place, words), source=words) for one in found.tops),
            unmapped_words=(words,),
            remarks=(words,),
        ),
        stack=attrs.evolve(results.stack, remarks=(words,)),
        layers={**results.layers, "permits": layer},
        doubts=(doubt,),
    )


@pytest.fixture(scope="module", params=HOSTILE)
def delivered(request, small_results, tmp_path_factory):
    """The words, and a folder with everything that they could reach."""
    words = HOSTILE[request.param]
    results = poison(small_results, words)
    folder = tmp_path_factory.mktemp("hostile") / "inner" / "delivery"
    folder.mkdir(parents=True)
    tags = {"software": "geoves", "date": "2026-06-01", "region": words}
    one = attrs.evolve(results.stack, surfaces={"bedrock_elevation": results.stack.surfaces["bedrock_elevation"]})
    files = [*write_rasters(one, results.region, folder, tags)]
    files.append(write_geopackage(results, folder / "layers.gpkg", tags))
    write_permit_table(results, folder)
    write_metadata(results, folder, RECORD | {"region": words}, files)
    write_styles(results, folder)
    write_map_page(results, folder / "map.html")
    write_report_page(results, folder / "report.html", RECORD | {"region": words, "remarks": [words]})
    return words, folder, results


def test_nothing_is_written_elsewhere_nor_named_after_it(delivered):
    _, folder, _ = delivered
    assert [path.name for path in folder.parent.iterdir()] == ["delivery"]
    assert [path.name for path in folder.parent.parent.iterdir()] == ["inner"]
    names = {path.relative_to(folder).as_posix() for path in folder.rglob("*")}
    assert all(re.fullmatch(r"[a-z0-9_]+(/[a-z0-9_]+)?(\.[a-z]+)?", name) for name in names), names


def test_the_geopackage_gives_it_back_as_it_was(delivered):
    words, folder, results = delivered
    package = folder / "layers.gpkg"
    soundings = geopandas.read_file(package, layer="soundings")
    assert soundings.sounding.tolist() == [one.name for one in results.survey.soundings]
    assert set(soundings.note) == set(soundings.date) == set(soundings.remark) == {words}
    assert set(geopandas.read_file(package, layer="well_intervals").description) == {words}
    assert set(geopandas.read_file(package, layer="well_intervals").term.dropna()) <= {words}
    assert set(geopandas.read_file(package, layer="permits").use) == {words}
    assert set(geopandas.read_file(package, layer="picks").reason) == {words}
    assert words in set(geopandas.read_file(package, layer="sections").section)
    (doubt,) = geopandas.read_file(package, layer="doubts").to_dict("records")
    assert doubt["value"] == doubt["expected"] == doubt["file"] == words


def test_the_table_holds_it_as_text(delivered):
    words, folder, _ = delivered
    csv.field_size_limit(10_000_000)
    with (folder / NAME).open(encoding="utf-8-sig", newline="") as stream:
        rows = list(csv.DictReader(stream))
    (use,) = {row["use"] for row in rows}
    assert use in (words, f"'{words}")
    assert not any(cell.startswith(("=", "+", "@")) for row in rows for cell in row.values())


def test_the_records_hold_it_as_text(delivered):
    """Parsed by lxml with no entity resolved, and read by OWSLib."""
    words, folder, _ = delivered
    held = NOT_XML.sub("\ufffd", words)
    parser = etree.XMLParser(resolve_entities=False, no_network=True)
    for path in (folder / "metadata").iterdir():
        root = etree.parse(path, parser)
        assert root.docinfo.doctype == ""
        (record,) = (MD_Metadata(root.getroot()),)
        assert held in record.identification[0].title
        assert record.contact[0].organization == held


def test_the_styles_are_sound_and_none_of_it_is_markup(delivered):
    _, folder, _ = delivered
    known = {"http://www.opengis.net/sld", "http://www.opengis.net/ogc"}
    for path in (folder / "styles").iterdir():
        assert {etree.QName(one).namespace for one in etree.parse(path).iter(etree.Element)} <= known


def test_the_report_shows_it_and_runs_nothing(delivered):
    words, folder, results = delivered
    text = (folder / "report.html").read_text("utf-8")
    page = lxml.html.document_fromstring(text.encode(), parser=lxml.html.HTMLParser(encoding="utf-8", huge_tree=True))
    assert not list(page.iter("script", "iframe", "object", "link"))
    assert len(list(page.iter("style"))) == 1
    assert not [one for one in page.iter("img") if not one.get("src", "").startswith("data:")]
    assert not [name for one in page.iter(etree.Element) for name in one.attrib if name.startswith("on")]
    shown = SHOWN.sub("", page.text_content()).replace("\r", "\n")
    wanted = SHOWN.sub("", words).replace("\r", "\n")
    assert shown.count(wanted) >= len(results.survey.soundings)
    assert SHOWN.sub("", page.findtext(".//title")) == f"{wanted}: report"


def test_the_map_keeps_it_in_its_block_of_data(delivered):
    words, folder, results = delivered
    text = (folder / "map.html").read_text("utf-8")
    block = re.search(r'<script type="application/json" id="described">(.*?)</script>', text, re.DOTALL)[1]
    described = json.loads(block)
    assert described["region"]["name"] == words
    assert [one["name"] for one in described["permits"]] == [one.name for one in results.survey.permits]
    assert {one["use"] for one in described["permits"]} == {words}
    # What is left of the page knows nothing of it but its title.
    rest = text.replace(block, "")
    page = lxml.html.document_fromstring(rest.encode(), parser=lxml.html.HTMLParser(encoding="utf-8", huge_tree=True))
    assert len(list(page.iter("script"))) == 4
    assert SHOWN.sub("", page.findtext(".//title")) == SHOWN.sub("", f"{words}: map")
    assert len(list(page.iter("img"))) == 0
