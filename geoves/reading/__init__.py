"""Files in: region.toml, tables, rasters and vectors become things of the domain; units and CRS are resolved here."""

from geoves.reading.faults import FaultyInputError
from geoves.reading.inputs import read_region, read_survey
from geoves.reading.sources import fingerprint_files

__all__ = ["FaultyInputError", "fingerprint_files", "read_region", "read_survey"]
