"""Readings that layered ground cannot make are doubted by row and spacing; nothing else is touched."""

import attrs
import numpy as np
import pytest

from geoves.checking import CurveOptions, examine_curves
from geoves.checking.curve_shape import steepest_fall, steepest_rise
from geoves.domain.survey import Curve, Sounding
from geoves.kernels.layered_earth import apparent_resistivity, layout, response
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
    return tuple(one for one in examine_curves(soundings, options).findings if one.severity == "doubt")


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
    (found,) = [one for one in doubts_of(sounding_of(apparent)) if one.check == "jump"]
    assert (found.severity, found.row, found.column) == ("doubt", FIRST_ROW + spoilt, "apparent_resistivity")
    assert found.place == "Heron 4"
    assert f"AB/2 {SPACING[spoilt]:g} m" in found.value
    # What all others let expect is the printed curve itself, to 2 %.
    said = float(found.expected.split("%")[0]) / 100.0
    assert said == pytest.approx(factor - 1.0, abs=0.025)


def test_a_jump_limit_is_an_option():
    apparent = printed_ground(ALL_CURVES[3])
    apparent[12] *= 1.35
    assert doubts_of(sounding_of(apparent), options=CurveOptions(jump_limit=40.0)) == ()


def test_two_neighbours_off_together_are_a_cusp():
    apparent = printed_ground(ALL_CURVES[4])
    apparent[[9, 10]] *= 1.45
    told = {(one.check, one.row) for one in doubts_of(sounding_of(apparent))}
    assert {row for check, row in told if check in ("cusp", "jump")} == {FIRST_ROW + 9, FIRST_ROW + 10}


def test_a_sawtooth_is_told_of_the_curve():
    apparent = printed_ground(ALL_CURVES[4]) * np.where(np.arange(SPACING.size) % 2, 1.11, 0.9)
    assert {one.check for one in doubts_of(sounding_of(apparent))} & {"rough_curve", "jump"}


def test_a_rise_steeper_than_one_to_one_is_doubted_where_it_ends():
    """On an insulating base, where the curve rises at 45 degrees as it is, every step is made a third steeper."""
    apparent = printed_ground(ALL_CURVES[2])
    steep = SPACING >= 50.0
    apparent[steep] *= (SPACING[steep] / 50.0) ** 0.4
    rises = [one for one in doubts_of(sounding_of(apparent)) if one.check == "steep_rise"]
    assert len(rises) == 1
    assert "flat layers allow 1.00 at most" in rises[0].expected


def test_no_layers_rise_faster_than_an_insulator_lets_them():
    """At one MN, over columns drawn with contrasts up to e^6: the bound that the potential spread widens.

    REFERENCES of the trade give 45 degrees for the ideal curve (Maillet 1947: rho_a goes to AB/2 over S).
    """
    generator = np.random.default_rng(5)
    spacing, potential = np.array([9.0, 10.0, 12.0, 16.0, 25.0, 60.0]), np.full(6, 3.0)
    thickness = np.exp(generator.uniform(np.log(0.5), np.log(30.0), (4000, 4)))
    resistivity = np.exp(generator.normal(0.0, 2.0, (4000, 5)))
    resistivity[:2000, -1] *= 1e4
    logs = np.log(apparent_resistivity(spacing, potential, thickness, resistivity))
    excess = np.diff(logs, axis=1) - np.diff(steepest_rise(spacing, potential))
    assert excess.max() < 1e-3
    assert excess.max() > -0.02  # and it is met
    ideal = np.diff(logs, axis=1) - np.diff(np.log(spacing))
    assert ideal.max() > 0.01  # without the potential spread a true curve would be called impossible


def test_no_drawn_column_falls_faster_than_the_limit():
    generator = np.random.default_rng(6)
    spacing = np.geomspace(0.5, 1000.0, 120)
    weights, wavenumber = layout(spacing, np.zeros_like(spacing))
    for contrast in (1.0, 2.0, 3.0):
        thickness = np.exp(generator.uniform(np.log(0.3), np.log(100.0), (4000, 5)))
        resistivity = np.exp(generator.normal(0.0, contrast, (4000, 6)))
        logs = np.log(np.maximum(response(weights[None], wavenumber, thickness, resistivity), 1e-12))
        drop = np.maximum.accumulate(logs, axis=1)[:, :-1] - logs[:, 1:]
        slope = np.diff(logs, axis=1) / np.diff(np.log(spacing))
        shown = (drop > 0.05) & (drop < 6.0)
        assert np.all(slope[shown] > np.vectorize(steepest_fall)(drop[shown]))


def test_a_fall_at_once_is_doubted():
    """From level ground straight into a fall of five decades a decade, which no layers make before a long descent."""
    apparent = 300.0 * np.minimum(1.0, (10.0 / SPACING) ** 5.0)
    assert "steep_fall" in {one.check for one in doubts_of(sounding_of(apparent))}


def test_a_steep_fall_is_no_rise():
    apparent = np.where(SPACING < 30.0, 300.0, 300.0 * (30.0 / SPACING) ** 2.5)
    assert not [one for one in doubts_of(sounding_of(apparent)) if one.check == "steep_rise"]


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
    assert found.expected.startswith("4 usable")
    enough = np.arange(SPACING.size) < 5
    assert doubts_of(sounding_of(printed_ground(ALL_CURVES[0]), used=enough)) == ()


def test_a_sounding_without_a_middle_is_refused_in_words():
    middle = (SPACING > 8.0) & (SPACING < 80.0)
    sounding = sounding_of(printed_ground(ALL_CURVES[0]), used=~middle)
    (found,) = [one for one in doubts_of(sounding) if one.check == "no_middle"]
    assert "between AB/2 8 and 80 m" in found.expected
    assert "refused" in found.expected
    assert not sounding.curve.is_enough


def test_readings_out_of_use_are_noted_with_their_reason():
    used = np.arange(SPACING.size) != 7
    sounding = sounding_of(printed_ground(ALL_CURVES[3]), used=used)
    reason = tuple("wire fence" if i == 7 else "" for i in range(SPACING.size))
    sounding = attrs.evolve(sounding, curve=attrs.evolve(sounding.curve, reason=reason))
    (note,) = examine_curves((sounding,)).findings
    assert (note.severity, note.row, note.check) == ("note", FIRST_ROW + 7, "unused_reading")
    assert "wire fence" in note.expected
