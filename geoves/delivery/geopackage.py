"""All layers in one GeoPackage, with titles, units and value domains of their columns, read back before it counts."""

import re
import sqlite3
from collections.abc import Callable, Iterable, Mapping, Sequence
from contextlib import closing
from pathlib import Path
from types import MappingProxyType
from typing import Any, NamedTuple

import attrs
import geopandas
import numpy as np
import pandas as pd
import pyogrio
import shapely
from pyogrio.errors import DataLayerError, DataSourceError

from geoves.delivery.dictionary import Column, LayerWords, convert_to_delivery, name_unit
from geoves.delivery.joint_words import gather_joint
from geoves.delivery.layer_ranges import LayerRanges, find_layer_ranges
from geoves.delivery.layer_words import LAYERS
from geoves.delivery.metadata import render_geopackage_record
from geoves.delivery.section_lines import lay_sections
from geoves.delivery.sentences import doubted_rows, readings_aside, tell_all, tell_readings_aside, tell_trade_offs
from geoves.delivery.sounding_figures import segment_factors
from geoves.domain.earth import Inverted
from geoves.domain.fields import JointColumn
from geoves.domain.region import LengthUnit
from geoves.domain.results import Results
from geoves.domain.survey import Measured, Permit, Sounding, Well
from geoves.domain.tops import UnitColumn
from geoves.domain.units import Role
from geoves.errors import DeliveryError

GEOMETRY = "geom"
DECIMALS = 3  # of the length unit: what is finer is noise, and 20 ft stays 20
_RESERVED = ("fid", "ogc_fid", "rowid", GEOMETRY, "geometry")
_EXTENSIONS = (
    ("gpkg_data_columns", "gpkg_schema", "http://www.geopackage.org/spec121/#extension_schema"),
    ("gpkg_data_column_constraints", "gpkg_schema", "http://www.geopackage.org/spec121/#extension_schema"),
    ("gpkg_metadata", "gpkg_metadata", "http://www.geopackage.org/spec121/#extension_metadata"),
    ("gpkg_metadata_reference", "gpkg_metadata", "http://www.geopackage.org/spec121/#extension_metadata"),
)

# Tables of the schema and metadata extensions as GeoPackage 1.3 (OGC 12-128r17) writes them.
_TABLES = """
CREATE TABLE gpkg_data_columns (table_name TEXT NOT NULL, column_name TEXT NOT NULL, name TEXT,
  title TEXT, description TEXT, mime_type TEXT, constraint_name TEXT,
  CONSTRAINT pk_gdc PRIMARY KEY (table_name, column_name), CONSTRAINT gdc_tn UNIQUE (table_name, name));
CREATE TABLE gpkg_data_column_constraints (constraint_name TEXT NOT NULL, constraint_type TEXT NOT NULL,
  value TEXT, min NUMERIC, min_is_inclusive BOOLEAN, max NUMERIC, max_is_inclusive BOOLEAN, description TEXT,
  CONSTRAINT gdcc_ntv UNIQUE (constraint_name, constraint_type, value));
CREATE TABLE gpkg_metadata (id INTEGER CONSTRAINT m_pk PRIMARY KEY ASC NOT NULL,
  md_scope TEXT NOT NULL DEFAULT 'dataset', md_standard_uri TEXT NOT NULL, mime_type TEXT NOT NULL DEFAULT 'text/xml',
  metadata TEXT NOT NULL DEFAULT '');
CREATE TABLE gpkg_metadata_reference (reference_scope TEXT NOT NULL, table_name TEXT, column_name TEXT,
  row_id_value INTEGER, timestamp DATETIME NOT NULL DEFAULT (strftime('%Y-%m-%dT%H:%M:%fZ','now')),
  md_file_id INTEGER NOT NULL, md_parent_id INTEGER,
  CONSTRAINT crmr_mfi_fk FOREIGN KEY (md_file_id) REFERENCES gpkg_metadata(id),
  CONSTRAINT crmr_mpi_fk FOREIGN KEY (md_parent_id) REFERENCES gpkg_metadata(id));
"""
_NO_METADATA = "DROP TABLE gpkg_metadata; DROP TABLE gpkg_metadata_reference;"


