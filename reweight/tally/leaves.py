r"""Leaves: a run cut into 64 to 127 stretches of equal length, tallied in one pass, with the same bits every time.

A run is tallied in leaves of ``2**k`` consecutive rows counted from its first row.  At 128 leaves neighbours are added
pairwise and k grows by one.  When a stretch of rows is turned into leaves depends on the number of rows alone, and
inside a leaf they are added in row order (by stretches of 16,384, which are then added as a tree); so chunk size,
number of workers, and whether a run is tallied in one sitting or several change no bit.

A run much wider than the narrowest of its study visits more panels than a leaf has rows; its leaves are then kept
without the gaps between the panels they visit.

Shape letters: N rows, A observables, C tallied columns (the count, then moments of observables), B leaves,
M keys (panels or levels), p order (nodes a panel; 1 for levels), P pairs of a leaf and a panel it visits.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reweight.tally.nodes import Column, Nodes
from reweight.tally.panels import check_magnitude, panel_indices, powers
from reweight.tally.tree import doublings, pairwise

__all__ = [
    "LeafSums",
    "ScatteredSums",
    "at_most_keys",
    "join_leaves",
    "leaf_length",
    "leaf_sums",
    "scattered_sums",
    "without_empty_keys",
]

MOST_LEAVES = 128
STRIDE = 2**14  # rows handled at a time: what belongs to them stays near the processor

# Panels numbered without gaps from the lowest to the highest; beyond so many, that could cost any amount of memory.
CONTIGUOUS = 4096

Locate = Callable[[slice, NDArray[np.int64]], tuple[NDArray[np.int64], NDArray[np.float64]]]


@dataclass(slots=True)
class LeafSums:
    """Sums of a run's samples, leaf by leaf.

    Attributes
    ----------
    keys : numpy.ndarray, shape (M,)
        Panel numbers (int64) or levels (float64), ascending.
    sums : numpy.ndarray, shape (C, B, p, M)
        Power sums (panels) or counts (levels), weighted with each tallied column.
    rows : numpy.ndarray, shape (B,)
        Rows in each leaf; only the last may be short.
    """

    keys: NDArray[np.int64] | NDArray[np.float64]
    sums: NDArray[np.float64]
    rows: NDArray[np.int64]


@dataclass(slots=True)
class ScatteredSums:
    """Sums of a run's samples for the panels that each leaf has visited, and no others.

    Attributes
    ----------
    keys : numpy.ndarray, shape (M,)
        Panel numbers, ascending.
    leaf, place : numpy.ndarray, shape (P,)
        Leaf of each entry, and the place of its panel among the keys.
    sums : numpy.ndarray, shape (C, P, p)
        Power sums weighted with each tallied column.
    rows : numpy.ndarray, shape (B,)
        Rows in each leaf; only the last may be short.
    """

    keys: NDArray[np.int64]
    leaf: NDArray[np.int64]
    place: NDArray[np.int64]
    sums: NDArray[np.float64]
    rows: NDArray[np.int64]


def leaf_length(rows: int) -> int:
    """Rows a leaf for a run of this length: the smallest power of two that gives fewer than 128 complete leaves."""
    length = 1
    while rows // length >= MOST_LEAVES:
        length *= 2
    return length


def _span(energies: NDArray[np.float64], width: float) -> tuple[int, int]:
    """Lowest and highest panel visited."""
    lowest, highest = float(energies.min()), float(energies.max())
    check_magnitude(lowest, highest, width)
    return math.floor(lowest / width), math.floor(highest / width)


def _placed(energies: NDArray[np.float64], nodes: Nodes) -> tuple[NDArray[Any], Locate]:
    """Keys that may be present; a function from rows and what to add to places, to places and local coordinates."""
    if nodes.discrete:
        keys = np.unique(energies)
        return keys, lambda here, offsets: (np.searchsorted(keys, energies[here]) + offsets, energies[here])
    lowest, highest = _span(energies, nodes.width)
    if highest - lowest < CONTIGUOUS:

        def locate(here: slice, offsets: NDArray[np.int64]) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
            index, coordinate = panel_indices(energies[here], nodes.width)
            index -= lowest
            index += offsets
            return index.astype(np.int64), coordinate

        return np.arange(lowest, highest + 1), locate
    index, coordinate = panel_indices(energies, nodes.width)
    keys, place = np.unique(index.astype(np.int64), return_inverse=True)
    return keys, lambda here, offsets: (place[here] + offsets, coordinate[here])


def column_values(
    rows: NDArray[np.float64], column: Column, observables: Sequence[str]
) -> NDArray[np.float64]:
    """Values of a tallied column for every row, shape (N,)."""
    values = rows[:, 1 + list(observables).index(column.observable)]
    if column.above is not None:
        return (values > column.above).astype(np.float64)
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
    """Tally rows in leaves of ``length`` (a power of two); the last leaf may be short, and keys may be empty.

    Parameters
    ----------
    rows : numpy.ndarray, shape (N, 1 + A)
        Energy (already snapped), then the observables.
    """
    count = rows.shape[0]
    keys, locate = _placed(np.ascontiguousarray(rows[:, 0]), nodes)
    weights = [None] + [np.ascontiguousarray(column_values(rows, c, observables)) for c in columns[1:]]
    leaf_count = -(-count // length)
    size, order = keys.size, nodes.order
    unit = min(length, STRIDE)
    longest = min(count, STRIDE)
    buffer = np.empty((order, longest))  # the first row is never used: no factor is faster than ones
    offsets = np.repeat(np.arange(-(-longest // unit)) * size, unit)[:longest]
    sums = np.empty((len(columns), leaf_count * (length // unit), order, size))
    sums[:, -(-count // unit) :] = 0
    for start in range(0, count, STRIDE):
        here = slice(start, min(start + STRIDE, count))
        number = here.stop - start
        place, coordinate = locate(here, offsets[:number])
        values = powers(coordinate, order, out=buffer[:, :number])
        filled = sums[:, start // unit : -(-here.stop // unit)]
        shape = (filled.shape[1], size)
        for c, weight in enumerate(weights):
            for j in range(order):
                factor = values[j] if j else None
                if weight is not None:
                    factor = weight[here] if factor is None else weight[here] * factor
                filled[c, :, j] = np.bincount(place, factor, minlength=shape[0] * size).reshape(shape)
    sums = pairwise(sums, 1, doublings(length, unit))
    return LeafSums(keys=keys, sums=sums, rows=_leaf_rows(count, length))


def without_empty_keys(leaves: LeafSums) -> LeafSums:
    """Leaves without the keys that nothing fell on, copied stretch by stretch: faster than key by key."""
    occupied = np.flatnonzero(leaves.sums[0, :, 0].sum(axis=0))
    if occupied.size == leaves.keys.size:
        return leaves
    kept = np.empty((*leaves.sums.shape[:-1], occupied.size))
    ends = np.flatnonzero(occupied[1:] - occupied[:-1] > 1) + 1
    for start, stop in itertools.pairwise([0, *ends, occupied.size]):
        first = occupied[start]
        kept[..., start:stop] = leaves.sums[..., first : first + stop - start]
    return LeafSums(keys=leaves.keys[occupied], sums=kept, rows=leaves.rows)


def _leaf_rows(count: int, length: int) -> NDArray[np.int64]:
    """Rows in each leaf, shape (B,)."""
    return np.minimum(length, count - np.arange(0, count, length))


def at_most_keys(energies: NDArray[np.float64], nodes: Nodes, enough: int) -> int:
    """Panels or levels visited; or any larger number up to ``enough``, where counting would only cost time."""
    if nodes.discrete:
        return int(np.unique(energies).size)
    lowest, highest = _span(energies, nodes.width)
    if highest - lowest < enough:
        return highest - lowest + 1
    index = np.floor(energies / nodes.width)
    if highest - lowest < CONTIGUOUS:
        return int(np.count_nonzero(np.bincount((index - lowest).astype(np.int64))))
    return int(np.unique(index).size)


def scattered_sums(
    rows: NDArray[np.float64],
    length: int,
    nodes: Nodes,
    columns: Sequence[Column],
    observables: Sequence[str],
) -> ScatteredSums:
    """Tally rows in leaves as :func:`leaf_sums` does, without the gaps; sums are taken in row order."""
    energies = np.ascontiguousarray(rows[:, 0])
    check_magnitude(float(energies.min()), float(energies.max()), nodes.width)
    index, coordinate = panel_indices(energies, nodes.width)
    keys, place = np.unique(index.astype(np.int64), return_inverse=True)
    leaf = np.arange(rows.shape[0]) // length
    pairs, pair = np.unique(leaf * keys.size + place, return_inverse=True)
    values = powers(coordinate, nodes.order)
    sums = np.empty((len(columns), pairs.size, nodes.order))
    for c, column in enumerate(columns):
        weighted = values if c == 0 else values * column_values(rows, column, observables)
        for j in range(nodes.order):
            sums[c, :, j] = np.bincount(pair, weighted[j])
    return ScatteredSums(
        keys=keys,
        leaf=pairs // keys.size,
        place=pairs % keys.size,
        sums=sums,
        rows=_leaf_rows(rows.shape[0], length),
    )


def join_leaves(parts: Sequence[LeafSums]) -> LeafSums:
    """Leaves of consecutive stretches of one run."""
    if len(parts) == 1:
        return parts[0]
    keys = np.unique(np.concatenate([part.keys for part in parts]))
    rows = np.concatenate([part.rows for part in parts])
    columns, _, order, _ = parts[0].sums.shape
    sums = np.zeros((columns, rows.size, order, keys.size))
    start = 0
    for part in parts:
        here = sums[:, start : start + part.rows.size]
        place = np.searchsorted(keys, part.keys)
        if place[-1] - place[0] < place.size:  # no gaps: the usual case, and many times faster
            here[..., place[0] : place[-1] + 1] = part.sums
        else:
            here[..., place] = part.sums
        start += part.rows.size
    return LeafSums(keys=keys, sums=sums, rows=rows)
