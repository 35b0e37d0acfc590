"""Records after the Content Standard for Digital Geospatial Metadata (FGDC-STD-001-1998), for those who ask."""

import xml.etree.ElementTree as ET
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any, TypeAlias

import pyproj

from geoves.delivery.cautions import SHORT_CAUTION, list_cautions
from geoves.delivery.dictionary import (
    LENGTH_UNITS,
    PART_TITLES,
    Column,
    Part,
    RasterWords,
    list_rasters,
    name_part,
    name_unit,
)
from geoves.delivery.layer_words import LAYERS
from geoves.delivery.metadata import (
    GEOPACKAGE,
    KEYWORDS,
    clean,
    flatten,
    measure_extent,
    select_merit,
    tell_accuracy,
    tell_lineage,
)
from geoves.domain.results import Results
from geoves.errors import DeliveryError

STANDARD = "FGDC Content Standard for Digital Geospatial Metadata"
VERSION = "FGDC-STD-001-1998"
SUFFIX = "_fgdc.xml"
_UNKNOWN = "not stated"
_SOURCE = "geoves"
# An element by its short name of the standard: text, or its children in the standard's order; None leaves it out.
Tree: TypeAlias = "tuple[str, str | Sequence[Tree | None]]"


def write_fgdc_records(
    results: Results, folder: Path, record: Mapping[str, Any], files: Sequence[Path]
) -> tuple[Path, ...]:
    """The paths of the records, NAME_fgdc.xml in folder/metadata for each raster and GeoPackage among `files`.

    `record["date"]` dates them. Raises DeliveryError.
    """
    rasters = list_rasters(results.stack.surfaces)
    by_name = {name_part(words.name, part): (words, part) for words in rasters for part in words.parts}
    written = []
    for file in files:
        if file.suffix == ".gpkg":
            tree = _describe_package(results, record)
        elif file.stem in by_name:
            tree = _describe_raster(results, record, *by_name[file.stem])
        else:
            continue
        path = folder / "metadata" / f"{file.stem}{SUFFIX}"
        try:
            path.parent.mkdir(parents=True, exist_ok=True)
            root = _build(tree)
            ET.indent(root)
            ET.ElementTree(root).write(path, encoding="utf-8", xml_declaration=True)
        except OSError as error:
            raise DeliveryError(f"metadata/{path.name} could not be written: {error.strerror}") from error
        written.append(path)
    return tuple(written)


def _build(tree: Tree) -> ET.Element:
    name, content = tree
    element = ET.Element(name)
    if isinstance(content, str):
        element.text = clean(content) or _UNKNOWN
    else:
        element.extend(_build(child) for child in content if child is not None)
    return element


def _describe_raster(results: Results, record: Mapping[str, Any], words: RasterWords, part: Part) -> Tree:
    title = ", ".join(filter(None, (words.title, PART_TITLES[part])))
    unit = name_unit(words.kind, results.region.length_unit) or ("codes" if words.codes else "0 to 1")
    grid = results.stack.grid
    shape: Tree = (
        "rastinfo",
        (("rasttype", "Grid Cell"), ("rowcount", str(grid.n_rows)), ("colcount", str(grid.n_columns))),
    )
    judged = select_merit(results, words)
    codes = {str(code): meaning for code, meaning in words.codes.items()}
    value = Column("value", title, f"{words.description} Cells without a value hold -9999.", words.kind, codes)
    entity = _detail(name_part(words.name, part), words.description, (value,), results)
    about = (f"{title}, {results.region.name}", f"{words.description} Values in {unit}.", "raster digital data")
    organisation: Tree = ("spdoinfo", (("direct", "Raster"), shape))
    return _assemble(judged, record, about, organisation, (entity,))


def _describe_package(results: Results, record: Mapping[str, Any]) -> Tree:
    listed = " ".join(f"{words.name}: {words.description}" for words in LAYERS.values())
    unit = LENGTH_UNITS[results.region.length_unit]
    about = (
        f"Layers, {results.region.name}",
        f"{GEOPACKAGE}: layers of a reconnaissance by vertical electrical soundings, lengths in {unit}. {listed}",
        "vector digital data",
    )
    objects = {"Point": "Entity point", "LineString": "String", "Polygon": "G-polygon"}
    kinds = dict.fromkeys(objects[words.geometry] for words in LAYERS.values())
    terms: list[Tree] = [("sdtsterm", (("sdtstype", kind),)) for kind in kinds]
    organisation: Tree = ("spdoinfo", (("direct", "Vector"), ("ptvctinf", terms)))
    entities = [_detail(words.name, words.description, words.columns, results) for words in LAYERS.values()]
    return _assemble(results, record, about, organisation, entities)


def _assemble(
    results: Results,
    record: Mapping[str, Any],
    about: tuple[str, str, str],
    organisation: Tree,
    entities: Sequence[Tree],
) -> Tree:
    """The seven sections of the standard; `about` is title, abstract and form."""
    if "date" not in record:
        raise DeliveryError("the record of the run names no date, which every metadata record needs")
    day = str(record["date"])[:10].replace("-", "")
    return (
        "metadata",
        (
            ("idinfo", tuple(_identify(results, about, day))),
            ("dataqual", tuple(_judge(results, record, day))),
            organisation,
            ("spref", tuple(_refer(results))),
            ("eainfo", entities),
            ("distinfo", (("distrib", (_contact(results),)), ("distliab", " ".join(list_cautions())))),
            (
                "metainfo",
                (("metd", day), ("metc", (_contact(results),)), ("metstdn", STANDARD), ("metstdv", VERSION)),
            ),
        ),
    )


