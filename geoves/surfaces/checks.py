"""Why a surface should be believed: its variogram, and what leaving data out says of it."""

import numpy as np

from geoves.domain.grids import CrossValidation, Variogram
from geoves.kernels.covariances import experimental_variogram
from geoves.surfaces.engines import leave_each_out
from geoves.surfaces.evidence import Evidence
from geoves.surfaces.interpolation import Kriged
from geoves.surfaces.options import SurfaceOptions


def describe_variogram(evidence: Evidence, kriged: Kriged) -> Variogram:
    """The experimental variogram of the data proper beside the fitted covariance."""
    extent = float(np.hypot(*np.ptp(kriged.points, axis=0)))
    edges = np.linspace(0.0, 0.5 * extent, 13)
    lag, semivariance, pairs = experimental_variogram(evidence.points, evidence.values, edges)
    covariance = kriged.covariance
    errors = float(np.mean(kriged.error_variance[: len(evidence.values)])) if len(evidence.values) else 0.0
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
        remark=(
            f"fitted to {len(evidence.values)} data and {len(evidence.bounds.bound)} bounds by restricted likelihood; "
            f"the data's own errors ({errors:.3g} {evidence.unit}² on average) are in the points, not in the curve"
        ),
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
