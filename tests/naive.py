"""A second, naive implementation of what the package computes: sample by sample, in plain sums and loops.

No tallies, no panels, no fast transforms: slow, short and easy to believe.  Tests judge the package by it on small
random input.  Formulas: Ferrenberg & Swendsen, Phys. Rev. Lett. 63, 1195 (1989), Shirts & Chodera, J. Chem. Phys. 129,
124105 (2008) and Wolff, Comput. Phys. Commun. 156, 143 (2004) (from memory).

Shape letters: K runs, N samples of all runs together, T temperatures, A observables, B blocks.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.special import logsumexp

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class SampleBySample:
    """All samples side by side, and the free energies of their runs.

    Attributes
    ----------
    energies, weights : numpy.ndarray, shape (N,)
        One entry a sample; its weight is one over the inefficiency of its run.
    beta, counts, free_energies : numpy.ndarray, shape (K,)
        ``f_i = -ln Z_i`` with that of the heaviest run zero.
    """

    energies: Array
    weights: Array
    beta: Array
    counts: Array
    free_energies: Array

    @cached_property
    def log_denominator(self) -> Array:
        """``ln sum_i n_i exp(f_i - beta_i E)`` of every sample, shape (N,)."""
        return _log_denominator(self.energies, self.beta, self.counts, self.free_energies)

    def average_weights(self, beta: float) -> Array:
        """Weight of every sample in a canonical average, shape (N,); they add up to one."""
        logs = np.log(self.weights) - beta * self.energies - self.log_denominator
        return np.exp(logs - logsumexp(logs))

    def mean_energy(self, beta: float) -> float:
        """Return the canonical mean of the energy."""
        return float(self.average_weights(beta) @ self.energies)

    def heat_capacity(self, beta: float) -> float:
        """Return the heat capacity in units of k_B."""
        share = self.average_weights(beta)
        return float(beta**2 * share @ (self.energies - share @ self.energies) ** 2)

    def mean(self, values: Array, beta: float) -> float:
        """Return the canonical mean of an observable given for every sample."""
        return float(self.average_weights(beta) @ values)

    def effective_sample_size(self, beta: float) -> float:
        """One over the sum of the squared shares of independent samples."""
        share = self.average_weights(beta)
        return float(1 / np.sum(self.weights * (share / self.weights) ** 2))


def _log_denominator(energies: Array, beta: Array, counts: Array, free: Array) -> Array:
    return np.asarray(logsumexp(np.log(counts) + free - np.outer(energies, beta), axis=1))


def sample_by_sample(
    runs: Sequence[Array], beta: Array, inefficiencies: Array | None = None
) -> SampleBySample:
    """Solve for the free energies on all samples: Newton steps, then the self-consistency condition itself.

    The condition ``f_i = -ln sum_n w_n exp(-beta_i E_n) / D(E_n)`` is what defines the solution; Newton steps only
    bring the starting point close, where its plain iteration would crawl.
    """
    divisor = np.ones(len(runs)) if inefficiencies is None else inefficiencies
    energies = np.concatenate(runs)
    weights = np.concatenate([np.full(run.size, 1 / g) for run, g in zip(runs, divisor, strict=True)])
    counts = np.array([run.size for run in runs]) / divisor
    heaviest = int(np.argmax(counts))
    free = np.zeros(beta.size)
    order = np.argsort(beta)
    for a, b in pairwise(order):  # d f / d beta is the mean energy
        free[b] = free[a] + (beta[b] - beta[a]) * (runs[a].mean() + runs[b].mean()) / 2
    others = np.arange(beta.size) != heaviest
    for _ in range(60):
        shares = np.exp(
            np.log(counts)
            + free
            - np.outer(energies, beta)
            - _log_denominator(energies, beta, counts, free)[:, None]
        )
        gradient = weights @ shares - counts
        curvature = np.diag(weights @ shares) - shares.T @ (weights[:, None] * shares)
        step = np.zeros(beta.size)
        if others.any():
            step[others] = -np.linalg.solve(curvature[np.ix_(others, others)], gradient[others])
        free = free + step / max(1.0, float(np.abs(step).max()))
        if float(np.abs(step).max()) < 1e-9:
            break
    for _ in range(3):
        logs = np.log(weights)[:, None] - np.outer(energies, beta)
        new = -logsumexp(logs - _log_denominator(energies, beta, counts, free)[:, None], axis=0)
        new -= new[heaviest]
        moved = float(np.abs(new - free).max())
        free = new - new[heaviest]
    if moved > 1e-10 * max(1.0, float(np.abs(free).max())):
        raise ArithmeticError(
            f"the naive solution is not self-consistent; the last iteration moved it by {moved}"
        )
    return SampleBySample(energies=energies, weights=weights, beta=beta, counts=counts, free_energies=free)


def statistical_inefficiency(series: Array) -> float:
    """``1 + 2 sum rho`` by loops, cut by Wolff's condition, with his correction for the mean that was subtracted."""
    count = series.size
    difference = series - series.mean()
    variance = float(difference @ difference) / count
    tau = 0.5
    for lag in range(1, count // 2 + 1):
        tau += float(difference[:-lag] @ difference[lag:]) / count / variance
        safe = max(tau, 0.5 + 1e-9)
        stretch = 1.5 / math.log((2 * safe + 1) / (2 * safe - 1))
        if math.exp(-lag / stretch) < stretch / math.sqrt(lag * count):
            break
    return max(1.0, 2 * tau * (1 + (2 * lag + 1) / count))


def block_variance(blocks: Array) -> float:
    """Variance of the sum of one run's centred blocks, shape (B,), with Wolff's window, by loops."""
    count = blocks.size
    zero_lag = sum(float(block) ** 2 for block in blocks)
    summed = 0.0
    for lag in range(1, max(1, count // 4) + 1):
        summed += sum(blocks[b] * blocks[b + lag] for b in range(count - lag)) * count / (count - lag)
        tau = max(0.5 + summed / zero_lag, 0.5 + 1e-9)
        stretch = 1.5 / math.log((2 * tau + 1) / (2 * tau - 1))
        if math.exp(-lag / stretch) < stretch / math.sqrt(lag * count):
            break
    total = (zero_lag + 2 * summed) * (1 + (2 * lag + 1) / count)
    return total if total > 0 else zero_lag


def panel_tally(energies: Array, width: float, length: int, values: Array | None = None) -> dict[int, Array]:
    """Power sums of every panel and leaf, one sample at a time: panel number to (leaves, 8)."""
    leaves = -(-energies.size // length)
    sums: dict[int, Array] = {}
    for row, energy in enumerate(energies):
        panel = math.floor(energy / width)
        local = 2 * (energy / width - panel) - 1
        weight = 1.0 if values is None else values[row]
        panel_sums = sums.setdefault(panel, np.zeros((leaves, 8)))
        for j in range(8):
            panel_sums[row // length, j] += weight * local**j
    return sums


def level_tally(energies: Array, length: int, values: Array | None = None) -> dict[float, Array]:
    """Counts of every level and leaf, one sample at a time: level to (leaves,)."""
    leaves = -(-energies.size // length)
    sums: dict[float, Array] = {}
    for row, energy in enumerate(energies):
        level_sums = sums.setdefault(float(energy), np.zeros(leaves))
        level_sums[row // length] += 1.0 if values is None else values[row]
    return sums


def group_means(series: Array, group: int) -> Array:
    """Means over consecutive complete groups."""
    return np.array(
        [series[start : start + group].mean() for start in range(0, series.size - group + 1, group)]
    )
