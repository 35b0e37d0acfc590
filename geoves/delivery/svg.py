"""Scales, axes and marks of our figures: SVG with real text, coloured by the page's style sheet."""

import math
from collections.abc import Iterable, Mapping

import attrs
import numpy as np
from numpy.typing import ArrayLike

from geoves.delivery.markup import Child, Markup, element, joined


@attrs.frozen
class Scale:
    """From values `low` to `high` onto pixels `start` to `end`, evenly or by logarithm."""

    low: float
    high: float
    start: float
    end: float
    logarithmic: bool = False

    def pixel(self, value: ArrayLike) -> np.ndarray:
        """Pixels of values; those beyond the ends are drawn at the ends."""
        values = np.clip(np.asarray(value, dtype=float), min(self.low, self.high), max(self.low, self.high))
        if self.logarithmic:
            share = (np.log(values) - np.log(self.low)) / (np.log(self.high) - np.log(self.low))
        else:
            share = (values - self.low) / (self.high - self.low)
        return self.start + share * (self.end - self.start)

    def ticks(self, wanted: int = 5) -> list[float]:
        """Round values between the ends: 1, 2, 5 and their tens."""
        if self.logarithmic:
            return logarithmic_ticks(self.low, self.high)
        return even_ticks(min(self.low, self.high), max(self.low, self.high), wanted)


def even_ticks(low: float, high: float, wanted: int) -> list[float]:
    """Round values from low to high, about as many as wanted.

    >>> even_ticks(0, 95, 5)
    [0.0, 20.0, 40.0, 60.0, 80.0]
    """
    raw = (high - low) / max(wanted, 1)
    power = 10.0 ** np.floor(np.log10(raw))
    step = float(next(m * power for m in (1.0, 2.0, 5.0, 10.0) if m * power >= raw * 0.999))
    first = np.ceil(low / step - 1e-9) * step
    return [float(first + step * i) for i in range(int(np.floor((high - first) / step + 1e-9)) + 1)]


def logarithmic_ticks(low: float, high: float) -> list[float]:
    """Tens within the range; with 2 and 5 between them where the range is short.

    >>> logarithmic_ticks(8, 300)
    [10.0, 20.0, 50.0, 100.0, 200.0]
    """
    decades_spanned = np.log10(high / low)
    steps = (1, 1.5, 2, 3, 5, 7) if decades_spanned < 0.9 else (1, 2, 5) if decades_spanned < 3.1 else (1,)
    decades = range(int(np.floor(np.log10(low))), int(np.ceil(np.log10(high))) + 1)
    ticks = [float(step * 10.0**decade) for decade in decades for step in steps]
    return [tick for tick in ticks if low * 0.999 <= tick <= high * 1.001]


def logarithmic_range(values: ArrayLike, margin: float = 1.15) -> tuple[float, float]:
    """The positive finite values' range, widened by a factor."""
    array = np.asarray(values, dtype=float)
    array = array[np.isfinite(array) & (array > 0.0)]
    if not array.size:
        return 1.0, 1000.0
    low, high = array.min() / margin, array.max() * margin
    if high < 4.0 * low:
        middle = np.sqrt(low * high)
        low, high = middle / 2.0, middle * 2.0
    return float(low), float(high)


def short(value: float) -> str:
    """A pixel or a tick, without trailing zeros.

    >>> short(20.0), short(0.5)
    ('20', '0.5')
    """
    return f"{value:.2f}".rstrip("0").rstrip(".")


def pixels(values: Iterable[float]) -> list[str]:
    return [f"{value:.1f}" for value in values]


def drawing(width: int, height: int, title: str, *children: Child) -> Markup:
    """An SVG figure; `title` is what a screen reader says for it."""
    attributes = {"viewBox": f"0 0 {width} {height}", "width": width, "height": height, "role": "img"}
    return element("svg", attributes, element("title", {}, title), *children)


def polyline(x: Iterable[float], y: Iterable[float], style: str) -> Markup:
    """A line through pixels; broken where either is NaN."""
    return element("path", {"d": path_data(x, y), "class": style})


def path_data(x: Iterable[float], y: Iterable[float]) -> str:
    commands, pen = [], "M"
    for one_x, one_y in zip(x, y, strict=True):
        if math.isnan(one_x) or math.isnan(one_y):
            pen = "M"
            continue
        commands.append(f"{pen}{one_x:.1f} {one_y:.1f}")
        pen = "L"
    return "".join(commands)


