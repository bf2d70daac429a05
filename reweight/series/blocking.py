"""Standard error of a mean against the length of blocks.

Neighbours are averaged again and again; once blocks are longer than the correlation, the standard error of their mean
stops growing.  H. Flyvbjerg and H. G. Petersen, J. Chem. Phys. 91, 461 (1989) (from memory)::

    error(mean) = sqrt(c0 / (n - 1)) (1 +- 1 / sqrt(2 (n - 1)))

with c0 the variance (divided by n) of n block means.

Array layer: NumPy only.  Shape letters: N groups of samples, L block lengths.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Blocking", "blocking"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Blocking:
    """A blocking curve.

    Attributes
    ----------
    block_length : numpy.ndarray, shape (L,)
        In samples.
    block_count : numpy.ndarray, shape (L,)
    error_of_mean : numpy.ndarray, shape (L,)
        Standard error of the mean as blocks of that length tell it.
    uncertainty : numpy.ndarray, shape (L,)
        Standard error of that.
    """

    block_length: NDArray[np.int64]
    block_count: NDArray[np.int64]
    error_of_mean: NDArray[np.float64]
    uncertainty: NDArray[np.float64]


def blocking(means: NDArray[np.float64], *, group: int = 1) -> Blocking:
    """Blocking curve of a series, or of the samples whose group means it holds.

    Parameters
    ----------
    means : numpy.ndarray, shape (N,)
        At least two samples, or means over groups of consecutive samples; a rest that fills no block is left out.
    group : int
        Samples a group: the shortest block.
    """
    lengths, counts, errors = [], [], []
    length = group
    while means.size >= 2:
        lengths.append(length)
        counts.append(means.size)
        errors.append(np.sqrt(means.var() / (means.size - 1)))
        means = means[: means.size // 2 * 2].reshape(-1, 2).mean(axis=1)
        length *= 2
    count = np.array(counts, dtype=np.int64)
    error = np.array(errors, dtype=np.float64)
    return Blocking(
        block_length=np.array(lengths, dtype=np.int64),
        block_count=count,
        error_of_mean=error,
        uncertainty=error / np.sqrt(2 * (count - 1)),
    )
