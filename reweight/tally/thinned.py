"""The thinned series: a run's columns as means over groups of rows, for everything that needs the course of time.

Shape letters: N rows, A observables, G groups.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reweight.tally.tree import pairwise

__all__ = ["Thinned", "thin"]

LONG_GROUP = 16


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
    """Sums over complete groups of ``group`` rows (a power of two)."""
    complete = rows.shape[0] // group * group
    difference = np.ascontiguousarray((rows[:complete] - origin).T)
    return Thinned(
        group=group,
        origin=origin.copy(),
        sums=_group_sums(difference, None, group).T,
        squares=_group_sums(difference, difference, group).T,
    )


def _group_sums(
    values: NDArray[np.float64], factors: NDArray[np.float64] | None, group: int
) -> NDArray[np.float64]:
    """Sums of values, or of products, over groups along the last axis; short groups as a tree, faster for them."""
    if group < LONG_GROUP:
        return pairwise(values if factors is None else values * factors, 1, group.bit_length() - 1)
    grouped = values.reshape(values.shape[0], -1, group)
    return np.asarray(
        np.vecdot(grouped, np.ones(group) if factors is None else factors.reshape(grouped.shape))
    )
