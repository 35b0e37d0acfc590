"""The ground under a point as a column of layers, with the small-scale scatter that no map shows."""

import attrs
import numpy as np

from demo_region.generator.county import UNITS, County

# Standard deviation of the natural log of resistivity from one place to the next.
SCATTER = {"cover": 0.18, "shallow_aquifer": 0.10, "confining": 0.05, "deep_gravel": 0.05, "bedrock": 0.06}


@attrs.frozen(eq=False)
class Column:
    """Layers at one place, top first: unit codes (k,), thickness (k-1,) m, resistivity (k,) ohm m."""

    ground: float
    units: tuple[str, ...]
    thickness: np.ndarray
    resistivity: np.ndarray

    @property
    def tops(self) -> np.ndarray:
        return np.concatenate([[0.0], np.cumsum(self.thickness)])

    def top(self, unit: str) -> float:
        """Depth (m) of a unit's top, NaN where it is absent."""
        return self.tops[self.units.index(unit)] if unit in self.units else np.nan

    def resistivity_of(self, unit: str) -> float:
        """Resistivity of a unit (of its lowest layer), NaN where it is absent."""
        last = len(self.units) - 1 - self.units[::-1].index(unit) if unit in self.units else None
        return np.nan if last is None else self.resistivity[last]

    def thickness_of(self, unit: str) -> float:
        """Thickness (m) of a unit above the rock, 0 where it is absent."""
        return sum(h for h, name in zip(self.thickness, self.units[:-1], strict=True) if name == unit)


def draw_columns(county: County, x: np.ndarray, y: np.ndarray, rng: np.random.Generator) -> list[Column]:
    """A column at each place, x and y (n,) local m."""
    scatter = {unit: np.exp(rng.normal(0.0, SCATTER[unit], len(x))) for unit in UNITS}
    resistivity = {unit: getattr(county, f"{unit}_resistivity")(x, y) * scatter[unit] for unit in UNITS}
    cover, shallow = county.cover_thickness(x, y), county.shallow_aquifer_thickness(x, y)
    gravel, depth = county.deep_gravel_thickness(x, y), county.bedrock_depth(x, y)
    clay = depth - cover - shallow - gravel
    share, contrast = county.upper_clay_share(x, y)
    ground = county.ground(x, y)
    columns = []
    for i in range(len(x)):
        layers = [
            ("cover", cover[i], resistivity["cover"][i]),
            ("shallow_aquifer", shallow[i], resistivity["shallow_aquifer"][i]),
            ("confining", share[i] * clay[i], contrast[i] * resistivity["confining"][i]),
            ("confining", (1.0 - share[i]) * clay[i], resistivity["confining"][i]),
            ("deep_gravel", gravel[i], resistivity["deep_gravel"][i]),
        ]
        layers = [layer for layer in layers if layer[1] > 0.0]
        columns.append(
            Column(
                ground=float(ground[i]),
                units=(*(layer[0] for layer in layers), "bedrock"),
                thickness=np.array([layer[1] for layer in layers]),
                resistivity=np.array([*(layer[2] for layer in layers), resistivity["bedrock"][i]]),
            )
        )
    return columns