def write_geopackage(results: Results, path: Path, tags: Mapping[str, str]) -> Path:
    """`path`, a GeoPackage 1.3 with every layer of the dictionary, in the region's CRS and length unit.

    Columns are the dictionary's, then the extra columns of the tables less those withheld. `tags["date"]` dates it.
    The file stands under its name only once every layer was read back. Raises DeliveryError.
    """
    layers = [LayerFrame(LAYERS[name], *built) for name, built in build_frames(results).items()]
    record = render_geopackage_record(results, tags)
    return write_database(layers, path, results, record, tags)


class LayerFrame(NamedTuple):
    """A layer to be written: its words, its rows, and what the tables called its further columns."""

    words: LayerWords
    frame: geopandas.GeoDataFrame
    labels: Mapping[str, str]


def write_database(
    layers: Sequence[LayerFrame], path: Path, results: Results, record: str | None, tags: Mapping[str, str]
) -> Path:
    """`path`, a GeoPackage 1.3 with these layers and the metadata record, read back before it has its name."""
    unfinished = path.with_name(f".{path.name}.tmp.gpkg")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        unfinished.unlink(missing_ok=True)
        _write_layers(layers, unfinished)
        with closing(sqlite3.connect(unfinished)) as database, database:
            database.executescript(_TABLES)
            used = [one for one in _EXTENSIONS if record is not None or one[1] != "gpkg_metadata"]
            database.executemany("INSERT INTO gpkg_extensions VALUES (?, NULL, ?, ?, 'read-write')", used)
            for layer in layers:
                _describe_columns(database, layer.words, layer.labels, results)
            _date_contents(database, _timestamp(tags))
            if record is None:
                database.executescript(_NO_METADATA)
            else:
                _attach_record(database, record, _timestamp(tags))
        _verify(unfinished, {one.words.name: len(one.frame) for one in layers})
        unfinished.replace(path)
    except (OSError, sqlite3.Error, DataSourceError, DataLayerError) as error:
        if isinstance(error, DeliveryError):
            raise
        raise DeliveryError(f"{path.name} could not be written: {error}") from error
    finally:
        unfinished.unlink(missing_ok=True)
    return path


def make_layer(words: LayerWords, rows: Sequence[Mapping[str, Any]], results: Results) -> LayerFrame:
    """Rows with SI values and a place (`place_at`) as a layer in the region's CRS and length unit."""
    return LayerFrame(words, *_finish_frame(words, pd.DataFrame(rows, dtype=object), (), results))


def build_frames(results: Results) -> Mapping[str, tuple[geopandas.GeoDataFrame, Mapping[str, str]]]:
    """Each layer in the region's length unit with its extra columns, and the names that those had in their tables."""
    return {name: build_frame(name, results) for name in LAYERS}


def build_frame(name: str, results: Results) -> tuple[geopandas.GeoDataFrame, Mapping[str, str]]:
    """One layer in the region's length unit with its extra columns, and the names that those had in their table."""
    build = _BUILDERS.get(name)
    rows, extras = _take_layer(results, name) if build is None else build(results)
    return _finish_frame(LAYERS[name], rows, extras, results)


Rows = tuple[pd.DataFrame, Sequence[Mapping[str, Any]]]


def _point_rows(rows: list[dict[str, Any]], extras: Sequence[Mapping[str, Any]] = ()) -> Rows:
    return pd.DataFrame(rows, dtype=object), extras


def _build_soundings(results: Results) -> Rows:
    inverted = {found.sounding: found for found in results.inverted}
    columns = {column.sounding: column for column in results.interpretation.columns}
    joint = gather_joint(results)
    rows = [
        _sounding_row(s, inverted.get(s.name), columns.get(s.name), results) | _joint_row(joint.get(s.name))
        for s in results.survey.soundings
    ]
    return _point_rows(rows, [s.extra for s in results.survey.soundings])


