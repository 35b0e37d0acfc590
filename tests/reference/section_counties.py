"""Counties of which one section is repeated along strike, their curves made by the 2.5-dimensional response.

Till of 36 ohm m over clay of 18 on rock of 66; five lines of eleven soundings across the section, close over what is
not flat, spreads along or across by chance, to AB/2 = 320 m. Lengths in m; x is the easting, strike is north.
"""

from typing import NamedTuple

import numpy as np

from geoves.domain.survey import Curve, LogInterval, Sounding, Survey, Well
from geoves.domain.units import Role, Template, Unit
from geoves.kernels import layered_earth
from tests.reference.two_and_a_half import Fineness, Section, response

COVER, RESISTIVITY = 4.0, (36.0, 18.0, 66.0)
HALF_SPACING = np.geomspace(4.0, 320.0, 14)
POTENTIAL = np.full(HALF_SPACING.size, 1.0)
GROUND, MIDDLE, NOISE = 400.0, 4_000.0, 0.03
LINES = 800.0 + 1_600.0 * np.arange(5)
FAR = np.array([600.0, 1_700.0, 6_300.0, 7_400.0])
WELLS = np.array([700.0, 2_500.0, 4_000.0, 4_300.0, 5_600.0, 7_300.0])
CELLS = Fineness(1.0, 1.15, 14)
TEMPLATE = Template(
    (
        Unit("cover", "Till", Role.COVER, 25.0, 52.0),
        Unit("clay", "Clay", Role.CONFINING, 13.0, 26.0),
        Unit("rock", "Rock", Role.BEDROCK, 45.0, 95.0),
    )
)


class Shape(NamedTuple):
    """Depth (m) of rock as a function of x, and the distance (m) from one sounding to the next where it is not flat."""

    depth: object
    step: float


def valley(width, shallow, deep):
    """5 % of the incision is left at `width` from the axis."""
    scale = width / np.sqrt(np.log(20.0))
    return lambda x: shallow + (deep - shallow) * np.exp(-(((np.asarray(x) - MIDDLE) / scale) ** 2))


def wall(slope, shallow, deep):
    """Its foot in the middle, the deep ground in the west."""
    return lambda x: np.clip(deep - slope * np.maximum(np.asarray(x) - MIDDLE, 0.0), shallow, deep)


SHAPES = {
    "valley of 450 m": Shape(valley(450.0, 25.0, 85.0), 350.0),
    "valley of 600 m": Shape(valley(600.0, 30.0, 100.0), 400.0),
    "valley of 1100 m": Shape(valley(1_100.0, 25.0, 90.0), 500.0),
    "wall of 31 degrees": Shape(wall(0.6, 30.0, 85.0), 300.0),
}


def draw_places(shape, rng):
    """(n, 3): easting, northing, azimuth in degrees of the soundings."""
    rows = []
    for line in LINES:
        near = MIDDLE + shape.step * (np.arange(-3, 4) + rng.uniform(-0.4, 0.4))
        across = np.concatenate([near, FAR + rng.uniform(-300.0, 300.0, FAR.size)])
        rows += [(x, line + rng.uniform(-200.0, 200.0), rng.choice([0.0, 90.0])) for x in across]
    return np.array(rows)


def clean_curve(shape, x, azimuth_deg):
    """Apparent resistivity (n,) without noise: of layers exactly, times what the section's shape does to them."""
    true = float(shape.depth(x))

    def over(depth):
        def resistivity(east, z):
            below = np.where(z < depth(east), RESISTIVITY[1], RESISTIVITY[2])
            return np.where(z < COVER, RESISTIVITY[0], below)

        return response(Section(resistivity, COVER), HALF_SPACING, POTENTIAL[0], azimuth_deg, CELLS, x)

    wavenumber = layered_earth.shared_wavenumbers([(HALF_SPACING, POTENTIAL)])
    weights = layered_earth.response_weights(HALF_SPACING, POTENTIAL, wavenumber)
    flat = layered_earth.response(
        weights[None], wavenumber, np.array([[COVER, true - COVER]]), np.array([RESISTIVITY])
    )[0]
    return flat * over(shape.depth) / over(lambda east: true + 0.0 * east)


def make_survey(shape, rng):
    """A survey of the section, with six wells to rock, and the true depth (n,) at its soundings."""
    places = draw_places(shape, rng)
    soundings = []
    for i, (x, y, azimuth_deg) in enumerate(places):
        read = clean_curve(shape, x, azimuth_deg) * np.exp(rng.normal(0.0, NOISE, HALF_SPACING.size))
        curve = Curve(
            half_spacing=HALF_SPACING,
            potential_half_spacing=POTENTIAL,
            apparent_resistivity=read,
            relative_error=np.full(read.size, np.nan),
            segment=np.zeros(read.size, dtype=int),
            used=np.ones(read.size, dtype=bool),
            row=np.arange(read.size),
        )
        soundings.append(Sounding(f"S{i + 1:02d}", x, y, GROUND, curve, azimuth_deg=azimuth_deg))
    wells = [_drill(f"W{i + 1}", x, rng.uniform(500.0, 7_500.0), shape) for i, x in enumerate(WELLS)]
    return Survey(tuple(soundings), tuple(wells)), shape.depth(places[:, 0])


def _drill(name, x, y, shape):
    rock = float(shape.depth(x))
    log = (
        LogInterval(0.0, COVER, "till", "cover"),
        LogInterval(COVER, rock, "clay", "clay"),
        LogInterval(rock, rock + 3.0, "rock", "rock"),
    )
    return Well(name, x, y, GROUND, rock + 3.0, log)
