"""Where surfaces are drawn: the grid, the ground, and the cells within reach of a place."""

from typing import NamedTuple

import numpy as np
import shapely
from scipy.spatial import cKDTree

from geoves.domain.arrays import BoolArray, FloatArray, IntArray
from geoves.domain.grids import Grid
from geoves.domain.survey import Sounding, Survey, Well
from geoves.kernels.covariances import fit_covariance
from geoves.kernels.kriging import FieldData
from geoves.surfaces.engines import TILE_CELLS, choose_engine
from geoves.surfaces.evidence import locate
from geoves.surfaces.options import SurfaceOptions


class Canvas(NamedTuple):
    """The grid, which of its cells are covered, and the ground's elevation on those (c,)."""

    grid: Grid
    covered: BoolArray
    ground: FloatArray

    @property
    def cells(self) -> FloatArray:
        """Centres of the covered cells (c, 2), in the unit of the CRS, row by row from the north."""
        rows, columns = np.nonzero(self.covered)
        return np.column_stack([self.grid.easting[columns], self.grid.northing[rows]])

    @property
    def by_tile(self) -> IntArray:
        """The order (c,) in which the covered cells of one tile follow each other: blocks then lie together."""
        rows, columns = np.nonzero(self.covered)
        return np.lexsort((columns, rows, columns // TILE_CELLS, rows // TILE_CELLS))

    def place(self, values: FloatArray) -> FloatArray:
        """Values of the covered cells (c,) on the grid, NaN elsewhere."""
        full = np.full(self.grid.shape, np.nan)
        full[self.covered] = values
        return full


def find_ground(survey: Survey, grid: Grid, options: SurfaceOptions) -> tuple[FloatArray, list[str]]:
    """Elevation of the land surface on the grid; kriged from the places where there is no raster, and said so."""
    if survey.ground is not None:
        return survey.ground.elevation, []
    places: list[Sounding | Well] = [*survey.soundings, *survey.wells]
    values = np.array([place.ground_elevation for place in places])
    known = np.isfinite(values)
    points, values = locate(places)[known], values[known]
    error = np.full(values.size, 0.25)
    cells = np.column_stack([axis.ravel() for axis in np.meshgrid(grid.easting, grid.northing)])
    engine = choose_engine(
        FieldData(points, values, error), fit_covariance(points, values, error), options, grid.cell_size
    )
    elevation, _ = engine.predict(cells)
    return elevation.reshape(grid.shape), [
        "no ground raster: the land surface is kriged from the elevations of soundings and wells"
    ]


def choose_reach(survey: Survey, options: SurfaceOptions) -> float:
    """A distance from the survey's own density: some times the spacing that nine tenths of its places keep."""
    points = np.unique(locate([*survey.soundings, *survey.wells]), axis=0)
    if len(points) < 2:
        return np.inf
    nearest = cKDTree(points).query(points, k=2)[0][:, 1]
    return float(options.reach_in_spacings * np.quantile(nearest, 0.9))


def find_covered(survey: Survey, grid: Grid, reach: float) -> BoolArray:
    """Cells inside the boundary whose centre is within reach of a sounding or a well."""
    easting, northing = np.meshgrid(grid.easting, grid.northing)
    points = locate([*survey.soundings, *survey.wells])
    distance, _ = cKDTree(points).query(np.column_stack([easting.ravel(), northing.ravel()]))
    covered = distance.reshape(grid.shape) <= reach
    if survey.boundary is not None:
        shapely.prepare(survey.boundary)
        covered &= shapely.contains_xy(survey.boundary, easting, northing)
    return np.asarray(covered)
