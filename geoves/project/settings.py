"""Tables of region.toml for the steps, read into the option classes that own their keys."""

from collections.abc import Mapping
from typing import Any, get_type_hints

import attrs

from geoves.checking import CurveOptions
from geoves.domain.region import Region
from geoves.errors import InputError
from geoves.geology import GeologyOptions
from geoves.interpretation import InterpretationOptions
from geoves.inversion import InversionOptions
from geoves.layers import LayerOptions
from geoves.planning import PlanOptions
from geoves.surfaces import SurfaceOptions


@attrs.frozen
class Settings:
    """The options of every step."""

    curves: CurveOptions
    inversion: InversionOptions
    interpretation: InterpretationOptions
    geology: GeologyOptions
    surfaces: SurfaceOptions
    layers: LayerOptions
    plan: PlanOptions


def read_settings(region: Region) -> Settings:
    """Options from the tables [curves], [inversion], [interpretation], [geology], [surfaces], [layers] and [plan].

    Raises InputError with every unknown key and every value of the wrong kind.
    """
    faults: list[str] = []
    seed = {"random_seed": region.random_seed}
    values = {
        field.name: _read_options(
            (region.path.name, field.name),
            region.settings.get(field.name, {}),
            get_type_hints(Settings)[field.name],
            seed,
            faults,
        )
        for field in attrs.fields(Settings)
    }
    if faults:
        raise InputError(faults)
    return Settings(**values)


def _read_options(
    place: tuple[str, str], given: Mapping[str, Any], kind: type, seed: Mapping[str, int], faults: list[str]
) -> Any:
    """Options of one class from what a table of a file, the `place`, gave; a class of options inside is a table too."""
    file, table = place
    fields = {field.name: field for field in attrs.fields(kind)}
    options = {key: value for key, value in seed.items() if key in fields}
    for key, value in given.items():
        where = f"{file}, [{table}], {key}: {value!r}"
        if key not in fields or key in seed:
            known = ", ".join(sorted(set(fields) - set(seed)))
            faults.append(f"{where} is not a setting of this table; expected one of {known}")
            continue
        wanted = type(fields[key].default)
        if attrs.has(wanted) and isinstance(value, Mapping):
            value = _read_options((file, f"{table}.{key}"), value, wanted, {}, faults)  # noqa: PLW2901 - as its class
            where = f"{file}, [{table}.{key}]"
        if not _fits(value, wanted):
            faults.append(f"{where}; expected {_KINDS.get(wanted, 'a table')}, such as {_show(fields[key].default)}")
            continue
        try:
            options[key] = value if attrs.has(wanted) else wanted(value)
            kind(**{key: options[key]})
        except ValueError as error:
            faults.append(f"{where}; {_say_limit(error, key)}")
            del options[key]
    try:
        return kind(**options)
    except ValueError as error:
        faults.append(f"{file}, [{table}]: {error}")
        return kind()


def _fits(value: Any, wanted: type) -> bool:
    """Whether a typed value is of the kind that an option holds: whole numbers serve as numbers, lists hold numbers."""
    if wanted is tuple:
        return isinstance(value, list) and all(_fits(one, float) for one in value)
    fits = isinstance(value, wanted) or (wanted is float and isinstance(value, int))
    return fits and isinstance(value, bool) is (wanted is bool)


def _show(default: Any) -> str:
    """A default as region.toml would have it, or nearly so."""
    if attrs.has(type(default)):
        return ", ".join(field.name for field in attrs.fields(type(default)))
    return repr(list(default) or [5.0]) if isinstance(default, tuple) else repr(default)


def _say_limit(error: ValueError, key: str) -> str:
    """What a validator expected, from its message: "'block' must be >= 1: 0"."""
    said = str(error.args[0]).replace(f"'{key}' must be in", "expected one of").replace(f"'{key}' must be", "expected")
    return said.split(" (got")[0].rsplit(":", 1)[0]


_KINDS = {
    int: "a whole number",
    float: "a number",
    str: "a word in quotes",
    bool: "true or false",
    tuple: "a list of numbers",
}
