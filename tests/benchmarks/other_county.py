"""A county of another country, drawn by other means than the demo's: a check that nothing fits the demo alone.

Two valleys follow random walks across a rock surface that is a random field; their cross-section changes along the way
and gravel lies in belts beside the deepest line and on benches. Thin beds that no template knows are in the columns.
Everything is invented. Lengths in m, resistivities in ohm m; x and y are local, counted from the demo's origin.
"""

from pathlib import Path

import attrs
import geopandas as gpd
import numpy as np
import pandas as pd
import rasterio
from scipy.ndimage import gaussian_filter, gaussian_filter1d, map_coordinates
from scipy.spatial import KDTree
from shapely.geometry import Point, Polygon

from demo_region.generator.county import ORIGIN
from geoves.kernels.layered_earth import apparent_resistivity
from tests.reference.plain_script import Local

OTHER = "another county"
CRS = "EPSG:32633"
SOUNDINGS, WENNER, WELLS, APART = 120, 12, 14, 900.0
NODE, MARGIN, SIDE = 50.0, 1_000.0, 1024  # the fields' grid: its spacing, how far it reaches outside, its padded side
SHAPE = (541, 641)  # nodes in y and x: 27 km by 32 km
CENTRE = np.array([15_000.0, 12_500.0])
RANGES = {  # the central 90 % of what each unit shows
    "loam": (30.0, 80.0),
    "upper_gravel": (90.0, 300.0),
    "clay": (18.0, 35.0),
    "lower_gravel": (60.0, 110.0),
    "sandstone": (90.0, 250.0),
}
BEDS = {"sand": (50.0, 140.0), "till": (40.0, 70.0)}  # thin beds in the clay
WORDS = {
    "loam": ("loam", "stony loam", "boulder clay"),
    "upper_gravel": ("gravel", "sandy gravel", "sand and gravel"),
    "clay": ("grey clay", "clay", "silty clay"),
    "lower_gravel": ("gravel", "coarse gravel", "sandy gravel"),
    "sandstone": ("sandstone", "red sandstone", "broken sandstone"),
    "sand": ("sand", "fine sand"),
    "till": ("till", "boulder clay"),
}
# AB/2, six a decade; MN/2 and the AB/2 from and to which it is used.
AB2 = np.array([1.5, 2.2, 3.2, 4.6, 6.8, 10.0, 15.0, 22.0, 32.0, 46.0, 68.0, 100.0, 150.0, 220.0, 320.0, 460.0])
SEGMENTS = ((0.4, 1.5, 10.0), (2.0, 6.8, 46.0), (8.0, 32.0, 220.0), (30.0, 150.0, 460.0))
SPACING_A = np.array([1.0, 1.5, 2.2, 3.3, 5.0, 7.5, 11.0, 16.0, 24.0, 36.0, 54.0, 80.0, 120.0, 180.0, 260.0])
NOISE, SHIFT, OUTLIERS = 0.04, 0.05, 0.01
PLAIN = Local(RANGES["lower_gravel"], highest=600.0, rock_word="sandstone", well_unit=1.0)

REGION = f"""[region]
name = "Brannerau"
crs = "{CRS}"
vertical_datum = "EPSG:5621"
length_unit = "m"
cell_size = 100.0
random_seed = 3

[inputs]
soundings = "soundings.csv"
readings = "readings.csv"
wells = "wells.csv"
well_logs = "well_logs.csv"
ground = "ground.tif"
boundary = "boundary.gpkg"

[[unit]]
code = "loam"
role = "cover"
resistivity = [30, 80]
log_terms = ["loam", "stony loam", "boulder clay", "till"]

[[unit]]
code = "upper_gravel"
role = "shallow_aquifer"
resistivity = [90, 300]
depth_to_top = [1, 8]
log_terms = ["gravel", "sandy gravel", "sand and gravel", "sand", "fine sand"]

[[unit]]
code = "clay"
role = "confining"
resistivity = [18, 35]
log_terms = ["grey clay", "clay", "silty clay"]

[[unit]]
code = "lower_gravel"
role = "deep_aquifer"
resistivity = [60, 110]
depth_to_top = [12, 140]
log_terms = ["gravel", "coarse gravel", "sandy gravel", "sand", "fine sand"]

[[unit]]
code = "sandstone"
role = "bedrock"
resistivity = [90, 250]
depth_to_top = [8, 160]
log_terms = ["sandstone", "red sandstone", "broken sandstone"]

[interpretation]
method = "together"
"""


