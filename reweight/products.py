"""Matrix products on one thread: as fast on a busy machine as on an idle one, and the same bits on both.

Array layer: NumPy and SciPy only.

A linear-algebra library hands a product to several threads once it is large enough.  Where other programs keep the
cores busy, the threads then wait for one another, a time slice of the scheduler at a time: 8 to 50 ms were measured
for products that take 0.2 ms.  And how a sum is divided among threads decides its last bits.  Products in pieces too
small to be divided avoid both, and lose nothing on an idle machine at the sizes that occur here.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

__all__ = ["COLUMNS", "product"]

LARGEST = 2**18  # multiplications at a time; OpenBLAS starts a second thread at twice as many (measured)
ROWS = 32  # at a time, at least
COLUMNS = 16  # right-hand sides that triangular solvers still treat on one thread (measured)


def product(
    left: NDArray[np.float64] | csr_array, right: NDArray[np.float64] | csr_array
) -> NDArray[np.float64]:
    """Matrix product, piece by piece.

    Parameters
    ----------
    left : numpy.ndarray or sparse array, shape (M, K)
    right : numpy.ndarray or sparse array, shape (K, N)

    Returns
    -------
    numpy.ndarray, shape (M, N)
    """
    if isinstance(left, csr_array) or isinstance(right, csr_array):  # never divided among threads
        return np.asarray(left @ right)
    height, (inner, width) = left.shape[0], right.shape
    result = np.empty((height, width))
    together = max(ROWS, LARGEST // max(1, inner * width))
    for top in range(0, height, together):
        rows = left[top : top + together]
        step = max(1, LARGEST // (rows.shape[0] * width))
        total = rows[:, :step] @ right[:step]
        for start in range(step, inner, step):
            total += rows[:, start : start + step] @ right[start : start + step]
        result[top : top + together] = total
    return result
