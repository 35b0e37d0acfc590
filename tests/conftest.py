"""Fixtures that several rooms share: a finished job over an invented mini region, made of plain formulas.

Nothing here is computed by the steps of the package, so that what writes and draws is tested by itself.
"""

from pathlib import Path

import geopandas
import numpy as np
import pytest
import shapely

from geoves.domain.earth import Inverted, LayeredModel, ModelEnsemble
from geoves.domain.findings import Finding
from geoves.domain.grids import CrossValidation, Grid, Surface, SurfaceStack, Variogram
from geoves.domain.region import Delivery, Region
from geoves.domain.results import Results
from geoves.domain.survey import Curve, Ground, LogInterval, Permit, Pick, Sounding, Survey, Well
from geoves.domain.tops import (
    Interpretation,
    PickOpinion,
    ShallowResistivity,
    Thickness,
    Top,
    UnitCalibration,
    UnitColumn,
    WellReading,
)
from geoves.domain.units import Z_95, Role, Template, Unit

CRS = "EPSG:26914"
GRID = Grid(west=500_000.0, north=4_602_400.0, cell_size=50.0, n_rows=48, n_columns=60)
AB2 = np.array([1.5, 2.5, 4, 6, 10, 15, 25, 40, 40, 60, 100, 150, 200, 320.0])
MN2 = np.array([0.5] * 8 + [5.0] * 6)
# name, x and y from the south-west corner (m), what the curve says of bedrock
PLACES = [
    ("Larch 1", 300, 1150, "seen"),
    ("Larch 2", 750, 600, "seen"),
    ("Larch 3", 1000, 1350, "not_distinct"),
    ("Larch 4", 1300, 1900, "seen"),
    ("Larch 5", 1550, 1150, "deeper_than"),
    ("Larch 6", 2000, 1500, "seen"),
    ("Larch 7", 2350, 950, "not_distinct"),
    ("Larch 8", 2700, 500, "seen"),
]


def valley_northing(x):
    """Where the axis of the invented valley runs (m above the southern edge)."""
    return 1200.0 + 150.0 * np.sin(x / 700.0)


def bedrock(x, y):
    """Elevation of bedrock (m): a plain, a valley that falls to the east, a tributary from the north."""
    incision = np.exp(-(((y - valley_northing(x)) / 260.0) ** 2))
    branch = np.exp(-(((x - 1400.0) / 180.0) ** 2)) / (1.0 + np.exp(-(y - 1200.0) / 60.0))
    return 372.0 - 0.004 * x - 48.0 * np.maximum(incision, 0.6 * branch) + 0.002 * np.abs(y - 1200.0)


def ground(x, y):
    """Elevation of the land surface (m)."""
    return 402.0 - 0.003 * x + 3.0 * np.sin(y / 600.0)


def gravel(x, y):
    """Thickness of the deep gravel (m)."""
    return np.maximum(14.0 * np.exp(-(((y - valley_northing(x)) / 220.0) ** 2)) - 1.5, 0.0)


def small_template():
    return Template(
        (
            Unit("till", "Weathered till", Role.COVER, 22.0, 45.0, (0.0, 0.0), ("till", "topsoil")),
            Unit("upper_gravel", "Upper gravel", Role.SHALLOW_AQUIFER, 70.0, 160.0, (1.0, 12.0), ("sand and gravel",)),
            Unit("blue_clay", "Blue clay", Role.CONFINING, 12.0, 26.0, (5.0, 40.0), ("blue clay", "clay")),
            Unit("deep_gravel", "Basal gravel", Role.DEEP_AQUIFER, 38.0, 55.0, (15.0, 90.0), ("gravel",)),
            Unit("shale", "Shale & siltstone", Role.BEDROCK, 50.0, 95.0, None, ("shale", "rock")),
        )
    )


def small_region(length_unit="m"):
    feet = length_unit != "m"
    return Region(
        name="Larkmoor Mini",
        path=Path("larkmoor") / "region.toml",
        crs=CRS,
        crs_unit_metres=1.0,
        vertical_datum="EPSG:6360" if feet else "EPSG:5703",  # NAVD88 height, in US survey feet or in metres
        length_unit=length_unit,
        cell_size=GRID.cell_size,
        random_seed=7,
        template=small_template(),
        delivery=Delivery(
            "Larkmoor Water Board", "maps@larkmoor.example", "For planning within the county.", ("owner",)
        ),
        settings={"surfaces": {"reach": 1500.0}},
        files={"soundings": Path("soundings.csv"), "readings": Path("readings.csv")},
    )