@attrs.frozen(eq=False)
class OtherCounty:
    """The truth: one array of nodes a field, (27 km / 50 m, 32 km / 50 m); the methods interpolate between nodes.

    ground, rock : elevations    incision : depth of the valleys below the rock around them
    cover, upper, lower : thicknesses of loam, upper and lower gravel; the clay fills the rest
    resistivity : unit -> the smooth part of its logarithm
    """

    ground: np.ndarray
    rock: np.ndarray
    incision: np.ndarray
    cover: np.ndarray
    upper: np.ndarray
    lower: np.ndarray
    resistivity: dict[str, np.ndarray]
    boundary: Polygon

    def ground_elevation(self, x, y):
        return look_up(self.ground, x, y)

    def bedrock_elevation(self, x, y):
        return look_up(self.rock, x, y)

    def bedrock_relief(self, x, y):
        return look_up(self.incision, x, y)

    def deep_gravel_thickness(self, x, y):
        return look_up(self.lower, x, y)

    def shallow_aquifer_thickness(self, x, y):
        return look_up(self.upper, x, y)

    def shallow_aquifer_resistivity(self, x, y):
        return np.exp(look_up(self.resistivity["upper_gravel"], x, y))


def look_up(values, x, y):
    """A field between its nodes, shaped as x and y."""
    rows, columns = (np.asarray(y) + MARGIN) / NODE, (np.asarray(x) + MARGIN) / NODE
    return map_coordinates(values, [rows, columns], order=1, mode="nearest")


def draw_field(rng, length):
    """A random field of zero mean and unit variance on the nodes; `length` is its Matérn 3/2 scale."""
    wavenumber = 2.0 * np.pi * np.fft.fftfreq(SIDE, NODE)
    squared = wavenumber[:, None] ** 2 + wavenumber[None, :] ** 2
    amplitude = (3.0 / length**2 + squared) ** -1.25
    amplitude[0, 0] = 0.0
    drawn = np.fft.ifft2(np.fft.fft2(rng.standard_normal((SIDE, SIDE))) * amplitude).real
    return (drawn / np.sqrt(np.mean(amplitude**2)))[: SHAPE[0], : SHAPE[1]]


def wander(rng, count, length):
    """A smooth sequence (count,) of unit variance along a path of steps as long as a node."""
    sigma = length / NODE
    pad = int(4.0 * sigma) + 1
    drawn = gaussian_filter1d(rng.standard_normal(count + 2 * pad), sigma)[pad:-pad]
    return drawn * np.sqrt(2.0 * sigma * np.sqrt(np.pi))


def walk(rng, start, end):
    """A random walk with memory from start to end, as complex numbers, turned and stretched to meet both."""
    count = round(1.2 * abs(end - start) / NODE)
    path = np.cumsum(np.exp(0.6j * wander(rng, count, 1_200.0)))
    return start + (end - start) * path / path[-1]


def draw_thalwegs(rng):
    """The main valley right across the county, and a branch that joins it."""
    middle = complex(*(CENTRE + rng.normal(0.0, 2_000.0, 2)))
    angle = rng.uniform(0.0, 2.0 * np.pi)
    head, foot = (middle + 19_000.0 * np.exp(1j * one) for one in (angle, angle + np.pi + rng.normal(0.0, 0.3)))
    main = walk(rng, head, foot)
    turn = rng.choice([-1.0, 1.0]) * rng.uniform(0.9, 1.7)
    branch = walk(rng, middle + 19_000.0 * np.exp(1j * (angle + turn)), main[int(rng.uniform(0.45, 0.65) * len(main))])
    return main, branch


def nodes():
    """Local x and y of the nodes, (rows, columns) each."""
    return np.meshgrid(*(np.arange(count) * NODE - MARGIN for count in reversed(SHAPE)))


def measure_from(path):
    """Signed distance of every node from a path, left of it positive, and the index of the nearest step."""
    x, y = nodes()
    distance, nearest = KDTree(np.column_stack([path.real, path.imag])).query(np.column_stack([x.ravel(), y.ravel()]))
    along = np.gradient(path)[nearest]
    offset = (x.ravel() + 1j * y.ravel()) - path[nearest]
    side = np.where((along.conjugate() * offset).imag >= 0.0, 1.0, -1.0)
    return (side * distance).reshape(SHAPE), nearest.reshape(SHAPE)


