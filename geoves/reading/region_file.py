"""region.toml, every key checked."""

import re
import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any, cast

import attrs
from pyproj import CRS
from pyproj.exceptions import CRSError

from geoves.domain.findings import Finding
from geoves.domain.region import METRES, Delivery, LengthUnit, Method, Region, Section
from geoves.reading.bounds import MOST_REGION_FILE
from geoves.reading.faults import in_words, nearest, printable
from geoves.reading.keys import Keys, is_number
from geoves.reading.sources import INPUTS, REQUIRED_INPUTS, WITH_LENGTHS, split_part
from geoves.reading.template import read_template

# Tables whose keys are options of a step: project checks them against the step's own options.
METHODS = ("together", "each")
STEP_TABLES = ("curves", "inversion", "interpretation", "geology", "surfaces", "layers", "plan")
_TABLES = ("region", "inputs", "input_length_unit", "unit", "section", "delivery", *STEP_TABLES)
_REPEATED = ("unit", "section")  # written [[unit]], once for each
_REGION_KEYS = ("name", "crs", "vertical_datum", "length_unit", "cell_size", "random_seed")
_DELIVERY_KEYS = ("organisation", "contact", "use_limits", "withhold", "fgdc")
_SECTION_KEYS = ("name", "points")
_LARGEST_SEED = 2**32 - 1


@attrs.frozen
class RegionFile:
    """What region.toml gave. With faults, `region` still serves to check the tables, or is None where it cannot."""

    region: Region | None
    findings: tuple[Finding, ...]


def parse_region(path: Path) -> RegionFile:
    """The region with all that is wrong in its file; nothing is raised."""
    findings: list[Finding] = []
    text = _read_text(path, findings)
    typed = _parse_toml(path.name, text, findings) if text is not None else None
    if text is None or typed is None:
        return RegionFile(None, tuple(findings))
    tables = _take_tables(path.name, text, typed, findings)
    return RegionFile(_read_tables(path, tables), tuple(findings))


def _read_text(path: Path, findings: list[Finding]) -> str | None:
    if path.is_dir():
        expected = "this is a folder; expected the region.toml file in it"
    elif not path.exists():
        expected = "no such file; give the path of a region.toml (`geoves new FOLDER` writes one to begin with)"
    elif not path.is_file():
        expected = "not a file but a device; give the path of a region.toml"
    elif path.stat().st_size > MOST_REGION_FILE:
        expected = "too large for a region.toml; give the path of one"
    else:
        try:
            return path.read_bytes().decode("utf-8-sig")
        except UnicodeDecodeError:
            expected = "not text in UTF-8; save the file as UTF-8"
        except OSError as error:
            expected = f"the file cannot be read: {error.strerror}"
    findings.append(Finding("fault", str(path), 0, "", "", expected))
    return None


def _parse_toml(file: str, text: str, findings: list[Finding]) -> dict[str, Any] | None:
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        place = re.search(r"line (\d+)", str(error))
        row = int(place[1]) if place else 0
        line = text.splitlines()[row - 1].strip() if row else ""
        findings.append(Finding("fault", file, row, "", printable(line), f"not TOML: {error}"))
    except RecursionError:
        findings.append(Finding("fault", file, 0, "", "", "not TOML of a region: brackets are nested too deeply"))
    return None