def _rho_stand_in(thickness, resistivity):
    """A smooth curve with the look of a sounding: layers weighted by the share of current in them. Not physics."""
    depth = np.concatenate([[0.0], np.cumsum(thickness), [np.inf]])
    share = 1.0 - 1.0 / np.sqrt(1.0 + (2.0 * depth[None, :] / AB2[:, None]) ** 2)
    return np.exp(np.diff(share, axis=1) @ np.log(resistivity))


def _place(x, y):
    return GRID.west + x, GRID.bounds[1] + y


def _sounding_models(x, y):
    """Thickness and resistivity (till, upper gravel, blue clay, deep gravel, shale) under a place."""
    depth = ground(x, y) - bedrock(x, y)
    deep = max(float(gravel(x, y)), 1.5)
    return np.array([2.0, 7.0, depth - 9.0 - deep, deep]), np.array([32.0, 105.0, 18.0, 46.0, 72.0])


def small_soundings():
    soundings = []
    for index, (name, x, y, _) in enumerate(PLACES):
        rho = _rho_stand_in(*_sounding_models(x, y)) * (1.0 + 0.02 * np.sin(7.0 * np.arange(AB2.size) + index))
        rho[8:] *= 1.06
        used = np.ones(AB2.size, bool)
        reason = [""] * AB2.size
        if index == 3:
            rho[5] *= 1.9
            used[5] = False
            reason[5] = "stands 90 % above its neighbours"
        east, north = _place(x, y)
        curve = Curve(
            AB2,
            MN2,
            rho,
            np.full(AB2.size, 0.03),
            (MN2 > 1).astype(int),
            used,
            tuple(reason),
            2 + 14 * index + np.arange(14),
        )
        extra = {"crew": f"crew {index % 2 + 1}", "owner": "withheld name"}
        soundings.append(
            Sounding(name, east, north, float(ground(x, y)), curve, azimuth_deg=90.0, date="2026-05-12", extra=extra)
        )
    return tuple(soundings)


def small_wells():
    def well(name, x, y, intervals, **more):
        logs = tuple(LogInterval(top, bottom, words, code) for top, bottom, words, code in intervals)
        return Well(name, *_place(x, y), float(ground(x, y)), intervals[-1][1], logs, **more)

    rock = float(ground(700, 1280) - bedrock(700, 1280))
    return (
        well(
            "W-1",
            700,
            1280,
            [(0, 3, "topsoil", None), (3, 9, "sand & gravel, wet", None), (9, rock - 11, "blue clay", None),
             (rock - 11, rock, "coarse gravel", "deep_gravel"), (rock, rock + 3, "shale", None)],
            water_level=4.2,
            specific_conductance=810.0,
        ),
        well("W-2", 1900, 1250, [(0, 2, "till", None), (2, 8, "sand & gravel", None), (8, 31, "clay, sticky", None)]),
        well("W-3", 2500, 2000, [(0, 4, "till", None), (4, 7, "muck & boulders", None), (7, 36, "shale", None)],
             location_accuracy=160.0, extra={"owner": "withheld name"}),
    )  # fmt: skip


def small_permits():
    rows = []
    for index in range(12):
        x, y = 250.0 + 230.0 * index, 500.0 + (index * 610.0) % 1500.0
        if index == 11:
            x, y = 3200.0, 2300.0  # outside the grid
        accuracy = 164.0 if index % 4 == 2 else None
        use = ("domestic", "irrigation", "stock")[index % 3]
        rows.append(
            Permit(f"P-{index + 101}", *_place(x, y), 30.0 + 5.0 * index, use, accuracy, {"year": 2001 + index})
        )
    return tuple(rows)


