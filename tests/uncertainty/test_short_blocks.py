"""Intervals from resampling cover as often as they say; those from blocks that are too short do not.

300 experiments, each four runs of the 8 x 8 lattice of 1023 rows with an autoregression of coefficient 0.9: 54
independent samples in leaves of 8 rows, less than half of one.  95 % intervals are judged by an exact two-sided binomial
test with a false alarm once in 10,000 for each number: it lets pass 269 to 297 of 300 (89.7 to 99 %).  Seeds are fixed.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import binomtest

import reweight as rw
from reweight.answers.evaluate import evaluate, moments_at
from reweight.answers.resamples import ask_resamples
from reweight.datasets.exact import canonical, lattice_log_degeneracies
from reweight.datasets.sampling import draw_levels
from reweight.quantities.energy import MeanEnergy
from reweight.quantities.heat_capacity import HeatCapacity
from reweight.uncertainty.resampling import resample, resampled_values

Array = NDArray[np.float64]

EXPERIMENTS = 300
LENGTH = 1023
COEFFICIENT = 0.9
INEFFICIENCY = 19.0
TEMPERATURES = [2.0, 2.25, 2.5, 2.9]
ASKED = 2.12
LEVEL = 0.95
FALSE_ALARM = 1e-4
QUANTITIES = (MeanEnergy(), HeatCapacity())
NAMES = tuple(quantity.name for quantity in QUANTITIES)


def passes(covered: NDArray[np.bool_]) -> bool:
    return bool(binomtest(int(covered.sum()), covered.size, LEVEL).pvalue > FALSE_ALARM)


@dataclass(frozen=True)
class Covered:
    """Whether intervals held the exact answer, shape (experiments, 2)."""

    rescaled: NDArray[np.bool_]
    short_blocks: NDArray[np.bool_]


@cache
def experiments() -> Covered:
    rng = np.random.default_rng(20240621)
    levels, log_counts = lattice_log_degeneracies(8)
    at = canonical(levels, log_counts, ASKED)
    exacts = np.array([at.mean_energy[0], at.heat_capacity[0]])
    asked = np.array([1 / ASKED])
    rescaled, short = [], []
    for number in range(EXPERIMENTS):
        runs = {
            f"{t}": draw_levels(levels, log_counts, t, LENGTH, rng, coefficient=COEFFICIENT)
            for t in TEMPERATURES
        }
        combined = rw.combine(runs, temperatures=TEMPERATURES, discard=0, workers=1)
        found = evaluate(combined, QUANTITIES, asked)
        value = np.array([each.value[0] for each in found])
        proper, leaf_by_leaf = (
            resample(combined.estimate, np.full(len(runs), each), 400, seed=number)
            for each in (INEFFICIENCY, 1.0)
        )
        interval = [each.interval[0] for each in ask_resamples(combined, proper, found, LEVEL)]
        rescaled.append([low <= exact <= high for (low, high), exact in zip(interval, exacts, strict=True)])
        # as if samples were independent: blocks of one leaf, and nothing rescaled
        assert (leaf_by_leaf.block_lengths == 1).all()
        drawn = resampled_values(leaf_by_leaf, QUANTITIES, moments_at(combined, asked))
        spread = np.array([each.std(ddof=1) for each in drawn])
        short.append(np.abs(value - exacts) < 1.96 * spread)
    return Covered(np.array(rescaled), np.array(short))


@pytest.mark.parametrize("name", NAMES)
def test_rescaled_intervals_cover_as_often_as_they_say(name: str) -> None:
    covered = experiments().rescaled[:, NAMES.index(name)]

    assert passes(covered), f"{covered.mean():.1%} of intervals cover the exact value"


@pytest.mark.parametrize("name", NAMES)
def test_blocks_too_short_are_caught(name: str) -> None:
    """Negative control: the spread over blocks shorter than the correlation fails the same test by far."""
    covered = experiments().short_blocks[:, NAMES.index(name)]

    assert covered.mean() < LEVEL
    assert not passes(covered)
