"""Where flat layers mislead, found from a geology that is known: valleys of which the 2.5-dimensional table tells.

They strike north: x of the table is the easting.
"""

import numpy as np
import pytest

from geoves.domain.fields import Ceiling, JointColumn
from geoves.geology.flat_layers import Spreads, find_misreading
from geoves.geology.remarks import tell_misreadings
from geoves.kernels.covariances import Covariance
from geoves.kernels.field_priors import FieldPrior, own_covariance
from geoves.kernels.latent_fields import Sites, condition
from tests.reference.flat_layer_readings import contact_of, read_table

GROUND, MARGIN = 400.0, 10.0


def known_valley(row, unit=1.0):
    """Posterior, prior, points and ceiling of a row's contact, known to half a metre on a fine net, in units of m."""
    x, y = np.meshgrid(np.arange(-900.0, 901.0, 75.0), np.arange(-900.0, 901.0, 300.0))
    points = np.column_stack([x.ravel(), y.ravel()])
    depth = contact_of(row)(points[:, 0])
    ceiling = Ceiling((0.0, 0.0), GROUND - row["shallow"], (0.0, 0.0), MARGIN)
    below = depth - row["shallow"] + MARGIN
    n = len(points)
    prior = FieldPrior(3.0, Covariance("matern32", 1e-4, 1.0, 1500.0 / unit), 1.0, 1.0, 1.0, 0.05)
    precision = (below / 0.5) ** 2
    sites = Sites(precision[:, None, None], (precision * np.log(below))[:, None])
    covariance = own_covariance(prior, points / unit, np.zeros(n))
    return condition(np.array([prior.mean]), covariance[None], sites), prior, points / unit, ceiling


def spreads_of(points, at, azimuth_deg, unit=1.0):
    """One spread to AB/2 = 320 m at the point nearest to `at`, and nothing else."""
    place = int(np.argmin(np.hypot(*(points * unit - at).T)))
    azimuth, largest = np.full((2, len(points)), np.nan)
    azimuth[place], largest[place] = np.deg2rad(azimuth_deg), 320.0
    return place, Spreads(azimuth, largest, np.full(len(points), GROUND), unit)


@pytest.mark.parametrize("azimuth_deg", [0.0, 90.0])
@pytest.mark.parametrize(("size", "x"), [(300.0, 0.0), (600.0, 0.0), (300.0, 225.0), (1200.0, 0.0)])
def test_a_known_valley_is_misread_as_the_response_says(size, x, azimuth_deg):
    wanted = {"shape": "valley", "size": size, "deep": 90.0, "rock": 66.0, "largest_ab2": 320.0, "x": x}
    wanted["azimuth"] = azimuth_deg
    row = next(one for one in read_table() if wanted.items() <= one.items())
    posterior, prior, points, ceiling = known_valley(row)
    place, spreads = spreads_of(points, (x, 0.0), azimuth_deg)
    found = find_misreading(posterior, prior, points, ceiling, spreads)
    assert found.log_depth[place] == pytest.approx(row["misread"], abs=0.03 + 0.1 * abs(row["misread"]))
    assert 0.012 < found.deviation[place] < 0.03 + 0.3 * abs(row["misread"])
    # In the field of the contact it is more: only what lies below the ceiling is its own.
    true = float(contact_of(row)(np.array(x)))
    below = true - row["shallow"] + MARGIN
    moved = np.exp(found.step[place]) * below - below
    assert moved == pytest.approx(true * np.expm1(found.log_depth[place]), abs=0.03 * true)
    others = np.arange(len(points)) != place
    assert not np.any([found.log_depth[others], found.deviation[others], found.step[others], found.variance[others]])


def table_row(size):
    return {"shape": "valley", "size": size, "shallow": 25.0, "deep": 90.0}


def test_an_azimuth_not_known_lies_between_and_is_less_sure():
    posterior, prior, points, ceiling = known_valley(table_row(600.0))
    found = {}
    for azimuth in (0.0, 90.0, np.nan):
        place, spreads = spreads_of(points, (0.0, 0.0), azimuth)
        one = find_misreading(posterior, prior, points, ceiling, spreads)
        found[str(azimuth)] = one.log_depth[place], one.deviation[place]
    assert found["90.0"][0] < found["nan"][0] < found["0.0"][0] < 0.0
    assert found["nan"][1] > found["0.0"][1]


@pytest.mark.parametrize(("size", "x", "read"), [(600.0, 0.0, -0.12), (300.0, 0.0, -0.26), (300.0, 225.0, 0.075)])
def test_a_spread_at_45_degrees_reads_half_of_either(size, x, read):
    """`read` is what `misread` of tests/reference/flat_layer_readings.py finds at an azimuth of 45 degrees."""
    posterior, prior, points, ceiling = known_valley(table_row(size))
    place, spreads = spreads_of(points, (x, 0.0), 45.0)
    found = find_misreading(posterior, prior, points, ceiling, spreads)
    assert found.log_depth[place] == pytest.approx(read, abs=0.03 + 0.1 * abs(read))


def test_feet_are_turned_into_metres():
    foot = 0.3048
    answers = []
    for unit in (1.0, foot):
        posterior, prior, points, ceiling = known_valley(table_row(300.0), unit)
        place, spreads = spreads_of(points, (0.0, 0.0), 0.0, unit)
        answers.append(find_misreading(posterior, prior, points, ceiling, spreads).log_depth[place])
    assert answers[0] == pytest.approx(answers[1], rel=1e-6)


def test_a_place_taken_at_its_word_is_still_told_of():
    posterior, prior, points, ceiling = known_valley(table_row(300.0))
    place, spreads = spreads_of(points, (0.0, 0.0), 0.0)
    found = find_misreading(posterior, prior, points, ceiling, spreads)
    decided = found.without(np.arange(len(points)) == place)
    assert decided.log_depth[place] == found.log_depth[place] < -0.1
    assert decided.step[place] == decided.variance[place] == 0.0


def test_the_remarks_name_the_soundings_with_sign_and_size():
    def column(place, bias):
        nothing, three = np.zeros(2), np.array([10.0, 20.0, 30.0])
        return JointColumn(place, "sounding", three, three, three, three, 0.0, 0.0, nothing, nothing, 0.0, 1.0, 1.0,
                           flat_layer_bias=bias)  # fmt: skip

    inside, outside = tell_misreadings(
        [column("S1", -0.08), column("S2", -0.21), column("S3", 0.04), column("S4", 0.12), column("W1", np.nan)]
    )
    assert "2 soundings" in inside
    assert "too shallow" in inside
    assert "S2 (-21 %), S1 (-8 %)" in inside
    assert "1 sounding," in outside
    assert "too deep" in outside
    assert "S4 (+12 %)" in outside
    assert "S3" not in inside + outside
