"""Where a run starts to be usable.

The start that leaves the largest number of independent samples: J. D. Chodera, J. Chem. Theory Comput. 12, 1799 (2016)
(from memory), over logarithmically spaced candidates.  That start alone leaves a bias of up to one standard error, so
twice as much is discarded.

Shape letters: N entries of the (thinned) series.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from reweight.series.correlation import statistical_inefficiency

__all__ = ["transient_length"]

CANDIDATES = 60
FEWEST_LEFT = 20
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
    independent = []
    for start in starts:
        rest = series[start:]
        inefficiency = statistical_inefficiency(rest)
        independent.append(1.0 if inefficiency.constant else rest.size / inefficiency.value)
    best = int(starts[int(np.argmax(independent))])
    return min(max(wild, 2 * best), 3 * count // 4)
