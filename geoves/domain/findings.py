"""What was found wrong or unlikely in the inputs, said so that a person can mend it."""

from typing import Literal

import attrs

Severity = Literal["fault", "doubt"]


@attrs.frozen
class Finding:
    """One fault or doubt. `row` is the line of the file as a spreadsheet numbers it, 0 where none applies."""

    severity: Severity
    file: str
    row: int
    column: str
    value: str
    expected: str
    place: str = ""

    def line(self) -> str:
        """One sentence: where, what stands there, what was expected.

        >>> Finding("fault", "readings.csv", 14, "ab2", "0", "expected a spacing above 0; delete or correct it").line()
        "readings.csv, row 14, ab2: '0'; expected a spacing above 0; delete or correct it"
        """
        where = [self.file]
        if self.row:
            where.append(f"row {self.row}")
        if self.column:
            where.append(self.column)
        if self.place:
            where.append(f"({self.place})")
        shown = f"{self.value[:80]!r}; " if self.value else ""
        return f"{', '.join(where).replace(', (', ' (')}: {shown}{self.expected}"
