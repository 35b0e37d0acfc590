"""What the joint inference may be told, and its defaults."""

import attrs


@attrs.frozen
class GeologyOptions:
    """sweeps           most rounds in which every place hears all others; covariances are refitted in the first part
    pick_sweeps         rounds after the interpreter's picks are added
    flat_layer_sweeps   rounds in which the misreadings of flat layers are minded; 0 takes layers for flat
    settled             the inference has converged when no round moves the basal contacts by more than this, root mean
                        square in deviations
    draws_at_fit        unknowns drawn about each most probable model of a place, one of each start
    rounds              times that the heaviest of them is drawn about
    draws_a_round       unknowns drawn each time
    least_effective_size  fewer effective draws than this, and a place is drawn anew
    contradiction       probability, beforehand, that a place's evidence is not of this ground
    curves_tell_gravel  whether curves may say where gravel lies on the rock; else wells, picks and relief alone
    bound_error         m: softness of a bound from a log
    members             realisations of all fields that are kept
    all_at_once         up to so many places all are solved at once, beyond window by window
    window              most places of a window
    halo                nearest places about it that it hears too
    everywhere          places spread over the whole that every window hears
    refit_places        beyond all_at_once: places that the fields' covariances are fitted to
    """

    sweeps: int = attrs.field(default=24, validator=attrs.validators.ge(8))
    pick_sweeps: int = attrs.field(default=8, validator=attrs.validators.ge(2))
    flat_layer_sweeps: int = attrs.field(default=8, validator=attrs.validators.ge(0))
    settled: float = attrs.field(default=0.1, validator=attrs.validators.gt(0))
    draws_at_fit: int = attrs.field(default=100, validator=attrs.validators.ge(20))
    rounds: int = attrs.field(default=10, validator=attrs.validators.ge(1))
    draws_a_round: int = attrs.field(default=60, validator=attrs.validators.ge(10))
    least_effective_size: float = attrs.field(default=120.0, validator=attrs.validators.gt(20))
    contradiction: float = attrs.field(default=0.02, validator=[attrs.validators.gt(0), attrs.validators.lt(0.5)])
    curves_tell_gravel: bool = False
    bound_error: float = attrs.field(default=0.5, validator=attrs.validators.gt(0))
    members: int = attrs.field(default=200, validator=attrs.validators.ge(20))
    all_at_once: int = attrs.field(default=300, validator=attrs.validators.ge(2))
    window: int = attrs.field(default=60, validator=attrs.validators.ge(2))
    halo: int = attrs.field(default=60, validator=attrs.validators.ge(1))
    everywhere: int = attrs.field(default=40, validator=attrs.validators.ge(0))
    refit_places: int = attrs.field(default=200, validator=attrs.validators.ge(10))
    block: int = attrs.field(default=16, validator=attrs.validators.ge(1))
    random_seed: int = 0
