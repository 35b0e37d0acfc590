"""The model of one geology for a template: the order of its columns, its ceiling, and a prior for every field."""

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from scipy.special import ndtri

from geoves.domain.arrays import FloatArray
from geoves.domain.fields import Ceiling, ColumnPlan
from geoves.domain.tops import Interpretation, Top
from geoves.domain.units import THICKNESS_BY_ROLE, Z_95, Role, Template
from geoves.kernels.covariances import Covariance, fit_covariance
from geoves.kernels.field_priors import FieldPrior
from geoves.kernels.inequality import latent_moments
from geoves.kernels.joint_state import ColumnOrder

# Where no data speak, fields reach this far: a share of the region's extent.
FIRST_LENGTH = 0.2
# Share of places above the plain's plane, by expectile; and how far above it (in deviations of those) the ceiling is.
PLAIN_EXPECTILE, CEILING_DEVIATIONS, LEAST_MARGIN = 0.9, 3.0, 8.0
# Errors (m) below this do not set a datum apart when the plane is drawn.
PLANE_ERROR = 5.0
# Beyond so many deviations above the plane a datum pulls it no harder; and not at all (Tukey's, for 95 % efficiency).
HUBER, TUKEY = 1.5, 4.685
# With fewer contacts under the ceiling those above it are asked too.
FEWEST_UNDER = 3
# Deviation, in natural logs, of the filler's grading from its upper to its lower part.
GRADING_DEVIATION = 0.15
# Variances of the presence of gravel beside the field's own 1: of its mean, and of what follows the relief.
PRESENCE_DRIFT, PRESENCE_RELIEF = 0.5, 1.0
# Share of a template range's variance that a region's mean may be off by.
TEMPLATE_DRIFT = 0.25


class FieldName(NamedTuple):
    """How a field is called: a short name, a title, its unit."""

    name: str
    title: str
    unit: str


class GeologyModel(NamedTuple):
    """Everything that stands before the data are heard, all fields in one order."""

    plan: ColumnPlan
    order: ColumnOrder
    ceiling: Ceiling
    names: tuple[FieldName, ...]
    priors: tuple[FieldPrior, ...]


def plan_columns(template: Template) -> ColumnPlan | None:
    """The order of the template's columns; None where nothing lies above the basal contact to be measured through."""
    roles = [unit.role for unit in template.units]
    bedrock = next(i for i, role in enumerate(roles) if role is Role.BEDROCK)
    upper = tuple(i for i in range(bedrock) if roles[i] is not Role.DEEP_AQUIFER)
    if not upper:
        return None
    deep = tuple(i for i in range(bedrock) if roles[i] is Role.DEEP_AQUIFER)
    confining = [position for position, unit in enumerate(upper) if roles[unit] is Role.CONFINING]
    limits = [template.units[unit].depth_to_top for unit in deep]
    known = [one for one in limits if one]
    return ColumnPlan(
        upper=upper,
        filler=confining[-1] if confining else len(upper) - 1,
        always=tuple(roles[unit] is Role.COVER for unit in upper),
        deep=deep,
        bedrock=bedrock,
        n_units=len(roles),
        deep_limits=(min(one[0] for one in known), max(one[1] for one in known)) if known else (0.0, np.inf),
        rock_limits=template.units[bedrock].depth_to_top or (0.0, np.inf),
    )


def fit_ceiling(tops: Sequence[Top]) -> Ceiling:
    """A plane through the upper part of the basal contacts, raised above them.

    An expectile regression (Newey and Powell 1987, Econometrica 55, 819-847, from memory) leans on the plain and not on
    the valleys cut into it, however many soundings were put there. What lies far above it is not heard: Huber's weights
    first, then Tukey's, which fall to 0 (M-quantiles, Breckling and Chambers 1988, Biometrika 75, 761-771, from
    memory). So a lone wild reading cannot tilt it.
    """
    points = np.array([[top.easting, top.northing] for top in tops])
    elevation = np.array([top.elevation for top in tops])
    weight = 1.0 / (np.array([top.standard_error for top in tops]) ** 2 + PLANE_ERROR**2)
    origin = points.mean(axis=0)
    scale = float(max(np.ptp(points, axis=0).max(), 1.0))
    design = np.column_stack([np.ones(len(points)), (points - origin) / scale])
    if len(tops) < 6:
        design = design[:, :1]  # too few for slopes
    asymmetric = weight
    for turn in range(100):
        root = np.sqrt(asymmetric)
        coefficients = np.linalg.lstsq(design * root[:, None], elevation * root, rcond=None)[0]
        residual = elevation - design @ coefficients
        far = np.maximum(residual, 0.0) / max(_spread_above(residual), PLANE_ERROR)
        pull = HUBER / np.maximum(far, HUBER) if turn < 50 else np.maximum(1.0 - (far / TUKEY) ** 2, 0.0) ** 2
        asymmetric = weight * np.where(residual > 0, PLAIN_EXPECTILE * pull, 1.0 - PLAIN_EXPECTILE)
    slopes = tuple(float(one) / scale for one in coefficients[1:]) or (0.0, 0.0)
    return Ceiling(
        origin=(float(origin[0]), float(origin[1])),
        constant=float(coefficients[0]),
        slopes=(slopes[0], slopes[1]),
        margin=max(CEILING_DEVIATIONS * _spread_above(residual), LEAST_MARGIN),
    )


def _spread_above(residual: FloatArray) -> float:
    """A robust deviation of what lies above the plane, 0 where nothing does."""
    above = residual[residual > 0]
    return 1.4826 * float(np.median(above)) if above.size else 0.0


