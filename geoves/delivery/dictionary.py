"""What each raster is called and means, and how columns are described: with layer_words, all words of the delivery."""

from collections.abc import Iterable, Mapping
from types import MappingProxyType
from typing import Any, Literal

import attrs

from geoves.domain.region import LengthUnit

Kind = Literal[
    "text",
    "count",
    "flag",
    "length",
    "area",
    "resistivity",
    "percent",
    "fraction",
    "ratio",
    "slope",
    "angle",
    "conductance",
    "layer_conductance",
    "layer_resistance",
    "voltage",
    "current",
    "resistance",
    "code",
]
Part = Literal["estimate", "standard_error", "p05", "p95"]
Geometry = Literal["Point", "LineString", "Polygon"]

LENGTH_UNITS = MappingProxyType({"m": "metres", "ft": "feet", "us-ft": "US survey feet"})
PART_TITLES: Mapping[Part, str] = MappingProxyType(
    {
        "estimate": "",
        "standard_error": "standard error",
        "p05": "5 % quantile",
        "p95": "95 % quantile",
    }
)


@attrs.frozen
class Column:
    """One column: its kind fixes its unit; `codes` names what a coded text may say, `span` what a number may be."""

    name: str
    title: str
    description: str
    kind: Kind = "text"
    codes: Mapping[str, str] = attrs.field(factory=dict)
    span: tuple[float, float] | None = None


@attrs.frozen
class LayerWords:
    """One layer of the GeoPackage; its columns in the order in which they are written."""

    name: str
    title: str
    description: str
    geometry: Geometry
    columns: tuple[Column, ...]


@attrs.frozen
class RasterWords:
    """One surface as rasters: which of its parts are delivered, what its values are, whose test judges it.

    codes : what each value of a raster of codes means
    """

    name: str
    title: str
    description: str
    kind: Literal["length", "resistivity", "fraction", "code"]
    parts: tuple[Part, ...] = ("estimate",)
    elevation: bool = False
    judged_by: str = ""
    codes: Mapping[int, str] = attrs.field(factory=dict)


_ALL_PARTS: tuple[Part, ...] = ("estimate", "standard_error", "p05", "p95")

RASTERS: Mapping[str, RasterWords] = MappingProxyType(
    {
        words.name: words
        for words in (
            RasterWords(
                "bedrock_elevation",
                "Bedrock elevation",
                "Elevation of the top of bedrock: the mean of what the data allow.",
                "length",
                _ALL_PARTS,
                elevation=True,
            ),
            RasterWords(
                "bedrock_depth",
                "Depth to bedrock",
                "Depth from the land surface to the top of bedrock.",
                "length",
                judged_by="bedrock_elevation",
            ),
            RasterWords(
                "deep_gravel_thickness",
                "Thickness of the deep gravel",
                "Thickness of the deep aquifer, its absence counted as 0: the mean of what the data allow.",
                "length",
                _ALL_PARTS,
            ),
            RasterWords(
                "deep_gravel_top_elevation",
                "Elevation of the top of the deep gravel",
                "Bedrock elevation plus thickness of the deep gravel; blank where its probability is below 0.05.",
                "length",
                elevation=True,
                judged_by="deep_gravel_thickness",
            ),
            RasterWords(
                "deep_gravel_probability",
                "Probability of deep gravel",
                "Probability that at least 1 m of the deep aquifer is there.",
                "fraction",
                judged_by="deep_gravel_thickness",
            ),
            RasterWords(
                "shallow_aquifer_resistivity",
                "Resistivity of the shallow aquifer",
                "Resistivity of the shallow aquifer: the median of what the data allow.",
                "resistivity",
                ("estimate", "p05", "p95"),
            ),
            RasterWords(
                "shallow_aquifer_probability",
                "Probability of the shallow aquifer",
                "Probability that at least 1 m of the shallow aquifer is there.",
                "fraction",
                judged_by="shallow_aquifer_thickness",
            ),
        )
    }
)