def _identify(results: Results, about: tuple[str, str, str], day: str) -> Iterator[Tree]:
    title, abstract, form = about
    delivery = results.region.delivery
    cite = (("origin", delivery.organisation), ("pubdate", day), ("title", title), ("geoform", form))
    yield "citation", (("citeinfo", cite),)
    yield "descript", (("abstract", abstract), ("purpose", SHORT_CAUTION))
    yield "timeperd", (("timeinfo", (("sngdate", (("caldate", day),)),)), ("current", "date of the computation"))
    yield "status", (("progress", "Complete"), ("update", "As needed"))
    west, south, east, north = (f"{value:.6f}" for value in measure_extent(results))
    yield "spdom", (("bounding", (("westbc", west), ("eastbc", east), ("northbc", north), ("southbc", south))),)
    yield "keywords", (("theme", (("themekt", "None"), *(("themekey", word) for word in KEYWORDS))),)
    yield "accconst", "None"
    yield "useconst", " ".join(filter(None, (delivery.use_limits, *list_cautions())))
    yield "ptcontac", (_contact(results),)


def _contact(results: Results) -> Tree:
    """The standard demands an address and a voice that region.toml does not hold."""
    delivery = results.region.delivery
    lacking: tuple[Tree, ...] = tuple((name, _UNKNOWN) for name in ("addrtype", "city", "state", "postal"))
    reached: Tree = ("cntemail", delivery.contact) if "@" in delivery.contact else ("cntinst", delivery.contact)
    return (
        "cntinfo",
        (("cntorgp", (("cntorg", delivery.organisation),)), ("cntaddr", lacking), ("cntvoice", _UNKNOWN), reached),
    )


def _judge(results: Results, record: Mapping[str, Any], day: str) -> Iterator[Tree]:
    merit = list(flatten(results.figures_of_merit))
    told = " ".join(tell_accuracy(results))
    numbers = [("qattracc", (("attraccv", value), ("attracce", name))) for name, value in merit]
    yield "attracc", (("attraccr", told), *numbers)
    yield (
        "logic",
        "Rock lies below the ground, thicknesses are 0 or more, quantiles are in order; every file was read back.",
    )
    yield "complete", " ".join(("Blank where data are too far for an estimate.", *results.stack.remarks))
    radii = [one.location_accuracy for one in results.survey.wells if one.location_accuracy is not None]
    places = f"radii of location of {len(radii)} wells, up to {max(radii):.0f} m" if radii else "no radius is stated"
    heights = [(name, value) for name, value in merit if "rmse m" in name]
    vertical = [("qvertpa", (("vertaccv", value), ("vertacce", name))) for name, value in heights]
    yield (
        "posacc",
        (
            ("horizpa", (("horizpar", f"Places are as the inputs give them: {places}."),)),
            ("vertacc", (("vertaccr", told), *vertical)),
        ),
    )
    yield "lineage", (("procstep", (("procdesc", tell_lineage(results, record)), ("procdate", day))),)


def _refer(results: Results) -> Iterator[Tree]:
    """Both reference systems; the projected one in words and WKT, as the standard allows for any."""
    region = results.region
    crs = pyproj.CRS.from_user_input(region.crs)
    cell = f"{region.cell_size:g}"
    ellipsoid = crs.ellipsoid
    if ellipsoid is None:
        raise DeliveryError(f"the CRS {region.crs} names no ellipsoid, which an FGDC record needs")
    flattening = f"{ellipsoid.inverse_flattening:.9g}" if ellipsoid.inverse_flattening else "infinite"
    local: Tree = ("localp", (("localpd", f"{crs.name} ({region.crs})"), ("localpgi", crs.to_wkt())))
    unit = {"metre": "meters"}.get(crs.axis_info[0].unit_name, crs.axis_info[0].unit_name)
    spacing: Tree = ("coordrep", (("absres", cell), ("ordres", cell)))
    datum: Tree | None = ("horizdn", crs.datum.name) if crs.datum else None
    yield (
        "horizsys",
        (
            ("planar", (local, ("planci", (("plance", "row and column"), spacing, ("plandu", unit))))),
            (
                "geodetic",
                (
                    datum,
                    ("ellips", ellipsoid.name),
                    ("semiaxis", f"{ellipsoid.semi_major_metre:.9g}"),
                    ("denflat", flattening),
                ),
            ),
        ),
    )
    if region.vertical_datum is not None:
        yield (
            "vertdef",
            (
                (
                    "altsys",
                    (
                        ("altdatum", pyproj.CRS.from_user_input(region.vertical_datum).name),
                        ("altres", "0.015625"),
                        ("altunits", LENGTH_UNITS[region.length_unit]),
                        ("altenc", "Attribute values"),
                    ),
                ),
            ),
        )


def _detail(name: str, description: str, columns: Sequence[Column], results: Results) -> Tree:
    kind: Tree = ("enttyp", (("enttypl", name), ("enttypd", description), ("enttypds", _SOURCE)))
    return "detailed", (kind, *(_attribute(column, results) for column in columns))


def _attribute(column: Column, results: Results) -> Tree:
    region = results.region
    unit = name_unit(column.kind, region.length_unit)
    codes = {one.code: one.name for one in region.template.units} if column.name == "unit" else column.codes
    domains: list[Tree] = [
        ("attrdomv", (("edom", (("edomv", code), ("edomvd", meaning), ("edomvds", _SOURCE))),))
        for code, meaning in codes.items()
    ]
    if column.span:
        low, high = column.span
        domains = [("attrdomv", (("rdom", (("rdommin", f"{low:g}"), ("rdommax", f"{high:g}"))),))]
    if not domains:
        domains = [("attrdomv", (("udom", f"{column.title}, in {unit}" if unit else column.title),))]
    return "attr", (("attrlabl", column.name), ("attrdef", column.description), ("attrdefs", _SOURCE), *domains)
