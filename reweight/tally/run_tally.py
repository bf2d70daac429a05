"""The tally of one run, filled in one pass and continued at will.

Storage: as long as the leaves would take more numbers than the rows, the rows themselves are kept.

Shape letters: N rows, A observables, C tallied columns, B leaves, M keys, p order, R rows kept.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from reweight.tally.leaves import (
    MOST_LEAVES,
    LeafSums,
    ScatteredSums,
    at_most_keys,
    join_leaves,
    leaf_length,
    leaf_sums,
    scattered_sums,
    without_empty_keys,
)
from reweight.tally.levels import are_levels, pour
from reweight.tally.nodes import Column, Nodes
from reweight.tally.thinned import Thinned, thin
from reweight.tally.tree import pairwise

__all__ = ["RunTally"]

BATCH = 2**16
GROUPS_A_LEAF = 128

# Leaves without gaps are faster, but may not take more than so many numbers for each kept one, or so many in all.
DENSEST = 32
FEW_NUMBERS = 2**20


class RunTally:
    """Tally of one run, filled in one pass.

    Parameters
    ----------
    nodes : Nodes
    columns : sequence of Column
        The first is the plain count.
    observables : sequence of str
        Names of the columns of the rows after the energy.

    Notes
    -----
    Holds the first rows until leaves take fewer numbers than rows do; from then on leaves, and the rows since the
    last complete batch.
    """

    def __init__(self, nodes: Nodes, columns: Sequence[Column], observables: Sequence[str]) -> None:
        self.nodes = nodes
        self.columns = tuple(columns)
        self.observables = tuple(observables)
        self.row_count = 0
        self.thinned: Thinned | None = None
        self._batch = BATCH
        self._parts: list[LeafSums] = []
        self._waiting: list[NDArray[np.float64]] = []
        self._waiting_count = 0

    @classmethod
    def restored(
        cls,
        nodes: Nodes,
        columns: Sequence[Column],
        observables: Sequence[str],
        *,
        tail: NDArray[np.float64],
        leaves: LeafSums | None = None,
        thinned: Thinned | None = None,
    ) -> RunTally:
        """Put a tally together again as it was saved; more rows can be added."""
        tally = cls(nodes, columns, observables)
        tally._parts, tally.thinned = [leaves] if leaves else [], thinned
        tally._waiting, tally._waiting_count = [tail], tail.shape[0]
        tally.row_count = tail.shape[0] + (int(leaves.rows.sum()) if leaves else 0)
        if leaves is not None:
            tally._batch = max(BATCH, int(leaves.rows[0]))
        else:
            while tally._batch <= tally._waiting_count:  # it was found too wide for leaves before
                tally._batch *= 2
        return tally

    def copied(self, nodes: Nodes) -> RunTally:
        """Copy to which rows can be added; nodes collect like those that this tally began with."""
        nodes = Nodes(nodes.width, discrete=self.nodes.discrete, spacing=nodes.spacing)  # poured stays poured
        thinned = None if self.thinned is None else replace(self.thinned)
        return self.restored(
            nodes, self.columns, self.observables, tail=self.tail, leaves=self.leaves, thinned=thinned
        )

    @property
    def leaves(self) -> LeafSums | None:
        """Complete leaves; none as long as rows are kept."""
        if len(self._parts) > 1:
            self._parts = [join_leaves(self._parts)]
        return self._parts[0] if self._parts else None

    @property
    def tail(self) -> NDArray[np.float64]:
        """Rows kept as they are, shape (R, 1 + A)."""
        if len(self._waiting) != 1:
            width = 1 + len(self.observables)
            self._waiting = [np.concatenate(self._waiting) if self._waiting else np.empty((0, width))]
        return self._waiting[0]

    def add(self, rows: NDArray[np.float64]) -> None:
        """Take the next rows, shape (R, 1 + A): energy, then the observables; every number finite."""
        if self.nodes.spacing is not None:
            rows = rows.copy()
            rows[:, 0] = self.nodes.spacing.snap(rows[:, 0])
        self.row_count += rows.shape[0]
        self._waiting.append(rows)
        self._waiting_count += rows.shape[0]
        while self._waiting_count >= self._batch:
            waiting = self.tail
            used = self._absorb(waiting[: self._batch])
            rest = waiting[used:]
            self._waiting, self._waiting_count = [rest], rest.shape[0]

    def _absorb(self, rows: NDArray[np.float64]) -> int:
        """Turn one batch into leaves; return how many rows were used (none if they are better kept)."""
        if not self._parts and not self._fits(rows, 64, rows.size):
            self._batch *= 2
            return 0
        length = int(self._parts[0].rows[0]) if self._parts else self._batch // 64
        new = leaf_sums(rows, length, self.nodes, self.columns, self.observables)
        if not self._parts:
            self.thinned = thin(rows, length // GROUPS_A_LEAF, rows[0])
        else:
            assert self.thinned is not None
            more = thin(rows, self.thinned.group, self.thinned.origin)
            self.thinned.sums = np.concatenate([self.thinned.sums, more.sums])
            self.thinned.squares = np.concatenate([self.thinned.squares, more.squares])
        self._parts.append(new)
        if sum(part.rows.size for part in self._parts) == MOST_LEAVES:
            leaves = join_leaves(self._parts)
            length *= 2
            self._parts = [LeafSums(leaves.keys, pairwise(leaves.sums, 1, 1), leaves.rows[::2] * 2)]
            self.thinned.group *= 2
            self.thinned.sums = pairwise(self.thinned.sums, 0, 1)
            self.thinned.squares = pairwise(self.thinned.squares, 0, 1)
        self._batch = max(BATCH, length)
        if self.nodes.discrete:
            self._leave_levels()
        return int(rows.shape[0])

    def _fits(self, rows: NDArray[np.float64], leaves: int, most: int) -> bool:
        """Whether so many leaves without gaps take at most so many numbers."""
        numbers_a_key = leaves * len(self.columns) * self.nodes.order
        return at_most_keys(rows[:, 0], self.nodes, most // numbers_a_key) * numbers_a_key <= most

    def _leave_levels(self) -> None:
        """Pour levels into panels if they are too many for the rows in the leaves."""
        leaves = self.leaves
        assert leaves is not None
        # Not row_count: how many rows wait depends on the chunks.
        if are_levels(leaves.keys.size, int(leaves.rows.sum())):
            return
        keys, sums = pour(np.asarray(leaves.keys, float), leaves.sums, self.nodes.width)
        self._parts = [LeafSums(keys=keys, sums=sums, rows=leaves.rows)]
        self.nodes = Nodes(self.nodes.width, discrete=False, spacing=self.nodes.spacing)

    def complete(self) -> tuple[LeafSums | ScatteredSums, Thinned]:
        """All leaves, the unfinished last one included, and the thinned series of all rows."""
        tail = self.tail
        if self.leaves is None:
            length = leaf_length(tail.shape[0])
            most = max(DENSEST * tail.size, FEW_NUMBERS)
            wide = not self.nodes.discrete and not self._fits(tail, MOST_LEAVES, most)
            thinned = thin(tail, max(1, length // GROUPS_A_LEAF), tail[0])
            if wide:
                return scattered_sums(tail, length, self.nodes, self.columns, self.observables), thinned
            leaves = leaf_sums(tail, length, self.nodes, self.columns, self.observables)
            return without_empty_keys(leaves), thinned
        assert self.thinned is not None
        if tail.shape[0] == 0:
            return without_empty_keys(self.leaves), self.thinned
        length = int(self.leaves.rows[0])
        rest = leaf_sums(tail, length, self.nodes, self.columns, self.observables)
        more = thin(tail, self.thinned.group, self.thinned.origin)
        thinned = Thinned(
            group=self.thinned.group,
            origin=self.thinned.origin,
            sums=np.concatenate([self.thinned.sums, more.sums]),
            squares=np.concatenate([self.thinned.squares, more.squares]),
        )
        return without_empty_keys(join_leaves([*self._parts, rest])), thinned
