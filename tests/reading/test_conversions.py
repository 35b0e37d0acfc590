"""Conversions whose grid is not installed: refused by name. The grids' names are those of the EPSG registry in PROJ."""

import geopandas as gpd
import pytest
import shapely

from geoves.reading.conversions import extent_of, find_missing_grid

HERE = (-97.5, 44.1, -97.1, 44.5)


def test_a_datum_shift_without_its_grid_is_a_fault_that_names_it():
    lacking = find_missing_grid("EPSG:4267", "EPSG:26914", HERE)  # NAD 27 to NAD 83
    if lacking is None:
        pytest.skip("the grids of NAD 27 are installed here")
    assert lacking.severity == "fault"
    assert "us_noaa_nadcon5_nad27_nad83_1986_conus.tif" in lacking.words
    assert "projsync --file" in lacking.words


@pytest.mark.parametrize(
    ("source", "target"),
    [
        ("EPSG:4326", "EPSG:26914"),  # to 4 m without a grid, as the registry says
        ("EPSG:4269", "EPSG:26914"),  # one datum
        ("EPSG:26914", "EPSG:26914"),
        ("EPSG:4326", "EPSG:32614"),
    ],
)
def test_conversions_that_need_no_grid_pass(source, target):
    assert find_missing_grid(source, target, HERE) is None


def test_versions_of_one_datum_are_a_doubt():
    lacking = find_missing_grid("EPSG:6318", "EPSG:26914", HERE)  # NAD 83 (2011) to the NAD 83 of 1986: a metre or so
    assert lacking is None or lacking.severity == "doubt"


def test_the_extent_is_in_degrees_of_its_own_datum():
    west, south, east, north = extent_of((600_000.0, 4_880_000.0, 640_000.0, 4_920_000.0), "EPSG:26914")
    assert -98 < west < east < -96
    assert 44 < south < north < 45


def test_a_boundary_in_another_datum_is_refused(folder):
    square = gpd.GeoSeries([shapely.box(600050, 4900050, 603050, 4903050)], crs="EPSG:26714")
    gpd.GeoDataFrame({"name": ["Larkmoor"]}, geometry=square).to_file(folder.path / "boundary.gpkg")
    (fault,) = folder.faults()
    assert (fault.file, fault.check) == ("boundary.gpkg", "missing_grid")


def test_a_decimal_comma_between_commas_is_hinted_at(folder):
    folder.replace("wells.csv", ",301,", ',"301,5",')
    (fault,) = folder.faults()
    assert "301.5 is meant?" in fault.expected


def test_a_number_that_a_comma_split_in_two_is_hinted_at(folder):
    folder.replace("readings.csv", "S1,50,5,,-7,,0,fence", "S1,50,5,,-7,5,,0,fence")
    hinted = [fault for fault in folder.faults() if "a decimal comma splits a number in two" in fault.expected]
    assert [(fault.file, fault.row) for fault in hinted] == [("readings.csv", 5)]


def state_plane(folder, shift):
    """The folder in a state-plane CRS of US survey feet, with lon and lat beside x and y that are off by a share."""
    from pyproj import Transformer

    folder.drop_inputs("boundary", "ground", "wells", "well_logs", "permits", "picks")
    folder.replace("region.toml", "EPSG:26914", "EPSG:3454")  # NAD 83, South Dakota South, US survey feet
    to_degrees = Transformer.from_crs("EPSG:3454", "EPSG:4326", always_xy=True)
    rows = ["sounding,x,y,lon,lat,ground_elevation,array"]
    for name, x, y, array in (("S1", 1_990_000.0, 440_000.0, ""), ("S2", 2_010_000.0, 450_000.0, "wenner")):
        lon, lat = to_degrees.transform(x * (1.0 + shift), y * (1.0 + shift))
        rows.append(f"{name},{x},{y},{lon:.8f},{lat:.8f},400,{array}")
    folder.write("soundings.csv", "\n".join(rows) + "\n")


def test_the_other_foot_is_told_where_two_sets_of_coordinates_stand(folder):
    """US survey foot over international foot: 1.000002 (NIST SP 811, B.6); 1.2 m at two million feet."""
    state_plane(folder, 2.000004e-6)
    (doubt,) = [one for one in folder.doubts() if one.check == "two_coordinates"]
    assert "one of the two feet is taken for the other" in doubt.expected


def test_coordinates_that_agree_raise_nothing(folder):
    state_plane(folder, 0.0)
    assert [one for one in folder.doubts() if one.check == "two_coordinates"] == []
