"""Eight soundings and two logs, one of which ends above the contact, and what Hamiltonian Monte Carlo makes of them.

`python -m tests.reference.hamiltonian_county` samples for some minutes and writes hamiltonian_county.json, which the
tests hold the inference against; it must be run again whenever the model's density changes (a test says so).
"""

import json
from pathlib import Path

import attrs
import numpy as np

from geoves.geology import GeologyOptions
from geoves.geology.infer import _set_up
from tests.geology.county import make_county
from tests.reference.hamiltonian import GeologyDensity, sample_hamiltonian

STORED = Path(__file__).with_name("hamiltonian_county.json")
BOUND = 56.0  # m: the one-sided log ends here, above the contact and below what its neighbours expect
CHAINS, BURN, COUNT, LEAPS = 4, 120, 420, 30


def small_task(*, bounded=True):
    """Task and priors; covariances as they stand before they are refitted, presence not following the relief."""
    county = make_county(n_soundings=8, seed=4)
    said = county.interpretation
    tops = tuple(
        attrs.evolve(top, depth=BOUND, elevation=300.0 - BOUND) if top.status == "below" else top
        for top in said.tops
        if top.place != "W2" and (bounded or top.status != "below")
    )
    thicknesses = tuple(row for row in said.thicknesses if row.place != "W2")
    said = attrs.evolve(said, tops=tops, thicknesses=thicknesses)
    _, base = _set_up(county.survey, county.inverted, said, county.template, GeologyOptions())
    # Flat layers are taken at their word: what minds them is another matter than what is held against the chains here.
    flat = base.task.spreads._replace(largest=np.full(len(base.task.names), np.nan))
    return base.task._replace(spreads=flat), tuple(prior._replace(relief_variance=0.0) for prior in base.model.priors)


def make_density(*, bounded=True):
    task, priors = small_task(bounded=bounded)
    return GeologyDensity(task, priors, np.zeros(len(task.names)))


def sample(density):
    """Chains of the whole posterior, from starts scattered about several summits; with the highest of those."""
    generator = np.random.default_rng(1)
    n, p, q = density.n, density.p, density.q
    plain = np.concatenate([np.tile(density.mean, (n, 1)), np.zeros((n, p - q))], axis=1)
    starts = []
    presence = density.task.order.first_presence
    for there in (-1.0, 1.0):
        for deeper in (-0.3, 0.3):
            start = plain.copy()
            start[:, 0] += deeper
            start[:, presence] = there
            starts.append(density.climb(start.ravel()))
    best = max(starts, key=lambda at: density(at[None])[0][0])
    covariance = np.linalg.inv(density.hessian(best))
    scattered = np.array([starts[i % len(starts)] for i in range(CHAINS)])
    scattered = scattered + 0.5 * generator.standard_normal((CHAINS, n * p)) @ np.linalg.cholesky(covariance).T
    return best, sample_hamiltonian(density, scattered, covariance, 2, burn=BURN, count=COUNT, leaps=LEAPS)


def summarise(chains, density):
    """Means and deviations (n, q) of the fields, correlations (n, n) of the basal contact between places,
    and how far the chains agree on each unknown (p,), at the worst place.
    """
    draws = chains.flat().reshape(-1, density.n, density.p)[:, :, : density.q]
    return {
        "mean": draws.mean(axis=0).round(5).tolist(),
        "deviation": draws.std(axis=0).round(5).tolist(),
        "correlation": np.corrcoef(draws[:, :, 0].T).round(4).tolist(),
        "acceptance": round(chains.acceptance, 3),
        "scale_reduction": chains.scale_reduction().reshape(density.n, -1).max(axis=0).round(3).tolist(),
    }


def main():
    density = make_density()
    best, chains = sample(density)
    found = {
        "names": density.task.names,
        "summit": best.tolist(),
        "log_density_at_summit": float(density(best[None])[0][0]),
        **summarise(chains, density),
    }
    STORED.write_text(json.dumps(found, indent=None) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
