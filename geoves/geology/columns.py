"""Clouds and cavities as what a person reads of a place: itself, the others, both together."""

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from scipy.special import ndtri
from scipy.stats import qmc

from geoves.domain.arrays import FloatArray
from geoves.domain.fields import JointColumn
from geoves.domain.tops import PlaceKind
from geoves.geology.evidence import PlaceList
from geoves.geology.flat_layers import Misreading
from geoves.geology.inference import Heard, State, Task, split_rows
from geoves.kernels.joint_state import Columns, make_columns, standard_residuals
from geoves.kernels.local_clouds import Cloud

# Present means at least this thick, m.
PRESENT = 1.0
QUANTILES = (0.05, 0.5, 0.95)
# Normal numbers by which fields are turned into columns: a power of two of a Sobol sequence.
NORMALS_POWER = 8


def read_columns(
    task: Task, listed: PlaceList, state: State, heard: Heard, before: Sequence[JointColumn] | None = None
) -> tuple[JointColumn, ...]:
    """A column for every place; `before` are those without picks, if they were heard since."""
    mean, covariance = state.posterior.at_places()
    columns: list[JointColumn] = []
    for rows in split_rows(len(task.names)):
        part = _Part(
            task._replace(
                places=task.places.take(rows), spreads=task.spreads.take(rows), steadfast=task.steadfast[rows]
            ),
            Cloud(*(values[rows] for values in state.cloud)),
            state.misreading.take(rows),
            heard.take(rows),
            mean[rows],
            covariance[rows],
        )
        those = slice(rows[0], rows[-1] + 1)
        columns += _read_part(part, listed.names[those], listed.kinds[those], before and before[those])
    return tuple(columns)


class _Part(NamedTuple):
    """Some of the places: what is known of them, and their fields' mean (b, q) and covariance (b, q, q)."""

    task: Task
    cloud: Cloud
    misreading: Misreading
    heard: Heard
    mean: FloatArray
    covariance: FloatArray


def _read_part(
    part: _Part, names: Sequence[str], kinds: Sequence[PlaceKind], before: Sequence[JointColumn] | None
) -> list[JointColumn]:
    task, cloud, _, heard, mean, covariance = part
    q = task.order.n_fields
    cavity_mean, cavity_covariance = (
        heard.cavity.mean[:, :q],
        np.asarray(np.linalg.inv(heard.cavity.precision[:, :q, :q])),
    )
    n, m = heard.weighed.weight.shape
    fields = _as_they_are(cloud, part.misreading, heard)[:, :, :q].reshape(n * m, q)
    own = make_columns(fields, np.repeat(task.places.ceiling_depth, m), task.order)
    others = _columns_of_normals(cavity_mean, cavity_covariance, task)
    together = _columns_of_normals(mean, covariance, task)
    misfit = _misfits(task, cloud, heard)
    resistivity = slice(task.order.first_resistivity, task.order.grading)
    bias = np.where(np.isfinite(task.spreads.largest), np.expm1(part.misreading.log_depth), np.nan)
    columns = []
    for i, (name, kind) in enumerate(zip(names, kinds, strict=True)):
        even = slice(i * 2**NORMALS_POWER, (i + 1) * 2**NORMALS_POWER)
        others_here = _take(others, even)
        # A log or a pick is sharp: its cloud tells it. Of a curve the fields took what it is heard for.
        here, share = _take(together, even), np.full(2**NORMALS_POWER, 2.0**-NORMALS_POWER)
        if task.steadfast[i]:
            here, share = _take(own, slice(i * m, (i + 1) * m)), heard.weighed.weight[i]
        gravel, others_gravel = here.deep.sum(axis=1), others_here.deep.sum(axis=1)
        basal = weighted_quantiles(here.basal_depth, share)
        deviation = np.sqrt(cavity_covariance[i, 0, 0])
        moved = (mean[i, 0] - cavity_mean[i, 0]) / deviation
        columns.append(
            JointColumn(
                place=name,
                kind=kind,
                basal_depth=basal,
                rock_depth=weighted_quantiles(here.rock_depth, share),
                gravel_thickness=weighted_quantiles(gravel, share),
                others_basal_depth=np.quantile(others_here.basal_depth, QUANTILES),
                gravel_probability=float(share @ (gravel >= PRESENT)),
                others_gravel_probability=float(np.mean(others_gravel >= PRESENT)),
                log_resistivity=mean[i, resistivity],
                log_resistivity_deviation=np.sqrt(np.diagonal(covariance[i])[resistivity]),
                shift=float(moved),
                misfit=float(misfit[i]),
                trust=float(heard.trust[i]),
                flat_layer_bias=float(bias[i]),
                moved_by_picks=0.0 if before is None else _moved(before[i], basal),
            )
        )
    return columns


