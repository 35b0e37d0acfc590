"""Interpretation -> SurfaceStack: the kriged surfaces of one county, each place having spoken for itself.

Three quantities are kriged by ordinary kriging with an error for every datum: the log depth of the basal contact (top
of gravel or rock), the thickness of each aquifer as a latent field of which what lies below zero is absence, and the
log resistivity of the shallow aquifer. Bounds and absences enter as pseudo-data by expectation propagation. Bedrock is
the basal contact plus the gravel, so that no surface can cross another, and a depth above zero keeps all of them
under the ground.
"""

from collections.abc import Callable, Iterable, Sequence
from functools import partial
from typing import Any, NamedTuple

import attrs
import numpy as np
import shapely
from scipy.spatial import cKDTree
from scipy.special import ndtr, ndtri

from geoves.domain.arrays import BoolArray, FloatArray
from geoves.domain.grids import CrossValidation, Grid, Surface, SurfaceStack, Variogram
from geoves.domain.survey import Sounding, Survey, Well
from geoves.domain.tops import Interpretation
from geoves.domain.units import Z_95, Role, Template
from geoves.errors import EngineError
from geoves.kernels.covariances import Covariance, experimental_variogram, fit_covariance
from geoves.kernels.inequality import (
    Bounds,
    bounds_alone_as_values,
    fit_covariance_with_bounds,
    latent_moments,
    rectified_normal_moments,
)
from geoves.kernels.kriging import estimate_offset, krige, leave_one_out

Map = Callable[[Callable[[Any], Any], Iterable[Any]], Iterable[Any]]


MODELS = ("matern32", "exponential", "spherical", "gaussian")


