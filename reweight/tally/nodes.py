"""What is tallied, and where energies are collected."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reweight.errors import InputError
from reweight.tally.levels import Spacing, are_levels, find_spacing
from reweight.tally.panels import ORDER, panel_width

__all__ = ["COUNT", "FIRST_ROWS", "Column", "Nodes", "suitable_nodes"]

FIRST_ROWS = 4096  # of every run; the nodes of all runs are decided from them
LARGEST_ENERGY = 1e60  # the reach asks for eighth powers, which must stay finite


@dataclass(frozen=True, slots=True)
class Column:
    """One tallied column: a power of an observable, or of its absolute value, or whether it exceeds a value.

    Attributes
    ----------
    observable : str
        Name; empty for the plain count.
    power : int
    absolute : bool
    above : float or None
        The column is 1 where the observable is greater than this, and 0 elsewhere.
    """

    observable: str = ""
    power: int = 0
    absolute: bool = False
    above: float | None = None


COUNT = Column()


@dataclass(frozen=True, slots=True)
class Nodes:
    """Where energies are collected: panels of a width, or discrete levels.

    Attributes
    ----------
    width : float
        Of the panels; kept for levels, too, which may have to be poured later.
    discrete : bool
        Levels.
    spacing : Spacing or None
        Grid to which energies are snapped first.
    """

    width: float
    discrete: bool = False
    spacing: Spacing | None = None

    @property
    def order(self) -> int:
        """Numbers kept per key and column."""
        return 1 if self.discrete else ORDER

    def collects_like(self, other: Nodes) -> bool:
        """Whether a tally on these nodes has the same bits as on the other ones."""
        grids = [each and (each.offset, each.step) for each in (self.spacing, other.spacing)]
        return (self.width, self.discrete, grids[0]) == (other.width, other.discrete, grids[1])


def suitable_nodes(
    first: Sequence[NDArray[np.float64]], beta: NDArray[np.float64], resolution: float | None
) -> Nodes:
    """Nodes that suit all runs.

    Parameters
    ----------
    first : sequence of numpy.ndarray, length K, each of shape (at most FIRST_ROWS,)
        First energies of every run.
    beta : numpy.ndarray, shape (K,)
        Inverse temperatures, 1 / energy unit.
    resolution : float or None
        An upper bound of the width of panels, in energy units.

    Raises
    ------
    InputError
        Energies are too large.
    """
    for place, energies in enumerate(first, start=1):
        largest = float(np.abs(energies).max(initial=0.0))
        if largest > LARGEST_ENERGY:
            raise InputError(
                f"energies must be smaller than {LARGEST_ENERGY:g}; got {largest:g} (run {place} of {len(first)}). "
                "Check the unit, and look for fill values."
            )
    pooled = np.concatenate(first)
    spacing = find_spacing(pooled)
    if spacing is not None:
        first = [spacing.snap(energies) for energies in first]
        pooled = np.concatenate(first)
    deviations = [float(np.std(energies)) for energies in first if energies.size > 1]
    gaps = np.diff(np.sort(beta))
    width = panel_width(
        min((each for each in deviations if each > 0), default=0.0),
        float(gaps.max()) if gaps.size else 0.0,
        resolution,
    )
    return Nodes(width, discrete=are_levels(np.unique(pooled).size, pooled.size), spacing=spacing)
