"""One sounding on check.html: its curve with doubted readings hollow, its readings line by line, its overlaps."""

import math
from collections.abc import Sequence

import numpy as np

from geoves.delivery.markup import Markup, element, joined, table, text, unit_label
from geoves.delivery.svg import Frame, Scale, drawing, label, line, logarithmic_range, mark_path, short
from geoves.domain.findings import ExaminedCurve, Finding
from geoves.domain.region import METRES, LengthUnit
from geoves.domain.survey import Curve, Sounding

_WIDTH, _HEIGHT, _TOP, _BOTTOM, _LEFT, _RIGHT = 330, 250, 12, 212, 52, 320


def draw_examined(
    sounding: Sounding, examined: ExaminedCurve | None, found: Sequence[Finding], unit: LengthUnit
) -> Markup:
    """AB/2 against apparent resistivity; doubted and unused readings hollow, with their AB/2 beside them."""
    curve, metres = sounding.curve, METRES[unit]
    spacing, apparent = curve.half_spacing / metres, curve.apparent_resistivity
    with np.errstate(invalid="ignore"):
        shown = np.isfinite(spacing) & np.isfinite(apparent) & (spacing > 0) & (apparent > 0)
    expected = np.full(spacing.size, np.nan) if examined is None else examined.expected
    frame = Frame(
        Scale(*logarithmic_range(spacing[shown], 1.3), _LEFT, _RIGHT, logarithmic=True),
        Scale(*logarithmic_range(np.concatenate([apparent[shown], expected]), 1.3), _BOTTOM, _TOP, logarithmic=True),
    )
    parts = [frame.axes(f"AB/2 ({unit_label(unit)})", "apparent resistivity (Ω m)")]
    if examined is not None:
        parts.append(_draw_expected(frame, curve, examined, metres))
    reasons = doubted_readings(curve, found)
    parts += [_draw_reading(frame, curve, int(i), metres, reasons.get(int(i), "")) for i in np.flatnonzero(shown)]
    n_hollow = len({*reasons, *np.flatnonzero(~curve.used).tolist()})
    title = f"Sounding curve of {sounding.name}: {int(shown.sum())} readings, {n_hollow} of them hollow"
    return drawing(_WIDTH, _HEIGHT, title, *parts)


def doubted_readings(curve: Curve, found: Sequence[Finding]) -> dict[int, str]:
    """The reason for each reading (by index) that a finding names by its row."""
    by_row = {int(row): i for i, row in enumerate(curve.row)}
    reasons: dict[int, str] = {}
    for finding in found:
        if finding.row in by_row and finding.value and finding.severity == "doubt":
            i = by_row[finding.row]
            reasons[i] = f"{reasons[i]}; {finding.check}" if i in reasons else finding.check
    return {i: words.replace("_", " ") for i, words in reasons.items()}


def _draw_expected(frame: Frame, curve: Curve, examined: ExaminedCurve, metres: float) -> Markup:
    parts = []
    for segment in np.unique(curve.segment):
        rows = np.flatnonzero((curve.segment == segment) & np.isfinite(examined.expected))
        rows = rows[np.argsort(curve.half_spacing[rows], kind="stable")]
        x, y, sure = curve.half_spacing[rows] / metres, examined.expected[rows], 2.0 * examined.deviation[rows]
        parts.append(frame.band(x, y * np.exp(-sure), y * np.exp(sure), "band"))
        parts.append(frame.line(x, y, "expected"))
    return joined(parts)


def _draw_reading(frame: Frame, curve: Curve, i: int, metres: float, reason: str) -> Markup:
    spacing, apparent = curve.half_spacing[i] / metres, curve.apparent_resistivity[i]
    x, y = float(frame.x.pixel(spacing)), float(frame.y.pixel(apparent))
    unused = "" if curve.used[i] else f"not used: {curve.reason[i] if i < len(curve.reason) else ''}"
    aside = bool(reason or unused)
    words = "; ".join(part for part in (f"AB/2 {short(spacing)}, {apparent:.4g} Ω m", reason, unused) if part)
    style = f"reading segment-{int(curve.segment[i]) % 4}{' aside' if aside else ''}"
    parts = [
        element("path", {"d": mark_path(int(curve.segment[i]), x, y), "class": style}, element("title", {}, words))
    ]
    if reason:
        above = y > _TOP + 24
        parts.append(line(x, y - 5 if above else y + 5, x, y - 11 if above else y + 11, "limit"))
        parts.append(label(x, y - 14 if above else y + 22, short(spacing), "halo", "middle"))
    return joined(parts)


