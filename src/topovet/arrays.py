"""Array aliases for signatures, and the one way an array is made read-only."""

from __future__ import annotations

from typing import Any, TypeVar

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]
IntArray = NDArray[np.int64]
BoolArray = NDArray[np.bool_]

Scalar = TypeVar("Scalar", bound=np.generic)


def frozen(array: NDArray[Scalar]) -> NDArray[Scalar]:
    """A read-only view of the array (the caller's own handle stays writable)."""
    view: NDArray[Scalar] = array.view()
    view.flags.writeable = False
    return view
