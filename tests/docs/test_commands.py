"""What the pages tell a reader to type, and what they say the program answers."""

import re
import shlex
import subprocess
import sys
from pathlib import Path

import openpyxl
import pytest

from geoves.cli.main import _build_parser
from geoves.reading.starter_folder import write_starter

ROOT = Path(__file__).resolve().parents[2]
FAULT = "readings.csv, row 14, ab2 (S007): '0'; expected a spacing above 0; correct it, or set use to 0"


def geoves(*arguments, cwd):
    call = [sys.executable, "-m", "geoves.cli.main", *map(str, arguments)]
    return subprocess.run(call, capture_output=True, text=True, check=False, cwd=cwd, timeout=120)


def shell_lines(path):
    """Lines of the blocks of shell of a page, without remarks."""
    blocks = re.findall(r"```sh\n(.*?)```", path.read_text("utf-8"), re.DOTALL)
    return [line.partition("#")[0].strip() for block in blocks for line in block.splitlines()]


def told(command):
    """Every call of geoves that the pages name for a shell, as arguments."""
    pages = [ROOT / "README.md", ROOT / "DEVELOPERS.md", *ROOT.glob("docs/**/*.md")]
    lines = {line for page in pages for line in shell_lines(page) if line.startswith(".venv/bin/geoves ")}
    return sorted(line for line in lines if line.split()[1] == command)


def test_make_targets_exist():
    targets = set(re.findall(r"^([\w-]+):", (ROOT / "Makefile").read_text("utf-8"), re.MULTILINE))
    pages = [ROOT / "README.md", ROOT / "DEVELOPERS.md", *ROOT.glob("docs/**/*.md")]
    named = {
        name for page in pages for name in re.findall(r"(?:`|^)make ([\w-]+)", page.read_text("utf-8"), re.MULTILINE)
    }
    assert {"demo", "test", "check", "benchmark", "docs-figures"} <= named <= targets


def test_new_and_check_do_what_the_readme_says(tmp_path):
    for line in (*told("new"), *told("check")):
        arguments = shlex.split(line)[1:]
        where = ROOT if "demo_region/region.toml" in arguments else tmp_path
        if where is ROOT:
            continue  # the demo's own check is below: it would write into the repository
        done = geoves(*arguments, cwd=tmp_path)
        assert (done.returncode, done.stderr) == (0, ""), line
    assert (tmp_path / "county" / "region.toml").is_file()
    assert (tmp_path / "county" / "check" / "check.csv").is_file()


def test_every_call_that_the_pages_name_can_be_parsed():
    lines = [line for command in ("new", "check", "run") for line in told(command)]
    assert len(lines) >= 4
    for line in lines:
        _build_parser().parse_args(shlex.split(line)[1:])


def test_synopsis_is_that_of_the_program():
    text = (ROOT / "docs/reference/command.md").read_text("utf-8")
    synopsis = re.search(r"```\n(.*?)```", text, re.DOTALL)[1].splitlines()
    options = {option for line in synopsis for option in re.findall(r"--[\w-]+", line)}
    helps = [
        geoves("--help", cwd=ROOT),
        *(geoves(name, "--help", cwd=ROOT) for name in ("run", "check", "plan", "new")),
    ]
    assert all(done.returncode == 0 for done in helps)
    assert options == {option for done in helps for option in re.findall(r"--[\w-]+", done.stdout)}


@pytest.fixture
def county(tmp_path):
    write_starter(tmp_path / "county")
    return tmp_path / "county"


def check_with(county, changes):
    """What `geoves check` says of the county after replacements in its files, by file."""
    for name, (old, new) in changes.items():
        path = county / name
        text = path.read_text("utf-8")
        assert old in text
        path.write_text(text.replace(old, new), encoding="utf-8")
    return geoves("check", county / "region.toml", cwd=county)


