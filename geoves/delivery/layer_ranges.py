"""What the models that fit a curve allow for each layer: 5 % and 95 % quantiles over the weighted ensemble."""

import attrs
import numpy as np

from geoves.domain.arrays import FloatArray
from geoves.domain.earth import Inverted


@attrs.frozen(eq=False)
class LayerRanges:
    """Rows 5 % and 95 %, a column a layer, (2, k): the half-space has no thickness and so no S or T, which are NaN.

    resistivity ohm m; thickness and top_depth m; conductance S siemens; transverse_resistance T ohm m²
    """

    resistivity: FloatArray
    thickness: FloatArray
    top_depth: FloatArray
    conductance: FloatArray
    transverse_resistance: FloatArray


def find_layer_ranges(found: Inverted) -> LayerRanges:
    """The ranges of every layer of the chosen model's layer count."""
    members = found.ensemble
    parts = (
        members.resistivity,
        members.thickness,
        members.top_depth,
        members.conductance,
        members.transverse_resistance,
    )
    # One call for all: a weighted quantile sorts each column by itself.
    together = np.quantile(
        np.concatenate(parts, axis=1), [0.05, 0.95], axis=0, method="inverted_cdf", weights=members.weight
    )
    ends = np.cumsum([part.shape[1] for part in parts])[:-1]
    return LayerRanges(*(_pad(one, found.n_layers) for one in np.split(together, ends, axis=1)))


def _pad(quantiles: FloatArray, layers: int) -> FloatArray:
    missing = layers - quantiles.shape[1]
    return np.pad(quantiles, ((0, 0), (0, missing)), constant_values=np.nan) if missing else quantiles
