"""A table as typed: headings, rows, and cells that complain where they are not what is expected."""

import math
import re
from collections.abc import Callable, Iterable, Mapping, Sequence
from itertools import pairwise

import attrs

from geoves.domain.findings import Finding, Severity
from geoves.reading.faults import in_words, nearest

_DECIMAL_COMMA = re.compile(r"[+-]?\d+,\d+", re.ASCII)
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?", re.ASCII)


@attrs.frozen
class Range:
    """What a number may be: `words` for people, and the limits; `above` where the lower one itself is excluded."""

    words: str
    lower: float = -math.inf
    upper: float = math.inf
    above: bool = False

    def holds(self, value: float) -> bool:
        """Whether the value is in the range."""
        return (value > self.lower if self.above else value >= self.lower) and value <= self.upper


@attrs.frozen
class Row:
    """One row: its number as a spreadsheet shows it, its cells by heading, and where its complaints go."""

    file: str
    number: int
    cells: Mapping[str, str]
    findings: list[Finding]
    decimal_comma: bool = False
    place: str = ""
    missing: frozenset[str] = frozenset()  # needed columns that the table lacks, of which its header was told

    def complain(
        self, column: str, expected: str, *, severity: Severity = "fault", value: str | None = None, check: str = ""
    ) -> None:
        """Note a fault, or a doubt, at the column's cell."""
        shown = self.text(column) if value is None else value
        self.findings.append(Finding(severity, self.file, self.number, column, shown, expected, self.place, check))

    def doubt(self, column: str, words: str, check: str = "") -> None:
        """Note a doubt at the column's cell, of the check of that name."""
        self.complain(column, words, severity="doubt", check=check)

    def text(self, column: str) -> str:
        """The cell's text, empty where there is no such column."""
        return self.cells.get(column, "")

    def required_text(self, column: str, words: str) -> str:
        """The cell's text; a fault where it is empty."""
        if not self.text(column) and column not in self.missing:
            self.complain(column, f"empty; expected {words}")
        return self.text(column)

    def number_in(self, column: str, allowed: Range) -> float | None:
        """The cell's number, None where it is empty or, with a fault, where it is no number or out of the range."""
        typed = self.text(column)
        if not typed:
            return None
        value = parse_number(typed, decimal_comma=self.decimal_comma)
        if value is None:
            self.complain(column, f"not a number; expected {allowed.words}{self._hint_at_comma(typed)}")
        elif not math.isfinite(value) or not allowed.holds(value):
            self.complain(column, f"expected {allowed.words}")
            return None
        return value

    def _hint_at_comma(self, typed: str) -> str:
        """What to do with a decimal comma in a table whose cells are separated by commas; empty where there is none."""
        if self.decimal_comma or not _DECIMAL_COMMA.fullmatch(typed):
            return ""
        meant = typed.replace(",", ".")
        return f"; {meant} is meant? A decimal comma is read where ; or a tab stands between cells, here write a point"

    def required_number(self, column: str, allowed: Range) -> float:
        """The cell's number; NaN, with a fault, where it is empty, no number or out of the range."""
        if not self.text(column) and column not in self.missing:
            self.complain(column, f"empty; expected {allowed.words}")
        value = self.number_in(column, allowed)
        return math.nan if value is None else value

    def without_complaints(self) -> "Row":
        """The same row, whose complaints nobody hears."""
        return attrs.evolve(self, findings=[])


@attrs.frozen
class Table:
    """A table as typed. Headings of the contract are in its own spelling; others stay as they were typed."""

    file: str
    headings: tuple[str, ...]
    header_row: int
    rows: tuple[Row, ...]
    missing: frozenset[str] = frozenset()

    def has(self, *columns: str) -> bool:
        """Whether all these columns are there."""
        return all(column in self.headings for column in columns)


@attrs.frozen
class Columns:
    """The columns of a table: required ones, alternatives of which one is needed whole, and optional ones."""

    required: tuple[str, ...]
    alternatives: tuple[tuple[tuple[str, ...], ...], ...] = ()
    optional: tuple[str, ...] = ()

    @property
    def known(self) -> tuple[str, ...]:
        """All columns that the contract names for the table."""
        either = (name for choice in self.alternatives for names in choice for name in names)
        return tuple(dict.fromkeys((*self.required, *either, *self.optional)))


COORDINATES = (("x", "y"), ("lon", "lat"))


def parse_number(typed: str, *, decimal_comma: bool = False) -> float | None:
    """The number, None where the text is none. Thousands are not grouped: `1,234` is refused or 1.234.

    >>> parse_number("12,5", decimal_comma=True), parse_number("1e3"), parse_number("1_000"), parse_number("nan")
    (12.5, 1000.0, None, None)
    """
    text = typed.replace("\N{MINUS SIGN}", "-")
    if decimal_comma:
        text = text.replace(",", ".")
    return float(text) if _NUMBER.fullmatch(text) else None


