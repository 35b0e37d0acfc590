"""Evidence -> a quantity on the covered cells: its covariance fitted, its data and bounds kriged block by block."""

from collections.abc import Callable, Iterable
from functools import partial
from typing import Any, NamedTuple

import numpy as np
from threadpoolctl import threadpool_limits

from geoves.domain.arrays import FloatArray
from geoves.kernels.covariances import Covariance, Stated, fit_covariance
from geoves.kernels.inequality import Bounds, bounds_alone_as_values, fit_covariance_with_bounds
from geoves.kernels.kriging import FieldData
from geoves.kernels.tiled_kriging import bounds_as_values_nearby
from geoves.surfaces.canvas import Canvas
from geoves.surfaces.engines import choose_engine
from geoves.surfaces.evidence import Evidence, latent_prior
from geoves.surfaces.options import SurfaceOptions
from geoves.surfaces.stated import StatedVariogram

# Data and bounds that a covariance is fitted to, beyond what one factor holds.
MOST_FITTED = 800

Map = Callable[[Callable[[Any], Any], Iterable[Any]], Iterable[Any]]


class Kriged(NamedTuple):
    """A quantity on the covered cells: mean and deviation (c,); the covariance, and the data kriged."""

    mean: FloatArray
    deviation: FloatArray
    covariance: Covariance
    points: FloatArray
    values: FloatArray
    error_variance: FloatArray

    @property
    def data(self) -> FieldData:
        """The data as an engine takes them."""
        return FieldData(self.points, self.values, self.error_variance)


def interpolate(evidence: Evidence, *, canvas: Canvas, options: SurfaceOptions, map: Map) -> Kriged:  # noqa: A002
    """Fit the covariance to data and bounds together, then krige both, block by block through the map.

    With fewer data proper than a fit needs, each bound first becomes a pseudo-datum by itself.
    """
    points = np.vstack([evidence.points, evidence.bounds.points])
    own: StatedVariogram = getattr(options.variogram, evidence.quantity)
    model = own.model or options.model
    if len(evidence.values) >= options.fewest and len(points) > options.all_at_once:
        covariance, pseudo_value, pseudo_variance = _fit_to_many(evidence, model, own.stated)
    elif len(evidence.values) >= options.fewest:
        covariance, pseudo_value, pseudo_variance = fit_covariance_with_bounds(
            evidence.points, evidence.values, evidence.error_variance, evidence.bounds, model, own.stated
        )
    else:
        pseudo_value, pseudo_variance = bounds_alone_as_values(evidence.bounds, *latent_prior(evidence))
    values = np.concatenate([evidence.values, pseudo_value])
    variance = np.concatenate([evidence.error_variance, pseudo_variance])
    if len(evidence.values) < options.fewest:
        covariance = fit_covariance(points, values, variance, model, own.stated)
    kriged = Kriged(np.empty(0), np.empty(0), covariance, points, values, variance)
    mean, spread = krige_cells(kriged, canvas, options, map)
    return kriged._replace(mean=mean, deviation=np.sqrt(spread))


def _fit_to_many(evidence: Evidence, model: str, stated: Stated) -> tuple[Covariance, FloatArray, FloatArray]:
    """The covariance fitted to a fixed choice of data and bounds, and every bound as a value by what lies near it."""
    share = MOST_FITTED / evidence.size
    bounds = evidence.bounds
    random = np.random.default_rng(0)
    data, some = (
        np.sort(random.permutation(count)[: max(3, round(share * count))])
        for count in (len(evidence.values), len(bounds.bound))
    )
    covariance, _, _ = fit_covariance_with_bounds(
        evidence.points[data],
        evidence.values[data],
        evidence.error_variance[data],
        Bounds(*(part[some] for part in bounds)),
        model,
        stated,
    )
    known = FieldData(evidence.points, evidence.values, evidence.error_variance)
    return covariance, *bounds_as_values_nearby(known, bounds, covariance)


def krige_cells(kriged: Kriged, canvas: Canvas, options: SurfaceOptions, map: Map) -> tuple[FloatArray, FloatArray]:  # noqa: A002
    """Estimate and variance (c,) from a quantity's data, block by block through the map."""
    work = partial(_krige_block, kriged.data, kriged.covariance, options, canvas.grid.cell_size)
    order = canvas.by_tile
    cells = canvas.cells[order]
    parts = list(map(work, [cells[i : i + options.block] for i in range(0, len(cells), options.block)]))
    found = np.empty((2, len(cells)))
    found[:, order] = np.concatenate(parts, axis=1)
    return found[0], found[1]


@threadpool_limits.wrap(limits=1)  # blocks are small: threads cost more than they bring
def _krige_block(
    data: FieldData, covariance: Covariance, options: SurfaceOptions, cell_size: float, cells: FloatArray
) -> tuple[FloatArray, FloatArray]:
    return choose_engine(data, covariance, options, cell_size).predict(cells)


def assume_everywhere(evidence: Evidence, contact: Kriged) -> Kriged:
    """The same doubtful thickness at every cell: what the few places say on the whole, without any map of it.

    Leaving it out would call the top of the gravel bedrock.
    """
    mean, deviation = latent_prior(evidence)
    return contact._replace(mean=np.full_like(contact.mean, mean), deviation=np.full_like(contact.mean, deviation))
