"""What single soundings say, held against the truth: `python -m tests.benchmarks.columns [--seeds 21 22 ...]`.

For each seed a county is built, a part of its soundings inverted and read through the template as it is, too narrow,
too wide and shifted. Printed for each template, over all seeds: how often the basal contact is called seen among the
soundings that reach it, how often such a call is false (the truth outside of its 99 % interval), how well intervals
hold, and how often a bound does; then a reliability table of basal gravel. Depths in m, errors as shares of depth.
"""

import argparse
import tempfile
import time
from itertools import pairwise
from pathlib import Path

import attrs
import numpy as np
import pandas as pd

from demo_region.make_region import make_region
from geoves.interpretation import interpret
from geoves.inversion import invert
from geoves.project.engines import open_engine
from geoves.reading import read_region, read_survey

# What is done to every range of the template: its ends are multiplied by these.
TEMPLATES = {
    "right": (1.0, 1.0),
    "too narrow": (1.12, 1.0 / 1.12),
    "too wide": (1.0 / 1.3, 1.3),
    "shifted up": (1.15, 1.15),
    "shifted down": (1.0 / 1.15, 1.0 / 1.15),
}
NORMAL_95, NORMAL_995 = 1.6449, 2.5758


def change_template(template, low, high):
    units = [
        attrs.evolve(unit, resistivity_p05=unit.resistivity_p05 * low, resistivity_p95=unit.resistivity_p95 * high)
        for unit in template.units
    ]
    return attrs.evolve(template, units=tuple(units))


def read_truth(folder):
    """The true basal contact, gravel and shallow resistivity at each sounding, and whether its curve shows it."""
    truth = pd.read_csv(folder / "truth/soundings.csv").set_index("sounding")
    truth["basal"] = truth.deep_gravel_top_depth.fillna(truth.bedrock_top_depth)
    truth["gravel"] = truth.deep_gravel_thickness.fillna(0.0)
    return truth


def compare(interpretation, truth):
    """A row a sounding: what was said of the basal contact, and what is true."""
    basal = {top.place: top for top in interpretation.tops if top.contact == "basal"}
    rows = []
    for column in interpretation.columns:
        true = truth.loc[column.sounding]
        top = basal.get(column.sounding)
        at = top is not None and top.status == "at"
        rows.append(
            {
                "status": column.bedrock_status,
                "true": true.basal,
                "reached": bool(true.basal_top_seen),
                "depth": top.depth if at else np.nan,
                "error": top.standard_error if at else np.nan,
                "bound": top.depth if top is not None and not at else np.nan,
                "gravel": column.gravel_probability,
                "true_gravel": true.gravel >= 1.0,
                "shallow": shallow_error(column, true),
            }
        )
    return pd.DataFrame(rows)


def shallow_error(column, true):
    """Log error of the shallow aquifer's resistivity where it is called more probable than not, and is there."""
    if not column.shallow_probability > 0.5:
        return np.nan
    return np.log(column.shallow_resistivity[1] / true.shallow_aquifer_resistivity)


def summarise(table):
    """Figures of one template over all its soundings."""
    seen = table[(table.status == "seen") & table.depth.notna()]
    off = (seen.depth - seen.true) / seen.error
    relative = seen.depth / seen.true - 1.0
    deep = seen.true > 60.0
    bounds = table.dropna(subset="bound")
    return {
        "soundings": len(table),
        "seen": len(seen),
        "of reached": float((table.status == "seen")[table.reached].mean()),
        "RMS": float(np.sqrt(np.mean(relative**2))),
        "bias": float(np.mean(relative)),
        "90 % holds": float(np.mean(np.abs(off) < NORMAL_95)),
        "deep holds": float(np.mean(np.abs(off[deep]) < NORMAL_95)),
        "false": float(np.mean(np.abs(off) > NORMAL_995)),
        "bounds": len(bounds),
        "bound holds": float(np.mean(bounds.true > bounds.bound)) if len(bounds) else np.nan,
        "shallow ln": float(np.sqrt(np.nanmean(table.shallow**2))),
    }


def print_reliability(table):
    """How often gravel is there among the soundings that were given a probability of it."""
    known = table.dropna(subset="gravel")
    edges = np.array([0.0, 0.1, 0.2, 0.3, 0.4, 0.6, 0.8, 1.0001])
    print("\nBasal gravel under a right template: probability said, soundings, share that has it")
    for low, high in pairwise(edges):
        inside = known[(known.gravel >= low) & (known.gravel < high)]
        if len(inside):
            print(f"  {low:.1f} to {min(high, 1.0):.1f}  {len(inside):>6}  {inside.true_gravel.mean():.2f}")


def main():
    parser = argparse.ArgumentParser(description="Score single soundings against counties whose truth is known.")
    parser.add_argument("--seeds", type=int, nargs="+", default=list(range(21, 41)))
    parser.add_argument("--every", type=int, default=4, help="take every so manieth sounding of each county")
    parser.add_argument("--templates", nargs="+", choices=TEMPLATES, default=list(TEMPLATES))
    arguments = parser.parse_args()
    tables = {name: [] for name in arguments.templates}
    started = time.perf_counter()
    with open_engine() as engine:
        for seed in arguments.seeds:
            with tempfile.TemporaryDirectory() as folder:
                make_region(folder, seed)
                region = read_region(Path(folder) / "region.toml")
                survey, _ = read_survey(region)
                truth = read_truth(Path(folder))
            survey = attrs.evolve(
                survey, soundings=survey.soundings[seed % arguments.every :: arguments.every], picks=()
            )
            inverted = invert(survey, map=engine)
            for name in arguments.templates:
                template = change_template(region.template, *TEMPLATES[name])
                tables[name].append(compare(interpret(survey, inverted, template, map=engine), truth))
    joined = {name: pd.concat(parts, ignore_index=True) for name, parts in tables.items()}
    frame = pd.DataFrame({name: summarise(table) for name, table in joined.items()}).T
    print(f"{len(arguments.seeds)} seeds, {time.perf_counter() - started:.0f} s\n")
    print(frame.to_string(float_format=lambda value: f"{value:.3f}".rstrip("0").rstrip(".")))
    if "right" in joined:
        print_reliability(joined["right"])


if __name__ == "__main__":
    main()
