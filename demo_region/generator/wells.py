"""Drillers' wells in feet, their logs in drillers' words, and the permits in the agency's file."""

from itertools import pairwise

import numpy as np
import pandas as pd
from pyproj import Transformer

from demo_region.generator.columns import Column, draw_columns
from demo_region.generator.county import HEIGHT, ORIGIN, WIDTH, County
from demo_region.generator.fieldwork import Inside, place_once

FOOT = 0.3048  # m
WORDS = {
    "cover": ["yellow clay", "hardpan", "brown clay & stones", "sandy loam", "hard pan, dry", "till, brown", "Hardpan"],
    "shallow_aquifer": ["sand & gravel w/ water", "gravel", "coarse gravell, clean", "sand and gravel", "fine sand"],
    "confining": [
        "blue clay",
        "gray clay",
        "blue clay w/ stones",
        "grey caly, sticky",
        "BLUE CLAY",
        "silty clay, gray",
    ],
    "deep_gravel": ["sand & gravel w/ water", "coarse sand and gravel", "gravel & boulders", "sand and gravle, water"],
    "bedrock": ["broken lime", "limestone", "lime rock, hard", "limerock", "lime, broken, water", "limestone, grey"],
}
UNCLAIMED = {"cover": "muck", "confining": "gumbo", "deep_gravel": "pea rock", "bedrock": "lost circulation"}
FORMATION_FACTOR = {"shallow_aquifer": 5.0, "deep_gravel": 5.0, "bedrock": 12.0}


def draw_well_places(
    county: County, inside: Inside, in_valley: int, number: int, rng: np.random.Generator
) -> np.ndarray:
    """Local x and y (number,): so many over the valley first, the others on the plain, 1.2 km apart at least."""
    placed = []
    while len(placed) < number:
        x, y = place_once(county, inside, rng)
        relief = county.bedrock_relief(np.array([x]), np.array([y]))[0]
        wanted = relief > 30.0 if len(placed) < in_valley else relief < 10.0
        if wanted and all(np.hypot(x - p[0], y - p[1]) > 1_200.0 for p in placed):
            placed.append((x, y))
    return np.array(placed).T


def draw_wells(
    county: County, inside: Inside, rng: np.random.Generator, planted: bool = True
) -> tuple[pd.DataFrame, pd.DataFrame, list[Column]]:
    """The wells and well_logs tables in feet, and the columns under the wells; a gap in a log where it is planted.

    Of 6 valley wells 3 reach rock, of 10 on the plain 7; the others stop in gravel or in clay above it.
    """
    in_valley, number = 6, 16
    x, y = draw_well_places(county, inside, in_valley, number, rng)
    columns = draw_columns(county, x, y, rng)
    reaches = np.concatenate([rng.permutation(in_valley) < 3, rng.permutation(number - in_valley) < 7])
    order = rng.permutation(number)
    wells, logs, drilled = [], [], []
    for position, i in enumerate(order):
        name = f"W-{position + 1:02d}"
        log = write_log(name, columns[i], bool(reaches[i]), rng)
        logs.extend(log)
        drilled.append(columns[i])
        wells.append(describe_well(name, (x[i], y[i]), columns[i], log, rng))
    logs = pd.DataFrame(logs, columns=["well", "top", "bottom", "description", "unit"])
    return pd.DataFrame(wells), blur_log(logs, rng, planted), drilled


def describe_well(
    name: str, place: tuple[float, float], column: Column, log: list[dict], rng: np.random.Generator
) -> dict:
    """One row of the wells table, in feet."""
    deepest = log[-1]["deepest_unit"]
    factor = FORMATION_FACTOR.get(deepest)
    sampled = factor is not None and rng.random() < 0.6
    water = column.resistivity_of(deepest) / factor if sampled else np.nan
    return {
        "well": name,
        "x": round(ORIGIN[0] + place[0]),
        "y": round(ORIGIN[1] + place[1]),
        "ground_elevation": round(column.ground / FOOT + rng.normal(0.0, 2.0)),
        "total_depth": log[-1]["bottom"],
        "water_level": rng.integers(8, 45) if rng.random() < 0.55 else np.nan,
        "specific_conductance": round(10_000.0 / water * np.exp(rng.normal(0.0, 0.08)), -1) if sampled else np.nan,
        "location_accuracy": rng.choice([10, 50, 150]),
        "completed": f"{rng.integers(1961, 2019)}",
    }


def write_log(name: str, column: Column, reaches_rock: bool, rng: np.random.Generator) -> list[dict]:
    """Rows of one driller's log: whole feet, contacts missed by a foot or two, clay told in stretches."""
    contacts = np.append(column.tops / FOOT, column.top("bedrock") / FOOT + rng.uniform(4.0, 45.0))
    units = list(column.units)
    if not reaches_rock:
        units, contacts = stop_above_rock(units, contacts, rng)
    units, contacts = merge_same(units, contacts)
    error = rng.normal(0.0, 1.0 + 0.004 * contacts)
    contacts = np.round(contacts + np.where(np.arange(len(contacts)) > 0, error, 0.0)).astype(int)
    contacts = np.maximum.accumulate(np.maximum(contacts, np.arange(len(contacts))))
    rows = [{"well": name, "top": 0, "bottom": 1, "description": "topsoil", "unit": ""}] if rng.random() < 0.6 else []
    for unit, top, bottom in zip(units, contacts[:-1], contacts[1:], strict=True):
        start = rows[-1]["bottom"] if rows else top
        for upper, lower in told_in_stretches(max(top, start), bottom, unit, rng):
            rows.append(
                {"well": name, "top": upper, "bottom": lower, "description": rng.choice(WORDS[unit]), "unit": ""}
            )
        if rows:
            rows[-1]["deepest_unit"] = unit
    return rows