@attrs.frozen
class SurfaceOptions:
    """model             covariance of the fields: matern32, exponential, spherical or gaussian
    reach                how far from the nearest datum surfaces are drawn, unit of the CRS; 0 lets geoves choose
    reach_in_spacings    geoves's choice: so many times the spacing that nine tenths of the places keep
    present              m: a unit is present where at least this thick
    least_probability    a gravel's top is drawn where its presence is at least this probable
    probable             the shallow aquifer's resistivity is drawn where its presence is at least this probable
    bound_deviation      softness of a bound on log depth
    tie_deviation        by how much (natural log) all soundings together may differ from the wells; 0 not to tie them
    fewest_wells         wells and picks with a depth that the tie needs
    absence_deviation    softness (m) of an absence
    fewest               data that a fitted covariance needs
    block                cells kriged at a time: bounds the memory
    """

    model: str = attrs.field(default="matern32", validator=attrs.validators.in_(MODELS))
    reach: float = attrs.field(default=0.0, validator=attrs.validators.ge(0))
    reach_in_spacings: float = attrs.field(default=3.0, validator=attrs.validators.gt(0))
    present: float = attrs.field(default=1.0, validator=attrs.validators.gt(0))
    least_probability: float = attrs.field(default=0.05, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    probable: float = attrs.field(default=0.5, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    bound_deviation: float = attrs.field(default=0.05, validator=attrs.validators.gt(0))
    tie_deviation: float = attrs.field(default=0.1, validator=attrs.validators.ge(0))
    fewest_wells: int = attrs.field(default=4, validator=attrs.validators.ge(2))
    absence_deviation: float = attrs.field(default=0.5, validator=attrs.validators.gt(0))
    fewest: int = attrs.field(default=5, validator=attrs.validators.ge(3))
    block: int = attrs.field(default=8192, validator=attrs.validators.ge(1))


class Evidence(NamedTuple):
    """What is known of one quantity: values with error variances, and bounds."""

    title: str
    unit: str
    place: tuple[str, ...]
    kind: tuple[str, ...]
    points: FloatArray
    values: FloatArray
    error_variance: FloatArray
    bounds: Bounds
    bound_kind: tuple[str, ...] = ()

    @property
    def size(self) -> int:
        """How many places say something."""
        return len(self.values) + len(self.bounds.bound)


class Kriged(NamedTuple):
    """A quantity on the covered cells: mean and deviation (c,); the covariance, and the data kriged."""

    mean: FloatArray
    deviation: FloatArray
    covariance: Covariance
    points: FloatArray
    values: FloatArray
    error_variance: FloatArray


class Canvas(NamedTuple):
    """The grid, which of its cells are covered, and the ground's elevation on those (c,)."""

    grid: Grid
    covered: BoolArray
    ground: FloatArray

    def place(self, values: FloatArray) -> FloatArray:
        """Values of the covered cells (c,) on the grid, NaN elsewhere."""
        full = np.full(self.grid.shape, np.nan)
        full[self.covered] = values
        return full


# Thickness (m) that is expected of a unit, were it there, when no place shows it.
THIN = 5.0
# Quantiles (mid-points of even shares) by which the sum of two independent quantities is summarised.
CONTACT_QUANTILES, GRAVEL_QUANTILES = ((np.arange(n) + 0.5) / n for n in (60, 20))


def build_surfaces(
    interpretation: Interpretation,
    survey: Survey,
    template: Template,
    grid: Grid,
    options: SurfaceOptions | None = None,
    *,
    map: Map = map,  # noqa: A002 - the seam is named for what it replaces
) -> SurfaceStack:
    """The surfaces that the template's roles allow, on the region's grid.

    Raises EngineError where fewer than three places know the depth of the basal contact.
    """
    options = options or SurfaceOptions()
    basal = _basal_evidence(interpretation, options)
    if len(basal.values) < 3:
        raise EngineError(
            f"bedrock cannot be mapped: {len(basal.values)} places know the depth of the basal contact "
            f"and {len(basal.bounds.bound)} a bound; at least 3 depths are needed"
        )
    ground, remarks = _ground(survey, grid)
    reach = options.reach or _choose_reach(survey, options)
    covered = _covered(survey, grid, reach) & np.isfinite(ground)
    if not covered.any():
        raise EngineError("no cell lies inside the boundary and within reach of a datum; look at the coordinates")
    cells = np.column_stack([axis[covered] for axis in np.meshgrid(grid.easting, grid.northing)])
    interpolate = partial(_interpolate, cells=cells, options=options, map=map)

    basal, shared_deviation, tied = _tie_to_wells(basal, options)
    remarks += tied
    contact = interpolate(basal)
    if shared_deviation:
        # The doubt about the tie does not average out over soundings: a cell has it as far as it rests on them.
        by_curve = np.array([kind == "sounding" for kind in (*basal.kind, *basal.bound_kind)], dtype=float)
        share, _ = _krige_cells(contact._replace(values=by_curve), cells, options, map)
        contact = contact._replace(deviation=np.hypot(contact.deviation, share * shared_deviation))
    kriged = [(basal, contact)]
    gravel: Kriged | None = None
    surfaces: list[Surface] = []
    canvas = Canvas(grid, covered, ground[covered])
    if template.with_role(Role.DEEP_AQUIFER):
        evidence = _thickness_evidence(interpretation, Role.DEEP_AQUIFER, "Thickness of the deep gravel", options)
        remarks += _say_how_few(evidence, options)
        if evidence.size >= options.fewest:
            gravel = interpolate(evidence)
            kriged.append((evidence, gravel))
            surfaces += _gravel_surfaces(contact, gravel, canvas, options)
        else:
            gravel = _assume_everywhere(evidence, contact)
    else:
        remarks.append("the template has no deep aquifer: no surface of its thickness")
    surfaces += _bedrock_surfaces(contact, gravel, canvas)

    if template.with_role(Role.SHALLOW_AQUIFER):
        shallow, more, said = _shallow_surfaces(interpretation, interpolate, canvas, options)
        surfaces += shallow
        kriged += more
        remarks += said
    else:
        remarks.append("the template has no shallow aquifer: no surface of its resistivity")
    return SurfaceStack(
        grid=grid,
        ground=ground,
        covered=covered,
        surfaces={surface.name: surface for surface in surfaces},
        variograms=tuple(_variogram(evidence, result) for evidence, result in kriged),
        cross_validations=tuple(_cross_validate(evidence, result) for evidence, result in kriged),
        reach=reach,
        remarks=tuple(remarks),
    )


def _basal_evidence(interpretation: Interpretation, options: SurfaceOptions) -> Evidence:
    """Log depth of the basal contact: data where it is known, bounds where only "deeper than" is."""
    rows = [top for top in interpretation.tops if top.contact == "basal"]
    at = [top for top in rows if top.status == "at"]
    below = [top for top in rows if top.status == "below" and top.depth > 0]
    return Evidence(
        "Log depth of the basal contact",
        "ln m",
        tuple(top.place for top in at),
        tuple(top.kind for top in at),
        _points(at),
        np.log([max(top.depth, 0.1) for top in at]),
        np.array([log_variance(top.standard_error / max(top.depth, 0.1)) for top in at]),
        Bounds(
            _points(below),
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


def _tie_to_wells(evidence: Evidence, options: SurfaceOptions) -> tuple[Evidence, float, list[str]]:
    """The soundings' log depths shifted by what they differ from the wells' on the whole, if wells are enough to tell.

    A template a little off, or layers less uniform than a model's, put every depth of a survey off by one factor. The
    bounds of curves are shifted with them. Also gives the deviation of the factor's log, and what was done in words.
    """
    by_curve = np.array([kind == "sounding" for kind in evidence.kind], dtype=bool)
    if options.tie_deviation == 0 or np.sum(~by_curve) < options.fewest_wells or np.sum(by_curve) < options.fewest:
        return evidence, 0.0, []
    covariance = fit_covariance(evidence.points, evidence.values, evidence.error_variance, options.model)
    offset, deviation = estimate_offset(
        evidence.points, evidence.values, evidence.error_variance, by_curve, options.tie_deviation, covariance
    )
    bounded_by_curve = np.array([kind == "sounding" for kind in evidence.bound_kind], dtype=bool)
    shifted = evidence.bounds.bound - np.where(bounded_by_curve, offset, 0.0)
    tied = evidence._replace(
        values=evidence.values - np.where(by_curve, offset, 0.0), bounds=evidence.bounds._replace(bound=shifted)
    )
    words = "deeper" if offset > 0 else "shallower"
    said = f"soundings put the basal contact {abs(np.expm1(offset)):.0%} {words} than wells and picks do"
    done = f"their depths were divided by {np.exp(offset):.2f}"
    return tied, deviation, [f"{said} (give or take {deviation:.0%}); {done}"]


def _thickness_evidence(interpretation: Interpretation, role: Role, title: str, options: SurfaceOptions) -> Evidence:
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
        _points(at),
        np.array([row.thickness for row in at]),
        np.array([row.standard_error**2 for row in at]),
        Bounds(
            _points([*absent, *open_ended]),
            np.array([row.thickness for row in (*absent, *open_ended)]),
            np.array([-1.0] * len(absent) + [1.0] * len(open_ended)),
            np.full(len(absent) + len(open_ended), options.absence_deviation),
        ),
    )


def _resistivity_evidence(interpretation: Interpretation) -> Evidence:
    rows = interpretation.shallow_resistivities
    return Evidence(
        "Log resistivity of the shallow aquifer",
        "ln ohm m",
        tuple(row.place for row in rows),
        ("sounding",) * len(rows),
        _points(rows),
        np.array([row.log_resistivity for row in rows]),
        np.array([row.standard_error**2 for row in rows]),
        Bounds(np.empty((0, 2)), np.empty(0), np.empty(0), np.empty(0)),
    )


def _points(rows: Sequence[Any]) -> FloatArray:
    return np.array([[row.easting, row.northing] for row in rows]).reshape(-1, 2)


def _interpolate(evidence: Evidence, *, cells: FloatArray, options: SurfaceOptions, map: Map) -> Kriged:  # noqa: A002
    """Fit the covariance to data and bounds together, then krige both, block by block through the map.

    With fewer data proper than a fit needs, each bound first becomes a pseudo-datum by itself.
    """
    points = np.vstack([evidence.points, evidence.bounds.points])
    if len(evidence.values) >= options.fewest:
        covariance, pseudo_value, pseudo_variance = fit_covariance_with_bounds(
            evidence.points, evidence.values, evidence.error_variance, evidence.bounds, options.model
        )
    else:
        pseudo_value, pseudo_variance = bounds_alone_as_values(evidence.bounds, *_latent_prior(evidence))
    values = np.concatenate([evidence.values, pseudo_value])
    variance = np.concatenate([evidence.error_variance, pseudo_variance])
    if len(evidence.values) < options.fewest:
        covariance = fit_covariance(points, values, variance, options.model)
    kriged = Kriged(np.empty(0), np.empty(0), covariance, points, values, variance)
    mean, spread = _krige_cells(kriged, cells, options, map)
    return kriged._replace(mean=mean, deviation=np.sqrt(spread))


def _krige_cells(kriged: Kriged, cells: FloatArray, options: SurfaceOptions, map: Map) -> tuple[FloatArray, FloatArray]:  # noqa: A002
    """Estimate and variance (c,) from a quantity's data, block by block through the map."""
    work = partial(_krige_block, kriged.points, kriged.values, kriged.error_variance, kriged.covariance)
    parts = list(map(work, [cells[i : i + options.block] for i in range(0, len(cells), options.block)]))
    mean, spread = (np.concatenate([part[i] for part in parts]) for i in (0, 1))
    return mean, spread


def _latent_prior(evidence: Evidence) -> tuple[float, float]:
    """Mean and deviation of a latent thickness, from the share of places that have the unit and what they show.

    Two places more, one with and one without, stand for not knowing; thicknesses not passed count as they are.
    """
    shown = np.concatenate([evidence.values, evidence.bounds.bound[evidence.bounds.side > 0]])
    n_places = len(evidence.values) + len(evidence.bounds.bound)
    share = (shown.size + 1.0) / (n_places + 2.0)
    return latent_moments(share, float(np.mean(shown)) if shown.size else THIN)


def _say_how_few(evidence: Evidence, options: SurfaceOptions) -> list[str]:
    n_values, n_bounds = len(evidence.values), len(evidence.bounds.bound)
    if evidence.size < options.fewest:
        few = f"{n_values} thicknesses and {n_bounds} absences or bounds are too few for a surface"
        return [f"{evidence.title}: {few}; bedrock allows for as much of it everywhere as those say on the whole"]
    if n_values < options.fewest:
        few = f"only {n_values} thicknesses beside {n_bounds} absences or bounds, each of which entered by itself"
        return [f"{evidence.title}: {few}; the surface is a first guess"]
    return []


def _assume_everywhere(evidence: Evidence, contact: Kriged) -> Kriged:
    """The same doubtful thickness at every cell: what the few places say on the whole, without any map of it.

    Leaving it out would call the top of the gravel bedrock.
    """
    mean, deviation = _latent_prior(evidence)
    return contact._replace(mean=np.full_like(contact.mean, mean), deviation=np.full_like(contact.mean, deviation))


def _krige_block(
    points: FloatArray, values: FloatArray, variance: FloatArray, covariance: Covariance, cells: FloatArray
) -> tuple[FloatArray, FloatArray]:
    return krige(points, values, variance, cells, covariance)


def _bedrock_surfaces(contact: Kriged, gravel: Kriged | None, canvas: Canvas) -> list[Surface]:
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


def _gravel_surfaces(contact: Kriged, gravel: Kriged, canvas: Canvas, options: SurfaceOptions) -> list[Surface]:
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


def _shallow_surfaces(
    interpretation: Interpretation,
    interpolate: Callable[[Evidence], Kriged],
    canvas: Canvas,
    options: SurfaceOptions,
) -> tuple[list[Surface], list[tuple[Evidence, Kriged]], list[str]]:
    evidence = _thickness_evidence(interpretation, Role.SHALLOW_AQUIFER, "Thickness of the shallow aquifer", options)
    remarks = _say_how_few(evidence, options)
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
    resistivity = _resistivity_evidence(interpretation)
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


def _ground(survey: Survey, grid: Grid) -> tuple[FloatArray, list[str]]:
    """Elevation of the land surface on the grid; kriged from the places where there is no raster, and said so."""
    if survey.ground is not None:
        return survey.ground.elevation, []
    places: list[Sounding | Well] = [*survey.soundings, *survey.wells]
    values = np.array([place.ground_elevation for place in places])
    known = np.isfinite(values)
    points, values = _points(places)[known], values[known]
    error = np.full(values.size, 0.25)
    cells = np.column_stack([axis.ravel() for axis in np.meshgrid(grid.easting, grid.northing)])
    elevation, _ = krige(points, values, error, cells, fit_covariance(points, values, error))
    return elevation.reshape(grid.shape), [
        "no ground raster: the land surface is kriged from the elevations of soundings and wells"
    ]


def _choose_reach(survey: Survey, options: SurfaceOptions) -> float:
    """A distance from the survey's own density: some times the spacing that nine tenths of its places keep."""
    points = np.unique(_points([*survey.soundings, *survey.wells]), axis=0)
    if len(points) < 2:
        return np.inf
    nearest = cKDTree(points).query(points, k=2)[0][:, 1]
    return float(options.reach_in_spacings * np.quantile(nearest, 0.9))


def _covered(survey: Survey, grid: Grid, reach: float) -> BoolArray:
    """Cells inside the boundary whose centre is within reach of a sounding or a well."""
    easting, northing = np.meshgrid(grid.easting, grid.northing)
    points = _points([*survey.soundings, *survey.wells])
    distance, _ = cKDTree(points).query(np.column_stack([easting.ravel(), northing.ravel()]))
    covered = distance.reshape(grid.shape) <= reach
    if survey.boundary is not None:
        shapely.prepare(survey.boundary)
        covered &= shapely.contains_xy(survey.boundary, easting, northing)
    return np.asarray(covered)


def _variogram(evidence: Evidence, kriged: Kriged) -> Variogram:
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


def _cross_validate(evidence: Evidence, kriged: Kriged) -> CrossValidation:
    """Each datum proper against what all other data and bounds say of its place, its own error in the doubt."""
    predicted, variance = leave_one_out(kriged.points, kriged.values, kriged.error_variance, kriged.covariance)
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
