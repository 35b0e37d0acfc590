"""Changes of MN: the shift between old and new, less the part that flat layers make themselves."""

import math
from collections.abc import Sequence

import numpy as np

from geoves.checking.curve_findings import doubt_curve, doubt_table
from geoves.checking.curve_shape import JudgedCurve, find_overlaps
from geoves.domain.arrays import FloatArray
from geoves.domain.findings import Finding, Overlap
from geoves.kernels.layered_earth import geometric_factor

# New over old apparent resistivity, the layered part taken out, that field work shows as ordinary.
ORDINARY_SHIFT = (0.78, 1.22)
# Repeated spacings of one change of MN whose ratios differ by more deviations than this do not shift together.
UNEVEN_LIMIT = 4.0
# Overlaps that it takes to see a slip in K throughout the season, and its size in standard errors.
FEWEST_OVERLAPS, SEASON_LIMIT = 12, 5.0


def check_overlaps(judged: JudgedCurve) -> list[Finding]:
    """Doubts about the changes of MN of one sounding."""
    if judged.sounding.array == "wenner":
        return []
    findings = []
    for new, overlap in enumerate(find_overlaps(judged), start=1):
        first = int(judged.reading[np.flatnonzero(judged.segment == new)[0]])
        row = int(judged.sounding.curve.row[first]) if judged.sounding.curve.row.size else 0
        findings += [
            doubt_curve(check, judged.sounding, words, row=row) for check, words in _tell(judged, new, overlap)
        ]
    return findings


def _tell(judged: JudgedCurve, new: int, overlap: Overlap) -> list[tuple[str, str]]:
    old_mn, new_mn = overlap.potential_half_spacings
    change = f"MN/2 {old_mn:g} to {new_mn:g} m"
    rows = np.flatnonzero(np.abs(judged.segment - new + 0.5) < 1)
    heard = ~np.array([bool(np.any(judged.silent[rows] & np.isclose(judged.half_spacing[rows], a, rtol=0.02)))
                       for a in overlap.half_spacing], dtype=bool)  # fmt: skip
    if not overlap.half_spacing.size:
        return [("overlap_missing", f"{change}: no AB/2 was read with both; expected one or two, to tie the segments")]
    rest = np.log(overlap.ratio / overlap.layered)[heard]
    if not rest.size:
        return []
    error = math.sqrt(2.0) * float(np.median(judged.error[rows]))
    shift = math.exp(float(np.mean(rest)))
    told = []
    if not ORDINARY_SHIFT[0] <= shift <= ORDINARY_SHIFT[1] and abs(math.log(shift)) > 3.0 * error / math.sqrt(
        rest.size
    ):
        measured, layered = (math.exp(float(np.mean(np.log(one[heard])))) for one in (overlap.ratio, overlap.layered))
        words = (
            f"{change}: new over old is {measured:.2f}, of which flat layers explain {layered:.2f} by the finite MN; "
            f"{shift:.2f} is left, expected {ORDINARY_SHIFT[0]} to {ORDINARY_SHIFT[1]}"
        )
        told.append(("overlap_shift", words))
    spread = float(rest.max() - rest.min())
    if spread > UNEVEN_LIMIT * math.sqrt(2.0) * error:
        ratios = ", ".join(
            f"{math.exp(one):.2f} at AB/2 {a:g} m" for one, a in zip(rest, overlap.half_spacing[heard], strict=True)
        )
        told.append(("overlap_uneven", f"{change}: the shift is not one factor ({ratios})"))
    return told


def check_season(judged: Sequence[JudgedCurve]) -> list[Finding]:
    """Whether the overlaps of all soundings together show that K was taken with wrong spacings throughout.

    A slip in K changes the ratio of new to old MN by a known amount at each overlap. Its share in the ratios, layered
    part taken out, is a regression through the origin: 1 where the slip was made, 0 where not.
    """
    layouts, rest = _collect(judged)
    if len(rest) < FEWEST_OVERLAPS:
        return []
    a, old, new = layouts.T
    factor = np.log(geometric_factor(a, new) / geometric_factor(a, old))
    best: tuple[float, str] | None = None
    for words, (ab, mn) in _SLIPS.items():
        possible = mn * new < ab * a
        if possible.sum() < FEWEST_OVERLAPS:
            continue
        # Reported = true * K(as typed) / K(as it stood in the ground).
        stood = np.log(geometric_factor(ab * a[possible], mn * new[possible]))
        stood -= np.log(geometric_factor(ab * a[possible], mn * old[possible]))
        share, error = _regress(factor[possible] - stood, rest[possible])
        left = float(np.median(np.abs(rest[possible] - (factor[possible] - stood))))
        if (
            abs(share - 1.0) < max(0.3, 3.0 * error)
            and share > SEASON_LIMIT * error
            and (best is None or left < best[0])
        ):
            best = (left, f"{words} (the ratios follow it with a share of {share:.2f} ± {error:.2f})")
    if best is None:
        return []
    words = f"{len(rest)} repeated spacings at changes of MN shift as they would if {best[1]}"
    return [doubt_table("spacing_convention", "ab2", words)]


_SLIPS = {
    "the whole of AB stood under ab2, where half of it belongs": (0.5, 1.0),
    "the whole of MN stood under mn2, where half of it belongs": (1.0, 0.5),
    "MN/2 was typed as a half of itself": (1.0, 2.0),
}


def _collect(judged: Sequence[JudgedCurve]) -> tuple[FloatArray, FloatArray]:
    """AB/2, old and new MN/2 (n, 3) of all overlaps, and the natural log of their ratios less the layered part (n,)."""
    layouts, rest = [], []
    for one in judged:
        if one.sounding.array == "wenner":
            continue
        for overlap in find_overlaps(one):
            logs = np.log(overlap.ratio / overlap.layered)
            layouts += [(float(a), *overlap.potential_half_spacings) for a in overlap.half_spacing]
            rest += logs.tolist()
    return np.array(layouts).reshape(-1, 3), np.array(rest)


def _regress(effect: FloatArray, rest: FloatArray) -> tuple[float, float]:
    """Robust slope through the origin and its standard error; a few bad overlaps do not turn it."""
    weight = np.ones_like(rest)
    share = 0.0
    for _ in range(20):
        share = float(np.sum(weight * effect * rest) / max(np.sum(weight * effect**2), 1e-12))
        left = rest - share * effect
        scale = max(1.4826 * float(np.median(np.abs(left))), 1e-4)
        weight = np.minimum(1.0, 1.5 * scale / np.maximum(np.abs(left), 1e-12))
    error = scale / math.sqrt(max(float(np.sum(weight * effect**2)), 1e-12))
    return share, error