def _sounding_row(
    sounding: Sounding, found: Inverted | None, column: UnitColumn | None, results: Results
) -> dict[str, Any]:
    curve = sounding.curve
    row: dict[str, Any] = {
        "place_at": (sounding.easting, sounding.northing),
        "sounding": sounding.name,
        "ground_elevation": sounding.ground_elevation,
        "largest_ab2": float(curve.half_spacing.max()) if curve.half_spacing.size else np.nan,
        "n_readings": int(curve.used.sum()),
        "n_set_aside": int(np.sum(~curve.used if found is None else readings_aside(curve, found))),
        "array": sounding.array,
        "azimuth": sounding.azimuth_deg,
        "date": sounding.date,
        "note": sounding.note,
    }
    if found is not None:
        row |= {
            "rms_percent": found.rms_percent,
            "n_layers": found.n_layers,
            "investigated_depth": found.investigated_depth,
            "segment_factors": "; ".join(f"{factor:.3f}" for factor in found.segment_factor),
            "noise_percent": 100.0 * found.noise,
            "trade_offs": tell_trade_offs(found),
            "remarks": _remarks(sounding, found, results.region.length_unit),
        }
    if column is not None:
        row |= {
            "bedrock_status": column.bedrock_status,
            "bedrock_depth": column.bedrock_depth,
            "bedrock_depth_error": column.bedrock_depth_error,
            "basal_depth": column.basal_depth[1],
            "basal_depth_p05": column.basal_depth[0],
            "basal_depth_p95": column.basal_depth[2],
            "gravel_probability": column.gravel_probability,
            "gravel_limit": column.gravel_limit,
            "base_contrast": np.nan if column.bedrock_status == "deeper_than" else float(np.exp(column.base_contrast)),
            "conditioned_on": column.beside.well if column.beside is not None and column.beside.agrees else "",
            "water_level": column.water_level[0],
            "water_level_error": column.water_level[1],
            "sentence": tell_all(column, results.region.template, results.region.length_unit),
            "interpreter": "; ".join(dict.fromkeys(pick.interpreter for pick in column.picks)),
        }
    return row


def _joint_row(column: JointColumn | None) -> dict[str, Any]:
    """What one geology says of a place; nothing where it was not inferred, or the place had nothing to say."""
    if column is None:
        return {}
    row: dict[str, Any] = {}
    banded = {
        "together_basal_depth": column.basal_depth,
        "together_bedrock_depth": column.rock_depth,
        "others_basal_depth": column.others_basal_depth,
    }
    for name, quantiles in banded.items():
        row[f"{name}_p05"], row[name], row[f"{name}_p95"] = (float(depth) for depth in quantiles)
    return row | {
        "together_gravel_probability": column.gravel_probability,
        "others_gravel_probability": column.others_gravel_probability,
        "together_state": column.state,
        "together_misfit": column.misfit,
        "flat_layer_bias": column.flat_layer_bias,
        "together_shift": column.shift,
        "moved_by_picks": column.moved_by_picks,
    }


def _remarks(sounding: Sounding, found: Inverted, unit: LengthUnit) -> str:
    """What a person should know of a curve: what the inversion remarks, and the readings that it did without."""
    said = [*found.remarks, *(f"Set aside: {words}" for words in tell_readings_aside(sounding.curve, found, unit))]
    return " ".join(f"{words[:1].upper()}{words[1:].rstrip('.')}." for words in said)


def _build_model_layers(results: Results) -> Rows:
    soundings = {sounding.name: sounding for sounding in results.survey.soundings}
    columns = {column.sounding: column for column in results.interpretation.columns}
    rows: list[dict[str, Any]] = []
    for found in results.inverted:
        sounding, column = soundings[found.sounding], columns.get(found.sounding)
        top = found.model.top_depth
        ranges = find_layer_ranges(found)
        for index, resistivity in enumerate(found.model.resistivity):
            thick = found.model.thickness[index] if index < top.size - 1 else np.nan
            row: dict[str, Any] = {
                "place_at": (sounding.easting, sounding.northing),
                "sounding": found.sounding,
                "layer": index + 1,
                "top_depth": top[index],
                "bottom_depth": top[index] + thick,
                "top_elevation": sounding.ground_elevation - top[index],
                "resistivity": resistivity,
                "thickness": thick,
                "conductance": thick / resistivity,
                "transverse_resistance": thick * resistivity,
            }
            for name in attrs.fields_dict(LayerRanges):
                row[f"{name}_p05"], row[f"{name}_p95"] = getattr(ranges, name)[:, index]
            if column is not None:
                row |= {"unit": column.unit[index], "unit_probability": column.unit_probability[index]}
            rows.append(row)
    return _point_rows(rows)


