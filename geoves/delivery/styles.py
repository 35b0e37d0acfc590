"""OGC Styled Layer Descriptors 1.0.0 for every raster and every layer of the GeoPackage."""

import xml.etree.ElementTree as ET
from collections.abc import Callable, Sequence
from itertools import pairwise
from pathlib import Path
from typing import Literal

import attrs
import numpy as np
from matplotlib import colormaps
from matplotlib.colors import to_hex, to_rgb

from geoves.delivery.dictionary import (
    PART_TITLES,
    LayerWords,
    Part,
    RasterWords,
    convert_to_delivery,
    list_rasters,
    name_part,
    name_unit,
)
from geoves.delivery.layer_words import LAYERS
from geoves.domain.arrays import FloatArray
from geoves.domain.grids import Surface
from geoves.domain.results import Results
from geoves.errors import DeliveryError

_SLD = "http://www.opengis.net/sld"
_OGC = "http://www.opengis.net/ogc"

GREY = "#9a9a9a"  # what is unsure
INK = "#1a1a1a"
PAPER = "#ffffff"
SURE = "#00224e"  # the dark end of cividis
LIKELY = "#fde737"  # the light end of cividis
LABELS_FROM_SCALE = 60_000

Shape = Literal["circle", "square", "triangle", "cross", "x"]
Condition = tuple[str, Literal["=", "<", ">=", "null"], str]


@attrs.frozen
class Mark:
    """A point's sign."""

    shape: Shape
    fill: str
    stroke: str = INK
    size: float = 8.0


@attrs.frozen
class Line:
    """A line's stroke."""

    stroke: str
    width: float


@attrs.frozen
class Area:
    """A polygon's fill and outline."""

    fill: str
    opacity: float
    stroke: str


@attrs.frozen
class Rule:
    """Features that meet all conditions are drawn with a symbol, and labelled by a column when near."""

    title: str
    symbol: Mark | Line | Area
    conditions: tuple[Condition, ...] = ()
    label: str | None = None


def write_styles(results: Results, folder: Path) -> tuple[Path, ...]:
    """The paths written: folder/styles/NAME.sld for each raster that the stack holds and each layer.

    Raises DeliveryError.
    """
    target = folder / "styles"
    written = []
    for words in list_rasters(results.stack.surfaces):
        surface = results.stack.surfaces[words.name]
        for part in words.parts:
            name = name_part(words.name, part)
            written.append(_write(target / f"{name}.sld", _style_raster(words, part, surface, results)))
    written += [_write(target / f"{name}.sld", _style_layer(words, results)) for name, words in LAYERS.items()]
    return tuple(written)


def choose_breaks(least: float, most: float, *, count: int = 8) -> FloatArray:
    """Round numbers, multiples of 1, 2 or 5 times a power of ten, that span from `least` to `most`.

    >>> choose_breaks(312.4, 371.0).tolist()
    [310.0, 320.0, 330.0, 340.0, 350.0, 360.0, 370.0, 380.0]
    """
    span = max(most - least, 1e-6 * max(abs(most), 1.0))
    power = 10.0 ** np.floor(np.log10(span / count))
    step = next(step for step in (1.0, 2.0, 5.0, 10.0) if step * power >= span / count * (1.0 - 1e-9)) * power
    numbers = np.arange(np.floor(least / step), np.ceil(most / step) + 1)
    return np.round(numbers * step, 12)


def choose_log_breaks(least: float, most: float) -> FloatArray:
    """1, 2, 3, 5 and 7 times powers of ten from below `least` to above `most`.

    >>> choose_log_breaks(42.0, 130.0).tolist()
    [30.0, 50.0, 70.0, 100.0, 200.0]
    """
    powers = 10.0 ** np.arange(np.floor(np.log10(least)) - 1, np.ceil(np.log10(most)) + 1)
    numbers = np.unique(np.round(np.outer(powers, (1.0, 2.0, 3.0, 5.0, 7.0)), 9))
    first = int(np.searchsorted(numbers, least, side="right")) - 1
    last = int(np.searchsorted(numbers, most))
    return numbers[first : last + 1]


