"""The resistivity template: which lithology shows which ohm metres here, from the top of the column down."""

from collections.abc import Mapping
from enum import StrEnum
from types import MappingProxyType

import attrs
import numpy as np

from geoves.domain.arrays import FloatArray

# The standard normal quantile of 0.95: a template's range is the central 90 % of what a unit shows.
Z_95 = 1.6448536269514722


_COARSE_WORDS = frozenset({"sand", "sandy", "gravel", "cobbles", "pebbles"})
_FINE_WORDS = frozenset({"clay", "loam", "silt", "till", "soil", "topsoil", "muck", "peat"})


class Role(StrEnum):
    """What a unit is to the agency's question, whatever its local name."""

    COVER = "cover"
    SHALLOW_AQUIFER = "shallow_aquifer"
    CONFINING = "confining"
    DEEP_AQUIFER = "deep_aquifer"
    BEDROCK = "bedrock"


# Thickness (m) that a unit of a role shows, central 90 %, where it is present: broad, outwash plains (common practice).
THICKNESS_BY_ROLE: Mapping[str, tuple[float, float]] = MappingProxyType(
    {
        Role.COVER: (0.8, 20.0),
        Role.SHALLOW_AQUIFER: (2.0, 25.0),
        Role.CONFINING: (3.0, 120.0),
        Role.DEEP_AQUIFER: (2.0, 30.0),
    }
)


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
    def is_coarse(self) -> bool:
        """Whether it is far more resistive above the water level: a shallow aquifer, or a cover of sand or gravel.

        A cover counts where all its terms in drillers' logs name sand or gravel, and none clay, loam, silt or till.
        """
        if self.role is Role.COVER:
            words = [set(term.lower().split()) for term in self.log_terms]
            return bool(words) and all(one & _COARSE_WORDS and not one & _FINE_WORDS for one in words)
        return self.role is Role.SHALLOW_AQUIFER

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
    """The units in their order from the top of the column down; the last is bedrock.

    water_level : depth (m) of the water table and its standard deviation, where the template is that of one place
    """

    units: tuple[Unit, ...]
    water_level: tuple[float, float] | None = None

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
