"""The response of a section that is constant along its strike, by finite volumes: 2.5 dimensions, point electrodes.

The potential is a cosine transform over the wavenumber along strike; for each wavenumber a two-dimensional problem is
discretised by area and solved by sparse LU (Dey and Morrison 1979, Geophysical Prospecting 27, 106-136; their mixed
condition at the edges; from memory). Only what differs from a half-space of the electrodes' own ground is solved for,
so that their singularity is exact (Lowry, Allen and Shive 1989, Geophysics 54, 766-774, from memory). Nothing is
shared with geoves. x across strike, y along it, z down, m; resistivities in ohm m.
"""

from typing import NamedTuple

import numpy as np
from scipy.interpolate import make_interp_spline
from scipy.sparse import coo_array
from scipy.sparse.linalg import splu
from scipy.special import k0e, k1e

# Points of a cell, each way, at which its resistivity is looked up.
LOOKED_UP = 4
# Points of the integral over wavenumber: a spline through the computed ones.
INTEGRATED = 16_000


class Fineness(NamedTuple):
    """finest : m, of the cells at the centre    growth : from one cell to the next    wavenumbers : how many"""

    finest: float
    growth: float
    wavenumbers: int


COARSE = Fineness(1.0, 1.15, 16)
FINE = Fineness(0.5, 1.1, 18)


class Section(NamedTuple):
    """resistivity : of (x, z) of one shape, ohm m    shallowest : m, how near the electrodes it changes"""

    resistivity: object
    shallowest: float


class _Mesh(NamedTuple):
    """Nodes, and conductivities of the cells between them: to flow along x, along z, along strike."""

    x: np.ndarray
    z: np.ndarray
    along_x: np.ndarray
    along_z: np.ndarray
    along_y: np.ndarray


def response(section, half_spacing, potential_half_spacing, azimuth_deg, fineness=FINE, centre=0.0):
    """Apparent resistivity (n,) of spreads about x = `centre`; azimuth 0 along strike, 90 across.

    potential_half_spacing : m, one for all, or 0 for its limit (taken at a fiftieth of the shortest half_spacing).
    """
    half_spacing = np.asarray(half_spacing, float)
    across, along = np.sin(np.deg2rad(azimuth_deg)), np.cos(np.deg2rad(azimuth_deg))
    across, along = (0.0 if abs(one) < 1e-9 else one for one in (across, along))
    b = potential_half_spacing or half_spacing.min() / 50.0
    # By reciprocity the few potential electrodes are the sources, and the current electrodes are where we look.
    sources = centre + np.unique(np.array([-b, b]) * across)
    looked = centre + np.concatenate([-half_spacing, half_spacing]) * across
    mesh = _make_mesh(section, centre, np.concatenate([sources, looked]), half_spacing.max(), fineness)
    ground = float(section.resistivity(np.array(sources[0]), np.array(1e-3)))
    wavenumber = np.geomspace(0.03 / half_spacing.max(), 7.0 / section.shallowest, fineness.wavenumbers)
    at = np.searchsorted(mesh.x, np.unique(looked) - 1e-6)
    secondary = np.array([_solve(mesh, k, sources, ground)[:, at] for k in wavenumber])
    total = np.zeros(half_spacing.size)
    for sign, m in ((1.0, -b), (-1.0, b)):
        source = int(np.argmin(np.abs(sources - centre - m * across)))
        for end, here in ((-1.0, 1.0), (1.0, -1.0)):
            away_x, away_y = (end * half_spacing - m) * across, (end * half_spacing - m) * along
            column = np.searchsorted(np.unique(looked), centre + end * half_spacing * across - 1e-6)
            primary = ground / (2.0 * np.pi * np.hypot(away_x, away_y))
            found = _integrate(wavenumber, secondary[:, source][:, column], np.abs(away_y))
            total += sign * here * (primary + found)
    return total * np.pi * (half_spacing**2 - b**2) / (2.0 * b)


def _make_mesh(section, centre, electrodes, reach, fineness):
    """Cells that grow away from the centre of the spread, every electrode on a node."""
    far = 12.0 * reach
    out = _grow(fineness.finest, fineness.growth, far)
    x = np.concatenate([centre - out[::-1], [centre], centre + out])
    for electrode in electrodes:
        nearest = np.argmin(np.abs(x - electrode))
        gap = np.diff(x)[max(nearest - 1, 0) : nearest + 1].min()
        if abs(x[nearest] - electrode) > 1e-9:
            x = np.sort(np.append(np.delete(x, nearest) if abs(x[nearest] - electrode) < 0.3 * gap else x, electrode))
    x = np.unique(np.concatenate([x, electrodes]).round(9))
    x = x[np.concatenate([[True], np.diff(x) > 1e-7])]
    z = np.concatenate([[0.0], _grow(0.5 * min(fineness.finest, section.shallowest), fineness.growth, far)])
    share = (np.arange(LOOKED_UP) + 0.5) / LOOKED_UP
    fine_x = (x[:-1, None] + np.diff(x)[:, None] * share).ravel()
    fine_z = (z[:-1, None] + np.diff(z)[:, None] * share).ravel()
    rho = section.resistivity(*np.meshgrid(fine_x, fine_z, indexing="ij"))
    rho = np.broadcast_to(rho, (fine_x.size, fine_z.size)).reshape(x.size - 1, LOOKED_UP, z.size - 1, LOOKED_UP)
    # Side by side conductances add, one after another resistances do.
    along_x = 1.0 / np.mean(1.0 / np.mean(1.0 / rho, axis=3), axis=1)
    along_z = np.mean(1.0 / np.mean(rho, axis=3), axis=1)
    return _Mesh(x, z, along_x, along_z, np.mean(1.0 / rho, axis=(1, 3)))


