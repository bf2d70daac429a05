"""Difference of ln g between two levels: the states at each, and block sums of its influence (see coverage.py).

Shape letters: B leaves of a run, Q nodes.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from reweight.answers.bins import energy_bins
from reweight.density_of_states import DensityOfStates
from reweight.tally.nodes import COUNT
from reweight.uncertainty.influence import Influence, block_sums, with_free_energies

Array = NDArray[np.float64]


def states_at_levels(combined: DensityOfStates, levels: tuple[float, float], spacing: float) -> Array | None:
    """States per sample at each of two levels, 0 at nodes elsewhere, shape (2, Q); None if a level was never seen."""
    solution = combined.estimate.solution
    bins = energy_bins(combined, spacing)
    lower, upper = bins.edges()
    places = [np.flatnonzero((lower <= level) & (level < upper)) for level in levels]
    if not all(place.size for place in places):
        return None
    scaled = np.exp(-solution.log_denominator + solution.log_denominator.min())
    inside = np.array([scaled * (bins.of_node == place[0]) for place in places])
    return inside if (inside @ combined.estimate.weights[0] > 0).all() else None


def level_blocks(combined: DensityOfStates, inside: Array) -> list[Array]:
    """Block sums of the influence on the first ln g minus the second, one array (B, 1) a run."""
    estimate = combined.estimate
    first, second = inside / (inside @ estimate.weights[0])[:, None]
    direct = {COUNT: (first - second)[:, None]}
    return block_sums(estimate, Influence(with_free_energies(estimate, direct)))
