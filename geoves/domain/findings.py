"""What was found wrong or unlikely in the inputs, said so that a person can mend it."""

from typing import Literal

import attrs

from geoves.domain.arrays import FloatArray, by_value, floats, shape

# A fault stops a run, a doubt is told and the run goes on, a note is nothing suspicious but good to know.
Severity = Literal["fault", "doubt", "note"]


@attrs.frozen
class Finding:
    """One fault, doubt or note. `row` is the line of the file as a spreadsheet numbers it, 0 where none applies.

    `check` names the check of `domain.checks` that found it; that says why it matters and what to do.
    """

    severity: Severity
    file: str
    row: int
    column: str
    value: str
    expected: str
    place: str = ""
    check: str = ""

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


@attrs.frozen
class Overlap:
    """Readings at one AB/2 with the old and the new MN: (k,) arrays over the spacings that were repeated.

    potential_half_spacings  MN/2 before and after, m
    half_spacing     AB/2, m; empty where nothing was repeated
    ratio            new over old apparent resistivity as measured
    layered          the part of it that layered ground makes by the finite MN
    """

    potential_half_spacings: tuple[float, float]
    half_spacing: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    ratio: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    layered: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)


@attrs.frozen
class ExaminedCurve:
    """One curve held against all that layered ground can show; (n,) as the readings of the curve.

    expected   ohm m: what the other readings let expect; NaN where a reading was not examined
    deviation  one standard deviation of its natural log
    """

    sounding: str
    expected: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    deviation: FloatArray = attrs.field(converter=floats, eq=by_value, repr=shape)
    overlaps: tuple[Overlap, ...] = ()


@attrs.frozen
class Examination:
    """What all checks found, and each curve as it was judged; `noise` is the readings' own relative error."""

    findings: tuple[Finding, ...]
    curves: tuple[ExaminedCurve, ...] = ()
    noise: float = float("nan")


@attrs.frozen
class Check:
    """One thing that is looked at: what, from when on it is told, why it matters physically, and what to do."""

    name: str
    looks_at: str
    threshold: str
    why: str
    advice: str
