"""Bytes changed at random in a file of each format: faults in words, or none; never another error.

tests/fuzz/fuzz_readers.py does the same with a fuzzer that is led by coverage.
"""

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from geoves.errors import InputError
from geoves.reading import read_region, read_survey
from tests.reading.region_folder import FILES, write_clean_folder

CHANGES = st.lists(
    st.tuples(st.floats(0, 1, exclude_max=True), st.integers(0, 12), st.binary(max_size=12)), min_size=1, max_size=6
)


@pytest.mark.parametrize("file", FILES)
@settings(max_examples=12, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(changes=CHANGES)
def test_a_damaged_file_raises_nothing_but_input_errors(tmp_path_factory, file, changes):
    folder = tmp_path_factory.mktemp("fuzz")
    raw = bytearray(write_clean_folder(folder, file))
    for place, dropped, put in changes:
        at = int(place * len(raw))
        raw[at : at + dropped] = put
    (folder / file).write_bytes(raw)
    lines = ("nothing is wrong",)
    try:
        read_survey(read_region(folder / "region.toml"))
    except InputError as error:
        lines = error.lines
    assert lines
    assert all(line.isprintable() for line in lines)
