"""What is said of a sounding: in the region's unit, of the right strength, and silent where nothing is known."""

import attrs
import numpy as np
import pytest

from geoves.delivery.sentences import (
    tell_all,
    tell_contrast,
    tell_hidden,
    tell_opinion,
    tell_pick,
    tell_readings_aside,
    tell_sounding,
    tell_trade_offs,
)
from geoves.domain.survey import Pick
from geoves.domain.tops import PickOpinion
from geoves.domain.units import Role, Template

FOOT = 0.3048


@pytest.fixture
def column(small_results):
    """A contact at 100 ft, between 80 and 120 ft, with gravel of up to 30 ft at even odds."""
    return attrs.evolve(
        small_results.interpretation.columns[0],
        bedrock_depth=105.0 * FOOT,
        basal_depth=np.array([80.0, 100.0, 120.0]) * FOOT,
        gravel_probability=0.5,
        gravel_limit=30.0 * FOOT,
    )


def test_the_contact_is_told_in_the_regions_unit(column, small_results):
    template = small_results.region.template
    assert tell_sounding(column, template, "ft") == (
        "Basal gravel or rock begins at 100 ft, between 80 and 120 ft with 90 % probability; "
        "basal gravel on the rock is about as likely as not (0.50), which puts rock at 105 ft on average."
    )
    assert tell_hidden(column, template, "ft").startswith("Up to 30 ft of basal gravel could lie on the rock")
    assert " m" not in tell_sounding(column, template, "ft").replace("about", "")


@pytest.mark.parametrize(("before", "decides"), [(0.36, False), (0.5, False), (0.64, False), (0.34, True), (0.9, True)])
def test_a_curve_that_hardly_moves_the_chance_of_gravel_does_not_decide_it(column, small_results, before, decides):
    template = small_results.region.template
    said = tell_sounding(attrs.evolve(column, gravel_prior=before), template, "ft")
    assert ("as likely as not (0.50)" in said) == decides
    undecided = f"whether basal gravel lies on the rock this curve does not decide (assumed beforehand: {before:.2f})"
    assert (undecided in said) == (not decides)


def test_contrast_is_told_only_of_a_base_that_was_seen(column):
    strong = attrs.evolve(column, base_contrast=2.0)
    assert tell_contrast(strong)
    assert not any(tell_contrast(attrs.evolve(strong, bedrock_status=one)) for one in ("not_distinct", "deeper_than"))


def test_what_is_not_known_is_not_told(column, small_results):
    template = small_results.region.template
    blind = attrs.evolve(
        column, bedrock_status="deeper_than", bedrock_depth=61.0, basal_depth=np.full(3, np.nan),
        gravel_probability=np.nan, gravel_limit=np.nan, base_contrast=np.nan,
    )  # fmt: skip
    assert tell_all(blind, template, "m") == (
        "No basal gravel or rock above 61 m, where the curve would have shown it; what lies deeper is not known."
    )
    vague = attrs.evolve(column, bedrock_status="not_distinct", basal_depth=np.full(3, np.nan))
    assert tell_sounding(vague, template, "m") == "The curve does not show where basal gravel or rock begins."
    assert "nan" not in tell_all(attrs.evolve(column, basal_depth=np.full(3, np.nan)), template, "m")


def test_a_template_without_gravel_speaks_of_rock_alone(column, small_results):
    units = [unit for unit in small_results.region.template.units if unit.role is not Role.DEEP_AQUIFER]
    said = tell_all(column, Template(tuple(units)), "m")
    assert said.startswith("Rock begins at 30 m")
    assert "gravel" not in said


@pytest.mark.parametrize(
    ("ratio", "words"),
    [
        (6.0, "Rock is 6.0 times as resistive as what lies on it: a strong contrast."),
        (1.5, "Rock is 1.5 times as resistive as what lies on it: a weak contrast."),
        (0.4, "Rock is 2.5 times as conductive as what lies on it: a clear contrast."),
        (1.05, "Rock and what lies on it have much the same resistivity: no curve tells them apart."),
    ],
)
def test_contrast_is_told_by_its_strength(column, ratio, words):
    assert tell_contrast(attrs.evolve(column, base_contrast=np.log(ratio))) == words


def test_picks_are_told_with_what_the_curve_says(column, small_results):
    template = small_results.region.template
    pick = Pick("Larch 1", "shale", "at", 100 * FOOT, 5 * FOOT, "A. Reader", "tied to a log")
    assert tell_pick(pick, template, "ft") == "Decided by A. Reader: Shale & siltstone at 100 ft ± 5 (tied to a log)."
    assert tell_sounding(attrs.evolve(column, picks=(pick,)), template, "ft") == tell_pick(pick, template, "ft")
    agrees = PickOpinion(pick, 0.31, 90 * FOOT, 0.0, against=False)
    assert "by itself says 90 ft; a difference like this or larger would be chance in 31 of" in tell_opinion(
        agrees, "ft"
    )
    against = PickOpinion(pick, 0.002, 60 * FOOT, 40 * FOOT, against=True)
    assert tell_opinion(against, "ft") == (
        "The curve speaks against this pick: by itself it says 60 ft; it excludes any above 40 ft. The pick stands."
    )
    paid = attrs.evolve(against, rms_percent=6.24, free_rms_percent=2.81)
    assert tell_opinion(paid, "ft").endswith("With the pick the curve is fitted within 6.2 %, without within 2.8 %.")
    free = attrs.evolve(agrees, rms_percent=2.81, free_rms_percent=2.81)
    assert tell_opinion(free, "ft").endswith("With the pick the curve is fitted as well as without: within 2.8 %.")
    silent = PickOpinion(pick, np.nan, np.nan, 0.0, against=False)
    assert tell_opinion(silent, "ft") == "The curve neither confirms nor contradicts this pick."
    gone = attrs.evolve(pick, status="absent", depth=None, depth_error=None)
    assert tell_hidden(attrs.evolve(column, picks=(gone,)), template, "m") == ""
    assert "gives it a probability of 0.65" in tell_opinion(PickOpinion(gone, 0.65, 30.0, 0.0, against=False), "m")


def test_readings_and_trade_offs_are_told_from_their_fields(small_results):
    sounding, inverted = small_results.survey.soundings[5], small_results.inverted[5]
    said = tell_readings_aside(sounding.curve, inverted, "m")
    assert said == ["AB/2 4 m: far from the curve of every layered model"]
    feet = tell_readings_aside(sounding.curve, inverted, "ft")
    assert feet[0].startswith("AB/2 13.12 ft")
    assert tell_trade_offs(attrs.evolve(inverted, trade_offs=("layer 2: S", "layer 3: T"))) == "Layer 2: S. Layer 3: T."
    assert tell_trade_offs(attrs.evolve(inverted, trade_offs=())) == ""
