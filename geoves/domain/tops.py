"""Where units begin under each place, and what is known of it: a bound is data, not a missing row."""

from typing import Literal

import attrs
import numpy as np

from geoves.domain.arrays import FloatArray, by_value, floats, shape
from geoves.domain.survey import Pick

PlaceKind = Literal["sounding", "well", "pick"]
TopStatus = Literal["at", "below", "absent"]
BedrockStatus = Literal["seen", "not_distinct", "deeper_than"]


@attrs.frozen
class Top:
    """The top of `unit` at a place. Depth, elevation and standard error in m.

    status  "at": the top lies at `depth`; "below": it is deeper than `depth`; "absent": the unit is not there
    contact what the row speaks of in the surfaces: "basal" (top of gravel-or-rock, the contact that a curve can see),
            "bedrock", or the role of the unit
    source  in words: which kind of evidence, who decided
    """

    place: str
    kind: PlaceKind
    easting: float
    northing: float
    unit: str
    contact: str
    status: TopStatus
    depth: float
    elevation: float
    standard_error: float
    source: str


@attrs.frozen
class Thickness:
    """Thickness (m) of the units of a role at a place; 0 where absent; `at_least` where the place ended inside it."""

    place: str
    kind: PlaceKind
    easting: float
    northing: float
    role: str
    thickness: float
    standard_error: float
    at_least: bool
    source: str


@attrs.frozen
class ShallowResistivity:
    """Natural log of the shallow aquifer's resistivity (ohm m) at a place, with its standard error."""

    place: str
    easting: float
    northing: float
    log_resistivity: float
    standard_error: float


@attrs.frozen
class PickOpinion:
    """What a curve, before it was overruled, says of an interpreter's pick.

    probability  that the pick gives it: of "absent" and "below" as such, of "at" that a depth as far off or farther
                 from `inferred_depth` (m, median) would be decided by chance; NaN where the curve has no say
    bound        m: the curve excludes a contact above it; 0 where it excludes nothing
    against      whether the curve speaks against the pick; it is never overruled
    rms_percent  misfit of the best model that honours the pick, and free_rms_percent of the best of all, its readings
                 weighed alike; NaN where no sequence of units can honour it
    """

    pick: Pick
    probability: float
    inferred_depth: float
    bound: float
    against: bool
    rms_percent: float = float("nan")
    free_rms_percent: float = float("nan")


@attrs.frozen
class WellBeside:
    """The log nearest to a sounding, `distance` m away, by which its columns were weighed.

    worth   share of the columns that the weights amount to
    agrees  False where they were too few, and the columns left as they were
    """

    well: str
    distance: float
    worth: float
    agrees: bool


@attrs.frozen
class UnitColumn:
    """One sounding read through the template.

    unit              the code that each layer is given, from the best path in order of the column (k,)
    unit_probability  probability of that code for each layer (k,)
    probability       probability of each unit for each layer (k, units)
    bedrock_status    what the curve says of bedrock; `bedrock_depth` m with `bedrock_depth_error` m for "seen" and
                      "not_distinct" (NaN where it says nothing), the bound for "deeper_than"
    profile_depth     edges of slices of depth, m (d+1,), and in `profile` (d, units) each unit's probability there
    basal_depth       5, 50 and 95 % quantiles of the depth of the basal contact, m (3,), NaN where nothing is known
    gravel_probability  of at least 1 m of basal gravel; gravel_prior: what was assumed before the curve spoke;
                      gravel_limit m: as much of it could hide unseen on this rock
    shallow_probability  of at least 1 m of the shallow aquifer; shallow_resistivity ohm m: its 5, 50 and 95 % quantiles
                      where it is present (3,)
    base_contrast     natural log of rock's resistivity over that of what lies on it, from the draws that reach it
    water_level       depth of the water table and its standard deviation, m (2,), NaN where none is known
    above_water       (d,) probability of coarse ground above the water level in each slice of the profile; empty where
                      none was looked for
    beside            the log by which all this was conditioned; what is kriged is not, for the well is kriged itself
    picks             the interpreter's decisions here; `pick_opinions` what the curve says of each
    """

    sounding: str
    unit: tuple[str, ...]
    unit_probability: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    probability: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    bedrock_status: BedrockStatus
    bedrock_depth: float
    bedrock_depth_error: float
    picks: tuple[Pick, ...] = ()
    pick_opinions: tuple[PickOpinion, ...] = ()
    profile_depth: FloatArray = attrs.field(factory=lambda: np.empty(0), converter=floats, eq=by_value, repr=shape)
    profile: FloatArray = attrs.field(factory=lambda: np.empty((0, 0)), converter=floats, eq=by_value, repr=shape)
    basal_depth: FloatArray = attrs.field(factory=lambda: np.full(3, np.nan), converter=floats, eq=by_value, repr=shape)
    gravel_probability: float = float("nan")
    gravel_limit: float = float("nan")
    gravel_prior: float = float("nan")
    shallow_probability: float = float("nan")
    shallow_resistivity: FloatArray = attrs.field(
        factory=lambda: np.full(3, np.nan), converter=floats, eq=by_value, repr=shape
    )
    base_contrast: float = float("nan")
    water_level: FloatArray = attrs.field(factory=lambda: np.full(2, np.nan), converter=floats, eq=by_value, repr=shape)
    above_water: FloatArray = attrs.field(factory=lambda: np.empty(0), converter=floats, eq=by_value, repr=shape)
    beside: WellBeside | None = None


