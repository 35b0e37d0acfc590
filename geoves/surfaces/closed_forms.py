"""Surfaces whose moments and quantiles follow from kriging in closed form: exact, and without a draw's noise."""

from collections.abc import Callable

import numpy as np
from scipy.special import ndtr, ndtri

from geoves.domain.arrays import FloatArray
from geoves.domain.grids import Surface
from geoves.domain.tops import Interpretation
from geoves.domain.units import Z_95, Role
from geoves.kernels.inequality import rectified_normal_moments
from geoves.surfaces.canvas import Canvas
from geoves.surfaces.evidence import Evidence, read_resistivity, read_thickness, say_how_few
from geoves.surfaces.interpolation import Kriged
from geoves.surfaces.options import SurfaceOptions

# Quantiles (mid-points of even shares) by which the sum of two independent quantities is summarised.
CONTACT_QUANTILES, GRAVEL_QUANTILES = ((np.arange(n) + 0.5) / n for n in (60, 20))


def bedrock_surfaces(contact: Kriged, gravel: Kriged | None, canvas: Canvas) -> list[Surface]:
    """Bedrock's depth and elevation: the log-normal basal contact plus the gravel, absence of gravel counting as 0."""
    depth_mean = np.exp(contact.mean + 0.5 * contact.deviation**2)
    variance = depth_mean**2 * np.expm1(contact.deviation**2)
    if gravel is not None:
        thickness, deviation = rectified_normal_moments(gravel.mean, gravel.deviation)
        depth_mean, variance = depth_mean + thickness, variance + deviation**2
    low, high = _depth_quantiles(contact, gravel)
    error = np.sqrt(variance)
    place, ground = canvas.place, canvas.ground
    return [
        Surface(
            name="bedrock_elevation",
            title="Bedrock elevation",
            quantity="elevation",
            grid=canvas.grid,
            estimate=place(ground - depth_mean),
            standard_error=place(error),
            p05=place(ground - high),
            p95=place(ground - low),
        ),
        Surface(
            name="bedrock_depth",
            title="Depth to bedrock",
            quantity="depth",
            grid=canvas.grid,
            estimate=place(depth_mean),
            standard_error=place(error),
            p05=place(low),
            p95=place(high),
        ),
    ]


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
    mean, deviation = rectified_normal_moments(gravel.mean, gravel.deviation)
    probability = _probability_present(gravel, options)
    grid, place = canvas.grid, canvas.place
    # Bedrock plus thickness, by the means of both: the basal contact itself.
    top = canvas.ground - np.exp(contact.mean + 0.5 * contact.deviation**2)
    low, high = (canvas.ground - np.exp(contact.mean + sign * Z_95 * contact.deviation) for sign in (1, -1))
    shown = probability >= options.least_probability
    return [
        Surface(
            name="deep_gravel_thickness",
            title="Thickness of the deep gravel",
            quantity="thickness",
            grid=grid,
            estimate=place(mean),
            standard_error=place(deviation),
            p05=place(np.maximum(gravel.mean - Z_95 * gravel.deviation, 0.0)),
            p95=place(np.maximum(gravel.mean + Z_95 * gravel.deviation, 0.0)),
        ),
        Surface("deep_gravel_probability", "Probability of deep gravel", "probability", grid, place(probability)),
        Surface(
            name="deep_gravel_top_elevation",
            title="Top of the deep gravel",
            quantity="elevation",
            grid=grid,
            estimate=place(np.where(shown, top, np.nan)),
            p05=place(np.where(shown, low, np.nan)),
            p95=place(np.where(shown, high, np.nan)),
        ),
    ]


def _probability_present(thickness: Kriged, options: SurfaceOptions) -> FloatArray:
    return np.asarray(ndtr((thickness.mean - options.present) / thickness.deviation))


def shallow_surfaces(
    interpretation: Interpretation,
    interpolate: Callable[[Evidence], Kriged],
    canvas: Canvas,
    options: SurfaceOptions,
) -> tuple[list[Surface], list[tuple[Evidence, Kriged]], list[str]]:
    evidence = read_thickness(interpretation, Role.SHALLOW_AQUIFER, "Thickness of the shallow aquifer", options)
    remarks = say_how_few(evidence, options)
    if evidence.size < options.fewest:
        return [], [], remarks
    grid, place = canvas.grid, canvas.place
    thickness = interpolate(evidence)
    probability = _probability_present(thickness, options)
    surfaces = [
        Surface(
            "shallow_aquifer_probability", "Probability of the shallow aquifer", "probability", grid,
            place(probability),
        )
    ]  # fmt: skip
    resistivity = read_resistivity(interpretation)
    if len(resistivity.values) < options.fewest:
        remarks.append(f"{resistivity.title}: {len(resistivity.values)} data are too few for a surface")
        return surfaces, [(evidence, thickness)], remarks
    log_resistivity = interpolate(resistivity)
    shown = np.where(probability >= options.probable, 1.0, np.nan)
    median, low, high = (
        place(shown * np.exp(log_resistivity.mean + z * log_resistivity.deviation)) for z in (0.0, -Z_95, Z_95)
    )
    surfaces.append(
        Surface(
            "shallow_aquifer_resistivity", "Resistivity of the shallow aquifer", "resistivity", grid,
            median, None, low, high,
        )
    )  # fmt: skip
    return surfaces, [(evidence, thickness), (resistivity, log_resistivity)], remarks
