"""Plain analytic shapes that the county is put together from. Coordinates in m; none is a random field."""

from collections.abc import Callable

import attrs
import numpy as np
from scipy.spatial import cKDTree


def ramp(t: np.ndarray) -> np.ndarray:
    """0 below t = 0, 1 above t = 1, smooth between."""
    t = np.clip(t, 0.0, 1.0)
    return t * t * (3.0 - 2.0 * t)


@attrs.frozen
class Patch:
    """A superellipse: 1 well inside, 0 outside. `edge` is the share of the radius that its slope takes up."""

    x: float
    y: float
    half_length: float
    half_width: float
    angle: float
    power: float
    edge: float
    height: float

    def __call__(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        along = (x - self.x) * np.cos(self.angle) + (y - self.y) * np.sin(self.angle)
        across = (y - self.y) * np.cos(self.angle) - (x - self.x) * np.sin(self.angle)
        radius = (np.abs(along / self.half_length) ** self.power + np.abs(across / self.half_width) ** self.power) ** (
            1.0 / self.power
        )
        return np.clip((1.0 - radius) / self.edge, 0.0, 1.0)


def highest(patches: tuple[Patch, ...], x: np.ndarray, y: np.ndarray) -> np.ndarray:
    """The greatest height of the patches at each place; 0 where none lies."""
    heights = [patch.height * patch(x, y) for patch in patches]
    return np.max(heights, axis=0) if heights else np.zeros_like(x)


class CentreLine:
    """A line through the county, of points close enough together to be taken for a curve."""

    def __init__(self, x: np.ndarray, y: np.ndarray) -> None:
        self.points = np.column_stack([x, y])
        step = np.diff(self.points, axis=0)
        self.length_along = np.concatenate([[0.0], np.cumsum(np.hypot(*step.T))])
        self.direction = np.gradient(self.points, self.length_along, axis=0)
        self.tree = cKDTree(self.points)

    def locate(self, x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Distance along the line and signed offset from it (left is positive), m."""
        _, nearest = self.tree.query(np.column_stack([np.ravel(x), np.ravel(y)]))
        dx = np.ravel(x) - self.points[nearest, 0]
        dy = np.ravel(y) - self.points[nearest, 1]
        direction = self.direction[nearest]
        left = np.where(direction[:, 0] * dy - direction[:, 1] * dx >= 0.0, 1.0, -1.0)
        shape = np.shape(x)
        return self.length_along[nearest].reshape(shape), (left * np.hypot(dx, dy)).reshape(shape)


@attrs.frozen(eq=False)
class Valley:
    """A valley cut along a centre line, its two flanks unlike each other.

    depth, left_width, right_width : functions of the distance along, m. A power of 2 is a gentle flank, 6 a wall.
    """

    line: CentreLine
    depth: Callable[[np.ndarray], np.ndarray]
    left_width: Callable[[np.ndarray], np.ndarray]
    right_width: Callable[[np.ndarray], np.ndarray]
    left_power: float
    right_power: float

    def incision(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Depth (m) to which the valley is cut below its surroundings."""
        along, offset = self.line.locate(x, y)
        left = offset >= 0.0
        width = np.where(left, self.left_width(along), self.right_width(along))
        power = np.where(left, self.left_power, self.right_power)
        return self.depth(along) / (1.0 + (np.abs(offset) / width) ** power)