def _take_tables(file: str, text: str, typed: Mapping[str, Any], findings: list[Finding]) -> dict[str, list[Keys]]:
    """The known tables by name, each a list with one, save the repeated; what is unknown or no table is a fault."""
    tables: dict[str, list[Keys]] = {name: [] for name in _TABLES}
    for name, value in typed.items():
        keys = Keys(file, text, name, {}, findings)
        many = value if isinstance(value, list) else [value]
        if name not in _TABLES:
            hint = nearest(name, _TABLES) or f"; expected {in_words(_TABLES)}"
            keys.complain("", f"region.toml has no such table or key{hint}", value=name)
        elif (name in _REPEATED) != isinstance(value, list) or not all(isinstance(one, dict) for one in many):
            brackets = f"[[{name}]], once for each {name}" if name in _REPEATED else f"[{name}]"
            keys.complain("", f"expected a table that begins with {brackets}")
        else:
            tables[name] = [Keys(file, text, name, one, findings, index) for index, one in enumerate(many)]
    for name in ("region", "inputs", "unit"):
        if name not in typed:
            brackets = "[[unit]] tables: the resistivity template" if name == "unit" else f"a table [{name}]"
            findings.append(Finding("fault", file, 0, name, "", f"missing; expected {brackets}"))
    blank = Keys(file, text, "", {}, findings)
    return {
        name: found if name in _REPEATED or found else [attrs.evolve(blank, table=name)]
        for name, found in tables.items()
    }


def _read_tables(path: Path, tables: Mapping[str, list[Keys]]) -> Region | None:
    region, inputs, units = (tables[name][0] for name in ("region", "inputs", "input_length_unit"))
    given = bool(region.values)
    if given:
        region.refuse_unknown(_REGION_KEYS)
    name = region.string("name", required="the region's name" if given else "")
    crs = _read_crs(region) if given else None
    datum = _read_vertical_datum(region)
    length_unit = region.choice("length_unit", tuple(METRES), required=given)
    cell_size = region.number("cell_size", "the size of a cell, above 0, in the unit of the CRS") if given else None
    files = _find_files(inputs, path.parent)
    input_units = _read_input_units(units, inputs)
    template = read_template(tables["unit"], METRES[cast(LengthUnit, length_unit or "m")])
    delivery = _read_delivery(tables["delivery"][0])
    sections = _read_sections(tables["section"])
    method = tables["interpretation"][0].choice("method", METHODS, required=False) or METHODS[0]
    settings = _read_settings(tables)
    seed = _read_seed(region)
    if crs is None or not length_unit:
        return None
    return Region(
        name=name,
        path=path.resolve(),
        crs=region.string("crs"),
        crs_unit_metres=crs.axis_info[0].unit_conversion_factor,
        vertical_datum=datum,
        length_unit=cast(LengthUnit, length_unit),
        cell_size=cell_size or float("nan"),
        random_seed=seed,
        template=template,
        method=cast(Method, method),
        delivery=delivery,
        sections=sections,
        settings=settings,
        files=files,
        typed_inputs={key: inputs.values[key].strip() for key in files},
        input_length_units=input_units,
    )


def _read_crs(keys: Keys) -> CRS | None:
    typed = keys.string("crs", required="a projected CRS, such as 'EPSG:26914'")
    crs = _parse_crs(keys, "crs", typed) if typed else None
    if crs is None:
        return None
    if crs.is_compound:
        keys.complain("crs", "expected the projected CRS alone; name the heights' datum in vertical_datum")
    elif not crs.is_projected:
        keys.complain(
            "crs", f"{crs.name} is not projected; expected a CRS with x and y in lengths, such as 'EPSG:26914'"
        )
    elif {axis.direction for axis in crs.axis_info} != {"east", "north"}:
        keys.complain("crs", f"expected a CRS whose x runs east and y north; those of {crs.name} do not")
    else:
        return crs
    return None


def _read_vertical_datum(keys: Keys) -> str | None:
    typed = keys.string("vertical_datum")
    crs = _parse_crs(keys, "vertical_datum", typed) if typed else None
    if crs is None:
        return None
    if not crs.is_vertical or crs.is_compound:
        keys.complain(
            "vertical_datum", f"{crs.name} is not a vertical CRS; expected one, such as 'EPSG:5703' (NAVD 88)"
        )
        return None
    return typed


def _parse_crs(keys: Keys, key: str, typed: str) -> CRS | None:
    try:
        return CRS.from_user_input(typed)
    except (CRSError, ValueError):
        keys.complain(key, "no such CRS is known; expected a code such as 'EPSG:26914'")
        return None


