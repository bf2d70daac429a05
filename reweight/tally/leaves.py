r"""Leaves: a run cut into 64 to 127 stretches of equal length, tallied in one pass, with the same bits every time.

A run is tallied in leaves of ``2**k`` consecutive rows counted from its first row.  At 128 leaves neighbours are added
pairwise and k grows by one.  Inside a leaf, sums are taken over base blocks of 1024 rows in row order and the blocks
are added as a balanced binary tree, so that a leaf of ``2**(k+1)`` rows is bit for bit the sum of its two halves:
chunk size, number of workers, and whether a run is tallied in one sitting or several change nothing.

Beside the leaves a thinned series is kept: means over groups of ``leaf / 128`` rows, and the variance inside them.
Transient, correlation and drift are computed from it later without the raw file.

Storage: as long as the leaves would take more numbers than the rows, the rows themselves are kept.

Shape letters: N rows, A observables, C tallied columns (the count, then moments of observables), B leaves,
M keys (panels or levels), p order (nodes a panel; 1 for levels), G groups.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reweight.tally.levels import Spacing, are_levels, pour
from reweight.tally.panels import ORDER, chebyshev_values, panel_indices

__all__ = ["Column", "LeafSums", "Nodes", "RunTally", "Thinned", "leaf_length"]

MOST_LEAVES = 128
BASE = 1024
BATCH = 64 * BASE
STRIDE = 8 * BASE  # rows handled at a time: what belongs to them fits the second-level cache
GROUPS_A_LEAF = 128


@dataclass(frozen=True, slots=True)
class Column:
    """One tallied column: a power of an observable, or of its absolute value.

    Attributes
    ----------
    observable : str
        Name; empty for the plain count.
    power : int
    absolute : bool
    """

    observable: str = ""
    power: int = 0
    absolute: bool = False


COUNT = Column()

Locate = Callable[[slice], tuple[NDArray[np.int64], NDArray[np.float64]]]


@dataclass(frozen=True, slots=True)
class Nodes:
    """Where energies are collected: panels of a width, or discrete levels.

    Attributes
    ----------
    width : float
        Of the panels; kept for levels, too, which may have to be poured later.
    discrete : bool
        Levels.
    spacing : Spacing or None
        Grid to which energies are snapped first.
    """

    width: float
    discrete: bool = False
    spacing: Spacing | None = None

    @property
    def order(self) -> int:
        """Numbers kept per key and column."""
        return 1 if self.discrete else ORDER


@dataclass(slots=True)
class LeafSums:
    """Sums of a run's samples, leaf by leaf.

    Attributes
    ----------
    keys : numpy.ndarray, shape (M,)
        Panel numbers (int64) or levels (float64), ascending.
    sums : numpy.ndarray, shape (C, B, M, p)
        Chebyshev sums (panels) or counts (levels), weighted with each tallied column.
    rows : numpy.ndarray, shape (B,)
        Rows in each leaf; only the last may be short.
    """

    keys: NDArray[np.int64] | NDArray[np.float64]
    sums: NDArray[np.float64]
    rows: NDArray[np.int64]


@dataclass(slots=True)
class Thinned:
    """A run's columns as means over groups of consecutive rows.

    Attributes
    ----------
    group : int
        Rows a group.
    origin : numpy.ndarray, shape (1 + A,)
        First row of the run; sums are taken relative to it.
    sums, squares : numpy.ndarray, shape (G, 1 + A)
        Sums of the differences from the origin, and of their squares, over each complete group.
    """

    group: int
    origin: NDArray[np.float64]
    sums: NDArray[np.float64]
    squares: NDArray[np.float64]

    def means(self) -> NDArray[np.float64]:
        """Group means, shape (G, 1 + A), in the columns' own units."""
        return self.origin + self.sums / self.group

    def within_variance(self) -> NDArray[np.float64]:
        """Variance of the rows inside each group, shape (G, 1 + A)."""
        return np.maximum(self.squares / self.group - (self.sums / self.group) ** 2, 0.0)