def small_inverted():
    found = []
    random = np.random.default_rng(7)
    for index, (name, x, y, _) in enumerate(PLACES):
        thickness, resistivity = _sounding_models(x, y)
        deviation = np.concatenate([np.full(4, 0.12), np.full(5, 0.08)])
        draws = np.exp(deviation * random.standard_normal((60, 9)))
        predicted = _rho_stand_in(thickness, resistivity)
        robust = np.ones(AB2.size)
        robust[2] = 0.4 if index == 5 else 1.0
        found.append(
            Inverted(
                name,
                LayeredModel(thickness, resistivity),
                ModelEnsemble(thickness * draws[:, :4], resistivity * draws[:, 4:], np.full(60, 1 / 60)),
                np.diag(deviation**2),
                np.array([1.0, 1.06]),
                predicted,
                robust,
                2.1 + 0.3 * index,
                0.025,
                {3: 41.0, 4: 22.5, 5: 20.1, 6: 23.9},
                95.0,
                ("The second potential spacing reads 6 % higher than the first.",) if index == 0 else (),
            )
        )
    return tuple(found)


def _column(index, picks):
    name, x, y, status = PLACES[index]
    depth = float(ground(x, y) - bedrock(x, y))
    codes = small_template().codes
    probability = np.full((5, 5), 0.05) + np.eye(5) * 0.75
    bound = 0.7 * depth if status == "deeper_than" else depth
    error = {"seen": 3.0, "not_distinct": 9.0, "deeper_than": np.nan}[status]
    edges = np.linspace(0.0, 1.3 * bound, 31)
    known = status != "deeper_than"
    basal = depth - max(float(gravel(x, y)), 1.5)
    return UnitColumn(
        name, codes, np.full(5, 0.8), probability, status, bound, error, picks,
        tuple(PickOpinion(pick, 0.4, depth, 0.0, against=False) for pick in picks),
        profile_depth=edges,
        profile=_profile(x, y, 0.5 * (edges[1:] + edges[:-1])),
        basal_depth=basal + np.array([-5.0, 0.0, 5.0]) if known else np.full(3, np.nan),
        gravel_probability=0.62 if known else np.nan,
        gravel_limit=9.0 if known else np.nan,
        base_contrast=0.7,
    )  # fmt: skip


def _profile(x, y, depth):
    """Shares of the units (d, 5) at depths: each begins where it does, softened over 2 m."""
    tops = np.concatenate([[-1e3], np.cumsum(_sounding_models(x, y)[0])])
    begun = 1.0 / (1.0 + np.exp(-(depth[:, None] - tops) / 2.0))
    return np.hstack([begun[:, :-1] - begun[:, 1:], begun[:, -1:]])


def small_interpretation():
    pick = Pick("Larch 7", "shale", "at", 65.0, 4.0, "A. Reader", "tied to the log of W-2 along the valley")
    columns = tuple(_column(i, (pick,) if PLACES[i][0] == pick.place else ()) for i in range(len(PLACES)))
    tops, thicknesses, shallow = [], [], []
    for column, (name, x, y, status) in zip(columns, PLACES, strict=True):
        where = _place(x, y)
        depth, kind, error, source = column.bedrock_depth, "sounding", column.bedrock_depth_error, "curve"
        if column.picks:
            depth, kind, error, source = 65.0, "pick", 4.0, "pick by A. Reader: tied to the log of W-2 along the valley"
        word = "below" if status == "deeper_than" else "at"
        level = float(ground(x, y)) - depth
        tops.append(Top(name, kind, *where, "shale", "bedrock", word, depth, level, error, source))
        thicknesses.append(Thickness(name, kind, *where, "deep_aquifer", float(gravel(x, y)), 3.0, False, source))
        shallow.append(ShallowResistivity(name, *where, float(np.log(105.0)), 0.12))
    readings = []
    for well in small_wells():
        for log in well.intervals:
            mapped = {"topsoil": "till", "till": "till", "shale": "shale", "muck & boulders": None}
            default = "blue_clay" if "clay" in log.description else "upper_gravel"
            code = log.unit or mapped.get(log.description, default)
            confidence = 0.0 if code is None else 0.9
            readings.append(WellReading(well.name, log.top, log.bottom, log.description, code, confidence))
    for thing, word in zip(small_wells(), ("at", "below", "at"), strict=True):
        well, depth = thing.name, thing.total_depth if word == "below" else thing.intervals[-1].top
        level, error = thing.ground_elevation - depth, np.nan if word == "below" else 0.5
        tops.append(
            Top(well, "well", thing.easting, thing.northing, "shale", "bedrock", word, depth, level, error, "log")
        )
    return Interpretation(
        columns,
        tuple(readings),
        tuple(tops),
        tuple(thicknesses),
        tuple(shallow),
        unmapped_words=("muck & boulders",),
        calibration=(
            UnitCalibration("blue_clay", (12.0, 26.0), (14.0, 24.0), 21.0, used=True),
            UnitCalibration("shale", (50.0, 95.0), (50.0, 95.0), 3.0, used=False),
        ),
        remarks=("A remark.",),
    )