def _style_raster(words: RasterWords, part: Part, surface: Surface, results: Results) -> ET.Element:
    """Colours at round numbers; estimate and quantiles share theirs, so that they can be compared by eye."""
    unit = name_unit(words.kind, results.region.length_unit)
    colours: Callable[[FloatArray], list[str]]
    if words.kind == "code":
        breaks, colours = np.array(list(words.codes), dtype=float), _choose_ramp(words, surface)
    elif words.kind == "fraction":
        breaks, colours = np.array([0.0, 0.2, 0.33, 0.66, 0.8, 1.0]), _colour_probabilities
    elif part == "standard_error":
        breaks, colours = _span([surface.standard_error], words, results), _colour_errors
    else:
        shared = [getattr(surface, name) for name in words.parts if name != "standard_error"]
        breaks, colours = _span(shared, words, results), _choose_ramp(words, surface)
    title = ", ".join(filter(None, (words.title, PART_TITLES[part])))
    root, style = _open_style(name_part(words.name, part), f"{title} ({unit})" if unit else title, words.description)
    symbolizer = _add(_add(_add(style, "FeatureTypeStyle"), "Rule"), "RasterSymbolizer")
    _add(symbolizer, "Opacity", "1")
    ramp = _add(symbolizer, "ColorMap")
    if words.kind == "code":
        ramp.set("type", "values")

    def label(value: float) -> str:
        return words.codes.get(int(value)) or f"{value:g} {unit}".strip()

    for value, colour in zip(breaks, colours(breaks), strict=True):
        entry = _add(ramp, "ColorMapEntry")
        entry.attrib |= {"color": colour, "quantity": f"{value:g}", "label": label(value)}
    return root


def _span(parts: Sequence[FloatArray | None], words: RasterWords, results: Results) -> FloatArray:
    """Breaks over the central 96 % of the finite cells of every part; 0 to 1 where there are none."""
    metres = results.region.metres_per_length_unit
    cells = [convert_to_delivery(part[np.isfinite(part)], words.kind, metres) for part in parts if part is not None]
    ends = np.array([np.quantile(part, [0.02, 0.98]) for part in cells if part.size])
    if ends.size == 0:
        return np.array([0.0, 1.0])
    least, most = ends[:, 0].min(), ends[:, 1].max()
    if words.kind == "resistivity" and most > 1.5 * least > 0.0:
        return choose_log_breaks(float(least), float(most))
    least, most = min(least, most - 0.01), max(most, least + 0.01)
    return choose_breaks(float(least), float(most))


def _choose_ramp(words: RasterWords, surface: Surface) -> Callable[[FloatArray], list[str]]:
    name = "cividis" if words.elevation else "viridis"
    if surface.quantity == "depth":
        name = "cividis_r"

    def colour(breaks: FloatArray) -> list[str]:
        return [to_hex(colormaps[name](place)) for place in np.linspace(0.0, 1.0, breaks.size)]

    return colour


def _colour_errors(breaks: FloatArray) -> list[str]:
    """From dark where the error is small to grey where it is large."""
    start, end = np.array(to_rgb(SURE)), np.array(to_rgb("#c8c8c8"))
    return [to_hex(start + place * (end - start)) for place in np.linspace(0.0, 1.0, breaks.size)]


def _colour_probabilities(breaks: FloatArray) -> list[str]:
    """Dark where a thing is hardly there, light where it almost surely is, grey where it may or may not be."""
    unsure = (breaks >= 0.33) & (breaks <= 0.66)
    return [GREY if grey else to_hex(colormaps["cividis"](p)) for p, grey in zip(breaks, unsure, strict=True)]


def _style_layer(words: LayerWords, results: Results) -> ET.Element:
    root, style = _open_style(words.name, words.title, words.description)
    features = _add(style, "FeatureTypeStyle")
    for rule in _list_rules(words.name, results):
        _add_rule(features, rule)
    return root


def _list_rules(name: str, results: Results) -> tuple[Rule, ...]:
    if name == "model_layers":
        return _rule_resistivities(results)
    if name.endswith("_contours"):
        field = LAYERS[name].columns[0].name
        return (
            Rule("Index contour", Line(INK, 1.2), (("major", "=", "1"),), field),
            Rule("Contour", Line("#5b5b5b", 0.5), (("major", "=", "0"),)),
        )
    return _RULES[name]


