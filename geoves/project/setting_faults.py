"""What is wrong in region.toml beyond its own keys: the steps' options, and a template without rock."""

from geoves.checking import CurveOptions
from geoves.domain.findings import Finding
from geoves.domain.region import Region
from geoves.domain.units import Role
from geoves.errors import InputError


def find_setting_faults(region: Region) -> tuple[Finding, ...]:
    """Faults of the steps' options, and a template that ends above what is to be mapped."""
    lacking: tuple[Finding, ...] = ()
    if not region.template.with_role(Role.BEDROCK):
        expected = "no unit has the role bedrock; every column must end in one: add it as the last [[unit]]"
        lacking = (Finding("fault", region.path.name, 0, "unit", "", expected),)
    return (*lacking, *_find_option_faults(region))


def _find_option_faults(region: Region) -> tuple[Finding, ...]:
    if not region.settings:
        return ()
    from geoves.project.settings import read_settings  # noqa: PLC0415 - brings in every step, which a check needs not

    try:
        read_settings(region)
    except InputError as error:
        file = region.path.name
        return tuple(Finding("fault", file, 0, "", "", line.removeprefix(f"{file}, ")) for line in error.lines)
    return ()


def find_curve_options(region: Region) -> CurveOptions:
    """The options of the table [curves], without bringing in the other steps where there is no such table."""
    if "curves" not in region.settings:
        return CurveOptions()
    from geoves.project.settings import read_settings  # noqa: PLC0415 - as above

    return read_settings(region).curves
