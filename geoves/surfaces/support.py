"""What each cell rests on: wells and soundings, soundings alone, one datum, or none within reach."""

import numpy as np
from scipy.spatial import cKDTree

from geoves.domain.arrays import BoolArray, FloatArray
from geoves.domain.fields import FieldEnsemble
from geoves.domain.grids import Surface
from geoves.surfaces.canvas import Canvas
from geoves.surfaces.evidence import Evidence
from geoves.surfaces.stack import CellValues, assemble_surfaces

# The codes of the raster; cells that no surface covers are blank.
NO_DATUM, ONE_DATUM, SOUNDINGS_ALONE, WITH_WELLS = 0.0, 1.0, 2.0, 3.0


def map_support(basal: Evidence, canvas: Canvas, reach: float) -> Surface:
    """The code of each covered cell, by the depths and bounds of the basal contact within `reach` of it.

    A place that could not tell the contact covers a cell and does not support it: such a cell has the code 0.
    """
    points = np.vstack([basal.points, basal.bounds.points])
    by_curve = np.array([kind == "sounding" for kind in (*basal.kind, *basal.bound_kind)], dtype=bool)
    return _map_places(points, by_curve, canvas, reach)


def map_support_together(ensemble: FieldEnsemble, canvas: Canvas, reach: float) -> Surface:
    """The same by all places that were heard: each bears on the contact, and what was set aside on none."""
    heard = np.array([not column.set_aside for column in ensemble.columns], dtype=bool)
    by_curve = np.array([column.kind == "sounding" for column in ensemble.columns], dtype=bool)
    return _map_places(ensemble.points[heard], by_curve[heard], canvas, reach)


def _map_places(points: FloatArray, by_curve: BoolArray, canvas: Canvas, reach: float) -> Surface:
    """The codes by places (n, 2), of which `by_curve` (n,) are soundings."""
    cells = canvas.cells
    number = _count_within(points, cells, reach)
    wells = _count_within(points[~by_curve], cells, reach)
    code = np.where(wells > 0, WITH_WELLS, SOUNDINGS_ALONE)
    code = np.where(number == 1, ONE_DATUM, np.where(number == 0, NO_DATUM, code))
    return assemble_surfaces([{"support": CellValues(code)}], canvas)["support"]


def _count_within(points: np.ndarray, cells: np.ndarray, reach: float) -> np.ndarray:
    """How many points (n, 2) lie within `reach` of each cell (c, 2); two count for many."""
    count = np.zeros(len(cells), dtype=np.int64)
    nearest = min(2, len(points))
    if nearest:
        distance, _ = cKDTree(points).query(cells, k=nearest, distance_upper_bound=reach * (1.0 + 1e-9))
        count = np.isfinite(distance.reshape(len(cells), nearest)).sum(axis=1)
    return np.asarray(count)