_RULES: dict[str, tuple[Rule, ...]] = {
    "soundings": (
        Rule("Base seen (gravel or rock)", Mark("circle", SURE), (("bedrock_status", "=", "seen"),), "sounding"),
        Rule("Base not distinct", Mark("circle", GREY), (("bedrock_status", "=", "not_distinct"),), "sounding"),
        Rule("Too few readings", Mark("cross", GREY, GREY), (("bedrock_status", "null", ""),), "sounding"),
        Rule(
            "Base deeper than the curve reached",
            Mark("triangle", GREY),
            (("bedrock_status", "=", "deeper_than"),),
            "sounding",
        ),
    ),
    "tops": (
        Rule("Top at this depth", Mark("circle", SURE, size=6.0), (("status", "=", "at"),)),
        Rule("Deeper than this", Mark("triangle", GREY, size=6.0), (("status", "=", "below"),)),
        Rule("Absent", Mark("x", GREY, size=6.0), (("status", "=", "absent"),)),
    ),
    "readings": (Rule("Field reading", Mark("square", PAPER, GREY, 3.0)),),
    "picks": (Rule("Interpreter's pick", Mark("cross", SURE, SURE, 9.0), (), "place"),),
    "wells": (
        Rule("Well that reached bedrock", Mark("square", SURE, size=9.0), (("reached_bedrock", "=", "1"),), "well"),
        Rule("Well that ended above it", Mark("square", PAPER, size=9.0), (("reached_bedrock", "=", "0"),), "well"),
    ),
    "well_intervals": (Rule("Interval of a log", Mark("square", PAPER, GREY, 4.0)),),
    "valley_axis": (
        Rule("Main valley", Line("#0b4f8a", 3.0), (("order", "=", "1"),)),
        Rule("Tributary", Line("#0b4f8a", 1.5), (("order", ">=", "2"),)),
    ),
    "gravel_extent": (
        Rule("Deep gravel likely", Area(LIKELY, 0.6, INK), (("likelihood", "=", "likely"),)),
        Rule("Deep gravel possible", Area(GREY, 0.4, GREY), (("likelihood", "=", "possible"),)),
        Rule("Deep gravel not shown", Area(PAPER, 0.0, GREY), (("likelihood", "=", "not_shown"),)),
    ),
    "valley_stations": (
        Rule("Station on the main valley", Mark("circle", SURE, size=5.0), (("order", "=", "1"),), "distance"),
        Rule("Station on a tributary", Mark("circle", GREY, size=4.0), (("order", ">=", "2"),), "distance"),
    ),
    "sections": (Rule("Line of a cross-section", Line(INK, 1.2), (), "section"),),
    "doubts": (Rule("Doubt about the inputs", Mark("triangle", PAPER, INK, 9.0), (), "place"),),
    "permits": (
        Rule(
            "No surface of deep gravel",
            Mark("circle", PAPER, size=5.0),
            (("covered", "=", "1"), ("gravel_probability", "null", "")),
            "permit",
        ),
        Rule("Not covered", Mark("x", GREY, GREY, 5.0), (("covered", "=", "0"),)),
        Rule(
            "Deep gravel likely",
            Mark("circle", LIKELY, size=5.0),
            (("covered", "=", "1"), ("gravel_probability", ">=", "0.66")),
            "permit",
        ),
        Rule(
            "Deep gravel possible",
            Mark("circle", GREY, size=5.0),
            (("covered", "=", "1"), ("gravel_probability", ">=", "0.33"), ("gravel_probability", "<", "0.66")),
            "permit",
        ),
        Rule(
            "Deep gravel unlikely",
            Mark("circle", SURE, size=5.0),
            (("covered", "=", "1"), ("gravel_probability", "<", "0.33")),
            "permit",
        ),
    ),
}


