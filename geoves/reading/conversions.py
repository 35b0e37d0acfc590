"""Conversions between CRSs: refused where the grid that a good one needs is not installed."""

import warnings
from functools import lru_cache
from typing import Any

import attrs
import pyproj
from pyproj.aoi import AreaOfInterest
from pyproj.transformer import TransformerGroup

from geoves.domain.findings import Finding, Severity

# A conversion whose accuracy is stated and no worse than this serves without the better one's grid, m.
GOOD_ENOUGH = 5.0
# Datums whose versions differ by a metre or two: a doubt, not a fault, where the grid between them is absent.
_ONE_FAMILY = (("NAD83", "North American Datum 1983"), ("ETRS89", "European Terrestrial"))

Extent = tuple[float, float, float, float]  # west, south, east, north in degrees


@attrs.frozen
class MissingGrid:
    """What a conversion lacks: in words, and how grave it is."""

    severity: Severity
    words: str


def note_missing_grid(
    file: str, source: str, target: str, extent: Extent | None, findings: list[Finding], row: int = 0
) -> None:
    """Note that the conversion from `source` to `target`, which the file needs, lacks its grid, where it does."""
    lacking = find_missing_grid(source, target, extent)
    if lacking is not None:
        findings.append(Finding(lacking.severity, file, row, "", "", lacking.words, check="missing_grid"))


@lru_cache(maxsize=64)
def find_missing_grid(source: str, target: str, extent: Extent | None) -> MissingGrid | None:
    """What the conversion between two CRSs lacks over an extent, None where it is good enough or needs no grid.

    PROJ falls back to a conversion without the datum shift where its grid is absent, and says nothing.
    """
    first, second = pyproj.CRS.from_user_input(source), pyproj.CRS.from_user_input(target)
    if first.equals(second, ignore_axis_order=True):
        return None
    area: Any = None if extent is None else AreaOfInterest(*extent)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # of the grid that is told here in other words
        group = TransformerGroup(first, second, always_xy=True, area_of_interest=area)
    accuracy = group.transformers[0].accuracy if group.transformers else -1.0
    if 0.0 <= accuracy <= GOOD_ENOUGH or not group.unavailable_operations:
        return None
    better = min(group.unavailable_operations, key=lambda one: one.accuracy if one.accuracy >= 0 else 1e9)
    grids = [grid.short_name for grid in better.grids if not grid.available]
    if not grids:
        return None
    known = f"is good to {accuracy:g} m only" if accuracy > 0 else "leaves the datum shift out"
    names = " and ".join(grids)
    words = (
        f"the conversion from {first.name} to {second.name} needs the grid {names}, which is not installed, and "
        f"{known} without it; install it (projsync --file {grids[0]}), or convert the file with a GIS that has it"
    )
    return MissingGrid("doubt" if _is_one_family(first, second) else "fault", words)


def _is_one_family(first: pyproj.CRS, second: pyproj.CRS) -> bool:
    names = [f"{crs.name} {crs.datum.name if crs.datum else ''} {_base_name(crs)}" for crs in (first, second)]
    return any(all(any(word in name for word in family) for name in names) for family in _ONE_FAMILY)


def _base_name(crs: pyproj.CRS) -> str:
    return crs.geodetic_crs.name if crs.geodetic_crs is not None else ""


def extent_of(bounds: tuple[float, float, float, float], crs: str) -> Extent | None:
    """The extent in degrees of bounds in a CRS, on that CRS's own datum; None where it has none."""
    own = pyproj.CRS.from_user_input(crs)
    if own.geodetic_crs is None:
        return None
    transformer = pyproj.Transformer.from_crs(own, own.geodetic_crs, always_xy=True)
    try:
        west, south, east, north = transformer.transform_bounds(*bounds)
    except pyproj.exceptions.ProjError:
        return None
    if not (-180.0 <= west <= east <= 180.0 and -90.0 <= south <= north <= 90.0):
        return None
    return west, south, east, north