# Beside them, where the template and the evidence allow.
MORE_RASTERS: Mapping[str, RasterWords] = MappingProxyType(
    {
        words.name: words
        for words in (
            RasterWords(
                "deep_gravel_top_depth",
                "Depth to the top of the deep gravel",
                "Depth to the deep gravel, were it there; blank where its probability is below 0.05.",
                "length",
                ("estimate", "p05", "p95"),
                judged_by="bedrock_elevation",
            ),
            RasterWords(
                "cover_thickness",
                "Thickness of the cover",
                "Thickness of the cover at the surface, its absence counted as 0: the mean of what the data allow.",
                "length",
                _ALL_PARTS,
            ),
            RasterWords(
                "shallow_aquifer_thickness",
                "Thickness of the shallow aquifer",
                "Thickness of the shallow aquifer, its absence counted as 0: the mean of what the data allow.",
                "length",
                _ALL_PARTS,
            ),
            RasterWords(
                "confining_unit_thickness",
                "Thickness of the confining unit",
                "Thickness of the clay that protects the deep gravel: what cover and shallow aquifer leave above it. "
                "It is inferred, not measured, and holes in it narrower than the soundings' spacing are not seen.",
                "length",
                _ALL_PARTS,
                judged_by="bedrock_elevation",
            ),
            RasterWords(
                "support",
                "What a cell rests on",
                "Which data of the basal contact lie within the reach of a cell; blank where no surface is drawn.",
                "code",
                codes={
                    0: "none: it is carried in from farther away",
                    1: "one datum",
                    2: "soundings alone",
                    3: "wells, or wells and soundings",
                },
            ),
        )
    }
)
_THICKER_THAN = "deep_gravel_thicker_than_"


def find_raster(name: str) -> RasterWords | None:
    """The words for a surface; None for one that is not delivered.

    >>> find_raster("deep_gravel_thicker_than_5_m").title
    'Probability that the deep gravel is thicker than 5 m'
    """
    if name.startswith(_THICKER_THAN):
        limit = name.removeprefix(_THICKER_THAN).replace("_", " ")
        title = f"Probability that the deep gravel is thicker than {limit}"
        return RasterWords(name, title, f"{title}.", "fraction", judged_by="deep_gravel_thickness")
    return RASTERS.get(name) or MORE_RASTERS.get(name)


def list_rasters(names: Iterable[str]) -> tuple[RasterWords, ...]:
    """The words for those surfaces among `names` that are delivered, the contract's own first."""
    order = [*RASTERS, *MORE_RASTERS]
    found = {words.name: words for words in map(find_raster, names) if words is not None}
    return tuple(sorted(found.values(), key=lambda words: order.index(words.name) if words.name in order else 99))


def name_unit(kind: Kind, length_unit: LengthUnit) -> str:
    """The unit of a kind of column as it stands in the delivery; empty where it has none.

    >>> name_unit("length", "us-ft"), name_unit("area", "ft"), name_unit("resistivity", "m")
    ('us-ft', 'mi²', 'ohm m')
    """
    units = {
        "length": length_unit,
        "area": "km²" if length_unit == "m" else "mi²",
        "resistivity": "ohm m",
        "percent": "%",
        "angle": "degrees",
        "conductance": "µS/cm",
        "layer_conductance": "S",
        "voltage": "mV",
        "current": "mA",
        "resistance": "ohm",
        "layer_resistance": "ohm m²",
    }
    return units.get(kind, "")


def name_part(name: str, part: Part) -> str:
    """A raster's name without its ending.

    >>> name_part("bedrock_elevation", "p05")
    'bedrock_elevation_p05'
    """
    return name if part == "estimate" else f"{name}_{part}"


def convert_to_delivery(values: Any, kind: Kind, metres_per_length_unit: float) -> Any:
    """SI values of a kind in the delivery's unit: lengths in the region's, areas in km² or square miles."""
    if kind == "length":
        return values / metres_per_length_unit
    if kind == "area":
        square_mile = (5280.0 * metres_per_length_unit) ** 2
        return values / (1e6 if metres_per_length_unit == 1.0 else square_mile)
    return values
