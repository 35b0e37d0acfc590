"""Where each input lies: as region.toml names it, and as the file system does."""

import hashlib
from pathlib import Path

import attrs

from geoves.domain.region import METRES, Region

# The inputs of region.toml; soundings and readings are required.
INPUTS = ("soundings", "readings", "wells", "well_logs", "permits", "ground", "boundary", "picks")
REQUIRED_INPUTS = ("soundings", "readings")
WITH_LENGTHS = tuple(name for name in INPUTS if name != "boundary")
# A file of these kinds holds several tables, and `#` names one of them.
_MANY_TABLES = (".xlsx", ".xlsm", ".gpkg")
# What stands beside a shapefile and belongs to it.
_BESIDE_SHAPEFILE = (".dbf", ".shx", ".prj", ".cpg")


@attrs.frozen
class Source:
    """One input: as region.toml names it, its file, the sheet or layer in it, the metres in its length unit."""

    name: str
    typed: str
    path: Path
    part: str | None
    metres: float

    @property
    def suffix(self) -> str:
        return self.path.suffix.lower()


def split_part(typed: str) -> tuple[str, str | None]:
    """The file and the sheet or layer in it.

    >>> split_part("field.xlsx#readings"), split_part("site#2.csv")
    (('field.xlsx', 'readings'), ('site#2.csv', None))
    """
    file, mark, part = typed.rpartition("#")
    if mark and Path(file).suffix.lower() in _MANY_TABLES:
        return file, part
    return typed, None


def find_source(region: Region, name: str) -> Source | None:
    """The input of that name, None where region.toml names none or its file was not found."""
    if name not in region.files:
        return None
    typed = region.typed_inputs.get(name, region.files[name].name)
    unit = region.input_length_units.get(name, region.length_unit)
    return Source(name, typed, region.files[name], split_part(typed)[1], METRES[unit])


def fingerprint_files(region: Region) -> dict[str, str]:
    """SHA-256 of region.toml and of each input file, by the name that region.toml gives it."""
    files = {region.path.name: region.path}
    for name, path in region.files.items():
        typed = split_part(region.typed_inputs.get(name, path.name))[0]
        files[typed] = path
        if path.suffix.lower() == ".shp":
            beside = (path.with_suffix(suffix) for suffix in _BESIDE_SHAPEFILE)
            files |= {str(Path(typed).with_suffix(one.suffix)): one for one in beside if one.is_file()}
    return {typed: _sha256(path) for typed, path in files.items()}


def _sha256(path: Path) -> str:
    with path.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()
