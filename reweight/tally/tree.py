"""Sums as a balanced binary tree."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = ["doublings", "pairwise"]


def pairwise(array: NDArray[np.float64], axis: int, times: int) -> NDArray[np.float64]:
    """Add neighbours along an axis, so many times over."""
    for _ in range(times):
        even = [slice(None)] * array.ndim
        odd = list(even)
        even[axis], odd[axis] = slice(0, None, 2), slice(1, None, 2)
        array = array[tuple(even)] + array[tuple(odd)]
    return array


def doublings(length: int, base: int) -> int:
    """How often ``base`` must be doubled to be ``length``, both powers of two."""
    return (length // base).bit_length() - 1
