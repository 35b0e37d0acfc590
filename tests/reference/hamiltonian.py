"""The posterior of all fields of a small county by Hamiltonian Monte Carlo: slow, and knowing no sites, no clouds.

Neal 2011, MCMC using Hamiltonian dynamics, Handbook of Markov Chain Monte Carlo, ch. 5 (from memory): leapfrog in the
metric of the Gauss-Newton Hessian at the most probable fields, steps of random length, a Metropolis step at the end.
The density is written out: normal fields by dense inverses, times what each place says.
"""

from typing import NamedTuple

import numpy as np

from geoves.geology.inference import SEGMENT_DEVIATION
from geoves.kernels.field_priors import own_covariance
from geoves.kernels.joint_state import evaluate

# Higher than is best for normal densities: curved ridges (gravel thin and surely there, thick and hardly) need it.
TARGET_ACCEPTANCE = 0.93


class Chains(NamedTuple):
    """draws : (count, chains, d)    acceptance : mean over chains and steps"""

    draws: np.ndarray
    acceptance: float

    def flat(self):
        return self.draws.reshape(-1, self.draws.shape[2])

    def scale_reduction(self):
        """R-hat (d,) of Gelman and Rubin 1992, each chain in halves (from memory): near 1 where chains agree."""
        half = len(self.draws) // 2
        parts = np.concatenate([self.draws[:half], self.draws[half : 2 * half]], axis=1)
        within = parts.var(axis=0, ddof=1).mean(axis=0)
        between = parts.mean(axis=0).var(axis=0, ddof=1)
        return np.sqrt((half - 1) / half + between / within)


def sample_hamiltonian(target, start, covariance, seed, *, burn=300, count=1000, leaps=15):
    """`Chains` of a target that takes (c, d) to log density (c,) and gradient (c, d); `start` (c, d).

    The step is tuned while burning in, by its acceptance, and then left.
    """
    generator = np.random.default_rng(seed)
    factor = np.linalg.cholesky(covariance)  # unknowns are factor @ z, and z has a unit mass
    position = start.copy()
    log_density, gradient = target(position)
    step, kept, accepted_share = 0.3, [], []
    for turn in range(burn + count):
        momentum = generator.standard_normal(position.shape)
        here, slope = position.copy(), gradient @ factor
        energy = -log_density + 0.5 * np.sum(momentum**2, axis=1)
        length = step * generator.uniform(0.7, 1.3)
        new_density, new_gradient = log_density, gradient
        for _ in range(generator.integers(leaps // 2, leaps + 1)):
            momentum = momentum + 0.5 * length * slope
            here = here + length * momentum @ factor.T
            new_density, new_gradient = target(here)
            slope = new_gradient @ factor
            momentum = momentum + 0.5 * length * slope
        with np.errstate(over="ignore", invalid="ignore"):
            probability = np.exp(np.minimum(energy + new_density - 0.5 * np.sum(momentum**2, axis=1), 0.0))
        probability = np.nan_to_num(probability)
        accepted = generator.random(len(position)) < probability
        position = np.where(accepted[:, None], here, position)
        log_density = np.where(accepted, new_density, log_density)
        gradient = np.where(accepted[:, None], new_gradient, gradient)
        if turn < burn:
            step *= np.exp((probability.mean() - TARGET_ACCEPTANCE) / np.sqrt(1.0 + turn))
        else:
            kept.append(position)
            accepted_share.append(probability.mean())
    return Chains(np.array(kept), float(np.mean(accepted_share)))


class GeologyDensity:
    """Log density of all unknowns of a county, (c, n p) place by place: covariances and relief held as given."""

    def __init__(self, task, priors, relief):
        self.task, self.q = task, task.order.n_fields
        self.n, self.p = len(task.names), task.order.n_fields + task.places.n_factors
        self.mean = np.array([prior.mean for prior in priors])
        self.precision = np.array([np.linalg.inv(own_covariance(prior, task.points, relief)) for prior in priors])

    def __call__(self, unknowns):
        log_density, gradient, _ = self.evaluate(unknowns)
        return log_density, gradient

    def evaluate(self, unknowns):
        """Log density (c,) but for a constant, gradient (c, n p), Gauss-Newton curvature of each place (c, n, p, p)."""
        c, n, p, q = len(unknowns), self.n, self.p, self.q
        at = unknowns.reshape(c, n, p)
        said = evaluate(at.reshape(c * n, p), self.task.places.take(np.tile(np.arange(n), c)), self.task.order)
        away = at[:, :, :q] - self.mean
        pull = np.einsum("fij,cjf->cif", self.precision, away)
        log_density = said.log_likelihood.reshape(c, n).sum(axis=1) - 0.5 * np.sum(away * pull, axis=(1, 2))
        log_density -= 0.5 * np.sum((at[:, :, q:] / SEGMENT_DEVIATION) ** 2, axis=(1, 2))
        gradient = said.gradient.reshape(c, n, p).copy()
        gradient[:, :, :q] -= pull
        gradient[:, :, q:] -= at[:, :, q:] / SEGMENT_DEVIATION**2
        return log_density, gradient.reshape(c, n * p), said.curvature.reshape(c, n, p, p)

    def hessian(self, unknowns):
        """Minus the Gauss-Newton Hessian (n p, n p) at unknowns (n p,)."""
        n, p, q = self.n, self.p, self.q
        curvature = self.evaluate(unknowns[None])[2][0]
        full = np.zeros((n, p, n, p))
        places, fields, factors = np.arange(n), np.arange(q), np.arange(q, p)
        full[places, :, places] = curvature
        for f in fields:
            full[:, f, :, f] += self.precision[f]
        for s in factors:
            full[places, s, places, s] += SEGMENT_DEVIATION**-2
        return full.reshape(n * p, n * p)

    def climb(self, start, iterations=200):
        """The most probable unknowns (n p,) near a start, by damped Gauss-Newton on all at once."""
        at, damping = start.copy(), 1.0
        (value,), (gradient,) = self(at[None])
        for _ in range(iterations):
            hessian = self.hessian(at)
            trial = at + np.linalg.solve(hessian + damping * np.diag(np.diag(hessian)), gradient)
            (then,), (slope,) = self(trial[None])
            if then > value:
                gain, at, value, gradient, damping = then - value, trial, then, slope, damping * 0.3
                if gain < 1e-7:
                    break
            else:
                damping *= 4.0
        return at
