"""Layers to units when the order of the column is known: forward-backward and the best path.

A hidden Markov chain from the top layer down (Rabiner 1989, Proceedings of the IEEE 77, 257-286), in logs.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.special import logsumexp

Floats = NDArray[np.float64]


class UnitPaths(NamedTuple):
    """probability : (k, u) of each unit for each layer    best : (k,) int, the most probable path    log_evidence"""

    probability: Floats
    best: NDArray[np.int64]
    log_evidence: float


def ordered_transition(n_units: int, stay: float) -> Floats:
    """Log probability (u, u) of passing from a unit to itself or to any unit below it, never upward.

    A layer repeats the unit above with probability `stay`; the units below share the rest evenly.
    """
    transition = np.full((n_units, n_units), -np.inf)
    for i in range(n_units):
        below = n_units - 1 - i
        transition[i, i] = np.log(stay) if below else 0.0
        transition[i, i + 1 :] = np.log((1.0 - stay) / below) if below else -np.inf
    return transition


def read_units(log_likelihood: Floats, log_start: Floats, log_transition: Floats) -> UnitPaths:
    """Unit probabilities of k layers.

    log_likelihood : (k, u) of each layer's evidence under each unit    log_start : (u,)    log_transition : (u, u)
    """
    k, n_units = log_likelihood.shape
    forward, backward = np.empty((k, n_units)), np.zeros((k, n_units))
    score, origin = np.empty((k, n_units)), np.zeros((k, n_units), dtype=np.int64)
    forward[0] = score[0] = log_start + log_likelihood[0]
    for i in range(1, k):
        forward[i] = log_likelihood[i] + logsumexp(forward[i - 1][:, None] + log_transition, axis=0)
        ways = score[i - 1][:, None] + log_transition
        origin[i] = np.argmax(ways, axis=0)
        score[i] = log_likelihood[i] + np.max(ways, axis=0)
    for i in range(k - 2, -1, -1):
        backward[i] = logsumexp(log_transition + log_likelihood[i + 1] + backward[i + 1], axis=1)
    log_evidence = float(logsumexp(forward[-1]))
    best = np.empty(k, dtype=np.int64)
    best[-1] = int(np.argmax(score[-1]))
    for i in range(k - 1, 0, -1):
        best[i - 1] = origin[i, best[i]]
    return UnitPaths(np.exp(forward + backward - log_evidence), best, log_evidence)
