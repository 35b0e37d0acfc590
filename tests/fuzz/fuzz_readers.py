"""Fuzzes one reader: `python tests/fuzz/fuzz_readers.py FILE [CORPUS] [-max_total_time=60 …]`, with atheris.

FILE is one of the region folder's files (readings.csv, region.toml, readings.xlsx, permits.geojson, boundary.gpkg,
ground.tif …); its bytes are made up, beside clean other files. Whatever they are, reading ends with faults in words or
without any: any other error, and any input that takes more than 2 GB or 20 s, is a finding.
What is found becomes a test in tests/reading/test_hostile_files.py.
"""

import logging
import sys
import tempfile
import warnings
from pathlib import Path

import atheris

with atheris.instrument_imports(include=["geoves.reading"]):
    from geoves.errors import FormatError, InputError
    from geoves.reading import read_region, read_survey

from tests.reading.region_folder import FILES, write_clean_folder


def main(file, arguments):
    """Fuzz until libFuzzer's own limits."""
    logging.disable()
    warnings.simplefilter("ignore")
    folder = Path(tempfile.mkdtemp(prefix="fuzz-"))
    write_clean_folder(folder, file)

    def read(content):
        (folder / file).write_bytes(content)
        try:
            read_survey(read_region(folder / "region.toml"))
        except (InputError, FormatError):
            return

    atheris.Setup([sys.argv[0], *arguments, "-rss_limit_mb=2048", "-timeout=20"], read)
    atheris.Fuzz()


if __name__ == "__main__":
    if len(sys.argv) < 2 or sys.argv[1] not in FILES:
        sys.exit(f"usage: fuzz_readers.py FILE [CORPUS] [libFuzzer's options]; FILE is one of {', '.join(FILES)}")
    main(sys.argv[1], sys.argv[2:])
