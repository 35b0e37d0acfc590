"""Faults that field sheets have, planted one at a time in a county whose tables hold none.

The county is the demo's generator's, drawn anew for each seed without the faults of its crews: curves by a quadrature
of its own, 3 % noise, shifts where MN changes. A plant changes the tables as a person would have mistyped them.
"""

from collections.abc import Callable
from pathlib import Path

import attrs
import numpy as np
import pandas as pd

from demo_region.generator import files
from demo_region.generator.columns import Column
from demo_region.generator.county import draw_county
from demo_region.generator.fieldwork import draw_survey, misplaced_electrode
from demo_region.generator.wells import draw_permits, draw_wells

REGION = Path(__file__).resolve().parents[2] / "demo_region" / "region.toml"
READING_COLUMNS = ["sounding", "ab2", "mn2", "apparent_resistivity", "voltage_mv", "current_ma", "error_percent"]
FOOT = 0.3048


@attrs.define(eq=False)
class Sheets:
    """A county's tables as data frames, region.toml as text, and what is true of the ground under each sounding."""

    soundings: pd.DataFrame
    readings: pd.DataFrame
    wells: pd.DataFrame
    well_logs: pd.DataFrame
    permits: pd.DataFrame
    region: str
    columns: dict[str, Column]
    outline: object
    county: object

    def copy(self):
        frames = ("soundings", "readings", "wells", "well_logs", "permits")
        return attrs.evolve(self, **{name: getattr(self, name).copy() for name in frames})

    def rows_of(self, sounding):
        return self.readings.index[self.readings["sounding"] == sounding]

    def measure(self, rows, current=97.0):
        """Give readings their voltage and current beside the apparent resistivity, as a full sheet has them."""
        table = self.readings
        k = np.pi * (table.loc[rows, "ab2"] ** 2 - table.loc[rows, "mn2"] ** 2) / (2.0 * table.loc[rows, "mn2"])
        # Each stake has its own contact: the current wanders by some percent.
        wander = 1.0 + 0.07 * np.sin(1.0 + 3.7 * np.arange(len(rows)))
        table.loc[rows, "current_ma"] = np.round(current * wander, 1)
        voltage = table.loc[rows, "apparent_resistivity"] * table.loc[rows, "current_ma"] / k
        table.loc[rows, "voltage_mv"] = [float(f"{value:.5g}") for value in voltage]

    def write(self, folder, *, rasters=True):
        folder.mkdir(parents=True, exist_ok=True)
        (folder / "region.toml").write_text(self.region, encoding="utf-8")
        files.write_csv(self.soundings, folder / "soundings.csv")
        files.write_csv(self.readings, folder / "readings.csv")
        files.write_csv(self.wells, folder / "wells.csv")
        files.write_csv(self.well_logs, folder / "well_logs.csv")
        files.write_csv(self.permits, folder / "permits.csv")
        if rasters:
            files.write_boundary(self.outline, folder / "boundary.gpkg")
            files.write_ground(self.county, folder / "ground.tif")


def draw_sheets(seed, soundings=40, permits=60):
    """A county of a seed without faults."""
    county = draw_county(seed)
    outline = files.draw_boundary(county)
    inside = files.inside_test(outline)
    rng = np.random.default_rng([seed, 2])
    places, readings, columns = draw_survey(county, inside, soundings, rng, planted=False)
    wells, logs, _ = draw_wells(county, inside, rng, planted=False)
    readings = readings[[*READING_COLUMNS, "use", "note"]].copy()
    metered = readings["apparent_resistivity"].isna()
    k = np.pi * (readings["ab2"] ** 2 - readings["mn2"] ** 2) / (2.0 * readings["mn2"])
    readings.loc[metered, "apparent_resistivity"] = (k * readings["voltage_mv"] / readings["current_ma"])[metered]
    readings[["voltage_mv", "current_ma"]] = np.nan
    text = REGION.read_text(encoding="utf-8").replace('picks = "picks.csv"', "# no picks")
    return Sheets(
        places.astype({"azimuth": float}), readings, wells.astype({"x": float, "y": float}), logs,
        draw_permits(inside, permits, rng, planted=False), text,
        dict(zip(places["sounding"], columns, strict=True)), outline, county,
    )  # fmt: skip


