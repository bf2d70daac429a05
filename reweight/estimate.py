r"""The multistate estimate as arrays: one density of states from all runs, and canonical averages over it.

Array layer: NumPy and SciPy only; knows nothing of xarray, files or units.

A sample of run i counts ``1 / g_i`` (its statistical inefficiency) everywhere, so that weights are in units of
independent samples.  With ``D(E)`` from :mod:`reweight.multistate`::

    Z(beta) = sum_q W_q exp(-beta E_q) / D(E_q),       r_q = exp(-beta E_q) / (D(E_q) Z(beta))
    <A>     = sum_q W^A_q r_q

Shape letters: K runs, C tallied columns, B leaves of a run, Q nodes, q nodes one run has visited, T temperatures.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from reweight.multistate import (
    Solution,
    cut_sharing,
    hessian,
    reference_run,
    solve_reduced,
)
from reweight.products import product
from reweight.tally.assemble import Assembly, Matrix
from reweight.tally.nodes import Column

__all__ = ["Canonical", "Estimate", "RunLeaves"]

Array = NDArray[np.float64]
Places = slice | NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class RunLeaves:
    """One run's leaves after its transient.

    Attributes
    ----------
    index : slice, or numpy.ndarray of shape (q,)
        Places of the run's nodes among all nodes: a slice where they follow one another, as they usually do.
    place : slice, or numpy.ndarray of shape (M,)
        Places of its keys among all keys.
    sums : tuple of arrays, length C, shape (B, q)
        Sums on keys, in samples: shared with the assembly, since a copy would be as large as everything else together.
    weighting : float
        Samples per unit of weight.
    counts : numpy.ndarray, shape (B,)
        Weight of the samples in each leaf.
    total : numpy.ndarray, shape (C, q)
        Weight on each node, all leaves together.
    """

    index: Places
    place: Places
    sums: tuple[Matrix, ...]
    weighting: float
    counts: Array
    total: Array


@dataclass(frozen=True, eq=False)
class Estimate:
    """Combined runs on their nodes.

    Attributes
    ----------
    assembly : Assembly
    columns : tuple of Column, length C
    beta : numpy.ndarray, shape (K,)
    runs : tuple of RunLeaves, length K
    counts : numpy.ndarray, shape (K,)
        Weight of each run.
    weights : numpy.ndarray, shape (C, Q)
    independent : numpy.ndarray, shape (Q,)
        Plain weights in independent samples; equal to ``weights[0]`` unless all samples were weighted alike.
    independent_shares : numpy.ndarray, shape (K,)
        Independent samples per unit of each run's weight; ones unless all samples were weighted alike.
    solution : Solution
    """

    assembly: Assembly
    columns: tuple[Column, ...]
    beta: Array
    runs: tuple[RunLeaves, ...]
    counts: Array
    weights: Array
    independent: Array
    independent_shares: Array
    solution: Solution

    @classmethod
    def solved(
        cls,
        assembly: Assembly,
        columns: Sequence[Column],
        beta: Array,
        first_leaves: Sequence[int],
        inefficiencies: Array,
        weighting: Array,
        solver: Callable[[Array, Array, Array, Array], Solution],
    ) -> Estimate:
        """Weight the runs' leaves and solve for the free energies.

        Parameters
        ----------
        first_leaves : sequence of int, length K
            First leaf after the transient.
        inefficiencies : numpy.ndarray, shape (K,)
            Samples per independent sample, as well as they are known.
        weighting : numpy.ndarray, shape (K,)
            What a sample's weight is divided by: the inefficiencies, or ones.
        solver : callable
            Solution from the weights (K, Q) of each run, their sums (K,), inverse temperatures and node energies.
        """
        keys, order = assembly.keys.size, assembly.order
        weights = np.zeros((len(columns), keys, order))
        per_run = np.zeros((beta.size, keys, order))
        shares = weighting / inefficiencies
        runs = []
        for i, run in enumerate(assembly.runs):
            kept = tuple(column[first_leaves[i] :] for column in run.sums)
            counts = run.rows[first_leaves[i] :] / weighting[i]
            summed = np.array([np.asarray(column.sum(axis=0)).ravel() for column in kept])
            total = assembly.node_weights(summed) / weighting[i]
            place = _unbroken(run.place)
            index = _unbroken(assembly.nodes_at(run.place))
            runs.append(RunLeaves(index, place, kept, float(weighting[i]), counts, total))
            weights[:, place] += total.reshape(len(columns), -1, order)
            per_run[i, place] = total[0].reshape(-1, order)
        counts = np.array([run.counts.sum() for run in runs])
        by_run = per_run.reshape(beta.size, -1)
        solution = solver(by_run, counts, beta, assembly.energies)
        return cls(
            assembly=assembly,
            columns=tuple(columns),
            beta=beta,
            runs=tuple(runs),
            counts=counts,
            weights=weights.reshape(len(columns), -1),
            independent=product(shares[None, :], by_run)[0],
            independent_shares=shares,
            solution=solution,
        )

    @property
    def energies(self) -> Array:
        """Node energies relative to the reference, shape (Q,)."""
        return self.assembly.energies

    @cached_property
    def _sampled(self) -> NDArray[np.bool_]:
        """Nodes at whose energies there are rows in use, shape (Q,)."""
        order = self.assembly.order
        return np.repeat((self.weights[0].reshape(-1, order) != 0).any(axis=1), order)

    @cached_property
    def hessian(self) -> Array:
        """Information matrix of the free energies, shape (K, K)."""
        return hessian(self.weights[0], self.solution.probabilities)

    @cached_property
    def sharing(self) -> Array:
        """Independent samples' worth of sharing across each cut between neighbouring temperatures, shape (K - 1,)."""
        return cut_sharing(self.independent, self.solution.probabilities, self.beta)

    def spread(self, right: Array) -> Array:
        """Solve the information matrix for right-hand sides of shape (K, R); the reference run gets zero."""
        return solve_reduced(self.hessian, right, reference_run(self.counts))

    def column(self, column: Column) -> Array:
        """Node weights of a tallied column, shape (Q,)."""
        return np.asarray(self.weights[self.columns.index(column)])

    def canonical(self, beta: Array) -> Canonical:
        """Canonical weights at inverse temperatures, shape (T,)."""
        exponent = -self.solution.log_denominator[:, None] - self.energies[:, None] * beta
        exponent[~self._sampled] = -np.inf  # far energies of a transient must not set the scale
        highest = exponent.max(axis=0)
        weights = np.exp(exponent - highest)
        total = self.weights[0] @ weights
        weights /= total
        return Canonical(
            estimate=self,
            beta=beta,
            weights=weights,
            log_partition=np.log(total) + highest,
            mean_energy=(self.weights[0] * self.energies) @ weights,
        )


