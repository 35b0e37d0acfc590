"""Gaussian realisations of a covariance on a regular lattice, and between its nodes.

A realisation hangs on its seed and its number alone, not on how many are drawn, in what order, or for which cells.
Conditioned to data by kriging what an unconditional realisation lacks there (Journel 1974, Economic Geology 69,
673-687, from memory): `geoves.kernels.kriging` does that.
"""

from collections.abc import Iterator, Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.fft import fft2, fftfreq, next_fast_len
from scipy.sparse import csr_array

from geoves.kernels.covariances import Covariance, FloatArray, IntArray, covariance_matrix

# Eigenvalues may be negative by so much of their sum before a larger torus is tried; then they are set to 0.
_NEGLIGIBLE = 1e-4
# Nodes of a torus at most: 0.4 GB of complex numbers.
_LARGEST_TORUS = 2**24


class Lattice(NamedTuple):
    """Nodes `spacing` apart from `west`, `south` (the first node itself), in the unit of the CRS."""

    west: float
    south: float
    spacing: float
    n_rows: int
    n_columns: int

    @property
    def size(self) -> int:
        """Number of nodes."""
        return self.n_rows * self.n_columns


class Embedding(NamedTuple):
    """A covariance on a torus that holds the lattice.

    amplitude : (torus rows, torus columns), roots of the eigenvalues over the number of nodes
    lost      : share of the variance in negative eigenvalues, which were set to 0; 0 where the embedding is exact
    """

    amplitude: FloatArray
    lattice: Lattice
    lost: float


# Nodes around a point that an interpolation uses, along each axis, and how many lie before it.
_TAPS, _BEFORE = 4, 1


def lay_lattice(points: FloatArray, spacing: float, through: FloatArray, margin: int = 2) -> Lattice:
    """The lattice that holds `points` (m, 2) and has a node at the place `through` (2,), or would if it went so far.

    `margin` nodes more lie on each side, so that any point has the sixteen nodes that its interpolation needs.
    """
    first = np.floor((points.min(axis=0) - through) / spacing + 1e-6) - margin
    last = np.ceil((points.max(axis=0) - through) / spacing - 1e-6) + margin
    (n_columns, n_rows), (west, south) = (last - first + 1).astype(int), through + first * spacing
    return Lattice(float(west), float(south), spacing, int(n_rows), int(n_columns))


# Nodes along the shorter length that a covariance needs: rough fields lose more between them.
_NODES_A_LENGTH = {"matern32": 16.0, "gaussian": 12.0, "exponential": 48.0, "spherical": 48.0}


def choose_spacing(covariance: Covariance, cell_size: float) -> float:
    """Spacing of a lattice that is fine enough for the covariance, and no finer than the cells."""
    return max(cell_size, covariance.ratio * covariance.length / _NODES_A_LENGTH[covariance.model])


def interpolation_weights(lattice: Lattice, points: FloatArray, covariance: Covariance) -> csr_array:
    """(m, nodes) weights that give a field on the lattice (nodes, from south to north) at `points` (m, 2) inside it.

    Cubic convolution of the sixteen nodes around (Keys 1981, IEEE Trans. ASSP 29, 1153-1160, from memory), scaled so
    that the variance of the field at every point is its own: interpolation alone would smooth it between the nodes.
    """
    column, row = ((points - (lattice.west, lattice.south)) / lattice.spacing).T
    first_column, first_row = (
        np.clip(np.floor(axis).astype(np.int64) - _BEFORE, 0, count - _TAPS)
        for axis, count in ((column, lattice.n_columns), (row, lattice.n_rows))
    )
    taps = np.arange(_TAPS)
    across = _cubic_convolution(column[:, None] - first_column[:, None] - taps)
    along = _cubic_convolution(row[:, None] - first_row[:, None] - taps)
    weights = (along[:, :, None] * across[:, None, :]).reshape(len(points), -1)
    rows, columns = np.divmod(np.arange(_TAPS * _TAPS), _TAPS)
    nodes = lattice.spacing * np.column_stack([columns, rows]).astype(float)
    between = covariance_matrix(nodes, nodes, covariance) / covariance.partial_sill
    weights /= np.sqrt(np.einsum("pi,pi->p", weights @ between, weights))[:, None]
    index = (first_row[:, None] + rows) * lattice.n_columns + first_column[:, None] + columns
    pointer = np.arange(0, weights.size + 1, _TAPS * _TAPS)
    return csr_array((weights.ravel(), index.ravel(), pointer), shape=(len(points), lattice.size))