def _banded(name, title, quantity, estimate, error, *, log=False):
    if log:
        low, high, error = estimate * np.exp(-Z_95 * error), estimate * np.exp(Z_95 * error), None
    else:
        low, high = estimate - Z_95 * error, estimate + Z_95 * error
    if quantity in ("thickness", "depth"):
        low = np.maximum(low, 0.0)
    return Surface(name, title, quantity, GRID, estimate, error, low, high)


def small_stack():
    x, y = np.meshgrid(GRID.easting - GRID.west, GRID.northing - GRID.bounds[1])
    covered = ~((x > 2600.0) & (y > 1900.0))
    blank = np.where(covered, 0.0, np.nan)
    near = np.min([np.hypot(x - px, y - py) for _, px, py, _ in PLACES], axis=0)
    error = 2.0 + 0.006 * near + blank
    rock, thick = bedrock(x, y) + blank, gravel(x, y) + blank
    present = 1.0 / (1.0 + np.exp(-(thick - 4.0) / 1.5))
    land = ground(x, y)
    surfaces = (
        _banded("bedrock_elevation", "Bedrock elevation", "elevation", rock, error),
        _banded("bedrock_depth", "Depth to bedrock", "depth", land - rock, error),
        _banded("deep_gravel_thickness", "Thickness of the deep gravel", "thickness", thick, 0.3 * error),
        _banded(
            "deep_gravel_top_elevation",
            "Top of the deep gravel",
            "elevation",
            np.where(present < 0.05, np.nan, rock + thick),
            error,
        ),
        _banded(
            "deep_gravel_top_depth",
            "Depth to the top of the deep gravel",
            "depth",
            np.where(present < 0.05, np.nan, land - rock - thick),
            error,
        ),
        _banded("shallow_aquifer_thickness", "Thickness of the shallow aquifer", "thickness", 5.0 + blank, 0.2 * error),
        _banded("cover_thickness", "Thickness of the cover", "thickness", 4.0 + blank, 0.1 * error),
        _banded(
            "confining_unit_thickness",
            "Thickness of the confining unit",
            "thickness",
            land - rock - thick - 9.0,
            error,
        ),
        Surface("deep_gravel_probability", "Probability of deep gravel", "probability", GRID, present),
        _banded(
            "shallow_aquifer_resistivity",
            "Resistivity of the shallow aquifer",
            "resistivity",
            105.0 * np.exp(0.3 * np.sin(x / 500.0)) + blank,
            np.full(GRID.shape, 0.15) + blank,
            log=True,
        ),
        Surface(
            "shallow_aquifer_probability",
            "Probability of the shallow aquifer",
            "probability",
            GRID,
            0.55 + 0.4 * np.sin(x / 800.0) + blank,
        ),
    )
    lag = np.arange(100.0, 1600.0, 150.0)
    semivariance = 4.0 + 180.0 * (1.0 - np.exp(-3.0 * lag / 1400.0))
    variogram = Variogram(
        "Bedrock elevation", "m", "exponential", 4.0, 180.0, 1400.0, 90.0, 0.4, 11, lag,
        semivariance * (1.0 + 0.1 * np.cos(lag)), np.arange(4, 24, 2), "fitted by weighted least squares",
    )  # fmt: skip
    measured = np.array([bedrock(px, py) for _, px, py, _ in PLACES])
    crossed = CrossValidation(
        "Bedrock elevation", "m", tuple(p[0] for p in PLACES), ("sounding",) * len(PLACES), measured,
        measured + np.array([3.0, -5.0, 9.0, -2.0, 6.0, -11.0, 4.0, -1.0]), np.full(len(PLACES), 6.0),
    )  # fmt: skip
    return SurfaceStack(
        GRID, land, covered, {s.name: s for s in surfaces}, (variogram,), (crossed,), 1500.0, ("Few wells reach rock.",)
    )


