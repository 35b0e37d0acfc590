"""How a contact that is not flat reads where layers are taken for flat, and normals moved by such misreadings.

A spread reads a mean of the contact around it: shallower ground beside a valley's floor draws the reading up, the
valley beside its shoulder draws it down. The mean is of powers of depth, over a footprint as wide as some depths, along
one line through the place at a time. Shapes of footprints were fitted to a 2.5-dimensional response, see
docs/explanation/one-geology.md. Inputs are trusted.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


class Footprint(NamedTuple):
    """A weight (1 + (u / w)²)^-fall over distances u in depths, w = width (AB/2 over 3.5 depths)^growth.

    mean_power : of which power of depth it is the mean
    """

    width: float
    fall: float
    mean_power: float
    growth: float


# Of the line that the spread lies on, and of the line square to it: AB/2 is the largest of the spread.
IN_LINE = Footprint(width=0.34, fall=0.775, mean_power=0.1, growth=0.46)
SQUARE = Footprint(width=1.67, fall=1.7, mean_power=0.5, growth=0.5)
# Largest AB/2 over depth at which the width is that of the footprint.
COMMON_REACH = 3.5
# Distances (2 m + 1,) in depths at which the contact is looked up: even about the place, ever wider outward.
_OUTWARD = np.geomspace(0.06, 10.0, 24)
OFFSETS = np.concatenate([-_OUTWARD[::-1], [0.0], _OUTWARD])
# The spacing that each stands for.
_SPACING = np.gradient(OFFSETS)
# A contact around is no shallower than this share of the depth at the place.
LEAST_SHARE = 0.02


class Reading(NamedTuple):
    """Natural log of the depth read over the true one (n,), and its derivative by the log of each depth (n, u)."""

    shift: Floats
    slope: Floats


def read_contact(relative_depth: Floats, reach: Floats, footprint: Footprint) -> Reading:
    """What flat layers make of a contact of `relative_depth` (n, u), over that at the place, at OFFSETS along a line.

    reach : (n,) largest AB/2 over the depth at the place
    """
    width = footprint.width * (reach / COMMON_REACH) ** footprint.growth
    weight = _SPACING * (1.0 + (OFFSETS / width[:, None]) ** 2) ** -footprint.fall
    weight /= weight.sum(axis=1, keepdims=True)
    powers = weight * np.maximum(relative_depth, LEAST_SHARE) ** footprint.mean_power
    mean = powers.sum(axis=1)
    slope = powers / mean[:, None]
    slope[:, OFFSETS.size // 2] -= 1.0  # the depth at the place is what all others are told by
    return Reading(np.log(mean) / footprint.mean_power, slope)


def move_normals(precision: Floats, pull: Floats, step: Floats, variance: Floats) -> tuple[Floats, Floats]:
    """Normals of b vectors whose first entry is moved by a normal number of mean `step` and `variance` (b,).

    precision (b, p, p) and pull (b, p), the precision times the mean, before and after. A precision may be of no full
    rank: what says nothing goes on to say nothing.
    """
    row = precision[:, :, 0]
    share = variance / (1.0 + variance * row[:, 0])
    moved = pull + step[:, None] * row
    return (
        precision - share[:, None, None] * row[:, :, None] * row[:, None, :],
        moved - (share * moved[:, 0])[:, None] * row,
    )
