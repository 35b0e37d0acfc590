"""A small region folder, clean until a test plants something in it."""

from pathlib import Path

import attrs
import geopandas as gpd
import numpy as np
import pytest
import rasterio
import shapely
from affine import Affine

from geoves.domain.findings import Finding
from geoves.reading import FaultyInputError, read_region, read_survey

REGION = """\
[region]
name = "Larkmoor County"
crs = "EPSG:26914"
vertical_datum = "EPSG:5703"
length_unit = "m"
cell_size = 100.0
random_seed = 7

[inputs]
soundings = "soundings.csv"
readings = "readings.csv"
wells = "wells.csv"
well_logs = "well_logs.csv"
permits = "permits.csv"
ground = "ground.tif"
boundary = "boundary.gpkg"
picks = "picks.csv"

[[unit]]
code = "till"
role = "cover"
resistivity = [25, 60]
log_terms = ["till"]

[[unit]]
code = "deep_gravel"
name = "Basal gravel"
role = "deep_aquifer"
resistivity = [38, 55]
depth_to_top = [15, 90]

[[unit]]
code = "rock"
role = "bedrock"
resistivity = [60, 155]
"""
TABLES = {
    "soundings.csv": (
        "sounding,x,y,ground_elevation,array,azimuth,date,note,owner\n"
        "S1,601000,4901000,300.5,schlumberger,45,2024-05-01,dry,B. Lark\n"
        "S2,602000,4902000,,wenner,,,,\n"
    ),
    "readings.csv": (
        "sounding,ab2,mn2,a,apparent_resistivity,error_percent,use,note\n"
        "S1,20,5,,88,3,,\n"
        "S1,10,1,,100,,1,\n"
        "S1,20,1,,90,2.5,1,\n"
        "S1,50,5,,-7,,0,fence\n"
        "S2,,,10,55,,,\n"
        "S2,,,20,60,,,\n"
    ),
    "wells.csv": (
        "well,x,y,ground_elevation,total_depth,water_level,specific_conductance,location_accuracy\n"
        "W1,601500,4901500,301,50,6,650,25\n"
    ),
    "well_logs.csv": "well,top,bottom,description,unit\nW1,20,50,gray rock,rock\nW1,0,20,till with stones,\n",
    "permits.csv": "permit,x,y,requested_depth,use,location_accuracy\nP1,602500,4901200,40,domestic,200\n",
    "picks.csv": (
        "place,unit,status,depth,depth_error,interpreter,reason\n"
        "S1,rock,at,42,3,A. Reader,seen\n"
        "W1,deep_gravel,absent,,,A. Reader,\n"
    ),
}


@attrs.frozen
class RegionFolder:
    """A region folder under test."""

    path: Path

    @property
    def region_file(self):
        return self.path / "region.toml"

    def write(self, name, text):
        (self.path / name).write_text(text, encoding="utf-8")

    def replace(self, name, old, new):
        text = (self.path / name).read_text(encoding="utf-8")
        assert old in text, f"{old!r} is not in {name}"
        self.write(name, text.replace(old, new))

    def add_table(self, text):
        self.write("region.toml", f"{self.region_file.read_text(encoding='utf-8')}\n{text}\n")

    def drop_inputs(self, *names):
        for name in names:
            lines = self.region_file.read_text(encoding="utf-8").splitlines()
            self.write("region.toml", "\n".join(line for line in lines if not line.startswith(f"{name} = ")) + "\n")

    def read(self):
        region = read_region(self.region_file)
        return region, *read_survey(region)

    def survey(self):
        return self.read()[1]

    def faults(self) -> list[Finding]:
        with pytest.raises(FaultyInputError) as raised:
            self.read()
        faults = [finding for finding in raised.value.findings if finding.severity == "fault"]
        assert list(raised.value.lines) == [fault.line() for fault in faults]
        return faults

    def doubts(self) -> list[Finding]:
        return list(self.survey().doubts)


def write_plane(path, *, crs="EPSG:26914", nodata=-9999.0, dtype="float32", bounds=(599000, 4899000, 604000, 4904000)):
    """A ground raster that rises 1 m in 1 km eastwards, 300 m at x = 600 000; 50 m cells."""
    west, south, east, north = bounds
    columns, rows = int((east - west) / 50), int((north - south) / 50)
    easting = west + (np.arange(columns) + 0.5) * 50
    elevation = np.broadcast_to(300.0 + (easting - 600000.0) / 1000.0, (rows, columns)).astype(dtype)
    profile = {"driver": "GTiff", "count": 1, "dtype": dtype, "nodata": nodata, "height": rows, "width": columns}
    with rasterio.open(path, "w", crs=crs, transform=Affine(50, 0, west, 0, -50, north), **profile) as raster:
        raster.write(elevation, 1)
    return elevation


@pytest.fixture
def folder(tmp_path):
    """The region folder, clean."""
    made = RegionFolder(tmp_path)
    made.write("region.toml", REGION)
    for name, text in TABLES.items():
        made.write(name, text)
    write_plane(tmp_path / "ground.tif")
    square = shapely.box(600050, 4900050, 603050, 4903050)
    gpd.GeoDataFrame({"name": ["Larkmoor"]}, geometry=[square], crs="EPSG:26914").to_file(tmp_path / "boundary.gpkg")
    return made