def _permit_layer(permits):
    rows = []
    for p in permits:
        x, y = p.easting - GRID.west, p.northing - GRID.bounds[1]
        inside = 0 < x < 3000 and 0 < y < 2400 and not (x > 2600 and y > 1900)
        depth = float(ground(x, y) - bedrock(x, y)) if inside else np.nan
        thick = float(gravel(x, y)) if inside else np.nan
        rows.append(
            {
                "permit": p.name, "use": p.use, "requested_depth": p.requested_depth,
                "location_accuracy": np.nan if p.location_accuracy is None else p.location_accuracy, "covered": inside,
                "bedrock_depth": depth, "bedrock_depth_p05": depth - 6.0, "bedrock_depth_p95": depth + 6.0,
                "gravel_top_depth": depth - thick, "gravel_top_depth_p05": depth - thick - 6.0,
                "gravel_top_depth_p95": depth - thick + 6.0, "gravel_thickness": thick,
                "gravel_thickness_p05": max(thick - 2.0, 0.0) if inside else np.nan,
                "gravel_thickness_p95": thick + 2.0,
                "gravel_probability": 1.0 / (1.0 + np.exp(4.0 - thick)),
                "location_method": p.location_method, "covered_share": float(inside),
                "over_gravel": "undetermined" if inside else None,
                "reach_probability": 0.4 if inside and p.requested_depth else np.nan,
                "reaches_gravel": "undetermined" if inside and p.requested_depth else None,
                "geometry": shapely.Point(p.easting, p.northing),
            }
        )  # fmt: skip
    return geopandas.GeoDataFrame(rows, crs=CRS)


def small_layers():
    x = np.arange(0.0, 3001.0, 100.0)
    axis = shapely.LineString(np.column_stack(_place(x, valley_northing(x))))
    branch = shapely.LineString([_place(1400, 2300), _place(1400, 1700), _place(1400, float(valley_northing(1400.0)))])

    def frame(**columns):
        return geopandas.GeoDataFrame(columns, crs=CRS)

    return {
        "bedrock_contours": frame(elevation=[330.0, 340.0], geometry=[axis, branch]),
        "thickness_contours": frame(thickness=[5.0], geometry=[axis.buffer(150.0).exterior]),
        "valley_axis": frame(
            length=[axis.length, branch.length],
            lowest_elevation=[312.0, 330.0],
            highest_elevation=[324.0, 345.0],
            mean_slope=[12.0 / axis.length, 15.0 / branch.length],
            line=[1, 2],
            order=[1, 2],
            joins=[0, 1],
            geometry=[axis, branch],
        ),
        "valley_stations": frame(
            line=[1, 1, 2],
            order=[1, 1, 2],
            distance=[0.0, 2000.0, 0.0],
            elevation=[324.0, 316.0, 345.0],
            standard_error=[4.0, 5.0, 6.0],
            depth=[78.0, 80.0, 60.0],
            slope=[0.004, 0.004, 0.025],
            geometry=[axis.interpolate(0.0), axis.interpolate(2000.0), branch.interpolate(0.0)],
        ),
        "gravel_extent": frame(
            likelihood=["likely", "possible"],
            least_probability=[0.66, 0.33],
            area=[axis.buffer(150.0).area, axis.buffer(250.0).area - axis.buffer(150.0).area],
            geometry=[axis.buffer(150.0), axis.buffer(250.0).difference(axis.buffer(150.0))],
        ),
        "permits": _permit_layer(small_permits()),
    }


def build_small_results(length_unit="m"):
    doubts = (Finding("doubt", "readings.csv", 49, "apparent_resistivity", "61.3", "a jump of 90 %", "Larch 4"),)
    west, south, east, north = GRID.bounds
    interpretation = small_interpretation()
    picks = tuple(pick for column in interpretation.columns for pick in column.picks)
    survey = Survey(
        small_soundings(), small_wells(), small_permits(), picks,
        Ground(GRID, small_stack().ground), shapely.box(west, south, east, north), doubts,
    )  # fmt: skip
    merit = {"bedrock_elevation": {"leave_one_out_rmse_m": 6.1, "coverage_90": 0.88, "n": 8}}
    return Results(
        small_region(length_unit),
        survey,
        small_inverted(),
        interpretation,
        small_stack(),
        small_layers(),
        doubts,
        merit,
    )


@pytest.fixture(scope="session")
def small_results():
    """A finished job over an invented region of 3 x 2.4 km; length unit m."""
    return build_small_results()


@pytest.fixture(scope="session")
def small_results_in_feet():
    """The same job, to be delivered in US survey feet."""
    return build_small_results("us-ft")
