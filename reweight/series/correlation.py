r"""Statistical inefficiency of a series: how many samples are worth one independent one.

Convention: ``g = 1 + 2 sum_{k >= 1} rho(k) = 2 tau``, with ``tau = 1/2 + sum rho`` the integrated autocorrelation time.
The sum is cut by the automatic window of U. Wolff, Comput. Phys. Commun. 156, 143 (2004) (from memory): the first L at
which ``exp(-L / s) - s / sqrt(L N)`` turns negative, with ``s = 1.5 / ln((2 tau + 1) / (2 tau - 1))``.

Shape letters: N samples (or groups of samples).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.fft import irfft, next_fast_len, rfft

__all__ = [
    "Inefficiency",
    "autocovariance",
    "is_constant",
    "shrink",
    "statistical_inefficiency",
    "window_length",
    "window_passes",
]

Array = NDArray[np.float64]

STRETCH = 1.5  # Wolff's S: ratio of exponential to integrated time assumed when the window is chosen


@dataclass(frozen=True, slots=True, kw_only=True)
class Inefficiency:
    """Statistical inefficiency with its own error.

    Attributes
    ----------
    value : float
        Samples per independent sample; at least 1.
    standard_error : float
    window : int
        Lags summed, in units of the series' entries.
    constant : bool
        The series never changes: one independent sample.
    """

    value: float
    standard_error: float
    window: int
    constant: bool = False


def autocovariance(series: Array) -> Array:
    """Autocovariance at lags 0 .. N-1, each lag divided by N (by FFT), shape (N,)."""
    count = series.size
    transform = rfft(series - series.mean(), next_fast_len(2 * count, real=True))
    full = irfft(transform.real**2 + transform.imag**2, next_fast_len(2 * count, real=True))
    return np.asarray(full[:count] / count)


def window_passes(tau: Array, lag: NDArray[np.int64] | int, count: Array | int) -> NDArray[np.bool_]:
    """Whether sums up to a lag, ``tau(L)``, are long enough by Wolff's condition for series of that many entries."""
    tau = np.maximum(tau, 0.5 + 1e-9)
    stretch = STRETCH / np.log((2 * tau + 1) / (2 * tau - 1))
    return np.asarray(np.exp(-lag / stretch) - stretch / np.sqrt(lag * count) < 0)


def window_length(cumulative: Array, count: int) -> int:
    """First window that satisfies Wolff's condition, given ``tau(L)`` for L = 1, 2, ...; the longest if none does."""
    passed = window_passes(cumulative, np.arange(1, cumulative.size + 1), count)
    return int(np.argmax(passed)) + 1 if passed.any() else cumulative.size


def is_constant(lowest: float, highest: float) -> bool:
    """Whether entries between these two differ by no more than their rounding errors."""
    return highest - lowest <= 1e-14 * max(abs(lowest), abs(highest))


def statistical_inefficiency(series: Array, *, group: int = 1, within_variance: float = 0.0) -> Inefficiency:
    """Statistical inefficiency of a series, or of the samples whose group means it holds.

    Parameters
    ----------
    series : numpy.ndarray, shape (N,)
        Samples, or means over groups of consecutive samples.
    group : int
        Samples a group.
    within_variance : float
        Mean variance of the samples inside a group.

    Returns
    -------
    Inefficiency
        In samples, not groups.
    """
    count = series.size
    covariance = autocovariance(series) if count > 1 else np.zeros(1)
    variance = float(covariance[0])
    if count < 4 or is_constant(float(series.min()), float(series.max())):
        return Inefficiency(value=float(count * group), standard_error=0.0, window=0, constant=True)
    longest = max(1, count // 2)
    tau = 0.5 + np.cumsum(covariance[1 : longest + 1]) / variance
    window = window_length(tau, count)
    coarse_tau = float(tau[window - 1])
    error = np.sqrt(4 / count * max(window + 0.5 - coarse_tau, 0.5)) * max(coarse_tau, 0.5)
    # The mean of the group means is the mean of the samples, so g_samples var(samples) = group g_groups var(groups).
    factor = 2 * group * variance / (variance + within_variance) * (1 + (2 * window + 1) / count)
    value = factor * coarse_tau
    return Inefficiency(
        value=min(max(value, 1.0), float(count * group)), standard_error=float(factor * error), window=window
    )


def shrink(values: Array, windows: NDArray[np.int64], counts: Array) -> Array:
    """Inefficiencies of several runs, drawn towards their common value as far as their errors ask for it.

    The raw estimates correlate with the scatter of the very data they weight, which makes error bars 2-3 % too small
    at 100 independent samples; the shrunk ones do not.

    Parameters
    ----------
    values : numpy.ndarray, shape (K,)
    windows : numpy.ndarray, shape (K,)
        Lags summed, in samples.
    counts : numpy.ndarray, shape (K,)
        Samples.
    """
    logs = np.log(values)
    variances = 2 * (2 * windows + 1) / counts
    spread = max(0.0, float(np.var(logs, ddof=1) - variances.mean())) if values.size > 1 else 0.0
    precision = 1 / (variances + spread)
    centre = float((precision * logs).sum() / precision.sum())
    return np.asarray(np.exp(centre + (logs - centre) * spread / (spread + variances)))
