"""Chapter 4 of the report: what the wells did, in numbers that can be worked out again."""

import re

import attrs
import numpy as np

from geoves.delivery.report_wells import write_wells_and_template
from geoves.delivery.sentences import tell_beside, tell_water_level
from geoves.domain.tops import PairCalibration, PairedUnit, WaterShift, WellBeside, WellPair, WellWater


def chapter(results, **more):
    """The chapter's text and the cells of its tables' rows, of results with more in their interpretation."""
    found = attrs.evolve(results.interpretation, **more)
    html = str(write_wells_and_template(attrs.evolve(results, interpretation=found)))
    rows = [re.findall(r"<td[^>]*>(.*?)</td>", row, re.DOTALL) for row in re.findall(r"<tr>.*?</tr>", html, re.DOTALL)]
    return html, [[re.sub(r"<[^>]+>", "", cell) for cell in row] for row in rows if row]


def test_waters_and_shifts_stand_with_their_numbers(small_results):
    """Typical water of 10 ohm m under a template of sqrt(38 x 55) = 45.7 ohm m: a formation factor of 4.6 (Archie)."""
    waters = (WellWater("W-1", "deep_aquifer", 2000.0, 6.0, 0.6),)
    shifts = (WaterShift("Larch 2", "deep_aquifer", 0.63, "W-1", 420.0),)
    html, rows = chapter(small_results, well_waters=waters, water_shifts=shifts, remarks=("Said & done.",))
    assert ["W-1", "Basal gravel", "2,000", "6.0", "4.6", "0.60"] in rows
    assert ["Larch 2", "Basal gravel", "× 0.63", "W-1", "420 m"] in rows
    assert "Said &amp; done." in html
    assert "Waters of the aquifers" not in chapter(small_results)[0]


def test_the_water_level_is_told_with_its_doubt_in_the_regions_unit(small_results):
    column = attrs.evolve(small_results.interpretation.columns[0], water_level=np.array([3.048, 0.9144]))
    assert "10.0 ± 3.0 ft here" in tell_water_level(column, "ft")
    assert tell_water_level(small_results.interpretation.columns[0], "ft") == ""


def test_pairs_stand_with_their_misses_and_what_they_made_of_the_template(small_results):
    pairs = (WellPair("W-1", "Larch 2", 120.0, 1.04, ""), WellPair("W-3", "Larch 7", 90.0, np.nan, "the log has gaps"))
    units = (
        PairedUnit("blue_clay", (12.0, 26.0), (14.2, 27.9), 5, 1.234, True),
        PairedUnit("till", (22.0, 45.0), (23.0, 44.0), 5, -0.2, False),
        PairedUnit("shale", (50.0, 95.0), (50.0, 95.0), 2, np.nan, False),
    )
    _, rows = chapter(small_results, pair_calibration=PairCalibration(250.0, 4, pairs, units))
    assert ["W-1", "Larch 2", "120 m", "1.0", "serves"] in rows
    assert ["W-3", "Larch 7", "90 m", "–", "the log has gaps"] in rows
    assert ["Blue clay", "12 to 26", "5", "14.2 to 27.9", "+1.23", "moved"] in rows
    assert ["Weathered till", "22 to 45", "5", "23 to 44", "-0.20",
            "as typed: moved, it would predict wells left out no better"] in rows  # fmt: skip
    assert ["Shale &amp; siltstone", "50 to 95", "2", "–", "–",
            "as typed: fewer than 4 pairs, or of too few wells"] in rows  # fmt: skip


def test_a_log_beside_is_named_whether_it_agrees_or_not(small_results):
    column = small_results.interpretation.columns[0]
    agreeing = attrs.evolve(column, beside=WellBeside("W-1", 304.8, 0.6, agrees=True))
    against = attrs.evolve(column, beside=WellBeside("W-1", 304.8, 0.001, agrees=False))
    assert "meet the log of W-1, 1,000 ft away. What counts in the surfaces is the curve's own" in tell_beside(
        agreeing, "ft"
    )
    assert "Hardly any column that fits this curve meets the log of W-1" in tell_beside(against, "ft")
    assert tell_beside(column, "ft") == ""
