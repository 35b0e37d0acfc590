"""The command as a person calls it: exit statuses, and what is said where."""

import csv
import subprocess
import sys
import time

import pytest

from geoves.cli import main as command
from geoves.cli.progress import LineProgress, choose_progress
from geoves.errors import DeliveryError, EngineError, FormatError, InputError
from geoves.project.progress import SilentProgress, Summary
from geoves.reading.starter_folder import write_starter


def geoves(*arguments, cwd=None):
    call = [sys.executable, "-m", "geoves.cli.main", *map(str, arguments)]
    done = subprocess.run(call, capture_output=True, text=True, check=False, cwd=cwd, timeout=120)
    assert "Traceback" not in done.stdout + done.stderr
    return done


def findings_in(folder):
    with (folder / "check" / "check.csv").open(encoding="utf-8-sig", newline="") as stream:
        return list(csv.DictReader(stream))


@pytest.fixture
def county(tmp_path):
    write_starter(tmp_path / "county")
    return tmp_path / "county"


def test_check_of_clean_inputs_exits_0_and_writes_the_doubts(county):
    done = geoves("check", county / "region.toml")
    assert (done.returncode, done.stderr) == (0, "")
    assert "No faults" in done.stdout
    rows = findings_in(county)
    told = ["severity", "file", "row", "column", "value", "expected", "place", "check", "why", "what_to_do"]
    assert list(rows[0]) == told
    assert {row["severity"] for row in rows} == {"doubt"}
    assert sorted(path.name for path in (county / "check").iterdir()) == ["check.csv", "check.html"]


def test_check_with_quiet_says_nothing(county):
    done = geoves("check", county / "region.toml", "--quiet")
    assert (done.returncode, done.stdout, done.stderr) == (0, "", "")


def test_check_of_faults_exits_2_with_a_line_a_fault(county):
    readings = county / "readings.csv"
    readings.write_text(
        "sounding,ab2,mn2,apparent_resistivity\nEXAMPLE-1,0,1,50\nEXAMPLE-1,10,20,50\nEXAMPLE-1,30,5,=1+1\n",
        encoding="utf-8",
    )
    done = geoves("check", county / "region.toml")
    assert done.returncode == 2
    lines = done.stderr.splitlines()
    assert [line.split(":")[0] for line in lines] == [
        "readings.csv, row 2, ab2 (EXAMPLE-1)",
        "readings.csv, row 3, mn2 (EXAMPLE-1)",
        "readings.csv, row 4, apparent_resistivity (EXAMPLE-1)",
    ]
    faults = [row for row in findings_in(county) if row["severity"] == "fault"]
    assert [(row["row"], row["value"]) for row in faults] == [("2", "0"), ("3", "20"), ("4", "'=1+1")]


def test_check_keeps_what_else_stands_in_its_folder(county):
    (county / "check").mkdir()
    (county / "check" / "mine.txt").write_text("mine", encoding="utf-8")
    assert geoves("check", county / "region.toml").returncode == 0
    assert {path.name for path in (county / "check").iterdir()} == {"check.csv", "check.html", "mine.txt"}


def test_check_that_cannot_be_written_exits_1(county):
    (county / "check").write_text("a file in the way", encoding="utf-8")
    done = geoves("check", county / "region.toml")
    assert done.returncode == 1
    assert "cannot be written" in done.stderr


@pytest.mark.parametrize("name", ["run", "check"])
def test_a_region_that_is_not_there_exits_2(tmp_path, name):
    done = geoves(name, tmp_path / "nowhere.toml")
    assert done.returncode == 2
    (line,) = done.stderr.splitlines()
    assert line.startswith(f"{tmp_path / 'nowhere.toml'}: no such file; give the path of a region.toml")


@pytest.mark.parametrize("arguments", [(), ("dig",), ("run",), ("check", "a", "b"), ("run", "region.toml", "--fast")])
def test_a_call_that_is_wrong_exits_2(arguments):
    done = geoves(*arguments)
    assert done.returncode == 2
    assert done.stderr.startswith("usage: geoves")


def test_new_writes_a_folder_and_refuses_one_in_use(tmp_path):
    county = tmp_path / "county"
    done = geoves("new", county)
    assert (done.returncode, done.stderr) == (0, "")
    assert "region.toml" in done.stdout
    done = geoves("new", county)
    assert done.returncode == 2
    assert f"{county / 'region.toml'}: stands there already; give another folder" in done.stderr.splitlines()


def test_check_runs_on_the_folder_itself(county):
    assert geoves("check", "region.toml", cwd=county).returncode == 0


def test_version_and_help():
    assert geoves("--version").stdout.startswith("geoves ")
    done = geoves("--help")
    assert done.returncode == 0
    assert "reconnaissance" in done.stdout


