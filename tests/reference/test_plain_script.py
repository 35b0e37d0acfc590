"""The plain script that the benchmark compares with: its filter against published values, its habits on easy ground."""

import importlib.util
from pathlib import Path

import numpy as np
import pytest


@pytest.fixture(scope="module")
def plain():
    spec = importlib.util.spec_from_file_location("plain_script", Path(__file__).with_name("plain_script.py"))
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def test_filter_sums_to_one_and_follows_the_images(plain):
    """Two layers, closed form (textbook series, from memory): r1 [1 + 2 sum k^n (1 + (2 n h / s)^2)^(-3/2)]."""
    assert plain.WEIGHTS.sum() == pytest.approx(1.0, abs=1e-6)
    spacing, h = np.geomspace(1.5, 320.0, 25), 12.0
    for lower in (15.0, 400.0):
        k = (lower - 60.0) / (lower + 60.0)
        n = np.arange(1, 3_000)[:, None]
        images = 60.0 * (1.0 + 2.0 * np.sum(k**n * (1.0 + (2.0 * n * h / spacing) ** 2) ** -1.5, axis=0))
        found = plain.apparent_resistivity(spacing, np.array([[h]]), np.array([[60.0, lower]]))[0]
        np.testing.assert_allclose(found, images, rtol=1e-3)


def test_clear_curve_gives_its_rock(plain):
    spacing = np.geomspace(1.5, 320.0, 20)
    read = plain.apparent_resistivity(spacing, np.array([[4.0, 36.0]]), np.array([[60.0, 15.0, 90.0]]))[0]
    read *= np.exp(np.random.default_rng(3).normal(0.0, 0.003, 20))
    depth, gravel = plain.interpret(spacing, read)
    assert depth == pytest.approx(40.0, rel=0.05)
    assert gravel == 0.0


def test_curve_that_ends_in_clay_shows_no_rock(plain):
    spacing = np.geomspace(1.5, 100.0, 16)
    read = plain.apparent_resistivity(spacing, np.array([[5.0]]), np.array([[80.0, 15.0]]))[0]
    read *= np.exp(np.random.default_rng(4).normal(0.0, 0.003, 16))
    assert np.isnan(plain.interpret(spacing, read)).all()
