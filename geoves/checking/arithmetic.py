"""What was typed against what it should give: K, voltage over current, apparent resistivity."""

import math
from collections import Counter
from collections.abc import Iterator, Sequence

import attrs
import numpy as np

from geoves.checking.curve_findings import doubt_curve, doubt_reading, doubt_table
from geoves.domain.findings import Finding
from geoves.domain.survey import Curve, Sounding
from geoves.kernels.layered_earth import geometric_factor

# Typed and recomputed values that differ by more than this fraction are doubted.
DISAGREEMENT = 0.05
# A slip explains a disagreement where it comes this near, natural log: what rounding on the sheet leaves.
NEARNESS = 0.03
# One slip in more than this share of the soundings that can be recomputed is told once, of the table.
THROUGHOUT = 0.5
FEET = math.log(0.3048)
_UNKNOWN = "no usual slip explains it: is one of the numbers misread?"


@attrs.frozen
class Disagreement:
    """One reading of which two typed things disagree: the natural log of `typed` over `recomputed`."""

    sounding: Sounding
    reading: int
    what: str
    typed: float
    recomputed: float
    slip: str

    @property
    def log_ratio(self) -> float:
        return math.log(self.typed / self.recomputed)


def check_arithmetic(soundings: Sequence[Sounding]) -> list[Finding]:
    """Readings whose numbers do not belong together, with the slip that would explain each.

    A slip that runs through most soundings is one finding of the table: it was made in the sheet, not at the stake.
    """
    found = [one for sounding in soundings for one in _find_disagreements(sounding)]
    recomputable = sum(
        any(_is_recomputable(sounding.curve, i) for i in _used(sounding.curve)) for sounding in soundings
    )
    places: dict[tuple[str, str], set[str]] = {}
    for one in found:
        places.setdefault((one.what, one.slip), set()).add(one.sounding.name)
    throughout = {
        key for key, names in places.items() if key[1] != _UNKNOWN and len(names) > max(THROUGHOUT * recomputable, 2)
    }
    counts = Counter((one.what, one.slip) for one in found)
    findings = [
        doubt_table(
            "arithmetic_throughout", what,
            f"{counts[what, slip]} readings of {len(places[what, slip])} soundings, of {recomputable} that can be "
            f"recomputed, all show it: {slip}",
        )
        for what, slip in sorted(throughout)
    ]  # fmt: skip
    findings += [_tell(one) for one in found if (one.what, one.slip) not in throughout]
    return findings


def recompute(curve: Curve, reading: int) -> tuple[float, float, float]:
    """Geometric factor (m), resistance (ohm) and apparent resistivity (ohm m) from what was measured; NaN if not."""
    typed = curve.measured[reading]
    factor = float(geometric_factor(curve.half_spacing[reading], curve.potential_half_spacing[reading]))
    resistance = typed.resistance_ohm
    if math.isnan(resistance) and typed.current_ma > 0:
        resistance = typed.voltage_mv / typed.current_ma
    return factor, resistance, factor * resistance


def _used(curve: Curve) -> np.ndarray:
    return np.flatnonzero(curve.used) if curve.measured else np.array([], dtype=int)


def _is_recomputable(curve: Curve, reading: int) -> bool:
    return math.isfinite(recompute(curve, reading)[2]) and curve.measured[reading].apparent_resistivity > 0


def _find_disagreements(sounding: Sounding) -> Iterator[Disagreement]:
    curve = sounding.curve
    for i in _used(curve):
        typed = curve.measured[i]
        _, resistance, apparent = recompute(curve, i)
        given = typed.voltage_mv / typed.current_ma if typed.current_ma > 0 else math.nan
        if _disagree(typed.resistance_ohm, given):
            slip = _name_slip(math.log(typed.resistance_ohm / given), _prefix_slips())
            yield Disagreement(sounding, int(i), "resistance_ohm", typed.resistance_ohm, given, slip)
        if _disagree(typed.apparent_resistivity, apparent):
            a, b = float(curve.half_spacing[i]), float(curve.potential_half_spacing[i])
            slips = _prefix_slips() | _spacing_slips(a, b)
            slip = _name_slip(math.log(typed.apparent_resistivity / (resistance * _factor(a, b))), slips)
            yield Disagreement(sounding, int(i), "apparent_resistivity", typed.apparent_resistivity, apparent, slip)


def _disagree(typed: float, recomputed: float) -> bool:
    if not (typed > 0 and recomputed > 0 and math.isfinite(typed) and math.isfinite(recomputed)):
        return False
    return abs(typed / recomputed - 1.0) > DISAGREEMENT


def _factor(a: float, b: float) -> float:
    return math.pi * (a * a - b * b) / (2.0 * b)


def _prefix_slips() -> dict[str, float]:
    thousand = math.log(1000.0)
    return {
        "a factor of 1000 too much: volts were meant where mV stand, or the current stands in µA": thousand,
        "a factor of 1000 too little: the current stands in A where mA were meant, or µV stand as mV": -thousand,
    }


