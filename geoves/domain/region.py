"""One job: what region.toml says."""

from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Any, Literal

import attrs

from geoves.domain.units import Template

LengthUnit = Literal["m", "ft", "us-ft"]
# Of inference: one geology from all places, or each place by itself.
Method = Literal["together", "each"]

# Metres in one unit. The international foot is exact; the US survey foot is 1200/3937 m (NIST SP 811, appendix B.6).
METRES = MappingProxyType({"m": 1.0, "ft": 0.3048, "us-ft": 1200.0 / 3937.0})


@attrs.frozen
class Section:
    """A line along which the report draws a section: its name and its corners, x and y in the CRS."""

    name: str
    points: tuple[tuple[float, float], ...]


@attrs.frozen
class Delivery:
    """Who made it and who answers for it, which extra columns stay at home, whether FGDC records are wanted too."""

    organisation: str = ""
    contact: str = ""
    use_limits: str = ""
    withhold: tuple[str, ...] = ()
    fgdc: bool = False


@attrs.frozen
class Region:
    """A region's settings. `crs` as typed; `crs_unit_metres` the length of its unit in m; cell_size in that unit.

    `settings` holds the tables for the steps ("inversion", "interpretation", "surfaces", ...) as typed.
    `files` has the path of each input by its name ("soundings", "readings", ...); `typed_inputs` the same as typed,
    with the sheet or layer after `#`; `input_length_units` those whose lengths are in another unit than length_unit.
    """

    name: str
    path: Path
    crs: str
    crs_unit_metres: float
    vertical_datum: str | None
    length_unit: LengthUnit
    cell_size: float
    random_seed: int
    template: Template
    method: Method = "together"
    delivery: Delivery = Delivery()
    sections: tuple[Section, ...] = ()
    settings: Mapping[str, Mapping[str, Any]] = attrs.field(factory=dict)
    files: Mapping[str, Path] = attrs.field(factory=dict)
    typed_inputs: Mapping[str, str] = attrs.field(factory=dict)
    input_length_units: Mapping[str, LengthUnit] = attrs.field(factory=dict)

    @property
    def metres_per_length_unit(self) -> float:
        return METRES[self.length_unit]
