"""The county drawn by other means: read without a fault, and its tables agree with its truth."""

import numpy as np
import pandas as pd
import pytest

from demo_region.generator.county import ORIGIN
from geoves.project.inputs import read_inputs
from tests.benchmarks.other_county import SOUNDINGS, WELLS, WENNER, make_other_county, nodes


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    folder = tmp_path_factory.mktemp("other")
    return folder, make_other_county(folder, 1)


def test_units_fill_the_drift(made):
    _, county = made
    drift = county.ground - county.rock
    above = county.cover + county.upper + county.lower
    assert drift.min() >= 8.0 - 1e-9
    assert np.all(above < drift)
    assert min(county.cover.min(), county.upper.min(), county.lower.min(), county.incision.min()) >= 0.0


def test_truth_between_nodes_is_that_of_the_nodes(made):
    _, county = made
    x, y = (values[100:110, 200:210] for values in nodes())
    np.testing.assert_allclose(county.bedrock_elevation(x, y), county.rock[100:110, 200:210])


def test_region_is_read_without_a_fault(made):
    folder, county = made
    survey = read_inputs(folder / "region.toml").survey
    assert len(survey.soundings) == SOUNDINGS
    assert len(survey.wells) == WELLS
    arrays = pd.read_csv(folder / "soundings.csv")["array"]
    assert (arrays == "wenner").sum() == WENNER
    truth = pd.read_csv(folder / "truth/soundings.csv")
    rock = county.bedrock_elevation(truth["x"] - ORIGIN[0], truth["y"] - ORIGIN[1])
    np.testing.assert_allclose(rock, truth["bedrock_elevation"])


def test_same_seed_gives_the_same_readings(made, tmp_path):
    folder, _ = made
    make_other_county(tmp_path, 1)
    assert (tmp_path / "readings.csv").read_text() == (folder / "readings.csv").read_text()
