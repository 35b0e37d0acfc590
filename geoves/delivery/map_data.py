"""What the map page knows: grids, places and lines as plain values for its JSON block. Lengths stay in metres."""

import base64
import zlib
from collections.abc import Iterable, Mapping
from typing import Any

import attrs
import numpy as np
import pyproj

from geoves.delivery.cautions import SHORT_CAUTION, list_cautions
from geoves.delivery.dictionary import find_raster, list_rasters
from geoves.delivery.joint_words import gather_joint, name_voice, tell_joint, tell_others, tell_state
from geoves.delivery.layer_ranges import find_layer_ranges
from geoves.delivery.markup import unit_label
from geoves.delivery.ramps import QUANTITY_RAMPS, band_width, doubt_range, ramp_colours, value_range
from geoves.delivery.section_lines import lay_sections, lines_of
from geoves.delivery.sentences import (
    LIKELIHOODS,
    STATUS_WORDS,
    readings_aside,
    tell_doubt,
    tell_opinion,
    tell_pick,
    tell_sounding,
    tell_trade_offs,
)
from geoves.delivery.sounding_figures import segment_factors
from geoves.delivery.unit_look import ROLE_WORDS, unit_colours
from geoves.domain.arrays import FloatArray
from geoves.domain.earth import Inverted
from geoves.domain.fields import JointColumn
from geoves.domain.grids import Grid, Surface, SurfaceStack
from geoves.domain.results import Results
from geoves.domain.survey import Permit, Sounding, Well
from geoves.domain.tops import UnitColumn
from geoves.errors import DeliveryError

# In the order of the page's choice.
SHOWN_SURFACES = (
    "bedrock_elevation",
    "bedrock_depth",
    "deep_gravel_thickness",
    "deep_gravel_probability",
    "shallow_aquifer_resistivity",
)
WEB_MERCATOR = "EPSG:3857"
MOST_CELLS = 1_500_000  # beyond it the page would be heavy: every third, fifth, ... cell is shown, and it says so


def describe_region(results: Results) -> dict[str, Any]:
    """Everything the page's script draws from; only values that JSON can hold."""
    region = results.region
    colours = unit_colours(region.template)
    stack = thin_stack(results.stack)
    # All others are read under the cursor or in a column, though not drawn as a surface of their own.
    delivered = [words.name for words in list_rasters(stack.surfaces)]
    shown = sorted(delivered, key=lambda name: SHOWN_SURFACES.index(name) if name in SHOWN_SURFACES else 99)
    to_degrees = pyproj.Transformer.from_crs(region.crs, "EPSG:4326", always_xy=True)
    joint = gather_joint(results)
    return {
        "region": {
            "name": region.name,
            "crs": region.crs,
            "crsName": pyproj.CRS(region.crs).name,
            "datumName": pyproj.CRS(region.vertical_datum).name if region.vertical_datum else None,
            "unit": {"label": unit_label(region.length_unit), "metres": region.metres_per_length_unit},
            "crsMetres": region.crs_unit_metres,
            "madeBy": [words for words in (region.delivery.organisation, region.delivery.contact) if words],
            "useLimits": region.delivery.use_limits,
        },
        "caution": SHORT_CAUTION,
        "likelihoods": LIKELIHOODS,
        "statusWords": dict(STATUS_WORDS),
        "cautions": list(list_cautions()),
        "grid": _describe_grid(stack.grid),
        "everyCell": round(stack.grid.cell_size / results.stack.grid.cell_size),
        "projection": control_points(stack.grid, region.crs),
        "ramps": {name: _hexadecimal(name) for name in sorted({*QUANTITY_RAMPS.values(), "magma_r"})},
        "surfaces": [{**_describe_surface(stack.surfaces[name]), "drawn": name in SHOWN_SURFACES} for name in shown],
        "ground": encode_grid(stack.ground),
        "units": [
            {
                "code": u.code,
                "name": u.name,
                "role": u.role.value,
                "words": ROLE_WORDS[u.role],
                "colour": colours[u.code],
            }
            for u in region.template.units
        ],
        "soundings": _describe_soundings(results, joint, to_degrees),
        "wells": [_describe_well(results, well, joint.get(well.name), to_degrees) for well in results.survey.wells],
        "permits": _describe_permits(results, to_degrees),
        "lines": _describe_lines(results, to_degrees),
    }


