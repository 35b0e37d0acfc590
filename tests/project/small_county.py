"""A corner of the demo region that runs in seconds: a few soundings with the wells, permits and picks among them."""

import csv
from pathlib import Path

import geopandas
import shapely

DEMO = Path(__file__).parents[2] / "demo_region"
CENTRE = (628_000.0, 4_908_000.0)  # over the valley, where wells are close
HALF_WIDTH = 5_400.0  # m
FEET = 0.3048  # m, exact (NIST SP 811, appendix B.6)

# Columns that hold lengths in the region's unit; those of wells, logs and permits are in feet in the demo.
LENGTHS = {
    "soundings": ("ground_elevation",),
    "readings": ("ab2", "mn2"),
    "picks": ("depth", "depth_error"),
}
TABLES = ("soundings", "readings", "wells", "well_logs", "permits", "picks")


def read_table(path):
    with path.open(encoding="utf-8-sig", newline="") as stream:
        return list(csv.DictReader(stream))


def write_table(path, rows):
    with path.open("w", encoding="utf-8", newline="") as stream:
        writer = csv.DictWriter(stream, list(rows[0]))
        writer.writeheader()
        writer.writerows(rows)


def _is_inside(row):
    east, north = float(row["x"]), float(row["y"])
    return max(abs(east - CENTRE[0]), abs(north - CENTRE[1])) <= HALF_WIDTH


def _cut_tables():
    """Rows of each table that belong to the corner: half its soundings, those picked, its wells, 12 permits."""
    tables = {name: read_table(DEMO / f"{name}.csv") for name in TABLES}
    picked = {row["place"] for row in tables["picks"]}
    inside = [row for row in tables["soundings"] if _is_inside(row)]
    soundings = [row for number, row in enumerate(inside) if number % 2 == 0 or row["sounding"] in picked]
    wells = [row for row in tables["wells"] if _is_inside(row)]
    kept, logged = {row["sounding"] for row in soundings}, {row["well"] for row in wells}
    box = _outline()
    degrees = geopandas.GeoSeries([box], crs="EPSG:26914").to_crs("EPSG:4326").iloc[0]
    permits = [
        row for row in tables["permits"] if degrees.contains(shapely.Point(float(row["lon"]), float(row["lat"])))
    ]
    return {
        "soundings": soundings,
        "readings": [row for row in tables["readings"] if row["sounding"] in kept],
        "wells": wells,
        "well_logs": [row for row in tables["well_logs"] if row["well"] in logged],
        "permits": permits[:12],
        "picks": [row for row in tables["picks"] if row["place"] in kept | logged],
    }


def _outline():
    x, y = CENTRE
    return shapely.box(x - HALF_WIDTH, y - HALF_WIDTH, x + HALF_WIDTH, y + HALF_WIDTH)


def write_small_county(folder, *, without=(), extra=""):
    """The path of the region.toml written into `folder`, without the inputs named; `extra` is added to its end."""
    folder.mkdir(parents=True, exist_ok=True)
    for name, rows in _cut_tables().items():
        if name not in without:
            write_table(folder / f"{name}.csv", rows)
    if "ground" not in without:
        (folder / "ground.tif").write_bytes((DEMO / "ground.tif").read_bytes())
    if "boundary" not in without:
        geopandas.GeoDataFrame(geometry=[_outline()], crs="EPSG:26914").to_file(folder / "boundary.gpkg")
    lines = (DEMO / "region.toml").read_text(encoding="utf-8").splitlines()
    dropped = {*without, "withhold"} if "permits" in without else set(without)  # its only withheld column goes along
    kept = [line for line in lines if line.partition(" ")[0] not in dropped]
    text = "\n".join(kept).replace("cell_size = 100.0", "cell_size = 400.0")
    (folder / "region.toml").write_text(f"{text}\n{extra}", encoding="utf-8")
    return folder / "region.toml"


def put_into_feet(region):
    """Turn a region folder's metres into feet, in its tables and in region.toml; the ground raster stays in metres."""
    for name, columns in LENGTHS.items():
        path = region.parent / f"{name}.csv"
        rows = read_table(path)
        for row in rows:
            row |= {column: repr(float(row[column]) / FEET) for column in columns if row[column]}
        write_table(path, rows)
    text = region.read_text(encoding="utf-8").replace('length_unit = "m"', 'length_unit = "ft"')
    text = text.replace("[input_length_unit]", '[input_length_unit]\nground = "m"')
    for metres in ("[1, 8]", "[15, 135]", "[14, 150]"):
        feet = [float(value) / FEET for value in metres.strip("[]").split(",")]
        text = text.replace(f"depth_to_top = {metres}", f"depth_to_top = {feet}")
    region.write_text(text, encoding="utf-8")
