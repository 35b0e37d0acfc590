"""The 2.5-dimensional response against layers, and against ground of which the images are exact."""

import numpy as np
import pytest

from geoves.kernels import layered_earth
from tests.reference.image_series import finite_response, layered_strengths, two_layer_strengths
from tests.reference.two_and_a_half import COARSE, FINE, Fineness, Section, response

HALF_SPACING = np.array([5.0, 10.0, 20.0, 40.0, 80.0, 160.0, 320.0])
B = 1.0


def layers(thickness, resistivity):
    tops, rho = np.cumsum(thickness), np.array(resistivity)
    return Section(lambda x, z: rho[np.searchsorted(tops, z)] + 0.0 * x, thickness[0])


def spread(half_spacing, azimuth_deg, potential):
    """Apparent resistivity of a spread about the origin from a potential of source and receiver, each (x, y)."""
    across, along = np.sin(np.deg2rad(azimuth_deg)), np.cos(np.deg2rad(azimuth_deg))
    found = []
    for a in half_spacing:
        left, right, m, n = [(s * across, s * along) for s in (-a, a, -B, B)]
        voltage = potential(left, m) - potential(left, n) - potential(right, m) + potential(right, n)
        found.append(voltage * np.pi * (a**2 - B**2) / (2.0 * B))
    return np.array(found)


def beside_contact(contact, left, right, half_spacing, azimuth_deg):
    """A vertical contact at x = `contact`: one image (Keller and Frischknecht 1966, from memory)."""

    def potential(source, receiver):
        (x, y), (p, q) = source, receiver
        own, other = (left, right) if x < contact else (right, left)
        strength = (other - own) / (other + own)
        direct = 1.0 / np.hypot(x - p, y - q)
        if (x < contact) == (p < contact):
            return own / (2.0 * np.pi) * (direct + strength / np.hypot(2.0 * contact - x - p, y - q))
        return own / (2.0 * np.pi) * (1.0 + strength) * direct

    return spread(half_spacing, azimuth_deg, potential)


def over_wedge(apex, rho, sign, half_spacing, azimuth_deg):
    """A bed of `rho` on rock that dips 45 degrees from the surface at x = -apex and insulates (1) or conducts (-1).

    Images at 0, 90, 180 and 270 degrees about the apex make both faces right (from memory).
    """

    def potential(source, receiver):
        (x, y), (p, q) = (source[0] + apex, source[1]), (receiver[0] + apex, receiver[1])
        images = ((x, 0.0, 1), (0.0, x, sign), (-x, 0.0, 1), (0.0, -x, sign))
        return rho / (2.0 * np.pi) * sum(s / np.sqrt((p - u) ** 2 + w**2 + (q - y) ** 2) for u, w, s in images)

    return spread(half_spacing, azimuth_deg, potential)


@pytest.mark.parametrize("azimuth_deg", [0.0, 45.0, 90.0])
def test_two_layers_by_images(azimuth_deg):
    found = response(layers([30.0], [18.0, 66.0]), HALF_SPACING, B, azimuth_deg, COARSE)
    strengths = two_layer_strengths((18.0, 66.0))
    expected = [finite_response(a, B, 30.0, 18.0, strengths) for a in HALF_SPACING]
    assert np.allclose(found, expected, rtol=0.013)


def test_three_layers_by_images_and_by_the_package():
    thickness, rho = [5.0, 40.0], [40.0, 18.0, 240.0]
    found = response(layers(thickness, rho), HALF_SPACING, B, 0.0, FINE)
    strengths = layered_strengths([1, 8], rho)
    assert np.allclose(found, [finite_response(a, B, 5.0, 40.0, strengths) for a in HALF_SPACING], rtol=0.013)
    potential_half_spacing = np.full(HALF_SPACING.size, B)
    wavenumber = layered_earth.shared_wavenumbers([(HALF_SPACING, potential_half_spacing)])
    weights = layered_earth.response_weights(HALF_SPACING, potential_half_spacing, wavenumber)
    package = layered_earth.response(weights[None], wavenumber, np.array([thickness]), np.array([rho]))[0]
    assert np.allclose(found, package, rtol=0.013)


@pytest.mark.parametrize(("contact", "azimuth_deg"), [(30.0, 0.0), (30.0, 45.0), (100.0, 90.0)])
def test_a_vertical_contact(contact, azimuth_deg):
    section = Section(lambda x, z: np.where(x < contact, 18.0, 66.0) + 0.0 * z, contact)
    half_spacing = HALF_SPACING + 0.37  # no electrode stands on the contact
    found = response(section, half_spacing, B, azimuth_deg, COARSE)
    assert np.allclose(found, beside_contact(contact, 18.0, 66.0, half_spacing, azimuth_deg), rtol=0.014)


@pytest.mark.parametrize("azimuth_deg", [0.0, 90.0])
@pytest.mark.parametrize(("rock", "sign", "tolerance"), [(1e6, 1, 0.015), (1e-4, -1, 0.035)])
def test_a_dipping_bed(rock, sign, tolerance, azimuth_deg):
    """45 degrees, the rock a perfect insulator or conductor: what a dipping interface can do at the most."""
    section = Section(lambda x, z: np.where(z < x + 60.0, 10.0, rock), 40.0)
    half_spacing = np.array([5.0, 10.0, 20.0, 30.0])
    found = response(section, half_spacing, B, azimuth_deg, Fineness(0.5, 1.1, 14))
    assert np.allclose(found, over_wedge(60.0, 10.0, sign, half_spacing, azimuth_deg), rtol=tolerance)


def test_a_mirrored_section():
    """A spread at 60 degrees reads the same of a section and of that section turned half round."""
    section = Section(lambda x, z: np.where(z < 40.0 + 0.2 * np.clip(x, -100.0, 100.0), 18.0, 66.0), 20.0)
    mirrored = Section(lambda x, z: section.resistivity(-x, z), 20.0)
    spacing = HALF_SPACING[3:]
    found, other = (response(one, spacing, B, 60.0, COARSE) for one in (section, mirrored))
    assert np.allclose(found, other, rtol=2e-3)
