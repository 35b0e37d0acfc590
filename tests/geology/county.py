"""Small invented counties whose curves are made with the physics, by quadrature (tests/reference), not by geoves.

What each place says by itself is the truth with a made-up error: the joint inference takes no more than that from it.
"""

from functools import lru_cache
from typing import NamedTuple

import attrs
import numpy as np

from geoves.domain.earth import Inverted, LayeredModel, ModelEnsemble
from geoves.domain.grids import Grid
from geoves.domain.survey import Curve, Pick, Sounding, Survey, Well
from geoves.domain.tops import Interpretation, Thickness, Top, UnitColumn
from geoves.domain.units import Role, Template, Unit
from geoves.geology import GeologyOptions
from tests.reference import quadrature

WEST, SOUTH, WIDTH = 400_000.0, 4_900_000.0, 4_000.0
GRID = Grid(west=WEST, north=SOUTH + WIDTH, cell_size=500.0, n_rows=8, n_columns=8)
HALF_SPACING = np.array([2.0, 4.0, 8.0, 16.0, 16.0, 32.0, 64.0, 128.0, 220.0, 320.0])
POTENTIAL = np.array([0.5, 0.5, 0.5, 0.5, 4.0, 4.0, 4.0, 4.0, 4.0, 4.0])
SEGMENT = np.array([0, 0, 0, 0, 1, 1, 1, 1, 1, 1])
NOISE = 0.03
# Small clouds: a test asks for the behaviour, not for the last digit.
QUICK = GeologyOptions(sweeps=12, draws_at_fit=40, rounds=4, draws_a_round=30, least_effective_size=35.0, members=20)

TILL = Unit("till", "Till", Role.COVER, 25.0, 70.0)
UPPER = Unit("upper_gravel", "Upper gravel", Role.SHALLOW_AQUIFER, 70.0, 200.0)
LOAM = Unit("loam", "Loam", Role.CONFINING, 25.0, 45.0)
CLAY = Unit("clay", "Clay", Role.CONFINING, 12.0, 28.0)
GRAVEL = Unit("deep_gravel", "Basal gravel", Role.DEEP_AQUIFER, 38.0, 60.0)
SHALE = Unit("shale", "Shale", Role.BEDROCK, 50.0, 110.0)
GRANITE = Unit("granite", "Granite", Role.BEDROCK, 400.0, 3000.0)

TEMPLATES = {
    "five units": Template((TILL, UPPER, CLAY, GRAVEL, SHALE)),
    "no basal gravel": Template((TILL, UPPER, CLAY, SHALE)),
    "no shallow aquifer": Template((TILL, CLAY, GRAVEL, SHALE)),
    "two confining units": Template((TILL, UPPER, LOAM, CLAY, GRAVEL, SHALE)),
    "resistive rock": Template((TILL, UPPER, CLAY, GRAVEL, GRANITE)),
    "cover alone": Template((TILL, GRANITE)),
}
TRUE_RESISTIVITY = {
    "till": 42.0,
    "upper_gravel": 115.0,
    "loam": 33.0,
    "clay": 18.0,
    "deep_gravel": 47.0,
    "shale": 74.0,
    "granite": 1100.0,
}


class Truth(NamedTuple):
    """Thickness (m) of each unit but rock at a place, and of all above gravel or rock."""

    thickness: dict
    basal_depth: float


def contact_depth(easting, northing):
    """25 m on the plain, 60 m along a valley from west to east."""
    y = northing - SOUTH - 0.5 * WIDTH + 0.05 * (easting - WEST)
    return 25.0 + 35.0 * float(np.exp(-0.5 * (y / 700.0) ** 2))


def truth_at(template, easting, northing):
    depth = contact_depth(easting, northing)
    thickness, left = {}, depth
    above = [unit for unit in template.units[:-1] if unit.role is not Role.DEEP_AQUIFER]
    for unit in above[:-1]:
        full = {Role.COVER: 3.0, Role.SHALLOW_AQUIFER: 4.0, Role.CONFINING: 5.0}[unit.role]
        thickness[unit.code] = full
        left -= full
    thickness[above[-1].code] = left
    for unit in template.with_role(Role.DEEP_AQUIFER):
        thickness[unit.code] = 8.0 if depth > 45.0 else 0.0
    return Truth(thickness, depth)


@lru_cache(maxsize=256)
def respond(thickness, resistivity):
    return quadrature.response(HALF_SPACING, POTENTIAL, np.array(thickness), np.array(resistivity))


def make_curve(template, truth, generator, *, factor=1.0):
    units = [unit for unit in template.units[:-1] if truth.thickness[unit.code] > 0]
    thickness = tuple(truth.thickness[unit.code] for unit in units)
    resistivity = tuple(TRUE_RESISTIVITY[unit.code] * factor for unit in (*units, template.units[-1]))
    apparent = respond(thickness, resistivity) * np.exp(generator.normal(0.0, NOISE, HALF_SPACING.size))
    used = np.ones(HALF_SPACING.size, dtype=bool)
    return Curve(HALF_SPACING, POTENTIAL, apparent, np.full(HALF_SPACING.size, np.nan), SEGMENT, used)


