"""How units look on the pages: a colour and a pattern by role, so that colour never speaks alone."""

from collections.abc import Mapping
from types import MappingProxyType

from geoves.delivery.markup import Markup, element, joined
from geoves.domain.units import Role, Template

# Okabe and Ito (2008), Color Universal Design: told apart by readers with any common colour vision.
ROLE_COLOURS: Mapping[Role, str] = MappingProxyType(
    {
        Role.COVER: "#F0E442",
        Role.SHALLOW_AQUIFER: "#56B4E9",
        Role.CONFINING: "#CC79A7",
        Role.DEEP_AQUIFER: "#0072B2",
        Role.BEDROCK: "#D55E00",
    }
)

ROLE_WORDS: Mapping[Role, str] = MappingProxyType(
    {
        Role.COVER: "cover",
        Role.SHALLOW_AQUIFER: "shallow aquifer",
        Role.CONFINING: "confining bed",
        Role.DEEP_AQUIFER: "deep aquifer",
        Role.BEDROCK: "bedrock",
    }
)

# Ornament of each role, drawn over its colour in a tile of 10 x 10 pixels.
_ORNAMENTS: Mapping[Role, str] = MappingProxyType(
    {
        Role.COVER: "M2 2h1M7 7h1",
        Role.SHALLOW_AQUIFER: "M2 2h2M7 2h2M4.5 7h2M9.5 7h.5M0 7h1.5",
        Role.CONFINING: "M0 3h6M5 8h5",
        Role.DEEP_AQUIFER: "M1 3a2 2 0 1 0 4 0a2 2 0 1 0 -4 0M6 8a1.5 1.5 0 1 0 3 0a1.5 1.5 0 1 0 -3 0",
        Role.BEDROCK: "M0 10L10 0M-2 2L2 -2M8 12L12 8",
    }
)


def unit_colours(template: Template) -> dict[str, str]:
    """The colour of each unit's code: its own, else its role's, paler for each further unit of a role."""
    colours: dict[str, str] = {}
    seen: dict[Role, int] = {}
    for unit in template.units:
        rank = seen.get(unit.role, 0)
        seen[unit.role] = rank + 1
        colours[unit.code] = unit.colour or paler(ROLE_COLOURS[unit.role], 0.35 * rank)
    return colours


def paler(colour: str, share: float) -> str:
    """A colour mixed with white.

    >>> paler("#000000", 0.5)
    '#808080'
    """
    channels = (int(colour[i : i + 2], 16) for i in (1, 3, 5))
    return "#" + "".join(f"{round(c + (255 - c) * min(share, 0.8)):02X}" for c in channels)


def pattern_definitions(template: Template) -> Markup:
    """A hidden drawing that defines each unit's fill: `url(#unit-N)`, N its place in the template."""
    colours = unit_colours(template)
    patterns = [
        element(
            "pattern",
            {"id": f"unit-{index}", "width": 10, "height": 10, "patternUnits": "userSpaceOnUse"},
            element("rect", {"width": 10, "height": 10, "fill": colours[unit.code]}),
            element("path", {"d": _ORNAMENTS[unit.role], "fill": "none", "stroke": "#000", "stroke-opacity": "0.45"}),
        )
        for index, unit in enumerate(template.units)
    ]
    hidden = {"width": 0, "height": 0, "class": "definitions", "aria-hidden": "true"}
    return element("svg", hidden, element("defs", {}, joined(patterns)))


def unit_key(template: Template) -> Markup:
    """The key of units: swatch, name, role and resistivity range."""
    items = [
        element(
            "li",
            {},
            element(
                "svg",
                {"width": 30, "height": 16, "aria-hidden": "true"},
                element("rect", {"width": 30, "height": 16, "fill": f"url(#unit-{index})"}),
            ),
            " ",
            element("bdi", {}, unit.name),
            f" ({ROLE_WORDS[unit.role]}, {unit.resistivity_p05:g} to {unit.resistivity_p95:g} Ω m)",
        )
        for index, unit in enumerate(template.units)
    ]
    return element("ul", {"class": "key"}, *items)
