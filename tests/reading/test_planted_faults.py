"""Each fault that the contract names, planted in clean inputs, is told by its file, row, column and value."""

import attrs
import pytest

from geoves.domain.survey import Measured
from geoves.reading import FaultyInputError, read_region


@attrs.frozen
class Plant:
    """A change to one clean file, and where the one fault has to be told."""

    file: str
    old: str
    new: str
    row: int
    column: str
    value: str
    says: str


PLANTS = [
    # spacings and resistivities
    Plant("readings.csv", "S1,10,1,", "S1,0,1,", 3, "ab2", "0", "spacing above 0"),
    Plant("readings.csv", "S1,10,1,", "S1,-10,1,", 3, "ab2", "-10", "spacing above 0"),
    Plant("readings.csv", "S1,10,1,", "S1,10,0,", 3, "mn2", "0", "spacing above 0"),
    Plant("readings.csv", "S1,10,1,", "S1,10,10,", 3, "mn2", "10", "MN/2 below AB/2"),
    Plant("readings.csv", "S1,10,1,", "S1,10,,", 3, "mn2", "", "empty"),
    Plant("readings.csv", "S1,10,1,", "S1,ten,1,", 3, "ab2", "ten", "not a number"),
    Plant("readings.csv", ",100,,1,", ",0,,1,", 3, "apparent_resistivity", "0", "above 0"),
    Plant("readings.csv", ",100,,1,", ",-100,,,", 3, "apparent_resistivity", "-100", "above 0"),
    Plant("readings.csv", ",100,,1,", ",nan,,1,", 3, "apparent_resistivity", "nan", "not a number"),
    Plant("readings.csv", ",100,,1,", ",inf,,1,", 3, "apparent_resistivity", "inf", "not a number"),
    Plant("readings.csv", ",100,,1,", ",1e999,,1,", 3, "apparent_resistivity", "1e999", "ohm m"),
    Plant("readings.csv", ",100,,1,", ",,,1,", 3, "apparent_resistivity", "", "empty"),
    Plant("readings.csv", ",100,,1,", ",100,-3,1,", 3, "error_percent", "-3", "0 or more"),
    Plant("readings.csv", ",100,,1,", ",100,,2,", 3, "use", "2", "1 for a reading that counts"),
    Plant("readings.csv", "S1,10,1,,", "S1,,,10,", 3, "a", "10", "Wenner"),
    Plant("readings.csv", "S2,,,10,", "S2,20,5,,", 6, "mn2", "5", "third of AB/2"),
    Plant("readings.csv", "S2,,,10,", "S2,,,,", 6, "a", "", "empty"),
    # columns
    Plant("readings.csv", "apparent_resistivity", "app_resistivity", 1, "apparent_resistivity", "", "app_resistivity"),
    Plant("soundings.csv", "sounding,x,", "sounding,easting,", 1, "x", "", "x with y or lon with lat"),
    Plant("wells.csv", "total_depth", "depth", 1, "total_depth", "", "depth"),
    Plant("well_logs.csv", ",description", "", 1, "description", "", "no such column"),
    Plant("picks.csv", "status", "unit", 1, "unit", "unit", "two columns"),
    Plant("permits.csv", "P1,602500", "P1,5,602500", 2, "", "200", "no heading"),
    # names
    Plant("soundings.csv", "S2,602000", "S1,602000", 3, "sounding", "S1", "row 2"),
    Plant("soundings.csv", "S2,602000", ",602000", 3, "sounding", "", "empty"),
    Plant("readings.csv", "S1,10,", "S9,10,", 3, "sounding", "S9", "no such name"),
    Plant("readings.csv", "S1,10,", ",10,", 3, "sounding", "", "empty"),
    Plant("soundings.csv", "S2,", "S3,603000,4902000,300,,,,,\nS2,", 3, "sounding", "S3", "readings has none"),
    Plant("wells.csv", "\nW1", "\nW1,1,1,300,9,,,\nW1", 3, "well", "W1", "row 2"),
    Plant("well_logs.csv", "W1,20", "W2,20", 2, "well", "W2", "no such name"),
    Plant("well_logs.csv", "gray rock,rock", "gray rock,stone", 2, "unit", "stone", "till, deep_gravel or rock"),
    Plant("permits.csv", "\nP1", "\nP1,602500,4901200,,,\nP1", 3, "permit", "P1", "row 2"),
    Plant("picks.csv", "S1,rock", "S7,rock", 2, "place", "S7", "no sounding and no well"),
    Plant("picks.csv", "S1,rock", "S1,rok", 2, "unit", "rok", "did you mean 'rock'?"),
    Plant("picks.csv", "W1,deep_gravel", "S1,rock", 3, "unit", "rock", "row 2"),
    # coordinates and elevations
    Plant("soundings.csv", "S1,601000", "S1,", 2, "x", "", "empty"),
    Plant("soundings.csv", "S1,601000", "S1,E601000", 2, "x", "E601000", "not a number"),
    Plant("soundings.csv", ",300.5,", ",20000,", 2, "ground_elevation", "20000", "9000 m"),
    Plant("soundings.csv", ",x,y,", ",lon,lat,", 2, "lon", "601000", "-180 to 180"),
    Plant("soundings.csv", ",schlumberger,", ",pole-pole,", 2, "array", "pole-pole", "schlumberger or wenner"),
    Plant("soundings.csv", ",45,", ",450,", 2, "azimuth", "450", "0 to 360"),
    # wells and logs
    Plant("wells.csv", ",50,6,", ",,6,", 2, "total_depth", "", "empty"),
    Plant("wells.csv", ",50,6,", ",-50,6,", 2, "total_depth", "-50", "above 0"),
    Plant("wells.csv", ",650,", ",0,", 2, "specific_conductance", "0", "above 0"),
    Plant("wells.csv", ",25\n", ",-25\n", 2, "location_accuracy", "-25", "0 or more"),
    Plant("well_logs.csv", "W1,20,", "W1,19.5,", 2, "top", "19.5", "overlaps that of row 3"),
    Plant("well_logs.csv", "W1,20,50", "W1,50,20", 2, "bottom", "20", "below the interval's top"),
    Plant("well_logs.csv", "till with stones", "", 3, "description", "", "driller's words"),
    # permits and picks
    Plant("permits.csv", ",40,", ",0,", 2, "requested_depth", "0", "above 0"),
    Plant("picks.csv", ",at,42,", ",at,,", 2, "depth", "", "needs the depth"),
    Plant("picks.csv", ",at,42,3,", ",at,42,0,", 2, "depth_error", "0", "above 0"),
    Plant("picks.csv", ",at,", ",near,", 2, "status", "near", "at, below or absent"),
    # a decimal comma in a table that has commas between its cells
    Plant("wells.csv", ",301,", ',"301,5",', 2, "ground_elevation", "301,5", "not a number"),
]


