"""The records after FGDC-STD-001-1998, held against the standard's production rules and read back by OWSLib.

Federal Geographic Data Committee, 1998, Content Standard for Digital Geospatial Metadata (FGDC-STD-001-1998): the rules
below are those of its sections 1 to 10 for the compound elements that the records use, written as element declarations.
"""

import io
import re

import attrs
import pytest
from lxml import etree
from owslib.fgdc import Metadata

from geoves.delivery.cautions import list_cautions
from geoves.delivery.fgdc import write_fgdc_records
from geoves.delivery.layer_words import LAYERS
from geoves.domain.region import Delivery
from geoves.errors import DeliveryError

RECORD = {"date": "2026-06-01T09:30:00Z", "versions": {"geoves": "0.1.0"}, "inputs": {"soundings.csv": "ab12"}}
RULES = {
    "metadata": "(idinfo, dataqual?, spdoinfo?, spref?, eainfo?, distinfo*, metainfo)",
    "idinfo": "(citation, descript, timeperd, status, spdom, keywords, accconst, useconst, ptcontac?)",
    "citation": "(citeinfo)",
    "citeinfo": "(origin+, pubdate, pubtime?, title, edition?, geoform?, onlink*)",
    "descript": "(abstract, purpose, supplinf?)",
    "timeperd": "(timeinfo, current)",
    "timeinfo": "(sngdate)",
    "sngdate": "(caldate, time?)",
    "status": "(progress, update)",
    "spdom": "(bounding)",
    "bounding": "(westbc, eastbc, northbc, southbc)",
    "keywords": "(theme+)",
    "theme": "(themekt, themekey+)",
    "ptcontac": "(cntinfo)",
    "dataqual": "(attracc?, logic, complete, posacc?, lineage)",
    "attracc": "(attraccr, qattracc*)",
    "qattracc": "(attraccv, attracce)",
    "posacc": "(horizpa?, vertacc?)",
    "horizpa": "(horizpar, qhorizpa*)",
    "vertacc": "(vertaccr, qvertpa*)",
    "qvertpa": "(vertaccv, vertacce)",
    "lineage": "(procstep+)",
    "procstep": "(procdesc, srcused*, procdate)",
    "spdoinfo": "(direct, (ptvctinf | rastinfo))",
    "ptvctinf": "(sdtsterm+)",
    "sdtsterm": "(sdtstype, ptvctcnt?)",
    "rastinfo": "(rasttype, rowcount, colcount)",
    "spref": "(horizsys?, vertdef?)",
    "horizsys": "(planar+, geodetic?)",
    "planar": "(localp, planci)",
    "localp": "(localpd, localpgi)",
    "planci": "(plance, coordrep, plandu)",
    "coordrep": "(absres, ordres)",
    "geodetic": "(horizdn?, ellips, semiaxis, denflat)",
    "vertdef": "(altsys?)",
    "altsys": "(altdatum, altres+, altunits, altenc)",
    "eainfo": "(detailed*)",
    "detailed": "(enttyp, attr*)",
    "enttyp": "(enttypl, enttypd, enttypds)",
    "attr": "(attrlabl, attrdef, attrdefs, attrdomv+)",
    "attrdomv": "(edom+ | rdom | udom)",
    "edom": "(edomv, edomvd, edomvds)",
    "rdom": "(rdommin, rdommax, attrunit?)",
    "distinfo": "(distrib, resdesc?, distliab)",
    "distrib": "(cntinfo)",
    "metainfo": "(metd, metc, metstdn, metstdv)",
    "metc": "(cntinfo)",
    "cntinfo": "(cntorgp, cntaddr+, cntvoice+, cntemail*, cntinst?)",
    "cntorgp": "(cntorg, cntper?)",
    "cntaddr": "(addrtype, address*, city, state, postal, country?)",
}


def grammar():
    """The rules as a document type; every other element that they name holds text alone."""
    named = {word for rule in RULES.values() for word in re.findall(r"\w+", rule)}
    lines = [f"<!ELEMENT {name} {rule}>" for name, rule in RULES.items()]
    lines += [f"<!ELEMENT {name} (#PCDATA)>" for name in sorted(named - set(RULES))]
    return etree.DTD(io.StringIO("\n".join(lines)))


