"""The clean region folder of this room with any one of its files in another format: what fuzzing begins from."""

import geopandas as gpd
import openpyxl
import shapely

from tests.reading.conftest import REGION, TABLES, write_plane

# What each made-up file stands in for in region.toml.
FILES = {
    "region.toml": None,
    **dict.fromkeys(TABLES, None),
    "readings.xlsx": 'readings = "readings.csv"',
    "permits.geojson": 'permits = "permits.csv"',
    "permits.gpkg": 'permits = "permits.csv"',
    "boundary.gpkg": None,
    "ground.tif": None,
}


def write_clean_folder(folder, file):
    """Write all files, `file` among them and named by region.toml; gives the bytes of that one."""
    folder.mkdir(parents=True, exist_ok=True)
    line, text = FILES[file], REGION
    if line is not None:
        text = text.replace(line, f'{line.partition(" ")[0]} = "{file}"')
    (folder / "region.toml").write_text(text, encoding="utf-8")
    for name, table in TABLES.items():
        (folder / name).write_text(table, encoding="utf-8")
    box = gpd.GeoDataFrame(geometry=[shapely.box(600_000, 4_900_000, 604_000, 4_904_000)], crs="EPSG:26914")
    box.to_file(folder / "boundary.gpkg")
    write_plane(folder / "ground.tif")
    points = gpd.GeoDataFrame({"permit": ["P1"]}, geometry=[shapely.Point(602_500, 4_901_200)], crs="EPSG:26914")
    if file in ("permits.gpkg", "permits.geojson"):
        points.to_file(folder / file)
    if file == "readings.xlsx":
        workbook = openpyxl.Workbook()
        for row in TABLES["readings.csv"].splitlines():
            workbook.active.append(row.split(","))
        workbook.save(folder / file)
    return (folder / file).read_bytes()
