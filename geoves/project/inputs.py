"""Everything that a job is told, checked at once: region.toml, the steps' options, the tables."""

from pathlib import Path

import attrs

from geoves.domain.findings import Finding
from geoves.domain.grids import Grid
from geoves.domain.region import Region
from geoves.domain.survey import Survey
from geoves.domain.units import Role
from geoves.errors import InputError
from geoves.project.settings import Settings, read_settings
from geoves.reading import FaultyInputError, read_region, read_survey


@attrs.frozen
class Inputs:
    """What a job begins with."""

    region: Region
    settings: Settings
    survey: Survey
    grid: Grid


def read_inputs(region_path: Path) -> Inputs:
    """The inputs of a job. Raises FaultyInputError (an InputError) with the faults of all of them."""
    try:
        region = read_region(region_path)
        survey, grid = read_survey(region)
    except FaultyInputError as error:
        more = () if error.region is None else _find_setting_faults(error.region)
        raise FaultyInputError((*more, *error.findings), error.region) from None
    if faults := _find_setting_faults(region):
        raise FaultyInputError((*faults, *survey.doubts), region)
    return Inputs(region, read_settings(region), survey, grid)


def _find_setting_faults(region: Region) -> tuple[Finding, ...]:
    """Faults of the steps' options, and a template that ends above what is to be mapped."""
    lacking: tuple[Finding, ...] = ()
    if not region.template.with_role(Role.BEDROCK):
        expected = "no unit has the role bedrock; every column must end in one: add it as the last [[unit]]"
        lacking = (Finding("fault", region.path.name, 0, "unit", "", expected),)
    return (*lacking, *_find_option_faults(region))


def _find_option_faults(region: Region) -> tuple[Finding, ...]:
    try:
        read_settings(region)
    except InputError as error:
        file = region.path.name
        return tuple(Finding("fault", file, 0, "", "", line.removeprefix(f"{file}, ")) for line in error.lines)
    return ()
