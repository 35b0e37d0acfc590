"""Where to measure next, and why."""

from typing import Literal

import attrs

NextKind = Literal["sounding", "test_hole"]
# What is asked: how deep rock lies, or whether the deep gravel is there.
About = Literal["bedrock", "gravel"]


@attrs.frozen
class NextPlace:
    """One place of a plan. Lengths in m; doubts in m of bedrock elevation, or of a probability (0 to 0.5).

    rank              1 for the first; each is chosen as if those before it had been measured
    spacing           AB/2 that a sounding here would need
    doubt_now, doubt_then  standard error here before anything is measured, and once this place and those before it are
    lowering          by how much the root mean square of the standard error, wherever it was asked, is expected to fall
    by_sounding, by_test_hole  the same had the place been given to the one kind or to the other
    depth             of the basal contact that is expected here
    sounding_error    deviation of the natural log of depth that soundings of such depth and spread had in this survey
    nearest, distance  the nearest sounding or well that is known
    """

    rank: int
    kind: NextKind
    easting: float
    northing: float
    spacing: float
    doubt_now: float
    doubt_then: float
    lowering: float
    by_sounding: float
    by_test_hole: float
    depth: float
    sounding_error: float
    nearest: str
    distance: float


@attrs.frozen
class Plan:
    """Places in the order of their worth, and what they are expected to do to the doubt.

    about, at      what was asked, and where: all over the grid, or at the permits
    thicker_than   m: thickness of gravel that was asked for, where it was gravel
    before, after  root mean square of the standard error where it was asked, now and with all places measured
    n_allowed, n_asked  places that were weighed, and at which the doubt was counted
    """

    about: About
    at: Literal["grid", "permits"]
    thicker_than: float
    places: tuple[NextPlace, ...]
    before: float
    after: float
    n_allowed: int
    n_asked: int
    remarks: tuple[str, ...] = ()
