"""The resistivity template, from the [[unit]] tables of region.toml."""

import re
from collections.abc import Sequence

from geoves.domain.units import Role, Template, Unit
from geoves.reading.keys import Keys

_KEYS = ("code", "name", "role", "resistivity", "depth_to_top", "log_terms", "colour")


def read_template(tables: Sequence[Keys], metres: float) -> Template:
    """The template of the tables, lengths in them in units of `metres`; empty where one is faulty."""
    units = [unit for keys in tables if (unit := _read_unit(keys, metres)) is not None]
    _refuse_repeated_codes(tables)
    _refuse_units_below_bedrock(tables)
    return Template(tuple(units) if len(units) == len(tables) else ())


def _read_unit(keys: Keys, metres: float) -> Unit | None:
    before = len(keys.findings)
    keys.refuse_unknown(_KEYS)
    code = keys.string("code", required="a short name for the unit, such as 'deep_gravel'")
    role = keys.choice("role", [role.value for role in Role])
    resistivity = _read_range(keys, "resistivity", "two resistivities in ohm m, the lesser first, such as [38, 55]")
    if resistivity and resistivity[0] <= 0.0:
        keys.complain("resistivity", "expected resistivities above 0 ohm m")
    depth = None
    if "depth_to_top" in keys.values:
        depth = _read_range(keys, "depth_to_top", "two depths below the ground, the lesser first, such as [15, 90]")
        if depth and depth[0] < 0.0:
            keys.complain("depth_to_top", "expected depths of 0 or more, downwards from the ground")
    colour = keys.string("colour")
    if colour and not re.fullmatch(r"#[0-9A-Fa-f]{6}", colour):
        keys.complain("colour", "expected a colour such as '#c8a24a'")
    name = keys.string("name") or code
    terms = keys.strings("log_terms")
    if len(keys.findings) > before or resistivity is None:
        return None
    return Unit(
        code=code,
        name=name,
        role=Role(role),
        resistivity_p05=resistivity[0],
        resistivity_p95=resistivity[1],
        depth_to_top=(depth[0] * metres, depth[1] * metres) if depth else None,
        log_terms=terms,
        colour=colour or None,
    )


def _read_range(keys: Keys, key: str, words: str) -> tuple[float, float] | None:
    pair = keys.pair(key, words)
    if pair and pair[0] >= pair[1]:
        keys.complain(key, f"the range is upside down or empty; expected {words}")
        return None
    return pair


def _refuse_repeated_codes(tables: Sequence[Keys]) -> None:
    seen: set[str] = set()
    for keys in tables:
        code = keys.values.get("code")
        if isinstance(code, str):
            if code.strip() in seen:
                keys.complain("code", "another unit has this code; give each its own")
            seen.add(code.strip())


def _refuse_units_below_bedrock(tables: Sequence[Keys]) -> None:
    above_bedrock = True
    for keys in tables:
        bedrock = keys.values.get("role") == Role.BEDROCK.value
        if not above_bedrock and not bedrock:
            keys.complain("role", "the unit stands below bedrock; list the units from the top of the column downwards")
        above_bedrock = above_bedrock and not bedrock
