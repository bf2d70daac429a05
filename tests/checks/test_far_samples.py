"""Samples far from all others are counted, and sound runs hold none."""

from __future__ import annotations

import numpy as np
import pytest

import reweight as rw
from reweight.checks.far_samples import far_samples
from reweight.checks.finding import Verdict


def combined(cold: np.ndarray, hot: np.ndarray) -> rw.DensityOfStates:
    return rw.combine({"cold": cold, "hot": hot}, temperatures=[1.0, 1.2])


def energies(shape: float, count: int) -> tuple[np.ndarray, np.ndarray]:
    """Potential energies of quadratic degrees of freedom: gamma distributions, here of half as many as their number."""
    rng = np.random.default_rng(8)
    return rng.gamma(shape, 1.0, count), rng.gamma(shape, 1.2, count)


@pytest.mark.parametrize("count", [3000, 200_000])  # kept rows, and leaves
@pytest.mark.parametrize("value", [-999.0, 1e6])
def test_fill_values_are_counted_by_run(count, value):
    cold, hot = energies(30.0, count)
    hot[[500, 1500, 2500]] = value

    sound, found = far_samples(combined(cold, hot))

    assert sound.verdict is Verdict.SOUND
    assert (found.verdict, found.offender) == (Verdict.CAUTION, "hot")
    assert found.summary.startswith("hot has 3 samples more than 20 interquartile ranges from its median")
    assert float(found.summary.split("near ")[1]) == pytest.approx(value, abs=1.0)


# One degree of freedom has the longest tail; of 2 x 200,000 samples 0.2 are expected beyond the limit.
@pytest.mark.parametrize("shape", [0.5, 1.0, 30.0])
def test_sound_runs_hold_none(shape):
    found = far_samples(combined(*energies(shape, 200_000)))
    assert [each.verdict for each in found] == [Verdict.SOUND, Verdict.SOUND]


def test_a_run_mostly_in_its_ground_level_is_not_judged():
    rng = np.random.default_rng(9)
    cold, hot = (rng.choice([0.0, 4.0, 8.0], 4000, p=p) for p in ([0.9, 0.08, 0.02], [0.8, 0.14, 0.06]))
    found = far_samples(combined(cold, hot))
    assert [(each.verdict, each.found) for each in found] == [(Verdict.SOUND, 0.0)] * 2