def _grow(finest, growth, far):
    """Distances of nodes: even up to some cells, then ever wider, to `far` or a little beyond; the last much wider."""
    steps = [finest] * 4
    while sum(steps) < far:
        steps.append(steps[-1] * growth)
    return np.cumsum(steps)


def _solve(mesh, wavenumber, sources, ground):
    """Secondary potential (sources, x nodes) at the surface for unit currents, transformed along strike."""
    x, z = np.meshgrid(mesh.x, mesh.z, indexing="ij")
    centre = np.mean(sources)
    matrix = _assemble(mesh, wavenumber, centre, (mesh.along_x, mesh.along_z, mesh.along_y))
    even = np.full_like(mesh.along_y, 1.0 / ground)
    difference = _assemble(mesh, wavenumber, centre, (mesh.along_x - even, mesh.along_z - even, mesh.along_y - even))
    factor = splu(matrix.tocsc(), permc_spec="MMD_AT_PLUS_A", options={"SymmetricMode": True}, diag_pivot_thresh=0.0)
    found = []
    for source in sources:
        # At the source itself the primary is infinite, and what differs is nothing: any number does.
        distance = wavenumber * np.maximum(np.hypot(x - source, z), 1e-6)
        primary = ground / (2.0 * np.pi) * k0e(distance) * np.exp(-distance)
        found.append(factor.solve(-(difference @ primary.ravel())).reshape(x.shape)[:, 0])
    return np.array(found)


def _assemble(mesh, wavenumber, centre, conductivity):
    """The matrix of the discretised problem, nodes ordered by x and then by z."""
    along_x, along_z, along_y = conductivity
    dx, dz = np.diff(mesh.x), np.diff(mesh.z)
    n, m = mesh.x.size, mesh.z.size
    node = np.arange(n * m).reshape(n, m)
    to_right = np.zeros((n - 1, m))
    to_right[:, :-1] += along_x * dz / 2.0
    to_right[:, 1:] += along_x * dz / 2.0
    to_right /= dx[:, None]
    down = np.zeros((n, m - 1))
    down[:-1] += along_z * dx[:, None] / 2.0
    down[1:] += along_z * dx[:, None] / 2.0
    down /= dz
    own = np.zeros((n, m))
    mass = wavenumber**2 * along_y * dx[:, None] * dz / 4.0
    for i in (slice(None, -1), slice(1, None)):
        for j in (slice(None, -1), slice(1, None)):
            own[i, j] += mass
    own[:-1] += to_right
    own[1:] += to_right
    own[:, :-1] += down
    own[:, 1:] += down
    _add_edges(own, mesh, wavenumber, centre, (along_x, along_z))
    first = np.concatenate([node[:-1].ravel(), node[:, :-1].ravel()])
    second = np.concatenate([node[1:].ravel(), node[:, 1:].ravel()])
    value = -np.concatenate([to_right.ravel(), down.ravel()])
    rows = np.concatenate([first, second, node.ravel()])
    columns = np.concatenate([second, first, node.ravel()])
    return coo_array((np.concatenate([value, value, own.ravel()]), (rows, columns))).tocsr()


def _add_edges(own, mesh, wavenumber, centre, conductivity):
    """The potential falls off at the edges as that of a line current far away does."""
    along_x, along_z = conductivity
    dx, dz = np.diff(mesh.x), np.diff(mesh.z)

    def fall(distance, normal):
        reach = wavenumber * distance
        return wavenumber * k1e(reach) / k0e(reach) * normal / distance

    for side in (0, -1):
        away = abs(mesh.x[side] - centre)
        flow = along_x[side] * dz / 2.0
        half = np.concatenate([flow, [0.0]]) + np.concatenate([[0.0], flow])
        own[side] += half * fall(np.hypot(away, mesh.z), away)
    flow = along_z[:, -1] * dx / 2.0
    half = np.concatenate([flow, [0.0]]) + np.concatenate([[0.0], flow])
    own[:, -1] += half * fall(np.hypot(mesh.x - centre, mesh.z[-1]), mesh.z[-1])


def _integrate(wavenumber, transformed, distance):
    """(n,) of 2/pi times the integral over wavenumber of `transformed` (k, n) times cos(k distance).

    Below the first wavenumber a potential goes with the log of it, above the last there is nothing left.
    """
    grid = np.linspace(np.log(wavenumber[0]), np.log(wavenumber[-1]), INTEGRATED)
    spline = make_interp_spline(np.log(wavenumber), transformed, k=3)
    weight = np.full(grid.size, grid[1] - grid[0])
    weight[[0, -1]] *= 0.5
    weight = weight * np.exp(grid)
    values = spline(grid)
    slope = spline(grid[:1], 1)[0]
    below = wavenumber[0] * (values[0] - slope)
    whole = np.einsum("k,kn,kn->n", weight, values, np.cos(np.exp(grid)[:, None] * distance))
    return 2.0 / np.pi * (whole + below)