def leaf_length(rows: int) -> int:
    """Rows a leaf for a run of this length: the smallest power of two that gives fewer than 128 complete leaves."""
    length = 1
    while rows // length >= MOST_LEAVES:
        length *= 2
    return length


def _pairwise(array: NDArray[np.float64], axis: int, times: int) -> NDArray[np.float64]:
    """Add neighbours along an axis, so many times over."""
    for _ in range(times):
        even = [slice(None)] * array.ndim
        odd = list(even)
        even[axis], odd[axis] = slice(0, None, 2), slice(1, None, 2)
        array = array[tuple(even)] + array[tuple(odd)]
    return array


def _doublings(length: int, base: int) -> int:
    return (length // base).bit_length() - 1


def _placed(energies: NDArray[np.float64], nodes: Nodes) -> tuple[NDArray[Any], Locate]:
    """Keys that may be present, and a function from a slice of the rows to their places and local coordinates."""
    if nodes.discrete:
        keys = np.unique(energies)
        return keys, lambda here: (np.searchsorted(keys, energies[here]), energies[here])
    ends, _ = panel_indices(np.array([energies.min(), energies.max()]), nodes.width)
    lowest, highest = int(ends[0]), int(ends[1])
    if (
        highest - lowest < 4096
    ):  # numbering them all costs nothing; otherwise never allocate from lowest to highest

        def locate(here: slice) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
            index, coordinate = panel_indices(energies[here], nodes.width)
            index -= lowest
            return index.astype(np.int64), coordinate

        return np.arange(lowest, highest + 1), locate
    index, coordinate = panel_indices(energies, nodes.width)
    keys, place = np.unique(index.astype(np.int64), return_inverse=True)
    return keys, lambda here: (place[here], coordinate[here])


def column_values(
    rows: NDArray[np.float64], column: Column, observables: Sequence[str]
) -> NDArray[np.float64]:
    """Values of a tallied column for every row, shape (N,)."""
    values = rows[:, 1 + list(observables).index(column.observable)]
    if column.absolute:
        values = np.abs(values)
    return values if column.power == 1 else values**column.power


def leaf_sums(
    rows: NDArray[np.float64],
    length: int,
    nodes: Nodes,
    columns: Sequence[Column],
    observables: Sequence[str],
) -> LeafSums:
    """Tally rows in leaves of ``length`` (a power of two); the last leaf may be short.

    Parameters
    ----------
    rows : numpy.ndarray, shape (N, 1 + A)
        Energy (already snapped), then the observables.
    """
    count = rows.shape[0]
    base = min(length, BASE)
    keys, locate = _placed(np.ascontiguousarray(rows[:, 0]), nodes)
    weights = [None] + [np.ascontiguousarray(column_values(rows, c, observables)) for c in columns[1:]]
    leaf_count = -(-count // length)
    size, order = keys.size, nodes.order
    unit = min(length, STRIDE)
    longest = min(count, STRIDE)
    buffer = np.empty((order, longest))
    offsets = np.arange(longest) // base * size
    sums = np.empty((len(columns), leaf_count * (length // unit), size, order))
    sums[:, -(-count // unit) :] = 0
    for start in range(0, count, STRIDE):
        here = slice(start, min(start + STRIDE, count))
        number = here.stop - here.start
        blocks = STRIDE // base if length > base else -(-number // base)
        place, coordinate = locate(here)
        bins = place + offsets[:number]
        values = chebyshev_values(coordinate, order, out=buffer[:, :number])
        total = np.empty((len(columns), order, blocks * size))
        for c, weight in enumerate(weights):
            for j in range(order):
                factor = values[j] if j else None
                if weight is not None:
                    factor = weight[here] if factor is None else weight[here] * factor
                total[c, j] = np.bincount(bins, factor, minlength=blocks * size)
        folded = _pairwise(total.reshape(len(columns), order, blocks, size), 2, _doublings(unit, base))
        filled = sums[:, start // unit : -(-here.stop // unit)]
        filled[...] = folded[:, :, : filled.shape[1]].transpose(0, 2, 3, 1)
    sums = _pairwise(sums, 1, _doublings(length, unit))
    occupied = np.flatnonzero(sums[0, :, :, 0].any(axis=0))
    lengths = np.full(leaf_count, length, dtype=np.int64)
    if count % length:
        lengths[-1] = count % length
    return LeafSums(
        keys=keys[occupied],
        sums=sums if occupied.size == size else sums.take(occupied, axis=2),
        rows=lengths,
    )


def join_leaves(parts: Sequence[LeafSums]) -> LeafSums:
    """Leaves of consecutive stretches of one run."""
    if len(parts) == 1:
        return parts[0]
    keys = np.unique(np.concatenate([part.keys for part in parts]))
    rows = np.concatenate([part.rows for part in parts])
    columns, _, _, order = parts[0].sums.shape
    sums = np.zeros((columns, rows.size, keys.size, order))
    start = 0
    for part in parts:
        here = sums[:, start : start + part.rows.size]
        if part.keys.size == keys.size:  # the usual case, and many times faster than placing them one by one
            here[...] = part.sums
        else:
            here[:, :, np.searchsorted(keys, part.keys)] = part.sums
        start += part.rows.size
    return LeafSums(keys=keys, sums=sums, rows=rows)


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
        length = int(self._parts[0].rows[0]) if self._parts else self._batch // 64
        new = leaf_sums(rows, length, self.nodes, self.columns, self.observables)
        if not self._parts:
            if new.sums.size > rows.size:
                self._batch *= 2
                return 0
            self.thinned = _thin(rows, length // GROUPS_A_LEAF, rows[0])
        else:
            assert self.thinned is not None
            more = _thin(rows, self.thinned.group, self.thinned.origin)
            self.thinned.sums = np.concatenate([self.thinned.sums, more.sums])
            self.thinned.squares = np.concatenate([self.thinned.squares, more.squares])
        self._parts.append(new)
        if sum(part.rows.size for part in self._parts) == MOST_LEAVES:
            leaves = join_leaves(self._parts)
            length *= 2
            self._parts = [LeafSums(leaves.keys, _pairwise(leaves.sums, 1, 1), leaves.rows[::2] * 2)]
            self.thinned.group *= 2
            self.thinned.sums = _pairwise(self.thinned.sums, 0, 1)
            self.thinned.squares = _pairwise(self.thinned.squares, 0, 1)
        self._batch = max(BATCH, length)
        if self.nodes.discrete:
            self._leave_levels()
        return int(rows.shape[0])

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

    def complete(self) -> tuple[LeafSums, Thinned]:
        """All leaves, the unfinished last one included, and the thinned series of all rows."""
        tail = self.tail
        if self.leaves is None:
            length = leaf_length(tail.shape[0])
            leaves = leaf_sums(tail, length, self.nodes, self.columns, self.observables)
            return leaves, _thin(tail, max(1, length // GROUPS_A_LEAF), tail[0])
        assert self.thinned is not None
        if tail.shape[0] == 0:
            return self.leaves, self.thinned
        length = int(self.leaves.rows[0])
        rest = leaf_sums(tail, length, self.nodes, self.columns, self.observables)
        more = _thin(tail, self.thinned.group, self.thinned.origin)
        thinned = Thinned(
            group=self.thinned.group,
            origin=self.thinned.origin,
            sums=np.concatenate([self.thinned.sums, more.sums]),
            squares=np.concatenate([self.thinned.squares, more.squares]),
        )
        return join_leaves([*self._parts, rest]), thinned


def _thin(rows: NDArray[np.float64], group: int, origin: NDArray[np.float64]) -> Thinned:
    """Sums over complete groups of ``group`` rows (a power of two), added as a tree."""
    complete = rows.shape[0] // group * group
    difference = rows[:complete] - origin
    times = _doublings(group, 1)
    return Thinned(
        group=group,
        origin=origin.copy(),
        sums=_pairwise(difference, 0, times),
        squares=_pairwise(difference**2, 0, times),
    )
