"""The report's figures of the statistics, as SVG: variograms, and places left out in turn."""

import attrs
import numpy as np

from geoves.delivery.markup import Markup, element
from geoves.delivery.svg import (
    Frame,
    Scale,
    drawing,
    label,
    line,
    mark_path,
)
from geoves.domain.grids import CrossValidation, Variogram
from geoves.kernels.covariances import correlation

HEIGHT, TOP, BOTTOM = 300, 12, 262


def draw_variogram(variogram: Variogram, crs_unit: str) -> Markup:
    """Experimental semivariance with the number of pairs at each lag, and the fitted model along and across.

    Small marks are the same by direction, along and across; the thin line is the fit to the marks by least squares.
    """
    lag, semivariance = variogram.lag, variogram.semivariance
    known = np.isfinite(lag) & np.isfinite(semivariance)
    sill = variogram.nugget + variogram.partial_sill
    highest = 1.15 * max([sill, *semivariance[known]], default=1.0) or 1.0
    furthest = 1.05 * max([*lag[known], 0.5 * variogram.length], default=1.0) or 1.0
    frame = Frame(Scale(0.0, furthest, 66, 400), Scale(0.0, highest, BOTTOM, TOP))
    power = f"({variogram.unit})²" if " " in variogram.unit else f"{variogram.unit}²"
    parts = [frame.axes(f"distance ({crs_unit})", f"semivariance ({power})")]
    distances = np.linspace(0.0, furthest, 80)
    for ratio, style in ((1.0, "fit"), (variogram.ratio, "fit across")):
        length = max(variogram.length * ratio, 1e-9)
        parts.append(frame.line(distances, modelled_semivariance(variogram, distances / length), style))
    if variogram.least_squares is not None:
        nugget, partial_sill, length = variogram.least_squares
        by_pairs = attrs.evolve(variogram, nugget=nugget, partial_sill=partial_sill)
        parts.append(frame.line(distances, modelled_semivariance(by_pairs, distances / length), "by-pairs"))
    for i, direction in enumerate(variogram.directions):
        for at, value in zip(direction.lag, direction.semivariance, strict=True):
            if np.isfinite(value) and value <= highest:
                x, y = float(frame.x.pixel(at)), float(frame.y.pixel(value))
                parts.append(element("path", {"d": mark_path(1 + i, x, y), "class": f"direction-{i}"}))
    for at, value, pairs in zip(lag[known], semivariance[known], variogram.pairs[known], strict=True):
        x, y = float(frame.x.pixel(at)), float(frame.y.pixel(value))
        parts += [
            element("circle", {"cx": f"{x:.1f}", "cy": f"{y:.1f}", "r": 3.5, "class": "reading segment-0"}),
            label(x, y - 7, str(int(pairs)), "tick", "middle"),
        ]
    return drawing(420, HEIGHT, f"Variogram of {variogram.title}", *parts)


def modelled_semivariance(variogram: Variogram, share: np.ndarray) -> np.ndarray:
    """The fitted model at distances given as shares of its practical length; 0 at no distance."""
    grown = variogram.partial_sill * (1.0 - correlation(share, variogram.model))
    return np.where(share > 0, variogram.nugget, 0.0) + grown


def draw_cross_validation(crossed: CrossValidation) -> Markup:
    """Measured against predicted where each place was left out, with the band that was promised; the worst by name."""
    measured, predicted, error = crossed.measured, crossed.predicted, 1.645 * crossed.standard_error
    ends = np.concatenate([measured, predicted])
    ends = ends[np.isfinite(ends)]
    span = max(float(np.ptp(ends)), 1e-6)
    low, high = float(ends.min()) - 0.08 * span, float(ends.max()) + 0.08 * span
    frame = Frame(Scale(low, high, 66, 400), Scale(low, high, BOTTOM, TOP))
    unit = f" ({crossed.unit})" if crossed.unit else ""
    parts = [
        frame.axes(f"predicted without it{unit}", f"measured{unit}"),
        frame.line([low, high], [low, high], "equal"),
    ]
    x, y = frame.x.pixel(predicted), frame.y.pixel(measured)
    left, right = frame.x.pixel(predicted - error), frame.x.pixel(predicted + error)
    worst = largest_misfits(crossed, 4)
    for i, place in enumerate(crossed.place):
        if not (np.isfinite(x[i]) and np.isfinite(y[i])):
            continue
        words = element("title", {}, f"{place}: measured {measured[i]:.1f}, predicted {predicted[i]:.1f}{unit}")
        mark = {"d": mark_path(0 if crossed.kind[i] == "sounding" else 1, x[i], y[i]), "class": "reading segment-0"}
        if np.isfinite(left[i]) and np.isfinite(right[i]):
            parts.append(line(float(left[i]), float(y[i]), float(right[i]), float(y[i]), "error-bar"))
        parts.append(element("path", mark, words))
        if i in worst:
            parts.append(label(x[i] + 6, y[i] - 5, place[:18], "halo small"))
    return drawing(420, HEIGHT, f"Left out in turn: {crossed.title}", *parts)


def largest_misfits(crossed: CrossValidation, wanted: int) -> list[int]:
    """Indices of the places that were predicted worst, the worst first."""
    misfit = np.nan_to_num(np.abs(crossed.measured - crossed.predicted), nan=-1.0)
    return [int(i) for i in np.argsort(-misfit, kind="stable")[:wanted] if misfit[i] >= 0]
