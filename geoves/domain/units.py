"""The resistivity template: which lithology shows which ohm metres here, from the top of the column down."""

from enum import StrEnum

import attrs
import numpy as np

from geoves.domain.arrays import FloatArray

# The standard normal quantile of 0.95: a template's range is the central 90 % of what a unit shows.
Z_95 = 1.6448536269514722


class Role(StrEnum):
    """What a unit is to the agency's question, whatever its local name."""

    COVER = "cover"
    SHALLOW_AQUIFER = "shallow_aquifer"
    CONFINING = "confining"
    DEEP_AQUIFER = "deep_aquifer"
    BEDROCK = "bedrock"


@attrs.frozen
class Unit:
    """One unit of the template. Resistivities in ohm m, depths in m below ground."""

    code: str
    name: str
    role: Role
    resistivity_p05: float
    resistivity_p95: float
    depth_to_top: tuple[float, float] | None = None
    log_terms: tuple[str, ...] = ()
    colour: str | None = None

    @property
    def log_resistivity_mean(self) -> float:
        """Mean of the natural log of resistivity, the range read as log-normal."""
        return 0.5 * (np.log(self.resistivity_p05) + np.log(self.resistivity_p95))

    @property
    def log_resistivity_deviation(self) -> float:
        """Standard deviation of the natural log of resistivity."""
        return (np.log(self.resistivity_p95) - np.log(self.resistivity_p05)) / (2.0 * Z_95)


@attrs.frozen
class Template:
    """The units in their order from the top of the column down; the last is bedrock."""

    units: tuple[Unit, ...]

    def with_role(self, role: Role) -> tuple[Unit, ...]:
        return tuple(unit for unit in self.units if unit.role is role)

    @property
    def codes(self) -> tuple[str, ...]:
        return tuple(unit.code for unit in self.units)

    def unit(self, code: str) -> Unit:
        return next(unit for unit in self.units if unit.code == code)

    @property
    def log_resistivity_means(self) -> FloatArray:
        return np.array([unit.log_resistivity_mean for unit in self.units])

    @property
    def log_resistivity_deviations(self) -> FloatArray:
        return np.array([unit.log_resistivity_deviation for unit in self.units])
