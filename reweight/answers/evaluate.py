"""Quantities at inverse temperatures, with everything needed to judge them.

Shape letters: K runs, B leaves of a run, Q nodes, T temperatures.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reweight.answers.reach import carriers, end_mass, supported
from reweight.density_of_states import DensityOfStates
from reweight.quantities.moments import Moments
from reweight.quantities.quantity import Quantity
from reweight.uncertainty.influence import block_sums, influence
from reweight.uncertainty.window import Variance, variance

__all__ = ["Evaluation", "evaluate", "moments_at", "reference_beta", "values"]

Array = NDArray[np.float64]

NODES_AT_ONCE = 2**18  # nodes times temperatures held in memory at a time; few enough for one thread


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


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Piece:
    """One quantity at as many temperatures as are held in memory at a time."""

    value: Array
    blocks: list[Array]
    effective_sample_size: Array
    end_mass: Array
    carriers: Array


def moments_at(combined: DensityOfStates, beta: Array, numbers: int = NODES_AT_ONCE) -> Iterator[Moments]:
    """Moments at inverse temperatures, with at most so many numbers at a time."""
    at_once = max(1, numbers // combined.estimate.energies.size)
    for piece in (beta[start : start + at_once] for start in range(0, beta.size, at_once)):
        yield Moments(combined.estimate.canonical(piece), combined.description.boltzmann_constant)


def values(combined: DensityOfStates, quantity: Quantity, beta: Array) -> Array:
    """Values only, shape (T,)."""
    return np.concatenate([quantity.value(moments) for moments in moments_at(combined, beta)])


def evaluate(
    combined: DensityOfStates, quantities: Sequence[Quantity], beta: Array, *, reference: float | None = None
) -> list[Evaluation]:
    """Values, block sums, variances and reach of several quantities at the same inverse temperatures.

    Parameters
    ----------
    reference : float, optional
        Inverse temperature from which quantities that are only determined up to a constant are counted; by default
        that of the coldest run.
    """
    needs_reference = any(quantity.from_reference for quantity in quantities)
    if needs_reference:
        beta = np.append(beta, reference_beta(combined, reference))
    gathered: list[list[Piece]] = [[] for _ in quantities]
    for moments in moments_at(combined, beta):
        size = moments.canonical.effective_sample_size()
        ends = end_mass(moments.canonical)
        for place, quantity in enumerate(quantities):
            influences = influence(quantity, moments)
            gathered[place].append(
                Piece(
                    value=quantity.value(moments),
                    blocks=block_sums(combined.estimate, influences),
                    effective_sample_size=size,
                    end_mass=ends,
                    carriers=carriers(moments.canonical, influences),
                )
            )
    return [
        _evaluation(quantity, beta, pieces, needs_reference, coupled=combined.description.exchange)
        for quantity, pieces in zip(quantities, gathered, strict=True)
    ]


def reference_beta(combined: DensityOfStates, reference: float | None) -> float:
    """Inverse temperature of reference: the one asked, or that of the coldest run."""
    return float(combined.estimate.beta.max()) if reference is None else reference


def _evaluation(
    quantity: Quantity, beta: Array, pieces: list[Piece], needs_reference: bool, *, coupled: bool
) -> Evaluation:
    """Join the pieces; the last inverse temperature is the reference, if any quantity needs one."""
    value = np.concatenate([piece.value for piece in pieces])
    blocks = [
        np.concatenate(parts, axis=1) for parts in zip(*(piece.blocks for piece in pieces), strict=True)
    ]
    ends = np.concatenate([piece.end_mass for piece in pieces], axis=1)
    carrying = np.concatenate([piece.carriers for piece in pieces])
    size = np.concatenate([piece.effective_sample_size for piece in pieces])
    within = supported(quantity, ends, carrying)
    if needs_reference:
        if quantity.from_reference:
            # Exactly zero at the reference itself: products of matrices leave a last bit that depends on the column.
            elsewhere = beta != beta[-1]
            value = (value - value[-1]) * elsewhere
            blocks = [(block - block[:, -1:]) * elsewhere for block in blocks]
            # A difference is supported where both of its ends are.
            ends = np.maximum(ends, ends[:, -1:])
            carrying = np.minimum(carrying, carrying[-1])
            within = within & within[-1]
        beta, value, size, within = beta[:-1], value[:-1], size[:-1], within[:-1]
        ends, carrying = ends[:, :-1], carrying[:-1]
        blocks = [block[:, :-1] for block in blocks]
    return Evaluation(
        quantity=quantity,
        beta=beta,
        value=value,
        blocks=blocks,
        variance=variance(blocks, coupled=coupled),
        effective_sample_size=size,
        end_mass=ends,
        carriers=carrying,
        within_reach=within,
    )
