# ruff: noqa: INP001 - a script beside the page that it writes, not a package
"""Writes the tables of checks.md anew from the catalogue that check.html is written from."""

from collections.abc import Iterator
from pathlib import Path

from geoves.checking.catalogue import CHECKS

PAGE = Path(__file__).with_name("checks.md")


def write_checks() -> Iterator[str]:
    """The table of checks, line by line."""
    yield "| check | what it looks at | told from | why | what to do |"
    yield "|---|---|---|---|---|"
    for check in CHECKS.values():
        yield f"| `{check.name}` | {check.looks_at} | {check.threshold} | {check.why} | {check.advice} |"


def fill_page(text: str) -> str:
    """The page with the table of the catalogue between its marks."""
    opening, closing = "<!-- checks -->\n", "<!-- end of checks -->"
    before, rest = text.split(opening)
    _, after = rest.split(closing)
    return before + opening + "\n".join(write_checks()) + "\n" + closing + after


if __name__ == "__main__":
    PAGE.write_text(fill_page(PAGE.read_text(encoding="utf-8")), encoding="utf-8")
