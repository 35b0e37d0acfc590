"""Which slip in the field would make one reading jump: a stake, a decimal point, a number in the wrong row."""

import math
from collections.abc import Iterator

import numpy as np

from geoves.checking.layered_ground import LayeredGround, Prediction, covariance_of
from geoves.domain.arrays import FloatArray
from geoves.kernels.layered_earth import geometric_factor

# A slip explains a jump that it misses by fewer standard deviations than this; its own factor is known to that much.
EXPLAINED, FACTOR_DEVIATION = 2.5, 0.03
_UNEXPLAINED = "no misplaced stake explains it: look for a fence, a pipe, a lateral contact or leakage of the cable"


def misplaced_electrode(planned: float, actual: float, mn2: float, rise: float, electrodes: int = 1) -> float:
    """Factor on the reading for the planned AB/2 where one current electrode (or two) stood at another.

    planned, actual, mn2 : m    rise : natural log of apparent resistivity at `actual` over that at `planned`, same MN
    Each electrode gives half of the voltage, so that one at a' adds rho(a') K(a) / K(a') to rho(a), and the half of the
    sum is read. Exact over flat layers. On uniform ground one electrode left at 80 m for 100 (MN/2 5 m) reads 1.2824
    times too high, one at 120 m 0.8470 (tests/checking/test_slips.py).
    """
    spacing = np.array([planned, actual])
    factor = geometric_factor(spacing, np.full(2, mn2))
    moved = math.exp(rise) * float(factor[0] / factor[1])
    return moved if electrodes == 2 else 0.5 * (1.0 + moved)


def explain_jump(
    half_spacing: FloatArray, potential_half_spacing: FloatArray, log_apparent: FloatArray, prediction: Prediction,
    reading: int, ground: LayeredGround,
) -> str:  # fmt: skip
    """The slips that would make the reading jump as it does, the nearest first; or that none does."""
    a, b = half_spacing, potential_half_spacing
    off, deviation = float(prediction.residual[reading]), float(prediction.deviation[reading])
    expected = log_apparent - prediction.residual
    slips = dict(_decimal_slips())
    slips |= _stake_slips(a, b, expected, reading, ground)
    slips |= _potential_slips(a, b, reading)
    slips |= _swaps(a, b, log_apparent, expected, reading)
    near = sorted((abs(factor - off), words) for words, factor in slips.items())
    fitting = [words for miss, words in near if miss < EXPLAINED * math.hypot(deviation, FACTOR_DEVIATION)]
    return " or ".join(fitting[:2]) if fitting else _UNEXPLAINED


def _decimal_slips() -> Iterator[tuple[str, float]]:
    for power, words in ((1, "ten"), (2, "a hundred"), (3, "a thousand")):
        unit = ", V for mV or A for mA" if power == 3 else ""
        yield f"a slip of the decimal point would make it {words} times too much{unit}", power * math.log(10.0)
        yield f"a slip of the decimal point would make it {words} times too little{unit}", -power * math.log(10.0)


def _stake_slips(
    a: FloatArray, b: FloatArray, expected: FloatArray, reading: int, ground: LayeredGround
) -> dict[str, float]:
    """Natural log of the factors of one or both current electrodes at the flag before or after."""
    flags = np.unique(a)
    at = int(np.searchsorted(flags, a[reading]))
    slips = {}
    for near, left in ((at - 1, True), (at + 1, False)):
        if not 0 <= near < flags.size or flags[near] <= b[reading]:
            continue
        planned, actual, mn2 = float(a[reading]), float(flags[near]), float(b[reading])
        rise = _rise(ground, a, b, expected, (planned, actual, mn2))
        for electrodes, who in ((1, "one current electrode"), (2, "both current electrodes")):
            factor = misplaced_electrode(planned, actual, mn2, rise, electrodes)
            how = "left behind" if left else "set too far out"
            slips[f"{who} {how} at {actual:g} m would read {factor:.2f} times"] = math.log(factor)
    return slips


def _rise(
    ground: LayeredGround, a: FloatArray, b: FloatArray, expected: FloatArray, layout: tuple[float, float, float]
) -> float:
    """Natural log of apparent resistivity at the actual over that at the planned AB/2, same MN, as the curve has it.

    The nearest of the sounding's expected readings give the slope; the drawn ground is only asked where a neighbour
    with this MN was not read.
    """
    planned, actual, mn2 = layout
    of_mn = np.flatnonzero(np.isclose(b, mn2))
    order = of_mn[np.argsort(a[of_mn], kind="stable")]
    here = float(np.interp(math.log(planned), np.log(a[order]), expected[order]))
    if np.any(np.isclose(a[order], actual)):
        return float(np.interp(math.log(actual), np.log(a[order]), expected[order])) - here
    known = ground.find(a, b)
    asked = ground.find(np.array([planned, actual]), np.array([mn2, mn2]))
    mean, covariance = covariance_of(ground, np.concatenate([known, asked]))
    n = known.size
    gain = np.linalg.solve(covariance[:n, :n] + 0.05**2 * np.eye(n), covariance[:n, n:])
    found = mean[n:] + (expected - mean[:n]) @ gain
    return float(found[1] - found[0])


def _potential_slips(a: FloatArray, b: FloatArray, reading: int) -> dict[str, float]:
    """The potential electrodes stood at another MN of the sounding, or K was taken with it."""
    slips = {}
    for other in np.unique(b):
        if math.isclose(other, b[reading]) or other >= a[reading]:
            continue
        factor = geometric_factor(np.full(2, a[reading]), np.array([b[reading], other]))
        slips[f"MN/2 still at {other:g} m, or K taken with it, would read {factor[0] / factor[1]:.2f} times"] = (
            math.log(factor[0] / factor[1])
        )
    return slips


def _swaps(
    a: FloatArray, b: FloatArray, log_apparent: FloatArray, expected: FloatArray, reading: int
) -> dict[str, float]:
    """The reading and its neighbour stand in each other's row."""
    slips = {}
    same = np.flatnonzero(np.isclose(b, b[reading]))
    order = same[np.argsort(a[same], kind="stable")]
    at = int(np.flatnonzero(order == reading)[0])
    for near in (at - 1, at + 1):
        if 0 <= near < order.size:
            other = order[near]
            crossed = abs(log_apparent[other] - expected[reading]) < 0.08
            if crossed and abs(expected[other] - expected[reading]) > 0.15:
                words = f"this reading and that at AB/2 {a[other]:g} m would fit in each other's row"
                slips[words] = float(expected[other] - expected[reading])
    return slips
