"""Which engine kriges: one factor of all data, tiles of cells that share a neighbourhood, or PyKrige."""

from geoves.domain.arrays import FloatArray
from geoves.kernels.covariances import Covariance
from geoves.kernels.kriging import CholeskyKriging, FieldData, KrigingEngine, leave_one_out
from geoves.kernels.reference_kriging import ReferenceKriging
from geoves.kernels.tiled_kriging import TiledKriging, leave_one_out_nearby
from geoves.surfaces.options import SurfaceOptions

# Cells along the side of a tile that shares its data.
TILE_CELLS = 32


def choose_engine(data: FieldData, covariance: Covariance, options: SurfaceOptions, cell_size: float) -> KrigingEngine:
    """The engine that `options.engine` names; by itself, one factor up to `options.all_at_once` data, tiles beyond."""
    if options.engine == "pykrige":
        return ReferenceKriging(data, covariance)
    if options.engine == "tiles" or (options.engine == "auto" and len(data.values) > options.all_at_once):
        return TiledKriging(data, covariance, TILE_CELLS * cell_size)
    return CholeskyKriging(data, covariance)


def leave_each_out(data: FieldData, covariance: Covariance, options: SurfaceOptions) -> tuple[FloatArray, FloatArray]:
    """What the others say at each datum, predicted and variance (n,): from all of them, or from those nearby."""
    if len(data.values) > options.all_at_once:
        return leave_one_out_nearby(data, covariance)
    return leave_one_out(data.points, data.values, data.error_variance, covariance)