def carve_valley(rng, path, depth, width):
    """Incision and thickness of the gravel on the nodes, of one valley."""
    distance, at = measure_from(path)

    def along(length):
        return wander(rng, len(path), length)[at]

    depth = depth * np.exp(0.25 * along(2_500.0))
    width = width * np.exp(0.3 * along(2_000.0) + 0.2 * np.sign(distance) * along(1_500.0))
    incision = depth * np.exp(-((np.abs(distance) / width) ** (2.0 * np.exp(0.35 * along(2_500.0)))))
    breadth = 0.45 * width * np.exp(0.3 * along(1_200.0))
    across = (distance - 0.4 * width * along(1_200.0)) / breadth
    belt = 16.0 * np.exp(0.4 * along(1_500.0)) * np.clip(1.0 - across**2, 0.0, 1.0) * (along(2_000.0) > -0.9)
    where = along(1_800.0) * np.sign(distance)
    share = incision / depth
    bench = 7.0 * np.exp(0.3 * along(1_500.0)) * ((where > 0.5) & (share > 0.2) & (share < 0.5))
    return incision, np.maximum(belt, bench)


def draw_upper_gravel(rng):
    """Thickness of the upper gravel: a terrace along today's river, and patches apart from it."""
    angle = rng.uniform(0.0, 2.0 * np.pi)
    reach = 19_000.0 * np.exp(1j * angle)
    river = walk(rng, complex(*CENTRE) + reach, complex(*CENTRE) - reach)
    distance, at = measure_from(river)
    breadth = 1_100.0 * np.exp(0.4 * wander(rng, len(river), 2_000.0))[at]
    terrace = np.clip(4.0 * (1.0 - np.abs(distance) / breadth), 0.0, 1.0) * (6.0 + 1.5 * draw_field(rng, 1_500.0))
    patches = np.clip(draw_field(rng, 1_500.0) - 0.4, 0.0, None)
    return np.maximum(terrace, np.where(patches > 0.0, 2.0 + 4.0 * patches, 0.0))


def draw_resistivity(rng):
    """Logarithms of the units' resistivities on the nodes, each with the spread that its range allows."""
    fields = {}
    for unit, (low, high) in RANGES.items():
        middle, spread = log_range(low, high)
        share = 1.0 if unit == "upper_gravel" else 0.8
        fields[unit] = middle + share * spread * draw_field(rng, 2_500.0)
    return fields


def log_range(low, high):
    """Mean and standard deviation of the logarithm whose central 90 % is low to high."""
    return 0.5 * np.log(low * high), np.log(high / low) / 3.29


def draw_boundary(rng):
    angle = np.linspace(0.0, 2.0 * np.pi, 13)[:-1] + rng.uniform(-0.15, 0.15, 12)
    radius = rng.uniform(9_500.0, 12_000.0, 12)
    return Polygon(CENTRE + np.column_stack([1.2 * radius * np.cos(angle), radius * np.sin(angle)]).round())


def draw_other_county(seed):
    """The county of a seed."""
    rng = np.random.default_rng([seed, 7_919])
    x, y = ((local - middle) / 1_000.0 for local, middle in zip(nodes(), CENTRE, strict=True))
    slope, dip = rng.normal(0.0, 0.8, 2), rng.normal(0.0, 0.5, 2)
    ground = 240.0 + slope @ [x.ravel(), y.ravel()]
    ground = ground.reshape(SHAPE) + 7.0 * draw_field(rng, 2_500.0) + 1.0 * draw_field(rng, 400.0)
    plane = 202.0 + ((slope + dip) @ [x.ravel(), y.ravel()]).reshape(SHAPE)
    main, branch = draw_thalwegs(rng)
    valleys = carve_valley(rng, main, 62.0, 1_100.0), carve_valley(rng, branch, 40.0, 800.0)
    incision, gravel = (gaussian_filter(np.maximum(*pair), 1.5) for pair in zip(*valleys, strict=True))
    rock = plane + 8.0 * draw_field(rng, 3_500.0) + 2.0 * draw_field(rng, 600.0) - incision
    rock = np.minimum(rock, ground - 8.0)
    drift = ground - rock
    cover = np.minimum(2.5 * np.exp(0.4 * draw_field(rng, 1_200.0)), 0.3 * drift)
    upper = np.minimum(draw_upper_gravel(rng), 0.4 * (drift - cover))
    lower = np.minimum(gravel, 0.7 * (drift - cover - upper))
    upper, lower = (np.where(values < 0.7, 0.0, values) for values in (upper, lower))
    return OtherCounty(
        ground, rock, incision, cover, upper, lower, draw_resistivity(rng), draw_boundary(np.random.default_rng(seed))
    )


