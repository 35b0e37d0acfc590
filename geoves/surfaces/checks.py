"""Why a surface should be believed: its variogram, what leaving data out says of it, and the wells of its bands."""

from typing import NamedTuple

import numpy as np
from scipy.optimize import brentq
from scipy.stats import chi2

from geoves.domain.arrays import FloatArray, IntArray
from geoves.domain.grids import CrossValidation, DirectionalVariogram, Variogram
from geoves.kernels.covariances import (
    FEWEST_FOR_DIRECTION,
    experimental_variogram,
    fit_by_least_squares,
    leave_one_out_score,
)
from geoves.surfaces.engines import leave_each_out
from geoves.surfaces.evidence import Evidence
from geoves.surfaces.interpolation import Kriged
from geoves.surfaces.options import SurfaceOptions
from geoves.surfaces.stated import StatedVariogram

# Bins of an experimental variogram, over half the extent; pairs a bin needs to take part in a fit.
BINS, FEWEST_PAIRS = 12, 5
# Beyond so many data a fixed choice of them makes the pairs.
MOST_DATA = 2000
# Wells left out that tell whether bands are wide enough, and the widest that a band is made.
FEWEST_WELLS, WIDEST = 8, 3.0
# A standardised error beyond this counts as this much: one well misread must not widen every band.
OUTLYING = 4.0


def describe_variogram(evidence: Evidence, kriged: Kriged, options: SurfaceOptions) -> Variogram:
    """The experimental variogram of the data proper, all pairs and by direction, beside the covariance in use."""
    covariance = kriged.covariance
    rows = np.sort(np.random.default_rng(0).permutation(len(evidence.values))[:MOST_DATA])
    points, values = evidence.points[rows], evidence.values[rows]
    edges = np.linspace(0.0, 0.5 * float(np.hypot(*np.ptp(kriged.points, axis=0))), BINS + 1)
    lag, semivariance, pairs = experimental_variogram(points, values, edges)
    azimuth = covariance.azimuth_deg if covariance.ratio < 1.0 else 0.0
    directions = tuple(
        DirectionalVariogram(towards, *experimental_variogram(points, values, edges, towards, 45.0))
        for towards in (azimuth, (azimuth + 90.0) % 180.0)
    )
    return Variogram(
        title=evidence.title,
        unit=evidence.unit,
        model=covariance.model,
        nugget=covariance.nugget,
        partial_sill=covariance.partial_sill,
        length=covariance.length,
        azimuth_deg=covariance.azimuth_deg,
        ratio=covariance.ratio,
        n_data=len(evidence.values),
        lag=lag,
        semivariance=semivariance,
        pairs=pairs,
        remark="; ".join(_say_how_fitted(evidence, kriged, options)),
        least_squares=_fit_to_pairs(lag, semivariance, pairs, covariance.model),
        directions=directions,
    )


def _fit_to_pairs(
    lag: FloatArray, semivariance: FloatArray, pairs: IntArray, model: str
) -> tuple[float, float, float] | None:
    enough = pairs >= FEWEST_PAIRS
    if enough.sum() < 4 or not np.any(semivariance[enough] > 0.0):
        return None
    fitted = fit_by_least_squares(lag[enough], semivariance[enough], pairs[enough], model)
    return fitted.nugget, fitted.partial_sill, fitted.length


def _say_how_fitted(evidence: Evidence, kriged: Kriged, options: SurfaceOptions) -> list[str]:
    """Where the covariance comes from, in words: fitted, stated, or leaning on a fallback."""
    own: StatedVariogram = getattr(options.variogram, evidence.quantity)
    n_values, n_bounds = len(evidence.values), len(evidence.bounds.bound)
    stated = f"stated in region.toml: {own.words}" if own.words else ""
    said = [stated] if stated else []
    if None in own.stated[:3]:
        errors = float(np.mean(kriged.error_variance[:n_values])) if n_values else 0.0
        said.append(f"fitted to {n_values} data and {n_bounds} bounds by restricted likelihood")
        said.append(
            f"the data's own errors ({errors:.3g} {evidence.unit}² on average) are in the points, not in the curve"
        )
    if len(kriged.values) < FEWEST_FOR_DIRECTION:
        if own.stated.length is None:
            said.append(
                f"fewer than {FEWEST_FOR_DIRECTION} data and bounds: the length leans on a weak prior about a third of "
                "their extent, and no direction was looked for"
            )
    elif own.stated.ratio is None and own.stated.length is None:
        said.append(_say_direction(kriged))
    return said


