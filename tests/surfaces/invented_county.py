"""An invented county of plain formulas, read by nobody: what places say of it is made up from the known field."""

import attrs
import numpy as np
import shapely

from geoves.domain.grids import Grid
from geoves.domain.survey import Curve, Ground, Sounding, Survey, Well
from geoves.domain.tops import Interpretation, ShallowResistivity, Thickness, Top
from geoves.domain.units import Role, Template, Unit
from geoves.surfaces import SurfaceOptions, build_surfaces

GRID = Grid(west=400_000.0, north=4_903_000.0, cell_size=100.0, n_rows=30, n_columns=40)
UNITS = (
    Unit("till", "Till", Role.COVER, 25.0, 60.0),
    Unit("upper_gravel", "Upper gravel", Role.SHALLOW_AQUIFER, 60.0, 160.0),
    Unit("blue_clay", "Blue clay", Role.CONFINING, 12.0, 26.0),
    Unit("deep_gravel", "Basal gravel", Role.DEEP_AQUIFER, 38.0, 55.0),
    Unit("shale", "Shale", Role.BEDROCK, 50.0, 95.0),
)
CURVE = Curve([1.0, 10.0], [0.3, 0.3], [50.0, 50.0], [0.03, 0.03], [0, 0], [True, True])  # the surfaces never ask it


def local(easting, northing):
    """Metres from the south-west corner of the grid."""
    return easting - GRID.west, northing - GRID.bounds[1]


def contact_depth(easting, northing):
    """Depth (m) of the top of gravel or rock: 25 m on a plain, 75 m along a valley that bends."""
    x, y = local(easting, northing)
    return 25.0 + 50.0 * np.exp(-(((y - 1500.0 - 300.0 * np.sin(x / 900.0)) / 450.0) ** 2))


def gravel_thickness(easting, northing):
    """Thickness (m) of the deep gravel: in the valley's east alone."""
    x, y = local(easting, northing)
    return np.maximum(18.0 * np.exp(-(((y - 1500.0) / 500.0) ** 2)) / (1.0 + np.exp((2000.0 - x) / 250.0)) - 2.0, 0.0)


def shallow_thickness(easting, northing):
    x, y = local(easting, northing)
    return np.maximum(9.0 * np.cos(x / 1500.0) + 0.0 * y, 0.0)


def shallow_resistivity(easting, northing):
    x, y = local(easting, northing)
    return 90.0 * np.exp(0.3 * np.sin(x / 800.0) + 0.2 * np.cos(y / 700.0))


def ground_elevation(easting, northing):
    x, y = local(easting, northing)
    return 400.0 + 0.002 * x - 0.003 * y


def cell_centres():
    """Eastings and northings, (rows, columns) each."""
    return np.meshgrid(GRID.easting, GRID.northing)


def cell_at(easting, northing):
    """Row and column of the cell that holds a place."""
    return int((GRID.north - northing) // GRID.cell_size), int((easting - GRID.west) // GRID.cell_size)


@attrs.frozen
class County:
    """The arguments of `build_surfaces`."""

    interpretation: Interpretation
    survey: Survey
    template: Template = Template(UNITS)
    grid: Grid = GRID

    def build(self, options=None, **more):
        return build_surfaces(self.interpretation, self.survey, self.template, self.grid, options, **more)

    def with_tops(self, *tops):
        return attrs.evolve(self, interpretation=attrs.evolve(self.interpretation, tops=tops))

    def with_thicknesses(self, *rows):
        return attrs.evolve(self, interpretation=attrs.evolve(self.interpretation, thicknesses=rows))

    def without_role(self, role):
        return attrs.evolve(self, template=Template(tuple(unit for unit in UNITS if unit.role is not role)))


def place_points(n_places, seed):
    """Centres of cells, no two alike."""
    cells = np.random.default_rng(seed).choice(GRID.n_rows * GRID.n_columns, n_places, replace=False)
    rows, columns = np.divmod(cells, GRID.n_columns)
    return list(zip(GRID.easting[columns].tolist(), GRID.northing[rows].tolist(), strict=True))


def say_contact(name, kind, point, depth, error=1.0, status="at"):
    level = ground_elevation(*point) - depth
    return Top(name, kind, *point, "shale", "basal", status, depth, level, error, "invented")


def say_thickness(name, kind, point, role, thickness, *, at_least=False):
    return Thickness(name, kind, *point, role, thickness, 1.0, at_least, "invented")


def make_county(n_soundings=45, n_wells=8, seed=3):
    """A county whose soundings and wells say the truth, wells to 0.3 m, soundings to 5 % of the depth."""
    points = place_points(n_soundings + n_wells, seed)
    names = [f"S{i}" for i in range(n_soundings)] + [f"W{i}" for i in range(n_wells)]
    kinds = ["sounding"] * n_soundings + ["well"] * n_wells
    tops, thicknesses, resistivities = [], [], []
    for name, kind, point in zip(names, kinds, points, strict=True):
        depth = float(contact_depth(*point))
        tops.append(say_contact(name, kind, point, depth, 0.3 if kind == "well" else 0.05 * depth))
        for role, field in ((Role.DEEP_AQUIFER, gravel_thickness), (Role.SHALLOW_AQUIFER, shallow_thickness)):
            thicknesses.append(say_thickness(name, kind, point, role, float(field(*point))))
        if kind == "sounding" and shallow_thickness(*point) > 1.0:
            log = float(np.log(shallow_resistivity(*point)))
            resistivities.append(ShallowResistivity(name, *point, log, 0.05))
    # Rows of another contact, which the surfaces must not take for the basal one.
    strange = Top("S0", "sounding", *points[0], "shale", "bedrock", "at", 500.0, -100.0, 0.1, "invented")
    survey = Survey(
        soundings=tuple(
            Sounding(name, *point, float(ground_elevation(*point)), CURVE)
            for name, point in zip(names[:n_soundings], points[:n_soundings], strict=True)
        ),
        wells=tuple(
            Well(name, *point, float(ground_elevation(*point)), 120.0)
            for name, point in zip(names[n_soundings:], points[n_soundings:], strict=True)
        ),
        ground=Ground(GRID, ground_elevation(*cell_centres())),
        boundary=ell_shaped_boundary(),
    )
    interpretation = Interpretation((), (), (*tops, strange), tuple(thicknesses), tuple(resistivities))
    return County(interpretation, survey)


def ell_shaped_boundary():
    """The grid less its north-east corner."""
    west, south, east, north = GRID.bounds
    return shapely.box(west, south, east, north).difference(shapely.box(east - 900.0, north - 730.0, east, north))


WIDE = SurfaceOptions(reach=10_000.0)
