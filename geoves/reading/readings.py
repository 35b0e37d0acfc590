"""The table of readings: spacings and apparent resistivities, curve by curve."""

import math
from collections.abc import Mapping, Sequence
from itertools import groupby

import attrs
import numpy as np

from geoves.domain.survey import Array, Curve, Measured
from geoves.reading.tables import Columns, Range, Row, Table, extras

READING_COLUMNS = Columns(
    required=("sounding",),
    alternatives=(
        (("ab2", "mn2"), ("a",)),
        (("apparent_resistivity",), ("voltage_mv", "current_ma"), ("resistance_ohm",)),
    ),
    optional=("error_percent", "use", "note"),
)
_SPACING = Range("a spacing above 0; correct it, or set use to 0", 0.0, 1e6, above=True)
_RESISTIVITY = Range("a resistivity in ohm m, above 0; correct it, or set use to 0", 0.0, 1e12, above=True)
_RESISTANCE = Range("a resistance in ohm, above 0; correct it, or set use to 0", 0.0, above=True)
_VOLTAGE = Range("a voltage in mV, above 0; correct it, or set use to 0", 0.0, above=True)
_ANY = Range("a number")
_CURRENT = Range("a current in mA, above 0; correct it, or set use to 0", 0.0, above=True)
_ERROR = Range("one standard deviation in percent, 0 or more", 0.0)
_USE = {"": True, "1": True, "yes": True, "true": True, "0": False, "no": False, "false": False}
# AB/2 is 3 MN/2 in a Wenner array; rounding on the field sheet is let through.
_WENNER_ROUNDING = 0.02


@attrs.frozen
class Reading:
    """One reading in SI: AB/2, MN/2, apparent resistivity (NaN where an unused one has none), error as a fraction.

    `reason` says why it is not used, None where it is; `extra` has its note and the columns beyond the contract's.
    """

    row: int
    half_spacing: float
    potential_half_spacing: float
    apparent_resistivity: float
    relative_error: float
    reason: str | None
    extra: Mapping[str, str]
    measured: Measured


def geometric_factor(half_spacing: float, potential_half_spacing: float) -> float:
    """K (m) of a symmetric array: apparent resistivity is K times voltage over current.

    >>> round(geometric_factor(100.0, 20.0), 4)
    753.9822
    """
    return math.pi * (half_spacing**2 - potential_half_spacing**2) / (2.0 * potential_half_spacing)


def read_curves(table: Table, metres: float, arrays: Mapping[str, Array]) -> dict[str, Curve]:
    """The curve of each sounding that `arrays` names; readings of others are faults."""
    rows: dict[str, list[Row]] = {}
    for row in table.rows:
        name = row.required_text("sounding", "the name of a sounding")
        if name and name not in arrays:
            row.complain("sounding", "the table of soundings has no such name; add the sounding or correct the name")
        elif name:
            rows.setdefault(name, []).append(row)
    return {name: _build_curve(_read_rows(found, metres, arrays[name]), arrays[name]) for name, found in rows.items()}


def check_readings(table: Table, metres: float) -> None:
    """Note the faults of the readings by themselves, where the table of their soundings could not be read."""
    arrays: dict[str, Array] = {
        row.text("sounding"): "wenner" if row.text("a") else "schlumberger" for row in table.rows
    }
    read_curves(table, metres, arrays)


def _read_rows(rows: Sequence[Row], metres: float, array: Array) -> list[Reading]:
    return [reading for row in rows if (reading := _read_row(row, metres, array)) is not None]


def _read_row(row: Row, metres: float, array: Array) -> Reading | None:
    """The reading; None where it is faulty, or unused and without a place on the curve (which is a doubt)."""
    used = _USE.get(row.text("use").lower())
    if used is None:
        row.complain("use", "expected 1 for a reading that counts or 0 for one that does not")
        return None
    heard = row if used else row.without_complaints()
    half, potential = _read_spacings(heard, metres, array)
    placed = 0.0 < potential < half
    resistivity = _read_resistivity(heard, geometric_factor(half, potential) if placed else math.nan)
    error = heard.number_in("error_percent", _ERROR)
    if error == 0.0:
        heard.doubt("error_percent", "a reading without any error cannot be; taken as not stated")
    if not placed:
        if used and half <= potential:
            row.complain("mn2", f"expected MN/2 below AB/2 ({row.text('ab2')}); correct it, or set use to 0")
        elif not used and "ab2" not in row.missing:
            row.doubt("ab2", "the unused reading has no usable spacing and is left out of the curve altogether")
        return None
    reason = None if used else row.text("note") or "use is 0"
    extra = extras(row, READING_COLUMNS) | ({"note": row.text("note")} if row.text("note") else {})
    measured = _read_measured(row)
    return Reading(
        row.number, half, potential, resistivity, error / 100.0 if error else math.nan, reason, extra, measured
    )


