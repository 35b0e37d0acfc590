"""Realisations of the column under a block of cells -> what is known of each cell, and the surfaces of all blocks.

Both methods end here. A realisation is a whole column: the basal contact capped by the ground, cover, shallow aquifer
and confining unit in that order above it, gravel and rock below. So no surface crosses another in any of them, no
thickness is negative, and summaries of the realisations keep what their sums keep.
"""

from collections.abc import Iterable, Mapping
from typing import NamedTuple

import numpy as np

from geoves.domain.arrays import BoolArray, FloatArray
from geoves.domain.grids import Surface
from geoves.surfaces.canvas import Canvas
from geoves.surfaces.options import SurfaceOptions


class Columns(NamedTuple):
    """Realisations of the column under a block of cells, (members, cells) each, m; None for what is not known.

    basal_depth   depth of the top of gravel or rock, below ground
    gravel        thickness of the deep gravel under it, 0 where absent
    cover, shallow, confining   thickness of what lies on it, from the ground down
    log_shallow_resistivity     natural log of ohm m
    """

    basal_depth: FloatArray
    gravel: FloatArray | None = None
    cover: FloatArray | None = None
    shallow: FloatArray | None = None
    confining: FloatArray | None = None
    log_shallow_resistivity: FloatArray | None = None


class CellValues(NamedTuple):
    """What is known of one quantity at the cells of a block, (cells,) each."""

    estimate: FloatArray
    standard_error: FloatArray | None = None
    p05: FloatArray | None = None
    p95: FloatArray | None = None


class Named(NamedTuple):
    title: str
    quantity: str


NAMES: Mapping[str, Named] = {
    "bedrock_elevation": Named("Bedrock elevation", "elevation"),
    "bedrock_depth": Named("Depth to bedrock", "depth"),
    "deep_gravel_thickness": Named("Thickness of the deep gravel", "thickness"),
    "deep_gravel_probability": Named("Probability of deep gravel", "probability"),
    "deep_gravel_top_elevation": Named("Top of the deep gravel", "elevation"),
    "deep_gravel_top_depth": Named("Depth to the top of the deep gravel", "depth"),
    "shallow_aquifer_probability": Named("Probability of the shallow aquifer", "probability"),
    "shallow_aquifer_resistivity": Named("Resistivity of the shallow aquifer", "resistivity"),
    "shallow_aquifer_thickness": Named("Thickness of the shallow aquifer", "thickness"),
    "cover_thickness": Named("Thickness of the cover", "thickness"),
    "confining_unit_thickness": Named("Thickness of the confining unit", "thickness"),
    "support": Named("What a cell rests on", "code"),
}
THICKER_THAN = "deep_gravel_thicker_than_"


def name_threshold(threshold: float) -> str:
    """The surface of the probability that the deep gravel is thicker than `threshold` m.

    >>> name_threshold(5.0), name_threshold(7.5)
    ('deep_gravel_thicker_than_5_m', 'deep_gravel_thicker_than_7.5_m')
    """
    return f"{THICKER_THAN}{threshold:g}_m"


def cap_columns(columns: Columns, *, confining: bool) -> Columns:
    """The same realisations with every part in its place: what does not fit under the ground is not there.

    Cover is cut at the basal contact, the shallow aquifer at what is left; with `confining` the rest is clay.
    """
    depth = np.maximum(columns.basal_depth, 0.0)
    left = depth
    cover = shallow = rest = None
    if columns.cover is not None:
        cover = np.clip(columns.cover, 0.0, left)
        left = left - cover
    if columns.shallow is not None:
        shallow = np.clip(columns.shallow, 0.0, left)
        left = left - shallow
    if confining:
        rest = np.maximum(left, 0.0)
    gravel = None if columns.gravel is None else np.maximum(columns.gravel, 0.0)
    return columns._replace(basal_depth=depth, gravel=gravel, cover=cover, shallow=shallow, confining=rest)


