"""The one grid of a region, laid over its boundary or its places."""

from collections.abc import Sequence
from typing import Any

import numpy as np

from geoves.domain.findings import Finding
from geoves.domain.grids import Grid
from geoves.domain.region import Region
from geoves.domain.survey import Sounding, Well

# Without a boundary the grid reaches this far beyond the places: a share of their extent, and so many cells at least.
_MARGIN_SHARE = 0.05
_MARGIN_CELLS = 5
_MOST_CELLS = 20_000_000

Place = Sounding | Well


def locations(places: Sequence[Place]) -> list[tuple[float, float]]:
    """Easting and northing of each place."""
    return [(place.easting, place.northing) for place in places]


def lay_grid(region: Region, boundary: Any, places: Sequence[Place], findings: list[Finding]) -> Grid | None:
    """The grid over the boundary, or over the places with a margin; its edges at multiples of the cell size."""
    if boundary is not None:
        extent = np.array(boundary.bounds)
    else:
        located = np.array(locations(places)).reshape(-1, 2)
        located = located[np.isfinite(located).all(axis=1)]
        if not len(located):
            return None
        low, high = located.min(axis=0), located.max(axis=0)
        margin = max(_MARGIN_SHARE * float((high - low).max()), _MARGIN_CELLS * region.cell_size)
        extent = np.concatenate([low - margin, high + margin])
    if not region.cell_size > 0.0:
        return None
    west, south = np.floor(extent[:2] / region.cell_size)
    east, north = np.ceil(extent[2:] / region.cell_size)
    n_columns, n_rows = float(east - west), float(north - south)
    if n_columns * n_rows > _MOST_CELLS:
        words = (
            f"gives a grid of {n_rows:.0f} rows and {n_columns:.0f} columns; expected {_MOST_CELLS:,} cells at most: "
            "a larger cell_size, or look for a misplaced coordinate"
        )
        findings.append(Finding("fault", region.path.name, 0, "region.cell_size", f"{region.cell_size:g}", words))
        return None
    return Grid(
        west=float(west) * region.cell_size,
        north=float(north) * region.cell_size,
        cell_size=region.cell_size,
        n_rows=max(int(n_rows), 1),
        n_columns=max(int(n_columns), 1),
    )
