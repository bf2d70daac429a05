"""Where a run starts to be usable.

The start that leaves the largest number of independent samples: J. D. Chodera, J. Chem. Theory Comput. 12, 1799 (2016)
(from memory), over logarithmically spaced candidates.  That start alone leaves a bias of up to one standard error, so
twice as much is discarded.

Shape letters: N entries of the (thinned) series, S starts.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from reweight.series.correlation import is_constant, statistical_inefficiency, window_passes

__all__ = ["independent_samples", "transient_length"]

CANDIDATES = 60
FEWEST_LEFT = 20
LAGS = 128
QUIET = 1e-6  # of the whole variance: too little to be told by differences of sums
OUTLIER_RANGE = 10  # interquartile ranges of the second half


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
    half = series[count // 2 :]
    low, median, high = np.percentile(half, [25, 50, 75])
    reach = OUTLIER_RANGE * (high - low)
    wild = 0
    if reach > 0:  # one wild first sample would otherwise hide the correlation of all the others
        outside = np.abs(series - median) > reach
        wild = int(np.argmin(outside))  # those at the very start are part of the transient, however few
        series = np.clip(series, median - reach, median + reach)
    largest = count - FEWEST_LEFT
    starts = np.unique(np.concatenate([[0], np.geomspace(1, largest, CANDIDATES).astype(int)]))
    best = int(starts[int(np.argmax(independent_samples(series, starts)))])
    return min(max(wild, 2 * best), 3 * count // 4)


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
