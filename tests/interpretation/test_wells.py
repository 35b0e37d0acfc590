"""Drillers' words and wells: what a log shows, what it only bounds, and what nothing claims."""

import numpy as np
import pytest

from geoves.domain.survey import Pick
from geoves.interpretation.words import claim_words, normal_words
from tests.interpretation.columns import FULL, PLAIN, read_places, tops_by, well_of

# Words, and the units that claim them at the default likeness of 80 (terms in columns.py; common practice).
WORDS = [
    ("topsoil", {"till"}),
    ("Top Soil", {"till"}),
    ("tp soil", {"till"}),
    ("yellow clay", {"till"}),
    ("yel. clay", {"clay"}),
    ("BRN CLAY", {"till"}),
    ("blue clay", {"clay"}),
    ("blu cl", {"clay"}),
    ("bleu clay", {"clay"}),
    ("clay, sticky", {"clay"}),
    ("gry clay", {"clay"}),
    ("gravel", {"upper", "deep"}),
    ("gravle", {"upper", "deep"}),
    ("grvl w/ wtr", {"upper", "deep"}),
    ("sd & gr", {"upper"}),
    ("sand and gravel", {"upper"}),
    ("crs sd & grvl", {"deep"}),
    ("limestone", {"lime"}),
    ("LS", {"lime"}),
    ("limestone, frac", {"lime"}),
    ("brkn lime", {"lime"}),
    ("muck", set()),
    ("no record", set()),
    ("", set()),
    ("12 - 14", set()),
]


@pytest.mark.parametrize(("words", "units"), WORDS, ids=[words or "nothing" for words, _ in WORDS])
def test_words_are_claimed(words, units):
    assert set(claim_words(words, FULL, 80.0).likeness) == units


def test_an_exact_term_is_certain_and_an_alike_one_less():
    assert claim_words("Blue clay", FULL, 80.0).likeness["clay"] == 1.0
    assert 0.8 <= claim_words("bleu clay", FULL, 80.0).likeness["clay"] < 1.0


def test_a_looser_match_claims_a_short_word_with_two_letters_swapped():
    assert set(claim_words("caly", FULL, 70.0).likeness) == {"clay"}
    assert not claim_words("caly", FULL, 80.0).likeness


def test_abbreviations_are_written_out():
    assert normal_words("Fn sd & gr w/ wtr, 20 gpm") == "fine sand and gravel with water gpm"


def units_of(found, well):
    return [reading.unit for reading in found.well_readings if reading.well == well]


def test_gravel_is_shallow_above_clay_and_deep_under_it():
    """The same word twice: the order of the column and the depths of the template decide."""
    log = well_of("W", (0, 3, "topsoil"), (3, 9, "gravel"), (9, 40, "blue clay"), (40, 52, "gravel"), (52, 55, "ls"))
    found = read_places([], FULL, wells=[log])
    assert units_of(found, "W") == ["till", "upper", "clay", "deep", "lime"]
    (basal,), (rock,) = (tops_by(found, "W", contact) for contact in ("basal", "bedrock"))
    assert (basal.status, basal.depth, basal.unit) == ("at", 40.0, "deep")
    assert (rock.status, rock.depth, rock.unit) == ("at", 52.0, "lime")
    assert rock.elevation == pytest.approx(350.0)
    assert rock.standard_error == pytest.approx((0.3**2 + 0.52**2) ** 0.5)
    thickness = {row.role: (row.thickness, row.at_least) for row in found.thicknesses}
    assert thickness == {
        "cover": (3.0, False),
        "shallow_aquifer": (6.0, False),
        "deep_aquifer": (12.0, False),
    }


def test_unmapped_words_are_listed_and_claimed_by_nothing():
    log = well_of("W", (0, 3, "topsoil"), (3, 6, "muck & stumps"), (6, 40, "blue clay"), (40, 44, "limestone"))
    found = read_places([], FULL, wells=[log])
    assert found.unmapped_words == ("muck & stumps",)
    assert units_of(found, "W") == ["till", None, "clay", "lime"]
    assert len(found.well_readings) == 4


def test_a_typed_unit_is_taken_as_it_is():
    log = well_of("W", (0, 3, "topsoil"), (3, 30, "blue clay"), (30, 38, "gray stuff", "deep"), (38, 41, "limestone"))
    found = read_places([], FULL, wells=[log])
    assert units_of(found, "W") == ["till", "clay", "deep", "lime"]
    assert found.unmapped_words == ()


