"""A table of region.toml whose keys are taken one by one, with a complaint where one is wrong."""

import math
import re
from collections.abc import Mapping, Sequence
from typing import Any, TypeGuard

import attrs

from geoves.domain.findings import Finding
from geoves.reading.faults import in_words, nearest, printable


def line_of(text: str, table: str, key: str, index: int = 0) -> int:
    r"""The line of `key` in `table` (its `index`-th where it is an array of tables), the table's own, or 0.

    >>> line_of("[region]\nname = 'L'\n[[unit]]\n[[unit]]\ncode = 'g'", "unit", "code", 1)
    5
    """
    opening, found, current, seen = 0, 0, "", -1
    for number, line in enumerate(text.splitlines(), start=1):
        if heading := re.match(r"\s*\[\[?\s*([\w.\"-]+)\s*\]\]?", line):
            current = heading[1].strip('"')
            seen += current == table
            if current == table and (opening == 0 or seen == index):
                opening = number
        elif current == table and seen == index and re.match(rf"""\s*["']?{re.escape(key)}["']?\s*=""", line):
            found = number
            break
    return found or opening


@attrs.frozen
class Keys:
    """The keys of the table `table`, as typed; faults go to `findings`."""

    file: str
    text: str
    table: str
    values: Mapping[str, Any]
    findings: list[Finding]
    index: int = 0

    def complain(self, key: str, expected: str, *, value: Any = None) -> None:
        """Note a fault at the key; without a value the one that stands there is shown."""
        shown = self.values.get(key) if value is None else value
        row = line_of(self.text, self.table, key, self.index)
        column = f"{self.table}.{key}" if key else self.table
        self.findings.append(
            Finding("fault", self.file, row, column, "" if shown is None else printable(str(shown)), expected)
        )

    def refuse_unknown(self, known: Sequence[str]) -> None:
        """A fault for each key that is not known, with the nearest that is."""
        for key in self.values:
            if key not in known:
                hint = nearest(key, known) or f"; expected {in_words(known)}"
                self.complain(key, f"[{self.table}] has no such key{hint}", value=key)

    def string(self, key: str, *, required: str = "") -> str:
        """The text at the key, empty where there is none; `required` says in words what has to stand there."""
        value = self.values.get(key)
        if value is None or (isinstance(value, str) and not value.strip()):
            if required:
                self.complain(key, f"expected {required}")
            return ""
        if not isinstance(value, str):
            self.complain(key, f"expected {required or 'text'} in quotation marks")
            return ""
        return value.strip()

    def choice(self, key: str, choices: Sequence[str], *, required: bool = True) -> str:
        """One of the choices, empty where none stands there."""
        value = self.string(key, required=in_words([f"{choice!r}" for choice in choices]) if required else "")
        if value and value not in choices:
            self.complain(key, f"expected {in_words([f'{choice!r}' for choice in choices])}{nearest(value, choices)}")
            return ""
        return value

    def strings(self, key: str) -> tuple[str, ...]:
        """A list of texts, empty where there is none."""
        value = self.values.get(key, [])
        if not isinstance(value, list) or not all(isinstance(one, str) and one.strip() for one in value):
            self.complain(key, 'expected a list of texts, such as ["gravel", "coarse sand and gravel"]')
            return ()
        return tuple(one.strip() for one in value)

    def number(self, key: str, words: str) -> float | None:
        """A finite number above 0, None where it is not."""
        value = self.values.get(key)
        if not is_number(value) or value <= 0.0:
            self.complain(key, f"expected {words}")
            return None
        return float(value)

    def pair(self, key: str, words: str) -> tuple[float, float] | None:
        """Two finite numbers, None where they are not."""
        value = self.values.get(key)
        if not isinstance(value, list) or len(value) != 2 or not all(is_number(one) for one in value):
            self.complain(key, f"expected {words}")
            return None
        return float(value[0]), float(value[1])


def is_number(value: Any) -> TypeGuard[float]:
    """Whether the value is a finite number, which true and false are not."""
    return isinstance(value, int | float) and not isinstance(value, bool) and math.isfinite(value)