def _planted(folder, plant):
    if plant.file == "soundings.csv" and "lon" in plant.new:
        folder.replace("soundings.csv", "S2,602000,4902000", "S2,-97,44")
        folder.replace("soundings.csv", "4901000", "44")
    folder.replace(plant.file, plant.old, plant.new)


@pytest.mark.parametrize("plant", PLANTS, ids=lambda plant: f"{plant.file} {plant.says}")
def test_fault_is_told_where_it_stands(folder, plant):
    _planted(folder, plant)
    faults = folder.faults()
    told = [fault for fault in faults if (fault.file, fault.row, fault.column) == (plant.file, plant.row, plant.column)]
    assert told, [fault.line() for fault in faults]
    assert told[0].value == plant.value
    assert plant.says in told[0].expected


def test_headings_may_stand_below_blank_rows(folder):
    folder.write("permits.csv", "\n" + (folder.path / "permits.csv").read_text(encoding="utf-8"))
    assert folder.survey().permits[0].name == "P1"


# in region.toml
REGION_PLANTS = [
    Plant("", 'name = "Larkmoor County"\n', "", 1, "region.name", "", "the region's name"),
    Plant("", "EPSG:26914", "EPSG:4326", 3, "region.crs", "EPSG:4326", "not projected"),
    Plant("", "EPSG:26914", "EPSG:1", 3, "region.crs", "EPSG:1", "no such CRS"),
    Plant("", "EPSG:26914", "EPSG:2053", 3, "region.crs", "EPSG:2053", "x runs east"),
    Plant("", "EPSG:26914", "EPSG:26914+5703", 3, "region.crs", "EPSG:26914+5703", "vertical_datum"),
    Plant("", "EPSG:5703", "EPSG:26914", 4, "region.vertical_datum", "EPSG:26914", "not a vertical CRS"),
    Plant("", '"m"', '"feet"', 5, "region.length_unit", "feet", "'m', 'ft' or 'us-ft'"),
    Plant("", "100.0", "0", 6, "region.cell_size", "0", "above 0"),
    Plant("", "100.0", "inf", 6, "region.cell_size", "inf", "above 0"),
    Plant("", "100.0", "true", 6, "region.cell_size", "True", "above 0"),
    Plant("", "100.0", "0.1", 0, "region.cell_size", "0.1", "cells at most"),
    Plant("", "cell_size", "cellsize", 6, "region.cellsize", "cellsize", "did you mean 'cell_size'?"),
    Plant("", "= 7", '= "7"', 7, "region.random_seed", "7", "whole number"),
    Plant("", "[region]", "[regions]", 1, "regions", "regions", "did you mean 'region'?"),
    Plant("", "wells.csv", "boreholes.csv", 12, "inputs.wells", "boreholes.csv", "no such file"),
    Plant("", "wells.csv", ".", 12, "inputs.wells", ".", "folder"),
    Plant("", 'wells = "wells.csv"', "wells = 5", 12, "inputs.wells", "5", "quotation marks"),
    Plant("", 'readings = "readings.csv"\n', "", 9, "inputs.readings", "", "table of readings"),
    Plant("", 'wells = "wells.csv"\n', "", 12, "inputs.well_logs", "well_logs.csv", "table of wells"),
    Plant("", "permits =", "permit =", 14, "inputs.permit", "permit", "did you mean 'permits'?"),
    Plant("", "[38, 55]", "[55, 38]", 29, "unit.resistivity", "[55, 38]", "upside down"),
    Plant("", "[38, 55]", "[38, 38]", 29, "unit.resistivity", "[38, 38]", "upside down"),
    Plant("", "[38, 55]", "[-3, 55]", 29, "unit.resistivity", "[-3, 55]", "above 0"),
    Plant("", "[38, 55]", "[38]", 29, "unit.resistivity", "[38]", "two resistivities"),
    Plant("", "[38, 55]", '["38", "55"]', 29, "unit.resistivity", "['38', '55']", "two resistivities"),
    Plant("", "[15, 90]", "[90, 15]", 30, "unit.depth_to_top", "[90, 15]", "upside down"),
    Plant("", "[15, 90]", "[-15, 90]", 30, "unit.depth_to_top", "[-15, 90]", "downwards"),
    Plant("", '"deep_aquifer"', '"aquifer"', 28, "unit.role", "aquifer", "deep_aquifer"),
    Plant("", '"deep_gravel"', '"till"', 26, "unit.code", "till", "another unit"),
    Plant("", '"cover"', '"bedrock"', 28, "unit.role", "deep_aquifer", "below bedrock"),
    Plant("", 'code = "rock"\n', "", 32, "unit.code", "", "short name"),
    Plant("", '["till"]', '"till"', 23, "unit.log_terms", "till", "list of texts"),
    Plant("", 'code = "till"', 'color = "#112233"\ncode = "till"', 20, "unit.color", "color", "colour"),
    Plant(
        "",
        'code = "till"',
        'colour = "brown"\ncode = "till"',
        20,
        "unit.colour",
        "brown",
        "#c8a24a",
    ),
    Plant("", "[inputs]", '[input_length_unit]\nwells = "feet"\n[inputs]', 10, "input_length_unit.wells", "feet", "ft"),
    Plant(
        "",
        "[inputs]",
        '[interpretation]\nmethod = "all"\n[inputs]',
        10,
        "interpretation.method",
        "all",
        "'each'",
    ),
    Plant("", "[inputs]", '[delivery]\nwithhold = ["ower"]\n[inputs]', 0, "delivery.withhold", "ower", "'owner'"),
    Plant(
        "",
        "[inputs]",
        '[delivery]\nwithhold = ["x"]\n[inputs]',
        0,
        "delivery.withhold",
        "x",
        "only extra",
    ),
    Plant("", "[inputs]", "[inputs", 9, "", "[inputs", "not TOML"),
]


