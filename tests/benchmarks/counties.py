"""Counties in which the habits of the demo's country are false, each made from the demo's by changing one of them."""

from collections.abc import Callable
from pathlib import Path

import attrs
import numpy as np

from demo_region.generator.county import County, blank_below, draw_county
from demo_region.generator.shapes import CentreLine, Valley
from demo_region.make_region import make_region


class _Changed(County):
    """A county whose thickness of deep gravel is given by the relief, or not there at all."""

    def gravel_by_relief(self, relief: np.ndarray) -> np.ndarray:
        raise NotImplementedError

    def deep_gravel_thickness(self, x, y):
        above = self.cover_thickness(x, y) + self.shallow_aquifer_thickness(x, y) + 6.0
        thickness = self.gravel_by_relief(self.bedrock_relief(x, y))
        return blank_below(np.minimum(thickness, self.bedrock_depth(x, y) - above), 0.5)


class Terraces(_Changed):
    """Gravel on the valley's shoulders, clay on its floor."""

    def gravel_by_relief(self, relief):
        return 14.0 * np.clip((relief - 6.0) / 6.0, 0.0, 1.0) * np.clip((34.0 - relief) / 8.0, 0.0, 1.0)


class NoGravel(_Changed):
    def gravel_by_relief(self, relief):
        return np.zeros_like(relief)


class GravelEverywhere(_Changed):
    def gravel_by_relief(self, relief):
        return 7.0 + 0.08 * relief


class ConductingRock(County):
    """Rock with salt water in it: less resistive than the clay."""

    def bedrock_resistivity(self, x, y):
        return 0.11 * super().bedrock_resistivity(x, y)


class Plain(County):
    """No valley at all."""

    def bedrock_relief(self, x, y):
        return 0.02 * super().bedrock_relief(x, y)


def _steep(county: County) -> County:
    """One wall of the valley near to vertical."""
    valley = attrs.evolve(county.valley, left_power=12.0)
    return attrs.evolve(county, valley=valley)


def _crossing(county: County) -> County:
    """A second valley, as deep as the first, across it in the middle of the frame."""
    t = np.linspace(0.0, 1.0, 900)
    line = CentreLine(9_000.0 + 9_000.0 * t + 500.0 * np.sin(9.0 * t), -2_000.0 + 29_000.0 * t)
    second = Valley(
        line, lambda along: 70.0 + 0.0 * along, lambda a: 1_300.0 + 0.0 * a, lambda a: 1_500.0 + 0.0 * a, 3.0, 2.6
    )
    return attrs.evolve(county, tributary=second)


def _as(kind: type[County]) -> Callable[[County], County]:
    def change(county: County) -> County:
        return kind(**{field.name: getattr(county, field.name) for field in attrs.fields(County)})

    return change


# Name: how the seed's county is changed, and what the template is told in place of the demo's range of rock.
COUNTIES: dict[str, tuple[Callable[[County], County], str]] = {
    "gravel on terraces": (_as(Terraces), ""),
    "no gravel": (_as(NoGravel), ""),
    "gravel everywhere": (_as(GravelEverywhere), ""),
    "rock that conducts": (_as(ConductingRock), "resistivity = [4.4, 9.9]"),
    "one steep wall": (_steep, ""),
    "two valleys that cross": (_crossing, ""),
    "a plain": (_as(Plain), ""),
}
ROCK = "resistivity = [40, 90]"


def make_county(folder: Path, name: str, seed: int) -> County:
    """Write the region of one of these counties into a folder."""
    change, rock = COUNTIES[name]
    county = make_region(folder, seed, county=change(draw_county(seed)))
    if rock:
        file = Path(folder) / "region.toml"
        text = file.read_text(encoding="utf-8")
        if ROCK not in text:
            raise ValueError(f"{file}: {ROCK} is not there to be changed")
        file.write_text(text.replace(ROCK, rock), encoding="utf-8")
    return county