def write_readings(
    sounding: Sounding, examined: ExaminedCurve | None, found: Sequence[Finding], unit: LengthUnit
) -> Markup:
    """Line by line: spacings, K, what was typed, what it gives, what the others let expect, and the verdict."""
    curve, metres = sounding.curve, METRES[unit]
    reasons = doubted_readings(curve, found)
    order = np.argsort(curve.row, kind="stable") if curve.row.size else np.arange(curve.half_spacing.size)
    rows = [_reading_row(curve, int(i), metres, examined, reasons.get(int(i), "")) for i in order]
    name = unit_label(unit)
    headings = (
        "row", f"AB/2 ({name})", f"MN/2 ({name})", "K (m)", "V/I (Ω)", "K V/I (Ω m)", "typed (Ω m)", "typed / K V/I",
        "taken (Ω m)", "expected (Ω m)", "off", "verdict",
    )  # fmt: skip
    return table(headings, rows, f"Readings of {sounding.name}")


def _reading_row(
    curve: Curve, i: int, metres: float, examined: ExaminedCurve | None, reason: str
) -> tuple[Markup | str, ...]:
    a, b = float(curve.half_spacing[i]), float(curve.potential_half_spacing[i])
    factor = math.pi * (a * a - b * b) / (2.0 * b)
    resistance = typed = math.nan
    if curve.measured:
        measured = curve.measured[i]
        typed, resistance = measured.apparent_resistivity, measured.resistance_ohm
        if math.isnan(resistance) and measured.current_ma > 0:
            resistance = measured.voltage_mv / measured.current_ma
    apparent = float(curve.apparent_resistivity[i])
    expected = math.nan if examined is None else float(examined.expected[i])
    off = apparent / expected - 1.0 if expected > 0 else math.nan
    verdict = reason or ("used" if curve.used[i] else "")
    if not curve.used[i]:
        told = curve.reason[i] if i < len(curve.reason) else ""
        verdict = f"{verdict + '; ' if verdict else ''}not used: {told}"
    return (
        str(int(curve.row[i])) if curve.row.size else "–", f"{a / metres:g}", f"{b / metres:g}", _number(factor),
        _number(resistance), _number(factor * resistance), _number(typed), _number(typed / (factor * resistance), 3),
        _number(apparent), _number(expected), f"{off:+.0%}" if math.isfinite(off) else "–", text(verdict),
    )  # fmt: skip


def _number(value: float, digits: int = 4) -> str:
    return f"{value:.{digits}g}" if math.isfinite(value) else "–"


def write_overlaps(examined: ExaminedCurve, unit: LengthUnit) -> Markup:
    """Each spacing read with two MN: the ratio, the part of it that flat layers make, and what is left."""
    metres, name = METRES[unit], unit_label(unit)
    rows = []
    for overlap in examined.overlaps:
        old, new = (f"{one / metres:g}" for one in overlap.potential_half_spacings)
        for a, ratio, layered in zip(overlap.half_spacing, overlap.ratio, overlap.layered, strict=True):
            rows.append((old, new, f"{a / metres:g}", f"{ratio:.3f}", f"{layered:.3f}", f"{ratio / layered:.3f}"))
        if not overlap.half_spacing.size:
            rows.append((old, new, "none", "–", "–", "–"))
    headings = (
        f"old MN/2 ({name})", f"new MN/2 ({name})", f"AB/2 ({name})", "new / old", "by flat layers", "left: a shift",
    )  # fmt: skip
    return table(headings, rows, "Changes of MN")
