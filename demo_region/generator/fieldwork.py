"""What the crews bring home: where they sounded, how far they spread, what they read and what went wrong."""

from collections.abc import Callable

import attrs
import numpy as np
import pandas as pd

from demo_region.generator.columns import Column, draw_columns
from demo_region.generator.county import HEIGHT, ORIGIN, WIDTH, County
from demo_region.generator.forward import apparent_resistivity, geometric_factor, potential

Inside = Callable[[float, float], bool]  # says of local x and y whether a place lies in the county

NOISE = 0.03  # standard deviation of ln(apparent resistivity)
SHIFT = 0.04  # of the factor that each later MN segment carries, in ln
MILE = 1_609.344  # roads run along section lines


@attrs.frozen(eq=False)
class Layout:
    """A crew's habit: (MN/2, its AB/2 values) in m, spacings repeated where MN changes."""

    crew: str
    segments: tuple[tuple[float, tuple[float, ...]], ...]

    def spread(self, largest: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """AB/2, MN/2 and segment number (n,) up to the largest AB/2."""
        rows = [(a, b, k) for k, (b, spacings) in enumerate(self.segments) for a in spacings if a <= largest]
        ab2, mn2, segment = np.array(rows).T
        return ab2, mn2, segment.astype(int)


LAYOUTS = (
    Layout(
        "A",
        (
            (0.5, (1.5, 2.0, 2.7, 3.6, 5.0, 6.5, 9.0, 12.0)),
            (2.0, (9.0, 12.0, 16.0, 21.0, 28.0, 37.0, 50.0)),
            (8.0, (37.0, 50.0, 65.0, 90.0, 120.0, 160.0)),
            (25.0, (120.0, 160.0, 210.0, 260.0, 320.0)),
        ),
    ),
    Layout(
        "B",
        (
            (0.5, (1.5, 2.2, 3.2, 4.7, 6.8, 10.0, 15.0)),
            (2.0, (10.0, 15.0, 22.0, 32.0, 47.0, 68.0)),
            (10.0, (47.0, 68.0, 100.0, 150.0, 220.0, 320.0)),
        ),
    ),
)


def draw_places(county: County, inside: Inside, number: int, rng: np.random.Generator) -> np.ndarray:
    """Local x and y (number,) of soundings: half on section roads, closer over the valley, some in clusters."""
    placed = []
    centres = [place_once(county, inside, rng) for _ in range(4)]
    while len(placed) < number:
        clustered = rng.random() < 0.16
        if clustered:
            centre = centres[rng.integers(len(centres))]
            place = (centre[0] + rng.normal(0.0, 700.0), centre[1] + rng.normal(0.0, 700.0))
        else:
            place = place_once(county, inside, rng)
        apart = 300.0 if clustered else 800.0
        if inside(*place) and all(np.hypot(place[0] - p[0], place[1] - p[1]) > apart for p in placed):
            placed.append(place)
    return np.array(placed).T


def place_once(county: County, inside: Inside, rng: np.random.Generator) -> tuple[float, float]:
    """One place, kept more readily where the valley is thought to be."""
    while True:
        x, y = rng.uniform(0.0, WIDTH), rng.uniform(0.0, HEIGHT)
        if rng.random() < 0.5:
            road = rng.integers(2)
            beside = rng.normal(0.0, 25.0)
            x = np.round(x / MILE) * MILE + beside if road else x
            y = y if road else np.round(y / MILE) * MILE + beside
        thought = county.bedrock_relief(np.array([x + rng.normal(0.0, 900.0)]), np.array([y + rng.normal(0.0, 900.0)]))
        if inside(x, y) and rng.random() < 0.38 + 0.62 * np.clip(thought[0] / 40.0, 0.0, 1.0):
            return x, y


def draw_largest_spacing(number: int, rng: np.random.Generator) -> np.ndarray:
    """Largest AB/2 (number,) m: a fifth of the spreads stop at 65 to 130 m, for want of room or of cable."""
    short = rng.permutation(number) < round(number / 5.0)
    return np.where(
        short, rng.choice([68.0, 100.0, 120.0], number), rng.choice([220.0, 260.0, 320.0, 320.0, 320.0], number)
    )


def measure(
    column: Column, spread: tuple[np.ndarray, np.ndarray, np.ndarray], rng: np.random.Generator, planted: bool = True
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Apparent resistivities (n,) as read, and what went wrong with each ("" where nothing did).

    Noise of 3 %, one factor for each MN segment after the first, and now and then, where faults are planted, a reading
    that is plainly wrong.
    """
    ab2, mn2, segment = spread
    true = apparent_resistivity(ab2, mn2, column.thickness, column.resistivity)
    shift = np.exp(np.concatenate([[0.0], np.cumsum(rng.normal(0.0, SHIFT, segment.max()))]))
    clean = true * shift[segment] * np.exp(rng.normal(0.0, NOISE, len(true)))
    read = clean.copy()
    fault = np.full(len(true), "", dtype=object)
    spacings = np.unique(ab2)
    for i in np.flatnonzero(rng.random(len(true)) < 0.016):
        place = np.searchsorted(spacings, ab2[i])
        kind = rng.choice(["left behind", "too far out", "fence"])
        if kind == "fence":
            read[i] *= np.exp(rng.choice([-1.0, 1.0]) * rng.uniform(0.12, 0.45))
        elif 0 < place < len(spacings) - 1:
            wrong = spacings[place - 1 if kind == "left behind" else place + 1]
            read[i] *= misplaced_electrode(ab2[i], wrong, mn2[i], column) / true[i]
        else:
            continue
        fault[i] = kind
    if not planted:
        return clean, np.full(len(true), "", dtype=object), shift[segment]
    return read, fault, shift[segment]


def misplaced_electrode(planned: float, actual: float, mn2: float, column: Column) -> float:
    """Apparent resistivity reported for the planned AB/2 while one current electrode stands at another distance."""
    distance = np.array([planned - mn2, planned + mn2, actual - mn2, actual + mn2])
    near, far, other_near, other_far = potential(distance, column.thickness, column.resistivity)
    return geometric_factor(planned, mn2) * (near - far + other_near - other_far) / (2.0 * np.pi)


def draw_survey(
    county: County, inside: Inside, number: int, rng: np.random.Generator, planted: bool = True
) -> tuple[pd.DataFrame, pd.DataFrame, list[Column]]:
    """The soundings and readings tables of the contract, and with them the columns and the faults as they were."""
    x, y = draw_places(county, inside, number, rng)
    order = np.argsort(np.round(y / 4_000.0) * WIDTH + x)  # crews work through the county strip by strip
    x, y = x[order], y[order]
    columns = draw_columns(county, x, y, rng)
    largest = draw_largest_spacing(number, rng)
    layouts = [LAYOUTS[k] for k in rng.choice(2, number, p=[0.62, 0.38])]
    names = [f"S{i + 1:03d}" for i in range(number)]
    readings = [
        read_sounding(name, column, layout.spread(reach), rng, planted)
        for name, column, layout, reach in zip(names, columns, layouts, largest, strict=True)
    ]
    ground = np.array([column.ground for column in columns])
    soundings = pd.DataFrame(
        {
            "sounding": names,
            "x": np.round(ORIGIN[0] + x),
            "y": np.round(ORIGIN[1] + y),
            "ground_elevation": level(ground, rng, planted),
            "array": "schlumberger",
            "azimuth": rng.choice([0, 0, 90, 90, 45, 135, 20, 110], number),
            "date": dates(number, rng),
            "crew": [layout.crew for layout in layouts],
            "note": remarks(number, largest, rng),
        }
    )
    return soundings, pd.concat(readings, ignore_index=True), columns


def read_sounding(
    name: str,
    column: Column,
    spread: tuple[np.ndarray, np.ndarray, np.ndarray],
    rng: np.random.Generator,
    planted: bool = True,
) -> pd.DataFrame:
    """One sounding's rows of the readings table, with `fault` and `segment_factor` beside them for the truth."""
    read, fault, factor = measure(column, spread, rng, planted)
    ab2, mn2, _ = spread
    rows = pd.DataFrame({"sounding": name, "ab2": ab2, "mn2": mn2, "apparent_resistivity": significant(read, 4)})
    rows["voltage_mv"] = rows["current_ma"] = np.nan
    rows["error_percent"] = np.where(ab2 >= 200.0, 5.0, 3.0) if rng.random() < 0.15 else np.nan
    rows["use"] = 1
    rows["note"] = ""
    noticed = (fault != "") & (rng.random(len(fault)) < 0.35)
    rows.loc[noticed, "use"] = 0
    rows.loc[noticed, "note"] = [REASONS[kind] for kind in fault[noticed]]
    if rng.random() < 0.05:  # as metered, without the arithmetic
        current = rng.choice([40.0, 80.0, 150.0, 300.0, 500.0], len(ab2))
        rows["current_ma"] = current
        rows["voltage_mv"] = significant(read * current / geometric_factor(ab2, mn2), 4)
        rows["apparent_resistivity"] = np.nan
    elif rng.random() < 0.03:
        dropped = rng.integers(len(ab2))
        if planted:
            rows.loc[dropped, ["apparent_resistivity", "use", "note"]] = [0.0, 0, "current dropped out, not repeated"]
    return rows.assign(fault=fault, segment_factor=factor)


REASONS = {
    "left behind": "A stake still at the last flag",
    "too far out": "B stake one flag too far",
    "fence": "spread crosses a wire fence",
}


def level(ground: np.ndarray, rng: np.random.Generator, planted: bool = True) -> np.ndarray:
    """Elevations as the crews wrote them: off the map to a metre or so, some not at all, one misread if planted."""
    written = np.round(ground + rng.normal(0.0, 0.8, len(ground)), 1)
    written[rng.random(len(ground)) < 0.1] = np.nan
    written[rng.choice(np.flatnonzero(np.isfinite(written)))] += 11.0 if planted else 0.0
    return written


def dates(number: int, rng: np.random.Generator) -> np.ndarray:
    """Field days of two summers, in the order of the work."""
    days = np.sort(rng.choice(np.arange(150), number))
    start = np.where(days < 75, np.datetime64("2023-06-05"), np.datetime64("2024-03-18"))
    return (start + days.astype("timedelta64[D]")).astype(str)


def remarks(number: int, largest: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """Short notes in a crew's words; the short spreads say why."""
    usual = ["", "", "", "", "along section road", "stubble field", "pasture", "light rain", "culvert near M"]
    stopped = ["stopped at river", "wire used up", "standing maize, no room", "road crossing, stopped", ""]
    notes = rng.choice(usual, number)
    return np.where(largest < 200.0, rng.choice(stopped, number), notes)


def significant(values: np.ndarray, digits: int) -> np.ndarray:
    """Values rounded to so many significant digits."""
    return np.array([float(f"{value:.{digits}g}") for value in values])