def test_the_fault_of_the_pages_is_said_so(county):
    for page in ("docs/reference/command.md", "docs/how-to/own-data.md"):
        assert FAULT in (ROOT / page).read_text("utf-8")
    (county / "soundings.csv").write_text("sounding,x,y,ground_elevation\nS007,620000,4900000,312\n", encoding="utf-8")
    rows = "".join(f"S007,{spacing},0.5,40\n" for spacing in range(1, 13))
    text = f"sounding,ab2,mn2,apparent_resistivity\n{rows}S007,0,0.5,40\n"
    (county / "readings.csv").write_text(text, encoding="utf-8")
    done = geoves("check", county / "region.toml", cwd=county)
    assert (done.returncode, done.stderr.splitlines()) == (2, [FAULT])


@pytest.mark.parametrize(
    ("said", "changes"),
    [
        ("no such column; expected", {"readings.csv": ("mn2", "potential")}),
        ("expected MN/2 below AB/2", {"readings.csv": ("3,0.5", "3,5")}),
        ("the table of soundings has no such name", {"readings.csv": ("EXAMPLE-1", "EXAMPLE-O")}),
        ("stands in row", {"permits.csv": ("EXAMPLE-P1,", "EXAMPLE-P1,620100,4900000,,,\nEXAMPLE-P1,")}),
        ("the interval overlaps that of row", {"well_logs.csv": ("EXAMPLE-W1,", "EXAMPLE-W1,0,9,clay,\nEXAMPLE-W1,")}),
        ("not a number", {"readings.csv": ("48.2", "<48.2")}),
        ("is not projected", {"region.toml": ("EPSG:26914", "EPSG:4326")}),
        ("is not a setting of this table", {"region.toml": ("[inputs]", "[surfaces]\nreech = 3.0\n[inputs]")}),
    ],
)
def test_faults_that_are_met_often_are_said_so(county, said, changes):
    assert said in (ROOT / "docs/how-to/own-data.md").read_text("utf-8")
    done = check_with(county, changes)
    assert done.returncode == 2
    assert said in done.stderr


def test_files_that_are_met_often_are_refused_so(county):
    page = (ROOT / "docs/how-to/own-data.md").read_text("utf-8")
    (county / "permits.csv").write_bytes("permit,x,y,use\nP1,620200,4900100,Gehöft\n".encode("latin-1"))
    workbook = openpyxl.Workbook()
    workbook.create_sheet("second")
    workbook.save(county / "picks.xlsx")
    done = check_with(county, {"region.toml": ('"picks.csv"', '"picks.xlsx"')})
    assert done.returncode == 2
    for said in ("not text in UTF-8", "several sheets ("):
        assert said in page
        assert said in done.stderr


def test_the_demo_checks_without_faults(tmp_path):
    for path in (ROOT / "demo_region").iterdir():
        if path.suffix in (".csv", ".toml", ".tif", ".gpkg"):
            (tmp_path / path.name).write_bytes(path.read_bytes())
    done = geoves("check", "region.toml", cwd=tmp_path)
    assert (done.returncode, done.stderr) == (0, "")
    assert "154 soundings, 16 wells, 480 permits, 3 picks" in done.stdout


def test_the_notebook_runs_as_it_stands():
    blocks = re.findall(r"```python\n(.*?)```", (ROOT / "docs/how-to/notebook.md").read_text("utf-8"), re.DOTALL)
    *statements, drawing = blocks
    names = {}
    exec("\n".join(statements), names)  # noqa: S102 - the page's own code
    assert eval(drawing, names)._repr_html_().startswith("<iframe")  # noqa: S307
    column = names["column"]
    # The readings were computed for 3 m of 40 and 30 m of 18 on 150 ohm m, with 2 % noise and a shift of 3 %.
    assert column.bedrock_status == "seen"
    # One band in ten does not hold the truth, so the median is judged: within a quarter.
    assert 25.0 < column.basal_depth[1] < 41.0
