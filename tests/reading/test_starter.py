"""A folder that `geoves new` writes is read without a fault."""

import pytest

from geoves.errors import DeliveryError, InputError
from geoves.reading import read_region, read_survey
from geoves.reading.permits import PERMIT_COLUMNS
from geoves.reading.picks import PICK_COLUMNS
from geoves.reading.readings import READING_COLUMNS
from geoves.reading.soundings import SOUNDING_COLUMNS
from geoves.reading.starter_folder import write_starter
from geoves.reading.wells import LOG_COLUMNS, WELL_COLUMNS


def test_what_is_written_reads_without_faults(tmp_path):
    folder = tmp_path / "new" / "county"
    lines = write_starter(folder)
    assert str(folder) in lines[0]
    region = read_region(folder / "region.toml")
    survey, grid = read_survey(region)
    assert [doubt.column for doubt in survey.doubts] == ["region.vertical_datum"]
    counts = [len(things) for things in (survey.soundings, survey.wells, survey.permits, survey.picks)]
    assert counts == [1, 1, 1, 1]
    assert grid.n_rows * grid.n_columns > 0


def test_headings_are_those_of_the_contract(tmp_path):
    write_starter(tmp_path)
    tables = {
        "soundings": SOUNDING_COLUMNS,
        "readings": READING_COLUMNS,
        "wells": WELL_COLUMNS,
        "well_logs": LOG_COLUMNS,
        "permits": PERMIT_COLUMNS,
        "picks": PICK_COLUMNS,
    }
    for name, columns in tables.items():
        headings = (tmp_path / f"{name}.csv").read_text(encoding="utf-8").splitlines()[0].split(",")
        assert set(headings) <= set(columns.known)
        assert set(columns.required) <= set(headings)


def test_nothing_that_stands_is_overwritten(tmp_path):
    (tmp_path / "region.toml").write_text("mine", encoding="utf-8")
    with pytest.raises(InputError, match=r"region\.toml: stands there already"):
        write_starter(tmp_path)
    assert [path.name for path in tmp_path.iterdir()] == ["region.toml"]
    assert (tmp_path / "region.toml").read_text(encoding="utf-8") == "mine"


def test_a_file_is_no_folder(tmp_path):
    path = tmp_path / "file"
    path.write_text("", encoding="utf-8")
    with pytest.raises(InputError, match="this is a file"):
        write_starter(path)
    with pytest.raises(DeliveryError, match="cannot be written"):
        write_starter(path / "below")
