"""Members that follow a posterior: importance sampling from a mixture that grows where it is too thin.

The normal approximation in log thickness is too wide where thicknesses trade off against each other (their sum known,
their shares not), too narrow along the arms of such a trade-off, and pushes sums upward. Weighing its draws by the
posterior mends the first; for the second, components are added about the draws of greatest weight, with the local
curvature (incremental mixture importance sampling: Raftery and Bao 2010, Biometrics 66, 1162-1173). Every member is
weighed by the whole mixture that it might have come from, so the sum of weights estimates the evidence.
"""

from collections.abc import Callable, Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaln

from geoves.kernels.damped_steps import Curves, Fit, Prior, local_hessian, objective

Floats = NDArray[np.float64]

# Degrees of freedom of the first component, about the fit, and of those added: heavy tails keep the weights bounded.
FIRST_FREEDOM, ADDED_FREEDOM = 5.0, 8.0
# The first component is a little wider than the normal approximation.
WIDENING = 1.1
# Members evaluated at a time: their arrays stay in the processor's cache.
BLOCK = 64


class Density(NamedTuple):
    """A posterior of one curve's layered models, known at its most probable model; `fit` and `prior` of one row.

    log_weight : log prior weight among other densities
    limits : further log weight (m,) of members (m, p)
    """

    fit: Fit
    n_layers: int
    prior: Prior
    log_weight: float = 0.0
    limits: Callable[[Floats], Floats] | None = None


class Effort(NamedTuple):
    """first : members about the fits, shared by the densities' weights    fewest : but at least so many for each
    each, at_once : members about a draw of great weight, and about how many such draws a round
    rounds : rounds at most    enough : effective number of members at which no further round is made
    """

    first: int
    fewest: int
    each: int
    at_once: int
    rounds: int
    enough: float


class Members(NamedTuple):
    """unknowns : (m, p)    log_weight : (m,), their sum is the evidence (times the density's prior weight)"""

    unknowns: Floats
    log_weight: Floats

    @property
    def log_evidence(self) -> float:
        """Log of the sum of weights."""
        return float(np.logaddexp.reduce(self.log_weight))


def effective_number(log_weight: Floats) -> float:
    """How many members of equal weight say as much (Kish 1965): (Σw)² / Σw², 0 where no weight is above 0."""
    most = log_weight.max()
    if np.isneginf(most):
        return 0.0
    share = np.exp(log_weight - most)
    return float(share.sum() ** 2 / np.sum(share**2))


def sample_densities(
    densities: Sequence[Density], curves: Curves, effort: Effort, generator: np.random.Generator
) -> list[Members]:
    """Weighed members of several densities of one curve, sampled as one: effort goes where the weight is.

    `curves` is a batch of one. Weights are truncated at the mean of all times the root of their number (Ionides 2008,
    Journal of Computational and Graphical Statistics 17, 295-311, from memory), so that no lone draw speaks for all.
    """
    pools = [_Pool(density, curves) for density in densities]
    expected = np.array([density.log_weight + float(density.fit.log_evidence[0]) for density in densities])
    share = np.exp(expected - np.logaddexp.reduce(expected))
    for pool, n in zip(pools, np.maximum(np.ceil(effort.first * share), effort.fewest).astype(int), strict=True):
        pool.add(pool.density.fit.unknowns, pool.density.fit.hessian, (n, WIDENING, FIRST_FREEDOM), generator)
    for _ in range(effort.rounds):
        log_weight = np.concatenate([pool.log_weight for pool in pools])
        if np.isneginf(log_weight).all() or effective_number(log_weight) >= effort.enough:
            break
        _thicken(pools, effort, generator)
    log_weight = np.concatenate([pool.log_weight for pool in pools])
    if np.isneginf(log_weight).all():
        # Nothing of the approximations lies within the bounds: the fits themselves are all that is known.
        return [Members(pool.density.fit.unknowns.copy(), expected[[q]]) for q, pool in enumerate(pools)]
    most = np.logaddexp.reduce(log_weight) - 0.5 * np.log(log_weight.size)
    return [Members(pool.unknowns, np.minimum(pool.log_weight, most)) for pool in pools]


def _thicken(pools: Sequence["_Pool"], effort: Effort, generator: np.random.Generator) -> None:
    """Add components about the heaviest draws, none within a component that this round has placed already."""
    remaining = [pool.log_weight.copy() for pool in pools]
    centres: dict[int, list[int]] = {}
    hessians: dict[int, list[Floats]] = {}
    for _ in range(effort.at_once):
        q = int(np.argmax([weight.max() for weight in remaining]))
        row = int(np.argmax(remaining[q]))
        if np.isneginf(remaining[q][row]):
            break
        hessian = pools[q].curvature(row)
        away = pools[q].unknowns - pools[q].unknowns[row]
        remaining[q][np.einsum("mi,ij,mj->m", away, hessian, away) < away.shape[1]] = -np.inf
        remaining[q][row] = -np.inf
        centres.setdefault(q, []).append(row)
        hessians.setdefault(q, []).append(hessian)
    for q, rows in centres.items():
        pools[q].add(pools[q].unknowns[rows], np.array(hessians[q]), (effort.each, 1.0, ADDED_FREEDOM), generator)


