"""Where a run starts to be usable.

The start that leaves the largest number of independent samples: J. D. Chodera, J. Chem. Theory Comput. 12, 1799 (2016)
(from memory), over logarithmically spaced candidates.  That start alone leaves a bias of up to one standard error, so
twice as much is discarded.

A second rule, which knows nothing of correlation, stands beside it as a witness: the start after which the mean has the
smallest marginal standard error, K. P. White, Simulation 69, 323 (1997) (from memory).  It decides nothing.

Shape letters: N entries of the (thinned) series, S starts.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from reweight.series.correlation import is_constant, statistical_inefficiency, window_passes

__all__ = ["independent_samples", "least_error_start", "start_difference", "transient_length"]

CANDIDATES = 60
FEWEST_LEFT = 20
LAGS = 128
QUIET = 1e-6  # of the whole variance: too little to be told by differences of sums
OUTLIER_RANGE = 10  # interquartile ranges of the second half
BATCH = 5  # entries averaged before the second rule looks at them, as is usual for it


def transient_length(series: NDArray[np.float64]) -> int:
    """Entries to discard from the start of a series.

    Parameters
    ----------
    series : numpy.ndarray, shape (N,)

    Returns
    -------
    int
        At most three quarters of the series; 0 for a constant one.
    """
    count = series.size
    if count < 2 * FEWEST_LEFT:
        return 0
    wild, series = _clipped(series)
    largest = count - FEWEST_LEFT
    starts = np.unique(np.concatenate([[0], np.geomspace(1, largest, CANDIDATES).astype(int)]))
    best = int(starts[int(np.argmax(independent_samples(series, starts)))])
    return min(max(wild, 2 * best), 3 * count // 4)


def _clipped(series: NDArray[np.float64]) -> tuple[int, NDArray[np.float64]]:
    """Wild entries at the very start, and the series with outliers drawn in.

    One wild first sample would otherwise hide the correlation, and the scatter, of all the others.
    """
    low, median, high = np.percentile(series[series.size // 2 :], [25, 50, 75])
    reach = OUTLIER_RANGE * (high - low)
    if reach == 0:
        return 0, series
    outside = np.abs(series - median) > reach
    return int(np.argmin(outside)), np.clip(series, median - reach, median + reach)


def least_error_start(series: NDArray[np.float64]) -> int:
    """Entries to discard so that ``sum (x - mean)**2 / n**2`` of the n left, in batches, is smallest.

    Parameters
    ----------
    series : numpy.ndarray, shape (N,)

    Returns
    -------
    int
        At most half of the series: later minima are artefacts of the few entries left.
    """
    count = series.size // BATCH
    if count < 2 * FEWEST_LEFT // BATCH:
        return 0
    wild, series = _clipped(series)
    batches = series[: count * BATCH].reshape(count, BATCH).mean(axis=1)
    centred = (batches - batches[count // 2 :].mean())[::-1]
    left = np.arange(1, count + 1)
    squares = np.cumsum(centred**2) - np.cumsum(centred) ** 2 / left
    statistic = (np.maximum(squares, 0) / left**2)[::-1]
    return max(wild, BATCH * int(np.argmin(statistic[: count // 2 + 1])))


def start_difference(series: NDArray[np.float64], one: int, other: int, group: int, within: float) -> float:
    """Shift of the mean between two starts, in standard errors of the mean after the later one.

    Parameters
    ----------
    series : numpy.ndarray, shape (N,)
        Means over groups of samples.
    one, other : int
        Entries left out.
    group : int
        Samples a group.
    within : float
        Mean variance inside the groups.
    """
    early, late = series[min(one, other) :], series[max(one, other) :]
    if early.size == late.size or late.size < FEWEST_LEFT:
        return 0.0
    inefficiency = statistical_inefficiency(late, group=group, within_variance=within)
    if inefficiency.constant:
        return 0.0 if is_constant(float(early.min()), float(early.max())) else float("inf")
    error = np.sqrt((late.var() + within) * inefficiency.value / (late.size * group))
    return float(abs(early.mean() - late.mean()) / error)


def independent_samples(series: NDArray[np.float64], starts: NDArray[np.int64]) -> NDArray[np.float64]:
    """Independent samples in what follows each start, by :func:`statistical_inefficiency`; 1 if it is constant.

    The lagged products of the whole series are summed once for all starts, lag by lag, until Wolff's window closes;
    what is correlated for longer than that pays is transformed start by start.

    Parameters
    ----------
    series : numpy.ndarray, shape (N,)
    starts : numpy.ndarray, shape (S,)
        Ascending; at least four entries follow the last.
    """
    centred = series - series.mean()
    entries = (series.size - starts).astype(float)
    totals = np.append(np.cumsum(centred[::-1])[::-1], 0.0)  # from each entry to the end
    means = totals[starts] / entries

    def covariance(lag: int, live: NDArray[np.intp]) -> NDArray[np.float64]:
        here, count, mean = starts[live], entries[live], means[live]
        products = centred[: series.size - lag] * centred[lag:]
        summed = np.add.reduceat(products, here)[::-1].cumsum()[::-1]
        ends = totals[here] - totals[series.size - lag] + totals[here + lag]  # both factors' sums
        return np.asarray((summed - mean * ends + (count - lag) * mean**2) / count)

    live = np.arange(starts.size)
    variance = covariance(0, live)
    independent = np.ones(starts.size)
    lowest, highest = (extreme.accumulate(series[::-1])[::-1][starts] for extreme in (np.minimum, np.maximum))
    live = live[[not is_constant(*ends) for ends in zip(lowest, highest, strict=True)]]
    quiet = variance[live] < QUIET * variance[0]
    late, live = live[quiet], live[~quiet]
    tau = np.full(starts.size, 0.5)
    for lag in range(1, LAGS + 1):
        if live.size == 0:
            break
        tau[live] += covariance(lag, live) / variance[live]
        count = entries[live]
        closed = window_passes(tau[live], lag, count) | (lag >= count // 2)
        done, count = live[closed], count[closed]
        inefficiency = 2 * tau[done] * (1 + (2 * lag + 1) / count)
        independent[done] = count / np.clip(inefficiency, 1.0, count)
        live = live[~closed]
    for i in np.concatenate([late, live]):
        independent[i] = entries[i] / statistical_inefficiency(series[starts[i] :]).value
    return independent