@pytest.fixture(scope="module")
def folder(small_results, tmp_path_factory):
    made = tmp_path_factory.mktemp("fgdc")
    files = [made / "surfaces" / f"{name}.tif" for name in ("bedrock_elevation", "deep_gravel_probability")]
    write_fgdc_records(small_results, made, RECORD, [*files, made / "layers.gpkg"])
    return made / "metadata"


def test_each_record_keeps_to_the_rules_of_the_standard(folder):
    rules = grammar()
    paths = sorted(folder.iterdir())
    assert [path.name for path in paths] == [
        "bedrock_elevation_fgdc.xml", "deep_gravel_probability_fgdc.xml", "layers_fgdc.xml",
    ]  # fmt: skip
    for path in paths:
        root = etree.parse(path).getroot()
        assert rules.validate(root), rules.error_log
        assert all((one.text or "").strip() for one in root.iter() if not len(one)), path.name
        assert all(re.fullmatch(r"\d{8}", one.text) for one in root.iter("pubdate", "caldate", "metd", "procdate"))
    planted = etree.parse(paths[0]).getroot()
    planted.find("idinfo").remove(planted.find("idinfo/status"))
    assert not rules.validate(planted)


def test_owslib_reads_who_what_where(folder):
    record = Metadata(etree.parse(folder / "bedrock_elevation_fgdc.xml"))
    cited = record.idinfo.citation.citeinfo
    assert cited["title"] == "Bedrock elevation, Larkmoor Mini"
    assert cited["origin"] == "Larkmoor Water Board"
    assert cited["pubdate"] == "20260601"
    assert all(caution in record.idinfo.useconst for caution in list_cautions())
    box = record.idinfo.spdom
    # 500000 E on zone 14's central meridian is 99° W exactly (EPSG:26914)
    assert float(box.westbc) == pytest.approx(-99.0, abs=1e-4)
    assert 41.0 < float(box.southbc) < float(box.northbc) < 42.0
    assert record.metainfo.metstdv == "FGDC-STD-001-1998"
    assert etree.parse(folder / "layers_fgdc.xml").findtext(".//ptcontac//cntemail") == "maps@larkmoor.example"


def test_accuracy_lineage_and_datum_are_the_jobs_own(folder):
    root = etree.parse(folder / "bedrock_elevation_fgdc.xml").getroot()
    assert "6.1" in [one.text for one in root.iter("attraccv")]
    assert "6.1" in [one.text for one in root.iter("vertaccv")]
    lineage = root.findtext(".//procdesc")
    assert "soundings.csv (SHA-256 ab12)" in lineage
    assert "EPSG:26914" in root.findtext(".//localpd")
    assert root.findtext(".//altdatum") == "NAVD88 height"
    # GRS 1980 (EPSG:7019): 6 378 137 m, 1/298.257222101
    assert float(root.findtext(".//semiaxis")) == 6378137.0
    assert float(root.findtext(".//denflat")) == pytest.approx(298.257222101, abs=1e-5)


def test_every_column_of_every_layer_is_defined(folder, small_results):
    root = etree.parse(folder / "layers_fgdc.xml").getroot()
    told = {
        one.findtext("enttyp/enttypl"): [attr.findtext("attrlabl") for attr in one.iter("attr")]
        for one in root.iter("detailed")
    }
    assert told == {words.name: [column.name for column in words.columns] for words in LAYERS.values()}
    units = {one.text for one in root.iter("edomv")}
    assert set(small_results.region.template.codes) <= units
    assert {"likely", "undetermined", "deeper_than"} <= units


def test_nothing_declared_still_makes_a_record(small_results, tmp_path):
    bare = attrs.evolve(small_results.region, delivery=Delivery(), vertical_datum=None)
    results = attrs.evolve(small_results, region=bare, figures_of_merit={})
    (path,) = write_fgdc_records(results, tmp_path, RECORD, [tmp_path / "bedrock_elevation.tif"])
    root = etree.parse(path).getroot()
    assert grammar().validate(root)
    assert root.find(".//vertdef") is None
    assert root.findtext(".//origin") == "not stated"


def test_a_record_without_a_date_is_refused(small_results, tmp_path):
    with pytest.raises(DeliveryError, match="date"):
        write_fgdc_records(small_results, tmp_path, {}, [tmp_path / "layers.gpkg"])