@pytest.mark.parametrize("plant", REGION_PLANTS, ids=lambda plant: f"{plant.column} {plant.value}")
def test_fault_of_region_file_is_told_where_it_stands(folder, plant):
    folder.replace("region.toml", plant.old, plant.new)
    faults = folder.faults()
    told = [one for one in faults if (one.file, one.column, one.value) == ("region.toml", plant.column, plant.value)]
    assert told, [fault.line() for fault in faults]
    assert told[0].row == plant.row
    assert plant.says in told[0].expected


def test_all_faults_come_at_once_region_file_first(folder):
    folder.replace("region.toml", "[38, 55]", "[55, 38]")
    folder.replace("region.toml", "cell_size", "cellsize")
    folder.replace("soundings.csv", "S1,601000", "S1,east")
    folder.replace("readings.csv", "S1,10,1,", "S1,0,1,")
    folder.replace("readings.csv", "S2,,,20,60", "S2,,,20,-60")
    folder.replace("well_logs.csv", "W1,20,", "W1,19,")
    folder.replace("permits.csv", ",40,", ",forty,")
    folder.replace("picks.csv", ",at,42,", ",at,,")
    (folder.path / "ground.tif").write_bytes(b"not a raster")
    told = {(fault.file, fault.row, fault.column) for fault in folder.faults()}
    assert told == {
        ("region.toml", 6, "region.cellsize"),
        ("region.toml", 1, "region.cell_size"),
        ("region.toml", 29, "unit.resistivity"),
        ("soundings.csv", 2, "x"),
        ("readings.csv", 3, "ab2"),
        ("readings.csv", 7, "apparent_resistivity"),
        ("well_logs.csv", 2, "top"),
        ("permits.csv", 2, "requested_depth"),
        ("picks.csv", 2, "depth"),
        ("ground.tif", 0, ""),
    }
    with pytest.raises(FaultyInputError) as raised:
        read_region(folder.region_file)
    assert [line.startswith("region.toml") for line in raised.value.lines] == [True] * 3 + [False] * 7
    assert all("\n" not in line for line in raised.value.lines)


