"""Quantities at inverse temperatures, with everything needed to judge them.

Shape letters: K runs, B leaves of a run, Q nodes, T temperatures.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reweight.answers.reach import carriers, end_mass, supported
from reweight.density_of_states import DensityOfStates
from reweight.quantities.moments import Moments
from reweight.quantities.quantity import Quantity
from reweight.uncertainty.influence import block_sums, influence
from reweight.uncertainty.window import Variance, variance

__all__ = ["Evaluation", "evaluate", "values"]

Array = NDArray[np.float64]

NODES_AT_ONCE = 2**21  # nodes times temperatures held in memory at a time


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Evaluation:
    """One quantity at several temperatures, in the study's units.

    Attributes
    ----------
    quantity : Quantity
    beta, value : numpy.ndarray, shape (T,)
    blocks : list of numpy.ndarray, shape (B, T)
        Centred sums of the influence function over each leaf, one array a run.
    variance : Variance
    effective_sample_size : numpy.ndarray, shape (T,)
        Independent samples' worth of the mixture at this temperature.
    end_mass : numpy.ndarray, shape (2, T)
        Probability beyond the last ten independent samples at the low and the high end of the energies.
    carriers : numpy.ndarray, shape (T,)
        Independent samples that carry the variance of this answer.
    within_reach : numpy.ndarray of bool, shape (T,)
    """

    quantity: Quantity
    beta: Array
    value: Array
    blocks: list[Array]
    variance: Variance
    effective_sample_size: Array
    end_mass: Array
    carriers: Array
    within_reach: NDArray[np.bool_]


def _pieces(combined: DensityOfStates, beta: Array) -> list[Array]:
    at_once = max(1, NODES_AT_ONCE // combined.estimate.energies.size)
    return [beta[start : start + at_once] for start in range(0, beta.size, at_once)]


def _moments(combined: DensityOfStates, beta: Array) -> Moments:
    return Moments(combined.estimate.canonical(beta), combined.description.boltzmann_constant)


def values(combined: DensityOfStates, quantity: Quantity, beta: Array) -> Array:
    """Values only, shape (T,)."""
    return np.concatenate([quantity.value(_moments(combined, piece)) for piece in _pieces(combined, beta)])


def evaluate(combined: DensityOfStates, quantities: Sequence[Quantity], beta: Array) -> list[Evaluation]:
    """Values, block sums, variances and reach of several quantities at the same inverse temperatures."""
    gathered: list[list[tuple[Array, list[Array], Array, Array, Array]]] = [[] for _ in quantities]
    for piece in _pieces(combined, beta):
        moments = _moments(combined, piece)
        size = moments.canonical.effective_sample_size()
        ends = end_mass(moments.canonical)
        for place, quantity in enumerate(quantities):
            influences = influence(quantity, moments)
            gathered[place].append(
                (
                    quantity.value(moments),
                    block_sums(combined.estimate, influences),
                    size,
                    ends,
                    carriers(moments.canonical, influences),
                )
            )
    evaluations = []
    for quantity, pieces in zip(quantities, gathered, strict=True):
        blocks = [
            np.concatenate([piece[1][i] for piece in pieces], axis=1) for i in range(len(combined.runs))
        ]
        ends = np.concatenate([piece[3] for piece in pieces], axis=1)
        carrying = np.concatenate([piece[4] for piece in pieces])
        evaluations.append(
            Evaluation(
                quantity=quantity,
                beta=beta,
                value=np.concatenate([piece[0] for piece in pieces]),
                blocks=blocks,
                variance=variance(blocks),
                effective_sample_size=np.concatenate([piece[2] for piece in pieces]),
                end_mass=ends,
                carriers=carrying,
                within_reach=supported(quantity, ends, carrying),
            )
        )
    return evaluations
