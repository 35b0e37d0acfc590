"""Interpretation -> evidence: what the places say of one quantity each, and the bounds among it."""

from collections.abc import Sequence
from typing import Any, NamedTuple

import numpy as np

from geoves.domain.arrays import FloatArray
from geoves.domain.tops import Interpretation
from geoves.domain.units import Role
from geoves.kernels.covariances import fit_covariance
from geoves.kernels.inequality import Bounds, latent_moments
from geoves.kernels.kriging import estimate_offset
from geoves.surfaces.options import SurfaceOptions

# Soundings that are held against all wells, at most.
MOST_TIED = 3000
# What options call the thickness of a role.
_QUANTITIES = {Role.DEEP_AQUIFER: "deep_gravel", Role.SHALLOW_AQUIFER: "shallow_aquifer", Role.COVER: "cover"}
# Thickness (m) that is expected of a unit, were it there, when no place shows it.
THIN = 5.0


class Evidence(NamedTuple):
    """What is known of one quantity: values with error variances, and bounds; `quantity` as options name it."""

    title: str
    unit: str
    place: tuple[str, ...]
    kind: tuple[str, ...]
    points: FloatArray
    values: FloatArray
    error_variance: FloatArray
    bounds: Bounds
    bound_kind: tuple[str, ...] = ()
    quantity: str = "basal_depth"

    @property
    def size(self) -> int:
        """How many places say something."""
        return len(self.values) + len(self.bounds.bound)


def read_basal_contact(interpretation: Interpretation, options: SurfaceOptions) -> Evidence:
    """Log depth of the basal contact: data where it is known, bounds where only "deeper than" is."""
    rows = [top for top in interpretation.tops if top.contact == "basal"]
    at = [top for top in rows if top.status == "at"]
    below = [top for top in rows if top.status == "below" and top.depth > 0]
    return Evidence(
        "Log depth of the basal contact",
        "ln m",
        tuple(top.place for top in at),
        tuple(top.kind for top in at),
        locate(at),
        np.log([max(top.depth, 0.1) for top in at]),
        np.array([log_variance(top.standard_error / max(top.depth, 0.1)) for top in at]),
        Bounds(
            locate(below),
            np.log([top.depth for top in below]),
            np.ones(len(below)),
            np.full(len(below), options.bound_deviation),
        ),
        tuple(top.kind for top in below),
    )


def log_variance(relative_error: float) -> float:
    """Variance of the log of a log-normal depth whose standard deviation is so much of its median.

    (e^v - 1) e^v = r², solved for v.
    """
    return float(np.log(0.5 + 0.5 * np.sqrt(1.0 + 4.0 * relative_error**2)))


def tie_to_wells(evidence: Evidence, options: SurfaceOptions) -> tuple[Evidence, float, list[str]]:
    """The soundings' log depths shifted by what they differ from the wells' on the whole, if wells are enough to tell.

    A template a little off, or layers less uniform than a model's, put every depth of a survey off by one factor. The
    bounds of curves are shifted with them. Also gives the deviation of the factor's log, and what was done in words.
    """
    by_curve = np.array([kind == "sounding" for kind in evidence.kind], dtype=bool)
    if options.tie_deviation == 0 or np.sum(~by_curve) < options.fewest_wells or np.sum(by_curve) < options.fewest:
        return evidence, 0.0, []
    own = options.variogram.basal_depth
    covariance = fit_covariance(
        evidence.points, evidence.values, evidence.error_variance, own.model or options.model, own.stated
    )
    # All wells, and of the soundings a fixed choice where they are many.
    drawn = np.random.default_rng(0).permutation(np.flatnonzero(by_curve))[:MOST_TIED]
    rows = np.sort(np.concatenate([np.flatnonzero(~by_curve), drawn]))
    data = evidence.points[rows], evidence.values[rows], evidence.error_variance[rows]
    offset, deviation = estimate_offset(*data, by_curve[rows], options.tie_deviation, covariance)
    bounded_by_curve = np.array([kind == "sounding" for kind in evidence.bound_kind], dtype=bool)
    shifted = evidence.bounds.bound - np.where(bounded_by_curve, offset, 0.0)
    tied = evidence._replace(
        values=evidence.values - np.where(by_curve, offset, 0.0), bounds=evidence.bounds._replace(bound=shifted)
    )
    words = "deeper" if offset > 0 else "shallower"
    said = f"soundings put the basal contact {abs(np.expm1(offset)):.0%} {words} than wells and picks do"
    done = f"their depths were divided by {np.exp(offset):.2f}"
    return tied, deviation, [f"{said} (give or take {deviation:.0%}); {done}"]


def read_thickness(interpretation: Interpretation, role: Role, title: str, options: SurfaceOptions) -> Evidence:
    """Latent thickness of a role: data where present, "not above 0" where absent, "not below" where not passed."""
    rows = [row for row in interpretation.thicknesses if row.role == role]
    absent = [row for row in rows if row.thickness <= 0]
    open_ended = [row for row in rows if row.at_least and row.thickness > 0]
    at = [row for row in rows if row not in absent and row not in open_ended]
    return Evidence(
        title,
        "m",
        tuple(row.place for row in at),
        tuple(row.kind for row in at),
        locate(at),
        np.array([row.thickness for row in at]),
        np.array([row.standard_error**2 for row in at]),
        Bounds(
            locate([*absent, *open_ended]),
            np.array([row.thickness for row in (*absent, *open_ended)]),
            np.array([-1.0] * len(absent) + [1.0] * len(open_ended)),
            np.full(len(absent) + len(open_ended), options.absence_deviation),
        ),
        quantity=_QUANTITIES[role],
    )


def read_resistivity(interpretation: Interpretation) -> Evidence:
    rows = interpretation.shallow_resistivities
    return Evidence(
        "Log resistivity of the shallow aquifer",
        "ln ohm m",
        tuple(row.place for row in rows),
        ("sounding",) * len(rows),
        locate(rows),
        np.array([row.log_resistivity for row in rows]),
        np.array([row.standard_error**2 for row in rows]),
        Bounds(np.empty((0, 2)), np.empty(0), np.empty(0), np.empty(0)),
        quantity="shallow_resistivity",
    )


def locate(rows: Sequence[Any]) -> FloatArray:
    return np.array([[row.easting, row.northing] for row in rows]).reshape(-1, 2)


def latent_prior(evidence: Evidence) -> tuple[float, float]:
    """Mean and deviation of a latent thickness, from the share of places that have the unit and what they show.

    Two places more, one with and one without, stand for not knowing; thicknesses not passed count as they are.
    """
    shown = np.concatenate([evidence.values, evidence.bounds.bound[evidence.bounds.side > 0]])
    n_places = len(evidence.values) + len(evidence.bounds.bound)
    share = (shown.size + 1.0) / (n_places + 2.0)
    return latent_moments(share, float(np.mean(shown)) if shown.size else THIN)


def say_how_few(evidence: Evidence, options: SurfaceOptions) -> list[str]:
    n_values, n_bounds = len(evidence.values), len(evidence.bounds.bound)
    if evidence.size < options.fewest:
        few = f"{n_values} thicknesses and {n_bounds} absences or bounds are too few for a surface"
        return [f"{evidence.title}: {few}; bedrock allows for as much of it everywhere as those say on the whole"]
    if n_values < options.fewest:
        few = f"only {n_values} thicknesses beside {n_bounds} absences or bounds, each of which entered by itself"
        return [f"{evidence.title}: {few}; the surface is a first guess"]
    return []
