"""Depths as several voices give them, one row each on one depth axis: of a sounding's strip, and of wells left out."""

from collections.abc import Sequence

import attrs
import numpy as np

from geoves.delivery.joint_words import OwnSay
from geoves.delivery.markup import Markup, element, unit_label
from geoves.delivery.svg import Scale, drawing, label, line, rectangle, tick_text
from geoves.domain.arrays import FloatArray
from geoves.domain.fields import JointColumn
from geoves.domain.region import METRES, LengthUnit

WIDTH, LEFT, RIGHT, TOP = 700, 186, 686, 6
ROW, BAR, BELOW = 18, 10, 36  # pixels: a row, its bar, the axis under all rows
SILENT = np.full(3, np.nan)


@attrs.frozen
class DepthRow:
    """A row: a band with its median (3,) m, or open from a bound (m) downwards; a mark at another voice's depth.

    style : own, others or together    mark : own say of the same place, drawn over the band
    """

    label: str
    style: str
    band: FloatArray = SILENT
    bound: float = np.nan
    mark: OwnSay | None = None

    @property
    def deepest(self) -> float:
        """The deepest that this row shows (m), 0 where it shows nothing."""
        shown = [self.band[2], 1.3 * self.bound]
        if self.mark is not None:
            shown += [self.mark.depth[2], 1.3 * self.mark.bound]
        return float(np.nanmax([*shown, 0.0]))


def draw_three(own: OwnSay, column: JointColumn, unit: LengthUnit) -> Markup:
    """The basal contact of a sounding by its own curve, by all others, and by both together."""
    rows = (
        DepthRow(own.source, "own", own.depth, own.bound),
        DepthRow("all others", "others", column.others_basal_depth),
        DepthRow("together", "together", column.basal_depth),
    )
    return draw_rows(rows, f"Depth of the basal contact at {column.place}: alone, by all others, together", unit)


def draw_rows(rows: Sequence[DepthRow], title: str, unit: LengthUnit) -> Markup:
    """Rows over one depth axis that begins at the ground."""
    metres = METRES[unit]
    deepest = max(1.08 * max((row.deepest for row in rows), default=0.0), 10.0)
    across = Scale(0.0, deepest / metres, LEFT, RIGHT)
    foot = TOP + ROW * len(rows)
    parts = []
    for tick in across.ticks(8):
        x = float(across.pixel(tick))
        parts += [line(x, TOP, x, foot, "grid"), label(x, foot + 13, tick_text(tick), "tick", "middle")]
    parts.append(line(LEFT, foot, RIGHT, foot, "frame"))
    words = f"depth to basal gravel or rock ({unit_label(unit)})"
    parts.append(label((LEFT + RIGHT) / 2, foot + 29, words, "axis", "middle"))
    for number, row in enumerate(rows):
        parts += _draw_row(row, TOP + ROW * (number + 0.5), across, metres)
    return drawing(WIDTH, foot + BELOW, title, *parts)


def _draw_row(row: DepthRow, y: float, across: Scale, metres: float) -> list[Markup]:
    name = row.label if len(row.label) < 32 else row.label[:30] + "…"
    parts = [label(LEFT - 8, y + 4, name, "label", "end")]
    if np.isfinite(row.band).all():
        low, middle, high = (float(x) for x in across.pixel(row.band / metres))
        parts.append(rectangle(low, y - BAR / 2, max(high - low, 1.0), BAR, {"class": f"say {row.style}"}))
        parts.append(line(middle, y - BAR / 2 - 2, middle, y + BAR / 2 + 2, "contact middle"))
    elif np.isfinite(row.bound):
        parts += _draw_bound(row.bound, y, across, metres)
    else:
        parts.append(label(LEFT + 6, y + 4, "does not say", "note"))
    return [*parts, *([] if row.mark is None else _draw_mark(row.mark, y, across, metres))]


def _draw_bound(bound: float, y: float, across: Scale, metres: float) -> list[Markup]:
    """An arrow from a bound towards greater depth."""
    x, end = float(across.pixel(bound / metres)), RIGHT - 2.0
    head = f"M{end - 6:.1f} {y - 4:.1f}L{end:.1f} {y:.1f}L{end - 6:.1f} {y + 4:.1f}"
    return [
        line(x, y - BAR / 2, x, y + BAR / 2, "bound"),
        line(x, y, end, y, "limit"),
        element("path", {"d": head, "class": "bound"}),
    ]


def _draw_mark(own: OwnSay, y: float, across: Scale, metres: float) -> list[Markup]:
    if own.is_known:
        x = float(across.pixel(own.depth[1] / metres))
        diamond = f"M{x:.1f} {y - 5:.1f}l5 5l-5 5l-5 -5Z"
        return [element("path", {"d": diamond, "class": "reading segment-1"})]
    return _draw_bound(own.bound, y, across, metres) if np.isfinite(own.bound) else []
