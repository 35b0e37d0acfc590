"""What a person may set of the surfaces."""

import attrs

from geoves.surfaces.stated import MODELS, StatedVariograms

ENGINES = ("auto", "cholesky", "tiles", "pykrige")


@attrs.frozen
class SurfaceOptions:
    """model             covariance of the fields: matern32, exponential, spherical or gaussian
    reach                how far from the nearest datum surfaces are drawn, unit of the CRS; 0 lets geoves choose
    reach_in_spacings    geoves's choice: so many times the spacing that nine tenths of the places keep
    present              m: a unit is present where at least this thick
    least_probability    a gravel's top is drawn where its presence is at least this probable
    probable             the shallow aquifer's resistivity is drawn where its presence is at least this probable
    bound_deviation      softness of a bound on log depth
    tie_deviation        by how much (natural log) all soundings together may differ from the wells; 0 not to tie them
    calibrate_bands      whether bands that wells left out prove too narrow are widened
    fewest_wells         wells and picks with a depth that the tie needs
    absence_deviation    softness (m) of an absence
    fewest               data that a fitted covariance needs
    block                cells kriged at a time: bounds the memory
    engine               what kriges: cholesky (one factor of all data), tiles (neighbourhoods), pykrige, or auto
    all_at_once          auto: one factor up to so many data, tiles beyond
    thicker_than         m: thicknesses of the deep gravel whose exceedance gets a surface of its own
    variogram            what is stated of the variograms; the rest is estimated
    members              realisations of the column that surfaces without a closed form are summarised from
    """

    model: str = attrs.field(default="matern32", validator=attrs.validators.in_(MODELS))
    reach: float = attrs.field(default=0.0, validator=attrs.validators.ge(0))
    reach_in_spacings: float = attrs.field(default=3.0, validator=attrs.validators.gt(0))
    present: float = attrs.field(default=1.0, validator=attrs.validators.gt(0))
    least_probability: float = attrs.field(default=0.05, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    probable: float = attrs.field(default=0.5, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    bound_deviation: float = attrs.field(default=0.05, validator=attrs.validators.gt(0))
    tie_deviation: float = attrs.field(default=0.1, validator=attrs.validators.ge(0))
    calibrate_bands: bool = True
    fewest_wells: int = attrs.field(default=4, validator=attrs.validators.ge(2))
    absence_deviation: float = attrs.field(default=0.5, validator=attrs.validators.gt(0))
    fewest: int = attrs.field(default=5, validator=attrs.validators.ge(3))
    block: int = attrs.field(default=8192, validator=attrs.validators.ge(1))
    engine: str = attrs.field(default="auto", validator=attrs.validators.in_(ENGINES))
    all_at_once: int = attrs.field(default=4000, validator=attrs.validators.ge(2))
    thicker_than: tuple[float, ...] = attrs.field(
        default=(), validator=attrs.validators.deep_iterable(attrs.validators.gt(0))
    )
    members: int = attrs.field(default=100, validator=attrs.validators.ge(20))
    variogram: StatedVariograms = StatedVariograms()
    random_seed: int = attrs.field(default=0, validator=attrs.validators.ge(0))
