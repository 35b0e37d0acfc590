"""From when on a curve is doubted."""

import attrs


@attrs.frozen
class CurveOptions:
    """jump_limit   standard deviations off what all other readings let expect, over flat layers
    slope_limit  standard deviations of the noise beyond the steepest rise or fall that flat layers make
    rough_limit  root mean square of a whole curve's scores; about 1 where its errors are right
    """

    jump_limit: float = attrs.field(default=4.0, validator=attrs.validators.gt(0))
    slope_limit: float = attrs.field(default=4.0, validator=attrs.validators.gt(0))
    rough_limit: float = attrs.field(default=2.2, validator=attrs.validators.gt(0))
