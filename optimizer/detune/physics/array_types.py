"""Names for the array types every module of this floor uses."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]
BoolArray = NDArray[np.bool_]
IntArray = NDArray[np.int64]
AnyArray = NDArray[Any]

__all__ = ["AnyArray", "ArrayLike", "BoolArray", "ComplexArray", "FloatArray", "IntArray"]