def thin_stack(stack: SurfaceStack, most: int = MOST_CELLS) -> SurfaceStack:
    """The stack on a coarser grid of at most `most` cells: each takes the value of the cell in its middle."""
    every = 1
    while np.prod([-(-count // every) for count in stack.grid.shape]) > most:
        every += 2
    if every == 1:
        return stack

    def thin(values: FloatArray) -> FloatArray:
        padding = [(0, -count % every) for count in values.shape]
        return np.pad(values, padding, constant_values=np.nan)[every // 2 :: every, every // 2 :: every]

    old = stack.grid
    rows, columns = (-(-count // every) for count in old.shape)
    grid = Grid(old.west, old.north, old.cell_size * every, rows, columns)
    surfaces = {
        name: attrs.evolve(
            one,
            grid=grid,
            estimate=thin(one.estimate),
            standard_error=None,
            p05=None if one.p05 is None else thin(one.p05),
            p95=None if one.p95 is None else thin(one.p95),
        )
        for name, one in stack.surfaces.items()
    }
    covered = thin(stack.covered.astype(float)) == 1.0
    return attrs.evolve(stack, grid=grid, ground=thin(stack.ground), covered=covered, surfaces=surfaces)


def _describe_grid(grid: Grid) -> dict[str, Any]:
    rows_columns = {"rows": grid.n_rows, "columns": grid.n_columns}
    return {"west": grid.west, "north": grid.north, "cell": grid.cell_size, **rows_columns}


def _hexadecimal(ramp: str) -> str:
    return ramp_colours(ramp).tobytes().hex()


def _describe_surface(surface: Surface) -> dict[str, Any]:
    values = np.log(surface.estimate) if surface.quantity == "resistivity" else surface.estimate
    width = band_width(surface)
    ends = (0.0, 1.0) if surface.quantity == "probability" else value_range(values)
    words = find_raster(surface.name)
    return {
        "codes": {} if words is None else {str(code): meaning for code, meaning in words.codes.items()},
        "name": surface.name,
        "title": surface.title,
        "quantity": surface.quantity,
        "ramp": QUANTITY_RAMPS[surface.quantity],
        "range": [_rounded(end) for end in ends],
        "doubt": None if width is None else [_rounded(end) for end in doubt_range(width)],
        "estimate": encode_grid(surface.estimate),
        "p05": None if width is None or surface.p05 is None else encode_grid(surface.p05),
        "p95": None if width is None or surface.p95 is None else encode_grid(surface.p95),
    }


def encode_grid(values: FloatArray) -> dict[str, Any]:
    """A grid in 16 bits a cell: code 0 is blank, code c is low + (c - 1) step. Differences along rows, deflated.

    The step is the range over 65 534: 3 mm in a relief of 200 m, far below any error of the surfaces.
    """
    known = np.isfinite(values)
    low, high = (float(values[known].min()), float(values[known].max())) if known.any() else (0.0, 0.0)
    step = (high - low) / 65534 or 1.0
    codes = np.where(known, 1 + np.round((np.nan_to_num(values) - low) / step), 0).astype(np.uint16)
    differences = np.diff(codes, axis=1, prepend=np.zeros((len(codes), 1), np.uint16)).astype("<u2")
    packed = zlib.compress(differences.tobytes(), 9)
    return {"low": low, "step": step, "packed": base64.b64encode(packed).decode("ascii")}


def control_points(grid: Grid, crs: str, most: int = 257) -> dict[str, Any]:
    """A lattice from web mercator to the CRS, fine enough that bilinear steps between its points err by < 1/20 cell.

    Raises DeliveryError where no lattice of `most` points a side does.
    """
    to_crs = pyproj.Transformer.from_crs(WEB_MERCATOR, crs, always_xy=True)
    to_web = pyproj.Transformer.from_crs(crs, WEB_MERCATOR, always_xy=True)
    west, south, east, north = to_web.transform_bounds(*grid.bounds, densify_pts=41)
    wide, high = 0.15 * (east - west), 0.15 * (north - south)
    count = 17
    while count <= most:
        x = np.linspace(west - wide, east + wide, count)
        y = np.linspace(south - high, north + high, count)
        easting, northing = to_crs.transform(*np.meshgrid(x, y))
        if not (np.isfinite(easting).all() and np.isfinite(northing).all()):
            raise DeliveryError(f"map.html: the region cannot be placed on the globe with {crs}; check the CRS.")
        if _largest_error(to_crs, x, y, np.stack([easting, northing])) < 0.05 * grid.cell_size:
            return {
                "x": [x[0], x[-1]],
                "y": [y[0], y[-1]],
                "count": count,
                "bounds": [west, south, east, north],
                "easting": np.round(easting, 3).ravel().tolist(),
                "northing": np.round(northing, 3).ravel().tolist(),
            }
        count = 2 * count - 1
    raise DeliveryError(f"map.html: {crs} bends too strongly over this region to be drawn in web mercator.")


def _largest_error(to_crs: pyproj.Transformer, x: FloatArray, y: FloatArray, known: FloatArray) -> float:
    """Bilinear interpolation errs most at the middles of the lattice's cells."""
    middle_x, middle_y = np.meshgrid((x[1:] + x[:-1]) / 2, (y[1:] + y[:-1]) / 2)
    true = np.stack(to_crs.transform(middle_x, middle_y))
    guessed = (known[:, 1:, 1:] + known[:, 1:, :-1] + known[:, :-1, 1:] + known[:, :-1, :-1]) / 4
    return float(np.abs(true - guessed).max())


def _position(place: Sounding | Well | Permit, to_degrees: pyproj.Transformer) -> dict[str, Any]:
    longitude, latitude = to_degrees.transform(place.easting, place.northing)
    return {
        "name": place.name,
        "at": [round(latitude, 7), round(longitude, 7)],
        "e": round(place.easting, 2),
        "n": round(place.northing, 2),
    }


def _describe_soundings(
    results: Results, joint: Mapping[str, JointColumn], to_degrees: pyproj.Transformer
) -> list[dict[str, Any]]:
    models = {one.sounding: one for one in results.inverted}
    columns = {one.sounding: one for one in results.interpretation.columns}
    return [
        {
            **_position(sounding, to_degrees),
            **_describe_curve(sounding, models.get(sounding.name)),
            **_describe_model(models.get(sounding.name), columns.get(sounding.name), joint.get(sounding.name), results),
        }
        for sounding in results.survey.soundings
    ]


def _describe_curve(sounding: Sounding, inverted: Inverted | None) -> dict[str, Any]:
    curve = sounding.curve
    aside = ~curve.used if inverted is None else readings_aside(curve, inverted)
    fit: list[float | None] = []
    if inverted is not None:
        fit = _figures(inverted.predicted * segment_factors(curve, inverted))
    return {
        "curve": {
            "spacing": _figures(curve.half_spacing),
            "rho": _figures(curve.apparent_resistivity),
            "error": _figures(curve.relative_error),
            "segment": curve.segment.tolist(),
            "aside": aside.tolist(),
            "fit": fit,
        }
    }


def _describe_model(
    inverted: Inverted | None, column: UnitColumn | None, joint: JointColumn | None, results: Results
) -> dict[str, Any]:
    if inverted is None or column is None:
        return {"status": None, "sentence": "No model was made of this sounding.", "model": None, "depth": None}
    low, high = find_layer_ranges(inverted).resistivity
    template, unit = results.region.template, results.region.length_unit
    return {
        "status": column.bedrock_status,
        "sentence": name_voice(column, joint) + tell_sounding(column, template, unit),
        "together": []
        if joint is None
        else [words for words in (tell_state(joint), *tell_joint(column, joint, template, unit)) if words],
        "doubts": [words for words in (*tell_doubt(column, template, unit), tell_trade_offs(inverted)) if words],
        "rms": _rounded(inverted.rms_percent),
        "depth": _rounded(column.bedrock_depth),
        "error": _rounded(column.bedrock_depth_error),
        "model": {
            "top": _figures(inverted.model.top_depth),
            "rho": _figures(inverted.model.resistivity),
            "low": _figures(low),
            "high": _figures(high),
            "unit": [template.codes.index(code) for code in column.unit],
            "probability": _figures(column.unit_probability),
            "reach": _rounded(inverted.investigated_depth),
        },
        "profile": _describe_profile(column),
        "pickDepths": [pick.depth for pick in column.picks if pick.depth is not None],
        "opinions": [tell_opinion(opinion, results.region.length_unit) for opinion in column.pick_opinions],
    }


def _describe_profile(column: UnitColumn) -> dict[str, Any] | None:
    """Each unit's probability in slices of depth, in whole percent; None where there is no profile."""
    if not column.profile_depth.size:
        return None
    percent = np.round(100.0 * column.profile / np.maximum(column.profile.sum(axis=1, keepdims=True), 1e-9))
    return {"edges": [round(float(edge), 1) for edge in column.profile_depth], "percent": percent.astype(int).tolist()}


def _describe_well(
    results: Results, well: Well, joint: JointColumn | None, to_degrees: pyproj.Transformer
) -> dict[str, Any]:
    codes, rock = list(results.region.template.codes), results.region.template.units[-1].code
    readings = [one for one in results.interpretation.well_readings if one.well == well.name]
    return {
        **_position(well, to_degrees),
        "together": [] if joint is None else [tell_others(joint, results.region.template, results.region.length_unit)],
        "total": _rounded(well.total_depth),
        "rock": min((one.top for one in readings if one.unit == rock), default=None),
        "water": well.water_level,
        "conductance": well.specific_conductance,
        "picks": [
            tell_pick(pick, results.region.template, results.region.length_unit)
            for pick in results.survey.picks
            if pick.place == well.name
        ],
        "log": [
            [one.top, one.bottom, one.description, codes.index(one.unit) if one.unit in codes else None]
            for one in readings
        ],
    }


def _describe_permits(results: Results, to_degrees: pyproj.Transformer) -> list[dict[str, Any]]:
    """Permits with what the surfaces say of them, as the GeoPackage has it."""
    layer = results.layers.get("permits")
    said = {} if layer is None else {row["permit"]: row for row in layer.drop(columns="geometry").to_dict("records")}
    lengths = ("bedrock_depth", "gravel_top_depth", "gravel_thickness")
    chances = ("gravel_probability", "reach_probability")
    fields = [f"{name}{band}" for name in lengths for band in ("", "_p05", "_p95")] + list(chances)
    found = []
    for permit in results.survey.permits:
        row = said.get(permit.name, {})
        values: dict[str, Any] = {field: _rounded(row.get(field)) for field in fields}
        values |= {name: row[name] for name in ("over_gravel", "reaches_gravel") if isinstance(row.get(name), str)}
        more = {"requested": permit.requested_depth, "use": permit.use, "radius": permit.location_accuracy}
        found.append({**_position(permit, to_degrees), **more, "covered": bool(row.get("covered", False)), **values})
    return found


def _describe_lines(results: Results, to_degrees: pyproj.Transformer) -> dict[str, Any]:
    def paths(geometries: Iterable[Any]) -> list[list[list[float]]]:
        tolerance = results.stack.grid.cell_size / 5
        return [_degrees(one.simplify(tolerance), to_degrees) for one in lines_of(geometries)]

    layers = results.layers
    described: dict[str, Any] = {"boundary": paths([results.survey.boundary])}
    for name, field in (("bedrock_contours", "elevation"), ("thickness_contours", "thickness")):
        layer = layers.get(name)
        rows = [] if layer is None else zip(layer[field], layer.geometry, strict=True)
        described[name] = [{"value": _rounded(value), "paths": paths([shape])} for value, shape in rows]
    axis, extent = layers.get("valley_axis"), layers.get("gravel_extent")
    described["valley_axis"] = [] if axis is None else paths(axis.geometry)
    rows = [] if extent is None else zip(extent["likelihood"], extent.geometry, strict=True)
    described["gravel_extent"] = [
        {"value": str(value), "paths": paths([shape])} for value, shape in rows if value != "not_shown"
    ]
    described["sections"] = [
        {"mark": one.mark, "title": one.title, "paths": paths([one.line])}
        for one in lay_sections(results)
        if one.kind != "along"
    ]
    return described


def _degrees(line: Any, to_degrees: pyproj.Transformer) -> list[list[float]]:
    x, y = np.asarray(line.coords)[:, :2].T
    longitude, latitude = to_degrees.transform(x, y)
    return np.round(np.column_stack([latitude, longitude]), 6).tolist()


def _figures(values: Any) -> list[float | None]:
    return [_rounded(value) for value in np.asarray(values, dtype=float)]


def _rounded(value: Any) -> float | None:
    """Five figures; None where it is not known, for JSON has no NaN."""
    if value is None or not np.isfinite(value):
        return None
    return float(f"{float(value):.6g}")
