"""A hidden Markov chain by brute force: every path written out, its probability multiplied up link by link."""

from itertools import pairwise, product
from math import prod

import numpy as np

# The patient who feels normal, cold, dizzy (Wikipedia, "Viterbi algorithm", from memory): healthy, healthy, fever.
START = np.array([0.6, 0.4])
TRANSITION = np.array([[0.7, 0.3], [0.4, 0.6]])
LIKELIHOOD = np.array([[0.5, 0.1], [0.4, 0.3], [0.1, 0.6]])


def enumerate_paths(likelihood, start, transition):
    """Joint probability by path (a tuple of units); likelihood (k, u), start (u,), transition (u, u)."""
    k, n_units = likelihood.shape
    return {
        path: start[path[0]]
        * prod(likelihood[i, unit] for i, unit in enumerate(path))
        * prod(transition[a, b] for a, b in pairwise(path))
        for path in product(range(n_units), repeat=k)
    }


def marginals(paths, k, n_units):
    """Probability (k, u) of each unit for each layer, and the total over all paths."""
    total = sum(paths.values())
    share = np.zeros((k, n_units))
    for path, probability in paths.items():
        for i, unit in enumerate(path):
            share[i, unit] += probability / total
    return share, total
