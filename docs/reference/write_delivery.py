# ruff: noqa: INP001 - a script beside the page that it writes, not a package
"""Writes the tables of delivery.md anew from the dictionary that the files themselves are written from."""

from collections.abc import Iterator
from pathlib import Path
from textwrap import wrap

from geoves.delivery.dictionary import MORE_RASTERS, RASTERS, Column, LayerWords, RasterWords, name_part, name_unit
from geoves.delivery.layer_words import LAYERS

WIDTH = 118
PAGE = Path(__file__).with_name("delivery.md")
# Kinds whose unit depends on the region, or that have none to name.
UNITS = {
    "length": "length", "area": "km² or mi²", "fraction": "0 to 1", "ratio": "ratio", "slope": "length/length",
    "flag": "yes or no", "count": "number",
}  # fmt: skip
RASTER_UNITS = {"length": "length", "resistivity": "ohm m", "fraction": "0 to 1", "code": "code"}


def write_rasters() -> Iterator[str]:
    """The table of rasters, line by line."""
    yield "| files in `surfaces/` | unit | what it holds |"
    yield "|---|---|---|"
    yield from (_raster_row(words) for words in (*RASTERS.values(), *MORE_RASTERS.values()))
    yield (
        "| `deep_gravel_thicker_than_T_m.tif`, one for each `thicker_than` of `[surfaces]` | 0 to 1 | "
        "Probability that the deep gravel is thicker than T metres. |"
    )


def _raster_row(words: RasterWords) -> str:
    names = ", ".join(f"`{name_part(words.name, part)}.tif`" for part in words.parts)
    codes = " ".join(f"{code}: {meaning}." for code, meaning in words.codes.items())
    return f"| {names} | {RASTER_UNITS[words.kind]} | {f'{words.description} {codes}'.strip()} |"


def write_layers() -> Iterator[str]:
    """A section for each layer of layers.gpkg, line by line."""
    for words in LAYERS.values():
        yield from _layer_section(words)


def _layer_section(words: LayerWords) -> Iterator[str]:
    yield f"### {words.name}"
    yield ""
    yield from wrap(f"{words.description} Geometry: {words.geometry}.", WIDTH)
    yield ""
    yield "| column | title | unit | meaning |"
    yield "|---|---|---|---|"
    yield from (_column_row(column) for column in words.columns)
    yield ""


def _column_row(column: Column) -> str:
    codes = "; ".join(f"`{code}`: {meaning}" for code, meaning in column.codes.items())
    meaning = column.description + (f" {codes}." if codes else "")
    unit = UNITS.get(column.kind) or name_unit(column.kind, "m")
    return f"| `{column.name}` | {column.title} | {unit} | {meaning} |"


def fill_page(text: str) -> str:
    """The page with the tables of the dictionary between its marks."""
    for name, lines in (("rasters", write_rasters()), ("layers", write_layers())):
        opening, closing = f"<!-- {name} -->\n", f"<!-- end of {name} -->"
        before, rest = text.split(opening)
        _, after = rest.split(closing)
        text = before + opening + "\n".join(lines).rstrip() + "\n" + closing + after
    return text


if __name__ == "__main__":
    PAGE.write_text(fill_page(PAGE.read_text(encoding="utf-8")), encoding="utf-8")
