"""ISO 19139 records for each raster and for the GeoPackage."""

import re
import uuid
import xml.etree.ElementTree as ET
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any

import attrs
import pyproj
from pygeometa.schemas.iso19139 import ISO19139OutputSchema

from geoves.delivery.cautions import list_cautions
from geoves.delivery.dictionary import LENGTH_UNITS, PART_TITLES, Part, RasterWords, list_rasters, name_part, name_unit
from geoves.delivery.layer_words import LAYERS
from geoves.delivery.rasters import describe_vertical
from geoves.domain.region import Region
from geoves.domain.results import Results
from geoves.errors import DeliveryError

GEOPACKAGE = "layers.gpkg"
KEYWORDS = ("hydrogeology", "buried valley", "vertical electrical sounding", "resistivity", "aquifer", "bedrock")
_NAMESPACES = {
    "gmd": "http://www.isotc211.org/2005/gmd",
    "gco": "http://www.isotc211.org/2005/gco",
    "gml": "http://www.opengis.net/gml",
    "gmx": "http://www.isotc211.org/2005/gmx",
    "xlink": "http://www.w3.org/1999/xlink",
    "xsi": "http://www.w3.org/2001/XMLSchema-instance",
}
_DECLARATION = '<?xml version="1.0" encoding="UTF-8"?>\n'
# What XML 1.0 cannot hold even as an entity.
_NOT_XML = re.compile("[^\t\n\r\u0020-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")


def write_metadata(
    results: Results, folder: Path, record: Mapping[str, Any], files: Sequence[Path]
) -> tuple[Path, ...]:
    """The paths of the records, one in folder/metadata for each raster and GeoPackage among `files`.

    `record["date"]` (ISO 8601) dates them; nothing else is read of the clock, so the same job gives the same bytes.
    Raises DeliveryError.
    """
    target = folder / "metadata"
    rasters = list_rasters(results.stack.surfaces)
    by_name = {name_part(words.name, part): (words.name, part) for words in rasters for part in words.parts}
    written = []
    for file in files:
        if file.suffix == ".gpkg":
            text = render_geopackage_record(results, record)
        elif file.stem in by_name:
            text = render_raster_record(results, record, *by_name[file.stem])
        else:
            continue
        path = target / f"{file.stem}.xml"
        try:
            target.mkdir(parents=True, exist_ok=True)
            path.write_text(text, encoding="utf-8")
        except OSError as error:
            raise DeliveryError(f"metadata/{path.name} could not be written: {error.strerror}") from error
        written.append(path)
    return tuple(written)


def render_raster_record(results: Results, record: Mapping[str, Any], name: str, part: Part) -> str:
    """The XML record of one raster."""
    words = list_rasters([name])[0]
    title = ", ".join(filter(None, (words.title, PART_TITLES[part])))
    unit = name_unit(words.kind, results.region.length_unit) or "0 to 1"
    codes = "; ".join(f"{code}, {meaning}" for code, meaning in words.codes.items())
    values = f"Codes: {codes}; on" if codes else f"Values in {unit}, on"
    abstract = f"{words.description} {values} a grid of {results.region.cell_size:g} units of the CRS."
    if words.kind == "length":
        abstract += f" Rounded to 1/64 {results.region.length_unit}."
    resource = (f"surfaces/{name_part(name, part)}.tif", "GeoTIFF, cloud-optimised", "grid")
    judged = select_merit(results, words)
    text = _render(judged, record, (title, abstract), resource)
    return _complete(text, judged, with_heights=words.elevation)


def select_merit(results: Results, words: RasterWords) -> Results:
    """The job with those figures of merit alone that judge this surface."""
    merit = results.figures_of_merit
    judge = words.judged_by or words.name
    return attrs.evolve(results, figures_of_merit={judge: merit[judge]} if judge in merit else {})


def render_geopackage_record(results: Results, record: Mapping[str, Any]) -> str:
    """The XML record of the GeoPackage."""
    listed = "; ".join(f"{words.name}: {words.description}" for words in LAYERS.values())
    unit = LENGTH_UNITS[results.region.length_unit]
    abstract = f"Layers of a reconnaissance by vertical electrical soundings, lengths in {unit}. {listed}"
    text = _render(results, record, ("Layers", abstract), (GEOPACKAGE, "GeoPackage 1.3", "vector"))
    return _complete(text, results, with_heights=True)


