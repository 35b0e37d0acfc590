"""plan.gpkg: the places of a plan as a layer."""

from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType

from geoves.delivery.dictionary import Column, Kind, LayerWords
from geoves.delivery.geopackage import make_layer, write_database
from geoves.domain.plans import NextPlace, Plan
from geoves.domain.results import Results

KINDS = MappingProxyType({"sounding": "a sounding", "test_hole": "a test hole, logged"})
_ABOUT = MappingProxyType({"bedrock": "bedrock's elevation", "gravel": "the presence of deep gravel"})


def write_plan_layer(plan: Plan, results: Results, path: Path, tags: Mapping[str, str]) -> Path:
    """`path`, a GeoPackage with the layer next_places in the region's CRS and length unit. Raises DeliveryError."""
    layer = make_layer(describe_layer(plan), [_make_row(place) for place in plan.places], results)
    return write_database([layer], path, results, None, tags)


def describe_layer(plan: Plan) -> LayerWords:
    """What the layer and its columns are called and mean; doubts are lengths or probabilities by what was asked."""
    doubt: Kind = "length" if plan.about == "bedrock" else "fraction"
    what = _ABOUT[plan.about]
    asked = "over the mapped area" if plan.at == "grid" else "at the permits"
    return LayerWords(
        "next_places",
        "Where to measure next",
        f"Places at which one more measurement is expected to lower the doubt about {what} most, {asked}. "
        "Expected, not promised; none of them is a well site.",
        "Point",
        (
            Column("rank", "Rank", "1 first; each is chosen as if those before it had been measured.", "count"),
            Column("kind", "Kind", "What to do there.", codes=KINDS),
            Column("ab2", "AB/2", "Longest half current spacing that a sounding needs there.", "length"),
            Column(
                "lowering",
                "Expected lowering",
                f"By how much the root mean square of the standard error of {what}, {asked}, is expected to fall.",
                doubt,
            ),
            Column("doubt_now", "Doubt there now", f"Standard error of {what} there, before anything is done.", doubt),
            Column(
                "doubt_then",
                "Doubt there then",
                "The same once this place and those before it are measured.",
                doubt,
            ),
            Column("by_sounding", "Lowering by a sounding", "Were a sounding made there at this rank.", doubt),
            Column("by_test_hole", "Lowering by a test hole", "Were a test hole drilled there at this rank.", doubt),
            Column("basal_depth", "Depth to drill or see", "Of the top of gravel or rock, as expected.", "length"),
            Column("nearest", "Nearest known place", "Name of the nearest sounding or well."),
            Column("distance", "Distance to it", "On the ground.", "length"),
            Column("x", "X", "Easting in the CRS.", "ratio"),
            Column("y", "Y", "Northing in the CRS.", "ratio"),
        ),
    )


def _make_row(place: NextPlace) -> dict[str, object]:
    return {
        "place_at": (place.easting, place.northing),
        "rank": place.rank,
        "kind": place.kind,
        "ab2": place.spacing,
        "lowering": place.lowering,
        "doubt_now": place.doubt_now,
        "doubt_then": place.doubt_then,
        "by_sounding": place.by_sounding,
        "by_test_hole": place.by_test_hole,
        "basal_depth": place.depth,
        "nearest": place.nearest,
        "distance": place.distance,
        "x": place.easting,
        "y": place.northing,
    }
