"""What is known of the field that a plan is about, by either method, and the doubt that is asked."""

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from geoves.domain.arrays import FloatArray
from geoves.domain.fields import Field, FieldEnsemble
from geoves.domain.grids import Variogram
from geoves.domain.results import Results
from geoves.domain.tops import Thickness, Top
from geoves.domain.units import Role
from geoves.errors import EngineError
from geoves.kernels.covariances import Covariance
from geoves.kernels.field_priors import FieldPrior
from geoves.kernels.latent_fields import Sites, cavities
from geoves.kernels.next_places import Carried, KnownField, carry, known_from_data, variance_at

# Titles under which the method `each` has its variograms.
BASAL_TITLE, GRAVEL_TITLE = "Log depth of the basal contact", "Thickness of the deep gravel"
# A mean of which nothing is known beforehand: its variance over the sill.
FREE_MEAN = 100.0
# Fewer data than this carry no field.
FEWEST = 3
# A place that adds less than this share to what others say of a field says nothing of it.
LEAST_GAIN = 1e-3
# A thickness counts as no better known than this, m.
LEAST_THICKNESS_ERROR = 0.5


class Depths(NamedTuple):
    """The basal contact at places (c,): its field, m of depth that one unit of the field is there, and its depth m."""

    field: Carried
    slope: FloatArray
    depth: FloatArray


def know_depth(results: Results) -> KnownField:
    """The field that carries the depth of the basal contact: below the ceiling, or below the ground."""
    if results.geology is not None:
        return _from_ensemble(results.geology, 0)
    tops = [top for top in results.interpretation.tops if top.contact == "basal" and top.status == "at"]
    found = _find_variogram(results, BASAL_TITLE, len(tops))
    values = np.log([max(top.depth, 0.1) for top in tops])
    error = np.array([top.standard_error / max(top.depth, 0.1) for top in tops])
    return known_from_data(_as_free_prior(found, values), _locate(tops), values, error**2)


def know_gravel(results: Results) -> KnownField:
    """The field that carries whether the deep gravel is there: its latent presence, or its latent thickness."""
    if not results.region.template.with_role(Role.DEEP_AQUIFER):
        raise EngineError("[plan] about = 'gravel': the template has no deep aquifer")
    if results.geology is not None:
        names = [field.name for field in results.geology.fields]
        first = next(i for i, name in enumerate(names) if name.endswith("_presence"))
        return _from_ensemble(results.geology, first)
    rows = [one for one in results.interpretation.thicknesses if one.role == Role.DEEP_AQUIFER and not one.at_least]
    found = _find_variogram(results, GRAVEL_TITLE, len(rows))
    values = np.array([one.thickness for one in rows])
    error = np.array([max(one.standard_error, LEAST_THICKNESS_ERROR) for one in rows])
    return known_from_data(_as_free_prior(found, values), _locate(rows), values, error**2)


def depths_at(known: KnownField, cells: FloatArray, ground: FloatArray, geology: FieldEnsemble | None) -> Depths:
    """Of `know_depth` at cells (c, 2) whose ground (c,) is known."""
    field = carry(known, cells, np.zeros(len(cells)))
    below = np.exp(field.mean)
    if geology is None:
        return Depths(field, below, below)
    depth = np.maximum(ground - geology.ceiling.elevation(cells) + below, 1.0)
    return Depths(field, below, depth)


def relief_at(depths: Depths, known: KnownField, geology: FieldEnsemble | None) -> FloatArray:
    """How far (c,) m the basal contact is expected below the plain, as the presence of gravel may follow it."""
    if geology is None:
        return np.zeros(len(depths.depth))
    spread = variance_at(known, depths.field) + known.prior.covariance.nugget
    return np.asarray(np.exp(depths.field.mean + 0.5 * spread) - geology.ceiling.margin)


def _from_ensemble(geology: FieldEnsemble, f: int) -> KnownField:
    q, n = geology.mean.shape
    prior = _as_prior(geology.fields[f])
    if geology.is_by_windows:
        return _from_sites(geology, f, prior)
    covariance = geology.covariance.reshape(q, n, q, n)[f, :, f]
    return KnownField(prior, geology.points, geology.relief, geology.mean[f], covariance)


def _from_sites(geology: FieldEnsemble, f: int, prior: FieldPrior) -> KnownField:
    """One field from what each place adds to what all others say of it: its value, and its error's variance."""
    sites = Sites(geology.site_precision, geology.site_shift)
    cavity_mean, cavity_precision = cavities(geology.mean.T, geology.covariance, sites)
    before = np.linalg.inv(cavity_precision)[:, f, f]
    after = geology.covariance[:, f, f]
    gained = 1.0 / after - 1.0 / before
    telling = gained > LEAST_GAIN / before
    values = (geology.mean[f] / after - cavity_mean[:, f] / before)[telling] / gained[telling]
    return known_from_data(prior, geology.points[telling], values, 1.0 / gained[telling], geology.relief[telling])


def _as_prior(field: Field) -> FieldPrior:
    covariance = Covariance(field.model, field.nugget, field.partial_sill, field.length, field.azimuth_deg, field.ratio)
    return FieldPrior(field.mean, covariance, field.drift_variance, covariance.sill, 1.0, 1.0, field.relief_variance)


def _as_free_prior(found: Variogram, values: FloatArray) -> FieldPrior:
    covariance = Covariance(found.model, found.nugget, found.partial_sill, found.length, found.azimuth_deg, found.ratio)
    sill = max(covariance.sill, 1e-12)
    return FieldPrior(float(np.mean(values)), covariance, FREE_MEAN * sill, sill, 1.0, 1.0)


def _find_variogram(results: Results, title: str, n_data: int) -> Variogram:
    found = [one for one in results.stack.variograms if one.title == title]
    if not found or n_data < FEWEST:
        raise EngineError(f"no plan can be made: too few places know the {title[0].lower()}{title[1:]} for a variogram")
    return found[0]


def _locate(rows: Sequence[Top | Thickness]) -> FloatArray:
    return np.array([[row.easting, row.northing] for row in rows], dtype=float)
