"""The one grid of a region and what stands on it."""

from collections.abc import Mapping

import attrs
import numpy as np

from geoves.domain.arrays import (
    BoolArray,
    FloatArray,
    IntArray,
    booleans,
    by_value,
    floats,
    integers,
    optional_floats,
    shape,
)


@attrs.frozen
class Grid:
    """North-up square cells. West and north are the outer edges of the first column and row, in the unit of the CRS."""

    west: float
    north: float
    cell_size: float
    n_rows: int
    n_columns: int

    @property
    def shape(self) -> tuple[int, int]:
        return self.n_rows, self.n_columns

    @property
    def easting(self) -> FloatArray:
        """Centres of the columns (n_columns,)."""
        return np.asarray(self.west + (np.arange(self.n_columns) + 0.5) * self.cell_size)

    @property
    def northing(self) -> FloatArray:
        """Centres of the rows, from north to south (n_rows,)."""
        return np.asarray(self.north - (np.arange(self.n_rows) + 0.5) * self.cell_size)

    @property
    def bounds(self) -> tuple[float, float, float, float]:
        """West, south, east, north."""
        return (
            self.west,
            self.north - self.n_rows * self.cell_size,
            self.west + self.n_columns * self.cell_size,
            self.north,
        )


@attrs.frozen
class Surface:
    """One quantity on the grid with what is known of its doubt; NaN where it is not supported.

    Arrays are (rows, columns), in m for lengths, ohm m for resistivities, 0 to 1 for probabilities and whole numbers
    for codes.
    """

    name: str
    title: str
    quantity: str  # "elevation", "depth", "thickness", "resistivity", "probability" or "code"
    grid: Grid
    estimate: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    standard_error: FloatArray | None = attrs.field(default=None, converter=optional_floats, eq=by_value, repr=shape)
    p05: FloatArray | None = attrs.field(default=None, converter=optional_floats, eq=by_value, repr=shape)
    p95: FloatArray | None = attrs.field(default=None, converter=optional_floats, eq=by_value, repr=shape)


@attrs.frozen
class DirectionalVariogram:
    """An experimental variogram of the pairs within 45° of an azimuth (clockwise from north); (bins,) each."""

    azimuth_deg: float
    lag: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    semivariance: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    pairs: IntArray = attrs.field(converter=integers, eq=by_value, repr=shape)


@attrs.frozen
class Variogram:
    """A variogram as estimated and as fitted, of the kriged quantity `title` (in `unit` squared).

    lag, semivariance and pairs (bins,) are experimental. The fitted model is `model` with `nugget`, `partial_sill`
    and practical `length` along `azimuth_deg` (clockwise from north), `ratio` times that across it.
    least_squares : nugget, partial sill and length of the same model fitted to the experimental one, errors of the data
    in it; None where that cannot be done      directions : along the fitted azimuth and across it
    """

    title: str
    unit: str
    model: str
    nugget: float
    partial_sill: float
    length: float
    azimuth_deg: float
    ratio: float
    n_data: int
    lag: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    semivariance: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    pairs: IntArray = attrs.field(converter=integers, eq=by_value, repr=shape)
    remark: str = ""
    least_squares: tuple[float, float, float] | None = None
    directions: tuple[DirectionalVariogram, ...] = ()


@attrs.frozen
class CrossValidation:
    """What leave-one-out says of one kriged quantity: (n,) each, in `unit`; only places with a value of their own."""

    title: str
    unit: str
    place: tuple[str, ...]
    kind: tuple[str, ...]  # sounding, well or pick
    measured: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    predicted: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    standard_error: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)


@attrs.frozen
class SurfaceStack:
    """All surfaces of a region on one grid, with the ground they were capped at and why they should be believed."""

    grid: Grid
    ground: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    covered: BoolArray = attrs.field(
        converter=booleans, eq=by_value, repr=shape
    )  # inside the boundary and the data's reach
    surfaces: Mapping[str, Surface] = attrs.field(factory=dict)
    variograms: tuple[Variogram, ...] = ()
    cross_validations: tuple[CrossValidation, ...] = ()
    reach: float = float("nan")  # how far from a datum surfaces are drawn, in the unit of the CRS
    remarks: tuple[str, ...] = ()
