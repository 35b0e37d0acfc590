"""Sounding curves for the ideal Schlumberger array, as printed: AB/2 in m, ohm m, m.

No book's table: each was computed twice outside geoves, by 20 000 images (Flathe 1955) and by quadrature of
Stefanesco's integral between Bessel zeros; the two agree to every printed digit. tests/reference computes them again.
Numbers are kept as printed, since the last digit says how far a value may be trusted.
"""

from typing import NamedTuple

import numpy as np

HALF_SPACING = np.array([1.0, 2.0, 5.0, 10.0, 20.0, 50.0, 100.0, 200.0, 500.0, 1000.0])


class PrintedCurve(NamedTuple):
    """One model and its curve at HALF_SPACING."""

    name: str
    thickness: tuple[int, ...]
    resistivity: tuple[float, ...]
    printed: tuple[str, ...]

    @property
    def apparent_resistivity(self):
        return np.array([float(text) for text in self.printed])

    @property
    def rounding(self):
        """Half a unit of the last printed digit, ohm m."""
        return np.array([0.5 * 10.0 ** -len(text.partition(".")[2]) for text in self.printed])


def printed_curve(name, thickness, resistivity, row):
    return PrintedCurve(name, thickness, resistivity, tuple(row.split()))


TWO_LAYERS = (
    printed_curve(
        "conductive base",
        (10,),
        (100.0, 10.0),
        "99.9813 99.8524 97.8737 86.9089 51.5589 13.0336 10.3362 10.0762 10.0119 10.0030",
    ),
    printed_curve(
        "resistive base",
        (10,),
        (100.0, 1000.0),
        "100.0233 100.1845 102.6933 117.3529 175.7248 351.4259 541.4034 737.9975 916.8302 973.716",
    ),
    printed_curve(
        "insulating base",  # 1e9 ohm m stands for an insulator
        (10,),
        (100.0, 1e9),
        "100.030 100.2373 103.4742 122.6166 202.4869 500.000 1000.00 2000.00 5000.0 9999.9",
    ),
)
MORE_LAYERS = (
    printed_curve(
        "H",
        (5, 10),
        (100.0, 20.0, 500.0),
        "99.8809 99.0914 89.4875 61.8502 41.9190 78.4522 138.0498 223.9272 355.6429 434.1972",
    ),
    printed_curve(
        "K",
        (5, 10),
        (20.0, 200.0, 20.0),
        "20.0356 20.2737 23.3153 33.9814 52.3884 58.9598 36.7718 22.6194 20.2750 20.0661",
    ),
    printed_curve(
        "A",
        (5, 10),
        (20.0, 60.0, 300.0),
        "20.0225 20.1730 22.1192 29.3393 46.0199 90.9078 144.1004 204.152 265.9784 288.5093",
    ),
    printed_curve(
        "Q",
        (5, 10),
        (300.0, 60.0, 10.0),
        "299.629 297.1646 266.8134 173.9871 65.9304 14.6795 10.5073 10.1100 10.0171 10.0043",
    ),
    printed_curve(
        "HK, outwash",
        (5, 25, 15),
        (35.0, 20.0, 90.0, 12.0),
        "34.9819 34.8616 33.3744 28.7782 23.6713 25.1428 26.1872 19.0059 12.8032 12.1673",
    ),
)
ALL_CURVES = TWO_LAYERS + MORE_LAYERS

# AB/2 = 20 m, MN/2 in m: from image potentials at both potential electrodes.
FINITE_SPREAD = (
    ((100.0, 10.0), {1.0: "51.6930", 2.0: "52.0955", 4.0: "53.7078"}),
    ((100.0, 1000.0), {1.0: "175.5099", 2.0: "174.8657", 4.0: "172.2924"}),
)