def _render(results: Results, record: Mapping[str, Any], words: tuple[str, str], resource: tuple[str, str, str]) -> str:
    """What pygeometa writes of one file: `words` are title and abstract, `resource` its name, format and kind."""
    title, _ = words
    file, file_format, representation = resource
    if "date" not in record:
        raise DeliveryError("the record of the run names no date, which every metadata record needs")
    date = str(record["date"])
    region = results.region
    contact = _describe_contact(region)
    mcf = {
        "metadata": {
            "identifier": str(uuid.uuid5(uuid.NAMESPACE_URL, f"geoves/{region.name}/{region.crs}/{file}")),
            "language": "eng",
            "charset": "utf8",
            "hierarchylevel": "dataset",
            "datestamp": date,
            "dataseturi": file,
        },
        "spatial": {"datatype": representation, "geomtype": "complex"},
        "identification": _identify(results, words, date),
        "contact": {"pointOfContact": contact, "author": contact},
        "distribution": {
            "file": {
                "url": file,
                "type": "FILE",
                "name": file,
                "description": clean(f"{title} ({file_format})"),
                "function": "download",
            },
        },
        "dataquality": {
            "scope": {"level": "dataset"},
            "lineage": {"statement": clean(tell_lineage(results, record))},
        },
    }
    return str(ISO19139OutputSchema().write(mcf))


def _identify(results: Results, words: tuple[str, str], date: str) -> dict[str, Any]:
    """What the file is, where it lies, and how it may be used."""
    region = results.region
    title, abstract = words
    limits = region.delivery.use_limits
    box = [f"{value:.6f}" for value in measure_extent(results)]
    return {
        "language": "eng",
        "charset": "utf8",
        "title": clean(f"{title}, {region.name}"),
        "abstract": clean(abstract),
        "dates": {"creation": date},
        "keywords": {"default": {"keywords": list(KEYWORDS), "keywords_type": "theme"}},
        "topiccategory": ["geoscientificInformation"],
        "extents": {"spatial": [{"bbox": box, "crs": 4326}], "temporal": []},
        "rights": clean(" ".join(filter(None, (limits, *list_cautions())))),
        "accessconstraints": "otherRestrictions",
        "license": {"name": clean(f"Use limits: {limits or 'not stated'}")},
        "status": "completed",
        "maintenancefrequency": "asNeeded",
        "url": clean(" ".join(tell_accuracy(results))),
    }


def measure_extent(results: Results) -> tuple[float, float, float, float]:
    """The grid's west, south, east and north in longitude and latitude, as every catalogue wants them."""
    to_degrees = pyproj.Transformer.from_crs(results.region.crs, "EPSG:4326", always_xy=True)
    west, south, east, north = to_degrees.transform_bounds(*results.stack.grid.bounds)
    return west, south, east, north


def _describe_contact(region: Region) -> dict[str, Any]:
    contact = region.delivery.contact
    empty = ("positionname", "address", "city", "administrativearea", "country", "hoursofservice", "phone", "fax")
    return {
        **dict.fromkeys((*empty, "contactinstructions")),
        "organization": clean(region.delivery.organisation or "not stated"),
        "individualname": clean(contact or "not stated"),
        "email": clean(contact) if "@" in contact else None,
        "postalcode": "",
        "url": "",
    }


def clean(text: str) -> str:
    """Text without the characters that XML cannot hold."""
    return _NOT_XML.sub("\ufffd", text)


def tell_lineage(results: Results, record: Mapping[str, Any]) -> str:
    """How the values came about, in one paragraph."""
    survey, region = results.survey, results.region
    places = (
        f"{len(survey.soundings)} vertical electrical soundings",
        f"{len(survey.wells)} control wells",
        f"{len(survey.picks)} picks by the interpreter",
    )
    parts = [
        f"Made from the region {region.name}: {', '.join(places)}.",
        "Curves were tied and inverted as horizontal layers, which the resistivity template turned into units.",
        _tell_method(results),
        f"Surfaces are blank outside the boundary and beyond {results.stack.reach:g} units of the CRS from data.",
        f"Random seed {region.random_seed}.",
    ]
    if "software" in record:
        parts.append(f"Software: {record['software']}.")
    versions = record.get("versions")
    if isinstance(versions, Mapping):
        parts.append("Software: " + ", ".join(f"{name} {version}" for name, version in versions.items()) + ".")
    inputs = record.get("inputs")
    if isinstance(inputs, Mapping):
        parts.append("Inputs: " + ", ".join(f"{name} (SHA-256 {value})" for name, value in inputs.items()) + ".")
    parts.extend(results.stack.remarks)
    return " ".join(parts)


