"""Drillers' words to units: exact terms first, then alike ones; what nothing claims stays unmapped and is listed."""

import re

import attrs
from rapidfuzz import fuzz, process

from geoves.domain.units import Template

# Abbreviations of drillers' logs (common practice).
ABBREVIATIONS = {
    "&": " and ", "w/": " with ", "sd": "sand", "snd": "sand", "gr": "gravel", "grvl": "gravel", "grav": "gravel",
    "cl": "clay", "ls": "limestone", "lime": "limestone", "lmst": "limestone", "sh": "shale", "bldrs": "boulders",
    "brn": "brown", "blu": "blue", "gry": "gray", "grey": "gray", "fn": "fine", "crs": "coarse", "med": "medium",
    "frac": "fractured", "wtr": "water", "tp": "top",
}  # fmt: skip


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
    words = normal_words(description)
    scores: dict[str, float] = {}
    for unit in template.units:
        terms = [normal_words(term) for term in unit.log_terms]
        if words in terms:
            scores[unit.code] = 101.0
        elif terms and words:
            # The share of letters alike; longer descriptions that hold a whole term count a little less.
            whole = process.extractOne(words, terms, scorer=fuzz.token_sort_ratio)[1]
            held = 0.95 * max(fuzz.token_set_ratio(words, term) * _specific(term, words) for term in terms)
            scores[unit.code] = max(whole, held)
    best = max(scores.values(), default=0.0)
    kept = {code: score for code, score in scores.items() if score >= max(least_match, best - 5.0)}
    return Claim({code: min(score, 100.0) / 100.0 for code, score in kept.items()})


def _specific(term: str, words: str) -> float:
    """1 for a term of several of the words, a little less for one that leaves most of them unsaid."""
    said = len(set(term.split()) & set(words.split()))
    return 0.9 + 0.1 * said / max(len(set(words.split())), 1)