@attrs.frozen
class Told:
    """What a check has to say of a plant: its name, and the place, row of the table and words where they matter.

    `instead` names another check that says as much.
    """

    check: str
    place: str = ""
    row: int = 0
    words: str = ""
    instead: str = ""

    def is_in(self, findings):
        return any(
            one.check in (self.check, self.instead)
            and (not self.place or one.place == self.place)
            and (not self.row or one.row == self.row)
            and self.words in one.expected
            for one in findings
        )


Plant = Callable[[Sheets, np.random.Generator], Told]


def _long_sounding(sheets, rng):
    """A sounding whose spread went out to 200 m or more."""
    longest = sheets.readings.groupby("sounding")["ab2"].max()
    return str(rng.choice(longest.index[longest >= 200.0].to_numpy()))


def _inner_row(sheets, rng, sounding, low=2.5, high=150.0):
    """The index of a reading away from the curve's ends and the changes of MN."""
    rows = sheets.rows_of(sounding)
    table = sheets.readings.loc[rows]
    once = ~table["ab2"].duplicated(keep=False)
    return int(rng.choice(rows[(once & (table["ab2"] > low) & (table["ab2"] < high)).to_numpy()]))


def _typed_row(index):
    """The row of a table as a spreadsheet counts it: the headings are row 1."""
    return index + 2


def electrode_left_behind(sheets, rng):
    name = _long_sounding(sheets, rng)
    return _misplace(sheets, rng, name, -1)


def electrode_too_far_out(sheets, rng):
    name = _long_sounding(sheets, rng)
    return _misplace(sheets, rng, name, 1)


def _misplace(sheets, rng, name, step):
    i = _inner_row(sheets, rng, name)
    table = sheets.readings
    flags = np.unique(table.loc[sheets.rows_of(name), "ab2"])
    planned, mn2 = table.loc[i, "ab2"], table.loc[i, "mn2"]
    actual = flags[np.searchsorted(flags, planned) + step]
    column = sheets.columns[name]
    right = misplaced_electrode(planned, planned, mn2, column)
    table.loc[i, "apparent_resistivity"] *= misplaced_electrode(planned, actual, mn2, column) / right
    return Told("jump", name, _typed_row(i))


def decimal_point(sheets, rng):
    name = _long_sounding(sheets, rng)
    i = _inner_row(sheets, rng, name)
    sheets.readings.loc[i, "apparent_resistivity"] *= rng.choice([10.0, 0.1])
    return Told("jump", name, _typed_row(i), "decimal point")


def volts_for_millivolts(sheets, rng):
    """1.2 typed where 1.2 V was read: the sheet's R and rho are right."""
    name = _long_sounding(sheets, rng)
    sheets.measure(sheets.rows_of(name))
    i = _inner_row(sheets, rng, name)
    sheets.readings.loc[i, "voltage_mv"] /= 1000.0
    return Told("arithmetic", name, _typed_row(i), "factor of 1000")


def amperes_for_milliamperes(sheets, rng):
    """No apparent resistivity typed: only the curve can show it."""
    name = _long_sounding(sheets, rng)
    rows = sheets.rows_of(name)
    sheets.measure(rows)
    sheets.readings.loc[rows, "apparent_resistivity"] = np.nan
    i = _inner_row(sheets, rng, name)
    sheets.readings.loc[i, "current_ma"] /= 1000.0
    return Told("jump", name, _typed_row(i), "a thousand times too much")


def ab_for_half(sheets, rng):
    name = _long_sounding(sheets, rng)
    sheets.measure(sheets.rows_of(name))
    i = _inner_row(sheets, rng, name)
    sheets.readings.loc[i, "ab2"] *= 2.0
    return Told("arithmetic", name, _typed_row(i), "AB typed where AB/2 belongs")


def mn_for_half(sheets, rng):
    name = _long_sounding(sheets, rng)
    sheets.measure(sheets.rows_of(name))
    i = _inner_row(sheets, rng, name)
    sheets.readings.loc[i, "mn2"] *= 2.0
    return Told("arithmetic", name, _typed_row(i), "MN typed where MN/2 belongs")


