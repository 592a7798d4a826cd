"""Array aliases used everywhere, and the one way arrays become read-only."""

from __future__ import annotations

from typing import Any, TypeAlias, TypeVar

import numpy as np
import numpy.typing as npt

FloatArray: TypeAlias = npt.NDArray[np.float64]
IntArray: TypeAlias = npt.NDArray[np.int64]
BoolArray: TypeAlias = npt.NDArray[np.bool_]
ComplexArray: TypeAlias = npt.NDArray[np.complex128]

_Array = TypeVar("_Array", bound=npt.NDArray[Any])


def read_only(array: _Array) -> _Array:
    """Return `array` as a contiguous array that nobody can write to (a copy when it was writable)."""
    if not array.flags.writeable and array.flags.c_contiguous:
        return array
    frozen = np.array(array, order="C", copy=True)
    frozen.flags.writeable = False
    return frozen  # type: ignore[return-value]
