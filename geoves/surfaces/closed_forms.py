"""Surfaces whose moments and quantiles follow from kriging in closed form: exact, and without a draw's noise."""

import numpy as np
from scipy.special import ndtr, ndtri

from geoves.domain.arrays import FloatArray
from geoves.domain.grids import Surface
from geoves.domain.units import Z_95
from geoves.kernels.inequality import rectified_normal_moments
from geoves.surfaces.canvas import Canvas
from geoves.surfaces.interpolation import Kriged
from geoves.surfaces.options import SurfaceOptions
from geoves.surfaces.stack import CellValues, assemble_surfaces, name_threshold, raise_to_ground, show_where

# Quantiles (mid-points of even shares) by which the sum of two independent quantities is summarised.
CONTACT_QUANTILES, GRAVEL_QUANTILES = ((np.arange(n) + 0.5) / n for n in (60, 20))


def bedrock_surfaces(contact: Kriged, gravel: Kriged | None, canvas: Canvas) -> list[Surface]:
    """Bedrock's depth and elevation: the log-normal basal contact plus the gravel, absence of gravel counting as 0."""
    depth_mean = np.exp(contact.mean + 0.5 * contact.deviation**2)
    variance = depth_mean**2 * np.expm1(contact.deviation**2)
    if gravel is not None:
        thickness, deviation = rectified_normal_moments(gravel.mean, gravel.deviation)
        depth_mean, variance = depth_mean + thickness, variance + deviation**2
    depth = CellValues(depth_mean, np.sqrt(variance), *_depth_quantiles(contact, gravel))
    found = {"bedrock_elevation": raise_to_ground(depth, canvas.ground), "bedrock_depth": depth}
    return list(assemble_surfaces([found], canvas).values())


def _depth_quantiles(contact: Kriged, gravel: Kriged | None, share: float = 0.05) -> tuple[FloatArray, FloatArray]:
    """The `share` and 1 - `share` quantiles of contact plus gravel, (c,) each."""
    if gravel is None:
        return tuple(np.exp(contact.mean + sign * Z_95 * contact.deviation) for sign in (-1, 1))  # type: ignore[return-value]
    contact_normal, gravel_normal = ndtri(CONTACT_QUANTILES), ndtri(GRAVEL_QUANTILES)
    low, high = np.empty_like(contact.mean), np.empty_like(contact.mean)
    for start in range(0, contact.mean.size, 2048):
        part = slice(start, start + 2048)
        depth = np.exp(contact.mean[part, None] + contact.deviation[part, None] * contact_normal)
        thickness = np.maximum(gravel.mean[part, None] + gravel.deviation[part, None] * gravel_normal, 0.0)
        total = (depth[:, :, None] + thickness[:, None, :]).reshape(depth.shape[0], -1)
        low[part], high[part] = np.quantile(total, [share, 1.0 - share], axis=1, method="hazen")
    return low, high


def gravel_surfaces(contact: Kriged, gravel: Kriged, canvas: Canvas, options: SurfaceOptions) -> list[Surface]:
    """Thickness of the gravel, how probable it is, and its top: the basal contact, which bedrock plus thickness is."""
    mean, deviation = rectified_normal_moments(gravel.mean, gravel.deviation)
    low, high = (np.maximum(gravel.mean + sign * Z_95 * gravel.deviation, 0.0) for sign in (-1, 1))
    probability = _probability_thicker(gravel, options.present)
    top = CellValues(
        np.exp(contact.mean + 0.5 * contact.deviation**2),
        None,
        *(np.exp(contact.mean + sign * Z_95 * contact.deviation) for sign in (-1, 1)),
    )
    top = show_where(top, probability >= options.least_probability)
    found = {
        "deep_gravel_thickness": CellValues(mean, deviation, low, high),
        "deep_gravel_probability": CellValues(probability),
        "deep_gravel_top_elevation": raise_to_ground(top, canvas.ground),
        "deep_gravel_top_depth": top,
    }
    found |= {
        name_threshold(threshold): CellValues(_probability_thicker(gravel, threshold))
        for threshold in options.thicker_than
    }
    return list(assemble_surfaces([found], canvas).values())


def _probability_thicker(thickness: Kriged, limit: float) -> FloatArray:
    return np.asarray(ndtr((thickness.mean - limit) / thickness.deviation))


def shallow_surfaces(
    thickness: Kriged, log_resistivity: Kriged | None, canvas: Canvas, options: SurfaceOptions
) -> list[Surface]:
    """The shallow aquifer's probability, and its median resistivity where it is probable."""
    probability = _probability_thicker(thickness, options.present)
    found = {"shallow_aquifer_probability": CellValues(probability)}
    if log_resistivity is not None:
        median, low, high = (np.exp(log_resistivity.mean + z * log_resistivity.deviation) for z in (0.0, -Z_95, Z_95))
        shown = probability >= options.probable
        found["shallow_aquifer_resistivity"] = show_where(CellValues(median, None, low, high), shown)
    return list(assemble_surfaces([found], canvas).values())
