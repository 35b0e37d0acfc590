"""Figures that say how far a delivery, or any other estimate of the surfaces, is from a county's truth."""

import attrs
import numpy as np

from demo_region.generator.county import ORIGIN, County

INCISED = 15.0  # m below the regional rock surface: the valley
PRESENT = 1.0  # m: the least thickness that counts as present


@attrs.frozen(eq=False)
class Estimate:
    """Surfaces at the cells to be scored, all (n,), NaN where blank; None where a way gives no such surface.

    easting, northing : m      bedrock, bedrock_p05, bedrock_p95, gravel : m      gravel_probability : 0 to 1
    shallow_resistivity : ohm m
    """

    easting: np.ndarray
    northing: np.ndarray
    bedrock: np.ndarray
    bedrock_p05: np.ndarray
    bedrock_p95: np.ndarray
    gravel: np.ndarray
    gravel_probability: np.ndarray | None = None
    shallow_resistivity: np.ndarray | None = None


def root_mean_square(error):
    error = error[np.isfinite(error)]
    return float(np.sqrt(np.mean(error**2))) if len(error) else np.nan


def mean(values):
    values = values[np.isfinite(values)]
    return float(np.mean(values)) if len(values) else np.nan


def score_surfaces(estimate: Estimate, county: County, expected_cells: int):
    """Figures by name, lengths in m; a bias is the estimate less the truth.

    Cells left blank, or never written, count in `blank` and in no other figure.
    """
    x, y = estimate.easting - ORIGIN[0], estimate.northing - ORIGIN[1]
    valley = county.bedrock_relief(x, y) > INCISED
    error = estimate.bedrock - county.bedrock_elevation(x, y)
    figures = {
        "bedrock": root_mean_square(error),
        "bedrock_valley": root_mean_square(error[valley]),
        "bias": mean(error),
        "bias_valley": mean(error[valley]),
        "blank": max(0.0, 1.0 - np.isfinite(error).sum() / expected_cells),
        "blank_valley": mean(np.isnan(error[valley]).astype(float)),
    }
    figures |= score_band(estimate, county.bedrock_elevation(x, y), valley)
    figures |= score_gravel(estimate, county.deep_gravel_thickness(x, y), valley)
    if estimate.shallow_resistivity is not None:
        present = county.shallow_aquifer_thickness(x, y) >= PRESENT
        ratio = np.log(estimate.shallow_resistivity / county.shallow_aquifer_resistivity(x, y))
        figures["shallow_log"] = root_mean_square(ratio[present])
        figures["shallow_blank"] = mean(np.isnan(ratio[present]).astype(float))
    return figures


def score_band(estimate, bedrock, valley):
    """How often the 90 % band of bedrock holds the truth, and how wide it is."""
    held = (estimate.bedrock_p05 <= bedrock) & (bedrock <= estimate.bedrock_p95)
    held = np.where(np.isfinite(estimate.bedrock_p05) & np.isfinite(estimate.bedrock_p95), held, np.nan)
    width = estimate.bedrock_p95 - estimate.bedrock_p05
    return {
        "held": mean(held),
        "held_valley": mean(held[valley]),
        "width": mean(width),
        "width_valley": mean(width[valley]),
    }


def score_gravel(estimate, thickness, valley):
    """Thickness errors and, where a probability is given, the Brier score beside that of the county's own frequency."""
    error = estimate.gravel - thickness
    figures = {
        "gravel": root_mean_square(error),
        "gravel_valley": root_mean_square(error[valley]),
        "zeros_valley": root_mean_square(thickness[valley]),
    }
    if estimate.gravel_probability is not None:
        present = (thickness >= PRESENT).astype(float)
        figures["brier"] = mean((estimate.gravel_probability - present) ** 2)
        figures["climatology"] = float(present.mean() * (1.0 - present.mean()))
    return figures
