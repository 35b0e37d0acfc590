"""Readings that layered ground cannot make are doubted by row and spacing; nothing else is touched."""

import attrs
import numpy as np
import pytest

from geoves.curves import prepare_curves
from geoves.domain.findings import Finding
from geoves.domain.survey import Curve, Sounding, Survey
from tests.published.curve_tables import ALL_CURVES
from tests.reference.image_series import ideal_response, layered_strengths

# Ten readings a decade, as the tables of the trade have them.
SPACING = np.array([1.5, 2, 2.5, 3, 4, 5, 6, 8, 10, 12, 15, 20, 25, 30, 40, 50, 60, 80, 100, 120, 150, 200.0])
FIRST_ROW = 37


def printed_ground(curve, spacing=SPACING):
    """A printed model's curve by images, whose step is one metre."""
    strengths = layered_strengths(curve.thickness, curve.resistivity, 8000)
    return np.array([ideal_response(s, 1.0, curve.resistivity[0], strengths) for s in spacing])


def sounding_of(apparent, spacing=SPACING, *, segment=None, used=None, name="Heron 4"):
    n = len(spacing)
    segment = np.zeros(n, dtype=int) if segment is None else segment
    used = np.ones(n, dtype=bool) if used is None else used
    curve = Curve(
        spacing, np.where(segment == 0, 0.4, 4.0), apparent, np.full(n, np.nan), segment, used, ("",) * n,
        FIRST_ROW + np.arange(n),
    )  # fmt: skip
    return Sounding(name, 500_000.0, 4_600_000.0, 400.0, curve)


def doubts_of(*soundings, options=None):
    return prepare_curves(Survey(soundings), options).doubts


@pytest.mark.parametrize("curve", ALL_CURVES, ids=lambda curve: curve.name)
def test_layered_ground_raises_no_doubt(curve):
    assert doubts_of(sounding_of(printed_ground(curve))) == ()


def test_field_noise_of_three_percent_raises_hardly_any():
    """440 readings: a jump of 15 % is four deviations of one against its two neighbours; steps of 20 % in AB/2 rise
    by the noise alone, where the curve does at 45 degrees nearly.
    """
    generator = np.random.default_rng(3)
    soundings = [
        sounding_of(printed_ground(curve) * np.exp(0.03 * generator.standard_normal(SPACING.size)))
        for curve in (ALL_CURVES[0], *ALL_CURVES[3:6], ALL_CURVES[7])
        for _ in range(4)
    ]
    assert len(doubts_of(*soundings)) <= 4


@pytest.mark.parametrize("factor", [1.35, 0.7])
@pytest.mark.parametrize("spoilt", [4, 12, 19])
def test_a_jump_is_doubted_at_its_own_row_and_spacing(factor, spoilt):
    apparent = printed_ground(ALL_CURVES[3])
    apparent[spoilt] *= factor
    doubts = [one for one in doubts_of(sounding_of(apparent)) if "off the line" in one.expected]
    assert [one.row for one in doubts] == [FIRST_ROW + spoilt]
    (found,) = doubts
    assert (found.severity, found.column, found.place) == ("doubt", "apparent_resistivity", "Heron 4")
    assert f"AB/2 {SPACING[spoilt]:g} m" in found.value
    # Against the chord of its neighbours, which the curve's own bend at its least value lies 5 % below.
    said = float(found.expected.split("%")[0]) / 100.0
    assert said == pytest.approx(factor - 1.0, abs=0.06)


def test_a_rise_steeper_than_one_to_one_is_doubted_where_it_ends():
    """An electrode left at 80 m for a planned 100 (MN/2 5 m, uniform ground) reads 1.2824 times too high.

    From the geometric factors (tests/published/test_electrode_geometry.py). On an insulating base, where the curve
    rises at 45 degrees as it is, the step to that point is steeper than any layers allow.
    """
    base = ALL_CURVES[2]
    apparent = printed_ground(base)
    at = int(np.flatnonzero(SPACING == 100.0)[0])
    apparent[at:] *= 1.2824
    rises = [one for one in doubts_of(sounding_of(apparent)) if "rises" in one.expected]
    assert [one.row for one in rises] == [FIRST_ROW + at]
    assert "AB/2 100 m" in rises[0].value
    slope = np.log(apparent[at] / apparent[at - 1]) / np.log(100.0 / 80.0)
    assert f"rises {slope:.2f} decades" in rises[0].expected


def test_a_steep_fall_is_no_rise():
    apparent = np.where(SPACING < 30.0, 300.0, 300.0 * (30.0 / SPACING) ** 2.5)
    assert not [one for one in doubts_of(sounding_of(apparent)) if "rises" in one.expected]


def test_a_shift_between_segments_is_no_jump():
    """The new MN reads 18 % higher all along, with two spacings repeated: each segment is smooth by itself."""
    spacing = np.concatenate([SPACING[:14], SPACING[12:]])
    segment = np.repeat([0, 1], [14, SPACING.size - 12])
    apparent = printed_ground(ALL_CURVES[3], spacing) * np.where(segment == 1, 1.18, 1.0)
    assert doubts_of(sounding_of(apparent, spacing, segment=segment)) == ()


def test_a_reading_out_of_use_is_not_judged_again():
    apparent, used = printed_ground(ALL_CURVES[3]), np.ones(SPACING.size, dtype=bool)
    apparent[10] *= 2.0
    used[10] = False
    assert doubts_of(sounding_of(apparent, used=used)) == ()


def test_too_few_readings_are_said():
    used = np.arange(SPACING.size) < 4
    (found,) = doubts_of(sounding_of(printed_ground(ALL_CURVES[0]), used=used))
    assert found.place == "Heron 4"
    assert found.value.startswith("4 usable")
    enough = np.arange(SPACING.size) < 5
    assert doubts_of(sounding_of(printed_ground(ALL_CURVES[0]), used=enough)) == ()


def test_nothing_is_dropped_and_former_doubts_stay():
    apparent = printed_ground(ALL_CURVES[3])
    apparent[8] *= 1.5
    former = Finding("doubt", "wells.csv", 3, "x", "12", "lies outside the boundary")
    survey = attrs.evolve(Survey((sounding_of(apparent), sounding_of(printed_ground(ALL_CURVES[4])))), doubts=(former,))
    prepared = prepare_curves(survey)
    assert prepared.soundings == survey.soundings
    assert prepared.doubts[0] == former
    assert len(prepared.doubts) > 1
