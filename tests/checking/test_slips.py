"""A misplaced current electrode, by the geometry of the array and over layers, and what else makes one reading jump."""

import numpy as np
import pytest

from geoves.checking import examine_curves
from geoves.checking.slips import misplaced_electrode
from geoves.curves import make_sounding
from geoves.kernels.layered_earth import apparent_resistivity

THICKNESS, RESISTIVITY = np.array([[3.0, 20.0]]), np.array([[40.0, 15.0, 90.0]])
AB2 = np.array([1.5, 2, 2.7, 3.6, 5, 6.5, 9, 12, 9, 12, 16, 21, 28, 37, 50, 37, 50, 65, 90, 120, 160])
MN2 = np.repeat([0.5, 2.0, 8.0], [8, 7, 6])


def field_curve(spoil=None):
    """A curve over three layers, 1 % rounding for noise, one reading spoilt by a function of its index."""
    apparent = apparent_resistivity(AB2, MN2, THICKNESS, RESISTIVITY)[0]
    apparent = apparent * np.exp(0.01 * np.random.default_rng(2).standard_normal(AB2.size))
    return make_sounding("Heron 4", AB2, MN2, apparent if spoil is None else spoil(apparent))


def jumps_of(sounding):
    return [one for one in examine_curves((sounding,)).findings if one.check == "jump"]


@pytest.mark.parametrize(
    ("actual", "factor"),
    [(80.0, 1.2824), (90.0, 1.1176), (120.0, 0.8470)],
)
def test_uniform_ground_gives_the_factors_of_the_geometry(actual, factor):
    """One current electrode at 80, 90 or 120 m for 100, MN/2 5 m, from the four distances of point electrodes; the
    directions of both errors are those of the BGR manual "The smooth sounding graph", section 2.2.
    """
    assert misplaced_electrode(100.0, actual, 5.0, 0.0) == pytest.approx(factor, abs=1e-4)


def test_both_electrodes_change_k_alone():
    k = (100.0**2 - 25.0) / (80.0**2 - 25.0)
    assert misplaced_electrode(100.0, 80.0, 5.0, 0.0, electrodes=2) == pytest.approx(k)


def misplaced_voltage(planned, actual, mn2):
    """Reading with one electrode misplaced, from the potentials of both electrodes over layers, not from the factor.

    The potential difference of one electrode at distance a is K(a)^-1 rho_a(a) I / 2 by symmetry, K from ASTM D6431.
    """
    both = apparent_resistivity(np.array([planned, actual]), np.full(2, mn2), THICKNESS, RESISTIVITY)[0]
    k = np.pi * (np.array([planned, actual]) ** 2 - mn2**2) / (2.0 * mn2)
    return k[0] * np.sum(both / k) / 2.0


@pytest.mark.parametrize(
    ("index", "actual", "words"),
    [
        (13, 28.0, "one current electrode left behind at 28 m"),
        (12, 37.0, "one current electrode set too far out at 37 m"),
        (18, 65.0, "one current electrode left behind at 65 m"),
    ],
)
def test_the_stake_that_explains_a_jump_is_named(index, actual, words):
    def spoil(apparent):
        spoilt = apparent.copy()
        spoilt[index] = misplaced_voltage(AB2[index], actual, MN2[index])
        return spoilt

    (found,) = jumps_of(field_curve(spoil))
    assert f"AB/2 {AB2[index]:g} m" in found.value
    assert words in found.expected


@pytest.mark.parametrize(
    ("factor", "words"),
    [
        (10.0, "ten times too much"),
        (0.001, "a thousand times too little, V for mV"),
        (0.6, "no misplaced stake explains it"),
    ],
)
def test_other_slips_are_named_or_none(factor, words):
    def spoil(apparent):
        spoilt = apparent.copy()
        spoilt[5] *= factor
        return spoilt

    (found,) = jumps_of(field_curve(spoil))
    assert words in found.expected


def test_readings_in_each_others_rows_are_told():
    def spoil(apparent):
        spoilt = apparent.copy()
        spoilt[[4, 6]] = apparent[[6, 4]]
        spoilt[[18, 20]] = apparent[[20, 18]]
        return spoilt

    assert jumps_of(field_curve(spoil))


def test_a_clean_curve_has_no_jump():
    assert examine_curves((field_curve(),)).findings == ()
