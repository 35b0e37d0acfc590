"""map.html: the region's map on one page that opens with no network.

Folium gives the map's element and the call that makes it, from numbers alone. All text of the job stands in one JSON
block; the page's own script puts it into elements as text, so that no name is ever read as markup, template or code.
"""

import base64
import hashlib
import json
import re
from collections.abc import Mapping
from importlib.resources import files
from importlib.resources.abc import Traversable
from pathlib import Path
from typing import Any

import folium

from geoves.delivery.map_data import describe_region
from geoves.delivery.markup import text
from geoves.domain.results import Results
from geoves.errors import DeliveryError

# One script: the page's parts in the order in which they build on each other.
SCRIPTS = (
    "map_words.js",
    "map_grid.js",
    "map_surface.js",
    "map_column.js",
    "map_sounding.js",
    "map_places.js",
    "map_search.js",
    "map_tables.js",
    "map_start.js",
)


def write_map_page(results: Results, path: Path) -> Path:
    """The written page at `path`."""
    described = describe_region(results)
    element, call = _folium_parts()
    pages, leaflet = files("geoves.delivery") / "pages", files("geoves.delivery") / "vendored" / "leaflet"
    scripts = [
        _without_source_map((leaflet / "leaflet.js").read_text(encoding="utf-8")),
        call,
        _joined_scripts(pages),
    ]
    parts = {
        "TITLE": text(f"{results.region.name}: map"),
        "POLICY": content_policy(scripts),
        "STYLE": _inlined_style(leaflet) + (pages / "map.css").read_text(encoding="utf-8"),
        "MAP": element,
        "DATA": embedded_json(described),
        "SCRIPTS": "\n".join(f"<script>{script}</script>" for script in scripts),
    }
    page = re.sub(r"@@([A-Z]+)@@", lambda found: parts[found[1]], (pages / "map.html").read_text(encoding="utf-8"))
    path.write_text(page, encoding="utf-8")
    return path


def _folium_parts() -> tuple[str, str]:
    """The map's element and the call that makes it, under a fixed name and without folium's remote assets."""
    folium_map = folium.Map(location=[0, 0], zoom_start=2, tiles=None, control_scale=True)
    folium_map._id = "geoves"  # noqa: SLF001 - the name is random otherwise, and no two pages would be equal
    folium_map.default_js, folium_map.default_css = [], []
    figure: Any = folium_map.get_root()
    figure.header._children.clear()  # noqa: SLF001 - our page has its own head
    folium_map.render()
    element = "".join(child.render() for child in figure.html._children.values())  # noqa: SLF001
    call = "".join(child.render() for child in figure.script._children.values())  # noqa: SLF001
    if "http" in element + call:
        raise DeliveryError("map.html: folium wants an asset from the network; the page would not open without one.")
    return element.strip(), call


def _joined_scripts(pages: Traversable) -> str:
    joined = "\n".join((pages / name).read_text(encoding="utf-8") for name in SCRIPTS)
    return f'(() => {{\n"use strict";\n{joined}\n}})();'


def _without_source_map(script: str) -> str:
    return re.sub(r"^//# sourceMappingURL=.*$", "", script, flags=re.MULTILINE)


def _inlined_style(leaflet: Traversable) -> str:
    """Leaflet's style sheet with its images inside. Raises DeliveryError for one that is not vendored."""

    def inline(found: re.Match[str]) -> str:
        address = found[1].strip("'\"")
        if address.startswith("#"):
            return found[0]
        image = leaflet / address
        if not image.is_file():
            raise DeliveryError(f"map.html: {address} is not among the vendored files of Leaflet.")
        return f"url(data:image/png;base64,{base64.b64encode(image.read_bytes()).decode('ascii')})"

    return re.sub(r"url\(([^)]+)\)", inline, (leaflet / "leaflet.css").read_text(encoding="utf-8"))


def embedded_json(described: Mapping[str, Any]) -> str:
    """JSON that cannot end its script element, whatever a name holds."""
    written = json.dumps(described, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    return (
        written.replace("<", "\\u003c")
        .replace(">", "\\u003e")
        .replace("\u2028", "\\u2028")
        .replace("\u2029", "\\u2029")
    )


def content_policy(scripts: list[str]) -> str:
    """Nothing may be fetched; only these very scripts may run."""
    hashes = " ".join(
        f"'sha256-{base64.b64encode(hashlib.sha256(script.encode()).digest()).decode('ascii')}'" for script in scripts
    )
    return (
        f"default-src 'none'; script-src {hashes}; style-src 'unsafe-inline'; img-src data:; "
        "base-uri 'none'; form-action 'none'"
    )
