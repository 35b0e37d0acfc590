"""The county's truth as functions of place: what lies where, how thick it is and what resistivity it shows.

The valley is an analytic centre line with unlike flanks, the rock plain a tilted plane with ridges, a scarp and
sinks, the gravels are patches with sharp or sloping edges. Nothing is drawn from a Gaussian field.
Local x and y run from the south-west corner of the frame, in m; elevations and thicknesses in m.
"""

from functools import cached_property

import attrs
import numpy as np

from demo_region.generator.shapes import CentreLine, Patch, Valley, highest, ramp

WIDTH, HEIGHT = 30_000.0, 25_000.0
ORIGIN = (618_000.0, 4_893_000.0)  # easting and northing of the south-west corner of the frame
UNITS = ("cover", "shallow_aquifer", "confining", "deep_gravel", "bedrock")
GRAVEL_RANGE = (38.0, 55.0)  # ohm m
LEAST_CLAY = 6.0  # m of clay that part the shallow from the deep gravel


@attrs.frozen(eq=False)
class County:
    """One county. The fields are what its seed decided; the methods take local x and y (m) of any one shape."""

    seed: int
    mirrored: bool  # east and west exchanged
    phase: np.ndarray  # (8,) rad
    valley: Valley
    tributary: Valley
    stream: CentreLine
    sinks: tuple[Patch, ...]
    floor_gravel: tuple[Patch, ...]  # along and across the valley
    tributary_gravel: tuple[Patch, ...]  # along and across the tributary
    plain_gravel: tuple[Patch, ...]
    shallow_patches: tuple[Patch, ...]
    drumlins: tuple[Patch, ...]
    tight_rock: tuple[Patch, ...]

    def _east(self, x: np.ndarray) -> np.ndarray:
        return WIDTH - x if self.mirrored else x

    def ground(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Elevation of the land surface."""
        u = self._east(x)
        plane = 412.0 - 0.55e-3 * u + 0.35e-3 * y
        across = (y - 15_500.0 - 0.18 * u) / 1_400.0
        moraine = 11.0 / (1.0 + np.where(across > 0.0, across / 0.45, across) ** 2)
        _, offset = self.stream.locate(x, y)
        stream = -9.0 / (1.0 + (np.abs(offset) / 650.0) ** 1.6)
        swells = 1.3 * np.sin((u + 0.7 * y) / 640.0 + 2.0 * np.sin(y / 3_100.0)) + 1.1 * np.sin((u - 1.9 * y) / 1_370.0)
        return plane + moraine + stream + swells + highest(self.drumlins, x, y)

    def regional_bedrock(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Elevation of the rock plain as it stood before the valleys were cut."""
        u = self._east(x)
        plane = 383.0 - 0.75e-3 * u + 0.25e-3 * y
        scarp = 7.0 * (ramp((u + 0.45 * y - 24_000.0) / 500.0) - 0.5)
        ridge = 6.0 / np.cosh((y - 0.35 * u - 2_500.0) / 900.0) ** 2 + 4.5 / np.cosh((u - 0.8 * y - 9_000.0) / 600.0)
        grooves = 1.5 * np.abs(np.sin((u + 0.6 * y) / 1_250.0 + self.phase[2])) + 1.2 * np.sin(
            y / 700.0 + self.phase[3]
        )
        return plane + scarp + ridge + grooves

    def bedrock_relief(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Depth (m) of the rock below its regional surface: the valleys and the sinks."""
        return np.maximum.reduce([self.valley.incision(x, y), self.tributary.incision(x, y), highest(self.sinks, x, y)])

    def bedrock_elevation(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        rock = self.regional_bedrock(x, y) - self.bedrock_relief(x, y)
        return np.minimum(rock, self.ground(x, y) - 14.0)

    def bedrock_depth(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        return self.ground(x, y) - self.bedrock_elevation(x, y)

    def cover_thickness(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        u = self._east(x)
        base = 2.4 + 0.9 * np.sin(u / 2_900.0 + self.phase[4]) * np.cos(y / 2_300.0 + self.phase[5])
        return base + 1.6 * ramp((y - 14_200.0 - 0.18 * u) / 800.0)

    def shallow_aquifer_thickness(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        along, offset = self.stream.locate(x, y)
        belt = 1_150.0 + 450.0 * np.sin(along / 2_700.0 + self.phase[6])
        # The belt ends in a bluff on its left and thins out on its right.
        share = np.where(
            offset > 0.0, np.clip((belt - offset) / 90.0, 0, 1), np.clip((1.5 * belt + offset) / belt, 0, 1)
        )
        terrace = (6.4 + 2.2 * np.sin(along / 1_900.0 + self.phase[7])) * share
        thickness = np.maximum(terrace, highest(self.shallow_patches, x, y))
        room = self.bedrock_depth(x, y) - self.cover_thickness(x, y) - LEAST_CLAY
        return blank_below(np.minimum(thickness, room), 0.5)

    def deep_gravel_thickness(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        on_floor = highest(self.floor_gravel, *self.valley.line.locate(x, y))
        on_tributary = highest(self.tributary_gravel, *self.tributary.line.locate(x, y))
        incised = np.clip((self.bedrock_relief(x, y) - 8.0) / 18.0, 0.0, 1.0)
        thickness = np.maximum(incised * np.maximum(on_floor, on_tributary), highest(self.plain_gravel, x, y))
        above = self.cover_thickness(x, y) + self.shallow_aquifer_thickness(x, y) + LEAST_CLAY
        return blank_below(np.minimum(thickness, self.bedrock_depth(x, y) - above), 0.5)

    def cover_resistivity(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        u = self._east(x)
        return 36.0 * np.exp(
            0.18 * np.sin(u / 3_700.0 + self.phase[1]) + 0.28 * ramp((y - 14_200.0 - 0.18 * u) / 800.0)
        )

    def shallow_aquifer_resistivity(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Fresh in the hills, with more dissolved solids down the stream; a step where the gravel's source changes."""
        u = self._east(x)
        step = 0.45 * ramp((u - 0.5 * y - 8_000.0) / 300.0)
        swell = 0.22 * np.sin((u + y) / 2_700.0 + self.phase[2]) + 0.16 * np.sin(
            (y - 0.4 * u) / 1_500.0 + self.phase[3]
        )
        return 132.0 * np.exp(-step + swell - 0.25 * ramp((9_000.0 - y) / 6_000.0))

    def confining_resistivity(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Of the lower and greater part of the clay."""
        u = self._east(x)
        return 17.5 * np.exp(0.14 * np.sin(u / 4_300.0 + self.phase[5]) + 0.08 * np.cos(y / 2_100.0 + self.phase[0]))

    def upper_clay_share(self, x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Share of the clay's thickness that is siltier, and by how much its resistivity is higher there."""
        silty = ramp((self._east(x) + 0.7 * y - 17_000.0) / 2_500.0)
        return 0.2 + 0.2 * silty, 1.05 + 0.3 * silty

    def deep_gravel_resistivity(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        swell = 0.08 * np.sin(x / 2_600.0 + self.phase[7]) + 0.05 * np.sin(y / 1_700.0 + self.phase[4])
        return 45.5 * np.exp(swell)

    def _rock_pattern(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Log of the rock's resistivity up to a constant: brackish to fresh, a fault, tight blocks."""
        u = self._east(x)
        fresher = 0.42 * ramp((y + 0.25 * u - 3_000.0) / 22_000.0)
        fault = 0.16 * ramp((u - 0.3 * y - 13_000.0) / 200.0)
        fractured = -0.10 * np.clip(self.bedrock_relief(x, y) / 60.0, 0.0, 1.0)
        waves = 0.07 * np.sin((x - y) / 2_200.0 + self.phase[6])
        return fresher + fault + fractured + waves + highest(self.tight_rock, x, y)

    @cached_property
    def _rock_constant(self) -> float:
        """Brings a third of the frame's rock into the deep gravel's own range."""
        x, y = np.meshgrid(np.arange(250.0, WIDTH, 500.0), np.arange(250.0, HEIGHT, 500.0))
        return np.log(GRAVEL_RANGE[1]) - np.quantile(self._rock_pattern(x, y), 1.0 / 3.0)

    def bedrock_resistivity(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        return np.maximum(np.exp(self._rock_constant + self._rock_pattern(x, y)), GRAVEL_RANGE[0])


def blank_below(thickness: np.ndarray, least: float) -> np.ndarray:
    """Thickness with everything thinner than `least` taken as absent."""
    return np.where(thickness < least, 0.0, thickness)


def draw_county(seed: int) -> County:
    """The county of a seed: the same habit of country, with its lines, widths and patches placed anew."""
    rng = np.random.default_rng([seed, 1])
    mirrored = bool(rng.integers(2))
    valley = draw_valley(rng, mirrored)
    tributary = draw_tributary(rng, valley, mirrored)
    return County(
        seed=seed,
        mirrored=mirrored,
        phase=rng.uniform(0.0, 2.0 * np.pi, 8),
        valley=valley,
        tributary=tributary,
        stream=draw_stream(rng, mirrored),
        sinks=draw_patches(rng, 3, (300.0, 600.0), (0.7, 1.0), (8.0, 18.0)),
        floor_gravel=draw_bars(rng, valley, 1_900.0),
        tributary_gravel=draw_bars(rng, tributary, 1_150.0),
        plain_gravel=draw_patches(rng, 4, (1_100.0, 2_400.0), (0.1, 0.6), (4.0, 9.0)),
        shallow_patches=draw_patches(rng, 11, (1_200.0, 4_200.0), (0.05, 0.7), (3.0, 8.5)),
        drumlins=draw_patches(rng, 25, (400.0, 900.0), (0.9, 1.0), (3.0, 8.0)),
        tight_rock=draw_patches(rng, 4, (1_200.0, 3_000.0), (0.05, 0.4), (0.25, 0.5)),
    )


def draw_valley(rng: np.random.Generator, mirrored: bool) -> Valley:
    """From the north-west corner south-east, then bending east, with meanders."""
    t = np.linspace(0.0, 1.0, 1_500)
    bend = rng.uniform(0.36, 0.5)
    meander = rng.uniform(600.0, 950.0) * np.sin(2.0 * np.pi * (rng.uniform(3.2, 4.4) * t + rng.random()))
    u = -6_000.0 + 42_000.0 * t
    y = rng.uniform(21_500.0, 24_500.0) - rng.uniform(13_500.0, 16_000.0) * ramp((t - bend + 0.3) / 0.52) + meander
    u = u + 0.5 * meander
    deep, swing, turn = rng.uniform(82.0, 92.0), rng.uniform(6.0, 11.0), rng.uniform(0.0, 2.0 * np.pi)
    left, right = rng.permutation([rng.uniform(1_150.0, 1_450.0), rng.uniform(1_700.0, 2_300.0)])
    return Valley(
        line=CentreLine(WIDTH - u if mirrored else u, y),
        depth=lambda along: deep + swing * np.sin(along / 2_300.0 + turn) + 3.0 * np.sin(along / 900.0),
        left_width=lambda along: left * (1.0 + 0.22 * np.sin(along / 3_100.0 + turn)),
        right_width=lambda along: right * (1.0 + 0.22 * np.cos(along / 4_100.0 - turn)),
        left_power=rng.uniform(2.6, 4.5),
        right_power=rng.uniform(2.2, 3.4),
    )


def draw_tributary(rng: np.random.Generator, valley: Valley, mirrored: bool) -> Valley:
    """From the north-east in a long arc to a place on the valley's lower half."""
    joined = valley.line.points[int(rng.uniform(0.52, 0.64) * len(valley.line.points))]
    end = np.array([WIDTH - joined[0], joined[1]]) if mirrored else joined
    start = np.array([rng.uniform(23_500.0, 27_500.0), 27_500.0])
    t = np.linspace(0.0, 1.0, 600)[:, None]
    bulge = np.array([rng.uniform(1_500.0, 3_500.0), -rng.uniform(500.0, 1_500.0)])
    path = start + (end - start) * t + 4.0 * bulge * t * (1.0 - t)
    wiggle = 350.0 * np.sin(2.0 * np.pi * 3.0 * t[:, 0] + rng.uniform(0.0, 6.0)) * (1.0 - t[:, 0])
    u, y = path[:, 0] + wiggle, path[:, 1]
    length = np.hypot(*np.diff(path, axis=0).T).sum()
    shallow, deep = rng.uniform(38.0, 48.0), rng.uniform(62.0, 74.0)
    return Valley(
        line=CentreLine(WIDTH - u if mirrored else u, y),
        depth=lambda along: shallow + (deep - shallow) * ramp(along / length),  # it hangs a little above the valley
        left_width=lambda along: 950.0 + 120.0 * np.sin(along / 1_700.0),
        right_width=lambda along: 1_300.0 + 200.0 * np.cos(along / 2_300.0),
        left_power=rng.uniform(2.4, 4.0),
        right_power=rng.uniform(2.2, 3.2),
    )


def draw_stream(rng: np.random.Generator, mirrored: bool) -> CentreLine:
    """Today's stream, which takes no notice of the buried valley."""
    t = np.linspace(0.0, 1.0, 1_200)
    swing = 1_300.0 * np.sin(2.0 * np.pi * (1.6 * t + rng.random())) + 300.0 * np.sin(2.0 * np.pi * 7.0 * t)
    u = -3_000.0 + 36_000.0 * t
    y = rng.uniform(3_000.0, 6_000.0) + 11_000.0 * ramp(1.1 * t) + swing
    return CentreLine(WIDTH - u if mirrored else u, y)


def draw_bars(rng: np.random.Generator, valley: Valley, half_width: float) -> tuple[Patch, ...]:
    """Gravel bars one after the other along a valley floor, with gaps, in (along, offset) of its line."""
    bars = []
    along = rng.uniform(0.0, 2_500.0)
    while along < valley.line.length_along[-1]:
        half_length = rng.uniform(1_000.0, 2_900.0)
        bars.append(
            Patch(
                x=along + half_length,
                y=rng.uniform(-0.45, 0.45) * half_width,
                half_length=half_length,
                half_width=half_width * rng.uniform(0.5, 1.15),
                angle=rng.uniform(-0.15, 0.15),
                power=rng.uniform(2.0, 5.0),
                edge=rng.choice([0.08, 0.35, 0.8]),
                height=rng.uniform(7.0, 27.0),
            )
        )
        along += 2.0 * half_length + rng.uniform(-900.0, 2_000.0)
    return tuple(bars)


def draw_patches(
    rng: np.random.Generator,
    number: int,
    half_length: tuple[float, float],
    edge: tuple[float, float],
    height: tuple[float, float],
) -> tuple[Patch, ...]:
    """Patches anywhere in the frame; each pair is the least and the greatest value drawn."""
    return tuple(
        Patch(
            x=rng.uniform(0.0, WIDTH),
            y=rng.uniform(0.0, HEIGHT),
            half_length=(longest := rng.uniform(*half_length)),
            half_width=longest * rng.uniform(0.35, 0.8),
            angle=rng.uniform(0.0, np.pi),
            power=rng.uniform(1.8, 4.0),
            edge=rng.uniform(*edge),
            height=rng.uniform(*height),
        )
        for _ in range(number)
    )
