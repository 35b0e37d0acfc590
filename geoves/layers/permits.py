"""What the surfaces say at each permit: averaged over its circle where its place is uncertain, never more precise."""

from collections.abc import Mapping, Sequence

import attrs
import geopandas
import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from geoves.domain.arrays import FloatArray
from geoves.domain.grids import SurfaceStack
from geoves.domain.region import Region
from geoves.domain.survey import Permit
from geoves.layers.options import LayerOptions
from geoves.layers.sampling import average_neighbours, find_covered, spread_points, weigh_neighbours

Z90 = 1.6449  # half the 90 % band of a normal, in standard deviations
LEAST_PRESENT = 0.05  # a smaller probability says nothing of how thick the gravel is that might be there
EVEN = 0.5
STRADDLES = 0.05  # a circle straddles where each answer holds in more than this share of it
_CHUNK = 400_000  # places sampled at once: some tens of MB

FloatColumns = Mapping[str, FloatArray]
_LENGTHS = ("bedrock_depth", "gravel_top_depth", "gravel_thickness")
VALUES = tuple(f"{name}{band}" for name in _LENGTHS for band in ("", "_p05", "_p95"))


@attrs.frozen
class Places:
    """Where permits are asked for: coordinates in the CRS, the circle's radius in its unit (0: a point), depth in m."""

    easting: FloatArray
    northing: FloatArray
    radius: FloatArray
    requested_depth: FloatArray


def judge_permits(
    stack: SurfaceStack, permits: Sequence[Permit], region: Region, options: LayerOptions
) -> geopandas.GeoDataFrame:
    """Every permit in its order with what the surfaces say there; NaN and covered False beyond them.

    With a radius, estimates and probabilities are means over the circle's covered part and the quantiles its extremes.
    `over_gravel` and `reaches_gravel` say "likely" or "unlikely", and "undetermined" where the odds are near even or
    where the circle straddles: one answer for a part of it, the other for the rest.
    """
    easting = np.array([permit.easting for permit in permits], float)
    northing = np.array([permit.northing for permit in permits], float)
    accuracy = _optional([permit.location_accuracy for permit in permits])
    depth = _optional([permit.requested_depth for permit in permits])
    places = Places(easting, northing, np.nan_to_num(accuracy) / region.crs_unit_metres, depth)
    told = _tell(stack, places, options)
    columns: dict[str, NDArray] = {
        "permit": np.array([permit.name for permit in permits], dtype=object),
        "use": np.array([permit.use for permit in permits], dtype=object),
        "requested_depth": depth,
        "location_method": np.array([permit.location_method for permit in permits], dtype=object),
        "location_accuracy": accuracy,
        **told,
    }
    return geopandas.GeoDataFrame(columns, geometry=geopandas.points_from_xy(easting, northing), crs=region.crs)


