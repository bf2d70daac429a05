r"""Canonical moments that quantities are made of.

A moment is ``<A (E - c)**e>`` where A is a tallied column (1, an observable, one of its powers) and c a fixed number,
chosen at each temperature as the mean energy there.  A fixed c keeps the moments plain averages, so that influence
functions follow by the chain rule, and its choice keeps all digits when the mean is large against the fluctuation.

Shape letters: T temperatures.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from reweight.estimate import Canonical
from reweight.tally.nodes import COUNT, Column

__all__ = ["LOG_PARTITION", "Moment", "Moments"]

Array = NDArray[np.float64]


class Moment(NamedTuple):
    """``<column (E - c)**power>``."""

    column: Column = COUNT
    power: int = 0


# ln Z is no average, but it has an influence function all the same, and quantities ask for it like for a moment.
LOG_PARTITION = Moment(COUNT, -1)


class Moments:
    """Moments at several temperatures, computed when first asked for.

    Parameters
    ----------
    canonical : Canonical
    boltzmann_constant : float
        In energy units per temperature unit.
    """

    def __init__(self, canonical: Canonical, boltzmann_constant: float) -> None:
        self.canonical = canonical
        self.boltzmann_constant = boltzmann_constant
        self._known: dict[Moment, Array] = {}

    @property
    def beta(self) -> Array:
        """Inverse temperatures, shape (T,)."""
        return self.canonical.beta

    @property
    def origin(self) -> Array:
        """The number c: mean energy on the study's scale, shape (T,)."""
        return self.canonical.mean_energy + self.canonical.estimate.assembly.reference

    @property
    def log_partition(self) -> Array:
        """``ln Z`` for energies relative to the reference, up to a common constant."""
        return self.canonical.log_partition

    def average(self, moment: Moment) -> Array:
        """Average of a moment that is one."""
        return self.canonical.estimate.column(moment.column) @ self.canonical.weighted_power(moment.power)

    def __getitem__(self, moment: Moment) -> Array:
        if moment not in self._known:
            if moment == LOG_PARTITION:
                # On the study's scale: energies were taken relative to the reference.
                shift = self.beta * self.canonical.estimate.assembly.reference
                self._known[moment] = self.log_partition - shift
            else:
                self._known[moment] = self.average(moment)
        return self._known[moment]
