"""Kriged quantities -> realisations of the column under every cell, conditioned to all data and bounds.

An unconditional realisation is drawn on a lattice as fine as its covariance needs; what it lacks at the data, their
errors drawn too, is kriged and taken off (Journel 1974). At every cell the members are then shifted and stretched to
the kriging's own mean and deviation, which are exact: what is left to chance is how the cells hang together, and the
shape of what has no closed form.
"""

from collections.abc import Iterator, Mapping
from functools import partial
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits

from geoves.domain.arrays import FloatArray, IntArray
from geoves.domain.grids import Grid
from geoves.kernels.covariances import Covariance
from geoves.kernels.kriging import FieldData
from geoves.kernels.simulation import (
    Lattice,
    choose_spacing,
    draw_nodes,
    embed_covariance,
    interpolation_weights,
    lay_lattice,
)
from geoves.surfaces.canvas import Canvas
from geoves.surfaces.engines import choose_engine
from geoves.surfaces.interpolation import Kriged, Map
from geoves.surfaces.options import SurfaceOptions
from geoves.surfaces.stack import CellValues, Columns, cap_columns, summarise_overburden

# A lattice has at most so many nodes along a side.
LARGEST_SIDE = 1000


class Quantity(NamedTuple):
    """A kriged quantity with its unconditional realisations: `nodes` (rows, columns, members) of the lattice.

    lacks : (n, members) what each realisation lacks at the data, errors of the data drawn
    seed  : names the quantity's own stream of random numbers
    """

    data: FieldData
    covariance: Covariance
    lattice: Lattice
    nodes: NDArray[np.float32]
    lacks: FloatArray
    seed: tuple[int, ...]


class Share(NamedTuple):
    """A quantity's part of one block: the rows of the lattice that it needs, and what kriging says of its cells."""

    quantity: Quantity
    mean: FloatArray
    deviation: FloatArray


def simulate_quantity(kriged: Kriged, number: int, canvas: Canvas, options: SurfaceOptions) -> Quantity:
    """`options.members` realisations of a quantity; `number` tells the quantities of one region apart."""
    covariance, data = kriged.covariance, kriged.data
    places = np.vstack([canvas.cells, data.points])
    spacing = choose_spacing(covariance, canvas.grid.cell_size)
    spacing = max(spacing, float(np.ptp(places, axis=0).max()) / LARGEST_SIDE)
    lattice = lay_lattice(places, spacing, canvas.cells[0])
    seed = (options.random_seed, number)
    nodes = draw_nodes(embed_covariance(covariance, lattice), seed, options.members)
    at_data = interpolation_weights(lattice, data.points, covariance) @ nodes.reshape(lattice.size, -1)
    noise = np.random.default_rng([*seed, 1]).standard_normal(at_data.shape)
    lacks = at_data + np.sqrt(covariance.nugget + data.error_variance)[:, None] * noise
    return Quantity(data, covariance, lattice, nodes, lacks, seed)


def draw_members(
    quantity: Quantity, cells: FloatArray, number: IntArray, grid: Grid, options: SurfaceOptions
) -> FloatArray:
    """(c, members) conditional deviations from the kriged mean at `cells` (c, 2), by their `number` on the grid."""
    covariance, lattice = quantity.covariance, quantity.lattice
    weights = interpolation_weights(lattice, cells, covariance)
    drawn = weights @ quantity.nodes.reshape(lattice.size, -1)
    engine = choose_engine(quantity.data, covariance, options, grid.cell_size)
    drawn -= engine.estimate_many(quantity.lacks, cells)
    if covariance.nugget > 0.0:
        drawn += np.sqrt(covariance.nugget) * _draw_nugget(quantity.seed, number, grid.n_columns, drawn.shape[1])
    return np.asarray(drawn)


def _draw_nugget(seed: tuple[int, ...], number: IntArray, n_columns: int, members: int) -> FloatArray:
    """(c, members) standard normal numbers, a stream for each row of the grid: whatever block a cell is in."""
    rows, columns = np.divmod(number, n_columns)
    drawn = np.empty((len(number), members))
    for row in np.unique(rows):
        whole = np.random.default_rng([*seed, 2, int(row)]).standard_normal((n_columns, members))
        inside = rows == row
        drawn[inside] = whole[columns[inside]]
    return drawn


def match_moments(members: FloatArray, mean: FloatArray, deviation: FloatArray) -> FloatArray:
    """(c, members) shifted and stretched to `mean` and `deviation` (c,) at every cell."""
    centred = members - members.mean(axis=1, keepdims=True)
    centred *= (deviation / np.maximum(centred.std(axis=1), 1e-300))[:, None]
    return np.asarray(centred + mean[:, None])


class Block(NamedTuple):
    """All that a worker needs for some cells: their centres and numbers on the grid, and every quantity."""

    cells: FloatArray
    number: IntArray
    shares: dict[str, Share]


def summarise_cells(
    kriged: Mapping[str, Kriged],
    canvas: Canvas,
    options: SurfaceOptions,
    *,
    confining: bool,
    map: Map,  # noqa: A002
) -> list[dict[str, CellValues]]:
    """What realisations of the whole column say of the covered cells, block by block through the map.

    kriged : by the field of `Columns` that it fills, the basal contact as its log under "basal_depth"
    """
    quantities = {
        name: simulate_quantity(quantity, number, canvas, options)
        for number, (name, quantity) in enumerate(kriged.items())
    }
    work = partial(_summarise_block, grid=canvas.grid, options=options, confining=confining)
    return list(map(work, _cut_blocks(kriged, quantities, canvas, options)))


def _cut_blocks(
    kriged: Mapping[str, Kriged], quantities: Mapping[str, Quantity], canvas: Canvas, options: SurfaceOptions
) -> Iterator[Block]:
    cells, number = canvas.cells, np.flatnonzero(canvas.covered)
    for start in range(0, len(cells), options.block):
        part = slice(start, start + options.block)
        shares = {
            name: Share(_cut_lattice(quantity, cells[part]), kriged[name].mean[part], kriged[name].deviation[part])
            for name, quantity in quantities.items()
        }
        yield Block(cells[part], number[part], shares)


def _cut_lattice(quantity: Quantity, cells: FloatArray) -> Quantity:
    """The quantity with the rows of its lattice that `cells` lie among, and two more on either side."""
    lattice = quantity.lattice
    rows = (cells[:, 1] - lattice.south) / lattice.spacing
    first, last = max(int(rows.min()) - 2, 0), min(int(rows.max()) + 4, lattice.n_rows)
    south = lattice.south + first * lattice.spacing
    return quantity._replace(
        lattice=lattice._replace(south=south, n_rows=last - first), nodes=quantity.nodes[first:last]
    )


@threadpool_limits.wrap(limits=1)  # blocks are small: threads cost more than they bring
def _summarise_block(block: Block, *, grid: Grid, options: SurfaceOptions, confining: bool) -> dict[str, CellValues]:
    members = {}
    for name, share in block.shares.items():
        drawn = draw_members(share.quantity, block.cells, block.number, grid, options)
        members[name] = match_moments(drawn, share.mean, share.deviation).T
    members["basal_depth"] = np.exp(members["basal_depth"])
    return summarise_overburden(cap_columns(Columns(**members), confining=confining))
