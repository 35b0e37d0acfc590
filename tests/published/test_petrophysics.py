"""Water and pores: Arps's temperatures, Archie's saturations."""

import numpy as np
import pytest

from geoves.kernels.petrophysics import saturation_factor, water_resistivity


def test_arps_temperature():
    """20 ohm m at 10 °C are 13.5484 ohm m at 25 °C, or 738.1 µS/cm; in °F, offset 6.77, 13.5538.

    R2 = R1 (T1 + 21.5) / (T2 + 21.5): Arps 1953, as in Tiab and Donaldson, Petrophysics, p. 209, eq. 4.7. The two
    forms of the offset differ by 4 parts in 10 000.
    """
    found = float(water_resistivity(np.array(738.1), 10.0))
    assert found == pytest.approx(20.0, rel=1e-4)
    in_fahrenheit = 1e4 / 738.1 * (77.0 + 6.77) / (50.0 + 6.77)
    assert found == pytest.approx(in_fahrenheit, rel=5e-4)


def test_conductance_is_stated_at_25_degrees():
    np.testing.assert_allclose(water_resistivity(np.array([500.0, 1000.0]), 25.0), [20.0, 10.0])


def test_archie_saturation():
    """Half full: four times as resistive with n = 2 (Archie 1942, from memory)."""
    np.testing.assert_allclose(saturation_factor(np.array([1.0, 0.5, 0.25]), 2.0), [1.0, 4.0, 16.0])
