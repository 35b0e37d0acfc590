"""Surfaces as cloud-optimised GeoTIFFs, each read back before it counts."""

from collections.abc import Callable, Iterable, Iterator, Mapping
from functools import partial
from pathlib import Path

import numpy as np
import pyproj
import rasterio
from numpy.typing import NDArray
from pyproj.crs import CompoundCRS
from rasterio.errors import RasterioError
from rasterio.shutil import copy as copy_raster
from rasterio.windows import Window
from rio_cogeo import cog_validate

from geoves.delivery.dictionary import (
    LENGTH_UNITS,
    PART_TITLES,
    Part,
    RasterWords,
    convert_to_delivery,
    list_rasters,
    name_part,
    name_unit,
)
from geoves.domain.grids import Grid, SurfaceStack
from geoves.domain.region import Region
from geoves.errors import DeliveryError

NODATA = -9999.0
BLOCK = 512
CACHE = 64  # MB of blocks that GDAL may keep; by itself it takes a share of the machine
Strips = Callable[[], Iterable[NDArray[np.float32]]]  # called anew for each pass over a raster's rows
_STAMPED_APART = ("wkt", "unit", "band", "overviews")
LENGTH_STEP = 1.0 / 64.0  # of the length unit: far below any error here, and files four times smaller


def write_rasters(stack: SurfaceStack, region: Region, folder: Path, tags: Mapping[str, str]) -> tuple[Path, ...]:
    """The paths written: one Float32 GeoTIFF a delivered part of each surface that the stack holds.

    Lengths are in the region's length unit, rounded to 1/64 of it; resistivities in ohm m; probabilities 0 to 1.
    `tags` are stamped unread. Elevations carry the height datum in a compound CRS where its unit is the values' own.
    A file stands under its name only once it passed the strict COG check and was read back cell by cell.
    Raises DeliveryError naming the file.
    """
    surfaces = folder / "surfaces"
    try:
        surfaces.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise DeliveryError(f"the folder {surfaces} cannot be made: {error.strerror}") from error
    written = []
    for words in list_rasters(stack.surfaces):
        surface = stack.surfaces[words.name]
        for part in words.parts:
            values = getattr(surface, part)
            if values is None:
                raise DeliveryError(f"{words.name}: the surface has no {part}, which the delivery holds")
            path = surfaces / f"{name_part(words.name, part)}.tif"
            strips = partial(_encode_strips, values, words, region)
            _write_verified(path, strips, stack.grid, _describe(words, part, region), tags)
            written.append(path)
    return tuple(written)


def describe_vertical(region: Region) -> tuple[pyproj.CRS | None, str]:
    """The height CRS that elevations may carry, or None, and a remark for people.

    None where no datum is declared, or where it counts in another unit than the values: nothing is converted.
    """
    if region.vertical_datum is None:
        return None, "no height datum is declared"
    vertical = pyproj.CRS.from_user_input(region.vertical_datum)
    named = f"heights refer to {vertical.name} ({region.vertical_datum})"
    metres = vertical.axis_info[0].unit_conversion_factor
    if not np.isclose(metres, region.metres_per_length_unit, rtol=1e-9, atol=0.0):
        unit = vertical.axis_info[0].unit_name
        return None, (
            f"{named}, whose own unit is the {unit}; the values are in {LENGTH_UNITS[region.length_unit]}, "
            "so the datum is stated here and not in the CRS"
        )
    return vertical, named


def _encode_strips(values: NDArray[np.float64], words: RasterWords, region: Region) -> Iterator[NDArray[np.float32]]:
    """Values in the delivery's unit as Float32, lengths rounded, blanks set to nodata: BLOCK rows at a time.

    No second copy of the whole surface is ever held.
    """
    for row in range(0, values.shape[0], BLOCK):
        converted = convert_to_delivery(values[row : row + BLOCK], words.kind, region.metres_per_length_unit)
        if words.kind == "length":
            converted = np.round(converted / LENGTH_STEP) * LENGTH_STEP
        yield np.where(np.isfinite(converted), converted, NODATA).astype(np.float32)


