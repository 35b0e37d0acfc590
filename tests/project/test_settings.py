"""Options of region.toml: every key and every kind of value is checked, all at once."""

import attrs
import pytest

from geoves.errors import InputError
from geoves.project import run as job
from geoves.project.inputs import read_inputs
from geoves.project.progress import SilentProgress
from geoves.project.settings import Settings, read_settings
from tests.project.small_county import write_small_county

FAULTY = """
[surfaces]
model = 3
reach = "far"
fewest = 2.5
reech = 100.0

[inversion]
draws = true
random_seed = 5

[layers]
contours = [10]

[curves]
nonsense = 1
"""


def test_nothing_typed_gives_the_steps_own_defaults(small_region_settings):
    read = read_settings(small_region_settings({}))
    for field in attrs.fields(Settings):
        kind = type(getattr(read, field.name))
        expected = attrs.evolve(kind(), random_seed=7) if "random_seed" in attrs.fields_dict(kind) else kind()
        assert getattr(read, field.name) == expected


def test_typed_options_reach_their_step_and_whole_numbers_serve_as_numbers(small_region_settings):
    read = read_settings(small_region_settings({"surfaces": {"reach": 900, "model": "spherical"}, "layers": {"contours": 6}}))  # fmt: skip  # noqa: E501
    assert (read.surfaces.reach, read.surfaces.model, read.layers.contours) == (900.0, "spherical", 6)
    assert isinstance(read.surfaces.reach, float)
    assert read.inversion.random_seed == read.interpretation.random_seed == 7


@pytest.fixture
def small_region_settings(small_results):
    return lambda settings: attrs.evolve(small_results.region, settings=settings)


@pytest.mark.parametrize(
    ("table", "key", "value", "words"),
    [
        ("surfaces", "reach", "far", "expected a number, such as 0.0"),
        ("surfaces", "reach", True, "expected a number"),
        ("surfaces", "fewest", 2.5, "expected a whole number, such as 5"),
        ("surfaces", "fewest", False, "expected a whole number"),
        ("surfaces", "thicker_than", 5.0, "expected a list of numbers, such as [5.0]"),
        ("surfaces", "thicker_than", [5.0, "ten"], "expected a list of numbers, such as [5.0]"),
        ("surfaces", "thicker_than", [5.0, -1.0], "expected > 0"),
        ("surfaces", "model", 3, "expected a word in quotes, such as 'matern32'"),
        ("inversion", "draws", "many", "expected a whole number, such as "),
        ("interpretation", "presence", [0.5], "expected a number, such as 0.5"),
        ("inversion", "most_layer", 5, "not a setting of this table; expected one of block, "),
        ("interpretation", "random_seed", 5, "not a setting of this table"),
    ],
)
def test_a_fault_names_file_table_key_value_and_what_was_expected(small_region_settings, table, key, value, words):
    with pytest.raises(InputError) as raised:
        read_settings(small_region_settings({table: {key: value}}))
    (line,) = raised.value.lines
    assert line.startswith(f"region.toml, [{table}], {key}: {value!r}")
    assert words in line


def test_all_faults_of_the_file_and_of_the_tables_come_at_once(tmp_path):
    region = write_small_county(tmp_path / "county", extra=FAULTY)
    readings = region.parent / "readings.csv"
    lines = readings.read_text(encoding="utf-8").splitlines()
    lines[3] = lines[3].replace(lines[3].split(",")[1], "-1", 1)
    readings.write_text("\n".join(lines), encoding="utf-8")
    expected = ["model", "reach", "fewest", "reech", "draws", "random_seed", "contours", "nonsense", "ab2"]
    for read in (read_inputs, lambda path: job.compute(path, SilentProgress())):
        with pytest.raises(InputError) as raised:
            read(region)
        said = raised.value.lines
        assert len(said) == len(expected)
        for word in expected[:-1]:
            assert sum(f", {word}: " in line for line in said) == 1, word
        assert any(line.startswith("readings.csv, row 4, ab2") for line in said)


def test_a_faulty_job_writes_nothing(tmp_path):
    region = write_small_county(tmp_path / "county", extra=FAULTY)
    before = sorted(path.name for path in region.parent.iterdir())
    with pytest.raises(InputError):
        job.run(region)
    assert sorted(path.name for path in region.parent.iterdir()) == before


@pytest.mark.parametrize(
    ("table", "key", "value", "expected"),
    [
        ("surfaces", "model", "bogus", "one of ('matern32'"),
        ("surfaces", "block", 0, ">= 1"),
        ("surfaces", "reach", -5.0, ">= 0"),
        ("inversion", "most_layers", 1, ">= 2"),
        ("inversion", "least_layers", 7, "above most_layers"),
        ("interpretation", "presence", 1.0, "< 1"),
        ("layers", "likely", 2.0, "< 1"),
    ],
)
def test_a_value_out_of_its_limits_is_a_fault_in_words(small_region_settings, table, key, value, expected):
    with pytest.raises(InputError) as caught:
        read_settings(small_region_settings({table: {key: value}}))
    (line,) = caught.value.lines
    assert table in line
    assert expected in line


def test_a_variogram_can_be_stated_in_part(small_region_settings):
    stated = {"basal_depth": {"length": 4000, "ratio": 0.5, "azimuth": 30.0}, "cover": {"model": "spherical"}}
    read = read_settings(small_region_settings({"surfaces": {"variogram": stated}})).surfaces.variogram
    assert read.basal_depth.stated == (None, None, 4000.0, 30.0, 0.5)
    assert read.cover.model == "spherical"
    assert read.cover.stated == read.deep_gravel.stated == (None,) * 5


@pytest.mark.parametrize(
    ("stated", "words"),
    [
        ({"rock": {}}, r"\[surfaces.variogram\], rock: .* expected one of basal_depth, cover, deep_gravel"),
        ({"cover": 3.0}, r"\[surfaces.variogram\], cover: 3.0; expected a table, such as model, length"),
        ({"cover": {"lenght": 3.0}}, r"\[surfaces.variogram.cover\], lenght: .* expected one of azimuth, length"),
        ({"cover": {"length": 0}}, r"\[surfaces.variogram.cover\], length: 0; expected > 0"),
        ({"cover": {"ratio": 1.5, "azimuth": 3.0}}, r"ratio: 1.5; expected > 0 and <= 1"),
        ({"cover": {"azimuth": 40.0}}, r"\[surfaces.variogram.cover\]; expected stated with a ratio beside"),
        ({"cover": {"ratio": 0.4}}, r"expected stated with an azimuth beside its ratio"),
        ({"cover": {"model": "cubic"}}, r"\[surfaces.variogram.cover\], model: 'cubic'; expected one of"),
    ],
)
def test_what_cannot_be_stated_is_a_fault(small_region_settings, stated, words):
    with pytest.raises(InputError, match=words):
        read_settings(small_region_settings({"surfaces": {"variogram": stated}}))