def _unbroken(places: NDArray[np.int64]) -> Places:
    """Ascending places as a slice if none is left out: what is taken from an array then needs no copy."""
    if places.size and places[-1] - places[0] == places.size - 1:
        return slice(int(places[0]), int(places[-1]) + 1)
    return places


@dataclass(frozen=True, eq=False)
class Canonical:
    """Canonical weights of the nodes at several temperatures.

    Attributes
    ----------
    estimate : Estimate
    beta : numpy.ndarray, shape (T,)
    weights : numpy.ndarray, shape (Q, T)
        ``r``: factor of a node's weight in an average.
    log_partition : numpy.ndarray, shape (T,)
        ``ln Z`` for energies relative to the reference, up to the common constant of the free energies.
    mean_energy : numpy.ndarray, shape (T,)
        Relative to the reference.
    """

    estimate: Estimate
    beta: Array
    weights: Array
    log_partition: Array
    mean_energy: Array

    @cached_property
    def deviation(self) -> Array:
        """Energies of the nodes relative to the mean at each temperature, shape (Q, T)."""
        return np.asarray(self.estimate.energies[:, None] - self.mean_energy)

    @cached_property
    def _powers(self) -> list[Array]:
        return [self.weights]

    def weighted_power(self, power: int) -> Array:
        """``r (E - <E>)**power`` at the nodes, shape (Q, T)."""
        while len(self._powers) <= power:
            self._powers.append(self._powers[-1] * self.deviation)
        return self._powers[power]

    @cached_property
    def _squares(self) -> Array:
        return np.asarray(self.weights**2)

    def effective_sample_size(self) -> Array:
        """``1 / sum W r**2`` in independent samples, shape (T,) (Kish 1965, with the weights of the mixture)."""
        return np.asarray(1 / (self.estimate.weights[0] @ self._squares))

    @cached_property
    def carriers(self) -> Array:
        """``(sum W r**2)**2 / sum W r**4``: independent samples that carry the weights' variance, shape (T,)."""
        second = self.estimate.independent @ self._squares
        fourth = self.estimate.independent @ self._squares**2
        return np.divide(second**2, fourth, out=np.zeros_like(second), where=fourth > 0)
