"""Resistivity of water and of the pores that hold it: formulas of the trade, one a function."""

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

# Of the linear rise of a water's conductivity with temperature: it would vanish at minus this, in °C.
ARPS_OFFSET = 21.5
# Specific conductance is stated at this temperature, °C.
STANDARD_TEMPERATURE = 25.0


def water_resistivity(specific_conductance: Floats, temperature: float) -> Floats:
    """Resistivity (ohm m) at `temperature` (°C) of waters with a specific conductance in µS/cm at 25 °C.

    R2 = R1 (T1 + 21.5) / (T2 + 21.5), temperatures in °C (Arps 1953, Transactions AIME 198; the form as in Tiab and
    Donaldson, Petrophysics, eq. 4.7).
    """
    at_standard = 1e4 / np.asarray(specific_conductance)
    return np.asarray(at_standard * (STANDARD_TEMPERATURE + ARPS_OFFSET) / (temperature + ARPS_OFFSET))


def saturation_factor(saturation: Floats, exponent: float) -> Floats:
    """How many times as resistive pores are of which water fills the share `saturation` as when they are full.

    I = S^-n (Archie 1942, Transactions AIME 146, 54-62); n is about 2 in clean sand.
    """
    return np.asarray(np.asarray(saturation) ** -exponent)
