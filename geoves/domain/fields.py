"""One geology inferred from all places: latent fields with what is known of them, and what that means at each place."""

from collections.abc import Mapping
from typing import Any, Literal

import attrs
import numpy as np

from geoves.domain.arrays import FloatArray, IntArray, by_value, floats, integers, shape
from geoves.domain.tops import PlaceKind

# Residuals this many times their errors: the inference fits a curve worse than its errors allow.
POOR_FIT = 1.6
# A place counts as moved by the picks beyond so many deviations.
MOVED = 1.0

JointState = Literal["heard", "set_aside", "poor_fit"]


@attrs.frozen
class ColumnPlan:
    """The order of units in every column of a region: indices into the template's units, from the top down.

    upper   those above the basal contact      filler  position in `upper` of the one that takes what the others leave
    always  whether a unit of `upper` is always there    deep  those on the rock    bedrock  the last
    deep_limits, rock_limits  least and greatest depth (m) of the top of the deep aquifer and of rock
    """

    upper: tuple[int, ...]
    filler: int
    always: tuple[bool, ...]
    deep: tuple[int, ...]
    bedrock: int
    n_units: int
    deep_limits: tuple[float, float] = (0.0, float("inf"))
    rock_limits: tuple[float, float] = (0.0, float("inf"))


@attrs.frozen
class Ceiling:
    """A plane above the region's plain of rock, under which depths to the basal contact are told in logs.

    Elevation (m) at a place: constant + slopes . (easting, northing from `origin`, in units of the CRS) + margin.
    `margin` is how far the plane was raised above the plain.
    """

    origin: tuple[float, float]
    constant: float
    slopes: tuple[float, float]
    margin: float

    def elevation(self, points: FloatArray) -> FloatArray:
        """(n,) m at `points` (n, 2)."""
        return np.asarray(self.constant + self.margin + (points - np.array(self.origin)) @ np.array(self.slopes))


@attrs.frozen
class Field:
    """A latent quantity over space and the covariance that was inferred for it, in `unit` squared.

    `length` is practical, along `azimuth_deg` (clockwise from north), `ratio` times that across. `drift_variance` is
    that of the unknown mean about `mean`, `relief_variance` that of a drift that follows the relief of the rock.
    """

    name: str
    title: str
    unit: str
    mean: float
    model: str
    nugget: float
    partial_sill: float
    length: float
    azimuth_deg: float
    ratio: float
    drift_variance: float
    relief_variance: float = 0.0


@attrs.frozen
class JointColumn:
    """One place in the one geology: what it says by itself, what all others say of it, and both together.

    basal_depth, rock_depth, gravel_thickness : 5, 50 and 95 % quantiles, m (3,), all places together
    others_basal_depth : the same without this place's own curve, log or pick: from its neighbours and the template
    gravel_probability, others_gravel_probability : of at least 1 m of basal gravel
    log_resistivity : mean of the natural log of each unit's resistivity (u,), log_resistivity_deviation its deviation
    shift     how far the place's own evidence moved the basal contact from what the others said, in their deviations
    misfit    root mean square of the residuals over their errors, outliers down-weighted; NaN without a curve
    trust     probability that what the place says is of this ground; below a half it was set aside
    flat_layer_bias  how far flat layers would misread the basal contact's depth here, resistivities known, as a share
              of it: below 0 too shallow, above 0 too deep; NaN without a curve. What is inferred minds it.
    moved_by_picks  how far the interpreter's picks moved the basal contact here, in deviations before they were heard
    """

    place: str
    kind: PlaceKind
    basal_depth: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    rock_depth: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    gravel_thickness: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    others_basal_depth: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    gravel_probability: float
    others_gravel_probability: float
    log_resistivity: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    log_resistivity_deviation: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    shift: float
    misfit: float
    trust: float
    moved_by_picks: float = 0.0
    flat_layer_bias: float = float("nan")

    @property
    def set_aside(self) -> bool:
        return self.trust < 0.5

    @property
    def state(self) -> JointState:
        """Whether the place was heard, and if so, whether the one geology fits its curve as well as its errors ask."""
        if self.set_aside:
            return "set_aside"
        return "poor_fit" if self.misfit > POOR_FIT else "heard"


@attrs.frozen
class FieldEnsemble:
    """All fields at all places: mean (q, n) and covariance (q n, q n), field-major, of a normal approximation.

    Of many places only each one's own covariance is kept, (n, q, q), and what each says, as sites: precision (n, q, q)
    and shift (n, q), precision times value; `everywhere` are rows of places that all others hear, `near` how many of
    the nearest do a cell.

    points (n, 2) in the unit of the CRS; ground (n,) m; relief (n,) m, how far the basal contact lies below the plain;
    members (m, q, n) drawn from the whole; diagnostics  what the inference says of itself, for people and run.json.
    """

    plan: ColumnPlan
    ceiling: Ceiling
    fields: tuple[Field, ...]
    columns: tuple[JointColumn, ...]
    points: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    ground: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    relief: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    mean: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    covariance: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    members: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    diagnostics: Mapping[str, Any] = attrs.field(factory=dict)
    remarks: tuple[str, ...] = ()
    site_precision: FloatArray = attrs.field(
        factory=lambda: np.empty((0, 0, 0)), converter=floats, eq=by_value, repr=shape
    )
    site_shift: FloatArray = attrs.field(factory=lambda: np.empty((0, 0)), converter=floats, eq=by_value, repr=shape)
    everywhere: IntArray = attrs.field(default=(), converter=integers, eq=by_value, repr=shape)
    near: int = 0

    @property
    def is_by_windows(self) -> bool:
        """Whether the places were too many to be solved at once."""
        return self.covariance.ndim == 3