def _build_tops(results: Results) -> Rows:
    names = ("place", "kind", "unit", "contact", "status", "depth", "elevation", "standard_error", "source")
    rows = [
        {"place_at": (top.easting, top.northing), **{name: getattr(top, name) for name in names}}
        for top in results.interpretation.tops
    ]
    return _point_rows(rows)


def _build_readings(results: Results) -> Rows:
    inverted = {found.sounding: found for found in results.inverted}
    doubts = doubted_rows(results)
    rows: list[dict[str, Any]] = []
    extras: list[Mapping[str, Any]] = []
    for sounding in results.survey.soundings:
        curve, found = sounding.curve, inverted.get(sounding.name)
        factor = None if found is None else segment_factors(curve, found)
        for i in range(curve.half_spacing.size):
            row = {
                "place_at": (sounding.easting, sounding.northing),
                "sounding": sounding.name,
                "ab2": curve.half_spacing[i],
                "mn2": curve.potential_half_spacing[i],
                "error_percent": 100.0 * curve.relative_error[i],
                "segment": int(curve.segment[i]) + 1,
                **attrs.asdict(curve.measured[i] if curve.measured else Measured()),
                "apparent_resistivity": curve.apparent_resistivity[i],
                "doubt": doubts.get((sounding.name, int(curve.row[i])), "") if curve.row.size else "",
                "used": bool(curve.used[i]),
                "reason": curve.reason[i] if curve.reason else "",
            }
            if found is not None and factor is not None:
                row |= {"predicted": found.predicted[i] * factor[i], "trust": found.robust_weight[i]}
            rows.append(row)
            extras.append(curve.extra[i] if curve.extra else {})
    return _point_rows(rows, extras)


def _build_picks(results: Results) -> Rows:
    places: dict[str, Sounding | Well] = {well.name: well for well in results.survey.wells}
    places |= {sounding.name: sounding for sounding in results.survey.soundings}
    names = ("place", "unit", "status", "depth", "depth_error", "interpreter", "reason")
    rows = [
        {
            "place_at": (places[pick.place].easting, places[pick.place].northing),
            **{name: getattr(pick, name) for name in names},
        }
        for pick in results.survey.picks
    ]
    return _point_rows(rows, [pick.extra for pick in results.survey.picks])


def _build_wells(results: Results) -> Rows:
    rock = {unit.code for unit in results.region.template.with_role(Role.BEDROCK)}
    reached = {reading.well for reading in results.interpretation.well_readings if reading.unit in rock}
    joint = gather_joint(results)
    rows = [
        {
            "place_at": (well.easting, well.northing),
            "well": well.name,
            "ground_elevation": well.ground_elevation,
            "total_depth": well.total_depth,
            "reached_bedrock": well.name in reached,
            "water_level": well.water_level,
            "specific_conductance": well.specific_conductance,
            "location_accuracy": well.location_accuracy,
        }
        | _joint_row(joint.get(well.name))
        for well in results.survey.wells
    ]
    return _point_rows(rows, [well.extra for well in results.survey.wells])


def _build_well_intervals(results: Results) -> Rows:
    wells: dict[str, Well] = {well.name: well for well in results.survey.wells}
    names = {unit.code: unit.name for unit in results.region.template.units}
    typed = {(w.name, log.top, log.bottom): log.extra for w in wells.values() for log in w.intervals}
    rows: list[dict[str, Any]] = []
    extras = []
    for reading in results.interpretation.well_readings:
        well = wells[reading.well]
        rows.append(
            {
                "place_at": (well.easting, well.northing),
                "well": reading.well,
                "top": reading.top,
                "bottom": reading.bottom,
                "description": reading.description,
                "unit": reading.unit,
                "term": names.get(reading.unit or ""),
                "confidence": reading.confidence,
            }
        )
        extras.append(typed.get((reading.well, reading.top, reading.bottom), {}))
    return _point_rows(rows, extras)


