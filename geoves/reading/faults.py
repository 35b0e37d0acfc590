"""Faults gathered from all inputs and raised at once."""

from collections.abc import Sequence
from difflib import get_close_matches

from geoves.domain.findings import Finding
from geoves.domain.region import Region
from geoves.errors import InputError


class FaultyInputError(InputError):
    """The inputs hold faults. ``findings`` has them all, and the doubts that were met beside them.

    ``region`` is what region.toml gave, so far as it can be used for further checks.
    """

    def __init__(self, findings: Sequence[Finding], region: Region | None = None) -> None:
        self.findings = tuple(findings)
        self.region = region
        super().__init__([finding.line() for finding in findings if finding.severity == "fault"])


def raise_faults(findings: Sequence[Finding], region: Region | None = None) -> None:
    """Raise FaultyInputError where at least one of the findings is a fault."""
    if any(finding.severity == "fault" for finding in findings):
        raise FaultyInputError(findings, region)


def nearest(word: str, known: Sequence[str], cutoff: float = 0.6) -> str:
    """A hint at the known name that `word` may have been meant for, empty where none is near.

    >>> nearest("cellsize", ["crs", "cell_size"])
    "; did you mean 'cell_size'?"
    """
    folded = {name.casefold(): name for name in known}
    close = get_close_matches(word.casefold(), list(folded), n=1, cutoff=cutoff)
    return f"; did you mean {folded[close[0]]!r}?" if close else ""


def in_words(names: Sequence[str]) -> str:
    """The names as a list in a sentence.

    >>> in_words(["m", "ft", "us-ft"])
    'm, ft or us-ft'
    """
    *first, last = names
    return f"{', '.join(first)} or {last}" if first else last


def printable(text: str) -> str:
    """The text on one line: white space as single blanks, what cannot be printed as `?`."""
    return "".join(letter if letter.isprintable() else "?" for letter in " ".join(text.split()))
