"""What came home from the field: soundings with their curves, wells with their logs, permits, picks."""

import math
from collections.abc import Mapping
from typing import Any, Literal

import attrs
import numpy as np

from geoves.domain.arrays import BoolArray, FloatArray, IntArray, booleans, by_value, floats, integers, shape
from geoves.domain.findings import Finding
from geoves.domain.grids import Grid

# Used readings that a sounding needs.
FEWEST_READINGS = 5
# Neighbouring used AB/2 of a sounding that are farther apart than this factor leave it without a middle.
WIDEST_GAP = 5.0

Array = Literal["schlumberger", "wenner"]
PickStatus = Literal["at", "below", "absent"]


def _extra() -> Any:
    """Columns beyond the contract's, carried through as they were typed: a copy, read-only by its type."""
    return attrs.field(factory=dict, converter=dict, hash=False)


@attrs.frozen
class Measured:
    """What a field sheet says of one reading, before anything is computed from it; NaN where the cell is empty.

    apparent_resistivity ohm m, resistance_ohm, voltage_mv, current_ma; its spacings stand in the curve.
    """

    apparent_resistivity: float = attrs.field(default=math.nan, eq=str)  # so that NaN is NaN
    resistance_ohm: float = attrs.field(default=math.nan, eq=str)
    voltage_mv: float = attrs.field(default=math.nan, eq=str)
    current_ma: float = attrs.field(default=math.nan, eq=str)


@attrs.frozen
class Curve:
    """One sounding's readings, in the order of `segment` and then of `half_spacing`.

    half_spacing AB/2 m (n,), potential_half_spacing MN/2 m (n,), apparent_resistivity ohm m (n,),
    relative_error one standard deviation as a fraction (n,), NaN until one is assigned,
    segment int (n,): 0 for the first MN, 1 after its first change, and so on; used bool (n,): False where the
    reading is kept and drawn but not fitted; reason str (n,): why it is not used, empty where it is;
    row int (n,): its row in the table of readings; extra (n,): its note and its columns beyond the contract's;
    measured (n,): what was typed, for those who would recompute it.
    """

    half_spacing: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    potential_half_spacing: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    apparent_resistivity: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    relative_error: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    segment: IntArray = attrs.field(converter=integers, eq=by_value, repr=shape)
    used: BoolArray = attrs.field(converter=booleans, eq=by_value, repr=shape)
    reason: tuple[str, ...] = ()
    row: IntArray = attrs.field(default=(), converter=integers, eq=by_value, repr=shape)
    extra: tuple[Mapping[str, Any], ...] = ()
    measured: tuple[Measured, ...] = ()

    @property
    def is_enough(self) -> bool:
        """Whether the used readings are enough to say anything: their number, and no gap in their middle."""
        if int(np.sum(self.used)) < FEWEST_READINGS:
            return False
        low, high = self.widest_gap
        return high <= WIDEST_GAP * low

    @property
    def widest_gap(self) -> tuple[float, float]:
        """The two neighbouring used AB/2, m, that are farthest apart in ratio."""
        spacing = np.unique(self.half_spacing[self.used])
        if spacing.size < 2:
            return (float(spacing[0]),) * 2 if spacing.size else (1.0, 1.0)
        at = int(np.argmax(spacing[1:] / spacing[:-1]))
        return float(spacing[at]), float(spacing[at + 1])

    def readings(self, noise: float) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray, IntArray]:
        """The used readings as arrays: spacings, apparent resistivity, error (`noise` where none is typed), segment.

        Segments are numbered anew, without gaps, so that 0 is the first that has a used reading.
        """
        used = self.used
        error = np.where(np.isnan(self.relative_error), noise, self.relative_error)
        _, segment = np.unique(self.segment[used], return_inverse=True)
        return (
            self.half_spacing[used],
            self.potential_half_spacing[used],
            self.apparent_resistivity[used],
            error[used],
            segment,
        )


@attrs.frozen
class Sounding:
    """One vertical electrical sounding; ground elevation in m, NaN where none is known."""

    name: str
    easting: float
    northing: float
    ground_elevation: float
    curve: Curve
    array: Array = "schlumberger"
    azimuth_deg: float | None = None
    date: str = ""
    note: str = ""
    extra: Mapping[str, Any] = _extra()

    @property
    def measured(self) -> "Sounding":
        """The same sounding without what people wrote beside it and where its rows stand in the table.

        What is computed from it stays the same when a note is corrected, or rows are put in above its own.
        """
        curve = attrs.evolve(self.curve, reason=(), row=(), extra=())
        return attrs.evolve(self, curve=curve, date="", note="", extra={})


@attrs.frozen
class LogInterval:
    """A stretch of a driller's log: depths in m, the driller's words, and the unit's code where it was typed."""

    top: float
    bottom: float
    description: str
    unit: str | None = None
    extra: Mapping[str, Any] = _extra()


@attrs.frozen
class Well:
    """One control well: depths in m; specific conductance in µS/cm at 25 °C; location_accuracy a radius in m."""

    name: str
    easting: float
    northing: float
    ground_elevation: float
    total_depth: float
    intervals: tuple[LogInterval, ...] = ()
    water_level: float | None = None
    specific_conductance: float | None = None
    location_accuracy: float | None = None
    extra: Mapping[str, Any] = _extra()


@attrs.frozen
class Permit:
    """One well permit; requested_depth in m, location_accuracy a radius in m, location_method how it was placed."""

    name: str
    easting: float
    northing: float
    requested_depth: float | None = None
    use: str = ""
    location_accuracy: float | None = None
    extra: Mapping[str, Any] = _extra()
    location_method: str = ""


@attrs.frozen
class Pick:
    """An interpreter's decision about the top of a unit at a sounding or a well; depth and its error in m."""

    place: str
    unit: str
    status: PickStatus
    depth: float | None
    depth_error: float | None
    interpreter: str
    reason: str
    extra: Mapping[str, Any] = _extra()


@attrs.frozen
class Ground:
    """Elevation of the land surface (m) on the region's grid, NaN where the raster had none."""

    grid: Grid
    elevation: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)


@attrs.frozen
class Survey:
    """All that the inputs hold, in the region's CRS and SI units, with the doubts met while reading.

    crs_unit_metres is the length of the CRS's unit: eastings and northings times it are metres.
    """

    soundings: tuple[Sounding, ...]
    wells: tuple[Well, ...] = ()
    permits: tuple[Permit, ...] = ()
    picks: tuple[Pick, ...] = ()
    ground: Ground | None = None
    boundary: Any = None  # a shapely (Multi)Polygon in the region's CRS
    doubts: tuple[Finding, ...] = ()
    crs_unit_metres: float = 1.0
