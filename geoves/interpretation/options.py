"""What an interpretation may be told, and its defaults."""

import attrs
import numpy as np

from geoves.domain.units import Role

# Roles whose thickness is asked for at every place beside the deep aquifer's: what lies on the confining unit.
ABOVE_CONFINING = (Role.COVER, Role.SHALLOW_AQUIFER)


@attrs.frozen
class InterpretationOptions:
    """presence                 prior probability that a unit of the template is present at a place
    calibrate                   whether the survey's curves may move the template's ranges before they are used
    fewest_to_calibrate         soundings' worth of a unit's presence that this needs
    pair_distance               a sounding within so many m of a well is its pair and may move the template; 0 for none
    fewest_pairs                pairs that know a unit, which this needs
    lateral_roughness           deviation of the natural log of a contact's depth over 1 km; grows with the root of it
    conditioning_distance       a well's log within so many m conditions what a sounding shows; 0 for none
    draws                       columns drawn for each sounding from the weighed sequences
    seen_log_bayes_factor       a basal contact is seen where sequences with it beat those without by this (nats) ...
    seen_log_depth_deviation    ... and where its log depth is known this well
    broad_log_depth_deviation   a contact known worse than this is no datum at all
    notice_chi_square           a bound is set where basal material would change the curve by this much
    relative_depth_floor        least error of a sounding's depth: ground is never quite layered
    well_contact_error          least error (m) of a contact in a driller's log
    well_relative_error         and its growth with depth
    water_level_reach           how far (m) a well's water level is carried to soundings; 0 to leave it out
    ground_temperature          of the water in the ground, °C
    conductance_range           over so many m what a well's water says of the ground around it falls by e; 0 for none
    least_match                 how alike (0 to 100) a driller's word and a term must be
    """

    presence: float = attrs.field(default=0.5, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    calibrate: bool = True
    fewest_to_calibrate: int = attrs.field(default=10, validator=attrs.validators.ge(1))
    pair_distance: float = attrs.field(default=250.0, validator=attrs.validators.ge(0))
    fewest_pairs: int = attrs.field(default=4, validator=attrs.validators.ge(2))
    lateral_roughness: float = attrs.field(default=0.25, validator=attrs.validators.ge(0))
    conditioning_distance: float = attrs.field(default=1000.0, validator=attrs.validators.ge(0))
    draws: int = attrs.field(default=400, validator=attrs.validators.ge(50))
    seen_log_bayes_factor: float = attrs.field(default=2.3, validator=attrs.validators.ge(0))
    seen_log_depth_deviation: float = attrs.field(default=0.2, validator=attrs.validators.gt(0))
    broad_log_depth_deviation: float = attrs.field(default=0.4, validator=attrs.validators.gt(0))
    notice_chi_square: float = attrs.field(default=16.0, validator=attrs.validators.gt(0))
    relative_depth_floor: float = attrs.field(default=0.05, validator=attrs.validators.ge(0))
    well_contact_error: float = attrs.field(default=0.3, validator=attrs.validators.gt(0))
    well_relative_error: float = attrs.field(default=0.01, validator=attrs.validators.ge(0))
    water_level_reach: float = attrs.field(default=2000.0, validator=attrs.validators.ge(0))
    ground_temperature: float = attrs.field(default=10.0, validator=[attrs.validators.ge(0), attrs.validators.le(60)])
    conductance_range: float = attrs.field(default=2000.0, validator=attrs.validators.ge(0))
    least_match: float = attrs.field(default=80.0, validator=[attrs.validators.gt(0), attrs.validators.le(100)])
    block: int = attrs.field(default=16, validator=attrs.validators.ge(1))
    random_seed: int = 0


def lateral_deviation(distance: float, options: InterpretationOptions) -> float:
    """Deviation of the natural log of a contact's depth between places `distance` m apart: a random walk's."""
    return float(options.lateral_roughness * np.sqrt(distance / 1000.0))