def feet_for_metres(sheets, rng):
    name = _long_sounding(sheets, rng)
    rows = sheets.rows_of(name)
    sheets.measure(rows)
    sheets.readings.loc[rows, ["ab2", "mn2"]] = (sheets.readings.loc[rows, ["ab2", "mn2"]] / FOOT).round(3)
    return Told("arithmetic", name, 0, "spacings stand in feet")


def ab_for_half_throughout(sheets, rng):
    """All sheets, with apparent resistivity typed as well: one finding for the table."""
    del rng
    sheets.measure(sheets.readings.index)
    sheets.readings["ab2"] *= 2.0
    return Told("arithmetic_throughout", words="AB typed where AB/2 belongs")


def mn_for_half_throughout_by_overlaps(sheets, rng):
    """Voltage and current alone: nothing to recompute, but the overlaps show it."""
    del rng
    sheets.measure(sheets.readings.index)
    sheets.readings["apparent_resistivity"] = np.nan
    sheets.readings["mn2"] *= 2.0
    keep = sheets.readings["mn2"] < sheets.readings["ab2"]
    sheets.readings = sheets.readings[keep].reset_index(drop=True)
    return Told("spacing_convention", words="the whole of MN")


def repeated_row(sheets, rng):
    name = _long_sounding(sheets, rng)
    i = _inner_row(sheets, rng, name)
    sheets.readings = pd.concat([sheets.readings, sheets.readings.loc[[i]]], ignore_index=True)
    return Told("repeated_row", name)


def repeats_differ(sheets, rng):
    name = _long_sounding(sheets, rng)
    i = _inner_row(sheets, rng, name)
    again = sheets.readings.loc[[i]].copy()
    again["apparent_resistivity"] *= 1.4
    sheets.readings = pd.concat([sheets.readings, again], ignore_index=True)
    return Told("repeats_differ", name)


def stuck_current(sheets, rng):
    name = _long_sounding(sheets, rng)
    rows = sheets.rows_of(name)
    sheets.measure(rows)
    first = int(rng.integers(0, len(rows) - 6))
    sheets.readings.loc[rows[first : first + 6], "current_ma"] = 103.7
    sheets.readings.loc[rows, "apparent_resistivity"] = np.nan
    return Told("stuck_current", name, _typed_row(int(rows[first])))


def dead_reading(sheets, rng):
    name = _long_sounding(sheets, rng)
    rows = sheets.rows_of(name)
    first = int(rng.integers(0, 4))
    sheets.readings.loc[rows[first : first + 3], "apparent_resistivity"] = 31.47
    return Told("dead_reading", name, _typed_row(int(rows[first])))


def weak_signal(sheets, rng):
    name = _long_sounding(sheets, rng)
    rows = sheets.rows_of(name)
    sheets.measure(rows, current=3.1)
    weak = sheets.readings.loc[rows, "voltage_mv"].idxmin()
    return Told("weak_signal", name, _typed_row(int(weak)))


def wide_mn(sheets, rng):
    name = _long_sounding(sheets, rng)
    i = _inner_row(sheets, rng, name)
    sheets.readings.loc[i, "mn2"] = round(0.6 * sheets.readings.loc[i, "ab2"], 2)
    return Told("wide_mn", name, _typed_row(i))


def few_readings(sheets, rng):
    name = _long_sounding(sheets, rng)
    sheets.readings = sheets.readings.drop(sheets.rows_of(name)[4:]).reset_index(drop=True)
    return Told("few_readings", name, words="refused")


def no_middle(sheets, rng):
    name = _long_sounding(sheets, rng)
    rows = sheets.rows_of(name)
    middle = sheets.readings.loc[rows, "ab2"].between(11.0, 70.0)
    sheets.readings = sheets.readings.drop(rows[middle.to_numpy()]).reset_index(drop=True)
    return Told("no_middle", name, words="refused")


def cusp(sheets, rng):
    name = _long_sounding(sheets, rng)
    rows = sheets.rows_of(name)
    at = int(rng.integers(2, 5))
    sheets.readings.loc[rows[at : at + 2], "apparent_resistivity"] *= 1.5
    return Told("cusp", name)


