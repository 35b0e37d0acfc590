"""The styles, parsed back and held against the order of elements of OGC's SLD 1.0.0 (OGC 02-070)."""

import attrs
import numpy as np
import pytest
from lxml import etree

from geoves.delivery.dictionary import RASTERS, list_rasters, name_part
from geoves.delivery.layer_words import LAYERS
from geoves.delivery.styles import choose_breaks, write_styles
from geoves.errors import DeliveryError

SLD = "{http://www.opengis.net/sld}"
OGC = "{http://www.opengis.net/ogc}"

# The sequences that the schema of OGC 02-070, StyledLayerDescriptor.xsd, prescribes.
ORDER = {
    "UserStyle": ["Name", "Title", "Abstract", "IsDefault", "FeatureTypeStyle"],
    "Rule": [
        "Name", "Title", "Abstract", "LegendGraphic", "Filter", "ElseFilter", "MinScaleDenominator",
        "MaxScaleDenominator", "LineSymbolizer", "PolygonSymbolizer", "PointSymbolizer", "TextSymbolizer",
        "RasterSymbolizer",
    ],
    "RasterSymbolizer": ["Geometry", "Opacity", "ChannelSelection", "OverlapBehavior", "ColorMap"],
    "TextSymbolizer": ["Geometry", "Label", "Font", "LabelPlacement", "Halo", "Fill"],
    "PolygonSymbolizer": ["Geometry", "Fill", "Stroke"],
    "Graphic": ["Mark", "Opacity", "Size", "Rotation"],
    "Mark": ["WellKnownName", "Fill", "Stroke"],
    "PointPlacement": ["AnchorPoint", "Displacement", "Rotation"],
}  # fmt: skip


@pytest.fixture(scope="module")
def styles(small_results, tmp_path_factory):
    written = write_styles(small_results, tmp_path_factory.mktemp("styles"))
    return {path.stem: etree.parse(path).getroot() for path in written}


def quantities(root):
    return [float(entry.get("quantity")) for entry in root.iter(f"{SLD}ColorMapEntry")]


def test_a_style_for_each_raster_and_each_layer(styles, small_results):
    words = list_rasters(small_results.stack.surfaces)
    rasters = {name_part(one.name, part) for one in words for part in one.parts}
    assert set(styles) == rasters | set(LAYERS)
    for name, root in styles.items():
        assert root.tag == f"{SLD}StyledLayerDescriptor"
        assert root.get("version") == "1.0.0"
        assert root.findtext(f"{SLD}NamedLayer/{SLD}Name") == name


def test_elements_stand_in_the_order_of_the_schema(styles):
    for name, root in styles.items():
        for element in root.iter():
            order = ORDER.get(etree.QName(element).localname)
            if order:
                found = [order.index(etree.QName(child).localname) for child in element]
                assert found == sorted(found), (name, element.tag)


def test_colours_rise_through_round_numbers_that_span_the_surface(styles, small_results):
    for words in RASTERS.values():
        for part in words.parts:
            values = quantities(styles[name_part(words.name, part)])
            assert values == sorted(set(values))
            cells = getattr(small_results.stack.surfaces[words.name], part)
            least, most = np.nanquantile(cells, [0.02, 0.98])
            assert values[0] <= least
            assert values[-1] >= most
            assert len(values) <= 16
    bedrock = quantities(styles["bedrock_elevation"])
    assert bedrock == quantities(styles["bedrock_elevation_p05"]) == quantities(styles["bedrock_elevation_p95"])
    assert all(value % 10.0 == 0.0 for value in bedrock)


def test_filters_name_columns_and_codes_that_exist(styles):
    for name, words in LAYERS.items():
        columns = {column.name: column for column in words.columns}
        for comparison in styles[name].iter(f"{OGC}PropertyIsEqualTo"):
            column = columns[comparison.findtext(f"{OGC}PropertyName")]
            if column.codes:
                assert comparison.findtext(f"{OGC}Literal") in column.codes
        assert {p.text for p in styles[name].iter(f"{OGC}PropertyName")} <= set(columns)


