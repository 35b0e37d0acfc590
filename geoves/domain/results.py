"""Everything a finished job knows, for those who write it down."""

from collections.abc import Mapping
from typing import Any

import attrs

from geoves.domain.earth import Inverted
from geoves.domain.fields import FieldEnsemble
from geoves.domain.findings import Finding
from geoves.domain.grids import SurfaceStack
from geoves.domain.region import Region
from geoves.domain.survey import Survey
from geoves.domain.tops import Interpretation


@attrs.frozen
class Results:
    """The whole of a job. `layers` are GeoDataFrames in the region's CRS with SI columns, by the contract's names:
    bedrock_contours, thickness_contours, valley_axis, gravel_extent, permits. `doubts` are all that were met.
    `geology` is what was inferred from all places together, None where each place spoke for itself.
    """

    region: Region
    survey: Survey
    inverted: tuple[Inverted, ...]
    interpretation: Interpretation
    stack: SurfaceStack
    layers: Mapping[str, Any]
    doubts: tuple[Finding, ...] = ()
    figures_of_merit: Mapping[str, Any] = attrs.field(factory=dict)
    geology: FieldEnsemble | None = None
