"""What a sounding could show at best: is the rock within its reach, and does it differ from what lies on it?"""

import numpy as np

from demo_region.generator.columns import Column
from demo_region.generator.fieldwork import NOISE
from demo_region.generator.forward import apparent_resistivity

SEEN = 25.0  # sum of squared differences over the noise, five standard deviations
SHARPEST = 0.25  # standard deviation of ln depth above which a contact is not called resolved


def contact_signal(column: Column, ab2: np.ndarray, mn2: np.ndarray, unit: str) -> float:
    """How far the curve would change if the layer above `unit` went on for ever: squares summed over the noise."""
    k = column.units.index(unit)
    whole = apparent_resistivity(ab2, mn2, column.thickness, column.resistivity)
    without = apparent_resistivity(ab2, mn2, column.thickness[: k - 1], column.resistivity[:k])
    return float(np.sum(np.log(whole / without) ** 2) / NOISE**2)


def log_depth_deviation(column: Column, ab2: np.ndarray, mn2: np.ndarray, unit: str) -> float:
    """Standard deviation of ln(depth to `unit`), every layer free.

    Linearised at the truth, with a weak prior (0.7 on each log thickness, 0.5 on each log resistivity).
    """
    layers = len(column.thickness)
    centre = np.log(np.concatenate([column.thickness, column.resistivity]))

    def response(parameters: np.ndarray) -> np.ndarray:
        return np.log(apparent_resistivity(ab2, mn2, np.exp(parameters[:layers]), np.exp(parameters[layers:])))

    steps = 1e-3 * np.eye(len(centre))
    jacobian = np.array([(response(centre + step) - response(centre - step)) / 2e-3 for step in steps]).T
    prior = np.concatenate([np.full(layers, 0.7), np.full(layers + 1, 0.5)])
    covariance = np.linalg.inv(jacobian.T @ jacobian / NOISE**2 + np.diag(prior**-2))
    k = column.units.index(unit)
    gradient = np.zeros(len(centre))
    gradient[:k] = column.thickness[:k] / column.thickness[:k].sum()
    return float(np.sqrt(gradient @ covariance @ gradient))


def is_resolved(column: Column, ab2: np.ndarray, mn2: np.ndarray, unit: str) -> tuple[bool, float, float]:
    """Both: the contact changes the curve, and its depth follows from the curve."""
    signal, deviation = contact_signal(column, ab2, mn2, unit), log_depth_deviation(column, ab2, mn2, unit)
    return signal > SEEN and deviation < SHARPEST, signal, deviation