def sawtooth(sheets, rng):
    name = _long_sounding(sheets, rng)
    rows = sheets.rows_of(name)
    teeth = np.where(np.arange(len(rows)) % 2, 1.13, 1.0 / 1.13)
    sheets.readings.loc[rows, "apparent_resistivity"] *= teeth
    return Told("rough_curve", name)


def steep_rise(sheets, rng):
    """From some AB/2 on the curve rises by two decades a decade: leakage into the far wire."""
    name = _long_sounding(sheets, rng)
    rows = sheets.rows_of(name)
    ab2 = sheets.readings.loc[rows, "ab2"]
    sheets.readings.loc[rows, "apparent_resistivity"] *= np.maximum(1.0, ab2 / 50.0) ** 1.8
    return Told("steep_rise", name)


def steep_fall(sheets, rng):
    name = _long_sounding(sheets, rng)
    rows = sheets.rows_of(name)
    ab2 = sheets.readings.loc[rows, "ab2"]
    sheets.readings.loc[rows, "apparent_resistivity"] *= np.minimum(1.0, 50.0 / ab2) ** 10.0
    return Told("steep_fall", name)


def overlap_shift(sheets, rng):
    name = _long_sounding(sheets, rng)
    rows = sheets.rows_of(name)
    table = sheets.readings.loc[rows]
    changed = table["mn2"] >= np.unique(table["mn2"])[1]
    sheets.readings.loc[rows[changed.to_numpy()], "apparent_resistivity"] *= 1.6
    return Told("overlap_shift", name)


def overlap_uneven(sheets, rng):
    name = _long_sounding(sheets, rng)
    rows = sheets.rows_of(name)
    table = sheets.readings.loc[rows]
    new = np.unique(table["mn2"])[1]
    first = rows[(table["mn2"] == new).to_numpy()][0]
    sheets.readings.loc[first, "apparent_resistivity"] *= 1.145
    second = rows[(table["mn2"] == new).to_numpy()][1]
    sheets.readings.loc[second, "apparent_resistivity"] /= 1.145
    return Told("overlap_uneven", name, instead="jump")


def overlap_missing(sheets, rng):
    name = _long_sounding(sheets, rng)
    rows = sheets.rows_of(name)
    table = sheets.readings.loc[rows]
    repeated = table["ab2"].duplicated(keep="last") & (table["mn2"] == table["mn2"].min())
    sheets.readings = sheets.readings.drop(rows[repeated.to_numpy()]).reset_index(drop=True)
    return Told("overlap_missing", name)


def duplicate_place(sheets, rng):
    first, second = rng.choice(len(sheets.soundings), 2, replace=False)
    sheets.soundings.loc[second, ["x", "y"]] = sheets.soundings.loc[first, ["x", "y"]]
    sheets.soundings.loc[second, "ground_elevation"] = np.nan
    later = max(first, second)
    return Told("duplicate_place", sheets.soundings.loc[later, "sounding"], _typed_row(int(later)))


def duplicate_curve(sheets, rng):
    first, second = (sheets.soundings.loc[i, "sounding"] for i in sorted(rng.choice(len(sheets.soundings), 2, False)))
    copied = sheets.readings[sheets.readings["sounding"] == first].assign(sounding=second)
    others = sheets.readings[sheets.readings["sounding"] != second]
    sheets.readings = pd.concat([others, copied], ignore_index=True)
    return Told("duplicate_curve", second)


def swapped_coordinates(sheets, rng):
    i = int(rng.integers(len(sheets.soundings)))
    sheets.soundings.loc[i, ["x", "y"]] = sheets.soundings.loc[i, ["y", "x"]].to_numpy(copy=True)
    sheets.soundings.loc[i, "ground_elevation"] = 400.0
    return Told("far_place", sheets.soundings.loc[i, "sounding"], words="swapped")


def digits_turned(sheets, rng):
    i = int(rng.integers(len(sheets.wells)))
    x = f"{sheets.wells.loc[i, 'x']:.0f}"
    sheets.wells.loc[i, "x"] = float(x[1] + x[0] + x[2:]) if x[0] != x[1] else float("9" + x[1:])
    return Told("far_place", sheets.wells.loc[i, "well"])


