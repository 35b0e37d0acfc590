"""Several Gaussian fields known through places that each speak of all of them: expectation propagation.

Fields (q,) at n places have independent normal priors; each place's likelihood, of whatever shape, is stood for by a
normal site in its q fields. A site is what matches the moments of cavity times likelihood (Minka 2001; Rasmussen and
Williams 2006, sect. 3.6; both from memory). Arrays are field-major where flat: entry f n + i is field f at place i.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import cho_factor, cho_solve, lapack

Floats = NDArray[np.float64]


# Fewer effective draws than make this ratio of fields to draws say nothing of which is which.
MOST_RATIO = 0.5


class Sites(NamedTuple):
    """What places say: precision (n, q, q) and shift (n, q), the precision times the value."""

    precision: Floats
    shift: Floats


class Posterior(NamedTuple):
    """Fields given the sites: mean (q, n), covariance (q n, q n)."""

    mean: Floats
    covariance: Floats

    def at_places(self) -> tuple[Floats, Floats]:
        """Mean (n, q) and covariance (n, q, q) of each place's fields."""
        q, n = self.mean.shape
        rows = np.arange(n)
        return self.mean.T.copy(), self.covariance.reshape(q, n, q, n)[:, rows, :, rows]

    def block(self, field: int, other: int | None = None) -> Floats:
        """Covariance (n, n) of a field over the places, or of one field with another."""
        q, n = self.mean.shape
        return self.covariance.reshape(q, n, q, n)[field, :, field if other is None else other]

    def deviation(self, field: int) -> Floats:
        """Standard deviation (n,) of a field at the places."""
        return np.sqrt(np.maximum(np.diagonal(self.block(field)), 1e-300))


def condition(prior_mean: Floats, prior_covariance: Floats, sites: Sites) -> Posterior:
    """Fields given sites. prior_mean : (q,), constant over places    prior_covariance : (q, n, n)."""
    q, n = prior_covariance.shape[:2]
    precision = np.zeros((q, n, q, n))
    for f in range(q):
        precision[f, :, f] = cho_solve(cho_factor(prior_covariance[f], lower=True), np.eye(n))
    rows = np.arange(n)
    precision[:, rows, :, rows] += sites.precision
    flat = precision.reshape(q * n, q * n)
    factor, failed = lapack.dpotrf(flat, lower=1, overwrite_a=1)
    if failed:
        raise np.linalg.LinAlgError
    inverse, _ = lapack.dpotri(factor, lower=1)
    covariance = np.tril(inverse) + np.tril(inverse, -1).T
    pull = sites.shift - np.einsum("ifg,g->if", sites.precision, prior_mean)
    mean = prior_mean[:, None] + (covariance @ pull.T.ravel()).reshape(q, n)
    return Posterior(mean, covariance)


def cavities(mean: Floats, covariance: Floats, sites: Sites) -> tuple[Floats, Floats]:
    """Mean (n, q) and precision (n, q, q) of each place's fields as all others have them."""
    marginal = np.linalg.inv(covariance)
    precision = marginal - sites.precision
    # Rounding and damping may leave a cavity that is hardly defined; it is never less than a trace of the marginal.
    values, vectors = np.linalg.eigh(_whiten(precision, covariance))
    if np.any(values < 1e-6):
        root = np.linalg.cholesky(marginal)
        values = np.maximum(values, 1e-6)
        precision = root @ (vectors * values[:, None]) @ vectors.transpose(0, 2, 1) @ root.transpose(0, 2, 1)
    shift = np.matmul(marginal, mean[..., None])[..., 0] - sites.shift
    return np.linalg.solve(precision, shift[..., None])[..., 0], precision


def _whiten(precision: Floats, covariance: Floats) -> Floats:
    """`precision` in the coordinates in which the marginal is standard."""
    root = np.linalg.inv(np.linalg.cholesky(np.linalg.inv(covariance)))
    return root @ precision @ root.transpose(0, 2, 1)


def denoise(cavity_precision: Floats, covariance: Floats, size: Floats) -> Floats:
    """Covariances (n, q, q) from few effective draws, `size` (n,), with what chance alone makes of them taken out.

    Where draws say no more than the cavity, chance still makes some directions narrower and others wider; a site knows
    only narrower ones, and chance would pass for knowledge, at every place anew. In the cavity's own coordinates what
    is not known has variance 1: what lies within the spread of chance about it (Marchenko and Pastur 1967) is taken
    for that, what lies outside is corrected for its bias (spiked covariances: Donoho, Gavish and Johnstone 2018,
    Annals of Statistics 46, 1742-1778; both from memory).
    """
    q = covariance.shape[1]
    root = np.linalg.cholesky(cavity_precision)
    seen = root.transpose(0, 2, 1) @ covariance @ root
    values, vectors = np.linalg.eigh(0.5 * (seen + seen.transpose(0, 2, 1)))
    ratio = np.minimum(q / size, MOST_RATIO)[:, None]
    half = 0.5 * (1.0 + values - ratio)
    bend = np.sqrt(np.maximum(half**2 - values, 0.0))
    spread = 2.0 * np.sqrt(ratio)
    true = np.select(
        [values < 1.0 + ratio - spread, values > 1.0 + ratio + spread], [half - bend, half + bend], np.ones_like(values)
    )
    back = np.linalg.inv(root).transpose(0, 2, 1) @ vectors
    return np.asarray((back * true[:, None]) @ back.transpose(0, 2, 1))


def cut(
    cavity_mean: Floats, cavity_precision: Floats, mean: Floats, covariance: Floats, fields: NDArray[np.int64]
) -> tuple[Floats, Floats]:
    """Moments (n, q), (n, q, q) by which a place says nothing of some `fields`, and of the others what follows.

    The fields keep the cavity's own distribution, the others theirs given these: a cut, for what a likelihood would
    say of them only by its faults (Liu, Bayarri and Berger 2009, Bayesian Analysis 4, 119-150, from memory).
    """
    expected = np.linalg.inv(cavity_precision)[:, fields[:, None], fields]
    found = covariance[:, fields[:, None], fields]
    slope = np.linalg.solve(found, covariance[:, fields]).transpose(0, 2, 1)
    new_mean = mean + np.matmul(slope, (cavity_mean - mean)[:, fields, None])[..., 0]
    return new_mean, covariance + slope @ (expected - found) @ slope.transpose(0, 2, 1)


def match(
    cavity_mean: Floats, cavity_precision: Floats, mean: Floats, covariance: Floats, most_precision: float = 1e8
) -> Sites:
    """Sites that make cavities into the moments found; a site never takes precision away.

    All (n, q) or (n, q, q). In directions in which the moments are wider than the cavity the site says nothing.
    """
    root = np.linalg.cholesky(cavity_precision)
    seen = root.transpose(0, 2, 1) @ covariance @ root
    values, vectors = np.linalg.eigh(0.5 * (seen + seen.transpose(0, 2, 1)))
    gained = np.clip(1.0 / np.maximum(values, 1.0 / most_precision) - 1.0, 0.0, most_precision)
    precision = root @ (vectors * gained[:, None]) @ vectors.transpose(0, 2, 1) @ root.transpose(0, 2, 1)
    shift = np.matmul(cavity_precision + precision, mean[..., None]) - np.matmul(
        cavity_precision, cavity_mean[..., None]
    )
    return Sites(precision, shift[..., 0])
