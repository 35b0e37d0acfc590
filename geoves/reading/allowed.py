"""Lines and polygons along or in which measuring is allowed."""

from typing import Any

from geoves.domain.findings import Finding
from geoves.domain.region import Region
from geoves.reading.faults import in_words
from geoves.reading.sources import Source, split_part
from geoves.reading.vectors import read_shapes

_KINDS = ("LineString", "MultiLineString", "Polygon", "MultiPolygon")


def read_allowed(typed: str, region: Region) -> tuple[list[Any], list[Finding]]:
    """Shapely lines and polygons in the region's CRS from a file beside region.toml, and what is wrong with it."""
    file, part = split_part(typed)
    findings: list[Finding] = []
    path = region.path.parent / file
    if not path.is_file():
        expected = "no such file beside region.toml; expected lines or polygons along or in which measuring is allowed"
        return [], [Finding("fault", region.path.name, 0, "[plan] allowed", typed, expected)]
    shapes = read_shapes(Source("allowed", typed, path, part, region.metres_per_length_unit), region.crs, findings)
    strange = sorted({shape.geom_type for shape in shapes} - set(_KINDS))
    if strange and not findings:
        findings.append(Finding("fault", typed, 0, "", "", f"expected lines or polygons, found {in_words(strange)}"))
    return shapes, findings