@attrs.frozen
class WellReading:
    """One log interval with the unit that the driller's words were taken to mean, None where nothing claims them."""

    well: str
    top: float
    bottom: float
    description: str
    unit: str | None
    confidence: float  # 0 to 1: 1 for a typed code or an exact term


@attrs.frozen
class WellWater:
    """The water of the aquifer (a role) that a well ends in: specific conductance in µS/cm at 25 °C.

    resistivity  of the water at the ground's temperature, ohm m; factor: over the survey's typical water, 1 where there
                 are too few waters of that aquifer to have one
    """

    well: str
    role: str
    specific_conductance: float
    resistivity: float
    factor: float


@attrs.frozen
class WaterShift:
    """The factor on an aquifer's range at a sounding, with the nearest well of that aquifer, `distance` m away."""

    sounding: str
    role: str
    factor: float
    well: str
    distance: float


@attrs.frozen
class UnitCalibration:
    """What the survey's curves made of a unit's range in the template: ohm m, central 90 %, before and after.

    soundings  how many soundings' worth of the unit's presence spoke; `used` whether they were enough
    """

    unit: str
    before: tuple[float, float]
    after: tuple[float, float]
    soundings: float
    used: bool


@attrs.frozen
class WellPair:
    """A sounding beside a well, `distance` m apart.

    misfit  mean square of residuals over errors of its curve under the log's layers, NaN where that was not tried
    miss    why the pair says nothing, empty where it does
    """

    well: str
    sounding: str
    distance: float
    misfit: float
    miss: str


@attrs.frozen
class PairedUnit:
    """A unit's range in ohm m as typed, and as its `pairs` would have it.

    gain  natural log of how much more probable left-out pairs are under it, NaN where there are too few
    used  whether it took the typed range's place
    """

    unit: str
    before: tuple[float, float]
    after: tuple[float, float]
    pairs: int
    gain: float
    used: bool


@attrs.frozen
class PairCalibration:
    """What pairs of soundings and wells within `distance` m made of the template; `fewest` pairs are needed for it."""

    distance: float
    fewest: int
    pairs: tuple[WellPair, ...]
    units: tuple[PairedUnit, ...]


@attrs.frozen
class Interpretation:
    """Every place read through the template: what is handed to the surfaces.

    `undecided` is the same read without the interpreter's picks, None where there are none, or nobody asks for it.
    """

    columns: tuple[UnitColumn, ...]
    well_readings: tuple[WellReading, ...]
    tops: tuple[Top, ...]
    thicknesses: tuple[Thickness, ...]
    shallow_resistivities: tuple[ShallowResistivity, ...]
    unmapped_words: tuple[str, ...] = ()
    calibration: tuple[UnitCalibration, ...] = ()
    remarks: tuple[str, ...] = ()
    well_waters: tuple[WellWater, ...] = ()
    water_shifts: tuple[WaterShift, ...] = ()
    pair_calibration: PairCalibration | None = None
    undecided: "Interpretation | None" = None
