"""Levels: discrete energies (a lattice, or few printed digits) counted one by one.

While the distinct energies are few and each is seen several times, they are the nodes and the weights are counts:
no approximation at all.  Rounding that has piled up (running sums, products of printed values) blurs a level into
several values a little apart; a regular spacing behind them is looked for, and energies are snapped to it.  When
distinct values become too many, the counts are poured into panels, which loses nothing the panels would have kept.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reweight.tally.panels import ORDER, check_magnitude, panel_indices, powers

__all__ = ["MOST_LEVELS", "SIGHTINGS", "Spacing", "are_levels", "find_spacing", "pour"]

MOST_LEVELS = 65_536

# "Each seen several times on average": fewer sightings, and panels describe the data with fewer numbers.
SIGHTINGS = 3

# Energies further than this from a multiple of the spacing are not rounding errors and stay as they are.
SNAP_TOLERANCE = 0.1


@dataclass(frozen=True, slots=True, kw_only=True)
class Spacing:
    """A regular grid of energies found behind rounded values.

    Attributes
    ----------
    offset, step : float
        Energies are ``offset + step * integer``.
    largest_shift : float
        Largest change that snapping made to the energies it was found from.
    """

    offset: float
    step: float
    largest_shift: float

    def snap(self, energies: NDArray[np.float64]) -> NDArray[np.float64]:
        """Energies moved to the grid; those that are plainly off it are left alone."""
        snapped = self.offset + self.step * np.rint((energies - self.offset) / self.step)
        return np.where(np.abs(energies - snapped) <= SNAP_TOLERANCE * self.step, snapped, energies)


def are_levels(distinct: int, samples: int) -> bool:
    """Whether so many distinct energies among so many samples are discrete levels."""
    return distinct <= MOST_LEVELS and distinct * SIGHTINGS <= samples


def find_spacing(energies: NDArray[np.float64]) -> Spacing | None:
    """Regular grid behind rounded energies; None if the values are exact levels already, or continuous.

    Parameters
    ----------
    energies : numpy.ndarray, shape (N,)
        A sample of the energies of all runs.
    """
    distinct = np.unique(energies)
    if distinct.size < 4:
        return None
    gaps = np.diff(distinct)
    ordered = np.sort(gaps)
    jumps = ordered[1:] / ordered[:-1]
    jump = int(np.argmax(jumps))
    if jumps[jump] < 20:  # no two scales of distance: nothing is blurred
        return None
    group = np.concatenate([[0], np.cumsum(gaps > ordered[jump])])
    size = np.bincount(group)
    if size.size < 3 or not are_levels(size.size, energies.size):
        return None
    centres = np.bincount(group, distinct) / size
    steps = np.diff(centres)
    # Counted step by step: over many levels the blur of the smallest step would add up to a whole one.
    number = np.concatenate([[0.0], np.cumsum(np.rint(steps / steps.min()))])
    step, offset = np.polyfit(number, centres, 1)
    doubt = float(np.abs(centres - offset - step * number).max())
    step = _roundest(float(step), doubt / number[-1])
    offset = _roundest(float(offset), doubt)
    spacing = Spacing(offset=offset, step=step, largest_shift=0.0)
    shift = np.abs(spacing.snap(distinct) - distinct)
    on_grid = np.abs(distinct - offset - step * np.rint((distinct - offset) / step)) <= SNAP_TOLERANCE * step
    if not on_grid.all():
        return None
    return Spacing(offset=offset, step=step, largest_shift=float(shift.max()))


def _roundest(value: float, doubt: float) -> float:
    """Return the number with the fewest digits within ``doubt`` of ``value``."""
    for digits in range(-12, 13):
        rounded = round(value, digits)
        if abs(rounded - value) <= doubt and rounded != 0:
            return rounded
    return value


def pour(
    levels: NDArray[np.float64], sums: NDArray[np.float64], width: float
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Counts on levels as power sums on panels.

    Parameters
    ----------
    levels : numpy.ndarray, shape (M,)
    sums : numpy.ndarray, shape (C, B, 1, M)
        Per tallied column and leaf.
    width : float
        Of the panels.

    Returns
    -------
    indices : numpy.ndarray, shape (P,)
    sums : numpy.ndarray, shape (C, B, ORDER, P)
    """
    check_magnitude(float(levels.min()), float(levels.max()), width)
    index, coordinate = panel_indices(levels, width)
    indices, place = np.unique(index.astype(np.int64), return_inverse=True)
    values = powers(coordinate)
    poured = np.zeros((*sums.shape[:2], ORDER, indices.size))
    for level in range(levels.size):
        poured[..., place[level]] += sums[..., level] * values[:, level]
    return indices, poured
