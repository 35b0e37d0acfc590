"""Lines, areas and places drawn from the surfaces: contours, the valley's axis, the gravel's extent, the permits."""

from geoves.layers.derive import derive_layers
from geoves.layers.options import LayerOptions

__all__ = ["LayerOptions", "derive_layers"]
