"""Drillers' words to units: exact terms first, then alike ones; what nothing claims stays unmapped and is listed."""

import re
from itertools import pairwise

import attrs
from rapidfuzz.distance import OSA

from geoves.domain.units import Template

# Abbreviations of drillers' logs (common practice).
ABBREVIATIONS = {
    "&": " and ", "w/": " with ", "sd": "sand", "snd": "sand", "gr": "gravel", "grvl": "gravel", "grav": "gravel",
    "cl": "clay", "ls": "limestone", "lime": "limestone", "lmst": "limestone", "sh": "shale", "bldrs": "boulders",
    "brn": "brown", "blu": "blue", "gry": "gray", "grey": "gray", "fn": "fine", "crs": "coarse", "med": "medium",
    "frac": "fractured", "wtr": "water", "tp": "top",
}  # fmt: skip

# Two words are never the same below this share of like letters: one slip in four letters.
LEAST_ALIKE_WORD = 0.74


@attrs.frozen
class Claim:
    """Units (codes) that claim a driller's words, with how alike the words and the unit's term are (0 to 1)."""

    likeness: dict[str, float]


def normal_words(text: str) -> str:
    """Lower case, abbreviations written out, signs and numbers dropped.

    >>> normal_words("Sand & Grvl w/ wtr, 5 gpm")
    'sand and gravel with water gpm'
    """
    spaced = text.lower().replace("&", " & ").replace("w/", " w/ ")
    words = [ABBREVIATIONS.get(word.strip(".,;:()"), word.strip(".,;:()")) for word in spaced.split()]
    return " ".join(re.sub(r"[^a-z ]", " ", " ".join(words)).split())


def claim_words(description: str, template: Template, least_match: float) -> Claim:
    """Which units claim a description: every unit with a term alike enough, the most alike term counting.

    An exact term beats all that are only alike; of those, only terms within five points of the best count.
    """
    words = normal_words(description).split()
    scores = {
        unit.code: max((_likeness(words, term) for term in unit.log_terms), default=0.0) for unit in template.units
    }
    best = max(scores.values(), default=0.0)
    kept = {code: score for code, score in scores.items() if score >= max(least_match, best - 5.0)}
    return Claim({code: score / 100.0 for code, score in kept.items()})


def _likeness(words: list[str], term: str) -> float:
    """How alike (0 to 100) a description and a term are: 100 where they are the same.

    Each word of the term looks for its like among the words, two neighbours written as one included; a term that
    leaves words unsaid counts a little less, so that "coarse sand and gravel" beats "gravel" where both are terms.
    """
    wanted = normal_words(term).split()
    if not words or not wanted:
        return 0.0
    if words == wanted:
        return 100.0
    candidates = words + [first + second for first, second in pairwise(words)]
    found = [max(OSA.normalized_similarity(word, one) for one in candidates) for word in wanted]
    if min(found) < LEAST_ALIKE_WORD:
        return 0.0
    unsaid = 1.0 - min(len(wanted) / len(words), 1.0)
    return 96.0 * sum(found) / len(found) - 6.0 * unsaid