def _describe(words: RasterWords, part: Part, region: Region) -> dict[str, str]:
    """CRS, band description, unit and tags of one raster."""
    crs = pyproj.CRS.from_user_input(region.crs)
    described = {"title": words.title, "meaning": words.description}
    if part != "estimate":
        described["part"] = PART_TITLES[part]
    if words.kind == "length":
        described["rounding"] = f"values are rounded to 1/64 {region.length_unit}"
    if words.elevation:
        vertical, remark = describe_vertical(region)
        described["height_datum"] = remark
        if vertical is not None and part != "standard_error":
            crs = CompoundCRS(f"{crs.name} + {vertical.name}", [crs, vertical])
    if words.codes:
        described["codes"] = "; ".join(f"{code}: {meaning}" for code, meaning in words.codes.items())
    described["overviews"] = "MODE" if words.kind == "code" else "AVERAGE"
    described["wkt"] = crs.to_wkt()
    described["unit"] = name_unit(words.kind, region.length_unit) or "1"
    described["band"] = ", ".join(filter(None, (words.title, PART_TITLES[part])))
    return described


def _write_verified(
    path: Path, strips: Strips, grid: Grid, described: Mapping[str, str], tags: Mapping[str, str]
) -> None:
    plain, optimised = path.with_suffix(".plain.tmp"), path.with_suffix(".cog.tmp")
    try:
        # Statistics in a side file would be a second file to keep; without a valid cell there are none to take.
        with rasterio.Env(GDAL_PAM_ENABLED="NO", GDAL_NUM_THREADS="1", GDAL_CACHEMAX=CACHE):
            filled = _write_plain(plain, strips(), grid, described, tags)
            copy_raster(
                plain,
                optimised,
                driver="COG",
                COMPRESS="DEFLATE",
                PREDICTOR="YES",
                BLOCKSIZE=str(BLOCK),
                OVERVIEW_RESAMPLING=described["overviews"],
                STATISTICS="YES" if filled else "NO",
                BIGTIFF="IF_SAFER",
            )
            _verify(optimised, strips(), grid)
        optimised.replace(path)
    except DeliveryError:
        raise
    except (RasterioError, OSError) as error:
        raise DeliveryError(f"{path.name} could not be written: {error}") from error
    finally:
        plain.unlink(missing_ok=True)
        optimised.unlink(missing_ok=True)


def _write_plain(
    path: Path,
    strips: Iterable[NDArray[np.float32]],
    grid: Grid,
    described: Mapping[str, str],
    tags: Mapping[str, str],
) -> bool:
    """An ordinary tiled GeoTIFF: everything is stamped here, since a tag edited later would break the COG's order.

    Whether any cell holds a value.
    """
    filled = False
    with rasterio.open(
        path,
        "w",
        driver="GTiff",
        width=grid.n_columns,
        height=grid.n_rows,
        count=1,
        dtype="float32",
        nodata=NODATA,
        crs=rasterio.CRS.from_wkt(described["wkt"]),
        transform=_place_cells(grid),
        tiled=True,
        blockxsize=BLOCK,
        blockysize=BLOCK,
        bigtiff="IF_SAFER",
    ) as target:
        for index, strip in enumerate(strips):
            target.write(strip, 1, window=Window(0, index * BLOCK, grid.n_columns, strip.shape[0]))
            filled = filled or bool(np.any(strip != NODATA))
        target.set_band_description(1, described["band"])
        target.set_band_unit(1, described["unit"])
        stamped = {key: described[key] for key in described if key not in _STAMPED_APART}
        target.update_tags(AREA_OR_POINT="Area", **{**tags, **stamped})
    return filled


def _place_cells(grid: Grid) -> rasterio.Affine:
    return rasterio.Affine(grid.cell_size, 0.0, grid.west, 0.0, -grid.cell_size, grid.north)


def _verify(path: Path, strips: Iterable[NDArray[np.float32]], grid: Grid) -> None:
    valid, errors, warnings = cog_validate(path, strict=True, quiet=True)
    if not valid:
        raise DeliveryError(f"{path.name} is not a valid cloud-optimised GeoTIFF: {'; '.join((*errors, *warnings))}")
    with rasterio.open(path) as source:
        expected = (NODATA, grid.shape, _place_cells(grid))
        if (source.nodata, source.shape, source.transform) != expected or source.dtypes != ("float32",):
            raise DeliveryError(f"{path.name} did not keep its nodata value, place or type")
        for index, strip in enumerate(strips):
            if not np.array_equal(source.read(1, window=Window(0, index * BLOCK, grid.n_columns, len(strip))), strip):
                raise DeliveryError(f"{path.name} reads back with other values than were written")
