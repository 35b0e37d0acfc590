"""Files in: region.toml, tables, rasters and vectors become things of the domain; units and CRS are resolved here."""

from geoves.reading.faults import FaultyInputError
from geoves.reading.inputs import look_at_inputs, read_region, read_survey
from geoves.reading.sources import fingerprint_files

__all__ = ["FaultyInputError", "fingerprint_files", "look_at_inputs", "read_region", "read_survey"]