def draw_column(rng, county, x, y):
    """The beds below a place, top first: rows of unit or bed, thickness, resistivity; rock last, without an end."""
    thickness = {
        "loam": look_up(county.cover, [x], [y])[0],
        "upper_gravel": look_up(county.upper, [x], [y])[0],
        "clay": 0.0,
        "lower_gravel": look_up(county.lower, [x], [y])[0],
    }
    drift = county.ground_elevation([x], [y])[0] - county.bedrock_elevation([x], [y])[0]
    thickness["clay"] = drift - sum(thickness.values())
    resistivity = {}
    for unit, field in county.resistivity.items():
        scatter = 0.05 if unit == "upper_gravel" else 0.6 * log_range(*RANGES[unit])[1]
        resistivity[unit] = np.exp(look_up(field, [x], [y])[0] + scatter * rng.standard_normal())
    beds = [("loam", thickness["loam"], resistivity["loam"])]
    beds += [("upper_gravel", thickness["upper_gravel"], resistivity["upper_gravel"])]
    beds += split_clay(rng, thickness["clay"], resistivity["clay"])
    beds += split_gravel(rng, thickness["lower_gravel"], resistivity)
    return [bed for bed in beds if bed[1] > 0.0] + [("sandstone", np.inf, resistivity["sandstone"])]


def split_clay(rng, thickness, resistivity):
    """Clay with lenses of sand and bands of till at random depths, one in 15 m or so."""
    count = rng.poisson(thickness / 15.0)
    thin = rng.uniform(0.5, 3.0, count)
    thin *= min(1.0, 0.3 * thickness / max(thin.sum(), 1e-9))
    pieces = rng.dirichlet(np.ones(count + 1)) * (thickness - thin.sum())
    beds = [("clay", pieces[0], resistivity)]
    for lens, piece in zip(thin, pieces[1:], strict=True):
        name = rng.choice(list(BEDS))
        middle, spread = log_range(*BEDS[name])
        beds += [(name, lens, np.exp(rng.normal(middle, spread))), ("clay", piece, resistivity)]
    return beds


def split_gravel(rng, thickness, resistivity):
    """The lower gravel, with a bed of clay in every fourth that is thick enough."""
    if thickness < 6.0 or rng.random() > 0.25:
        return [("lower_gravel", thickness, resistivity["lower_gravel"])]
    bed = rng.uniform(0.5, 1.5)
    above = rng.uniform(0.2, 0.8) * (thickness - bed)
    rest = thickness - bed - above
    return [
        ("lower_gravel", above, resistivity["lower_gravel"]),
        ("clay", bed, resistivity["clay"]),
        ("lower_gravel", rest, resistivity["lower_gravel"]),
    ]


def draw_places(rng, boundary, count, apart):
    """Local x and y (count, 2) inside the boundary, none nearer to another than `apart`, in whole metres."""
    west, south, east, north = boundary.bounds
    places = np.empty((0, 2))
    while len(places) < count:
        place = np.round(rng.uniform([west, south], [east, north]))
        near = len(places) and np.min(np.hypot(*(places - place).T)) < apart
        if not near and boundary.contains(Point(place)):
            places = np.vstack([places, place])
    return places


def read_schlumberger(rng, longest):
    """AB/2, MN/2 and the shift of every reading of a spread; the spacings of a change are read with both MN."""
    rows = []
    for mn2, first, last in SEGMENTS:
        end = min(last, longest)
        used = [ab2 for ab2 in AB2 if first <= ab2 <= end]
        if len(used) >= 2:
            rows += [(ab2, mn2, shift) for shift in [rng.normal(0.0, SHIFT)] for ab2 in used]
    return np.array(rows).T


def measure(rng, beds, ab2, mn2, shift):
    """Apparent resistivities as the crew reads them."""
    thickness = np.array([bed[1] for bed in beds[:-1]])
    resistivity = np.array([bed[2] for bed in beds])
    curve = apparent_resistivity(ab2, mn2, thickness[None], resistivity[None])[0]
    noise = NOISE * rng.standard_normal(len(ab2))
    wild = rng.random(len(ab2)) < OUTLIERS
    noise += wild * rng.choice([-1.0, 1.0], len(ab2)) * rng.uniform(0.2, 0.5, len(ab2))
    return curve * np.exp(noise + shift)