def _say_direction(kriged: Kriged) -> str:
    covariance = kriged.covariance
    if covariance.ratio == 1.0:
        return "no direction was taken up: none paid for itself, or none predicted places left out better"
    alike = covariance._replace(length=covariance.length * covariance.ratio**0.5, ratio=1.0, azimuth_deg=0.0)
    directed, undirected = (leave_one_out_score(*kriged.data[:3], one) for one in (covariance, alike))
    return (
        f"the direction raises the log score of places left out from {undirected:.3f} to {directed:.3f} "
        "(the same mean length any way)"
    )


def cross_validate(evidence: Evidence, kriged: Kriged, options: SurfaceOptions) -> CrossValidation:
    """Each datum proper against what all other data and bounds say of its place, its own error in the doubt."""
    predicted, variance = leave_each_out(kriged.data, kriged.covariance, options)
    own = slice(0, len(evidence.values))
    if evidence.unit == "m":
        # A latent thickness below 0 is no gravel, not less than none.
        predicted = np.maximum(predicted, 0.0)
    return CrossValidation(
        title=evidence.title,
        unit=evidence.unit,
        place=evidence.place,
        kind=evidence.kind,
        measured=evidence.values,
        predicted=predicted[own],
        standard_error=np.sqrt(variance[own] + evidence.error_variance),
    )


class Calibration(NamedTuple):
    """By how much a deviation is widened, and what was found in words."""

    factor: float
    words: str


def calibrate_on_wells(evidence: Evidence, kriged: Kriged, options: SurfaceOptions) -> Calibration:
    """Whether the wells, each left out, lie within the bands; the factor that would bring them there if they do not.

    Soundings left out are not asked: their errors are alike, and what they share does not show among themselves. The
    bands are widened only where chance leaves less than one in twenty for errors so large (chi-squared).
    """
    predicted, variance = leave_each_out(kriged.data, kriged.covariance, options)
    wells = np.flatnonzero([kind != "sounding" for kind in evidence.kind])
    if len(wells) < FEWEST_WELLS:
        return Calibration(1.0, f"{len(wells)} wells and picks are too few to tell whether the bands are wide enough")
    residual = evidence.values[wells] - predicted[wells]
    own, field = evidence.error_variance[wells], variance[wells]
    standardised = np.clip(residual / np.sqrt(field + own), -OUTLYING, OUTLYING)
    total = float(standardised @ standardised)
    spread = np.sqrt(total / len(wells))
    inside = float(np.mean(np.abs(standardised) < 1.6449))
    found = (
        f"{len(wells)} wells and picks left out: errors {spread:.2f} standard errors, {inside:.0%} within the 90 % band"
    )
    if not options.calibrate_bands or total <= chi2.ppf(0.95, len(wells)):
        return Calibration(1.0, f"{found}; the bands are left as they are")
    factor = widen(standardised * np.sqrt(field + own), field, own)
    return Calibration(factor, f"{found}; too narrow: the bands of the basal contact are widened {factor:.2f} times")


def widen(residual: FloatArray, field: FloatArray, own: FloatArray) -> float:
    """The factor f from 1 to 3 for which residual² / (f² field + own) are 1 on average; (n,) variances."""

    def excess(factor: float) -> float:
        return float(np.mean(residual**2 / (factor**2 * field + own))) - 1.0

    if excess(1.0) <= 0.0:
        return 1.0
    return WIDEST if excess(WIDEST) > 0.0 else float(brentq(excess, 1.0, WIDEST))
