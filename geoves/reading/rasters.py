"""The raster of the land surface: on the region's grid, and at single places."""

import logging
import warnings
from collections.abc import Iterator, Sequence
from contextlib import contextmanager

import attrs
import numpy as np
import rasterio
from pyproj import Transformer
from rasterio import Affine
from rasterio.enums import Resampling
from rasterio.errors import NotGeoreferencedWarning, RasterioError
from rasterio.vrt import WarpedVRT
from rasterio.windows import Window

from geoves.domain.arrays import FloatArray
from geoves.domain.findings import Finding
from geoves.domain.grids import Grid
from geoves.domain.survey import Ground
from geoves.reading.conversions import extent_of, note_missing_grid
from geoves.reading.delimited import refuse_file
from geoves.reading.soundings import ELEVATION
from geoves.reading.sources import Source

_METRES_OF_WORDS = {"m": 1.0, "metre": 1.0, "meter": 1.0, "metres": 1.0, "meters": 1.0, "ft": 0.3048, "foot": 0.3048}
_METRES_OF_WORDS |= {
    "feet": 0.3048,
    "us survey foot": 1200.0 / 3937.0,
    "us-ft": 1200.0 / 3937.0,
    "ftus": 1200.0 / 3937.0,
}


# What reads a file of which name, a GeoTIFF where none is told. Others are not asked: a virtual raster, whatever its
# name, would lead to other files and addresses.
_DRIVERS = {".asc": "AAIGrid", ".img": "HFA", ".bil": "EHdr", ".flt": "EHdr", ".hgt": "SRTMHGT", ".dem": "USGSDEM"}

_log = logging.getLogger(__name__)


@attrs.frozen
class GroundReading:
    """The ground raster, `file` as region.toml names it: on the grid, None where there is no grid, and at the places
    asked for (n,) m, NaN off it.
    """

    file: str
    ground: Ground | None
    at_places: FloatArray


def read_ground(
    source: Source, crs: str, grid: Grid | None, places: Sequence[tuple[float, float]], findings: list[Finding]
) -> GroundReading | None:
    """The land surface in m, resampled bilinearly; None with a fault where the file is no raster of elevations."""
    try:
        with _unwarned(), rasterio.open(source.path, driver=_DRIVERS.get(source.suffix, "GTiff")) as raster:
            if expected := _unfit(raster):
                refuse_file(source, expected, findings)
                return None
            own = raster.crs.to_wkt()
            note_missing_grid(source.typed, own, crs, extent_of(tuple(raster.bounds), own), findings)
            _doubt_units(raster, source, findings)
            at_places = _sample(raster, crs, places) * source.metres
            on_grid = None if grid is None else _resample(raster, crs, grid) * source.metres
    except (RasterioError, OSError, ValueError) as error:
        _log.debug("%s: %s", source.typed, error)
        refuse_file(source, "not a raster that can be read; expected a whole GeoTIFF of elevations", findings)
        return None
    _check_elevations(source, at_places if on_grid is None else on_grid, findings)
    return GroundReading(source.typed, None if grid is None or on_grid is None else Ground(grid, on_grid), at_places)


@contextmanager
def _unwarned() -> Iterator[None]:
    """Without the warning that a raster has no place, which is said here in other words."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", NotGeoreferencedWarning)
        yield


def _unfit(raster: rasterio.DatasetReader) -> str:
    """Why the raster cannot serve as the ground, in words; empty where it can."""
    if raster.count != 1:
        return f"{raster.count} bands; expected a raster of one band: the elevation of the land surface"
    if raster.crs is None:
        return "does not say its CRS; expected a raster that does"
    if np.issubdtype(np.dtype(raster.dtypes[0]), np.complexfloating):
        return "holds complex numbers; expected elevations"
    return ""


def _doubt_units(raster: rasterio.DatasetReader, source: Source, findings: list[Finding]) -> None:
    stated = (raster.units[0] or "").strip()
    metres = _METRES_OF_WORDS.get(stated.lower())
    if metres is not None and abs(metres - source.metres) > 1e-3:
        words = (
            "the raster says this unit for its heights; region.toml another, which is taken: see [input_length_unit]"
        )
        findings.append(Finding("doubt", source.typed, 0, "", stated, words))


def _resample(raster: rasterio.DatasetReader, crs: str, grid: Grid) -> FloatArray:
    """Elevations at the grid's cells, in the raster's unit, NaN where it has none."""
    transform = Affine(grid.cell_size, 0.0, grid.west, 0.0, -grid.cell_size, grid.north)
    with WarpedVRT(
        raster,
        crs=crs,
        transform=transform,
        height=grid.n_rows,
        width=grid.n_columns,
        resampling=Resampling.bilinear,
        src_nodata=raster.nodata,
        nodata=np.nan,
        dtype="float32",
    ) as warped:
        return np.asarray(warped.read(1, masked=True).filled(np.nan), dtype=np.float64)


def _sample(raster: rasterio.DatasetReader, crs: str, places: Sequence[tuple[float, float]]) -> FloatArray:
    """Bilinear elevations at the places, in the raster's unit, NaN off the raster and beside cells without a value."""
    array = np.array(places, dtype=np.float64).reshape(-1, 2)
    x, y = Transformer.from_crs(crs, raster.crs, always_xy=True).transform(array[:, 0], array[:, 1])
    inverse = ~raster.transform
    column = inverse.a * x + inverse.b * y + inverse.c - 0.5
    row = inverse.d * x + inverse.e * y + inverse.f - 0.5
    return np.array([_bilinear(raster, one_row, one_column) for one_row, one_column in zip(row, column, strict=True)])


def _bilinear(raster: rasterio.DatasetReader, row: float, column: float) -> float:
    """Between the centres of the four cells around; at the raster's edge, from those that there are."""
    if not (-0.5 <= row <= raster.height - 0.5 and -0.5 <= column <= raster.width - 0.5):
        return np.nan
    top, left = int(np.floor(row)), int(np.floor(column))
    first_row, first_column = max(top, 0), max(left, 0)
    last_row, last_column = min(top + 1, raster.height - 1), min(left + 1, raster.width - 1)
    window = Window(first_column, first_row, last_column - first_column + 1, last_row - first_row + 1)
    values = raster.read(1, window=window, masked=True).astype(np.float64).filled(np.nan)
    weight = np.outer(
        1.0 - np.abs(row - np.arange(first_row, last_row + 1)),
        1.0 - np.abs(column - np.arange(first_column, last_column + 1)),
    )
    needed = weight > 0.0
    return float(np.sum(values[needed] * weight[needed]) / np.sum(weight[needed]))


def _check_elevations(source: Source, elevation: FloatArray, findings: list[Finding]) -> None:
    known = elevation[np.isfinite(elevation)]
    if known.size == 0:
        refuse_file(source, "has no elevation anywhere in the region; expected a raster that covers it", findings)
    elif not (ELEVATION.lower <= known.min() and known.max() <= ELEVATION.upper):
        extreme = known.min() if known.min() < ELEVATION.lower else known.max()
        words = f"expected {ELEVATION.words}; declare the raster's nodata value, or its unit in [input_length_unit]"
        findings.append(Finding("fault", source.typed, 0, "", f"{extreme / source.metres:.6g}", words))
