"""Statistical inefficiency twice: from the course of the series, and from the scatter of long blocks.

The window of the first closes as soon as the fast part of the correlation has died away, so that a slow part of small
amplitude is missed; averages over long blocks leave only the slow part.  For a series of two time scales the first is
up to twice too low where the second is not.  For one time scale both agree within their errors.

Array layer: NumPy and SciPy only.  Shape letters: N groups of samples, B blocks.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from reweight.series.correlation import Inefficiency, statistical_inefficiency

__all__ = ["FEWEST_BLOCKS", "TimeScales", "differ", "time_scales"]

FEWEST_BLOCKS = 16  # from fewer, their scatter tells less than the series


@dataclass(frozen=True, slots=True, kw_only=True)
class TimeScales:
    """Two estimates of one statistical inefficiency.

    Attributes
    ----------
    series, blocks : Inefficiency
        By the automatic window on the series, and on means over blocks; the same if there are too few blocks.
    block_count : int
    """

    series: Inefficiency
    blocks: Inefficiency
    block_count: int

    @property
    def slower(self) -> Inefficiency:
        """The estimate to be shown: that of the blocks where it is larger by two standard errors, else the series'.

        Blocks scatter by a quarter; simply the larger one would be too large on average by half of that.
        """
        excess = np.log(self.blocks.value / self.series.value)
        return self.blocks if excess > 2 * np.sqrt(self.log_ratio_variance) else self.series

    @property
    def log_ratio_variance(self) -> float:
        """Variance of the logarithm of their ratio for a series of one time scale.

        That of a window of one or two blocks, 2 (2 L + 1) / B (Wolff); the series is known much better.  The window
        found is of no use here: where chance makes it long, it makes the estimate large, too.
        """
        return 8 / self.block_count


def differ(found: Sequence[TimeScales], ratio: float, *, comparisons: int, false_alarms: float) -> bool:
    """Whether blocks tell that much more correlation than the series, and more than chance would explain.

    Parameters
    ----------
    found : sequence of TimeScales
        Of one run, or of several taken together.
    ratio : float
        Least ratio of the two estimates that matters, in the geometric mean.
    comparisons : int
        How many such questions are asked.
    false_alarms : float
        Probability that any of them is answered with yes though each series has one time scale only.
    """
    logs = [float(np.log(each.blocks.value / each.series.value)) for each in found]
    error = np.sqrt(sum(each.log_ratio_variance for each in found)) / len(found)
    return bool(np.mean(logs) > max(np.log(ratio), ndtri(1 - false_alarms / comparisons) * error))


def time_scales(
    means: NDArray[np.float64], within: NDArray[np.float64], *, group: int, block: int
) -> TimeScales:
    """Both estimates, in samples.

    Parameters
    ----------
    means, within : numpy.ndarray, shape (N,)
        Means over groups of consecutive samples, and the variances inside them.
    group : int
        Samples a group.
    block : int
        Groups a block.
    """
    inside = float(within.mean())
    series = statistical_inefficiency(means, group=group, within_variance=inside)
    count = means.size // block
    if count < FEWEST_BLOCKS or block == 1 or series.constant:
        return TimeScales(series=series, blocks=series, block_count=count)
    blocked = means[: count * block].reshape(count, block)
    inside += float(blocked.var(axis=1).mean())
    blocks = statistical_inefficiency(blocked.mean(axis=1), group=group * block, within_variance=inside)
    return TimeScales(series=series, blocks=series if blocks.constant else blocks, block_count=count)
