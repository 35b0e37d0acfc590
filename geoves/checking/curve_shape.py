"""Curves against what layered ground can show: single readings, neighbours, slopes, and the changes of MN."""

import math
from collections.abc import Iterator

import attrs
import numpy as np

from geoves.checking.curve_findings import doubt_curve, doubt_reading
from geoves.checking.layered_ground import LayeredGround, Prediction, covariance_of, predict_each
from geoves.checking.options import CurveOptions
from geoves.checking.slips import explain_jump
from geoves.domain.arrays import FloatArray
from geoves.domain.findings import ExaminedCurve, Finding, Overlap
from geoves.domain.survey import FEWEST_READINGS, Sounding

# Two neighbours are off together where this much chi-square more than one alone goes with them, and each is this many
# of its errors off.
CUSP_COST, CUSP_LEAST = 10.0, 2.0
# Readings that a curve needs to be called rough as a whole; so many set aside, and such a share, make it so too.
FEWEST_FOR_ROUGH, FEWEST_ASIDE, SHARE_ASIDE = 8, 4, 0.15
# How many readings on a slope is looked for.
LONGEST_SLOPE = 4
# The steepest fall on log-log axes of 120 000 drawn columns (see steepest_fall).
FALL_AT_TOP, FALL_PER_DROP = 1.5, 1.45


@attrs.frozen
class JudgedCurve:
    """The used readings of a sounding, as arrays (n,), and what was made of them.

    reading   their place in the curve    segment  counted from 0 without gaps
    silent    True for readings that were set aside: off by too much to speak of the others
    cusps     pairs of those that were set aside together
    """

    sounding: Sounding
    reading: np.ndarray
    half_spacing: FloatArray
    potential_half_spacing: FloatArray
    log_apparent: FloatArray
    error: FloatArray
    segment: np.ndarray
    silent: np.ndarray
    prediction: Prediction
    cusps: tuple[tuple[int, int], ...] = ()


def judge_curve(sounding: Sounding, ground: LayeredGround, noise: float, options: CurveOptions) -> JudgedCurve | None:
    """Each used reading held against all others, the worst set aside one by one; None where there are too few.

    noise : relative error of readings that have none typed
    """
    curve = sounding.curve
    if int(np.sum(curve.used)) < FEWEST_READINGS:
        return None
    a, b, apparent, error, segment = curve.readings(noise)
    error = np.maximum(error, 0.25 * noise)
    log_apparent = np.log(apparent)
    prior = covariance_of(ground, ground.find(a, b))
    neighbours = _neighbours(a, segment)
    silent = np.zeros(a.size, dtype=bool)
    cusps: list[tuple[int, int]] = []
    while True:
        prediction = predict_each(log_apparent, error, segment, prior, silent)
        worst, weight = _find_worst(prediction, neighbours, silent, error)
        if weight < options.jump_limit**2 or silent.sum() >= a.size // 3:
            break
        silent[list(worst)] = True
        cusps += [(worst[0], worst[-1])] if len(worst) == 2 else []
    in_cusp = np.isin(np.arange(a.size), [one for pair in cusps for one in pair])
    silent &= in_cusp | (np.abs(prediction.score) >= options.jump_limit)
    reading = np.flatnonzero(curve.used)
    return JudgedCurve(sounding, reading, a, b, log_apparent, error, segment, silent, prediction, tuple(cusps))