def invert_nothing(name):
    """The one thing of an inversion that the joint inference asks for: the noise."""
    model = LayeredModel([5.0], [50.0, 20.0])
    ensemble = ModelEnsemble([[5.0]], [[50.0, 20.0]], [1.0])
    nothing = np.zeros(HALF_SPACING.size)
    return Inverted(name, model, ensemble, np.eye(3), [1.0, 1.0], nothing, nothing + 1.0, 3.0, NOISE, {2: 0.0}, 200.0)


@attrs.frozen
class County:
    """The arguments of `infer_geology`, and the truth at each place."""

    survey: Survey
    inverted: tuple
    interpretation: Interpretation
    template: Template
    truth: dict

    @property
    def arguments(self):
        return self.survey, self.inverted, self.interpretation, self.template

    def reordered(self, order):
        """The same soundings told in another order."""
        soundings = tuple(self.survey.soundings[i] for i in order)
        return attrs.evolve(
            self,
            survey=attrs.evolve(self.survey, soundings=soundings),
            inverted=tuple(self.inverted[i] for i in order),
        )

    def with_curve(self, name, curve):
        soundings = tuple(attrs.evolve(s, curve=curve) if s.name == name else s for s in self.survey.soundings)
        return attrs.evolve(self, survey=attrs.evolve(self.survey, soundings=soundings))

    def with_template(self, template):
        return attrs.evolve(self, template=template)

    def with_pick(self, name, depth, error=2.0):
        """An interpreter's decision that gravel begins at a depth, as the interpretation hands it on."""
        place = next(s for s in self.survey.soundings if s.name == name)
        pick = Pick(name, "deep_gravel", "at", depth, error, "A. Reader", "a pit nearby")
        said = self.interpretation
        picked = UnitColumn(name, (), [], np.empty((0, 0)), "seen", depth, error, picks=(pick,))
        tops = (
            *(one for one in said.tops if one.place != name),
            say_contact(place, "pick", depth, error, "deep_gravel"),
        )
        said = attrs.evolve(said, columns=(picked,), tops=tops, undecided=said)
        return attrs.evolve(self, interpretation=said)


def say_contact(place, kind, depth, error, unit, status="at", contact="basal"):
    elevation = place.ground_elevation - depth
    return Top(
        place.name, kind, place.easting, place.northing, unit, contact, status, depth, elevation, error, "made up"
    )


def place_points(n_soundings):
    """A grid of soundings, jittered, always the same."""
    side = int(np.ceil(np.sqrt(n_soundings)))
    step = WIDTH / side
    generator = np.random.default_rng(9)
    columns, rows = np.meshgrid(np.arange(side), np.arange(side))
    x = (columns.ravel() + 0.5 + generator.uniform(-0.2, 0.2, side**2)) * step
    y = (rows.ravel() + 0.5 + generator.uniform(-0.2, 0.2, side**2)) * step
    return list(zip(WEST + x, SOUTH + y, strict=True))[:n_soundings]


def make_county(name="five units", n_soundings=12, *, seed=1, one_sided=True, factor=1.0, own_error=0.15):
    """Soundings on a grid; a well on the valley's floor, one on the plain, and one that ends above the contact.

    factor : on all true resistivities    own_error : of what each sounding says of the contact by itself
    """
    generator, template = np.random.default_rng(seed), TEMPLATES[name]
    points = place_points(n_soundings)
    soundings, tops, thicknesses, truth = [], [], [], {}
    rock = template.units[-1].code
    for i, point in enumerate(points):
        here = truth_at(template, *point)
        curve = make_curve(template, here, generator, factor=factor)
        sounding = Sounding(f"S{i + 1}", *point, 300.0, curve)
        soundings.append(sounding)
        truth[sounding.name] = here
        guess = here.basal_depth * float(np.exp(generator.normal(0.0, own_error)))
        tops.append(say_contact(sounding, "sounding", guess, own_error * guess, rock))
    wells = [
        Well("W1", WEST + 2200.0, SOUTH + 1900.0, 300.0, 90.0),
        Well("W2", WEST + 900.0, SOUTH + 3700.0, 300.0, 40.0),
    ]
    for well in wells:
        here = truth[well.name] = truth_at(template, well.easting, well.northing)
        tops.append(say_contact(well, "well", here.basal_depth, 0.5, rock))
        thicknesses += [
            Thickness(
                well.name, "well", well.easting, well.northing, unit.role, here.thickness[unit.code], 0.5, False, "log"
            )
            for unit in template.units
            if unit.role in (Role.DEEP_AQUIFER, Role.SHALLOW_AQUIFER)
        ]
    if one_sided:
        well = Well("W3", WEST + 3300.0, SOUTH + 1750.0, 300.0, 45.0)
        wells.append(well)
        truth[well.name] = truth_at(template, well.easting, well.northing)
        tops.append(say_contact(well, "well", 45.0, np.nan, rock, "below"))
    return County(
        Survey(tuple(soundings), tuple(wells)),
        tuple(invert_nothing(sounding.name) for sounding in soundings),
        Interpretation((), (), tuple(tops), tuple(thicknesses), ()),
        template,
        truth,
    )
