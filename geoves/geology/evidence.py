"""Soundings, wells and picks as the places of the joint inference: padded curves, and observations beside them."""

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from scipy.spatial import cKDTree

from geoves.domain.arrays import FloatArray
from geoves.domain.earth import Inverted
from geoves.domain.fields import Ceiling, ColumnPlan
from geoves.domain.survey import Sounding, Survey, Well
from geoves.domain.tops import Interpretation, PlaceKind, Thickness, Top
from geoves.domain.units import Role, Template
from geoves.geology.options import GeologyOptions
from geoves.kernels import damped_steps, layered_earth
from geoves.kernels.damped_steps import Curves, Readings
from geoves.kernels.joint_state import (
    ABOVE,
    AT,
    BASAL_DEPTH,
    DEEP_THICKNESS,
    FIRST_UPPER,
    ROCK_DEPTH,
    Observations,
    Places,
)

# Logs and picks are held to be no better than this: m of depth, m of thickness.
LEAST_DEPTH_ERROR, LEAST_THICKNESS_ERROR = 0.3, 0.4
# Places whose ground was not levelled take it from so many neighbours that were.
NEIGHBOURS = 4

Row = tuple[int, int, float, float]  # kind, quantity, value, error


class PlaceList(NamedTuple):
    """Places in the order of the arrays: soundings that were inverted, then wells that say something.

    points : (n, 2)    ground : (n,) m
    """

    names: tuple[str, ...]
    kinds: tuple[PlaceKind, ...]
    points: FloatArray
    ground: FloatArray


def list_places(survey: Survey, inverted: Sequence[Inverted], interpretation: Interpretation) -> PlaceList:
    """Every place that has a curve or a log to be heard."""
    fitted = {one.sounding for one in inverted}
    telling = {top.place for top in interpretation.tops} | {row.place for row in interpretation.thicknesses}
    soundings = [one for one in survey.soundings if one.name in fitted]
    wells = [one for one in survey.wells if one.name in telling]
    places: list[Sounding | Well] = [*soundings, *wells]
    points = np.array([[one.easting, one.northing] for one in places])
    kinds: list[PlaceKind] = ["sounding" for _ in soundings]
    kinds += ["well" for _ in wells]
    ground = _fill_ground(points, np.array([one.ground_elevation for one in places]))
    return PlaceList(tuple(one.name for one in places), tuple(kinds), points, ground)


def _fill_ground(points: FloatArray, elevation: FloatArray) -> FloatArray:
    """Elevations with what is not known taken from neighbours, by inverse distance."""
    known = np.isfinite(elevation)
    if known.all() or not known.any():
        return np.nan_to_num(elevation)
    count = min(NEIGHBOURS, int(known.sum()))
    distance, rows = cKDTree(points[known]).query(points[~known], k=list(range(1, count + 1)))
    weight = 1.0 / np.maximum(distance, 1.0)
    filled = elevation.copy()
    filled[~known] = np.sum(weight * elevation[known][rows], axis=1) / weight.sum(axis=1)
    return filled


def gather_evidence(
    survey: Survey,
    inverted: Sequence[Inverted],
    listed: PlaceList,
    ceiling: Ceiling,
    bounds: tuple[FloatArray, FloatArray],
) -> Places:
    """What the curves say, the noise being what was found with them; without observations yet.

    bounds : lowest and highest of the fields (q,); those of the segments' factors are added.
    """
    noise = {one.sounding: one.noise for one in inverted}
    by_name = {one.name: one for one in survey.soundings}
    curves = [by_name[name].curve for name, kind in zip(listed.names, listed.kinds, strict=True) if kind == "sounding"]
    wavenumber = layered_earth.shared_wavenumbers((c.half_spacing, c.potential_half_spacing) for c in curves)
    readings = [
        Readings(*curve.readings(noise[name])) for name, curve in zip(listed.names, curves, strict=False)
    ]  # soundings come first
    stacked = damped_steps.stack_curves(readings, wavenumber)
    n_wells = len(listed.names) - len(curves)
    padded = Curves(
        _pad(stacked.log_apparent_resistivity, n_wells, 0.0),
        _pad(stacked.deviation, n_wells, np.inf),
        _pad(stacked.weights, n_wells, 0.0),
        wavenumber,
        _pad(stacked.segments, n_wells, 0.0),
    )
    reach = np.full(padded.segments.shape[2], SEGMENT_REACH)
    nothing = np.zeros((len(listed.names), 1))
    silent = Observations(nothing.astype(np.int64), nothing.astype(np.int64), nothing, nothing + 1.0)
    return Places(
        ceiling.elevation(listed.points) * -1.0 + listed.ground,
        padded,
        silent,
        np.concatenate([bounds[0], -reach]),
        np.concatenate([bounds[1], reach]),
    )


