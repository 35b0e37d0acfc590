"""Arrays -> Sounding: a curve for a notebook, without tables."""

import numpy as np
from numpy.typing import ArrayLike

from geoves.domain.survey import Array, Curve, Sounding
from geoves.errors import InputError


def make_sounding(
    name: str,
    half_spacing: ArrayLike,
    potential_half_spacing: ArrayLike,
    apparent_resistivity: ArrayLike,
    *,
    relative_error: ArrayLike = np.nan,
    place: tuple[float, float, float] = (0.0, 0.0, 0.0),
    array: Array = "schlumberger",
) -> Sounding:
    """A sounding from arrays, for a notebook: a new segment begins where MN grows.

    Of a Wenner array AB/2 is 1.5 a and MN/2 0.5 a; all its electrodes move at every reading, so that it is one segment.

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
    _, segment = np.unique(np.zeros_like(b) if array == "wenner" else b, return_inverse=True)
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
    return Sounding(name, *place, curve, array)