def test_unused_readings_may_hold_bad_numbers(folder):
    folder.replace("readings.csv", "S1,50,5,,-7,,0,fence", "S1,50,5,,overload,x,0,fence\nS1,?,5,,9,,0,\nS1,9,9,,9,,0,")
    doubts = folder.doubts()
    assert [(doubt.row, doubt.column) for doubt in doubts] == [(6, "ab2"), (7, "ab2")]
    assert folder.survey().soundings[0].curve.used.tolist() == [True, True, True, False]


@pytest.mark.parametrize(
    ("file", "old", "new", "row", "column", "says"),
    [
        ("well_logs.csv", "W1,20,", "W1,22,", 2, "top", "gap"),
        ("well_logs.csv", "W1,0,", "W1,2,", 3, "top", "the ground"),
        ("well_logs.csv", "20,50", "20,60", 2, "bottom", "total depth"),
        ("wells.csv", ",50,6,", ",50,60,", 2, "water_level", "total depth"),
        ("wells.csv", "\nW1", "\nW2,601500,4901600,301,9,,,\nW1", 2, "well", "none of this well"),
        ("soundings.csv", ",300.5,", ",318.5,", 2, "ground_elevation", "ground raster has 301.0 m"),
        ("soundings.csv", ",300.5,", ",987.5,", 2, "ground_elevation", "feet taken for metres"),
        ("permits.csv", "602500", "603500", 2, "x", "outside the boundary"),
        ("wells.csv", "601500,4901500", "603300,4901500", 2, "x", "outside the boundary"),
        ("picks.csv", "absent,,", "absent,30,", 3, "depth", "not used"),
        ("readings.csv", ",100,,1,", ",100,0,1,", 3, "error_percent", "not stated"),
    ],
)
def test_doubt_is_told_and_the_run_goes_on(folder, file, old, new, row, column, says):
    folder.replace(file, old, new)
    told = [(doubt.file, doubt.row, doubt.column) for doubt in folder.doubts() if says in doubt.expected]
    assert told == [(file, row, column)]


def test_elevation_within_tolerance_of_the_ground_is_no_doubt(folder):
    folder.replace("soundings.csv", ",300.5,", ",310.9,")
    assert folder.doubts() == []


def test_heights_without_a_datum_are_doubted(folder):
    folder.replace("region.toml", 'vertical_datum = "EPSG:5703"\n', "")
    (doubt,) = folder.doubts()
    assert doubt.column == "region.vertical_datum"


def test_swapped_coordinates_are_doubted(folder):
    folder.drop_inputs("boundary", "ground")
    folder.replace("soundings.csv", "S2,602000,4902000,", "S2,4902000,602000,302")
    folder.replace("region.toml", "cell_size = 100.0", "cell_size = 5000.0")
    assert [(doubt.file, doubt.row, doubt.column) for doubt in folder.doubts()] == [("soundings.csv", 3, "x")]


def test_what_was_typed_is_kept_for_those_who_recompute_it(folder):
    text = (
        "sounding,ab2,mn2,apparent_resistivity,voltage_mv,current_ma\n"
        "S1,10,1,186.6,0.0012,1\nS1,20,1,62.66,100,1000\nS2,15,5,60,,\n"
    )
    folder.write("readings.csv", text)
    first, second = folder.survey().soundings
    assert [(one.apparent_resistivity, one.voltage_mv, one.current_ma) for one in first.curve.measured] == [
        (186.6, 0.0012, 1.0),
        (62.66, 100.0, 1000.0),
    ]
    assert second.curve.measured == (Measured(apparent_resistivity=60.0),)


