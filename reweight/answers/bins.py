"""Bins of the energy: single levels, or whole panels; and the errors of any sum over bins.

Weights of single nodes mean nothing, so a bin is always a union of whole panels; its width is a multiple of theirs.

Shape letters: K runs, B leaves of a run, Q nodes, X bins.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reweight.density_of_states import DensityOfStates
from reweight.errors import InputError
from reweight.tally.assemble import Assembly
from reweight.tally.nodes import COUNT
from reweight.uncertainty.influence import Influence, block_sums, with_free_energies

__all__ = ["Bins", "bin_blocks", "energy_bins"]

Array = NDArray[np.float64]

BINS_AT_ONCE = 256
PANELS_A_BIN = 2
FEWEST_VISITS = 10.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Bins:
    """Occupied bins, ascending.

    Attributes
    ----------
    of_node : numpy.ndarray, shape (Q,)
        Bin of each node; one past the last for nodes that only a transient visited.
    energy : numpy.ndarray, shape (X,)
        The level, or the centre of the bin; on the study's scale.
    width : float or None
        Of the bins; None for levels.
    """

    of_node: NDArray[np.int64]
    energy: Array
    width: float | None

    @property
    def count(self) -> int:
        """Number of bins."""
        return int(self.energy.size)

    def sums(self, values: Array) -> Array:
        """Sum node values over each bin, shape (X,)."""
        return np.asarray(np.bincount(self.of_node, values, minlength=self.count + 1)[: self.count], float)

    def edges(self) -> tuple[Array, Array]:
        """Lower and upper end of each bin; both the level itself for levels."""
        half = 0.0 if self.width is None else self.width / 2
        return self.energy - half, self.energy + half


def energy_bins(combined: DensityOfStates, width: float | None = None) -> Bins:
    """Bins for the energies of a combined object.

    Parameters
    ----------
    width : float, optional
        Wanted width, in the study's energy unit; by default every level its own bin, or two panels.  Panels are
        never cut: the width is rounded to the nearest multiple of theirs.

    Raises
    ------
    InputError
        The width is not positive, narrower than the panels or the distance between levels, or wider than all energies.
    """
    assembly = combined.estimate.assembly
    if width is not None:
        _check_width(assembly, width)
    visited = combined.estimate.independent.reshape(-1, assembly.order).sum(axis=1) > 0
    if assembly.discrete and width is None:
        present, number = assembly.keys[visited], np.asarray(assembly.keys)
        return Bins(of_node=_places(present, number, 1), energy=np.asarray(present, float), width=None)
    if assembly.discrete:
        assert width is not None
        number = np.floor(assembly.keys / width).astype(np.int64)
    else:
        panels = PANELS_A_BIN if width is None else round(width / assembly.width)
        number = np.asarray(assembly.keys, np.int64) // panels
        width = panels * assembly.width
    present = np.unique(number[visited])
    return Bins(
        of_node=_places(present, number, assembly.order),
        energy=np.asarray((present + 0.5) * width, float),
        width=width,
    )


def _places(present: NDArray[Any], number: NDArray[Any], order: int) -> NDArray[np.int64]:
    """Place of each key's number among those present, once a node; one past the last if it is not."""
    place = np.minimum(np.searchsorted(present, number), present.size - 1)
    return np.repeat(np.where(present[place] == number, place, present.size), order)


def _check_width(assembly: Assembly, width: float) -> None:
    if not (np.isfinite(width) and width > 0):
        raise InputError(f"a bin width must be positive and finite; got {width:g}.")
    lowest, highest = float(assembly.keys[0]), float(assembly.keys[-1])
    if assembly.discrete:
        finest = float(np.diff(assembly.keys).min(initial=np.inf))
        whole, what = highest - lowest, "distance between levels"
        advice = "Leave the bin width out to have each level by itself."
    else:
        finest, whole = assembly.width, (highest - lowest + 1) * assembly.width
        what, advice = "finest that was kept", "Set resolution in the study to keep finer bins."
    if width < finest:
        raise InputError(f"a bin width must be at least {finest:g}, the {what}; got {width:g}. {advice}")
    if width > whole:
        raise InputError(
            f"a bin width must be at most {whole:g}, the range of the sampled energies; got {width:g}. "
            "Is it in the study's energy unit?"
        )


def bin_blocks(
    combined: DensityOfStates, bins: Bins, direct: Callable[[NDArray[np.int64]], Array]
) -> list[Array]:
    """Block sums of one answer a bin.

    Parameters
    ----------
    direct : callable
        From bin numbers, shape (x,), to the direct influence of a sample at each node, shape (Q, x); the response of
        the free energies is added here.

    Returns
    -------
    list of numpy.ndarray, shape (B, X)
        One a run, centred.
    """
    estimate = combined.estimate
    parts = []
    for start in range(0, bins.count, BINS_AT_ONCE):
        numbers = np.arange(start, min(start + BINS_AT_ONCE, bins.count))
        parts.append(block_sums(estimate, Influence(with_free_energies(estimate, {COUNT: direct(numbers)}))))
    return [np.concatenate(pieces, axis=1) for pieces in zip(*parts, strict=True)]
