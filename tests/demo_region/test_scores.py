"""The figures that the benchmark prints, on estimates whose errors are known."""

import importlib.util
import sys
from pathlib import Path

import attrs
import numpy as np
import pytest

ROOT = Path(__file__).resolve().parents[2]


def load(name, path):
    spec = importlib.util.spec_from_file_location(name, path)
    module = importlib.util.module_from_spec(spec)
    sys.modules[name] = module
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def make_region():
    """Importing the script lets Python find the generator's own modules."""
    return load("make_region", ROOT / "demo_region/make_region.py")


@pytest.fixture(scope="module")
def county(make_region):
    return make_region.draw_county(2)


@pytest.fixture(scope="module")
def scores(county):
    assert county.seed == 2
    return load("scores", ROOT / "tests/benchmarks/scores.py")


@pytest.fixture(scope="module")
def exact(scores, county):
    """The truth as an estimate, 600 m apart, with a band of 2 m to either side."""
    x, y = (grid.ravel() for grid in np.meshgrid(np.arange(300.0, 30_000.0, 600.0), np.arange(300.0, 25_000.0, 600.0)))
    bedrock, gravel = county.bedrock_elevation(x, y), county.deep_gravel_thickness(x, y)
    east, north = scores.ORIGIN
    present = (gravel >= 1.0).astype(float)
    resistivity = county.shallow_aquifer_resistivity(x, y)
    return scores.Estimate(x + east, y + north, bedrock, bedrock - 2, bedrock + 2, gravel, present, resistivity)


def test_truth_scores_nothing(scores, county, exact):
    figures = scores.score_surfaces(exact, county, len(exact.bedrock))
    for name in ("bedrock", "bedrock_valley", "bias", "blank", "gravel", "brier", "shallow_log"):
        assert figures[name] == pytest.approx(0.0, abs=1e-9)
    assert figures["held"] == 1.0
    assert figures["width"] == pytest.approx(4.0)
    assert 0.05 < figures["climatology"] < 0.2


def test_shift_and_blanks_are_found(scores, county, exact):
    low = exact.bedrock - 3.0
    low[::4] = np.nan
    estimate = attrs.evolve(exact, bedrock=low, bedrock_p05=low - 2.0, bedrock_p95=low + 2.0)
    figures = scores.score_surfaces(estimate, county, len(low))
    assert figures["bedrock"] == pytest.approx(3.0)
    assert figures["bias_valley"] == pytest.approx(-3.0)
    assert figures["held"] == 0.0
    assert figures["blank"] == pytest.approx(0.25, abs=0.001)
