"""The door: a region and its survey, or all faults at once."""

from collections.abc import Mapping
from pathlib import Path

import attrs

from geoves.domain.findings import Finding
from geoves.domain.grids import Grid
from geoves.domain.region import Region
from geoves.domain.survey import Survey
from geoves.reading.faults import raise_faults
from geoves.reading.region_file import parse_region
from geoves.reading.survey import collect_survey


def read_region(path: Path) -> Region:
    """What region.toml says, every key checked.

    Raises FaultyInputError (an InputError) with all its faults; those of the tables come with them where region.toml
    says enough to read the tables.
    """
    file = parse_region(path)
    if any(finding.severity == "fault" for finding in file.findings) and file.region is not None:
        raise_faults((*file.findings, *collect_survey(file.region).findings), file.region)
    raise_faults(file.findings)
    if file.region is None:
        raise AssertionError("a region without faults was not built")
    return file.region


@attrs.frozen
class InputsSeen:
    """All that the inputs gave, faults or not: in pieces where there are faults, None where nothing could be read."""

    region: Region | None
    survey: Survey | None
    grid: Grid | None
    findings: tuple[Finding, ...]
    rows: Mapping[tuple[str, str], int] = attrs.field(factory=dict)  # of each place, by its input and its name


def look_at_inputs(path: Path) -> InputsSeen:
    """Region and survey as far as they can be read, with every fault and doubt; nothing is raised."""
    file = parse_region(path)
    if file.region is None:
        return InputsSeen(None, None, None, file.findings)
    files = collect_survey(file.region)
    return InputsSeen(file.region, files.survey, files.grid, (*file.findings, *files.findings), files.rows)


def read_survey(region: Region) -> tuple[Survey, Grid]:
    """All inputs in the region's CRS and in SI units, with the doubts met, and the grid for the surfaces.

    Raises FaultyInputError (an InputError) with all faults of all inputs.
    """
    files = collect_survey(region)
    raise_faults(files.findings, region)
    if files.grid is None:
        raise AssertionError("a survey without faults has no grid")
    return files.survey, files.grid
