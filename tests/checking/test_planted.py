"""Every planted fault is found, where it stands and by its own name; a county without faults raises no doubt."""

import numpy as np
import pytest

from geoves.checking.catalogue import CHECKS
from geoves.domain.findings import Examination
from geoves.project.check import examine_inputs
from geoves.reading import look_at_inputs
from tests.checking.planted import OF_THE_TEMPLATE, PLANTS, draw_sheets

SEED = 1


@pytest.fixture(scope="module")
def sheets():
    return draw_sheets(SEED)


@pytest.fixture(scope="module")
def folder(sheets, tmp_path_factory):
    """The county's folder, whose rasters no plant changes."""
    folder = tmp_path_factory.mktemp("county")
    sheets.write(folder)
    return folder


def examine(folder) -> Examination:
    return examine_inputs(look_at_inputs(folder / "region.toml"))


def test_a_clean_county_raises_no_doubt(sheets, folder):
    sheets.write(folder, rasters=False)
    found = [one for one in examine(folder).findings if one.check not in OF_THE_TEMPLATE]
    assert [one.line() for one in found] == []


@pytest.mark.parametrize("plant", PLANTS, ids=lambda plant: plant.__name__)
def test_a_planted_fault_is_found(sheets, folder, plant):
    planted = sheets.copy()
    told = plant(planted, np.random.default_rng([SEED, 5]))
    planted.write(folder, rasters=False)
    findings = examine(folder).findings
    assert told.is_in(findings), [one.line() for one in findings]


def test_every_check_has_a_plant_or_a_test_of_its_own(sheets):
    planted = {plant(sheets.copy(), np.random.default_rng(2)).check for plant in PLANTS}
    elsewhere = {"missing_grid", "unused_reading"}  # tests/reading/test_conversions.py, test_curve_shape.py
    assert planted | elsewhere == set(CHECKS)


def test_every_finding_names_a_check_of_the_catalogue(sheets, folder):
    planted = sheets.copy()
    for plant in PLANTS[:4]:
        plant(planted, np.random.default_rng(3))
    planted.write(folder, rasters=False)
    assert {one.check for one in examine(folder).findings} <= set(CHECKS)