def test_every_feature_is_drawn_once(styles):
    """Each code, and each value of a class, meets exactly one rule that draws a symbol."""

    def meets(rule, row):
        tests = {
            "Null": lambda a, _: a is None or (isinstance(a, float) and np.isnan(a)),
            "EqualTo": lambda a, b: str(a) == b,
            "LessThan": lambda a, b: a < float(b),
            "GreaterThanOrEqualTo": lambda a, b: a >= float(b),
        }
        return all(
            tests[etree.QName(c).localname.removeprefix("PropertyIs")](
                row[c.findtext(f"{OGC}PropertyName")], c.findtext(f"{OGC}Literal")
            )
            for c in rule.iter(*(f"{OGC}PropertyIs{name}" for name in tests))
        )

    rows = {
        "soundings": [{"bedrock_status": code} for code in ("seen", "not_distinct", "deeper_than", None)],
        "tops": [{"status": code} for code in ("at", "below", "absent")],
        "gravel_extent": [{"likelihood": code} for code in ("likely", "possible")],
        "permits": [{"covered": 1, "gravel_probability": p} for p in (0.0, 0.33, 0.5, 0.66, 1.0, np.nan)],
        "model_layers": [{"resistivity": r} for r in (0.1, 18.0, 32.0, 50.0, 105.0, 1e5)],
        "valley_axis": [{"order": 1}, {"order": 2}, {"order": 3}],
    }
    for name, cases in rows.items():
        rules = [r for r in styles[name].iter(f"{SLD}Rule") if r.find(f"{SLD}TextSymbolizer") is None]
        for row in cases:
            assert sum(meets(rule, row) for rule in rules) == 1, (name, row)


def test_what_is_unsure_is_grey(styles):
    colours = {
        float(e.get("quantity")): e.get("color") for e in styles["deep_gravel_probability"].iter(f"{SLD}ColorMapEntry")
    }
    for value, colour in colours.items():
        channels = [int(colour[i : i + 2], 16) for i in (1, 3, 5)]
        if 0.33 <= value <= 0.66:
            assert len(set(channels)) == 1
        elif value not in (0.2, 0.8):
            assert max(channels) - min(channels) > 40


def test_feet_have_round_numbers_in_feet(small_results_in_feet, tmp_path):
    written = {path.stem: path for path in write_styles(small_results_in_feet, tmp_path)}
    root = etree.parse(written["bedrock_elevation"]).getroot()
    assert all(value % 10.0 == 0.0 for value in quantities(root))
    assert quantities(root)[-1] > 1000.0
    assert "us-ft" in root.findtext(f".//{SLD}Title")


def test_constant_and_empty_surfaces_have_a_style(small_results, tmp_path):
    surface = small_results.stack.surfaces["bedrock_depth"]
    for index, value in enumerate((0.0, 55.0, np.nan)):
        flat = attrs.evolve(surface, estimate=np.full(surface.estimate.shape, value))
        results = attrs.evolve(small_results, stack=attrs.evolve(small_results.stack, surfaces={"bedrock_depth": flat}))
        written = {path.stem: path for path in write_styles(results, tmp_path / str(index))}
        values = quantities(etree.parse(written["bedrock_depth"]).getroot())
        assert values == sorted(set(values))


def test_breaks_are_few_and_cover():
    for least, most in ((0.0, 1.0), (-3.2, 7.9), (1003.0, 1250.0), (2e-3, 3e-3)):
        breaks = choose_breaks(least, most)
        assert breaks[0] <= least
        assert breaks[-1] >= most
        assert breaks.size <= 9


def test_two_runs_are_equal_to_the_byte(small_results, tmp_path):
    first, second = (write_styles(small_results, tmp_path / name) for name in "ab")
    assert [p.read_bytes() for p in first] == [p.read_bytes() for p in second]


def test_a_folder_that_cannot_be_written_is_said_in_words(small_results, tmp_path):
    (tmp_path / "styles").write_text("a file stands where the folder should be", encoding="utf-8")
    with pytest.raises(DeliveryError, match="styles"):
        write_styles(small_results, tmp_path)
