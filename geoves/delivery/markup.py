"""HTML and SVG put together so that no text from a table can become markup: every text is escaped here."""

import math
from collections.abc import Iterable, Mapping
from html import escape

from geoves.domain.region import METRES, LengthUnit


class Markup(str):
    """Text that is markup already. Only `element` and `joined` make it, and files of our own."""

    __slots__ = ()


Child = Markup | str | float | int


def text(value: object) -> Markup:
    """`value` as text that a browser shows literally: markup characters escaped, control characters dropped.

    >>> text("<b>{{7*7}}")
    '&lt;b&gt;{{7*7}}'
    """
    if isinstance(value, Markup):
        return value
    shown = "".join(letter for letter in str(value) if letter >= " " or letter in "\n\t")
    return Markup(escape(shown, quote=True))


def joined(parts: Iterable[Child], between: str = "") -> Markup:
    return Markup(between.join(text(part) for part in parts))


def element(tag: str, attributes: Mapping[str, object], *children: Child) -> Markup:
    """One element; attributes that are None are left out.

    >>> element("p", {"class": "note", "id": None}, "a < b")
    '<p class="note">a &lt; b</p>'
    """
    written = "".join(f' {name}="{text(value)}"' for name, value in attributes.items() if value is not None)
    if not children:
        return Markup(f"<{tag}{written}></{tag}>")
    return Markup(f"<{tag}{written}>{joined(children)}</{tag}>")


def place_name(name: str) -> Markup:
    """A name from a table, kept from turning the direction of the text around it."""
    return element("bdi", {}, name)


def table(headings: Iterable[Child], rows: Iterable[Iterable[Child]], caption: str) -> Markup:
    """A table that scrolls within itself on a narrow screen, and by keyboard."""
    head = element("tr", {}, *(element("th", {"scope": "col"}, heading) for heading in headings))
    body = joined(element("tr", {}, *(element("td", {}, cell) for cell in row)) for row in rows)
    inner = element(
        "table", {}, element("caption", {}, caption), element("thead", {}, head), element("tbody", {}, body)
    )
    return element("div", {"class": "scroll", "tabindex": "0", "role": "region", "aria-label": caption}, inner)


def format_length(metres: float, unit: LengthUnit, decimals: int = 0) -> str:
    """A length of so many metres in `unit`, with its unit; an en dash where it is not known.

    >>> format_length(30.48, "ft")
    '100 ft'
    """
    if math.isnan(metres):
        return "–"
    return f"{metres / METRES[unit]:,.{decimals}f} {unit_label(unit)}"


def unit_label(unit: LengthUnit) -> str:
    """As it is printed beside numbers: the two feet differ by 2 parts in a million, but both are named."""
    return {"m": "m", "ft": "ft", "us-ft": "US ft"}[unit]