def summarise_columns(columns: Columns, ground: FloatArray, options: SurfaceOptions) -> dict[str, CellValues]:
    """What realisations say of each cell, by the name of the surface; `ground` (cells,) is the land surface, m.

    Lengths by their mean, standard deviation and 5 and 95 % quantiles over members, absence counted as 0; the gravel's
    top where it is at least `least_probability`; the shallow resistivity by its median where it is `probable`.
    `columns` must be capped (`cap_columns`).
    """
    found: dict[str, CellValues] = {}
    depth = columns.basal_depth
    rock = depth if columns.gravel is None else depth + columns.gravel
    found["bedrock_depth"] = _summarise(rock)
    found["bedrock_elevation"] = raise_to_ground(found["bedrock_depth"], ground)
    if columns.gravel is not None:
        probability = np.mean(columns.gravel >= options.present, axis=0)
        found["deep_gravel_thickness"] = _summarise(columns.gravel)
        found["deep_gravel_probability"] = CellValues(probability)
        top = show_where(_summarise(depth)._replace(standard_error=None), probability >= options.least_probability)
        found["deep_gravel_top_depth"] = top
        found["deep_gravel_top_elevation"] = raise_to_ground(top, ground)
        for threshold in options.thicker_than:
            found[name_threshold(threshold)] = CellValues(np.mean(columns.gravel > threshold, axis=0))
    if columns.shallow is not None:
        probability = np.mean(columns.shallow >= options.present, axis=0)
        found["shallow_aquifer_probability"] = CellValues(probability)
        if columns.log_shallow_resistivity is not None:
            low, middle, high = np.exp(_quantiles(columns.log_shallow_resistivity, (0.05, 0.5, 0.95)))
            median = CellValues(middle, None, low, high)
            found["shallow_aquifer_resistivity"] = show_where(median, probability >= options.probable)
    return found | summarise_overburden(columns)


def summarise_overburden(columns: Columns) -> dict[str, CellValues]:
    """Thickness of what lies on the basal contact, as far as it is known."""
    parts = {
        "shallow_aquifer_thickness": columns.shallow,
        "cover_thickness": columns.cover,
        "confining_unit_thickness": columns.confining,
    }
    return {name: _summarise(part) for name, part in parts.items() if part is not None}


def assemble_surfaces(blocks: Iterable[Mapping[str, CellValues]], canvas: Canvas) -> dict[str, Surface]:
    """Named surfaces on the grid from the blocks of its covered cells, in the order of `canvas.covered`'s cells."""
    parts: dict[str, list[CellValues]] = {}
    for block in blocks:
        for name, values in block.items():
            parts.setdefault(name, []).append(values)
    return {name: _assemble(name, values, canvas) for name, values in parts.items()}


def _assemble(name: str, parts: list[CellValues], canvas: Canvas) -> Surface:
    estimate = canvas.place(np.concatenate([part.estimate for part in parts]))
    doubt = [_place_doubt([part[i] for part in parts], canvas) for i in (1, 2, 3)]
    named = NAMES.get(name) or Named(
        f"Probability that the deep gravel is thicker than {_threshold(name)}", "probability"
    )
    return Surface(name, named.title, named.quantity, canvas.grid, estimate, *doubt)


def _place_doubt(parts: list[FloatArray | None], canvas: Canvas) -> FloatArray | None:
    known = [part for part in parts if part is not None]
    return canvas.place(np.concatenate(known)) if known else None


def _threshold(name: str) -> str:
    return name.removeprefix(THICKER_THAN).replace("_", " ")


def raise_to_ground(depth: CellValues, ground: FloatArray) -> CellValues:
    """Elevations of what is known in depth."""
    low = None if depth.p95 is None else ground - depth.p95
    high = None if depth.p05 is None else ground - depth.p05
    return CellValues(ground - depth.estimate, depth.standard_error, low, high)


def show_where(values: CellValues, shown: BoolArray) -> CellValues:
    """The same, NaN where `shown` (cells,) is false."""
    doubt = (None if part is None else np.where(shown, part, np.nan) for part in values[1:])
    return CellValues(np.where(shown, values.estimate, np.nan), *doubt)


def _summarise(members: FloatArray) -> CellValues:
    low, high = _quantiles(members, (0.05, 0.95))
    return CellValues(members.mean(axis=0), members.std(axis=0), low, high)


def _quantiles(members: FloatArray, shares: tuple[float, ...]) -> FloatArray:
    """Quantiles (shares, cells) over members, each member standing for the middle of an even share.

    As numpy's method "hazen" has them; one sort along members that lie side by side is several times faster.
    """
    ordered = np.sort(np.ascontiguousarray(members.T), axis=1)
    count = ordered.shape[1]
    at = np.clip(np.array(shares) * count - 0.5, 0.0, count - 1.0)
    below = np.floor(at).astype(np.int64)
    above = np.minimum(below + 1, count - 1)
    return np.asarray((ordered[:, below] + (at - below) * (ordered[:, above] - ordered[:, below])).T)
