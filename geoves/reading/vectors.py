"""Vector files: the boundary, and permits as points. Geometries come back in the region's CRS."""

import logging
import warnings
from collections.abc import Sequence
from typing import Any

import attrs
import numpy as np
import shapely

from geoves.domain.findings import Finding
from geoves.reading.bounds import list_views, starts_as
from geoves.reading.conversions import extent_of, note_missing_grid
from geoves.reading.delimited import cell_text, refuse_file
from geoves.reading.faults import in_words, printable
from geoves.reading.sources import Source
from geoves.reading.tables import Columns, Table, build_table

_log = logging.getLogger(__name__)

_KINDS = {".gpkg": "GeoPackage", ".geojson": "GeoJSON file", ".json": "GeoJSON file", ".shp": "shapefile"}
VECTOR_SUFFIXES = tuple(_KINDS)


def read_boundary(source: Source, crs: str, findings: list[Finding]) -> Any:
    """The boundary as one shapely (Multi)Polygon, None with a fault where the file has none."""
    features = _read_features(source, crs, findings)
    if features is None:
        return None
    shapes = [shape for shape in features.geometry if shape is not None and not shape.is_empty]
    if any(shape.geom_type not in ("Polygon", "MultiPolygon") for shape in shapes) or not shapes:
        found = in_words(sorted({shape.geom_type for shape in shapes})) if shapes else "nothing"
        refuse_file(source, f"expected polygons around the region, found {found}", findings)
        return None
    if not all(shape.is_valid for shape in shapes):
        words = "the boundary crosses itself; its outline was mended"
        findings.append(Finding("doubt", source.typed, 0, "", "", words))
    polygons = [part for shape in shapes for part in _polygons(shapely.make_valid(shape))]
    boundary = shapely.union_all(polygons)
    if not np.isfinite(boundary.bounds).all() or boundary.area == 0.0:
        refuse_file(source, f"the boundary cannot be shown in {crs}, or it encloses nothing", findings)
        return None
    return boundary


def read_shapes(source: Source, crs: str, findings: list[Finding]) -> list[Any]:
    """All geometries of a layer as shapely has them, none where there is a fault."""
    features = _read_features(source, crs, findings)
    if features is None:
        return []
    return [shape for shape in features.geometry if shape is not None and not shape.is_empty]


def read_point_table(source: Source, crs: str, columns: Columns, findings: list[Finding]) -> Table | None:
    """The points as a table with x and y in the CRS beside the attributes; row n is feature n, counted from 1."""
    features = _read_features(source, crs, findings)
    if features is None:
        return None
    geometry = features.geometry.name
    names = [name for name in features.columns if name != geometry and name not in ("x", "y")]
    cells = [[cell_text(value) for value in record] for record in features[names].itertuples(index=False)]
    places = [_point_cells(shape) for shape in features.geometry]
    headings = [printable(str(name)) for name in names]
    records = [[*headings, "x", "y"], *([*row, *place] for row, place in zip(cells, places, strict=True))]
    table = build_table(source.typed, records, columns, findings)
    if table is None:
        return None
    rows = tuple(attrs.evolve(row, number=row.number - 1) for row in table.rows)
    for row, shape in zip(rows, features.geometry, strict=True):
        if shape is not None and shape.geom_type not in ("Point", "MultiPoint"):
            row.doubt("geometry", f"a {shape.geom_type} instead of a point; a point in it is taken")
    return attrs.evolve(table, header_row=0, rows=rows)


def _point_cells(shape: Any) -> tuple[str, str]:
    """X and y as text, empty where there is no geometry."""
    if shape is None or shape.is_empty:
        return "", ""
    point = shape if shape.geom_type == "Point" else shape.representative_point()
    return repr(float(point.x)), repr(float(point.y))


def _polygons(shape: Any) -> Sequence[Any]:
    parts = shapely.get_parts(shape)
    nested = [inner for part in parts for inner in shapely.get_parts(part)]
    return [part for part in nested if part.geom_type == "Polygon"]


def _read_features(source: Source, crs: str, findings: list[Finding]) -> Any:
    """The features as a GeoDataFrame in the CRS, None with a fault where there are none that can be read."""
    if source.suffix not in VECTOR_SUFFIXES:
        refuse_file(source, f"expected a file that ends in {in_words(VECTOR_SUFFIXES)}", findings)
        return None
    import geopandas as gpd  # noqa: PLC0415 - heavy, and a job of plain tables does without

    try:
        if not starts_as(source.path, source.suffix):
            raise ValueError("it begins as a file of another kind")  # noqa: TRY301 - said below as of any other
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # of a file's flaws and field types that matter not here
            features = gpd.read_file(source.path, layer=_find_layer(source), engine="pyogrio")
            if not (expected := _unfit(features)):
                own = features.crs.to_wkt()
                note_missing_grid(source.typed, own, crs, extent_of(tuple(features.total_bounds), own), findings)
                return features.to_crs(crs)
    except _LayerError as error:
        expected = str(error)
    except Exception as error:  # noqa: BLE001 - a broken file makes GDAL and what lies on it raise what they will
        _log.debug("%s: %s", source.typed, error)
        expected = f"not a {_KINDS[source.suffix]} that can be read; expected a whole one, written by a GIS"
    refuse_file(source, expected, findings)
    return None


class _LayerError(Exception):
    """The file has not the layer that is meant."""


def _unfit(features: Any) -> str:
    """Why the features cannot be placed, in words; empty where they can."""
    if not hasattr(features, "geometry") or features.empty:
        return "no features with a geometry; expected at least one"
    if features.crs is None:
        return "does not say its CRS; add it (a shapefile needs its .prj)"
    return ""


def _find_layer(source: Source) -> str:
    import pyogrio  # noqa: PLC0415 - as above

    views = list_views(source.path) if source.suffix == ".gpkg" else set()
    if any(name.lower().startswith(("gpkg_", "rtree_")) for name in views):
        raise _LayerError("its catalogue is a view; expected a GeoPackage that a GIS wrote")
    names = [str(name) for name, _ in pyogrio.list_layers(source.path)]
    chosen = names[0] if source.part is None and len(names) == 1 else source.part
    if chosen in views:
        raise _LayerError(f"the layer {chosen} is a view, which may have no end; export it as a layer of its own")
    if chosen in names:
        return str(chosen)
    if source.part is None and names:
        raise _LayerError(f"several layers ({', '.join(names)}); name one after #, as in {source.typed}#{names[0]}")
    raise _LayerError(f"no layer {source.part!r}; expected one of {', '.join(names)}" if names else "no layers in it")
