"""The reference pages against the program that they describe."""

import importlib.util
import re
import typing

import attrs
import pytest

from geoves.domain.region import METRES
from geoves.domain.survey import PickStatus
from geoves.domain.units import Role
from geoves.project.provenance import make_record
from geoves.project.settings import Settings, read_settings
from geoves.reading import region_file, sources, survey, template
from geoves.surfaces.stated import StatedVariogram, StatedVariograms


def section(text, heading, level="##"):
    """The text under a heading, up to the next of its level or above."""
    start = re.search(rf"^{level} {re.escape(heading)}(?!\w).*$", text, re.MULTILINE)
    assert start, f"no heading {heading!r}"
    end = re.search(rf"^#{{1,{len(level)}}} ", text[start.end() :], re.MULTILINE)
    return text[start.end() :][: end.start() if end else None]


def first_cells(text):
    """The code words in the first cell of each row of the tables."""
    return [
        word
        for line in text.splitlines()
        if line.startswith("| `")
        for word in re.findall(r"`(\w+)`", line.split("|")[1])
    ]


def shown(default):
    """A default as region.toml has it."""
    if isinstance(default, bool):
        return str(default).lower()
    if isinstance(default, tuple):
        return str(list(default))
    return f'"{default}"' if isinstance(default, str) else str(default)


@pytest.fixture(scope="module")
def tables(root):
    return (root / "docs/reference/tables.md").read_text("utf-8")


@pytest.fixture(scope="module")
def command(root):
    return (root / "docs/reference/command.md").read_text("utf-8")


@pytest.mark.parametrize("name", survey._TABLES)
def test_every_column_of_a_table_is_described(tables, name):
    columns, _ = survey._TABLES[name]
    described = first_cells(section(tables, name))
    assert sorted(described) == sorted(columns.known)


@pytest.mark.parametrize("name", survey._TABLES)
def test_required_columns_are_called_so(tables, name):
    columns, _ = survey._TABLES[name]
    rows = {
        line.split("|")[1].strip(" `"): line.split("|")[2].strip()
        for line in section(tables, name).splitlines()
        if line.startswith("| `")
    }
    called = {column for column, needed in rows.items() if needed in ("yes", "the column")}
    assert called == set(columns.required)


@pytest.mark.parametrize(
    ("heading", "keys"),
    [
        ("[region]", region_file._REGION_KEYS),
        ("[inputs]", sources.INPUTS),
        ("[delivery]", region_file._DELIVERY_KEYS),
        ("[[section]]", region_file._SECTION_KEYS),
        ("[[unit]]", template._KEYS),
    ],
)
def test_every_key_of_region_toml_is_described(tables, heading, keys):
    described = first_cells(section(tables, heading, "###"))
    assert sorted(described) == sorted(keys)


def test_choices_are_those_of_the_program(tables):
    words = [*METRES, *(role.value for role in Role)]
    assert [word for word in words if f'"{word}"' not in tables] == []
    picks = section(tables, "picks")
    assert [status for status in typing.get_args(PickStatus) if f"`{status}`" not in picks] == []
    units = section(tables, "[input_length_unit]", "###")
    assert [name for name in sources.WITH_LENGTHS if f"`{name}`" not in units] == []


@pytest.mark.parametrize("table", [field.name for field in attrs.fields(Settings)])
def test_settings_and_defaults_are_those_of_the_options(command, table):
    options = typing.get_type_hints(Settings)[table]
    assert described_defaults(section(command, f"[{table}]", "###")) == defaults(options)


def test_what_can_be_stated_of_a_variogram_is_described(command):
    text = section(command, "[surfaces.variogram.NAME]", "###")
    assert described_defaults(text) == defaults(StatedVariogram)
    assert [f.name for f in attrs.fields(StatedVariograms) if f"`{f.name}`" not in text] == []


def defaults(options):
    """Defaults as the page has them, without the seed and what has a table of its own."""
    fields = [f for f in attrs.fields(options) if f.name != "random_seed" and not attrs.has(type(f.default))]
    return {f.name: shown(f.default) for f in fields}


def described_defaults(text):
    """Key -> default of the rows of a table."""
    rows = [[cell.strip() for cell in line.split("|")] for line in text.splitlines() if line.startswith("| `")]
    return {row[1].strip("`"): row[2] for row in rows}


def test_the_record_of_a_run_is_described(root, small_results):
    settings = read_settings(attrs.evolve(small_results.region, settings={}))
    record = make_record(small_results.region, settings, {})
    text = section((root / "docs/reference/delivery.md").read_text("utf-8"), "run.json")
    assert [key for key in record if f"`{key}`" not in text] == []


@pytest.mark.parametrize("name", ["write_delivery", "write_checks"])
def test_page_is_written_from_what_the_program_says(root, name):
    path = root / f"docs/reference/{name}.py"
    spec = importlib.util.spec_from_file_location(name, path)
    script = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(script)
    page = script.PAGE.read_text("utf-8")
    assert script.fill_page(page) == page, f"run `python docs/reference/{name}.py`"