def _build_sections(results: Results) -> Rows:
    metres = results.region.crs_unit_metres
    rows = [
        {"place_at": one.line, "section": one.title, "kind": one.kind, "length": one.line.length * metres}
        for one in lay_sections(results)
    ]
    return _point_rows(rows)


def _build_doubts(results: Results) -> Rows:
    survey = results.survey
    places: dict[str, Sounding | Well | Permit] = {permit.name: permit for permit in survey.permits}
    places |= {well.name: well for well in survey.wells}
    places |= {sounding.name: sounding for sounding in survey.soundings}
    names = ("severity", "place", "file", "row", "column", "value", "expected", "check")
    rows: list[dict[str, Any]] = []
    for doubt in results.doubts:
        place = places.get(doubt.place)
        at = None if place is None else shapely.Point(place.easting, place.northing)
        rows.append({"place_at": at, **{name: getattr(doubt, name) for name in names}})
    return _point_rows(rows)


def _take_layer(results: Results, name: str) -> Rows:
    layer = results.layers[name]
    rows = pd.DataFrame(layer.drop(columns=layer.geometry.name))
    rows["place_at"] = np.asarray(layer.geometry)
    return rows, [permit.extra for permit in results.survey.permits] if name == "permits" else ()


_BUILDERS: Mapping[str, Callable[[Results], Rows]] = MappingProxyType(
    {
        "soundings": _build_soundings,
        "model_layers": _build_model_layers,
        "tops": _build_tops,
        "readings": _build_readings,
        "picks": _build_picks,
        "wells": _build_wells,
        "well_intervals": _build_well_intervals,
        "sections": _build_sections,
        "doubts": _build_doubts,
    }
)


def _finish_frame(
    words: LayerWords, rows: pd.DataFrame, extras: Sequence[Mapping[str, Any]], results: Results
) -> tuple[geopandas.GeoDataFrame, Mapping[str, str]]:
    metres = results.region.metres_per_length_unit
    columns: dict[str, Any] = {}
    for column in words.columns:
        values = rows[column.name] if column.name in rows else pd.Series([None] * len(rows), dtype=object)
        columns[column.name] = _type_values(values, column, metres)
    labels = {}
    for original, values in _gather_extras(extras, results.region.delivery.withhold).items():
        name = _free_name(original, columns)
        labels[name] = original
        columns[name] = values
    places = list(rows["place_at"]) if "place_at" in rows else []
    shapes: Any = places
    if words.geometry == "Point" and places and isinstance(places[0], tuple):
        shapes = geopandas.points_from_xy(*np.array(places, float).T)
    frame = geopandas.GeoDataFrame(columns, geometry=shapes, crs=results.region.crs)
    return frame.rename_geometry(GEOMETRY), labels


def _type_values(values: pd.Series, column: Column, metres: float) -> Any:
    """A column in the delivery's unit and in one type, absent values as the type's null."""
    absent = values.isna()
    if column.kind == "text":
        return values.astype(object).where(absent, values.astype(str)).where(~absent, None)
    if column.kind in ("flag", "count"):
        return values.where(~absent, pd.NA).astype("boolean" if column.kind == "flag" else "Int32")
    numbers = pd.to_numeric(values).to_numpy(float, na_value=np.nan)
    converted = convert_to_delivery(numbers, column.kind, metres)
    return np.round(converted, DECIMALS) if column.kind == "length" else converted


def _is_absent(value: Any) -> bool:
    return value is None or value is pd.NA or (isinstance(value, float) and np.isnan(value))


def _gather_extras(extras: Sequence[Mapping[str, Any]], withhold: Iterable[str]) -> dict[str, Any]:
    """The tables' own further columns by name, less the withheld ones; numbers stay numbers, all else becomes text."""
    kept_home = {name.strip().casefold() for name in withhold}
    names = dict.fromkeys(name for extra in extras for name in extra if name.strip().casefold() not in kept_home)
    gathered: dict[str, Any] = {}
    for name in names:
        values = [extra.get(name) for extra in extras]
        present = [value for value in values if not _is_absent(value)]
        if present and all(isinstance(value, int | float) and not isinstance(value, bool) for value in present):
            gathered[name] = np.array([np.nan if value is None else float(value) for value in values], float)
        else:
            gathered[name] = pd.Series([None if _is_absent(value) else str(value) for value in values], dtype=object)
    return gathered