def _tell(stack: SurfaceStack, places: Places, options: LayerOptions) -> dict[str, NDArray]:
    """Columns of what the surfaces say, over points and over circles, a chunk of permits at a time."""
    count = places.easting.size
    covered = find_covered(stack, places.easting, places.northing)
    numbers = (*VALUES, "gravel_probability", "gravel_share", "reach_probability", "reach_share", "covered_share")
    columns: dict[str, NDArray] = {name: np.full(count, np.nan) for name in numbers}
    in_circle = places.radius > 0.0
    for chosen, points in ((np.flatnonzero(~in_circle), 1), (np.flatnonzero(in_circle), options.circle_points)):
        for chunk in np.array_split(chosen, max(1, -(-chosen.size * points // _CHUNK))):
            if chunk.size:
                _tell_chunk(stack, places, columns, chunk, points)
    for name, values in columns.items():
        if name != "covered_share":
            values[~covered] = np.nan
    likely = options.likely
    over = _word(columns["gravel_probability"], columns.pop("gravel_share"), likely)
    reaches = _word(columns["reach_probability"], columns.pop("reach_share"), likely)
    shares = {"covered": covered, "covered_share": columns.pop("covered_share")}
    return shares | columns | {"over_gravel": over, "reaches_gravel": reaches}


def _tell_chunk(
    stack: SurfaceStack, places: Places, columns: dict[str, NDArray], chosen: NDArray[np.intp], points: int
) -> None:
    """Fill the columns of the chosen permits from `points` places in each one's circle, or from its very place."""
    easting, northing = places.easting[chosen, None], places.northing[chosen, None]
    if points > 1:
        across, along = spread_points(points)
        radius = places.radius[chosen, None]
        easting, northing = easting + radius * across, northing + radius * along
    within = find_covered(stack, easting, northing)
    columns["covered_share"][chosen] = within.mean(axis=1)
    values = _read_depths(stack, easting, northing, within)
    for name in VALUES:
        columns[name][chosen] = _summarise(values[name], name)
    chance = values["gravel_probability"]
    columns["gravel_probability"][chosen] = _mean(chance)
    columns["gravel_share"][chosen] = _mean(np.where(np.isfinite(chance), chance > EVEN, np.nan))
    reach = _reach_probability(values, places.requested_depth[chosen, None])
    columns["reach_probability"][chosen] = _mean(reach)
    columns["reach_share"][chosen] = _mean(np.where(np.isfinite(reach), reach > EVEN, np.nan))


def _summarise(values: FloatArray, name: str) -> FloatArray:
    """Of each row its mean, or for a quantile the extreme; NaN where nothing is known."""
    known = np.isfinite(values)
    if name.endswith("_p05"):
        summary = np.min(values, axis=1, where=known, initial=np.inf)
    elif name.endswith("_p95"):
        summary = np.max(values, axis=1, where=known, initial=-np.inf)
    else:
        return _mean(values)
    return np.where(known.any(axis=1), summary, np.nan)


def _mean(values: FloatArray) -> FloatArray:
    """The mean of each row's known values, NaN where there is none."""
    known = np.isfinite(values)
    total = np.where(known, values, 0.0).sum(axis=1)
    return np.where(known.any(axis=1), total / np.maximum(known.sum(axis=1), 1), np.nan)


def _word(probability: FloatArray, share: FloatArray, likely: float) -> NDArray:
    """likely, unlikely or undetermined; None where nothing is known."""
    straddles = (share > STRADDLES) & (share < 1.0 - STRADDLES)
    words = np.full(probability.shape, "undetermined", dtype=object)
    words[~straddles & (probability >= likely)] = "likely"
    words[~straddles & (probability <= 1.0 - likely)] = "unlikely"
    words[~np.isfinite(probability)] = None
    return words


def _read_depths(
    stack: SurfaceStack, easting: FloatArray, northing: FloatArray, within: NDArray[np.bool_]
) -> dict[str, FloatArray]:
    """Every quantity that a permit is told at places of one shape, in m and 0 to 1; NaN where the stack lacks it.

    Quantiles of a depth are the ground less the opposite quantile of the elevation. Where the top of the gravel has no
    quantiles of its own, those of bedrock and thickness are added end to end, which is wider than the truth.
    """
    read = _Reader(stack, easting, northing, within)
    ground = read.ground()
    rock, high, low = (read.part("bedrock_elevation", part) for part in ("estimate", "p95", "p05"))
    thick, thin, thickest = (read.part("deep_gravel_thickness", part) for part in ("estimate", "p05", "p95"))
    top, top_high, top_low = (read.part("deep_gravel_top_elevation", part) for part in ("estimate", "p95", "p05"))
    shown = np.isfinite(top)
    top_high = np.where(np.isfinite(top_high), top_high, np.where(shown, high + thickest, np.nan))
    top_low = np.where(np.isfinite(top_low), top_low, np.where(shown, low + thin, np.nan))
    values = {
        "bedrock_depth": ground - rock,
        "bedrock_depth_p05": ground - high,
        "bedrock_depth_p95": ground - low,
        "gravel_top_depth": ground - top,
        "gravel_top_depth_p05": ground - top_high,
        "gravel_top_depth_p95": ground - top_low,
        "gravel_thickness": thick,
        "gravel_thickness_p05": thin,
        "gravel_thickness_p95": thickest,
        "gravel_probability": read.part("deep_gravel_probability", "estimate"),
        "gravel_thickness_error": read.part("deep_gravel_thickness", "standard_error"),
    }
    return {name: np.maximum(one, 0.0) for name, one in values.items()}


def _reach_probability(values: FloatColumns, requested: FloatArray) -> FloatArray:
    """Probability that gravel is there and begins above the requested depth; NaN where none was asked for.

    A thickness counts absence as 0, so that mean and mean square over the probability are those of gravel that is
    there. Its top is rock's depth less that thickness, the two taken as independent and normal.
    """
    chance = values["gravel_probability"]
    present = np.maximum(chance, LEAST_PRESENT)
    thick, error = values["gravel_thickness"], np.nan_to_num(values["gravel_thickness_error"])
    there = thick / present
    variance = np.maximum((error**2 + thick**2) / present - there**2, 0.0)
    band = np.nan_to_num(values["bedrock_depth_p95"] - values["bedrock_depth_p05"])
    spread = np.sqrt(variance + (band / (2.0 * Z90)) ** 2)
    shallower = ndtr((requested - (values["bedrock_depth"] - there)) / np.maximum(spread, 1e-6))
    return np.where(np.isfinite(requested), chance * shallower, np.nan)


class _Reader:
    """Values of grids at the same places: which cells surround each, and how much each weighs, is found once."""

    def __init__(
        self, stack: SurfaceStack, easting: FloatArray, northing: FloatArray, within: NDArray[np.bool_]
    ) -> None:
        self.stack, self.within = stack, within
        self.cells, self.weights = weigh_neighbours(stack.grid, easting, northing)

    def ground(self) -> FloatArray:
        return self._sample(self.stack.ground)

    def part(self, name: str, field: str) -> FloatArray:
        surface = self.stack.surfaces.get(name)
        values = None if surface is None else getattr(surface, field)
        return np.full(self.within.shape, np.nan) if values is None else self._sample(values)

    def _sample(self, values: FloatArray) -> FloatArray:
        return np.where(self.within, average_neighbours(values, self.cells, self.weights), np.nan)


def _optional(values: Sequence[float | None]) -> FloatArray:
    return np.array([np.nan if value is None else value for value in values], float)