def _rule_resistivities(results: Results) -> tuple[Rule, ...]:
    """Layers of the models by class of resistivity, with round limits."""
    found = [inverted.model.resistivity for inverted in results.inverted]
    values = np.concatenate(found) if found else np.array([10.0, 100.0])
    breaks = choose_log_breaks(float(values.min()), float(values.max()))
    breaks = breaks[:: max(1, breaks.size // 6)]
    classes = [f"{low:g} to {high:g} ohm m" for low, high in pairwise(breaks)]
    titles = [f"below {breaks[0]:g} ohm m", *classes, f"{breaks[-1]:g} ohm m and more"]
    rules = []
    for index, title in enumerate(titles):
        conditions: list[Condition] = []
        if index > 0:
            conditions.append(("resistivity", ">=", f"{breaks[index - 1]:g}"))
        if index < breaks.size:
            conditions.append(("resistivity", "<", f"{breaks[index]:g}"))
        colour = to_hex(colormaps["viridis"](index / breaks.size))
        rules.append(Rule(title, Mark("square", colour, colour, 4.0), tuple(conditions)))
    return tuple(rules)


def _open_style(name: str, title: str, description: str) -> tuple[ET.Element, ET.Element]:
    """A new document and its user style."""
    root = ET.Element(f"{{{_SLD}}}StyledLayerDescriptor", {"version": "1.0.0"})
    layer = _add(root, "NamedLayer")
    _add(layer, "Name", name)
    style = _add(layer, "UserStyle")
    _add(style, "Name", name)
    _add(style, "Title", title)
    _add(style, "Abstract", description)
    return root, style


def _add(parent: ET.Element, name: str, text: str | None = None, namespace: str = _SLD) -> ET.Element:
    element = ET.SubElement(parent, f"{{{namespace}}}{name}")
    element.text = text
    return element


def _add_rule(features: ET.Element, rule: Rule) -> None:
    """One rule, and a second of the same conditions for the labels, drawn from a closer scale on."""
    element = _add(features, "Rule")
    _add(element, "Name", rule.title)
    _add(element, "Title", rule.title)
    _add_filter(element, rule.conditions)
    if isinstance(rule.symbol, Mark):
        _add_mark(element, rule.symbol)
    elif isinstance(rule.symbol, Line):
        _add_parameters(_add(_add(element, "LineSymbolizer"), "Stroke"), _stroke(rule.symbol.stroke, rule.symbol.width))
    else:
        polygon = _add(element, "PolygonSymbolizer")
        _add_parameters(_add(polygon, "Fill"), {"fill": rule.symbol.fill, "fill-opacity": f"{rule.symbol.opacity:g}"})
        _add_parameters(_add(polygon, "Stroke"), _stroke(rule.symbol.stroke, 0.8))
    if rule.label is not None:
        labels = _add(features, "Rule")
        _add(labels, "Name", f"{rule.title}, label")
        _add_filter(labels, rule.conditions)
        _add(labels, "MaxScaleDenominator", str(LABELS_FROM_SCALE))
        _add_label(labels, rule.label, along_line=isinstance(rule.symbol, Line))


def _add_filter(rule: ET.Element, conditions: tuple[Condition, ...]) -> None:
    names = {
        "=": "PropertyIsEqualTo",
        "<": "PropertyIsLessThan",
        ">=": "PropertyIsGreaterThanOrEqualTo",
        "null": "PropertyIsNull",
    }
    if not conditions:
        return
    parent = _add(rule, "Filter", namespace=_OGC)
    if len(conditions) > 1:
        parent = _add(parent, "And", namespace=_OGC)
    for column, relation, literal in conditions:
        comparison = _add(parent, names[relation], namespace=_OGC)
        _add(comparison, "PropertyName", column, _OGC)
        if relation != "null":
            _add(comparison, "Literal", literal, _OGC)


def _add_mark(rule: ET.Element, mark: Mark) -> None:
    graphic = _add(_add(rule, "PointSymbolizer"), "Graphic")
    sign = _add(graphic, "Mark")
    _add(sign, "WellKnownName", mark.shape)
    _add_parameters(_add(sign, "Fill"), {"fill": mark.fill})
    _add_parameters(_add(sign, "Stroke"), _stroke(mark.stroke, 0.8))
    _add(graphic, "Size", f"{mark.size:g}")


def _add_label(rule: ET.Element, column: str, *, along_line: bool) -> None:
    text = _add(rule, "TextSymbolizer")
    _add(_add(text, "Label"), "PropertyName", column, _OGC)
    _add_parameters(_add(text, "Font"), {"font-family": "sans-serif", "font-size": "9"})
    placement = _add(text, "LabelPlacement")
    if along_line:
        _add(placement, "LinePlacement")
    else:
        point = _add(placement, "PointPlacement")
        for group, axes in (("AnchorPoint", (("X", "0"), ("Y", "0.5"))), ("Displacement", (("X", "6"), ("Y", "0")))):
            pair = _add(point, group)
            for axis, value in axes:
                _add(pair, f"{group}{axis}", value)
    halo = _add(text, "Halo")
    _add(halo, "Radius", "1")
    _add_parameters(_add(halo, "Fill"), {"fill": PAPER})
    _add_parameters(_add(text, "Fill"), {"fill": INK})


def _stroke(colour: str, width: float) -> dict[str, str]:
    return {"stroke": colour, "stroke-width": f"{width:g}"}


def _add_parameters(parent: ET.Element, parameters: dict[str, str]) -> None:
    for name, value in parameters.items():
        _add(parent, "CssParameter", value).set("name", name)


def _write(path: Path, root: ET.Element) -> Path:
    ET.register_namespace("", _SLD)
    ET.register_namespace("ogc", _OGC)
    ET.indent(root)
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        ET.ElementTree(root).write(path, encoding="utf-8", xml_declaration=True)
    except OSError as error:
        raise DeliveryError(f"styles/{path.name} could not be written: {error.strerror}") from error
    return path
