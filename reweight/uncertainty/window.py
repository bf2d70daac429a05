r"""Variance of an answer from its block sums, with an automatic window for what correlation is left between blocks.

For each run, ``gamma(l) = B / (B - l) sum_b J_b J_{b+l}`` is summed up to the first lag L that satisfies the condition of
U. Wolff, Comput. Phys. Commun. 156, 143 (2004) (from memory), at most a quarter of the blocks; then
``v = (gamma(0) + 2 sum gamma(l)) (1 + (2 L + 1) / B)`` and the variance is the sum over the runs.  Effective degrees of
freedom: ``(sum v)**2 / sum v**2 (2 L + 1) / B``.  Every answer gets its own window in every run.

Shape letters: K runs, B blocks of a run, T answers.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reweight.series.correlation import STRETCH

__all__ = ["Variance", "correlation", "variance"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Variance:
    """Variances of answers and where they come from.

    Attributes
    ----------
    by_run : numpy.ndarray, shape (K, T)
        Each run's part.
    windows : numpy.ndarray, shape (K, T)
        Lags summed, in blocks.
    degrees_of_freedom : numpy.ndarray, shape (T,)
    """

    by_run: Array
    windows: NDArray[np.int64]
    degrees_of_freedom: Array

    @property
    def total(self) -> Array:
        """Variance, shape (T,)."""
        return np.asarray(self.by_run.sum(axis=0))

    @property
    def standard_error(self) -> Array:
        """One standard deviation, shape (T,)."""
        return np.sqrt(self.total)

    @property
    def shares(self) -> Array:
        """Each run's share of the variance, shape (K, T); zero where the variance is."""
        total = self.total
        return np.asarray(np.divide(self.by_run, total, out=np.zeros_like(self.by_run), where=total > 0))


def variance(blocks: Sequence[Array], *, coupled: bool = False) -> Variance:
    """Variance of each answer from the centred block sums of every run.

    Parameters
    ----------
    blocks : sequence of numpy.ndarray, shape (B, T)
        One a run; B may differ.
    coupled : bool
        Runs that moved together, as in replica exchange: their blocks cover the same times, and are added before anything
        is squared.  A run's part of the variance is then its covariance with the sum, and may be negative.
    """
    if coupled:
        return _coupled_variance(blocks)
    parts = [_run_variance(block) for block in blocks]
    by_run = np.array([part for part, _ in parts])
    windows = np.array([window for _, window in parts])
    lengths = np.array([block.shape[0] for block in blocks])
    spread = (by_run**2 * (2 * windows + 1) / lengths[:, None]).sum(axis=0)
    total = by_run.sum(axis=0)
    freedom = np.divide(total**2, spread, out=np.full(total.shape, np.inf), where=spread > 0)
    return Variance(by_run=by_run, windows=windows, degrees_of_freedom=freedom)


def _coupled_variance(blocks: Sequence[Array]) -> Variance:
    together = np.sum(blocks, axis=0)
    whole = variance([together])
    parts = np.array([np.einsum("bt,bt->t", block, together) for block in blocks])
    square = parts.sum(axis=0)
    shares = np.divide(parts, square, out=np.zeros_like(parts), where=square > 0)
    return Variance(
        by_run=shares * whole.total,
        windows=np.repeat(whole.windows, len(blocks), axis=0),
        degrees_of_freedom=whole.degrees_of_freedom,
    )


def _run_variance(blocks: Array) -> tuple[Array, NDArray[np.int64]]:
    count, answers = blocks.shape
    zero_lag = np.einsum("bt,bt->t", blocks, blocks)
    longest = max(1, count // 4)
    window = np.full(answers, longest)
    kept = np.zeros(answers)  # sum of gamma(l) up to each answer's own window
    running = np.zeros(answers)
    open_ = zero_lag > 0
    window[~open_] = 1
    for lag in range(1, longest + 1):
        if not open_.any():
            break
        running += count / (count - lag) * np.einsum("bt,bt->t", blocks[:-lag], blocks[lag:])
        tau = np.maximum(
            0.5 + np.divide(running, zero_lag, out=np.zeros(answers), where=zero_lag > 0), 0.5 + 1e-9
        )
        stretch = STRETCH / np.log((2 * tau + 1) / (2 * tau - 1))
        kept = np.where(open_, running, kept)
        closes = open_ & (np.exp(-lag / stretch) - stretch / np.sqrt(lag * count) < 0)
        window[closes] = lag
        open_ &= ~closes
    total = (zero_lag + 2 * kept) * (1 + (2 * window + 1) / count)
    return np.where(total > 0, total, zero_lag), window


FEWEST_SUMMED = 8  # blocks in the overlapping sums that correlate answers


def correlation(blocks: Sequence[Array], windows: NDArray[np.int64], *, coupled: bool = False) -> Array:
    """Correlation matrix of the errors of several answers, positive by construction, shape (T, T).

    Rectangular windows differ from answer to answer and need not give a positive matrix; overlapping sums of
    ``w = max(8, 2 L + 1)`` blocks do, with the longest window L of the run.  Standard errors come from :func:`variance`.

    Parameters
    ----------
    blocks : sequence of numpy.ndarray, shape (B, T)
    windows : numpy.ndarray, shape (K, T)
    coupled : bool
        As in :func:`variance`.
    """
    if coupled:
        blocks, windows = [np.sum(blocks, axis=0)], windows[:1]
    answers = blocks[0].shape[1]
    total = np.zeros((answers, answers))
    for block, window in zip(blocks, windows, strict=True):
        count = block.shape[0]
        width = min(max(FEWEST_SUMMED, 2 * int(window.max()) + 1), max(1, count // 2))
        cumulative = np.concatenate([np.zeros((1, answers)), np.cumsum(block, axis=0)])
        sums = cumulative[width:] - cumulative[:-width]
        total += count / width * (sums.T @ sums / sums.shape[0]) / (1 - width / count)
    scale = np.sqrt(np.diag(total))
    scale[scale == 0] = 1.0
    return np.asarray(total / np.outer(scale, scale))
