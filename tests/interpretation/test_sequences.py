"""Which sequences of units a template admits: counted by writing out every subset, and their order."""

from itertools import product

import numpy as np
import pytest
from scipy.stats import norm

from geoves.domain.units import Role, Template
from geoves.interpretation.sequences import admissible_sequences, log_within
from tests.interpretation.columns import CLAY, COVER, DEEP, FULL, PLAIN, ROCK, SILT, UPPER

TEMPLATES = {
    "full": FULL,
    "no deep aquifer": Template((COVER, UPPER, CLAY, ROCK)),
    "no shallow aquifer": Template((COVER, CLAY, DEEP, ROCK)),
    "two confining units": Template((COVER, UPPER, CLAY, SILT, DEEP, ROCK)),
    "cover and bedrock": Template((COVER, ROCK)),
    "cover, clay, rock": PLAIN,
}


def written_out(template):
    """Every admissible column as (units, reaches), a unit repeated where it may have two layers."""
    rock = len(template.units) - 1
    columns = []
    for reaches in (True, False):
        for present in product([False, True], repeat=rock):
            units = [i for i in range(rock) if present[i]]
            roles = [template.units[i].role for i in units]
            if not units or (not reaches and Role.DEEP_AQUIFER in roles):
                continue
            if reaches:
                units.append(rock)
            ways = [[]]
            for position, unit in enumerate(units):
                role, last = template.units[unit].role, position == len(units) - 1
                double = not last and (role is Role.CONFINING or (role is Role.COVER and position == 0))
                ways = [way + more for way in ways for more in ([[unit], [unit, unit]] if double else [[unit]])]
            columns += [(tuple(way), reaches) for way in ways]
    return columns


@pytest.mark.parametrize("template", TEMPLATES.values(), ids=TEMPLATES)
def test_sequences_are_those_written_out(template):
    found = admissible_sequences(template, np.full(len(template.units), 0.5))
    assert sorted((one.units, one.reaches) for one in found) == sorted(written_out(template))


@pytest.mark.parametrize("template", TEMPLATES.values(), ids=TEMPLATES)
def test_order_and_half_space(template):
    rock = len(template.units) - 1
    for one in admissible_sequences(template, np.full(len(template.units), 0.3)):
        assert all(upper <= lower for upper, lower in zip(one.units, one.units[1:], strict=False))
        assert (one.units[-1] == rock) == one.reaches
        assert rock not in one.units[:-1]
        assert len(one.thickness) == len(one.units) - 1
        assert len(one.widening) == len(one.units)
        assert all(0 < low < high for low, high in one.thickness)


@pytest.mark.parametrize("template", TEMPLATES.values(), ids=TEMPLATES)
def test_priors_are_halves_of_one_and_follow_presence(template):
    presence = np.linspace(0.2, 0.7, len(template.units))
    found = admissible_sequences(template, presence)
    for reaches in (True, False):
        priors = [one.log_prior for one in found if one.reaches is reaches]
        assert np.exp(priors).sum() == pytest.approx(1.0)
    rock = len(template.units) - 1
    reaching = [one for one in found if one.reaches]
    # Of the columns that hold at least one unit above rock, unit i is there with its own presence over their share.
    some = 1.0 - np.prod(1.0 - presence[:rock])
    for i in range(rock):
        share = sum(np.exp(one.log_prior) for one in reaching if i in one.units)
        assert share == pytest.approx(presence[i] / some)


def test_limits_of_depth_are_soft():
    """Nothing within; one, two standard deviations of 0.15 in log depth beyond cost what a normal tail does."""
    limits = (15.0, 90.0)
    assert np.all(log_within(np.array([15.0, 40.0, 90.0]), limits) == 0.0)
    beyond = np.array([15.0 * np.exp(-0.15), 90.0 * np.exp(0.30)])
    expected = norm.logpdf([1.0, 2.0]) - norm.logpdf(0.0)
    np.testing.assert_allclose(log_within(beyond, limits), expected)
    assert log_within(np.array([0.05]), (0.0, 20.0))[0] == 0.0