def _neighbours(half_spacing: FloatArray, segment: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Indices of readings one after the other in a segment, (p,) and (p,)."""
    order = np.lexsort((half_spacing, segment))
    same = segment[order[:-1]] == segment[order[1:]]
    return order[:-1][same], order[1:][same]


def _find_worst(
    prediction: Prediction, neighbours: tuple[np.ndarray, np.ndarray], silent: np.ndarray, error: FloatArray
) -> tuple[tuple[int, ...], float]:
    """The reading, or two neighbours off alike, without which the curve fits best, and how far chi-square then falls.

    Two are taken where they together do as much better than one as a second doubted reading would have to.
    """
    score = np.where(silent, 0.0, prediction.score**2)
    one = int(np.argmax(score))
    first, second = neighbours
    off, other_off, both = prediction.pairs(first, second)
    alike = (off * other_off > 0) & ~silent[first] & ~silent[second]
    alike &= np.minimum(np.abs(off) / error[first], np.abs(other_off) / error[second]) > CUSP_LEAST
    if alike.any():
        k = int(np.argmax(np.where(alike, both, -1.0)))
        if both[k] - CUSP_COST > score[one]:
            return (int(first[k]), int(second[k])), float(both[k]) - CUSP_COST
    return (one,), float(score[one])


def check_shape(judged: JudgedCurve, ground: LayeredGround, options: CurveOptions) -> list[Finding]:
    """Doubts about single readings, pairs of them, slopes, and the curve as a whole."""
    jumps = list(_tell_jumps(judged, ground))
    cusps = list(_tell_cusps(judged))
    slopes = list(_tell_slopes(judged, options.slope_limit))
    return [*jumps, *cusps, *slopes, *_tell_rough(judged, options.rough_limit)]


def _tell_jumps(judged: JudgedCurve, ground: LayeredGround) -> Iterator[Finding]:
    expected = np.exp(judged.log_apparent - judged.prediction.residual)
    paired = {one for pair in judged.cusps for one in pair}
    for i in sorted(set(np.flatnonzero(judged.silent).tolist()) - paired):
        off, sure = float(judged.prediction.residual[i]), float(judged.prediction.deviation[i])
        slip = explain_jump(
            judged.half_spacing, judged.potential_half_spacing, judged.log_apparent, judged.prediction, int(i), ground
        )
        words = (
            f"{math.expm1(off):+.0%} off the {expected[i]:.4g} ohm m that the other readings let expect over flat "
            f"layers (known to {math.expm1(sure):.0%}); {slip}"
        )
        yield doubt_reading("jump", judged.sounding, int(judged.reading[i]), words)


def _tell_cusps(judged: JudgedCurve) -> Iterator[Finding]:
    """Two neighbours that are off together: a bend sharper than the ground below can make."""
    expected = np.exp(judged.log_apparent - judged.prediction.residual)
    for i, j in judged.cusps:
        off, other_off = (judged.prediction.residual[k] for k in (i, j))
        words = (
            f"the readings at AB/2 {judged.half_spacing[i]:g} and {judged.half_spacing[j]:g} m lie "
            f"{math.expm1(off):+.0%} and {math.expm1(other_off):+.0%} off the {expected[i]:.4g} and {expected[j]:.4g} "
            "ohm m that all others let expect: a cusp sharper than flat layers can make"
        )
        for one in (i, j):
            yield doubt_reading("cusp", judged.sounding, int(judged.reading[one]), words)


def _tell_rough(judged: JudgedCurve, rough_limit: float) -> Iterator[Finding]:
    """A curve as a whole: rough although no reading stands out, or because so many do."""
    aside, count = int(judged.silent.sum()), judged.silent.size
    score = judged.prediction.score[~judged.silent]
    rms = float(np.sqrt(np.mean(score**2)))
    if score.size >= FEWEST_FOR_ROUGH and rms > rough_limit:
        words = (
            f"the readings scatter {rms:.1f} times as much about flat layers as errors of "
            f"{np.median(judged.error):.0%} allow; expected {rough_limit:g} times at most"
        )
        yield doubt_curve("rough_curve", judged.sounding, words)
    elif aside >= max(FEWEST_ASIDE, SHARE_ASIDE * count):
        words = f"{aside} of {count} readings are off what the others let expect: more than single slips would make"
        yield doubt_curve("rough_curve", judged.sounding, words)


def steepest_rise(half_spacing: FloatArray, potential_half_spacing: FloatArray) -> FloatArray:
    """Natural log of the curve that rises fastest: over an insulator, where the ideal reading goes with AB/2.

    With MN/2 = b at AB/2 = a it is (a² - b²) / (2 b) ln((a + b) / (a - b)), the mean of the ideal curve over the
    potential spread. The ideal curve of flat layers never rises more than in proportion to AB/2; then no reading at
    one MN rises more than this either: the spread is a window of one density in 1/r, moved outward.
    """
    a, b = half_spacing, potential_half_spacing
    return np.asarray(np.log((a * a - b * b) / (2.0 * b) * np.log((a + b) / (a - b))))


def steepest_fall(drop: float) -> float:
    """The steepest fall (d ln rho_a / d ln AB/2, negative) that a curve can have once it has come down by `drop`.

    drop : natural log of the highest reading before over this one. There is no closed bound, as the fall over a perfect
    conductor grows without end; but it grows with how far the curve has come down. The line bounds the slopes of
    120 000 drawn columns of six layers with contrasts of up to e^9 (tests/checking/test_slopes.py draws them again).
    """
    return -(FALL_AT_TOP + FALL_PER_DROP * drop)


def _is_spike(silent: np.ndarray) -> np.ndarray:
    """Whether a reading was set aside and neither neighbour was: a jump, and no part of a slope."""
    padded = np.concatenate([[False], silent, [False]])
    return np.asarray(silent & ~padded[:-2] & ~padded[2:])


def _tell_slopes(judged: JudgedCurve, slope_limit: float) -> Iterator[Finding]:
    """The worst rise and the worst fall of each segment that flat layers cannot make, beyond noise."""
    for segment in np.unique(judged.segment):
        rows = np.flatnonzero(judged.segment == segment)
        rows = rows[np.argsort(judged.half_spacing[rows], kind="stable")]
        rows = rows[~_is_spike(judged.silent[rows])]
        a, y, error = judged.half_spacing[rows], judged.log_apparent[rows], judged.error[rows]
        limit = steepest_rise(a, judged.potential_half_spacing[rows])
        steep: list[tuple[float, str, int, int]] = []
        for i in range(rows.size):
            for j in range(i + 1, min(i + LONGEST_SLOPE, rows.size)):
                if a[j] <= a[i]:
                    continue
                noise = float(np.hypot(error[i], error[j]))
                rise = float(y[j] - y[i] - (limit[j] - limit[i]))
                steep.append((rise / noise, "steep_rise", i, j))
                high = float(y[: i + 1].max())
                fall = (y[j] - y[i]) - steepest_fall(max(high - float(y[j]), 0.0)) * math.log(a[j] / a[i])
                steep.append((-float(fall) / noise, "steep_fall", i, j))
        for kind in ("steep_rise", "steep_fall"):
            worst = max((one for one in steep if one[1] == kind), default=(0.0, kind, 0, 0))
            if worst[0] > slope_limit:
                yield _tell_slope(judged, kind, int(rows[worst[2]]), int(rows[worst[3]]))


def _tell_slope(judged: JudgedCurve, kind: str, first: int, last: int) -> Finding:
    a, y = judged.half_spacing, judged.log_apparent
    slope = float((y[last] - y[first]) / np.log(a[last] / a[first]))
    if kind == "steep_rise":
        limit = steepest_rise(a[[first, last]], judged.potential_half_spacing[[first, last]])
        allowed = float(np.diff(limit)[0] / np.log(a[last] / a[first]))
        words = (
            f"rises {slope:.2f} decades a decade of AB/2 from {a[first]:g} to {a[last]:g} m; flat layers allow "
            f"{allowed:.2f} at most with this MN, 1 with a small one"
        )
    else:
        words = (
            f"falls {-slope:.2f} decades a decade of AB/2 from {a[first]:g} to {a[last]:g} m; no flat layers fall so "
            "fast where a curve has come down no farther"
        )
    return doubt_reading(kind, judged.sounding, int(judged.reading[last]), words)


def find_overlaps(judged: JudgedCurve) -> tuple[Overlap, ...]:
    """Each change of MN: the spacings read with both, the ratio of new to old, and the layered ground's part in it."""
    overlaps = []
    for new in range(1, int(judged.segment.max()) + 1):
        old_rows, new_rows = (np.flatnonzero(judged.segment == k) for k in (new - 1, new))
        shared = [
            (i, j)
            for i in old_rows
            for j in new_rows
            if math.isclose(judged.half_spacing[i], judged.half_spacing[j], rel_tol=0.02)
        ]
        i, j = (np.array([pair[k] for pair in shared], dtype=int) for k in (0, 1))
        layered = judged.prediction.layered
        potential = judged.potential_half_spacing
        overlaps.append(
            Overlap(
                (float(potential[old_rows[0]]), float(potential[new_rows[0]])),
                judged.half_spacing[i],
                np.exp(judged.log_apparent[j] - judged.log_apparent[i]),
                np.exp(layered[j] - layered[i]),
            )
        )
    return tuple(overlaps)


def examined(judged: JudgedCurve) -> ExaminedCurve:
    """What the page draws of a judged curve."""
    n = judged.sounding.curve.half_spacing.size
    expected, deviation = np.full(n, np.nan), np.full(n, np.nan)
    expected[judged.reading] = np.exp(judged.log_apparent - judged.prediction.residual)
    deviation[judged.reading] = judged.prediction.deviation
    return ExaminedCurve(judged.sounding.name, expected, deviation, find_overlaps(judged))
