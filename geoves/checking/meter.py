"""What the meter and the layout by themselves show: frozen displays, weak signals, potential spreads too wide."""

import math
from collections.abc import Callable, Iterator
from itertools import groupby

import numpy as np

from geoves.checking.curve_findings import doubt_curve, doubt_reading, row_of
from geoves.domain.findings import Finding
from geoves.domain.survey import FEWEST_READINGS, WIDEST_GAP, Curve, Sounding

# So many readings one after the other with the same number, to three digits or more, were not measured each.
FROZEN_READINGS, FROZEN_CURRENTS = 3, 4
# A voltage below this drowns in self-potential drift and mains hum (common practice), mV.
WEAK_VOLTAGE = 0.3
# MN/2 beyond this share of AB/2: wider than a Wenner array's third.
WIDEST_MN = 0.36


def check_meter(sounding: Sounding) -> list[Finding]:
    """Doubts that need one sounding's own numbers only."""
    return [*_frozen(sounding), *_weak(sounding), *_wide(sounding), *_thin(sounding), *_unused(sounding)]


def _field_order(curve: Curve) -> np.ndarray:
    """Indices of the used readings in the order in which they were written down."""
    used = np.flatnonzero(curve.used)
    return used[np.argsort(curve.row[used], kind="stable")] if curve.row.size else used


def significant_digits(value: float) -> int:
    """How many digits a number was told with; trailing zeros of whole numbers count for nothing.

    >>> significant_digits(120.0), significant_digits(123.4), significant_digits(0.05)
    (2, 4, 1)
    """
    return len(f"{value:.6g}".replace(".", "").lstrip("0").rstrip("0").split("e")[0])


def _frozen(sounding: Sounding) -> Iterator[Finding]:
    curve = sounding.curve
    order = _field_order(curve)
    if curve.measured:
        currents = [curve.measured[i].current_ma for i in order]
        # A regulated transmitter keeps round currents; a free one changes with every stake.
        yield from _runs(sounding, order, currents, FROZEN_CURRENTS, ("current_ma", "stuck_current", _is_odd))
        voltages = [curve.measured[i].voltage_mv for i in order]
        yield from _runs(sounding, order, voltages, FROZEN_READINGS, ("voltage_mv", "dead_reading", _is_told))
    apparent = curve.apparent_resistivity[order].tolist()
    yield from _runs(sounding, order, apparent, FROZEN_READINGS, ("apparent_resistivity", "dead_reading", _is_told))


def _is_odd(value: float) -> bool:
    return math.isfinite(value) and significant_digits(value) >= 3


def _is_told(value: float) -> bool:
    return math.isfinite(value) and value > 0 and significant_digits(value) >= 3


def _runs(
    sounding: Sounding, order: np.ndarray, values: list[float], fewest: int,
    kind: tuple[str, str, Callable[[float], bool]],
) -> Iterator[Finding]:  # fmt: skip
    """Stretches of readings one after the other that hold one number although the spacings change."""
    column, check, counts = kind
    curve = sounding.curve
    for value, group in groupby(range(len(order)), key=lambda k: values[k]):
        rows = order[list(group)]
        moved = len({float(a) for a in curve.half_spacing[rows]})
        if counts(value) and moved >= fewest:
            words = f"{len(rows)} readings in a row from AB/2 {curve.half_spacing[rows[0]]:g} m all have {value:g}"
            for i in rows:
                yield doubt_reading(check, sounding, int(i), words, column=column, value=f"{value:g}")


def _weak(sounding: Sounding) -> Iterator[Finding]:
    curve = sounding.curve
    for i in _field_order(curve) if curve.measured else ():
        voltage = curve.measured[i].voltage_mv
        if voltage < WEAK_VOLTAGE:
            words = f"{voltage:g} mV at AB/2 {curve.half_spacing[i]:g} m; expected {WEAK_VOLTAGE} mV or more"
            yield doubt_reading("weak_signal", sounding, int(i), words, column="voltage_mv", value=f"{voltage:g}")


def _wide(sounding: Sounding) -> Iterator[Finding]:
    curve = sounding.curve
    for i in _field_order(curve):
        share = curve.potential_half_spacing[i] / curve.half_spacing[i]
        if share > WIDEST_MN:
            words = (
                f"MN/2 {curve.potential_half_spacing[i]:g} m is {share:.2f} of AB/2 {curve.half_spacing[i]:g} m; "
                f"expected {WIDEST_MN} at most"
            )
            value = f"{curve.potential_half_spacing[i]:g}"
            yield doubt_reading("wide_mn", sounding, int(i), words, column="mn2", value=value)


def _thin(sounding: Sounding) -> Iterator[Finding]:
    """Too few readings, or none in the middle: then the sounding is refused, in words."""
    curve = sounding.curve
    count = int(np.sum(curve.used))
    if count < FEWEST_READINGS:
        words = f"{count} usable readings; expected {FEWEST_READINGS} or more: the sounding is refused"
        yield doubt_curve("few_readings", sounding, words)
        return
    low, high = curve.widest_gap
    if high > WIDEST_GAP * low:
        words = (
            f"no usable reading between AB/2 {low:g} and {high:g} m; expected steps of {WIDEST_GAP:g} times at most: "
            "the sounding has no usable middle and is refused"
        )
        yield doubt_curve("no_middle", sounding, words)


def _unused(sounding: Sounding) -> Iterator[Finding]:
    """What was told not to count, with its reason: nothing goes without being named."""
    curve = sounding.curve
    for i in np.flatnonzero(~curve.used):
        reason = curve.reason[i] if i < len(curve.reason) else ""
        value = f"AB/2 {curve.half_spacing[i]:g} m, {curve.apparent_resistivity[i]:.4g} ohm m"
        words = f"kept and drawn, not fitted: {reason or 'no reason is given'}"
        yield Finding("note", "readings", row_of(curve, int(i)), "use", value, words, sounding.name, "unused_reading")
