"""One geology -> SurfaceStack: the method `together`.

Every cell gets the normal distribution of its fields given all places, fields correlated as the places left them, and
from that an even set of columns, the same normal numbers everywhere, so that surfaces are as smooth as the fields are.
"""

from collections.abc import Iterable, Iterator, Mapping, Sequence
from functools import partial
from typing import NamedTuple

import numpy as np
from scipy.spatial import cKDTree
from scipy.special import ndtri
from scipy.stats import qmc

from geoves.domain.arrays import FloatArray, IntArray
from geoves.domain.fields import Ceiling, Field, FieldEnsemble
from geoves.domain.grids import CrossValidation, Grid, SurfaceStack, Variogram
from geoves.domain.survey import Survey
from geoves.domain.tops import Interpretation
from geoves.domain.units import Role, Template
from geoves.errors import EngineError
from geoves.kernels import joint_state
from geoves.kernels.covariances import Covariance, experimental_variogram
from geoves.kernels.field_priors import FieldPrior, weights_at
from geoves.kernels.field_windows import Told, condition_told, hear_about, tell
from geoves.kernels.joint_state import ColumnOrder, make_columns
from geoves.kernels.latent_fields import Posterior, Sites
from geoves.kernels.tiled_kriging import group_by_tile
from geoves.surfaces.canvas import Canvas, choose_reach, find_covered, find_ground
from geoves.surfaces.engines import TILE_CELLS
from geoves.surfaces.interpolation import Map
from geoves.surfaces.options import SurfaceOptions
from geoves.surfaces.stack import CellValues, Columns, assemble_surfaces, cap_columns, summarise_columns
from geoves.surfaces.support import map_support_together

# Columns of a cell: a power of two of an even sequence.
COLUMNS_POWER = 7
# Cells whose columns are made at a time: their fields stay in some tens of megabytes.
CELLS = 1024
# A tile holds one place for each so many that it hears, on average.
PLACES_HEARD_PER_TILE = 8
# Fields are not followed further than this from what is expected, in deviations.
REACH = 6.0


class _Carrier(NamedTuple):
    """What a worker needs to carry fields to cells; `varying` are the fields that columns hang on.

    mean (q,) of the priors; known (v, n) and covariance (v, n, v, n) of the varying fields at the places.
    """

    order: ColumnOrder
    priors: tuple[FieldPrior, ...]
    varying: tuple[int, ...]
    resistivity: int | None
    points: FloatArray
    relief: FloatArray
    known: FloatArray
    covariance: FloatArray
    normal: FloatArray
    margin: float


def build_surfaces_together(
    ensemble: FieldEnsemble,
    interpretation: Interpretation,
    survey: Survey,
    template: Template,
    grid: Grid,
    options: SurfaceOptions | None = None,
    *,
    map: Map = map,  # noqa: A002 - the seam is named for what it replaces
) -> SurfaceStack:
    """The surfaces that the template's roles allow, from one geology; its cross-validation leaves each place out."""
    options = options or SurfaceOptions()
    ground, remarks = find_ground(survey, grid, options)
    reach = options.reach or choose_reach(survey, options)
    covered = find_covered(survey, grid, reach) & np.isfinite(ground)
    if not covered.any():
        raise EngineError("no cell lies inside the boundary and within reach of a datum; look at the coordinates")
    canvas = Canvas(grid, covered, ground[covered])
    remarks = [*ensemble.remarks, *remarks]
    for role, what in ((Role.DEEP_AQUIFER, "thickness"), (Role.SHALLOW_AQUIFER, "resistivity")):
        if not template.with_role(role):
            remarks.append(f"the template has no {role.replace('_', ' ')}: no surface of its {what}")
    carrier = _make_carrier(ensemble, template)
    work = partial(_summarise_block, carrier=carrier, ceiling=ensemble.ceiling, template=template, options=options)
    rows, blocks = _cut_tiles(canvas, ensemble) if ensemble.is_by_windows else _cut_blocks(canvas)
    surfaces = assemble_surfaces(_restore_order(map(work, blocks), rows), canvas)
    return SurfaceStack(
        grid=grid,
        ground=ground,
        covered=covered,
        surfaces={**surfaces, "support": map_support_together(ensemble, canvas, reach)},
        variograms=tuple(_describe(ensemble, f) for f in carrier.varying),
        cross_validations=tuple(_cross_validate(ensemble, interpretation)),
        reach=reach,
        remarks=tuple(remarks),
    )


