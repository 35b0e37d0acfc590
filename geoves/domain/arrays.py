"""Read-only float arrays as fields of frozen things."""

from collections.abc import Callable
from typing import Any

import attrs
import numpy as np
from numpy.typing import ArrayLike, DTypeLike, NDArray

FloatArray = NDArray[np.float64]


def frozen_array(dtype: DTypeLike) -> Callable[[ArrayLike], NDArray[Any]]:
    """A converter that copies into `dtype` and clears the write flag."""

    def convert(values: ArrayLike) -> NDArray[Any]:
        array = np.array(values, dtype=dtype)
        array.flags.writeable = False
        return array

    return convert


def _same(left: Any, right: Any) -> bool:
    if left is None or right is None:
        return left is right
    return bool(np.array_equal(left, right, equal_nan=np.issubdtype(np.asarray(left).dtype, np.floating)))


def array_field(dtype: DTypeLike = np.float64, *, optional: bool = False, **options: Any) -> Any:
    """An attrs field that holds a read-only array and compares by value, NaN equal to NaN."""
    convert = frozen_array(dtype)
    return attrs.field(
        converter=attrs.converters.optional(convert) if optional else convert,
        eq=attrs.cmp_using(eq=_same),
        repr=lambda values: "None" if values is None else f"array{np.shape(values)}",
        **options,
    )
