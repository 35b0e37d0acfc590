"""The posterior of a layered model by a long Markov chain: slow, and knowing neither gradients nor approximations.

emcee (Foreman-Mackey and others 2013, PASP 125, 306-312) moves an ensemble of walkers; here by differences of other
walkers (ter Braak and Vrugt 2008, Statistics and Computing 18, 435-446), in scale with whatever the posterior is.
The chain is as long as its own autocorrelation time asks for (Sokal 1997, as emcee estimates it).
"""

from typing import NamedTuple

import emcee
import numpy as np

from geoves.kernels.damped_steps import laplace_draws, objective

WALKERS_PER_UNKNOWN, FEWEST_WALKERS = 10, 40
# In autocorrelation times: what is thrown away at the start, and the least that must follow it.
BURN_IN, LEAST_LENGTH = 8, 50
STEPS_AT_A_TIME, MOST_STEPS = 2000, 60_000
# Not emcee's snooker move (3.1.6): on a normal density in six dimensions it gives deviations 19 % too small.
MOVES = ((emcee.moves.DEMove(), 0.85), (emcee.moves.StretchMove(), 0.15))


class Chain(NamedTuple):
    """members : (m, p), thinned to half the autocorrelation time    effective : independent draws they are worth"""

    members: np.ndarray
    effective: float


def sample_chain(log_density, start, effective, seed):
    """A `Chain` of at least `effective` independent draws of a density; `start` (w, p) are the walkers' first places.

    `log_density` takes (m, p) to (m,). ValueError where MOST_STEPS do not suffice.
    """
    n_walkers, p = start.shape
    sampler = emcee.EnsembleSampler(n_walkers, p, log_density, vectorize=True, moves=MOVES)
    sampler.random_state = np.random.RandomState(seed).get_state()
    state = start
    while sampler.iteration < MOST_STEPS:
        state = sampler.run_mcmc(state, STEPS_AT_A_TIME)
        discarded = sampler.iteration // 5
        time = float(sampler.get_autocorr_time(discard=discarded, tol=0).max())
        length = sampler.iteration - discarded
        if discarded > BURN_IN * time and length > LEAST_LENGTH * time and n_walkers * length > effective * time:
            members = sampler.get_chain(discard=discarded, thin=max(int(time / 2), 1), flat=True)
            return Chain(members, n_walkers * length / time)
    raise ValueError(f"After {MOST_STEPS} steps the chain is worth {n_walkers * length / time:.0f} draws.")


def sample_posterior(fit, n_layers, curves, prior, *, effective=4000, seed=0):
    """A `Chain` of the unknowns of one curve's layered model, within the bounds of its prior.

    `fit`, `curves` and `prior` are batches of one; walkers start about the fit, spread by its normal approximation.
    """

    def log_density(unknowns):
        inside = np.all((unknowns >= prior.lowest) & (unknowns <= prior.highest), axis=1)
        clipped = np.clip(unknowns, prior.lowest, prior.highest)
        return np.where(inside, -objective(clipped, n_layers, curves, prior), -np.inf)

    p = fit.unknowns.shape[1]
    n_walkers = max(WALKERS_PER_UNKNOWN * p, FEWEST_WALKERS)
    normal = np.random.default_rng(seed).standard_normal((n_walkers, p))
    margin = 1e-3 * (prior.highest - prior.lowest)
    start = np.clip(laplace_draws(fit, normal), prior.lowest + margin * normal**2, prior.highest - margin * normal**2)
    return sample_chain(log_density, start, effective, seed)
