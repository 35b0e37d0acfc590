"""Members that follow a posterior: importance sampling about the most probable model.

The normal approximation in log thickness is too wide where thicknesses trade off against each other (their sum known,
their shares not) and pushes sums upward. Weighing its draws by the posterior itself mends both, and the mean weight is
an estimate of the evidence that needs no normality.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaln

from geoves.kernels.damped_steps import Curves, Fit, Prior, laplace_draws, objective

Floats = NDArray[np.float64]

# Degrees of freedom of the proposal: tails heavier than the posterior's keep the weights bounded.
FREEDOM = 5.0
# Members evaluated at a time: their arrays stay in the processor's cache.
BLOCK = 64
# The proposal is a little wider than the normal approximation.
WIDENING = 1.1


class Members(NamedTuple):
    """unknowns : (m, p)    log_weight : (m,), of posterior density (not normalised) over proposal density"""

    unknowns: Floats
    log_weight: Floats

    @property
    def log_evidence(self) -> float:
        """Log of the mean weight."""
        return float(np.logaddexp.reduce(self.log_weight) - np.log(self.log_weight.size))


def sample_importance(
    fit: Fit, n_layers: int, curves: Curves, prior: Prior, count: int, generator: np.random.Generator
) -> Members:
    """Weighed members about the fit of one curve; `fit`, `curves` and `prior` are batches of one.

    The proposal is a multivariate t about the fit with the inverse Hessian as its scale. Weights are truncated at
    the mean times the root of their number (Ionides 2008, Journal of Computational and Graphical Statistics 17,
    295-311, from memory), so that no lone draw speaks for all.
    """
    p = fit.unknowns.shape[1]
    mixing = np.sqrt(FREEDOM / generator.chisquare(FREEDOM, (count, 1)))
    normal = generator.standard_normal((count, p))
    standard = WIDENING * mixing * normal
    unknowns = laplace_draws(fit, standard)
    inside = np.all((unknowns >= prior.lowest) & (unknowns <= prior.highest), axis=1)
    log_proposal = _log_student(standard / WIDENING, fit) - p * np.log(WIDENING)
    clipped = np.clip(unknowns, prior.lowest, prior.highest)
    parts = [objective(clipped[i : i + BLOCK], n_layers, curves, prior) for i in range(0, count, BLOCK)]
    log_weight = np.where(inside, -np.concatenate(parts) - log_proposal, -np.inf)
    if not inside.any():
        # Nothing of the approximation lies within the bounds: the fit itself is all that is known.
        return Members(fit.unknowns.copy(), fit.log_evidence)
    mean = np.logaddexp.reduce(log_weight) - np.log(count)
    return Members(clipped, np.minimum(log_weight, mean + 0.5 * np.log(count)))


def _log_student(standard: Floats, fit: Fit) -> Floats:
    """Log density (m,) of a multivariate t with the fit's inverse Hessian as scale, at standardised draws (m, p)."""
    p = standard.shape[1]
    _, log_determinant = np.linalg.slogdet(fit.hessian[0])
    constant = gammaln(0.5 * (FREEDOM + p)) - gammaln(0.5 * FREEDOM) - 0.5 * p * np.log(FREEDOM * np.pi)
    square = np.sum(standard**2, axis=1)
    return np.asarray(constant + 0.5 * log_determinant - 0.5 * (FREEDOM + p) * np.log1p(square / FREEDOM))


def resample(log_weight: Floats, count: int, generator: np.random.Generator) -> NDArray[np.int64]:
    """Rows (count,) drawn in proportion to their weights, evenly spread (systematic resampling, Kitagawa 1996)."""
    share = np.cumsum(np.exp(log_weight - np.logaddexp.reduce(log_weight)))
    return np.minimum(np.searchsorted(share, (np.arange(count) + generator.random()) / count), share.size - 1)
