"""One sounding's strip as a figure that a notebook shows."""

from importlib.resources import files

import attrs

from geoves.delivery.markup import Markup, element, joined
from geoves.delivery.report_places import StripJob, draw_strip
from geoves.delivery.unit_look import pattern_definitions, unit_key
from geoves.domain.earth import Inverted
from geoves.domain.region import LengthUnit
from geoves.domain.survey import Sounding
from geoves.domain.tops import UnitColumn
from geoves.domain.units import Template


@attrs.frozen
class Drawing:
    """HTML that a notebook shows by itself; `html` to write it to a file."""

    html: str = attrs.field(repr=False)

    def _repr_html_(self) -> str:
        return self.html


def draw_sounding(
    sounding: Sounding, inverted: Inverted, column: UnitColumn, template: Template, unit: LengthUnit = "m"
) -> Drawing:
    """The curve, the models that fit and the units they may be, side by side, as in the report; lengths in `unit`."""
    style = Markup((files("geoves.delivery") / "pages" / "report.css").read_text(encoding="utf-8"))
    strip = Markup(draw_strip(StripJob(0, sounding, inverted, column, None, unit), template=template))
    # A frame of its own: the strip's style must not reach the notebook's.
    body = joined([element("style", {}, style), pattern_definitions(template), unit_key(template), strip])
    page = element("html", {}, element("head", {}, Markup('<meta charset="utf-8">')), element("body", {}, body))
    frame = {"srcdoc": str(page), "style": "width:100%;height:640px;border:0", "title": f"Sounding {sounding.name}"}
    return Drawing(element("iframe", frame, ""))
