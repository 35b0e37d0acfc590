"""How the layers are drawn."""

import attrs


@attrs.frozen
class LayerOptions:
    """How layers are drawn.

    contours            about how many contours a surface gets; the interval is 1, 2 or 5 times a power of ten
    likely, possible    least probability of gravel in either class of its extent
    least_incision      m: how far bedrock must lie below the regional plane to count as valley, at least
    incision_share      the same, as a share of the deepest incision (its 99 % quantile)
    regional_quantile   the plane passes below this share of the bedrock's relief: upland, not valley, sets it
    least_valley_length as a share of the grid's diagonal; shorter lines are not drawn
    axis_cells          a larger grid is thinned to about this many cells before valleys are traced
    circle_points       points by which a circle of location is averaged
    """

    contours: int = attrs.field(default=12, validator=attrs.validators.ge(2))
    likely: float = attrs.field(default=0.66, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    possible: float = attrs.field(default=0.33, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    least_incision: float = attrs.field(default=10.0, validator=attrs.validators.gt(0))
    incision_share: float = attrs.field(default=0.25, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    regional_quantile: float = attrs.field(default=0.75, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    least_valley_length: float = attrs.field(default=0.08, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    axis_cells: int = attrs.field(default=150_000, validator=attrs.validators.ge(100))
    circle_points: int = attrs.field(default=96, validator=attrs.validators.ge(4))

    def __attrs_post_init__(self) -> None:
        if self.possible >= self.likely:
            raise ValueError(f"possible ({self.possible}) is not below likely ({self.likely})")