def _as_they_are(cloud: Cloud, misreading: Misreading, heard: Heard) -> FloatArray:
    """Unknowns (n, m, p) of the clouds with the contact where it is, not where flat layers have it read.

    What is read is the contact moved by a normal number; given what is read and what others say, that number is known
    in part, and the rest of it is drawn.
    """
    unknowns = cloud.unknowns.copy()
    step, variance = misreading.step[:, None], misreading.variance[:, None]
    pulled = np.matmul(unknowns - heard.as_read.mean[:, None], heard.as_read.precision[:, :, :1])[..., 0]
    left = variance - variance**2 * heard.as_read.precision[:, 0, 0][:, None]
    normal = np.random.default_rng(0).standard_normal(unknowns.shape[1])
    unknowns[:, :, 0] -= step + variance * pulled + np.sqrt(np.maximum(left, 0.0)) * normal
    return unknowns


def _take(columns: Columns, rows: slice) -> Columns:
    return Columns(*(values[rows] for values in columns))


def _columns_of_normals(mean: FloatArray, covariance: FloatArray, task: Task) -> Columns:
    """Columns (n 2^k) of normal fields (n, q) at each place, from one even set of normal numbers."""
    n, q = mean.shape
    normal = even_normals(q, NORMALS_POWER)
    factor = np.linalg.cholesky(covariance)
    fields = mean[:, None] + np.matmul(normal, factor.transpose(0, 2, 1))
    fields = np.clip(fields, task.places.lowest[:q], task.places.highest[:q])
    count = len(normal)
    return make_columns(fields.reshape(n * count, q), np.repeat(task.places.ceiling_depth, count), task.order)


def even_normals(dimension: int, power: int) -> FloatArray:
    """2^power standard normal vectors that fill space evenly: a scrambled Sobol sequence, always the same."""
    uniform = qmc.Sobol(dimension, scramble=True, rng=np.random.default_rng(0)).random_base2(power)
    return np.asarray(ndtri(np.clip(uniform, 1e-9, 1.0 - 1e-9)))


def weighted_quantiles(values: FloatArray, weight: FloatArray) -> FloatArray:
    """The 5, 50 and 95 % quantiles (3,) of weighed values (m,)."""
    order = np.argsort(values)
    share = np.cumsum(weight[order]) - 0.5 * weight[order]
    return np.interp(QUANTILES, share, values[order])


def _misfits(task: Task, cloud: Cloud, heard: Heard) -> FloatArray:
    """Root mean square (n,) of the residuals over their errors at the heaviest unknowns; NaN without a curve."""
    rows = np.arange(len(cloud.unknowns))
    heaviest = cloud.unknowns[rows, np.argmax(heard.weighed.weight, axis=1)]
    residual, weight = standard_residuals(heaviest, task.places, task.order)
    total = weight.sum(axis=1)
    return np.where(total > 0, np.sqrt(np.sum(weight * residual**2, axis=1) / np.maximum(total, 1e-12)), np.nan)


def _moved(before: JointColumn, basal: FloatArray) -> float:
    """By how many of its deviations (in logs) the median of the basal contact moved."""
    low, middle, high = np.log(np.maximum(before.basal_depth, 0.1))
    deviation = max((high - low) / 3.29, 1e-3)
    return float((np.log(max(basal[1], 0.1)) - middle) / deviation)
