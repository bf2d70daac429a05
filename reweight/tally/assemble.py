"""All runs of a study on one common set of nodes.

Shape letters: K runs, C tallied columns, B leaves of a run, Q nodes of all runs, q nodes a single run has visited.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from reweight.tally.leaves import LeafSums, ScatteredSums
from reweight.tally.levels import are_levels, pour
from reweight.tally.panels import ORDER, node_energies, node_matrix
from reweight.tally.run_tally import RunTally

__all__ = ["Assembly", "Matrix", "RunSums", "assemble"]

Matrix = NDArray[np.float64] | csr_array


@dataclass(frozen=True, slots=True)
class RunSums:
    """Samples of one run as power sums on panels (or counts on levels), leaf by leaf.

    Attributes
    ----------
    place : numpy.ndarray, shape (M,)
        Places of the run's keys among all keys.
    sums : tuple of arrays, length C, shape (B, q)
        Plain counts first, then the counts weighted with each observable moment; in samples; all keys for the first
        power, then for the next.  Sparse where a run visits few of its panels in each leaf.
    rows : numpy.ndarray, shape (B,)
        Rows in each leaf.
    """

    place: NDArray[np.int64]
    sums: tuple[Matrix, ...]
    rows: NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Assembly:
    """Nodes shared by all runs.

    Attributes
    ----------
    keys : numpy.ndarray, shape (M,)
        Panel numbers or levels, ascending.
    energies : numpy.ndarray, shape (Q,)
        Node energies relative to ``reference``; Q = M times ``order``.
    reference : float
    order : int
        Nodes a key.
    width : float
        Of the panels.
    discrete : bool
        Keys are levels.
    runs : tuple of RunSums, length K
    matrix : numpy.ndarray, shape (order, order)
        From the sums on a key to the weights on its nodes.
    """

    keys: NDArray[np.int64] | NDArray[np.float64]
    energies: NDArray[np.float64]
    reference: float
    order: int
    width: float
    discrete: bool
    runs: tuple[RunSums, ...]
    matrix: NDArray[np.float64]

    def nodes_at(self, place: NDArray[np.int64]) -> NDArray[np.int64]:
        """Places of the nodes of some keys among all nodes, key by key, shape (q,)."""
        return np.asarray((place[:, None] * self.order + np.arange(self.order)).ravel())

    def node_weights(self, sums: NDArray[np.float64]) -> NDArray[np.float64]:
        """Weights on nodes, key by key, from sums in the order of a run's matrix, both of shape (C, q)."""
        by_key = sums.reshape(sums.shape[0], self.order, -1).swapaxes(1, 2)
        return np.asarray((by_key @ self.matrix).reshape(sums.shape))

    def on_sums(self, values: NDArray[np.float64]) -> NDArray[np.float64]:
        """Factors of sums, shape (order, M, T), from factors of node weights, shape (Q, T)."""
        return np.asarray(np.swapaxes(self.matrix @ values.reshape(-1, self.order, values.shape[1]), 0, 1))


def assemble(tallies: Sequence[RunTally], leaves: Sequence[LeafSums | ScatteredSums]) -> Assembly:
    """Bring completed tallies onto common nodes; levels become panels if any run has too many of them."""
    width = tallies[0].nodes.width
    keys = np.unique(np.concatenate([part.keys for part in leaves]))
    discrete = all(tally.nodes.discrete for tally in tallies) and are_levels(
        keys.size, sum(tally.row_count for tally in tallies)
    )
    if not discrete:
        leaves = [
            _poured(part, width) if tally.nodes.discrete else part
            for tally, part in zip(tallies, leaves, strict=True)
        ]
        keys = np.unique(np.concatenate([part.keys for part in leaves]))
    middle = keys[keys.size // 2]
    if discrete:
        reference, energies, order, matrix = float(middle), keys - middle, 1, np.ones((1, 1))
    else:
        reference, order, matrix = width * float(middle), ORDER, node_matrix()
        energies = node_energies(keys.astype(np.int64), width, int(middle))
    runs = []
    for part in leaves:
        runs.append(RunSums(place=np.searchsorted(keys, part.keys), sums=_by_leaf(part), rows=part.rows))
    return Assembly(
        keys=keys,
        energies=np.asarray(energies, float),
        reference=reference,
        order=order,
        width=width,
        discrete=discrete,
        runs=tuple(runs),
        matrix=matrix,
    )


def _by_leaf(part: LeafSums | ScatteredSums) -> tuple[Matrix, ...]:
    """Sums as one matrix (B, q) a tallied column."""
    if isinstance(part, LeafSums):
        return tuple(column.reshape(part.rows.size, -1) for column in part.sums)
    order, size = part.sums.shape[2], part.keys.size
    leaf = np.repeat(part.leaf, order)
    place = (part.place[:, None] + size * np.arange(order)).ravel()
    shape = (part.rows.size, size * order)
    return tuple(csr_array((column.ravel(), (leaf, place)), shape=shape) for column in part.sums)


def _poured(part: LeafSums | ScatteredSums, width: float) -> LeafSums:
    assert isinstance(part, LeafSums)  # only panels are ever scattered
    keys, sums = pour(np.asarray(part.keys, float), part.sums, width)
    return LeafSums(keys=keys, sums=sums, rows=part.rows)