class _Pool:
    """Members of one density and the mixture that they came from.

    unknowns : (m, p)    log_posterior : (m,)    log_mixture : (m,), of Σ n q(u) over components of n members each
    """

    def __init__(self, density: Density, curves: Curves) -> None:
        p = density.fit.unknowns.shape[1]
        self.density, self.curves = density, curves
        self.unknowns, self.log_posterior, self.log_mixture = np.empty((0, p)), np.empty(0), np.empty(0)
        self.centres, self.factors = np.empty((0, p)), np.empty((0, p, p))
        self.freedom, self.log_scale = np.empty(0), np.empty(0)

    @property
    def log_weight(self) -> Floats:
        return np.asarray(self.density.log_weight + self.log_posterior - self.log_mixture)

    def curvature(self, row: int) -> Floats:
        """Gauss-Newton Hessian (p, p) at a member."""
        return local_hessian(self.unknowns[row : row + 1], self.density.n_layers, self.curves, self.density.prior)[0]

    def add(
        self, centres: Floats, hessians: Floats, shape: tuple[int, float, float], generator: np.random.Generator
    ) -> None:
        """Members from multivariate t about c centres (c, p); `shape` is members each, widening, degrees of freedom."""
        each, widening, freedom = shape
        c, p = centres.shape
        factors: Floats = np.asarray(np.linalg.cholesky(hessians) / widening, dtype=np.float64)
        mixing = np.sqrt(freedom / generator.chisquare(freedom, (c, each, 1)))
        standard = mixing * generator.standard_normal((c, each, p))
        drawn = centres[:, None] + np.linalg.solve(factors.transpose(0, 2, 1), standard.transpose(0, 2, 1)).transpose(
            0, 2, 1
        )
        scale = _log_student_scale(factors, freedom) + np.log(each)
        added = centres, factors, np.full(c, freedom), scale
        self.log_mixture = np.logaddexp(self.log_mixture, _log_mixture(self.unknowns, *added))
        self.centres, self.factors, self.freedom, self.log_scale = (
            np.concatenate(parts)
            for parts in zip((self.centres, self.factors, self.freedom, self.log_scale), added, strict=True)
        )
        new = drawn.reshape(-1, p)
        mixture = _log_mixture(new, self.centres, self.factors, self.freedom, self.log_scale)
        self.unknowns = np.concatenate([self.unknowns, new])
        self.log_posterior = np.concatenate([self.log_posterior, self._log_posterior(new)])
        self.log_mixture = np.concatenate([self.log_mixture, mixture])

    def _log_posterior(self, unknowns: Floats) -> Floats:
        """Log posterior density (m,), minus infinity beyond the bounds."""
        prior, k = self.density.prior, self.density.n_layers
        inside = np.all((unknowns >= prior.lowest) & (unknowns <= prior.highest), axis=1)
        found = np.full(len(unknowns), -np.inf)
        kept = unknowns[inside]
        parts = [objective(kept[i : i + BLOCK], k, self.curves, prior) for i in range(0, len(kept), BLOCK)]
        found[inside] = -np.concatenate(parts) if parts else 0.0
        if self.density.limits is not None and len(kept):
            found[inside] += self.density.limits(kept)
        return found


def _log_student_scale(factors: Floats, freedom: float) -> Floats:
    """Log of the normalising factor (c,) of multivariate t densities; `factors` (c, p, p) of their inverse scales."""
    p = factors.shape[1]
    log_root = np.log(np.diagonal(factors, axis1=1, axis2=2)).sum(axis=1)
    constant = gammaln(0.5 * (freedom + p)) - gammaln(0.5 * freedom) - 0.5 * p * np.log(freedom * np.pi)
    return np.asarray(constant + log_root)


def _log_mixture(unknowns: Floats, centres: Floats, factors: Floats, freedom: Floats, log_scale: Floats) -> Floats:
    """Log of the sum (m,) over c multivariate t densities with factors exp(log_scale) (c,) at unknowns (m, p)."""
    p = unknowns.shape[1]
    standard = np.matmul(unknowns - centres[:, None], factors)
    square = np.einsum("cmp,cmp->cm", standard, standard)
    own = freedom[:, None]
    return np.asarray(np.logaddexp.reduce(log_scale[:, None] - 0.5 * (own + p) * np.log1p(square / own), axis=0))


def resample(log_weight: Floats, count: int, generator: np.random.Generator) -> NDArray[np.int64]:
    """Rows (count,) drawn in proportion to their weights, evenly spread (systematic resampling, Kitagawa 1996)."""
    share = np.cumsum(np.exp(log_weight - np.logaddexp.reduce(log_weight)))
    return np.minimum(np.searchsorted(share, (np.arange(count) + generator.random()) / count), share.size - 1)
