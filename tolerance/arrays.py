"""Array types shared by every step, and arrays that cannot be written."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
ComplexArray = npt.NDArray[np.complex128]
#: Real, or complex where a Dk carries its loss.
NumberArray = npt.NDArray[Any]
IntArray = npt.NDArray[np.int64]
BoolArray = npt.NDArray[np.bool_]


def read_only(values: npt.ArrayLike) -> FloatArray:
    """A copy of `values` as a float array that refuses to be written to."""
    array = np.array(values, dtype=np.float64)
    array.setflags(write=False)
    return array