def stop_above_rock(units: list[str], contacts: np.ndarray, rng: np.random.Generator) -> tuple[list[str], np.ndarray]:
    """The log of a well that was finished in the deep gravel, or given up in the clay."""
    last = units.index("deep_gravel") if "deep_gravel" in units else units.index("bedrock") - 1
    share = rng.uniform(0.45, 0.8)
    finished = contacts[last] + share * (contacts[last + 1] - contacts[last])
    return units[: last + 1], np.append(contacts[: last + 1], finished)


def merge_same(units: list[str], contacts: np.ndarray) -> tuple[list[str], np.ndarray]:
    """Neighbouring layers of one unit taken together."""
    first = [i for i, unit in enumerate(units) if i == 0 or unit != units[i - 1]]
    return [units[i] for i in first], np.append(contacts[first], contacts[-1])


def told_in_stretches(top: int, bottom: int, unit: str, rng: np.random.Generator) -> list[tuple[int, int]]:
    """The intervals in which a driller tells one unit; clay over 60 ft comes in two or three."""
    if bottom <= top:
        return []
    count = rng.integers(2, 4) if unit == "confining" and bottom - top > 60 else 1
    cuts = np.sort(rng.choice(np.arange(top + 5, bottom - 5), count - 1, replace=False)) if count > 1 else []
    edges = [int(edge) for edge in (top, *cuts, bottom)]
    return list(pairwise(edges))


def blur_log(logs: pd.DataFrame, rng: np.random.Generator, planted: bool = True) -> pd.DataFrame:
    """A few words that no template claims, one gap, and one log that the agency has coded itself."""
    logs = logs.fillna({"unit": ""})
    names = logs["well"].unique()
    coded, gapped = rng.choice(names, 2, replace=False)
    own = {word: unit for unit, words in WORDS.items() for word in words}
    rows = logs["well"] == coded
    logs.loc[rows, "unit"] = [own.get(word, "cover") for word in logs.loc[rows, "description"]]
    logs.loc[rows & logs["description"].isin(WORDS["deep_gravel"][:1]), "unit"] = ""  # these words serve both gravels
    for unit, word in UNCLAIMED.items():
        candidates = logs.index[logs["description"].isin(WORDS[unit]) & ~rows]
        logs.loc[rng.choice(candidates), "description"] = word if unit != "bedrock" else f"{word}, lime"
    inside = logs.index[(logs["well"] == gapped) & (logs["bottom"] - logs["top"] > 12)]
    logs.loc[inside[0], "bottom"] -= 4 if planted else 0
    return logs


def draw_permits(inside: Inside, number: int, rng: np.random.Generator, planted: bool = True) -> pd.DataFrame:
    """The permits table: lon and lat in EPSG:4326, depths and radii in feet; a few lie outside, where planted."""
    x, y = rng.uniform(0.0, WIDTH, 3 * number), rng.uniform(0.0, HEIGHT, 3 * number)
    within = np.array([inside(*place) for place in zip(x, y, strict=True)])
    astray = (rng.random(3 * number) < 0.05) & planted
    x, y = ORIGIN[0] + x[within | astray][:number], ORIGIN[1] + y[within | astray][:number]
    accuracy = rng.choice([np.nan, 30.0, 100.0, 330.0, 933.0], number, p=[0.4, 0.1, 0.15, 0.15, 0.2])
    centred = accuracy == 933.0  # known to a quarter-quarter section alone, so written at its centre
    quarter = 1_609.344 / 4.0
    x = np.where(centred, (np.floor(x / quarter) + 0.5) * quarter, x)
    y = np.where(centred, (np.floor(y / quarter) + 0.5) * quarter, y)
    lon, lat = Transformer.from_crs("EPSG:26914", "EPSG:4326", always_xy=True).transform(x, y)
    use = rng.choice(
        ["domestic", "stock", "irrigation", "municipal", "monitoring"], number, p=[0.6, 0.2, 0.1, 0.03, 0.07]
    )
    depth = np.round(rng.gamma(5.0, 24.0, number) / 5.0) * 5.0 + 25.0
    return pd.DataFrame(
        {
            "permit": [f"24-{i + 1:04d}" for i in range(number)],
            "lon": np.round(lon, 6),
            "lat": np.round(lat, 6),
            "location_accuracy": accuracy,
            "requested_depth": np.where(rng.random(number) < 0.85, depth, np.nan),
            "use": use,
            "owner": [f"Holding {n}" for n in rng.permutation(np.arange(1_000, 1_000 + number))],
        }
    )