def _cubic_convolution(distance: FloatArray) -> FloatArray:
    """Keys's kernel with a = -1/2, at distances in nodes."""
    d = np.abs(distance)
    near = 1.0 - 2.5 * d**2 + 1.5 * d**3
    far = 2.0 - 4.0 * d + 2.5 * d**2 - 0.5 * d**3
    return np.where(d <= 1.0, near, np.where(d < 2.0, far, 0.0))


def embed_covariance(covariance: Covariance, lattice: Lattice) -> Embedding:
    """The covariance, its nugget left out, as a block-circulant matrix known by its eigenvalues.

    The torus grows from twice the lattice until no eigenvalue is negative, or as far as memory allows; what is negative
    then is set to 0 and the rest scaled to the same variance. Dietrich and Newsam 1997, SIAM J. Sci. Comput. 18,
    1088-1107; Wood and Chan 1994, J. Comput. Graph. Stat. 3, 409-432 (both from memory).
    """
    shape = np.array([lattice.n_rows, lattice.n_columns])
    size = np.array([next_fast_len(int(2 * n)) for n in shape])
    while True:
        eigenvalues = _eigenvalues(covariance, lattice.spacing, size)
        lost = float(-np.sum(eigenvalues[eigenvalues < 0.0]) / (covariance.partial_sill * eigenvalues.size))
        larger = np.array([next_fast_len(int(np.ceil(1.5 * n))) for n in size])
        if lost <= _NEGLIGIBLE or np.prod(larger) > _LARGEST_TORUS:
            break
        size = larger
    kept = np.maximum(eigenvalues, 0.0)
    kept *= covariance.partial_sill * kept.size / kept.sum()
    return Embedding(np.sqrt(kept / kept.size), lattice, lost)


def _eigenvalues(covariance: Covariance, spacing: float, size: IntArray) -> FloatArray:
    """Eigenvalues (rows, columns) of the covariance wrapped about a torus, row by row of its distances.

    At the fold a lag and its mirror image are one node; where an oblique anisotropy tells them apart it is given
    their mean, so that the matrix stays symmetric.
    """
    rows, columns = (fftfreq(int(n), 1.0 / n) * spacing for n in size)
    first = np.empty((len(rows), len(columns)))
    origin = np.zeros((1, 2))
    for i, north in enumerate(rows):
        east = np.column_stack([columns, np.full_like(columns, north)])
        first[i] = covariance_matrix(origin, east, covariance)[0]
    mirrored = np.roll(first[::-1, ::-1], (1, 1), (0, 1))
    return np.asarray(fft2(0.5 * (first + mirrored)).real)


def draw_nodes(embedding: Embedding, seed: Sequence[int], count: int) -> NDArray[np.float32]:
    """(rows, columns, count) realisations on the lattice in single precision: 7 digits of what is random anyhow."""
    lattice = embedding.lattice
    nodes = np.empty((lattice.n_rows, lattice.n_columns, count), dtype=np.float32)
    for member, field in enumerate(draw_fields(embedding, seed, range(count))):
        nodes[:, :, member] = field
    return nodes


def draw_fields(embedding: Embedding, seed: Sequence[int], members: range) -> Iterator[FloatArray]:
    """The `members` (numbers of realisations) of a field of mean 0, (rows, columns) each, from south to north.

    seed : whole numbers that name the field. Two realisations share a transform, the real and the imaginary part of it.
    """
    lattice = embedding.lattice
    inside = slice(lattice.n_rows), slice(lattice.n_columns)
    pair, drawn = -1, np.empty((0, 0), dtype=complex)
    for member in members:
        if member // 2 != pair:
            pair = member // 2
            drawn = fft2(embedding.amplitude * _complex_noise(embedding.amplitude.shape, seed, pair), overwrite_x=True)
        part = drawn.imag if member % 2 else drawn.real
        yield part[inside].copy()


def _complex_noise(shape: tuple[int, ...], seed: Sequence[int], number: int) -> FloatArray:
    generator = np.random.default_rng([*seed, number])
    return np.asarray(generator.standard_normal((*shape, 2)).view(complex)[..., 0])
