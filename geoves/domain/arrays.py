"""Read-only arrays as fields of frozen things: `attrs.field(converter=floats, eq=by_value, repr=shape)`."""

from typing import Any

import attrs
import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
BoolArray = NDArray[np.bool_]


def _frozen(array: NDArray[Any]) -> NDArray[Any]:
    array.flags.writeable = False
    return array


def floats(values: ArrayLike) -> FloatArray:
    """A read-only copy as float64."""
    return _frozen(np.array(values, dtype=np.float64))


def integers(values: ArrayLike) -> IntArray:
    """A read-only copy as int64."""
    return _frozen(np.array(values, dtype=np.int64))


def booleans(values: ArrayLike) -> BoolArray:
    """A read-only copy as bool."""
    return _frozen(np.array(values, dtype=np.bool_))


def optional_floats(values: ArrayLike | None) -> FloatArray | None:
    """A read-only copy as float64, or None."""
    return None if values is None else floats(values)


def _same(left: Any, right: Any) -> bool:
    if left is None or right is None:
        return left is right
    return bool(np.array_equal(left, right, equal_nan=np.issubdtype(left.dtype, np.floating)))


by_value = attrs.cmp_using(eq=_same)


def shape(values: Any) -> str:
    """How an array shows itself in a repr."""
    return "None" if values is None else f"array{np.shape(values)}"
