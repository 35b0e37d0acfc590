"""What flat layers make of valleys and walls: readings of the 2.5-dimensional response, inverted as flat layers.

Two layers, clay of 18 ohm m on rock of 66 or 240. A "valley" of `size` m: 5 % of its incision is left that far from its
axis at x = 0. A "wall" of slope `size`: its foot at x = 0, the deep ground on its left. 13 readings from AB/2 = 4 m to
the largest, errors of 3 %, resistivities known; `misread` is the natural log of the depth found over the true one. The
response is held against that of flat layers on the same cells, so that what cells do to both falls out.

`python -m tests.reference.flat_layer_readings` computes the table beside this file anew, in some minutes.
"""

import csv
from pathlib import Path

import numpy as np

from geoves.kernels import layered_earth
from tests.reference.two_and_a_half import Fineness, Section, response

TABLE = Path(__file__).with_name("flat_layer_readings.csv")
CLAY, ERROR = 18.0, 0.03
POTENTIAL_HALF_SPACING = 1.0
CELLS = Fineness(1.0, 1.15, 14)
TRIED = np.exp(np.linspace(-1.0, 1.0, 401))


def read_table():
    """Rows of the table as dictionaries, numbers as such."""
    with TABLE.open(newline="", encoding="utf-8") as stream:
        return [
            {key: text if key == "shape" else float(text) for key, text in row.items()}
            for row in csv.DictReader(stream)
        ]


def contact_of(row):
    """Depth (m) of the contact of a row as a function of x."""
    if row["shape"] == "valley":
        width = row["size"] / np.sqrt(np.log(20.0))
        return lambda x: row["shallow"] + (row["deep"] - row["shallow"]) * np.exp(-((x / width) ** 2))
    return lambda x: np.clip(row["deep"] - row["size"] * np.maximum(x, 0.0), row["shallow"], row["deep"])


def flat_response(half_spacing, depth, rock):
    """Apparent resistivity (d, n) over flat layers, the contact at each of some depths."""
    potential = np.full(half_spacing.size, POTENTIAL_HALF_SPACING)
    wavenumber = layered_earth.shared_wavenumbers([(half_spacing, potential)])
    weights = layered_earth.response_weights(half_spacing, potential, wavenumber)
    resistivity = np.tile([CLAY, rock], (len(depth), 1))
    return layered_earth.response(weights[None], wavenumber, np.asarray(depth)[:, None], resistivity)


def misread(row):
    """Natural log of the depth that flat layers find at a row over the true one."""
    contact, half_spacing = contact_of(row), np.geomspace(4.0, row["largest_ab2"], 13)
    true = float(contact(np.array(row["x"])))
    shallowest = min(true, float(contact(row["x"] + np.linspace(-2.0, 2.0, 201) * true).min()))

    def over(depth):
        section = Section(lambda x, z: np.where(z < depth(x), CLAY, row["rock"]), shallowest)
        return response(section, half_spacing, POTENTIAL_HALF_SPACING, row["azimuth"], CELLS, row["x"])

    read = np.log(over(contact) / over(lambda x: true + 0.0 * x)) + np.log(
        flat_response(half_spacing, [true], row["rock"])
    )
    misfit = np.sum(((np.log(flat_response(half_spacing, true * TRIED, row["rock"])) - read) / ERROR) ** 2, axis=1)
    return float(np.log(TRIED[np.argmin(misfit)]))


def write_table():
    """The rows of the table with what is found anew."""
    rows = read_table()
    with TABLE.open("w", newline="", encoding="utf-8") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        writer.writerow(rows[0])
        for row in rows:
            numbers = [f"{value:g}" for key, value in row.items() if key not in {"shape", "misread"}]
            writer.writerow([row["shape"], *numbers, f"{misread(row):.3f}"])


if __name__ == "__main__":
    write_table()
