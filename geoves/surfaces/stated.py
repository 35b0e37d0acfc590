"""What a person states of the variograms, in region.toml's [surfaces.variogram.NAME]."""

import math
from collections.abc import Callable
from typing import Any

import attrs

from geoves.kernels.covariances import Stated

MODELS = ("matern32", "exponential", "spherical", "gaussian")


def _unstated_or(least: float, most: float, *, open_below: bool = False) -> Callable[[Any, Any, float], None]:
    """A validator: not stated, or within the limits."""

    def check(_: Any, attribute: Any, value: float) -> None:
        if math.isnan(value):
            return
        if not least <= value <= most or (open_below and value == least) or math.isinf(value):
            above = "> " if open_below else ">= "
            limit = "" if math.isinf(most) else f" and <= {most:g}"
            raise ValueError(f"'{attribute.name}' must be {above}{least:g}{limit}: {value}")

    return check


@attrs.frozen
class StatedVariogram:
    """model   its covariance, where another than that of [surfaces]
    length     where the correlation has fallen to 0 (spherical) or 0.05, along the longest continuity, unit of the CRS
    sill       how far the variogram rises above its nugget, in the square of what is kriged
    nugget     its value at no distance, the errors of the data not counted
    azimuth    of the longest continuity, degrees clockwise from north; with `ratio`
    ratio      length across it over length along it; 1 for no direction
    """

    model: str = attrs.field(default="", validator=attrs.validators.in_(("", *MODELS)))
    length: float = attrs.field(default=math.nan, eq=repr, validator=_unstated_or(0.0, math.inf, open_below=True))
    sill: float = attrs.field(default=math.nan, eq=repr, validator=_unstated_or(0.0, math.inf, open_below=True))
    nugget: float = attrs.field(default=math.nan, eq=repr, validator=_unstated_or(0.0, math.inf))
    azimuth: float = attrs.field(default=math.nan, eq=repr, validator=_unstated_or(0.0, 360.0))
    ratio: float = attrs.field(default=math.nan, eq=repr, validator=_unstated_or(0.0, 1.0, open_below=True))

    @property
    def stated(self) -> Stated:
        """What the fit is told."""
        values = (self.nugget, self.sill, self.length, self.azimuth, self.ratio)
        nugget, sill, length, azimuth, ratio = (None if math.isnan(value) else value for value in values)
        return Stated(nugget, sill, length, azimuth or 0.0 if ratio is not None else None, ratio)

    @property
    def words(self) -> str:
        """The keys that were stated, in words; empty where none was."""
        given = {name: value for name, value in attrs.asdict(self).items() if value != "" and value == value}  # noqa: PLR0124 - not NaN
        return ", ".join(f"{name} = {value!r}" for name, value in given.items())


def _whole_direction(_: Any, attribute: Any, value: StatedVariogram) -> None:
    if not math.isnan(value.azimuth) and math.isnan(value.ratio):
        raise ValueError(f"'{attribute.name}' must be stated with a ratio beside its azimuth: {value.azimuth:g}")
    if value.ratio < 1.0 and math.isnan(value.azimuth):
        raise ValueError(f"'{attribute.name}' must be stated with an azimuth beside its ratio: {value.ratio:g}")


def _unstated() -> Any:
    return attrs.field(default=StatedVariogram(), validator=_whole_direction)


@attrs.frozen
class StatedVariograms:
    """A table for each quantity that is kriged: log depth, latent thickness (m), log resistivity."""

    basal_depth: StatedVariogram = _unstated()
    deep_gravel: StatedVariogram = _unstated()
    shallow_aquifer: StatedVariogram = _unstated()
    cover: StatedVariogram = _unstated()
    shallow_resistivity: StatedVariogram = _unstated()
