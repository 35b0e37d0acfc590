"""Layered models of the ground under a sounding."""

from collections.abc import Mapping

import attrs
import numpy as np

from geoves.domain.arrays import FloatArray, by_value, floats, shape


@attrs.frozen
class LayeredModel:
    """Horizontal layers over a half-space: thickness m (k-1,), resistivity ohm m (k,), top first."""

    thickness: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    resistivity: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)

    @property
    def top_depth(self) -> FloatArray:
        """Depth of each layer's top, m (k,)."""
        return np.concatenate([[0.0], np.cumsum(self.thickness)])


@attrs.frozen
class ModelEnsemble:
    """Models of one layer count that fit one curve: thickness m (m, k-1), resistivity ohm m (m, k), weight (m,)."""

    thickness: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    resistivity: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    weight: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)

    @property
    def top_depth(self) -> FloatArray:
        """Depth of each layer's top, m (m, k)."""
        return np.concatenate([np.zeros((len(self.thickness), 1)), np.cumsum(self.thickness, axis=1)], axis=1)

    @property
    def conductance(self) -> FloatArray:
        """Longitudinal conductance S of each layer above the half-space, siemens (m, k-1)."""
        return np.asarray(self.thickness / self.resistivity[:, :-1])

    @property
    def transverse_resistance(self) -> FloatArray:
        """Transverse resistance T of each layer above the half-space, ohm m² (m, k-1)."""
        return np.asarray(self.thickness * self.resistivity[:, :-1])


@attrs.frozen
class Inverted:
    """What one curve says by itself.

    model            the blocky model that the criterion chose
    ensemble         models of its layer count that fit within the errors, equally probable
    smooth           the smoothest model that fits: many thin layers, as alike as the readings allow
    log_covariance   of (ln thickness, ln resistivity) over the ensemble, (2k-1, 2k-1)
    trade_offs       in words: which combinations the curve knows although it does not know their parts
    segment_factor   factor on each segment's apparent resistivity, 1 for the first, (segments,)
    predicted        apparent resistivity of the model at each reading, without factors, ohm m (n,)
    robust_weight    0 to 1 for each reading: near 0 for what the robust misfit set aside (n,)
    rms_percent      root mean square relative misfit of the used readings, outliers down-weighted
    noise            relative error found from the residuals, widened where neighbouring errors are alike
    error_correlation  of neighbouring readings' errors over the survey, 0 where none is plain
    criterion        value of the choosing criterion for each layer count tried; the least is best
    investigated_depth  m: below it a change of resistivity alters the curve by less than its error
    remarks          what a person should know, in words
    """

    sounding: str
    model: LayeredModel
    ensemble: ModelEnsemble
    log_covariance: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    segment_factor: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    predicted: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    robust_weight: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    rms_percent: float
    noise: float
    criterion: Mapping[int, float]
    investigated_depth: float
    remarks: tuple[str, ...] = ()
    smooth: LayeredModel | None = None
    trade_offs: tuple[str, ...] = ()
    error_correlation: float = 0.0

    @property
    def n_layers(self) -> int:
        return self.model.resistivity.size