def label(x: float, y: float, words: Child, style: str = "label", anchor: str = "start") -> Markup:
    return element("text", {"x": f"{x:.1f}", "y": f"{y:.1f}", "class": style, "text-anchor": anchor}, words)


def rectangle(x: float, y: float, width: float, height: float, attributes: Mapping[str, object]) -> Markup:
    size = {"x": f"{x:.1f}", "y": f"{y:.1f}", "width": f"{max(width, 0):.1f}", "height": f"{max(height, 0):.1f}"}
    return element("rect", {**size, **attributes})


def line(x1: float, y1: float, x2: float, y2: float, style: str) -> Markup:
    ends = dict(zip(("x1", "y1", "x2", "y2"), pixels((x1, y1, x2, y2)), strict=True))
    return element("line", {**ends, "class": style})


@attrs.frozen
class Frame:
    """A plot's two scales; x.start to x.end and y.start to y.end are its box in pixels."""

    x: Scale
    y: Scale

    def axes(self, x_label: str, y_label: str, y_ticks: int = 5, x_ticks: int = 5) -> Markup:
        """Frame, grid, numbers and the labels with their units."""
        left, right = sorted((self.x.start, self.x.end))
        top, bottom = sorted((self.y.start, self.y.end))
        parts: list[Markup] = [rectangle(left, top, right - left, bottom - top, {"class": "frame"})]
        for tick in self.x.ticks(x_ticks):
            at = float(self.x.pixel(tick))
            parts += [line(at, top, at, bottom, "grid"), label(at, bottom + 13, tick_text(tick), "tick", "middle")]
        for tick in self.y.ticks(y_ticks):
            at = float(self.y.pixel(tick))
            parts += [line(left, at, right, at, "grid"), label(left - 5, at + 4, tick_text(tick), "tick", "end")]
        parts.append(label((left + right) / 2, bottom + 28, x_label, "axis", "middle"))
        middle = (top + bottom) / 2
        turned = f"translate({left - 38:.1f} {middle:.1f}) rotate(-90)"
        parts.append(element("text", {"transform": turned, "class": "axis", "text-anchor": "middle"}, y_label))
        return joined(parts)

    def line(self, x: ArrayLike, y: ArrayLike, style: str) -> Markup:
        return polyline(self.x.pixel(x), self.y.pixel(y), style)

    def band(self, x: ArrayLike, low: ArrayLike, high: ArrayLike, style: str) -> Markup:
        """The area between low and high, in pieces where either is NaN."""
        xs, lows, highs = self.x.pixel(x), self.y.pixel(low), self.y.pixel(high)
        known = np.isfinite(lows) & np.isfinite(highs)
        pieces = [piece for piece in stretches(known) if len(piece) > 1]
        return joined(
            element("path", {"d": path_data([*xs[i], *xs[i][::-1]], [*lows[i], *highs[i][::-1]]) + "Z", "class": style})
            for i in pieces
        )


def stretches(known: np.ndarray) -> list[np.ndarray]:
    """Indices of each unbroken stretch of True.

    >>> [list(map(int, piece)) for piece in stretches(np.array([True, False, True, True]))]
    [[0], [2, 3]]
    """
    indices = np.flatnonzero(known)
    return list(np.split(indices, np.flatnonzero(np.diff(indices) > 1) + 1)) if indices.size else []


def tick_text(value: float) -> str:
    return short(value) if abs(value) < 1e4 else f"{value:,.0f}"


def staircase(top_depth: ArrayLike, values: ArrayLike, end: float) -> tuple[np.ndarray, np.ndarray]:
    """Corners (value, depth) of a layered model drawn down to `end`."""
    depths = np.minimum(np.append(np.asarray(top_depth, dtype=float), end), end)
    return np.repeat(np.asarray(values, dtype=float), 2), np.repeat(depths, 2)[1:-1]


def mark_path(number: int, x: float, y: float) -> str:
    """The outline of a mark about a pixel: circle, square, triangle and diamond in turn."""
    return (
        f"M{x - 3.6:.1f} {y:.1f}a3.6 3.6 0 1 0 7.2 0a3.6 3.6 0 1 0 -7.2 0Z",
        f"M{x - 3.3:.1f} {y - 3.3:.1f}h6.6v6.6h-6.6Z",
        f"M{x:.1f} {y - 4.4:.1f}l4.2 7.2h-8.4Z",
        f"M{x:.1f} {y - 4.6:.1f}l4.6 4.6l-4.6 4.6l-4.6 -4.6Z",
    )[number % 4]