def _read_seed(keys: Keys) -> int:
    seed = keys.values.get("random_seed", 0)
    if not isinstance(seed, int) or isinstance(seed, bool) or not 0 <= seed <= _LARGEST_SEED:
        keys.complain("random_seed", f"expected a whole number from 0 to {_LARGEST_SEED}")
        return 0
    return seed


def _find_files(keys: Keys, folder: Path) -> dict[str, Path]:
    """The files that exist, by input; a path that is missing or a folder is a fault."""
    if keys.values:
        keys.refuse_unknown(INPUTS)
    files = {}
    for name in INPUTS:
        required = f"the path of the table of {name}" if name in REQUIRED_INPUTS and keys.values else ""
        typed = keys.string(name, required=required)
        if name in keys.values and not required and isinstance(keys.values[name], str) and not typed:
            keys.complain(name, "expected a path; leave the line out where there is no such file")
        if typed and (path := _find_file(keys, name, folder, typed)) is not None:
            files[name] = path
    if "well_logs" in keys.values and "wells" not in keys.values:
        keys.complain("well_logs", "expected the table of wells too: a log needs its well's place")
    return files


def _find_file(keys: Keys, name: str, folder: Path, typed: str) -> Path | None:
    path = folder / split_part(typed)[0]
    try:
        if path.is_file():
            return path.resolve()
        expected = "this is a folder; expected a file" if path.is_dir() else "no such file beside region.toml"
    except (OSError, ValueError):
        expected = "expected the path of a file"
    keys.complain(name, expected)
    return None


def _read_input_units(keys: Keys, inputs: Keys) -> dict[str, LengthUnit]:
    units: dict[str, LengthUnit] = {}
    keys.refuse_unknown(WITH_LENGTHS)
    for name in keys.values:
        if name in WITH_LENGTHS and (unit := keys.choice(name, tuple(METRES))):
            units[name] = cast(LengthUnit, unit)
            if name not in inputs.values:
                keys.complain(name, f"[inputs] names no {name}; leave the line out, or add the file")
    return units


def _read_delivery(keys: Keys) -> Delivery:
    keys.refuse_unknown(_DELIVERY_KEYS)
    organisation, contact, limits = (keys.string(key) for key in _DELIVERY_KEYS[:3])
    fgdc = keys.values.get("fgdc", False)
    if not isinstance(fgdc, bool):
        keys.complain("fgdc", "expected true or false")
    return Delivery(organisation, contact, limits, keys.strings("withhold"), fgdc is True)


def _read_sections(tables: list[Keys]) -> tuple[Section, ...]:
    """The lines of the cross-sections: two corners or more, names unlike each other."""
    found: list[Section] = []
    for keys in tables:
        keys.refuse_unknown(_SECTION_KEYS)
        name = keys.string("name", required="the section's name")
        if name and name in {one.name for one in found}:
            keys.complain("name", "another section has this name")
        points = _read_corners(keys.values.get("points"))
        if points is None:
            example = "[[502000, 4600500], [506000, 4601200]]"
            keys.complain("points", f"expected two places or more, x and y in the CRS, such as {example}")
        elif name:
            found.append(Section(name, points))
    return tuple(found)


def _read_corners(typed: Any) -> tuple[tuple[float, float], ...] | None:
    """Corners of a line, None where they are none or all lie on one spot."""
    if not isinstance(typed, list) or not all(isinstance(one, list) and len(one) == 2 for one in typed):
        return None
    if not all(is_number(value) for one in typed for value in one):
        return None
    corners = tuple((float(x), float(y)) for x, y in typed)
    return corners if len(set(corners)) > 1 else None


def _read_settings(tables: Mapping[str, list[Keys]]) -> dict[str, dict[str, Any]]:
    """The options of the steps as typed, without the method of interpretation."""
    settings = {name: dict(tables[name][0].values) for name in STEP_TABLES if tables[name][0].values}
    settings.get("interpretation", {}).pop("method", None)
    return {name: options for name, options in settings.items() if options}
