"""What layered ground can show: curves of many drawn columns, and what all other readings of a curve say of one.

The logs of apparent resistivity over drawn columns have a mean and a covariance between electrode layouts. With the
noise of a reading and a factor for each change of MN they give, for every reading, the best linear prediction from all
the others, and how sure it is. No model of the sounding is sought: the whole survey takes a fraction of a second.
"""

from collections.abc import Iterable

import attrs
import numpy as np

from geoves.domain.arrays import FloatArray, floats
from geoves.domain.survey import Curve
from geoves.kernels.layered_earth import response, response_weights, wavenumber_grid

# The drawn columns: how many, of how many layers, and the standard deviation of each layer's log resistivity.
COLUMNS, LAYERS, CONTRAST = 1500, 6, 1.0
# A factor of each change of MN, natural log: wide, for field work shows 0.78 to 1.22 and slips more.
SHIFT_DEVIATION = 0.25
# Variance that makes a prior flat: of a curve's level, and of a reading that is not to speak.
FLAT = 100.0
_SEED = 20

Layout = tuple[float, float]


@attrs.frozen
class LayeredGround:
    """Log apparent resistivity of the drawn columns, (columns, layouts), and the place of each (AB/2, MN/2) in it."""

    index: dict[Layout, int]
    log_response: FloatArray = attrs.field(converter=floats)

    def find(self, half_spacing: FloatArray, potential_half_spacing: FloatArray) -> np.ndarray:
        """Indices (n,) of layouts."""
        pairs = zip(half_spacing.tolist(), potential_half_spacing.tolist(), strict=True)
        return np.array([self.index[pair] for pair in pairs], dtype=int)


@attrs.frozen
class Prediction:
    """What the other readings say of each, natural logs (n,).

    residual   observed less predicted by all others, `deviation` its standard deviation
    layered    the layered ground's own part, without the factors of segments, from all readings together
    precision, weighted : inverse covariance (n, n) of the readings and its product with them
    """

    residual: FloatArray
    deviation: FloatArray
    layered: FloatArray
    precision: FloatArray
    weighted: FloatArray

    @property
    def score(self) -> FloatArray:
        """Residuals in standard deviations."""
        return np.asarray(self.residual / self.deviation)

    def pairs(self, first: np.ndarray, second: np.ndarray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Residuals (p,) of each of two readings predicted from all but these two, and their chi-square together (p,).

        first, second : indices (p,)
        """
        one, both, other = (self.precision[i, j] for i, j in ((first, first), (first, second), (second, second)))
        left, right = self.weighted[first], self.weighted[second]
        determinant = one * other - both * both
        off_first = (other * left - both * right) / determinant
        off_second = (one * right - both * left) / determinant
        return off_first, off_second, left * off_first + right * off_second


def draw_layered_ground(layouts: Iterable[Layout]) -> LayeredGround | None:
    """Drawn columns' responses at the layouts (AB/2, MN/2 in m), None where there are none.

    Interfaces are log-uniform between a fifth of the shortest AB/2 and the longest, logs of resistivities normal.
    """
    distinct = sorted(set(layouts))
    if not distinct:
        return None
    a, b = np.array(distinct).T
    generator = np.random.default_rng(_SEED)
    depth = np.sort(generator.uniform(np.log(0.2 * a.min()), np.log(a.max()), (COLUMNS, LAYERS - 1)), axis=1)
    thickness = np.diff(np.exp(depth), prepend=0.0)
    resistivity = np.exp(CONTRAST * generator.standard_normal((COLUMNS, LAYERS)))
    wavenumber = wavenumber_grid(float((a - b).min()), float((a + b).max()))
    weights = response_weights(a, b, wavenumber)
    apparent = response(weights[None], wavenumber, np.maximum(thickness, 1e-6), resistivity)
    return LayeredGround(
        {pair: i for i, pair in enumerate(distinct)}, np.log(np.maximum(apparent, np.finfo(float).tiny))
    )


def layouts_of(curve: Curve) -> list[Layout]:
    """The layouts that judging a curve needs: its own, and each MN/2 with the AB/2 before and after."""
    spacing = np.unique(curve.half_spacing[curve.used])
    pairs = []
    for a, b in zip(curve.half_spacing[curve.used], curve.potential_half_spacing[curve.used], strict=True):
        at = int(np.searchsorted(spacing, a))
        around = spacing[max(at - 1, 0) : at + 2]
        pairs += [(float(one), float(b)) for one in around if one > b]
    return pairs


def covariance_of(ground: LayeredGround, layout: np.ndarray) -> tuple[FloatArray, FloatArray]:
    """Mean (n,) and covariance (n, n) of log apparent resistivity at layouts, given by index; the level is free."""
    drawn = ground.log_response[:, layout]
    mean = drawn.mean(axis=0)
    centred = drawn - mean
    return mean, centred.T @ centred / len(drawn) + FLAT


def predict_each(
    log_apparent: FloatArray, deviation: FloatArray, segment: np.ndarray, prior: tuple[FloatArray, FloatArray],
    silent: np.ndarray,
) -> Prediction:  # fmt: skip
    """Each reading from all others.

    log_apparent, deviation (of the noise), segment (counted from 0 without gaps) : (n,)
    prior : mean (n,) and covariance (n, n) from `covariance_of`    silent : (n,) True for readings that say nothing
    of the others, of which they say something all the same.
    """
    mean, ground = prior
    shift = SHIFT_DEVIATION**2 * np.minimum.outer(segment, segment)
    noise = deviation**2 + np.where(silent, FLAT, 0.0)
    precision = np.linalg.inv(ground + shift + np.diag(noise))
    weighted = precision @ (log_apparent - mean)
    own = np.diag(precision)
    variance = np.maximum(1.0 / own - np.where(silent, FLAT, 0.0), deviation**2)
    return Prediction(weighted / own, np.sqrt(variance), mean + ground @ weighted, precision, weighted)
