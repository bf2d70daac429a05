"""The thinned series: a run's columns as means over groups of rows, for everything that needs the course of time.

Shape letters: N rows, A observables, G groups.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reweight.tally.tree import doublings, pairwise

__all__ = ["Thinned", "thin"]


@dataclass(slots=True)
class Thinned:
    """A run's columns as means over groups of consecutive rows.

    Attributes
    ----------
    group : int
        Rows a group.
    origin : numpy.ndarray, shape (1 + A,)
        First row of the run; sums are taken relative to it.
    sums, squares : numpy.ndarray, shape (G, 1 + A)
        Sums of the differences from the origin, and of their squares, over each complete group.
    """

    group: int
    origin: NDArray[np.float64]
    sums: NDArray[np.float64]
    squares: NDArray[np.float64]

    def means(self) -> NDArray[np.float64]:
        """Group means, shape (G, 1 + A), in the columns' own units."""
        return self.origin + self.sums / self.group

    def within_variance(self) -> NDArray[np.float64]:
        """Variance of the rows inside each group, shape (G, 1 + A)."""
        return np.maximum(self.squares / self.group - (self.sums / self.group) ** 2, 0.0)


def thin(rows: NDArray[np.float64], group: int, origin: NDArray[np.float64]) -> Thinned:
    """Sums over complete groups of ``group`` rows (a power of two), added as a tree."""
    complete = rows.shape[0] // group * group
    difference = rows[:complete] - origin
    times = doublings(group, 1)
    return Thinned(
        group=group,
        origin=origin.copy(),
        sums=pairwise(difference, 0, times),
        squares=pairwise(difference**2, 0, times),
    )
