"""Survey -> Survey: readings doubted where the physics of layered ground speaks against them.

Nothing is dropped here. A doubted reading is kept, flagged and left to the robust misfit of the inversion.
"""

import attrs
import numpy as np
from numpy.typing import ArrayLike

from geoves.domain.arrays import FloatArray
from geoves.domain.findings import Finding
from geoves.domain.survey import FEWEST_READINGS, Curve, Sounding, Survey
from geoves.errors import InputError


@attrs.frozen
class CurveOptions:
    """steepest_rise    slope on log-log axes: above 1 no layered ground can rise, and noise takes its share
    largest_jump     relative misfit of one reading against its neighbours on both sides that is flagged
    """

    steepest_rise: float = attrs.field(default=1.15, validator=attrs.validators.gt(0))
    largest_jump: float = attrs.field(default=0.15, validator=attrs.validators.gt(0))


def prepare_curves(survey: Survey, options: CurveOptions | None = None) -> Survey:
    """The survey with the doubts of its curves added."""
    options = options or CurveOptions()
    doubts = [doubt for sounding in survey.soundings for doubt in _doubt_curve(sounding, options)]
    return attrs.evolve(survey, doubts=(*survey.doubts, *doubts))


def make_sounding(
    name: str,
    half_spacing: ArrayLike,
    potential_half_spacing: ArrayLike,
    apparent_resistivity: ArrayLike,
    *,
    relative_error: ArrayLike = np.nan,
    place: tuple[float, float, float] = (0.0, 0.0, 0.0),
) -> Sounding:
    """A Schlumberger sounding from arrays, for a notebook: a new segment begins where MN grows.

    half_spacing AB/2 and potential_half_spacing MN/2 : (n,) m    apparent_resistivity : (n,) ohm m
    relative_error : (n,) or one number, one standard deviation as a fraction; NaN to let the inversion find it
    place : easting, northing, ground elevation (m)
    Raises InputError where a spacing or a resistivity is not above 0, or MN/2 not below AB/2.
    """
    a, b, rho = (
        np.atleast_1d(np.asarray(values, dtype=float))
        for values in (half_spacing, potential_half_spacing, apparent_resistivity)
    )
    if not a.shape == b.shape == rho.shape:
        raise InputError(f"{name}: {a.size} AB/2, {b.size} MN/2 and {rho.size} resistivities; expected as many of each")
    faults = [
        f"{name}, reading {i + 1}: AB/2 {a[i]:g}, MN/2 {b[i]:g}, {rho[i]:g} ohm m; expected AB/2 > MN/2 > 0 and a "
        "resistivity above 0"
        for i in np.flatnonzero(~((a > b) & (b > 0) & (rho > 0)))
    ]
    if faults:
        raise InputError(faults)
    _, segment = np.unique(b, return_inverse=True)
    order = np.lexsort((a, segment))
    error = np.broadcast_to(np.asarray(relative_error, dtype=float), a.shape)
    curve = Curve(
        half_spacing=a[order],
        potential_half_spacing=b[order],
        apparent_resistivity=rho[order],
        relative_error=error[order],
        segment=segment[order],
        used=np.ones(a.size, dtype=bool),
        reason=("",) * a.size,
        row=np.arange(a.size)[order] + 1,
    )
    return Sounding(name, *place, curve)


def _doubt_curve(sounding: Sounding, options: CurveOptions) -> list[Finding]:
    curve = sounding.curve
    doubts = []
    n_used = int(np.sum(curve.used))
    if not curve.is_enough:
        expected = f"a sounding needs {FEWEST_READINGS} usable readings; it says nothing by itself"
        doubts.append(Finding("doubt", "readings", 0, "", f"{n_used} usable readings", expected, sounding.name))
    for segment in np.unique(curve.segment):
        rows = np.flatnonzero((curve.segment == segment) & curve.used)
        rows = rows[np.argsort(curve.half_spacing[rows], kind="stable")]
        doubts += _doubt_segment(sounding.name, curve, rows, options)
    return doubts


def _doubt_segment(name: str, curve: Curve, rows: np.ndarray, options: CurveOptions) -> list[Finding]:
    """Single points off the line between their neighbours, and rises that flat layers cannot make."""
    doubts = []
    spacing, value = np.log(curve.half_spacing[rows]), np.log(curve.apparent_resistivity[rows])
    jump = _jumps(spacing, value)
    for i in np.flatnonzero(np.abs(jump) > options.largest_jump):
        expected = (
            f"{np.expm1(jump[i]):+.0%} off the line between its neighbours; look for an electrode left behind or "
            "overshot, a fence, a pipe; set use to 0 with the reason if it is known to be wrong"
        )
        doubts.append(_reading_doubt(name, curve, rows[i], expected))
    step = np.diff(spacing)
    slope = np.divide(np.diff(value), step, out=np.zeros_like(step), where=step > 0)
    for i in np.flatnonzero(slope > options.steepest_rise):
        expected = (
            f"rises {slope[i]:.2f} decades a decade of AB/2; flat layers allow 1 at most: "
            "a lateral change, leakage or a wrong reading"
        )
        doubts.append(_reading_doubt(name, curve, rows[i + 1], expected))
    return doubts


def _jumps(spacing: FloatArray, value: FloatArray) -> FloatArray:
    """Log residual of each inner point against the line between its neighbours (n,); 0 at the ends.

    A single bad point pulls its neighbours' lines the other way by half, so only the largest of three is kept.
    """
    jump = np.zeros_like(value)
    if value.size < 3:
        return jump
    between = np.diff(spacing)
    share = between[:-1] / np.maximum(between[:-1] + between[1:], 1e-12)
    jump[1:-1] = value[1:-1] - (value[:-2] + share * (value[2:] - value[:-2]))
    size = np.abs(jump)
    neighbour = np.maximum(np.append(size[1:], 0.0), np.append(0.0, size[:-1]))
    return np.where(size > neighbour, jump, 0.0)


def _reading_doubt(name: str, curve: Curve, reading: int, expected: str) -> Finding:
    row = int(curve.row[reading]) if curve.row.size else 0
    value = f"AB/2 {curve.half_spacing[reading]:g} m, {curve.apparent_resistivity[reading]:.4g} ohm m"
    return Finding("doubt", "readings", row, "apparent_resistivity", value, expected, name)
