"""Specific conductance: which waters count, how far they reach, and what they do to a sounding beside a well."""

import attrs
import numpy as np
import pytest

from geoves.domain.survey import Survey
from geoves.domain.units import Role
from geoves.interpretation import InterpretationOptions
from geoves.interpretation.conductance import WATER_ERROR, shift_by_water
from geoves.interpretation.surroundings import find_surroundings
from tests.interpretation.columns import FULL, read_places, sounding_over, tops_by, well_of

EAST, NORTH = 500_000.0, 4_600_000.0
IN_DEEP = [(0, 3, "topsoil"), (3, 40, "blue clay"), (40, 47, "gravel")]
IN_SHALLOW = [(0, 2, "topsoil"), (2, 9, "gravel")]
IN_ROCK = [(0, 3, "topsoil"), (3, 40, "blue clay"), (40, 47, "gravel"), (47, 50, "limestone")]


def sampled(name, east, conductance, log=IN_DEEP):
    """A well so many m east of the soundings of columns.py."""
    return attrs.evolve(well_of(name, *log), easting=EAST + east, northing=NORTH, specific_conductance=conductance)


def sounding(east=0.0):
    return attrs.evolve(sounding_over("S", [3, 35, 12], [40, 17, 46, 70]), easting=EAST + east)


# Twice the typical conductance 10 m from the sounding, typical ones 50 km away.
SALT = [sampled("Salt", 10, 2000.0), *(sampled(f"T{i}", 50_000 + 500 * i, 1000.0) for i in range(4))]


def test_twice_the_conductance_halves_the_range_beside_its_well():
    """Archie: the formation factor stays, so resistivity halves; a tenth in logs is granted for the sample's error."""
    found = read_places([sounding()], FULL, wells=SALT, options=InterpretationOptions(calibrate=False))
    (shift,) = found.water_shifts
    assert (shift.sounding, shift.role, shift.well) == ("S", "deep_aquifer", "Salt")
    assert shift.distance == pytest.approx(10.0)
    sill = np.log(2.0) ** 2 / 5  # one of five waters is off
    assert np.log(shift.factor) == pytest.approx(-np.log(2.0) * sill / (sill + WATER_ERROR**2), abs=0.01)
    assert [water.factor for water in found.well_waters] == pytest.approx([0.5, 1, 1, 1, 1])
    assert "by factors of 0.5" in " ".join(found.remarks)


def test_it_falls_by_e_over_the_range_and_never_reaches_other_units():
    wells, options = SALT, InterpretationOptions()
    waters = read_places([], FULL, wells=wells).well_waters
    places = [attrs.evolve(sounding(east), name=f"S{east}") for east in (10.0, 2010.0, 4010.0)]
    shifts = shift_by_water(places, wells, waters, options.conductance_range, 1.0)
    near, middle, far = (shifts[one.name][Role.DEEP_AQUIFER] for one in places)
    assert middle / near == pytest.approx(np.exp(-1.0), rel=1e-3)
    assert far / near == pytest.approx(np.exp(-2.0), rel=1e-3)
    assert all(set(shift) == {Role.DEEP_AQUIFER} for shift in shifts.values())


def test_only_the_aquifer_that_the_wells_end_in_is_shifted():
    survey = Survey((sounding(),), tuple(SALT))
    readings = [read_places([], FULL, wells=[well]).well_readings for well in SALT]
    here = (
        find_surroundings(survey, readings, [()] * len(SALT), FULL, InterpretationOptions()).around["S"].localise(FULL)
    )
    for unit, typed in zip(here.units, FULL.units, strict=True):
        ratio = unit.resistivity_p05 / typed.resistivity_p05
        assert unit.resistivity_p95 / typed.resistivity_p95 == pytest.approx(ratio)
        assert ratio < 0.6 if unit.role is Role.DEEP_AQUIFER else ratio == 1.0


@pytest.mark.parametrize("log", [IN_ROCK, IN_SHALLOW, [(0, 3, "muck & stumps")]])
def test_water_of_another_ground_does_not_count(log):
    """A well that ends in rock, in the other aquifer or in words not understood leaves two waters: too few."""
    wells = [sampled("A", 10, 2000.0), sampled("B", 900, 1000.0), sampled("C", 1800, 500.0, log)]
    found = read_places([sounding()], FULL, wells=wells)
    assert found.water_shifts == ()
    assert "no range was shifted" in " ".join(found.remarks)


def test_alike_waters_and_a_range_of_nothing_shift_nothing():
    alike = [sampled(f"A{i}", 100 * i, 1000.0) for i in range(4)]
    assert read_places([sounding()], FULL, wells=alike).water_shifts == ()
    off = InterpretationOptions(conductance_range=0.0)
    assert read_places([sounding()], FULL, wells=SALT, options=off).water_shifts == ()


def test_temperature_moves_the_water_and_not_the_shift():
    """At 5 °C water is 46.5 / 26.5 times as resistive as at 25 °C (Arps)."""
    cold, warm = (read_places([], FULL, wells=SALT, options=InterpretationOptions(ground_temperature=t)).well_waters
                  for t in (5.0, 25.0))  # fmt: skip
    for low, high in zip(cold, warm, strict=True):
        assert low.resistivity / high.resistivity == pytest.approx(46.5 / 26.5)
        assert low.factor == pytest.approx(high.factor)


def test_salty_gravel_is_found_where_a_template_of_fresh_water_would_miss_it():
    """Gravel of 23 ohm m, half of the template's 46, 14 m thick on rock of 70: its top is at 38 m.

    Read with the well's conductance, which knows why, the basal contact comes nearer to the truth than by the plain
    template, which takes such gravel for clay.
    """
    truth, options = 38.0, InterpretationOptions(calibrate=False)
    ground = [attrs.evolve(sounding_over(f"S{i}", [3, 35, 14], [40, 13, 23, 70], seed=i), easting=EAST)
              for i in range(6)]  # fmt: skip
    off = attrs.evolve(options, conductance_range=0.0)
    error = {}
    for name, how in (("shifted", options), ("plain", off)):
        found = read_places(ground, FULL, wells=SALT, options=how)
        tops = [tops_by(found, one.name, "basal")[0] for one in ground]
        error[name] = np.sqrt(np.mean([np.log(top.depth / truth) ** 2 for top in tops]))
    assert error["shifted"] < 0.85 * error["plain"]