def survey_county(rng, county):
    """Tables of the soundings, of their readings, and of the truth below them."""
    soundings, readings, truth = [], [], []
    places = draw_places(rng, county.boundary, SOUNDINGS, APART)
    wenner = set(rng.choice(SOUNDINGS, WENNER, replace=False))
    for number, (x, y) in enumerate(places):
        name, array = f"B{number + 1:03d}", "wenner" if number in wenner else "schlumberger"
        beds = draw_column(rng, county, x, y)
        short = rng.random() < 0.2
        if array == "wenner":
            largest = 80.0 if short else 260.0
            a = np.array([one for one in SPACING_A if one <= largest])
            read = measure(rng, beds, 1.5 * a, 0.5 * a, 0.0)
            rows = [
                {"sounding": name, "a": one, "apparent_resistivity": f"{r:.4g}"} for one, r in zip(a, read, strict=True)
            ]
        else:
            longest = rng.choice([100.0, 150.0] if short else [320.0, 460.0], p=[0.5, 0.5] if short else [0.6, 0.4])
            ab2, mn2, shift = read_schlumberger(rng, longest)
            read = measure(rng, beds, ab2, mn2, shift)
            rows = [
                {"sounding": name, "ab2": one, "mn2": half, "apparent_resistivity": f"{r:.4g}"}
                for one, half, r in zip(ab2, mn2, read, strict=True)
            ]
        readings += [row | {"use": 1} for row in rows]
        place = {"sounding": name, "x": ORIGIN[0] + x, "y": ORIGIN[1] + y}
        soundings.append(place | {"ground_elevation": None, "array": array})
        truth.append(place | {"bedrock_elevation": county.bedrock_elevation([x], [y])[0]})
    columns = ["sounding", "ab2", "mn2", "a", "apparent_resistivity", "voltage_mv", "current_ma", "use"]
    return pd.DataFrame(soundings), pd.DataFrame(readings, columns=columns), pd.DataFrame(truth)


def drill_wells(rng, county):
    """Tables of the wells and of their logs, in metres; two in three go on into the rock, the others end above it."""
    wells, logs = [], []
    for number, (x, y) in enumerate(draw_places(rng, county.boundary, WELLS, 2.0 * APART)):
        name, beds = f"P{number + 1}", draw_column(rng, county, x, y)
        depths = np.cumsum([bed[1] for bed in beds[:-1]])
        end = depths[-1] + rng.uniform(2.0, 15.0) if rng.random() < 0.67 else rng.uniform(0.3, 0.95) * depths[-1]
        edges = np.round(2.0 * np.minimum(np.r_[0.0, depths, np.inf], end) * np.exp(rng.normal(0.0, 0.01))) / 2.0
        for (bed, _, _), top, bottom in zip(beds, edges[:-1], edges[1:], strict=True):
            if bottom > top:
                logs.append({"well": name, "top": top, "bottom": bottom, "description": rng.choice(WORDS[bed])})
        ground = county.ground_elevation([x], [y])[0] + rng.normal(0.0, 0.5)
        place = {"well": name, "x": ORIGIN[0] + x, "y": ORIGIN[1] + y}
        wells.append(place | {"ground_elevation": round(ground, 1), "total_depth": edges[-1]})
    return pd.DataFrame(wells), pd.DataFrame(logs)


def write_ground(rng, path, county):
    """The land surface on cells of 75 m, with an error of 0.4 m."""
    x, y = np.meshgrid(np.arange(-487.5, 30_500.0, 75.0), np.arange(25_487.5, -500.0, -75.0))
    values = county.ground_elevation(x, y) + rng.normal(0.0, 0.4, x.shape)
    transform = rasterio.Affine(75.0, 0.0, ORIGIN[0] - 525.0, 0.0, -75.0, ORIGIN[1] + 25_525.0)
    profile = {"driver": "GTiff", "dtype": "float32", "count": 1, "crs": CRS, "transform": transform}
    with rasterio.open(path, "w", height=x.shape[0], width=x.shape[1], **profile) as raster:
        raster.write(values.astype("float32"), 1)


def make_other_county(folder, seed):
    """Write the county of a seed as a region, with `truth/soundings.csv` beside it; returns its truth."""
    folder = Path(folder)
    county, rng = draw_other_county(seed), np.random.default_rng([seed, 104_729])
    (folder / "truth").mkdir(parents=True, exist_ok=True)
    (folder / "region.toml").write_text(REGION, encoding="utf-8")
    soundings, readings, truth = survey_county(rng, county)
    wells, logs = drill_wells(rng, county)
    tables = {"soundings": soundings, "readings": readings, "wells": wells, "well_logs": logs, "truth/soundings": truth}
    for name, table in tables.items():
        table.to_csv(folder / f"{name}.csv", index=False)
    write_ground(rng, folder / "ground.tif", county)
    shape = Polygon(np.asarray(county.boundary.exterior.coords) + ORIGIN)
    gpd.GeoDataFrame({"name": ["Brannerau"]}, geometry=[shape], crs=CRS).to_file(folder / "boundary.gpkg")
    return county
