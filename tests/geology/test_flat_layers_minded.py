"""The joint inference on a county of which the curves come from the 2.5-dimensional response, taken flat and not."""

import csv
from pathlib import Path

import attrs
import numpy as np
import pytest

from geoves.domain.survey import Curve, Sounding, Survey, Well
from geoves.domain.tops import Interpretation
from geoves.geology import infer_geology
from tests.geology.county import QUICK, invert_nothing, say_contact
from tests.reference.section_counties import GROUND, HALF_SPACING, NOISE, POTENTIAL, SHAPES, TEMPLATE, clean_curve

SHAPE = SHAPES["valley of 600 m"]
# Three lines of the county; noise is added here.
CURVES = Path(__file__).parents[1] / "reference" / "section_county.csv"
DEEP = 60.0  # m


def read_curves():
    """Places (n, 3) as easting, northing, azimuth in degrees, and apparent resistivities (n, k)."""
    with CURVES.open(newline="", encoding="utf-8") as stream:
        rows = np.array(list(csv.reader(stream))[1:], float)
    return rows[:, :3], rows[:, 3:]


def make_county():
    """The arguments of the inference, and the true depth at each sounding."""
    generator = np.random.default_rng(4)
    places, curves = read_curves()
    depth = SHAPE.depth(places[:, 0])
    size = HALF_SPACING.size
    soundings, tops = [], []
    for i, ((x, y, azimuth), clean) in enumerate(zip(places, curves, strict=True)):
        read = clean * np.exp(generator.normal(0.0, NOISE, size))
        used, segment = np.ones(size, dtype=bool), np.zeros(size, dtype=int)
        curve = Curve(HALF_SPACING, POTENTIAL, read, np.full(size, np.nan), segment, used)
        soundings.append(Sounding(f"S{i + 1:02d}", x, y, GROUND, curve, azimuth_deg=azimuth))
        guess = depth[i] * float(np.exp(generator.normal(0.0, 0.15)))
        tops.append(say_contact(soundings[-1], "sounding", guess, 0.15 * guess, "rock"))
    for name, x in (("W1", 1_000.0), ("W2", 7_000.0)):
        well = Well(name, x, 2_000.0, GROUND, 40.0)
        tops.append(say_contact(well, "well", float(SHAPE.depth(x)), 0.5, "rock"))
        soundings.append(well)
    survey = Survey(tuple(s for s in soundings if isinstance(s, Sounding)), tuple(soundings[-2:]))
    inverted = tuple(invert_nothing(one.name) for one in survey.soundings)
    return (survey, inverted, Interpretation((), (), tuple(tops), (), ()), TEMPLATE), depth


@pytest.fixture(scope="module")
def inferred():
    """One geology with layers taken for flat, and one that minds that they are not; the true depths; what it kept."""
    arguments, depth = make_county()
    kept = []

    def keep(function, argument):
        kept.append(function(argument))
        return kept[-1]

    flat = infer_geology(*arguments, attrs.evolve(QUICK, flat_layer_sweeps=0))
    minded = infer_geology(*arguments, QUICK, remember=keep)
    return flat, minded, depth, kept[0]


def found_at(geology, n):
    """Quantiles (n, 3) of the basal contact's depth at the soundings."""
    return np.array([column.basal_depth for column in geology.columns[:n]])


def test_the_curves_are_what_the_response_says():
    places, curves = read_curves()
    axis = int(np.argmax(SHAPE.depth(places[:, 0])))
    assert np.allclose(clean_curve(SHAPE, places[axis, 0], places[axis, 2]), curves[axis], rtol=2e-3)


def test_minding_flat_layers_lowers_the_error_in_the_valley(inferred):
    flat, minded, depth, _ = inferred
    deep = depth > DEEP
    before, after = (np.log(found_at(one, depth.size)[:, 1] / depth) for one in (flat, minded))
    assert np.mean(before[deep]) < -0.06  # too shallow, as flat layers are
    assert np.mean(before[deep]) + 0.02 < np.mean(after[deep]) < 0.04
    assert np.sqrt(np.mean(after[deep] ** 2)) < 0.85 * np.sqrt(np.mean(before[deep] ** 2))
    assert np.sqrt(np.mean(after[~deep] ** 2)) < 1.1 * np.sqrt(np.mean(before[~deep] ** 2))


def test_bands_hold_the_truth_more_often(inferred):
    flat, minded, depth, _ = inferred
    deep = depth > DEEP
    held = []
    for one in (flat, minded):
        low, _, high = found_at(one, depth.size).T
        held.append(np.mean(((low <= depth) & (depth <= high))[deep]))
    assert held[1] > held[0]


def test_the_soundings_are_named_with_sign_and_size(inferred):
    flat, minded, depth, _ = inferred
    bias = {column.place: column.flat_layer_bias for column in minded.columns}
    axis = [f"S{i + 1:02d}" for i in np.flatnonzero(depth > 90.0)]
    assert axis
    for name in axis:
        assert -0.25 < bias[name] < -0.05
        assert any("too shallow" in remark and f"{name} (" in remark for remark in minded.remarks)
    assert np.isnan(bias["W1"])
    plain = [f"S{i + 1:02d}" for i in np.flatnonzero(depth < 31.0)]
    assert max(abs(bias[name]) for name in plain) < 0.05
    assert set(axis) <= set(minded.diagnostics["misread_by_flat_layers"])
    assert not any("not flat" in remark for remark in flat.remarks)
    assert flat.diagnostics["misread_by_flat_layers"] == {}


def test_a_pick_is_not_moved_by_what_flat_layers_would_have_made_of_it(inferred):
    _, minded, depth, kept = inferred
    (survey, inverted, said, template), _ = make_county()
    deepest = int(np.argmax(depth))
    decided = depth[deepest] + 4.0
    pick = say_contact(survey.soundings[deepest], "pick", decided, 1.0, "rock")
    said = attrs.evolve(said, tops=(*said.tops, pick))
    picked = infer_geology(survey, inverted, said, template, QUICK, remember=lambda *_: kept)
    low, middle, high = picked.columns[deepest].basal_depth
    assert low < decided < high
    assert abs(middle - decided) < 1.5
    assert picked.columns[deepest].flat_layer_bias == minded.columns[deepest].flat_layer_bias < -0.05
