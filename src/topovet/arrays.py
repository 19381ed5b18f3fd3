"""Array aliases for signatures, and the one way an array is made read-only."""

from __future__ import annotations

from typing import TypeVar

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


def largest_spectral_norm(stack: ComplexArray, *, hermitian: bool = False) -> float:
    """Largest spectral norm in a stack of matrices (n, m, m); 0 for an empty stack.

    Matrices are taken by falling Frobenius norm, which bounds the spectral norm, so that the
    singular values of only a few of them are needed; of Hermitian ones, the eigenvalues.
    """
    if len(stack) == 0:
        return 0.0
    frobenius = np.linalg.norm(stack, axis=(1, 2))
    order = np.argsort(-frobenius, kind="stable")
    best = 0.0
    for start in range(0, len(order), 16):
        batch = order[start : start + 16]
        if frobenius[batch[0]] <= best:
            break
        if hermitian:
            best = max(best, float(np.abs(np.linalg.eigvalsh(stack[batch])).max()))
        else:
            best = max(best, float(np.linalg.norm(stack[batch], ord=2, axis=(1, 2)).max()))
    return best