def _make_carrier(ensemble: FieldEnsemble, template: Template) -> _Carrier:
    plan = ensemble.plan
    order = ColumnOrder(
        plan.upper, plan.filler, plan.always, plan.deep, plan.bedrock, plan.n_units, plan.deep_limits, plan.rock_limits
    )
    shallow = [i for i, unit in enumerate(template.units) if unit.role is Role.SHALLOW_AQUIFER]
    resistivity = order.first_resistivity + shallow[0] if shallow else None
    varying = (*range(order.first_resistivity), *(() if resistivity is None else (resistivity,)))
    normal = ndtri(qmc.Sobol(len(varying), scramble=True, rng=np.random.default_rng(0)).random_base2(COLUMNS_POWER))
    nowhere = _Carrier(
        order=order,
        priors=tuple(_as_prior(field) for field in ensemble.fields),
        varying=varying,
        resistivity=resistivity,
        points=np.empty((0, 2)),
        relief=np.empty(0),
        known=np.empty((len(varying), 0)),
        covariance=np.empty((len(varying), 0, len(varying), 0)),
        normal=np.clip(normal, -REACH, REACH),
        margin=ensemble.ceiling.margin,
    )
    if ensemble.is_by_windows:
        return nowhere
    return _know(nowhere, ensemble.points, ensemble.relief, Posterior(ensemble.mean, ensemble.covariance))


def _know(carrier: _Carrier, points: FloatArray, relief: FloatArray, posterior: Posterior) -> _Carrier:
    """The carrier with what is known at places."""
    q, n = posterior.mean.shape
    rows = np.array(carrier.varying)
    return carrier._replace(
        points=np.asarray(points),
        relief=np.asarray(relief),
        known=posterior.mean[rows],
        covariance=posterior.covariance.reshape(q, n, q, n)[np.ix_(rows, np.arange(n), rows, np.arange(n))],
    )


class _Block(NamedTuple):
    """Cells (c, 2) with their ground (c,), and the places they hear where those are not the same for all."""

    cells: FloatArray
    ground: FloatArray
    told: Told | None = None


def _cut_blocks(canvas: Canvas) -> tuple[IntArray, Iterator[_Block]]:
    """Rows of the cells in the order of the blocks, and blocks of cells that all hear all places."""
    cells, ground = canvas.cells, canvas.ground
    starts = range(0, len(cells), CELLS)
    return np.arange(len(cells)), (_Block(cells[i : i + CELLS], ground[i : i + CELLS]) for i in starts)


def _cut_tiles(canvas: Canvas, ensemble: FieldEnsemble) -> tuple[IntArray, Iterator[_Block]]:
    """The same for tiles of cells that each hear the places nearest to their centre.

    A tile spans no more than a few of the places that it hears; it hangs on the coordinates alone.
    """
    cells, points = canvas.cells, np.asarray(ensemble.points)
    spacing = float(np.sqrt(np.prod(np.ptp(points, axis=0)) / len(points)))
    cell = canvas.grid.cell_size
    side = min(TILE_CELLS * cell, max(cell, np.sqrt(ensemble.near / PLACES_HEARD_PER_TILE) * spacing))
    tiles = [
        (part, centre)
        for rows, centre in group_by_tile(cells, side)
        for part in np.split(rows, range(CELLS, len(rows), CELLS))
    ]
    tree = cKDTree(points)
    sites = Sites(ensemble.site_precision, ensemble.site_shift)

    def cut() -> Iterator[_Block]:
        for rows, centre in tiles:
            near = hear_about(centre, tree, ensemble.near, ensemble.everywhere)
            yield _Block(cells[rows], canvas.ground[rows], tell(near, points, ensemble.relief, sites, 0))

    return np.concatenate([rows for rows, _ in tiles]), cut()


def _restore_order(blocks: Iterable[Mapping[str, CellValues]], rows: IntArray) -> list[dict[str, CellValues]]:
    """All blocks as one, its cells as they lie on the canvas; `rows` are theirs in the order of the blocks."""
    parts: dict[str, list[CellValues]] = {}
    for block in blocks:
        for name, values in block.items():
            parts.setdefault(name, []).append(values)
    back = np.argsort(rows)

    def join(values: Sequence[FloatArray | None]) -> FloatArray | None:
        known = [one for one in values if one is not None]
        return np.concatenate(known)[back] if known else None

    whole = {}
    for name, found in parts.items():
        estimate, *doubt = (join(one) for one in zip(*found, strict=True))
        whole[name] = CellValues(np.empty(0) if estimate is None else estimate, *doubt)
    return [whole]


def _as_prior(field: Field) -> FieldPrior:
    covariance = Covariance(field.model, field.nugget, field.partial_sill, field.length, field.azimuth_deg, field.ratio)
    return FieldPrior(field.mean, covariance, field.drift_variance, covariance.sill, 1.0, 1.0, field.relief_variance)


