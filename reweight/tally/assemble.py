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

__all__ = ["Assembly", "Matrix", "RunWeights", "assemble"]

Matrix = NDArray[np.float64] | csr_array


@dataclass(frozen=True, slots=True)
class RunWeights:
    """Samples of one run as weights on nodes, leaf by leaf.

    Attributes
    ----------
    index : numpy.ndarray, shape (q,)
        Places of the run's nodes among all nodes.
    weights : tuple of arrays, length C, shape (B, q)
        Plain counts first, then the counts weighted with each observable moment; in samples.  Sparse where a run
        visits few of its panels in each leaf.
    rows : numpy.ndarray, shape (B,)
        Rows in each leaf.
    """

    index: NDArray[np.int64]
    weights: tuple[Matrix, ...]
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
    runs : tuple of RunWeights, length K
    """

    keys: NDArray[np.int64] | NDArray[np.float64]
    energies: NDArray[np.float64]
    reference: float
    order: int
    width: float
    discrete: bool
    runs: tuple[RunWeights, ...]


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
        place = np.searchsorted(keys, part.keys)
        index = (place[:, None] * order + np.arange(order)).ravel()
        runs.append(RunWeights(index=index, weights=_node_weights(part, order, matrix), rows=part.rows))
    return Assembly(
        keys=keys,
        energies=np.asarray(energies, float),
        reference=reference,
        order=order,
        width=width,
        discrete=discrete,
        runs=tuple(runs),
    )


def _node_weights(
    part: LeafSums | ScatteredSums, order: int, matrix: NDArray[np.float64]
) -> tuple[Matrix, ...]:
    weights = part.sums @ matrix
    shape = (part.rows.size, part.keys.size * order)
    if isinstance(part, LeafSums):
        return tuple(column.reshape(shape) for column in weights)
    leaf = np.repeat(part.leaf, order)
    node = (part.place[:, None] * order + np.arange(order)).ravel()
    return tuple(csr_array((column.ravel(), (leaf, node)), shape=shape) for column in weights)


def _poured(part: LeafSums | ScatteredSums, width: float) -> LeafSums:
    assert isinstance(part, LeafSums)  # only panels are ever scattered
    keys, sums = pour(np.asarray(part.keys, float), part.sums, width)
    return LeafSums(keys=keys, sums=sums, rows=part.rows)
