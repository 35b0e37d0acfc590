"""What soundings were worth in this survey, by their depth and their spread: the measure for the next ones."""

from typing import NamedTuple

import numpy as np

from geoves.domain.arrays import FloatArray
from geoves.domain.results import Results
from geoves.domain.units import Z_95

# Soundings speak for those whose depth, and whose AB/2 over depth, differ from theirs by about this (natural log).
ALIKE = 0.35
# The survey as a whole counts as so many alike soundings.
SHARED = 1.0
# A spread is long enough where it promises this share of what the best one does.
NEARLY = 0.9
# No less than so many times the depth is advised: common practice.
LEAST_RATIO = 2.0


class TrackRecord(NamedTuple):
    """Soundings so far (m,): natural logs of the basal contact's depth (m) and of their longest AB/2 over it, and the
    precision (1 over variance) with which each knew the log of depth by itself, 0 where it told nothing.
    spreads : longest AB/2 (s,) m that were laid out
    """

    log_depth: FloatArray
    log_ratio: FloatArray
    precision: FloatArray
    spreads: FloatArray

    def expect_precision(self, depth: FloatArray) -> FloatArray:
        """(c, s) for soundings over depths (c,) m with each of the spreads."""
        log_depth = np.log(depth)[:, None, None]
        log_ratio = np.log(self.spreads)[None, :, None] - log_depth
        off = (log_depth - self.log_depth) ** 2 + (log_ratio - self.log_ratio) ** 2
        weight = np.exp(-0.5 * off / ALIKE**2)
        return np.asarray((weight @ self.precision + SHARED * np.mean(self.precision)) / (weight.sum(axis=2) + SHARED))


class Advice(NamedTuple):
    """For places (c,): AB/2 m that a sounding needs, and the variance of log depth that it may be expected to have."""

    spacing: FloatArray
    variance: FloatArray


def read_track_record(results: Results) -> TrackRecord:
    """Of every sounding that was inverted and whose column has a depth."""
    spreads = {
        one.name: float(np.max(one.curve.half_spacing[one.curve.used]))
        for one in results.survey.soundings
        if one.curve.is_enough
    }
    own = _from_geology(results) if results.geology is not None else _from_columns(results)
    rows = [(depth, spreads[name], precision) for name, depth, precision in own if name in spreads and depth > 0]
    depth, spread, precision = np.array(rows, dtype=float).reshape(-1, 3).T
    return TrackRecord(np.log(depth), np.log(spread / depth), precision, np.unique(spread))


def advise_spreads(record: TrackRecord, depth: FloatArray) -> Advice:
    """The shortest of the survey's spreads that promises nearly as much as the best, at depths (c,) m."""
    promised = record.expect_precision(depth)
    long_enough = record.spreads >= LEAST_RATIO * depth[:, None]
    long_enough[:, -1] |= ~long_enough.any(axis=1)
    allowed = np.where(long_enough, promised, -np.inf)
    chosen = np.argmax(allowed >= NEARLY * allowed.max(axis=1, keepdims=True), axis=1)
    precision = promised[np.arange(len(depth)), chosen]
    with np.errstate(divide="ignore"):
        return Advice(record.spreads[chosen], 1.0 / precision)


def _from_geology(results: Results) -> list[tuple[str, float, float]]:
    """What each sounding added to what all others say of it."""
    if results.geology is None:
        return []
    found = []
    for column in results.geology.columns:
        if column.kind == "sounding":
            with_it, without = (_log_variance(one) for one in (column.basal_depth, column.others_basal_depth))
            found.append((column.place, float(column.basal_depth[1]), max(1.0 / with_it - 1.0 / without, 0.0)))
    return found


def _log_variance(quantiles: FloatArray) -> float:
    """Of a depth's log, from its 5, 50 and 95 % quantiles; never better than one in a hundred."""
    low, _, high = np.log(np.maximum(quantiles, 0.1))
    return float(max((high - low) / (2.0 * Z_95), 0.01) ** 2)


def _from_columns(results: Results) -> list[tuple[str, float, float]]:
    """What each sounding said alone; a bound is no depth."""
    tops = results.interpretation.tops
    known = {top.place: top for top in tops if top.contact == "basal" and top.status == "at" and top.kind == "sounding"}
    found = []
    for column in results.interpretation.columns:
        top = known.get(column.sounding)
        if top is not None and top.depth > 0:
            found.append((column.sounding, top.depth, (top.depth / max(top.standard_error, 0.01 * top.depth)) ** 2))
        elif np.isfinite(column.basal_depth[1]):
            found.append((column.sounding, float(column.basal_depth[1]), 0.0))
    return found


def worth_for_gravel(results: Results) -> float:
    """The share of the doubt whether gravel is there that a sounding resolves on average, 0 to 1.

    From how far soundings moved its probability p from what was held before, p₀: Σ(p - p₀)² / Σ p₀(1 - p₀), for the
    variance of p is what a sounding takes from p₀(1 - p₀).
    """
    if results.geology is not None:
        pairs = [
            (one.others_gravel_probability, one.gravel_probability)
            for one in results.geology.columns
            if one.kind == "sounding"
        ]
    else:
        pairs = [(one.gravel_prior, one.gravel_probability) for one in results.interpretation.columns]
    before, after = np.array(pairs, dtype=float).reshape(-1, 2).T
    known = np.isfinite(before) & np.isfinite(after)
    open_before = float(np.sum(before[known] * (1.0 - before[known])))
    return min(float(np.sum((after - before)[known] ** 2)) / open_before, 1.0) if open_before > 0 else 0.0