def build_model(
    template: Template, plan: ColumnPlan, interpretation: Interpretation, points: FloatArray
) -> GeologyModel:
    """Priors from the template, the wells' share of gravel, and a first covariance of the basal contact.

    At least three basal contacts must be known.
    """
    contacts = [top for top in interpretation.tops if top.contact == "basal" and top.status == "at"]
    ceiling = fit_ceiling(contacts)
    length = FIRST_LENGTH * float(np.hypot(*np.ptp(points, axis=0)))
    named = [(FieldName("basal_contact", "Log depth below the ceiling", "ln m"), _basal_prior(contacts, ceiling))]
    for position, index in enumerate(plan.upper):
        if position == plan.filler:
            continue
        unit = template.units[index]
        title = f"Thickness of {unit.name or unit.code}"
        if plan.always[position]:
            named.append((FieldName(unit.code, title, "ln m"), _cover_prior(template, index, length)))
        else:
            low, high = THICKNESS_BY_ROLE[unit.role]
            mean, deviation = latent_moments(0.5, float(np.sqrt(low * high)))
            named.append((FieldName(unit.code, title, "m"), _prior(mean, deviation**2, length, (0.5, 0.3, 1.0))))
    share = _gravel_share(interpretation)
    wide = float(np.sqrt(1.0 + PRESENCE_DRIFT + PRESENCE_RELIEF))
    for index in plan.deep:
        code = template.units[index].code
        prior = FieldPrior(
            mean=float(ndtri(share)) * wide,
            covariance=Covariance("matern32", 0.05, 0.95, length),
            drift_variance=PRESENCE_DRIFT,
            variance=1.0,
            width=0.1,
            nugget_share=0.1,
            relief_variance=PRESENCE_RELIEF,
        )
        named.append((FieldName(f"{code}_presence", f"Presence of {template.units[index].name or code}", "-"), prior))
    for index in plan.deep:
        mean, variance = _log_range(THICKNESS_BY_ROLE[Role.DEEP_AQUIFER])
        code = template.units[index].code
        title = f"Thickness of {template.units[index].name or code} where it is"
        named.append((FieldName(code, title, "ln m"), _prior(mean, 0.6 * variance, length, (0.25, 0.3, 2.0 / 3.0))))
    for unit in template.units:
        variance = unit.log_resistivity_deviation**2
        title = f"Resistivity of {unit.name or unit.code}"
        prior = _prior(unit.log_resistivity_mean, variance, length, (0.25, 0.5, TEMPLATE_DRIFT))
        named.append((FieldName(f"{unit.code}_resistivity", title, "ln ohm m"), prior))
    filler = template.units[plan.upper[plan.filler]]
    title = f"Grading of {filler.name or filler.code}: its upper part over its lower"
    named.append(
        (FieldName("grading", title, "ln"), _prior(0.0, GRADING_DEVIATION**2, length, (0.25, 0.3, 1.0)))
    )  # fmt: skip
    names, priors = zip(*named, strict=True)
    return GeologyModel(plan, make_order(plan), ceiling, names, priors)


def make_order(plan: ColumnPlan) -> ColumnOrder:
    """The plan as the kernels take it."""
    return ColumnOrder(
        plan.upper, plan.filler, plan.always, plan.deep, plan.bedrock, plan.n_units, plan.deep_limits, plan.rock_limits
    )


def _prior(mean: float, variance: float, length: float, shape: tuple[float, float, float]) -> FieldPrior:
    """A field's prior; `shape`: width of its variance (natural log), expected nugget share, drift over variance."""
    width, nugget_share, drift = shape
    nugget = 0.2 if nugget_share > 0.2 else 0.05
    covariance = Covariance("matern32", nugget * variance, (1.0 - nugget) * variance, length)
    return FieldPrior(float(mean), covariance, drift * variance, variance, width, nugget_share)


def _basal_prior(contacts: Sequence[Top], ceiling: Ceiling) -> FieldPrior:
    """From what each place says by itself: a mean, and a first covariance by restricted likelihood.

    What lies above the ceiling is not asked: in the log of its depth below it would outweigh all others.
    """
    under = [top for top in contacts if ceiling.elevation(np.array([[top.easting, top.northing]]))[0] > top.elevation]
    contacts = under if len(under) >= FEWEST_UNDER else contacts
    points = np.array([[top.easting, top.northing] for top in contacts])
    below = np.maximum(ceiling.elevation(points) - np.array([top.elevation for top in contacts]), 1.0)
    error = np.array([top.standard_error for top in contacts]) / below
    values = np.log(below)
    covariance = fit_covariance(points, values, np.minimum(error**2, 1.0) + 1e-4)
    return FieldPrior(float(np.median(values)), covariance, 1.0, covariance.sill, 1.0, 0.05, 0.0, directed=True)


def _cover_prior(template: Template, index: int, length: float) -> FieldPrior:
    """Of log thickness: broad, or where the next unit's top has limits and this one begins the column, those."""
    limits = THICKNESS_BY_ROLE[Role.COVER]
    following = template.units[index + 1]
    if index == 0 and following.depth_to_top:
        limits = max(following.depth_to_top[0], 0.3), following.depth_to_top[1]
    mean, variance = _log_range(limits)
    return _prior(mean, variance, length, (0.5, 0.3, 0.25))


def _log_range(limits: tuple[float, float]) -> tuple[float, float]:
    """Mean and variance of the log of what lies within limits nine times in ten."""
    low, high = np.log(limits)
    return float(0.5 * (low + high)), float(((high - low) / (2.0 * Z_95)) ** 2)


def _gravel_share(interpretation: Interpretation) -> float:
    """Share of wells with gravel on the rock among those that tell; two wells more stand for not knowing."""
    told = [
        row.thickness > 0 for row in interpretation.thicknesses if row.role == Role.DEEP_AQUIFER and row.kind == "well"
    ]
    return (sum(told) + 1.0) / (len(told) + 2.0)
