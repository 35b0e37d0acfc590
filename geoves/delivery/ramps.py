"""Colour ramps, and doubt as a fade of the colour towards grey."""

import base64
import io
from collections.abc import Mapping
from types import MappingProxyType

import numpy as np
from matplotlib import colormaps
from PIL import Image

from geoves.delivery.markup import Markup, element
from geoves.domain.arrays import FloatArray
from geoves.domain.grids import Surface

GREY = (205, 205, 202)  # what a colour fades to where the doubt is largest

# Both even to the eye and readable without colour vision (Nuñez, Anderton and Renslow 2018 for cividis).
QUANTITY_RAMPS: Mapping[str, str] = MappingProxyType(
    {
        "elevation": "cividis",
        "depth": "cividis_r",  # so that one end is deep rock, whether as an elevation or as a depth
        "thickness": "viridis",
        "resistivity": "viridis",
        "probability": "viridis",
        "code": "viridis",
    }
)


def ramp_colours(name: str) -> np.ndarray:
    """256 colours of a ramp, (256, 3) of 0 to 255."""
    return np.round(np.asarray(colormaps[name](np.arange(256)))[:, :3] * 255).astype(np.uint8)


def band_width(surface: Surface) -> FloatArray | None:
    """Width of the 90 % band; for resistivities the natural log of its ratio. None where the surface has no band."""
    if surface.p05 is None or surface.p95 is None:
        return None
    if surface.quantity == "resistivity":
        return np.log(surface.p95 / surface.p05)
    return surface.p95 - surface.p05


def value_range(values: FloatArray) -> tuple[float, float]:
    """The ends of a ramp: the central 98 % of the values; (0, 1) where all are blank."""
    known = values[np.isfinite(values)]
    if not known.size:
        return 0.0, 1.0
    low, high = (float(value) for value in np.quantile(known, [0.01, 0.99]))
    return (low, high) if high > low else (low - 0.5, low + 0.5)


def doubt_range(width: FloatArray) -> tuple[float, float]:
    """Band widths at which the colour begins to fade and at which it is grey: the 10th and the 97th percentile."""
    known = width[np.isfinite(width)]
    if not known.size:
        return 0.0, 1.0
    low, high = (float(value) for value in np.quantile(known, [0.10, 0.97]))
    return (low, high) if high > low else (low, low + 1.0)


def faded_colours(surface: Surface) -> np.ndarray:
    """RGBA (rows, columns, 4): the value's colour, faded to grey by its doubt; clear where blank.

    Value-by-alpha after Roth, Woodruff and Johnson (2010), Cartographic Journal 47(2).
    """
    values = np.log(surface.estimate) if surface.quantity == "resistivity" else surface.estimate
    low, high = value_range(values)
    known = np.isfinite(values)
    index = np.clip(np.nan_to_num((values - low) / (high - low)) * 255, 0, 255).astype(int)
    colour = ramp_colours(QUANTITY_RAMPS[surface.quantity])[index].astype(float)
    width = band_width(surface)
    if width is not None:
        least, most = doubt_range(width)
        fade = np.clip(np.nan_to_num((width - least) / (most - least), nan=1.0), 0.0, 0.92)[..., None]
        colour = colour * (1 - fade) + np.array(GREY) * fade
    return np.dstack([np.round(colour), np.where(known, 255, 0)]).astype(np.uint8)


def embedded_image(colours: np.ndarray, attributes: Mapping[str, object]) -> Markup:
    """An SVG image that holds its own pixels."""
    stream = io.BytesIO()
    Image.fromarray(colours, "RGBA" if colours.shape[2] == 4 else "RGB").save(stream, "PNG", optimize=True)
    address = "data:image/png;base64," + base64.b64encode(stream.getvalue()).decode("ascii")
    return element("image", {**attributes, "href": address, "preserveAspectRatio": "none"})