def coordinates_in_feet(sheets, rng):
    i = int(rng.integers(len(sheets.soundings)))
    sheets.soundings.loc[i, ["x", "y"]] /= FOOT
    sheets.soundings.loc[i, "ground_elevation"] = 400.0
    return Told("far_place", sheets.soundings.loc[i, "sounding"], words="in feet where metres")


def outside_crs(sheets, rng):
    i = int(rng.integers(len(sheets.soundings)))
    sheets.soundings.loc[i, ["x", "y"]] = (4_898_000.0, 632_000.0)
    sheets.soundings.loc[i, "ground_elevation"] = 400.0
    return Told("outside_crs", sheets.soundings.loc[i, "sounding"])


def sounding_elevation(sheets, rng):
    i = int(rng.integers(len(sheets.soundings)))
    sheets.soundings.loc[i, "ground_elevation"] = 431.0 + rng.uniform(0, 20)
    return Told("ground_elevation", sheets.soundings.loc[i, "sounding"], _typed_row(i))


def well_elevation_in_metres(sheets, rng):
    i = int(rng.integers(len(sheets.wells)))
    sheets.wells["ground_elevation"] = sheets.wells["ground_elevation"].astype(float)
    sheets.wells.loc[i, "ground_elevation"] = round(sheets.wells.loc[i, "ground_elevation"] * FOOT)
    return Told("ground_elevation", sheets.wells.loc[i, "well"], _typed_row(i), "feet taken for metres")


def heights_of_another_datum(sheets, rng):
    """Ellipsoidal heights by satellite: some 25 m below those over the geoid, all alike."""
    sheets.soundings["ground_elevation"] -= 25.0 + rng.normal(0.0, 0.3, len(sheets.soundings))
    return Told("ground_offset")


def log_gap(sheets, rng):
    logs = sheets.well_logs
    thick = logs.index[(logs["bottom"] - logs["top"] > 8) & (logs["well"] == logs["well"].shift(-1))]
    i = int(rng.choice(thick))
    logs.loc[i, "bottom"] -= 4
    return Told("log_gap", logs.loc[i, "well"], _typed_row(i + 1))


def log_below_depth(sheets, rng):
    i = int(rng.integers(len(sheets.wells)))
    sheets.wells.loc[i, "total_depth"] -= 10
    sheets.wells["water_level"] = np.nan
    return Told("log_below_depth", sheets.wells.loc[i, "well"])


def depth_in_the_other_unit(sheets, rng):
    """The log in metres under a depth in feet."""
    i = int(rng.integers(len(sheets.wells)))
    mine = sheets.well_logs["well"] == sheets.wells.loc[i, "well"]
    sheets.well_logs[["top", "bottom"]] = sheets.well_logs[["top", "bottom"]].astype(float)
    sheets.well_logs.loc[mine, ["top", "bottom"]] = (sheets.well_logs.loc[mine, ["top", "bottom"]] * FOOT).round(2)
    return Told("log_short", sheets.wells.loc[i, "well"], _typed_row(i), "the log is in metres")


def log_against_sounding(sheets, rng):
    """A well beside a sounding with a log of quite another column: gravel throughout, where the curve has clay."""
    name = _long_sounding(sheets, rng)
    place = sheets.soundings[sheets.soundings["sounding"] == name].iloc[0]
    i = int(rng.integers(len(sheets.wells)))
    well = sheets.wells.loc[i, "well"]
    sheets.wells.loc[i, ["x", "y"]] = (place["x"] + 60.0, place["y"])
    sheets.wells.loc[i, ["total_depth", "ground_elevation"]] = (300, round(sheets.columns[name].ground / FOOT))
    sheets.wells["water_level"] = np.nan
    log = pd.DataFrame([{"well": well, "top": 0, "bottom": 300, "description": "gravel", "unit": "shallow_aquifer"}])
    others = sheets.well_logs[sheets.well_logs["well"] != well]
    sheets.well_logs = pd.concat([others, log], ignore_index=True)
    return Told("well_against_sounding", name)