def _free_name(original: str, taken: Mapping[str, Any]) -> str:
    """A column name that no other column has, letter case aside, made of letters, digits and underscores."""
    base = re.sub(r"\W+", "_", original).strip("_") or "column"
    used = {name.casefold() for name in (*taken, *_RESERVED)}
    name, count = base, 1
    while name.casefold() in used:
        count += 1
        name = f"{base}_typed" if count == 2 else f"{base}_typed{count - 1}"
    return name


def _write_layers(layers: Sequence[LayerFrame], path: Path) -> None:
    for words, frame, _ in layers:
        pyogrio.write_dataframe(
            frame,
            path,
            layer=words.name,
            driver="GPKG",
            append=path.exists(),
            geometry_type=words.geometry,
            dataset_options={} if path.exists() else {"VERSION": "1.3"},
            layer_options={"IDENTIFIER": words.title, "DESCRIPTION": words.description, "GEOMETRY_NAME": GEOMETRY},
        )


def _describe_columns(
    database: sqlite3.Connection, words: LayerWords, labels: Mapping[str, str], results: Results
) -> None:
    """Rows of the schema extension: a title with its unit, a description and a value domain for each column."""
    template = {unit.code: unit.name for unit in results.region.template.units}
    for column in words.columns:
        unit = name_unit(column.kind, results.region.length_unit)
        title = f"{column.title} ({unit})" if unit else column.title
        if column.name.endswith("elevation") and results.region.vertical_datum:
            title = f"{title}, {results.region.vertical_datum}"
        codes = template if column.name == "unit" else column.codes
        constraint = f"{words.name}_{column.name}" if codes or column.span else None
        database.execute(
            "INSERT INTO gpkg_data_columns VALUES (?, ?, ?, ?, ?, NULL, ?)",
            (words.name, column.name, column.name, title, column.description, constraint),
        )
        database.executemany(
            "INSERT INTO gpkg_data_column_constraints VALUES (?, 'enum', ?, NULL, NULL, NULL, NULL, ?)",
            [(constraint, code, meaning) for code, meaning in codes.items()],
        )
        if column.span:
            database.execute(
                "INSERT INTO gpkg_data_column_constraints VALUES (?, 'range', NULL, ?, 1, ?, 1, ?)",
                (constraint, *column.span, column.description),
            )
    database.executemany(
        "INSERT INTO gpkg_data_columns VALUES (?, ?, ?, ?, 'Carried through as typed.', NULL, NULL)",
        [(words.name, name, name, original) for name, original in labels.items()],
    )


def _attach_record(database: sqlite3.Connection, record: str, timestamp: str) -> None:
    """The metadata record as a row of the metadata extension."""
    database.execute(
        "INSERT INTO gpkg_metadata VALUES (1, 'dataset', 'http://www.isotc211.org/2005/gmd', 'text/xml', ?)", (record,)
    )
    database.execute(
        "INSERT INTO gpkg_metadata_reference VALUES ('geopackage', NULL, NULL, NULL, ?, 1, NULL)", (timestamp,)
    )


def _date_contents(database: sqlite3.Connection, timestamp: str) -> None:
    """The same date on everything."""
    database.execute("UPDATE gpkg_contents SET last_change = ?", (timestamp,))


def _timestamp(tags: Mapping[str, str]) -> str:
    """The date of the job as a GeoPackage writes it: to the millisecond, in UTC."""
    moment = pd.Timestamp(tags["date"])
    moment = moment.tz_localize("UTC") if moment.tzinfo is None else moment.tz_convert("UTC")
    return moment.strftime("%Y-%m-%dT%H:%M:%S.000Z")


def _verify(path: Path, counts: Mapping[str, int]) -> None:
    with closing(sqlite3.connect(path)) as database:
        broken = database.execute("PRAGMA integrity_check").fetchone()[0]
    if broken != "ok":
        raise DeliveryError(f"{path.name} is not a sound database: {broken}")
    for name, expected in counts.items():
        found = pyogrio.read_info(path, layer=name)["features"]
        if found != expected:
            raise DeliveryError(f"{path.name}, layer {name}: {found} rows read back, {expected} were written")
