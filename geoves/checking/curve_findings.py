"""Findings about readings, said the same way everywhere."""

from geoves.domain.findings import Finding, Severity
from geoves.domain.survey import Curve, Sounding


def doubt_reading(
    check: str, sounding: Sounding, reading: int, words: str, *, column: str = "apparent_resistivity", value: str = ""
) -> Finding:
    """A doubt about one reading of a sounding; the value shown is the reading itself where none is given."""
    curve = sounding.curve
    row = row_of(curve, reading)
    shown = value or f"AB/2 {curve.half_spacing[reading]:g} m, {curve.apparent_resistivity[reading]:.4g} ohm m"
    return Finding("doubt", "readings", row, column, shown, words, sounding.name, check)


def doubt_curve(check: str, sounding: Sounding, words: str, *, row: int = 0, severity: Severity = "doubt") -> Finding:
    """A doubt about a curve as a whole, or several of its readings."""
    return Finding(severity, "readings", row, "", "", words, sounding.name, check)


def doubt_table(check: str, column: str, words: str) -> Finding:
    """A doubt about the table of readings."""
    return Finding("doubt", "readings", 0, column, "", words, "", check)


def row_of(curve: Curve, reading: int) -> int:
    """The reading's row in its table, 0 where it came from no table."""
    return int(curve.row[reading]) if curve.row.size else 0