def test_help_imports_nothing_heavy():
    code = "import sys, geoves.cli.main; print(*{'numpy', 'pyproj', 'rich', 'attrs'} & set(sys.modules))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == ""


@pytest.mark.parametrize(
    ("error", "status", "said"),
    [
        (InputError(["first", "second"]), 2, "first\nsecond\n"),
        (FormatError("not a raster"), 2, "not a raster\n"),
        (EngineError("no model fits"), 1, "no model fits\n"),
        (DeliveryError("disk full"), 1, "disk full\n"),
        (KeyboardInterrupt(), 1, "Stopped before the end; the job was not done.\n"),
        (MemoryError(), 1, "The machine's memory is not enough; use a larger cell_size.\n"),
    ],
)
def test_errors_become_lines_and_exit_statuses(monkeypatch, capsys, error, status, said):
    def fail(_):
        raise error

    monkeypatch.setattr(command, "_call", fail)
    assert command.main(["check", "region.toml"]) == status
    assert capsys.readouterr() == ("", said)


def test_an_error_of_its_own_is_kept_in_a_file(monkeypatch, capsys, tmp_path):
    def fail(_):
        raise ZeroDivisionError("seven by nothing")

    monkeypatch.setattr(command, "_call", fail)
    monkeypatch.setattr("tempfile.tempdir", str(tmp_path))
    assert command.main(["check", "region.toml"]) == 1
    (log,) = tmp_path.iterdir()
    said = capsys.readouterr().err
    assert str(log) in said
    assert "Traceback" not in said
    assert "seven by nothing" in log.read_text(encoding="utf-8")


def test_summary_is_printed_unless_quiet(monkeypatch, capsys):
    import geoves.project.check

    monkeypatch.setattr(geoves.project.check, "check", lambda path, _: Summary((f"{path} is fine", "bye")))
    assert command.main(["check", "region.toml"]) == 0
    assert capsys.readouterr().out == "region.toml is fine\nbye\n"
    assert command.main(["check", "region.toml", "--quiet"]) == 0
    assert capsys.readouterr().out == ""


def test_progress_in_plain_lines(capsys):
    with LineProgress().step("Inverting", 3) as step:
        time.sleep(0.11)
        step.advance()
        step.advance(2)
    assert capsys.readouterr().out == "Inverting, 3 of 3: 0.1 s\n"


def test_progress_on_a_terminal(monkeypatch, capsys):
    monkeypatch.setattr("sys.stdout.isatty", lambda: True, raising=False)
    with choose_progress(quiet=False).step("Inverting [a]", 2) as step:
        step.advance(2)
    shown = capsys.readouterr().out
    assert "Inverting [a]" in shown
    assert "2/2" in shown
    assert isinstance(choose_progress(quiet=True), SilentProgress)


def test_faulty_options_of_steps_are_told_with_the_faults_of_tables(county):
    region = county / "region.toml"
    region.write_text(region.read_text(encoding="utf-8") + "[curves]\nsteepest = 1\n", encoding="utf-8")
    readings = county / "readings.csv"
    readings.write_text(readings.read_text(encoding="utf-8").replace(",3,0.5,", ",3,5,"), encoding="utf-8")
    done = geoves("check", region)
    assert done.returncode == 2
    first, second = done.stderr.splitlines()
    assert first.startswith("region.toml")
    assert "steepest" in first
    assert second.startswith("readings.csv, row 2, mn2")


def test_broken_files_leave_one_line_each_and_nothing_of_libraries(county):
    region = county / "region.toml"
    text = region.read_text(encoding="utf-8").replace("# ground =", "ground =").replace("# boundary =", "boundary =")
    region.write_text(text.replace("permits.csv", "permits.geojson"), encoding="utf-8")
    for name in ("ground.tif", "boundary.gpkg", "permits.geojson"):
        (county / name).write_bytes(b"\x00\x01" * 50)
    done = geoves("check", region)
    assert done.returncode == 2
    assert [line.split(":")[0] for line in done.stderr.splitlines()] == [
        "permits.geojson",
        "ground.tif",
        "boundary.gpkg",
    ]


def test_check_of_plain_tables_brings_in_nothing_that_it_does_not_need(county):
    heavy = (
        "{'geopandas', 'folium', 'matplotlib', 'pykrige', 'gstools', 'contourpy', 'geoves.inversion', 'geoves.layers'}"
    )
    code = (
        "import sys; from pathlib import Path; from geoves.project.check import check; "
        "from geoves.project.progress import SilentProgress; "
        f"check(Path(sys.argv[1]), SilentProgress()); print(*({heavy} & set(sys.modules)))"
    )
    call = [sys.executable, "-c", code, str(county / "region.toml")]
    done = subprocess.run(call, capture_output=True, text=True, check=True)
    assert done.stdout.strip() == ""