def _tell_method(results: Results) -> str:
    """How places became surfaces: by the method that was used, which need not be the one asked for."""
    if results.geology is None:
        return "Tops, bounds and thicknesses were kriged (method 'each')."
    return (
        "One geology was inferred from all readings, logs, bounds and picks together, and its fields were carried to "
        "the cells (method 'together')."
    )


def tell_accuracy(results: Results) -> Iterator[str]:
    yield "Accuracy as found by the job itself:"
    merit = [f"{key}: {value}" for key, value in flatten(results.figures_of_merit)]
    yield "; ".join(merit) + "." if merit else "no figures were computed."
    yield describe_vertical(results.region)[1] + "."


def flatten(tree: Mapping[str, Any], above: str = "") -> Iterator[tuple[str, str]]:
    """Leaves of a nested mapping: what each is called in words, and its value, numbers to four figures."""
    for key, value in tree.items():
        name = f"{above}, {key}" if above else str(key)
        if isinstance(value, Mapping):
            yield from flatten(value, name)
        else:
            yield name.replace("_", " "), f"{value:.4g}" if isinstance(value, float) else str(value)


def _complete(text: str, results: Results, *, with_heights: bool) -> str:
    """The record with what pygeometa has no place for: both reference systems, figures of merit as quality reports."""
    for prefix, address in _NAMESPACES.items():
        ET.register_namespace(prefix, address)
    root = ET.fromstring(text)  # noqa: S314 - written by ourselves a moment ago
    horizontal = root.find("gmd:referenceSystemInfo", _NAMESPACES)
    if horizontal is None:
        raise DeliveryError("the metadata record has no reference system")
    place = list(root).index(horizontal)
    root.remove(horizontal)
    root.insert(place, _reference_system(results.region.crs))
    if with_heights and results.region.vertical_datum:
        root.insert(place + 1, _reference_system(results.region.vertical_datum))
    quality = root.find("gmd:dataQualityInfo/gmd:DQ_DataQuality", _NAMESPACES)
    if quality is None:
        raise DeliveryError("the metadata record has no statement of quality")
    for index, (name, value) in enumerate(flatten(results.figures_of_merit)):
        quality.insert(1 + index, _quality_report(name, value))
    return _DECLARATION + ET.tostring(root, encoding="unicode") + "\n"


def _nest(*names: str) -> tuple[ET.Element, ET.Element]:
    """Elements one inside the other: the outermost and the innermost."""
    outer = inner = ET.Element(_qualify(names[0]))
    for name in names[1:]:
        inner = ET.SubElement(inner, _qualify(name))
    return outer, inner


def _qualify(name: str) -> str:
    prefix, local = name.split(":")
    return f"{{{_NAMESPACES[prefix]}}}{local}"


def _reference_system(crs: str) -> ET.Element:
    """A CRS by its registered name, or written out where it has none."""
    outer, text = _nest(
        "gmd:referenceSystemInfo", "gmd:MD_ReferenceSystem", "gmd:referenceSystemIdentifier", "gmd:RS_Identifier",
        "gmd:code", "gco:CharacterString",
    )  # fmt: skip
    known = pyproj.CRS.from_user_input(crs)
    authority = known.to_authority()
    text.text = f"urn:ogc:def:crs:{authority[0]}::{authority[1]}" if authority else known.to_wkt()
    return outer


def _quality_report(name: str, value: str) -> ET.Element:
    """A figure of merit as DQ_QuantitativeAttributeAccuracy (ISO 19115:2003, B.2.4)."""
    outer, report = _nest("gmd:report", "gmd:DQ_QuantitativeAttributeAccuracy")
    measure = ET.SubElement(report, _qualify("gmd:nameOfMeasure"))
    ET.SubElement(measure, _qualify("gco:CharacterString")).text = clean(name)
    result = ET.SubElement(report, _qualify("gmd:result"))
    quantitative = ET.SubElement(result, _qualify("gmd:DQ_QuantitativeResult"))
    ET.SubElement(quantitative, _qualify("gmd:valueUnit")).set(_qualify("gco:nilReason"), "inapplicable")
    held = ET.SubElement(quantitative, _qualify("gmd:value"))
    ET.SubElement(held, _qualify("gco:Record")).text = clean(value)
    return outer
