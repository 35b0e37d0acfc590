"""The response against empymod (Werthmüller 2017, Geophysics 82, WB9-WB19), a layered-earth modeller.

empymod gives the electric field of a horizontal dipole. At a millionth of a hertz it is the direct-current field, and
its integral over MN and over a wire from A outward to where nothing is left gives the voltage of one current electrode;
B gives as much again. The wire ends at 59 049 AB/2, in pieces each three times as long as the one before.
"""

import empymod
import numpy as np
import pytest

from geoves.kernels.layered_earth import apparent_resistivity

HALF_SPACING = np.array([1.5, 12.0, 90.0, 600.0])
DEPTH = 1e-3  # m, of the dipoles: empymod wants them inside of the ground
FREQUENCY = 1e-6  # Hz
AIR = 1e14  # ohm m


def wire_and_spread(half_spacing, potential_half_spacing):
    """Distances (m) between dipoles of the wire and of MN, and the weights of their double integral (m²)."""
    x, w = np.polynomial.legendre.leggauss(8)
    y, v = np.polynomial.legendre.leggauss(4)
    edges = half_spacing * 3.0 ** np.arange(11)
    middle, half = 0.5 * (edges[1:] + edges[:-1]), 0.5 * np.diff(edges)
    wire, weight = (middle[:, None] + half[:, None] * x).ravel(), (half[:, None] * w).ravel()
    distance = wire[:, None] + potential_half_spacing * y
    return distance.ravel(), (weight[:, None] * potential_half_spacing * v).ravel()


def modelled_response(half_spacing, potential_half_spacing, thickness, resistivity):
    """Apparent resistivity (ohm m), (n,), of four electrodes, by empymod's field of a dipole along the line."""
    parts = [wire_and_spread(a, b) for a, b in zip(half_spacing, potential_half_spacing, strict=True)]
    distance = np.concatenate([part[0] for part in parts])
    field = empymod.dipole(
        src=[0, 0, DEPTH],
        rec=[distance, np.zeros(distance.size), DEPTH],
        depth=np.concatenate([[0.0], np.cumsum(thickness)]),
        res=np.concatenate([[AIR], resistivity]),
        freqtime=FREQUENCY,
        ab=11,
        xdirect=True,
        htarg={"dlf": "wer_201_2018"},
        verb=0,
    )
    pieces = np.split(np.real(np.asarray(field)), np.cumsum([part[0].size for part in parts])[:-1])
    voltage = 2.0 * np.array([piece @ part[1] for piece, part in zip(pieces, parts, strict=True)])
    near, far = half_spacing - potential_half_spacing, half_spacing + potential_half_spacing
    return np.pi * voltage / (1.0 / near - 1.0 / far)


def random_model(seed):
    rng = np.random.default_rng(seed)
    n_layers = rng.integers(2, 7)
    return np.exp(rng.uniform(np.log(2), np.log(60), n_layers - 1)), np.exp(
        rng.uniform(np.log(5), np.log(1000), n_layers)
    )


def test_the_modeller_gives_uniform_ground_its_resistivity():
    found = modelled_response(HALF_SPACING, 0.2 * HALF_SPACING, np.array([10.0]), np.array([70.0, 70.0]))
    np.testing.assert_allclose(found, 70.0, rtol=1e-5)


@pytest.mark.parametrize("seed", range(20))
def test_response_of_four_electrodes(seed):
    thickness, resistivity = random_model(seed)
    spread = HALF_SPACING * np.random.default_rng(seed).uniform(0.02, 0.33, HALF_SPACING.size)
    found = apparent_resistivity(HALF_SPACING, spread, thickness[None], resistivity[None])[0]
    expected = modelled_response(HALF_SPACING, spread, thickness, resistivity)
    np.testing.assert_allclose(found, expected, rtol=5e-5)