# Nothing is looked for beyond this natural log of a segment's factor.
SEGMENT_REACH = 0.7


def _pad(values: FloatArray, count: int, fill: float) -> FloatArray:
    return np.concatenate([values, np.full((count, *values.shape[1:]), fill)])


def observe(
    listed: PlaceList,
    interpretation: Interpretation,
    plan: ColumnPlan,
    template: Template,
    options: GeologyOptions,
    *,
    picks: bool,
) -> Observations:
    """What logs, and where asked for the interpreter's picks, say of each place's column."""
    kinds = {"well", "pick"} if picks else {"well"}
    rows: dict[str, list[Row]] = {name: [] for name in listed.names}
    for top in interpretation.tops:
        if top.kind in kinds and top.place in rows:
            rows[top.place] += _read_top(top, plan, template, options)
    for thickness in interpretation.thicknesses:
        if thickness.kind in kinds and thickness.place in rows:
            rows[thickness.place] += _read_thickness(thickness, plan, template)
    width = max(1, *(len(said) for said in rows.values()))
    kind, quantity = np.zeros((2, len(rows), width), dtype=np.int64)
    value, error = np.zeros((len(rows), width)), np.ones((len(rows), width))
    for i, said in enumerate(rows.values()):
        for j, row in enumerate(said):
            kind[i, j], quantity[i, j], value[i, j], error[i, j] = row
    return Observations(kind, quantity, value, error)


def _read_top(top: Top, plan: ColumnPlan, template: Template, options: GeologyOptions) -> list[Row]:
    """A contact or a bound. A well's top of rock is left to the basal contact and the gravel that the log shows."""
    quantity = {"basal": BASAL_DEPTH, "bedrock": ROCK_DEPTH}.get(top.contact)
    if quantity is None:
        upper = [position for position, unit in enumerate(plan.upper) if template.units[unit].code == top.unit]
        quantity = FIRST_UPPER + len(plan.upper) + upper[0] if upper else None
    if quantity is None or not top.depth > 0:
        return []
    if top.status == "below":
        return [(ABOVE, quantity, top.depth, options.bound_error)]
    if top.status == "at" and not (quantity == ROCK_DEPTH and top.kind == "well"):
        return [(AT, quantity, top.depth, max(top.standard_error, LEAST_DEPTH_ERROR))]
    return []


def _read_thickness(row: Thickness, plan: ColumnPlan, template: Template) -> list[Row]:
    """A role's thickness, the deep aquifers as one; of several units above of one role only a lone one's is known."""
    if row.role == Role.DEEP_AQUIFER:
        quantities = [DEEP_THICKNESS] if plan.deep else []
    else:
        quantities = [
            FIRST_UPPER + position for position, unit in enumerate(plan.upper) if template.units[unit].role == row.role
        ]
    if len(quantities) != 1 and row.thickness > 0:
        return []
    kind = ABOVE if row.at_least else AT
    return [(kind, quantity, row.thickness, max(row.standard_error, LEAST_THICKNESS_ERROR)) for quantity in quantities]