def _spacing_slips(a: float, b: float) -> dict[str, float]:
    """Natural log of typed over recomputed resistivity that each slip in the spacings would leave."""
    true = _factor(a, b)
    slips = {
        "K was taken with feet: the spacings are in metres, or ohm feet were typed for ohm m": -FEET,
        "K was taken with metres: the spacings stand in feet where metres are declared": FEET,
        "MN typed where MN/2 belongs: the typed resistivity fits half of mn2": math.log(_factor(a, b / 2.0) / true),
        "the short form π (AB/2)² / MN was used for K; it is only right for a small MN": -math.log1p(-((b / a) ** 2)),
    }
    if a / 2.0 > b:
        words = "AB typed where AB/2 belongs: the typed resistivity fits half of ab2"
        slips[words] = math.log(_factor(a / 2.0, b) / true)
        words = "AB and MN typed where AB/2 and MN/2 belong: the typed resistivity fits half of both"
        slips[words] = math.log(_factor(a / 2.0, b / 2.0) / true)
    if 2.0 * b < a:
        words = "K was taken with MN/2 where MN belongs: the typed resistivity fits twice mn2"
        slips[words] = math.log(_factor(a, 2.0 * b) / true)
    words = "K was taken with AB where AB/2 belongs: the typed resistivity fits twice ab2"
    return slips | {words: math.log(_factor(2.0 * a, b) / true)}


def _name_slip(log_ratio: float, slips: dict[str, float]) -> str:
    """The slip nearest to the disagreement, where one is near."""
    best = min(slips, key=lambda words: abs(slips[words] - log_ratio))
    return best if abs(slips[best] - log_ratio) < NEARNESS else _UNKNOWN


def _tell(one: Disagreement) -> Finding:
    if one.what == "resistance_ohm":
        words = f"typed {one.typed:.4g} ohm, but voltage over current gives {one.recomputed:.4g} ohm"
    else:
        curve, i = one.sounding.curve, one.reading
        measured = "resistance_ohm" if math.isfinite(curve.measured[i].resistance_ohm) else "voltage_mv over current_ma"
        words = f"the spacings and {measured} give {one.recomputed:.4g} ohm m, not {one.typed:.4g}, which is taken"
    said = f"{words} ({math.exp(one.log_ratio):.3g} times); {one.slip}"
    return doubt_reading("arithmetic", one.sounding, one.reading, said, column=one.what, value=f"{one.typed:g}")


def check_repeats(sounding: Sounding, noise: float) -> list[Finding]:
    """Repeats of one layout that differ more than their error allows, and a row that stands there twice."""
    curve = sounding.curve
    findings = []
    for rows in _repeats(curve):
        logs = np.log(curve.apparent_resistivity[rows])
        identical = len({(float(logs[k]), curve.measured[i] if curve.measured else None) for k, i in enumerate(rows)})
        if identical == 1:
            words = "the same spacings and the same number stand twice; a row copied is no repeat"
            findings.append(doubt_reading("repeated_row", sounding, int(rows[-1]), words))
            continue
        typed = curve.relative_error[rows]
        error = float(np.sqrt(np.mean(np.where(np.isnan(typed), noise, typed) ** 2)))
        spread = float(logs.max() - logs.min())
        if spread > REPEAT_LIMIT * math.sqrt(2.0) * error:
            words = (
                f"{len(rows)} readings at AB/2 {curve.half_spacing[rows[0]]:g} m differ by {math.expm1(spread):.0%}; "
                f"expected {math.expm1(REPEAT_LIMIT * math.sqrt(2.0) * error):.0%} at most with errors of {error:.0%}"
            )
            findings.append(doubt_curve("repeats_differ", sounding, words, row=int(curve.row[rows[0]])))
    return findings


# Repeats that differ by more standard deviations of their difference than this are doubted.
REPEAT_LIMIT = 4.0
# What a typed-nowhere error of a repeated reading is taken to be before its repeats speak, as so many repeats.
_PRIOR_STRENGTH, ERROR_FLOOR = 4.0, 0.02


def _repeats(curve: Curve) -> list[np.ndarray]:
    """Indices of the used readings of each layout that was read more than once."""
    layouts: dict[tuple[float, float], list[int]] = {}
    for i in np.flatnonzero(curve.used):
        key = (float(curve.half_spacing[i]), float(curve.potential_half_spacing[i]))
        layouts.setdefault(key, []).append(int(i))
    return [np.array(rows) for rows in layouts.values() if len(rows) > 1]


def assign_repeat_errors(curve: Curve, noise: float) -> Curve:
    """The curve with an error for each reading that was repeated and has none typed: from its repeats' scatter.

    A few repeats say little of their own scatter: `noise` speaks as four more would, and ERROR_FLOOR is the least.
    """
    error = np.array(curve.relative_error)
    for rows in _repeats(curve):
        logs = np.log(curve.apparent_resistivity[rows])
        scatter = float(np.sum((logs - logs.mean()) ** 2))
        found = math.sqrt((_PRIOR_STRENGTH * noise**2 + scatter) / (_PRIOR_STRENGTH + len(rows) - 1))
        untyped = rows[np.isnan(error[rows])]
        error[untyped] = max(found, ERROR_FLOOR)
    return attrs.evolve(curve, relative_error=error)