def _summarise_block(
    block: _Block, *, carrier: _Carrier, ceiling: Ceiling, template: Template, options: SurfaceOptions
) -> dict[str, CellValues]:
    """What is known of each cell of a block, by surface."""
    cells, ground, told = block
    if told is not None:
        carrier = _know(carrier, told.points, told.relief, condition_told(told, priors=carrier.priors))
    mean, covariance = _carry(carrier, cells)
    count, c = len(carrier.normal), len(cells)
    factor = np.linalg.cholesky(covariance)
    fields = np.empty((count, c, len(carrier.priors)))
    fields[:] = [prior.mean for prior in carrier.priors]
    fields[:, :, carrier.varying] = mean + np.einsum("cfg,mg->mcf", factor, carrier.normal)
    ceiling_depth = ground - ceiling.elevation(cells)
    columns = make_columns(fields.reshape(count * c, -1), np.tile(ceiling_depth, count), carrier.order)
    return summarise_columns(_as_stack(columns, fields, carrier, template), ground, options)


def _carry(carrier: _Carrier, cells: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Mean (c, v) and covariance (c, v, v) of the varying fields at cells (c, 2)."""
    v, c = len(carrier.varying), len(cells)
    mean, weights, left = np.empty((c, v)), np.empty((v, len(carrier.points), c)), np.empty((c, v))
    relief = np.zeros(c)
    for row, f in enumerate(carrier.varying):
        prior = carrier.priors[f]
        weights[row], left[:, row] = weights_at(prior, carrier.points, cells, (relief, carrier.relief))
        mean[:, row] = prior.mean + weights[row].T @ (carrier.known[row] - prior.mean)
        if f == 0:
            spread = left[:, 0] + np.sum(weights[0] * (carrier.covariance[0, :, 0] @ weights[0]), axis=0)
            relief = np.exp(mean[:, 0] + 0.5 * spread) - carrier.margin
    covariance = np.zeros((c, v, v))
    for i in range(v):
        for j in range(i + 1):
            carried = np.sum(weights[i] * (carrier.covariance[i, :, j] @ weights[j]), axis=0)
            covariance[:, i, j] = covariance[:, j, i] = carried
    diagonal = np.arange(v)
    covariance[:, diagonal, diagonal] += left
    return mean, covariance


def _as_stack(columns: joint_state.Columns, fields: FloatArray, carrier: _Carrier, template: Template) -> Columns:
    """Columns of the fields as the stack takes them, by role."""
    count, c = fields.shape[:2]
    roles = [template.units[unit].role for unit in carrier.order.upper]

    def of_role(role: Role) -> FloatArray | None:
        positions = [i for i, one in enumerate(roles) if one is role]
        return columns.upper[:, positions].sum(axis=1).reshape(count, c) if positions else None

    deep = columns.deep.sum(axis=1).reshape(count, c) if carrier.order.deep else None
    resistivity = None if carrier.resistivity is None else fields[:, :, carrier.resistivity]
    stacked = Columns(
        basal_depth=columns.basal_depth.reshape(count, c),
        gravel=deep,
        cover=of_role(Role.COVER),
        shallow=of_role(Role.SHALLOW_AQUIFER),
        log_shallow_resistivity=resistivity,
    )
    return cap_columns(stacked, confining=Role.CONFINING in roles)


def _describe(ensemble: FieldEnsemble, f: int) -> Variogram:
    """The experimental variogram of a field's expected values beside the covariance that was inferred."""
    field = ensemble.fields[f]
    extent = float(np.hypot(*np.ptp(ensemble.points, axis=0)))
    lag, semivariance, pairs = experimental_variogram(
        ensemble.points, ensemble.mean[f], np.linspace(0.0, 0.5 * extent, 13)
    )
    return Variogram(
        title=field.title,
        unit=field.unit,
        model=field.model,
        nugget=field.nugget,
        partial_sill=field.partial_sill,
        length=field.length,
        azimuth_deg=field.azimuth_deg,
        ratio=field.ratio,
        n_data=len(ensemble.points),
        lag=lag,
        semivariance=semivariance,
        pairs=pairs,
        remark=(
            "a latent field, inferred with all others from every place; points are its expected values, which vary "
            "less than the field itself does"
        ),
    )


def _cross_validate(ensemble: FieldEnsemble, interpretation: Interpretation) -> list[CrossValidation]:
    """What each place says by itself of the basal contact against what all others say of it."""
    columns = {column.place: column for column in ensemble.columns}
    rows = [
        top
        for top in interpretation.tops
        if top.contact == "basal" and top.status == "at" and top.place in columns and top.depth > 0
    ]
    others = np.log(np.maximum([columns[top.place].others_basal_depth for top in rows], 0.1)).reshape(-1, 3)
    own_error = np.array([top.standard_error / top.depth for top in rows])
    return [
        CrossValidation(
            title="Log depth of the basal contact",
            unit="ln m",
            place=tuple(top.place for top in rows),
            kind=tuple(top.kind for top in rows),
            measured=np.log([top.depth for top in rows]),
            predicted=others[:, 1],
            standard_error=np.hypot((others[:, 2] - others[:, 0]) / 3.29, own_error),
        )
    ]
