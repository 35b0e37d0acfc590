"""Everything that a job is told, checked at once: region.toml, the steps' options, the tables."""

from pathlib import Path

import attrs

from geoves.domain.grids import Grid
from geoves.domain.region import Region
from geoves.domain.survey import Survey
from geoves.project.setting_faults import find_setting_faults
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
        more = () if error.region is None else find_setting_faults(error.region)
        raise FaultyInputError((*more, *error.findings), error.region) from None
    if faults := find_setting_faults(region):
        raise FaultyInputError((*faults, *survey.doubts), region)
    return Inputs(region, read_settings(region), survey, grid)