def _read_measured(row: Row) -> Measured:
    """The cells as typed; those that hold no number were complained of already."""
    heard = row.without_complaints()
    typed = {name: heard.number_in(name, _ANY) for name in attrs.fields_dict(Measured)}
    return Measured(**{name: math.nan if value is None else value for name, value in typed.items()})


def _read_spacings(row: Row, metres: float, array: Array) -> tuple[float, float]:
    """AB/2 and MN/2 in m, NaN where the row has none."""
    if row.text("a") and array == "schlumberger":
        if not row.text("ab2"):
            row.complain(
                "a", "a Wenner spacing in a Schlumberger sounding; set its array to wenner, or give ab2 and mn2"
            )
            return math.nan, math.nan
    elif row.text("a") or (array == "wenner" and not row.text("ab2")):
        spacing = row.required_number("a", _SPACING) * metres
        return 1.5 * spacing, 0.5 * spacing
    half = row.required_number("ab2", _SPACING) * metres
    potential = row.required_number("mn2", _SPACING) * metres
    if array == "wenner" and abs(half - 3.0 * potential) > _WENNER_ROUNDING * half:
        row.complain("mn2", "expected MN/2 a third of AB/2 in a Wenner array; correct it, or the sounding's array")
        return math.nan, math.nan
    return half, potential


def _read_resistivity(row: Row, factor: float) -> float:
    """Apparent resistivity in ohm m, as typed or from what was measured; NaN, with a fault, where none of it stands.

    `factor` is the geometric factor in m, NaN where the spacings are faulty.
    What was typed comes before what the resistance gives, and that before voltage over current; where they disagree
    the checks of the curves say so.
    """
    found = {}
    if row.text("apparent_resistivity"):
        found["apparent_resistivity"] = row.required_number("apparent_resistivity", _RESISTIVITY)
    if row.text("resistance_ohm"):
        found["resistance_ohm"] = row.required_number("resistance_ohm", _RESISTANCE) * factor
    if row.text("voltage_mv"):
        voltage = row.required_number("voltage_mv", _VOLTAGE)
        found["voltage_mv"] = voltage / row.required_number("current_ma", _CURRENT) * factor
    if not found:
        column = next((name for name in ("apparent_resistivity", "resistance_ohm") if name in row.cells), "voltage_mv")
        return row.required_number(column, _RESISTIVITY)
    column, taken = next(iter(found.items()))
    if not (math.isnan(taken) or _RESISTIVITY.holds(taken)):
        row.complain(column, f"with these spacings it gives {taken:.4g} ohm m; expected {_RESISTIVITY.words}")
    return taken


def _build_curve(readings: Sequence[Reading], array: Array) -> Curve:
    """The curve in the order of segments; a Wenner array moves all electrodes at every reading: one segment."""
    if array == "wenner":
        ordered = [(0, reading) for reading in sorted(readings, key=lambda reading: reading.half_spacing)]
    else:
        by_potential = sorted(readings, key=lambda reading: (reading.potential_half_spacing, reading.half_spacing))
        segments = groupby(by_potential, key=lambda reading: reading.potential_half_spacing)
        ordered = [(segment, reading) for segment, (_, group) in enumerate(segments) for reading in group]
    return Curve(
        half_spacing=np.array([reading.half_spacing for _, reading in ordered]),
        potential_half_spacing=np.array([reading.potential_half_spacing for _, reading in ordered]),
        apparent_resistivity=np.array([reading.apparent_resistivity for _, reading in ordered]),
        relative_error=np.array([reading.relative_error for _, reading in ordered]),
        segment=np.array([segment for segment, _ in ordered], dtype=int),
        used=np.array([reading.reason is None for _, reading in ordered], dtype=bool),
        reason=tuple(reading.reason or "" for _, reading in ordered),
        row=np.array([reading.row for _, reading in ordered], dtype=int),
        extra=tuple(reading.extra for _, reading in ordered),
        measured=tuple(reading.measured for _, reading in ordered),
    )
