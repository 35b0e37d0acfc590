"""What a person may set of a plan."""

import attrs


@attrs.frozen
class PlanOptions:
    """about             what the doubt is about: bedrock (its elevation) or gravel (whether it is there)
    at                where it counts: grid (all over the mapped area) or permits
    thicker_than      m: gravel counts from this thickness on; 0 for the surfaces' own `present`
    kind              what may be planned: sounding, test_hole or either
    test_hole_costs   what a test hole costs, in soundings: of either kind the better buy is chosen
    places            how many places are wanted
    allowed           file of lines or polygons where measuring is allowed, beside region.toml; empty for the whole area
    test_hole_error   relative error of a basal contact in a test hole
    most_allowed      allowed places that are weighed, spread evenly
    most_asked        cells at which the doubt is counted, spread evenly
    """

    about: str = attrs.field(default="bedrock", validator=attrs.validators.in_(("bedrock", "gravel")))
    at: str = attrs.field(default="grid", validator=attrs.validators.in_(("grid", "permits")))
    thicker_than: float = attrs.field(default=0.0, validator=attrs.validators.ge(0))
    kind: str = attrs.field(default="either", validator=attrs.validators.in_(("either", "sounding", "test_hole")))
    test_hole_costs: float = attrs.field(default=10.0, validator=attrs.validators.gt(0))
    places: int = attrs.field(default=10, validator=attrs.validators.ge(1))
    allowed: str = ""
    test_hole_error: float = attrs.field(default=0.01, validator=attrs.validators.gt(0))
    most_allowed: int = attrs.field(default=400, validator=attrs.validators.ge(1))
    most_asked: int = attrs.field(default=1000, validator=attrs.validators.ge(1))