def build_table(file: str, records: Iterable[Sequence[str]], columns: Columns, findings: list[Finding]) -> Table | None:
    """The table of the records, of which the first that is not blank has the headings; None where there is none.

    Records are counted from 1, blank ones too, as a spreadsheet counts its rows. Blank rows are left out.
    """
    numbered = ((number, cells) for number, cells in enumerate(records, start=1) if any(cells))
    header_row, typed = next(numbered, (0, ()))
    if not header_row:
        findings.append(Finding("fault", file, 0, "", "", "the table is empty; expected headings and rows"))
        return None
    headings = [_canonical(heading, columns.known) for heading in typed]
    _refuse_repeated_headings(file, header_row, headings, findings)
    table = Table(file, tuple(heading for heading in headings if heading), header_row, ())
    missing = check_columns(table, columns, findings)
    rows = []
    for number, cells in numbered:
        typed_cells = dict(zip(headings, (*cells, *[""] * len(headings)), strict=False))
        row = Row(file, number, typed_cells, findings, missing=missing)
        _refuse_cells_without_heading(row, headings, cells)
        rows.append(row)
    return attrs.evolve(table, rows=tuple(rows), missing=missing)


def _canonical(heading: str, known: Sequence[str]) -> str:
    folded = re.sub(r"[\s-]+", "_", heading.casefold())
    return folded if folded in known else heading


def _refuse_repeated_headings(file: str, row: int, headings: Sequence[str], findings: list[Finding]) -> None:
    repeated = {heading for heading in headings if heading and headings.count(heading) > 1}
    findings.extend(
        Finding("fault", file, row, heading, heading, "two columns have this heading; rename or delete one")
        for heading in sorted(repeated)
    )


def _refuse_cells_without_heading(row: Row, headings: Sequence[str], cells: Sequence[str]) -> None:
    stray = [cell for place, cell in enumerate(cells) if cell and (place >= len(headings) or not headings[place])]
    if stray:
        row.complain(
            "",
            f"the row has {len(cells)} cells for {len(headings)} columns and this one has no heading; "
            f"put text that holds the separator in quotation marks{_hint_at_split_number(row, cells)}",
            value=stray[0],
        )


def _hint_at_split_number(row: Row, cells: Sequence[str]) -> str:
    """A hint where two neighbouring cells look like the two sides of a decimal comma."""
    digits = [cell.strip() for cell in cells]
    split = any(re.fullmatch(r"[+-]?\d+", left) and re.fullmatch(r"\d+", right) for left, right in pairwise(digits))
    if row.decimal_comma or not split:
        return ""
    return "; a decimal comma splits a number in two: write a point, or put ; between the cells"


def check_columns(table: Table, columns: Columns, findings: list[Finding]) -> frozenset[str]:
    """The needed columns that are not there, each a fault with the heading that may be meant."""
    absent = [name for name in columns.required if name not in table.headings]
    findings.extend(_missing(table, name, f"expected a column {name!r}", columns.known) for name in absent)
    for choice in columns.alternatives:
        if not any(table.has(*names) for names in choice):
            words = in_words([" with ".join(names) for names in choice])
            begun = next((names for names in choice if any(table.has(name) for name in names)), choice[0])
            name = next(name for name in begun if not table.has(name))
            findings.append(_missing(table, name, f"expected the columns {words}", columns.known))
            absent += [name for names in choice for name in names]
    _doubt_near_headings(table, columns, findings)
    return frozenset(absent)


def _doubt_near_headings(table: Table, columns: Columns, findings: list[Finding]) -> None:
    """A doubt for an extra column whose heading is nearly that of an optional one that is not there."""
    absent = [name for name in columns.optional if name not in table.headings]
    for heading in table.headings:
        if heading not in columns.known and (hint := nearest(heading, absent, cutoff=0.75)):
            words = f"an extra column, which is carried through and not used{hint}"
            findings.append(Finding("doubt", table.file, table.header_row, heading, heading, words))


def _missing(table: Table, name: str, expected: str, known: Sequence[str]) -> Finding:
    strangers = [heading for heading in table.headings if heading not in known]
    found = f"; the headings are {', '.join(table.headings[:12])}"
    expected = f"no such column; {expected}{nearest(name, strangers).replace('mean', 'type') or found}"
    return Finding("fault", table.file, table.header_row, name, "", expected)


def extras(row: Row, columns: Columns) -> dict[str, str]:
    """The row's cells under headings that the contract does not name, as typed."""
    return {heading: cell for heading, cell in row.cells.items() if heading and heading not in columns.known}


def with_places(table: Table, column: str) -> Table:
    """The table with each row's complaints naming the place that stands in `column`."""
    return attrs.evolve(table, rows=tuple(attrs.evolve(row, place=row.text(column)) for row in table.rows))


def refuse_repeated(rows: Iterable[Row], column: str, key: Callable[[Row], object] | None = None) -> None:
    """A fault for each row whose `column` (or `key`) was met in a row above."""
    first: dict[object, int] = {}
    for row in rows:
        what = key(row) if key else row.text(column)
        if row.text(column) and what in first:
            row.complain(column, f"stands in row {first[what]} already; give each its own, or delete one")
        first.setdefault(what, row.number)
