"""All layers that follow from the surfaces."""

from collections.abc import Mapping

import geopandas

from geoves.domain.grids import SurfaceStack
from geoves.domain.region import Region
from geoves.domain.survey import Survey
from geoves.layers.lines import draw_contours, outline_gravel
from geoves.layers.options import LayerOptions
from geoves.layers.permits import judge_permits
from geoves.layers.valleys import draw_valleys


def derive_layers(
    stack: SurfaceStack, survey: Survey, region: Region, options: LayerOptions | None = None
) -> Mapping[str, geopandas.GeoDataFrame]:
    """The layers bedrock_contours, thickness_contours, valley_axis, valley_stations, gravel_extent and permits.

    Geometries are in the region's CRS; columns are SI and named as the contract names them. A layer whose surface the
    stack lacks, or that finds nothing, is empty but has its columns.
    """
    options = options or LayerOptions()
    surfaces = stack.surfaces
    axis, stations = draw_valleys(stack, region, options)
    return {
        "bedrock_contours": draw_contours(surfaces.get("bedrock_elevation"), "elevation", region, options),
        "thickness_contours": draw_contours(surfaces.get("deep_gravel_thickness"), "thickness", region, options),
        "valley_axis": axis,
        "valley_stations": stations,
        "gravel_extent": outline_gravel(surfaces.get("deep_gravel_probability"), region, options),
        "permits": judge_permits(stack, survey.permits, region, options),
    }