def permit_outside(sheets, rng):
    i = int(rng.integers(len(sheets.permits)))
    sheets.permits.loc[i, "lon"] += 0.9
    return Told("outside_boundary", sheets.permits.loc[i, "permit"], _typed_row(i))


def rock_valley_across_the_spread(sheets, rng):
    """Two wells on the line of the spread, 250 m apart, rock 80 m lower in one."""
    name = _long_sounding(sheets, rng)
    at = sheets.soundings.index[sheets.soundings["sounding"] == name][0]
    sheets.soundings.loc[at, "azimuth"] = 90.0
    x, y = sheets.soundings.loc[at, ["x", "y"]]
    logs = []
    for i, (east, rock) in enumerate(((-150.0, 60), (100.0, 320))):
        well = sheets.wells.loc[i, "well"]
        sheets.wells.loc[i, ["x", "y"]] = (x + east, y)
        sheets.wells.loc[i, ["total_depth", "ground_elevation"]] = (
            rock + 20,
            round(sheets.columns[name].ground / FOOT),
        )
        logs.append({"well": well, "top": 0, "bottom": rock, "description": "blue clay", "unit": ""})
        logs.append({"well": well, "top": rock, "bottom": rock + 20, "description": "limestone", "unit": ""})
    sheets.wells["water_level"] = np.nan
    others = sheets.well_logs[~sheets.well_logs["well"].isin([one["well"] for one in logs])]
    sheets.well_logs = pd.concat([others, pd.DataFrame(logs)], ignore_index=True)
    return Told("across_valley", name)


def template_that_confuses(sheets, rng):
    del rng
    sheets.region = sheets.region.replace("resistivity = [40, 90] ", "resistivity = [39, 56] ")
    return Told("template_confusion", words="deep_gravel (38 to 55 ohm m) and bedrock")


def template_gap(sheets, rng):
    del rng
    sheets.region = sheets.region.replace("resistivity = [13, 26]", "resistivity = [5, 9]")
    return Told("template_gap")


def no_vertical_datum(sheets, rng):
    del rng
    lines = [line for line in sheets.region.splitlines() if not line.startswith("vertical_datum")]
    sheets.region = "\n".join(lines) + "\n"
    return Told("no_vertical_datum")


def two_feet(sheets, rng):
    del rng
    sheets.region = sheets.region.replace('well_logs = "ft"', 'well_logs = "us-ft"')
    return Told("two_feet")


def coordinates_of_another_datum(sheets, rng):
    """Longitude and latitude beside x and y, in NAD 27: some 40 m off in this county, all alike."""
    del rng
    from pyproj import Transformer

    lon, lat = Transformer.from_crs("EPSG:26914", "EPSG:4326", always_xy=True).transform(
        sheets.soundings["x"] + 35.0, sheets.soundings["y"] - 210.0
    )
    sheets.soundings["lon"], sheets.soundings["lat"] = np.round(lon, 6), np.round(lat, 6)
    return Told("two_coordinates", words="two datums")


PLANTS: tuple[Plant, ...] = (
    electrode_left_behind, electrode_too_far_out, decimal_point, volts_for_millivolts, amperes_for_milliamperes,
    ab_for_half, mn_for_half, feet_for_metres, ab_for_half_throughout, mn_for_half_throughout_by_overlaps, repeated_row,
    repeats_differ, stuck_current, dead_reading, weak_signal, wide_mn, few_readings, no_middle, cusp, sawtooth,
    steep_rise, steep_fall, overlap_shift, overlap_uneven, overlap_missing, duplicate_place, duplicate_curve,
    swapped_coordinates, digits_turned, coordinates_in_feet, outside_crs, sounding_elevation, well_elevation_in_metres,
    heights_of_another_datum, log_gap, log_below_depth, depth_in_the_other_unit, log_against_sounding, permit_outside,
    rock_valley_across_the_spread, template_that_confuses, template_gap, no_vertical_datum, two_feet,
    coordinates_of_another_datum,
)  # fmt: skip
# True of the demo's own template, which no field sheet can mend.
OF_THE_TEMPLATE = ("template_confusion",)