def test_a_well_that_stops_above_rock_is_a_bound():
    found = read_places([], FULL, wells=[well_of("W", (0, 3, "topsoil"), (3, 48, "blue clay"), total=50.0)])
    for contact in ("basal", "bedrock"):
        (top,) = tops_by(found, "W", contact)
        # The log is silent of the last 2 m of the hole.
        assert (top.status, top.depth) == ("below", 48.0)
        assert top.elevation == pytest.approx(354.0)
    assert not [row for row in found.thicknesses if row.role == "deep_aquifer"]


def test_a_well_that_ends_in_gravel_knows_a_least_thickness_and_a_bound():
    log = well_of("W", (0, 3, "topsoil"), (3, 40, "blue clay"), (40, 47, "gravel"))
    found = read_places([], FULL, wells=[log])
    (basal,), (rock,) = (tops_by(found, "W", contact) for contact in ("basal", "bedrock"))
    assert (basal.status, basal.depth) == ("at", 40.0)
    assert (rock.status, rock.depth) == ("below", 47.0)
    (deep,) = [row for row in found.thicknesses if row.role == "deep_aquifer"]
    assert (deep.thickness, deep.at_least) == (7.0, True)


def test_words_that_nothing_claims_above_rock_leave_gravel_open_and_the_contact_within_them():
    log = well_of("W", (0, 3, "topsoil"), (3, 40, "blue clay"), (40, 46, "muck & stumps"), (46, 50, "limestone"))
    found = read_places([], FULL, wells=[log])
    for contact in ("basal", "bedrock"):
        (top,) = tops_by(found, "W", contact)
        assert (top.status, top.depth) == ("at", 43.0)
        # Evenly likely over 6 m: 6 / sqrt(12) m, with the contact's own error.
        assert top.standard_error == pytest.approx(np.hypot(6 / np.sqrt(12), np.hypot(0.3, 0.43)), rel=1e-6)
    assert not [top for top in found.tops if top.status == "absent"]
    assert not [row for row in found.thicknesses if row.role == "deep_aquifer"]


def test_words_that_nothing_claims_at_the_foot_bound_nothing():
    log = well_of("W", (0, 3, "topsoil"), (3, 40, "blue clay"), (40, 46, "granite"))
    (top,) = tops_by(read_places([], FULL, wells=[log]), "W", "bedrock")
    assert (top.status, top.depth) == ("below", 40.0)


def test_rock_without_gravel_is_an_absence():
    log = well_of("W", (0, 3, "topsoil"), (3, 40, "blue clay"), (40, 44, "limestone"))
    found = read_places([], FULL, wells=[log])
    (absent,) = [top for top in found.tops if top.status == "absent"]
    assert (absent.unit, absent.contact) == ("deep", "deep_aquifer")
    (deep,) = [row for row in found.thicknesses if row.role == "deep_aquifer"]
    assert (deep.thickness, deep.at_least) == (0.0, False)
    assert not [top for top in read_places([], PLAIN, wells=[log]).tops if top.status == "absent"]


def test_a_well_without_words_says_nothing():
    found = read_places([], FULL, wells=[well_of("W", (0, 12, "no record"))])
    assert found.tops == ()
    assert found.thicknesses == ()
    assert found.unmapped_words == ("no record",)


ROCK_LOG = well_of("W", (0, 3, "topsoil"), (3, 40, "blue clay"), (40, 46, "gravel"), (46, 50, "limestone"))


@pytest.mark.parametrize(("status", "depth"), [("at", 47.5), ("below", 50.0)])
def test_a_pick_of_rock_outranks_the_log(status, depth):
    pick = Pick("W", "lime", status, depth, 0.8, "R. Alder", "boulders, not ledge")
    found = read_places([], FULL, wells=[ROCK_LOG], picks=[pick])
    (rock,) = tops_by(found, "W", "bedrock")
    assert (rock.status, rock.depth, rock.kind) == (status, depth, "pick")
    assert rock.source == "pick by R. Alder: boulders, not ledge"
    if status == "at":
        assert rock.standard_error == 0.8
    (basal,) = tops_by(found, "W", "basal")
    assert (basal.depth, basal.kind) == (40.0, "well")


def test_a_pick_of_absent_gravel_outranks_the_log():
    pick = Pick("W", "deep", "absent", None, None, "R. Alder", "the driller's gravel is weathered rock")
    found = read_places([], FULL, wells=[ROCK_LOG], picks=[pick])
    (deep,) = [row for row in found.thicknesses if row.role == "deep_aquifer"]
    assert (deep.thickness, deep.kind) == (0.0, "pick")
    assert "R. Alder" in deep.source