def test_a_pick_at_a_name_of_two_places_is_a_fault(folder):
    for name in ("wells.csv", "well_logs.csv"):
        folder.replace(name, "W1,", "S1,")
    folder.replace("picks.csv", "W1,deep_gravel", "S2,deep_gravel")
    (fault,) = folder.faults()
    assert (fault.file, fault.row, fault.column, fault.value) == ("picks.csv", 2, "place", "S1")


def test_a_crs_that_stretches_lengths_is_doubted(folder):
    # Spherical Mercator stretches by about 1 / cos(latitude), here 1.394 at 44.25 degrees (its definition).
    folder.drop_inputs("boundary", "ground")
    folder.replace("region.toml", "EPSG:26914", "EPSG:3857")
    for name in ("soundings.csv", "wells.csv", "permits.csv"):
        text = (folder.path / name).read_text(encoding="utf-8")
        folder.write(name, text.replace(",60", ",-1088").replace(",490", ",550").replace(",-1088", ",-10880"))
    folder.replace("soundings.csv", ",,wenner", ",300,wenner")
    (doubt,) = folder.doubts()
    assert (doubt.column, doubt.value) == ("region.crs", "EPSG:3857")
    assert "1.39" in doubt.expected


def test_faults_beside_a_missing_column_are_told_too(folder):
    folder.replace("soundings.csv", "sounding,x,", "sounding,east,")
    folder.replace("soundings.csv", ",45,", ",451,")
    folder.replace("readings.csv", ",apparent_resistivity,", ",rho,")
    folder.replace("readings.csv", "S1,10,1,", "S1,10,11,")
    folder.replace("wells.csv", "well,x", "name,x")
    folder.replace("wells.csv", ",50,6,", ",50,six,")
    folder.replace("well_logs.csv", "W1,20,", "W1,12,")
    folder.replace("picks.csv", ",at,42,", ",at,deep,")
    assert [(fault.file, fault.row, fault.column) for fault in folder.faults()] == [
        ("soundings.csv", 1, "x"),
        ("soundings.csv", 2, "azimuth"),
        ("readings.csv", 1, "apparent_resistivity"),
        ("readings.csv", 3, "mn2"),
        ("wells.csv", 1, "well"),
        ("wells.csv", 2, "water_level"),
        ("well_logs.csv", 2, "top"),
        ("picks.csv", 2, "depth"),
    ]


def test_two_faults_of_one_reading_are_both_told(folder):
    folder.replace("readings.csv", "S1,10,1,,100,,1,", "S1,-10,1,,0,-1,1,")
    assert [fault.column for fault in folder.faults()] == ["ab2", "apparent_resistivity", "error_percent"]


def test_an_extra_column_nearly_named_as_an_optional_one_is_doubted(folder):
    folder.replace("readings.csv", "error_percent", "error_per_cent")
    (doubt,) = folder.doubts()
    assert (doubt.file, doubt.row, doubt.column) == ("readings.csv", 1, "error_per_cent")
    assert "did you mean 'error_percent'?" in doubt.expected


@pytest.mark.parametrize(
    ("section", "column", "says"),
    [
        ('name = "A"', "section.points", "two places or more"),
        ('name = "A"\npoints = [[1, 2]]', "section.points", "two places or more"),
        ('name = "A"\npoints = [[1, 2], [1, 2]]', "section.points", "two places or more"),
        ('name = "A"\npoints = [[1, 2], [3]]', "section.points", "two places or more"),
        ('name = "A"\npoints = [[1, 2], ["3", 4]]', "section.points", "two places or more"),
        ('name = "A"\npoints = "1 2"', "section.points", "two places or more"),
        ("points = [[1, 2], [3, 4]]", "section.name", "the section's name"),
        ('nam = "A"\nname = "A"\npoints = [[1, 2], [3, 4]]', "section.nam", "did you mean 'name'?"),
    ],
)
def test_a_section_that_is_no_line_is_a_fault(folder, section, column, says):
    folder.add_table(f"[[section]]\n{section}")
    (fault,) = folder.faults()
    assert (fault.file, fault.column) == ("region.toml", column)
    assert says in fault.expected


def test_two_sections_of_one_name_and_a_single_bracket_are_faults(folder):
    line = 'name = "A"\npoints = [[1, 2], [3, 4]]\n'
    before = folder.region_file.read_text(encoding="utf-8")
    folder.add_table(f"[[section]]\n{line}[[section]]\n{line}")
    assert "another section has this name" in folder.faults()[0].expected
    folder.write("region.toml", before)
    folder.add_table(f"[section]\n{line}")
    assert "[[section]]" in folder.faults()[0].expected
