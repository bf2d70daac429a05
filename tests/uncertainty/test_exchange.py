"""Runs that moved together, as in replica exchange: error bars that know it, and how wrong those are that do not.

A common driver: the energies of four runs of the 8 x 8 lattice follow Gaussian autoregressions (coefficient 0.8) that share
0.7 of their variance; every energy is drawn exactly from its own distribution by the inverse of its cumulative one.  400
experiments; the scatter of 400 answers is known to 1 / sqrt(800) = 3.5 %, and 4 of those, 14 %, are passed once in 16,000.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.special import ndtri, softmax

import reweight as rw
from reweight.answers.evaluate import evaluate, moments_at
from reweight.datasets.exact import canonical, lattice_log_degeneracies
from reweight.datasets.sampling import correlated_normals
from reweight.quantities.energy import MeanEnergy
from reweight.quantities.free_energy import FreeEnergy
from reweight.quantities.heat_capacity import HeatCapacity
from reweight.uncertainty.resampling import resample, resampled_values
from reweight.uncertainty.window import variance

Array = NDArray[np.float64]

EXPERIMENTS = 400
RESAMPLED = 100  # of them
LENGTH = 2000
COEFFICIENT = 0.8
SHARED = 0.7
TEMPERATURES = [2.0, 2.25, 2.5, 2.9]
ASKED = [2.12, 2.44, 2.9]  # for each of the answers
BOUND = 0.14

ANSWERS = ("mean energy", "heat capacity", "free-energy difference")


def driven_runs(rng: np.random.Generator) -> dict[str, Array]:
    """Energies of all runs, which share a driver."""
    levels, log_counts = lattice_log_degeneracies(8)
    driver = correlated_normals(LENGTH, COEFFICIENT, rng)
    own = correlated_normals(LENGTH, COEFFICIENT, rng, series=len(TEMPERATURES))
    runs = {}
    for temperature, apart in zip(TEMPERATURES, own, strict=True):
        normals = np.sqrt(SHARED) * driver + np.sqrt(1 - SHARED) * apart
        limits = ndtri(np.minimum(np.cumsum(softmax(log_counts - levels / temperature))[:-1], 1))
        runs[f"{temperature}"] = levels[np.searchsorted(limits, normals)]
    return runs


@dataclass(frozen=True)
class Experiments:
    """Values and three kinds of standard errors, shape (experiments, 3); resampled spreads, shape (fewer, 3).

    Beside them position and height of the peak of the heat capacity and their errors, shape (experiments, 2).
    """

    value: Array
    coupled: Array
    apart: Array
    resampled_coupled: Array
    resampled_apart: Array
    deficit: float
    peak_value: Array
    peak_error: Array


@cache
def experiments() -> Experiments:
    """The free-energy difference is that between the coldest and the hottest run.

    The heat capacity is asked where it rests on what parts the energies of two runs; near the coldest run alone, ignoring
    the exchange would do it little harm.
    """
    rng = np.random.default_rng(20240620)
    quantities = [MeanEnergy(), HeatCapacity(), FreeEnergy()]
    asked, reference = 1 / np.array(ASKED), 1 / np.array([*ASKED, TEMPERATURES[0]])
    value, coupled, apart, spreads, deficits = [], [], [], [], []
    peak_value, peak_error = [], []
    for number in range(EXPERIMENTS):
        combined = rw.combine(
            driven_runs(rng), temperatures=TEMPERATURES, discard=0, exchange=True, workers=1
        )
        found = evaluate(combined, quantities, asked)
        value.append([each.value[place] for place, each in enumerate(found)])
        coupled.append([each.variance.standard_error[place] for place, each in enumerate(found)])
        apart.append([variance(each.blocks).standard_error[place] for place, each in enumerate(found)])
        (peak, *_) = rw.peaks(combined, lowest=2.05, highest=2.8, beyond_reach=True)
        peak_value.append([peak.temperature, peak.height])
        peak_error.append([peak.temperature_standard_error, peak.height_standard_error])
        if number < RESAMPLED:
            g = np.array([run.decision.inefficiency.value for run in combined.runs])
            for together in (True, False):
                resamples = resample(combined.estimate, g, 200, seed=number, coupled=together)
                drawn = resampled_values(resamples, quantities, moments_at(combined, reference))
                drawn[2] = drawn[2] - drawn[2][:, -1:]
                spreads.append([values[:, place].std(ddof=1) for place, values in enumerate(drawn)])
            rows = (
                resample(combined.estimate, g, 2, coupled=True).block_lengths[0]
                * combined.runs[0].leaf_rows[0]
            )
            deficits.append((1 - g.mean() / (2 * rows)) * (1 - rows / LENGTH))
    return Experiments(
        np.array(value),
        np.array(coupled),
        np.array(apart),
        np.array(spreads[::2]),
        np.array(spreads[1::2]),
        float(np.sqrt(np.mean(deficits))),
        np.array(peak_value),
        np.array(peak_error),
    )


def error_over_scatter(errors: Array) -> Array:
    """Root mean square error over the standard deviation of the values, one a kind of answer."""
    return np.asarray(np.sqrt(np.mean(errors**2, axis=0)) / experiments().value.std(axis=0, ddof=1))


def test_the_driven_runs_are_what_they_claim_to_be() -> None:
    """Each of the right mean energy, and correlated with its neighbours."""
    rng = np.random.default_rng(1)
    runs = np.array([np.stack(list(driven_runs(rng).values())) for _ in range(50)])
    exact = canonical(*lattice_log_degeneracies(8), TEMPERATURES).mean_energy

    # 50 x 2000 samples, of which 9 make an independent one at most: 4.5 standard errors, once in 36,000 for each of four.
    error = runs.std(axis=(0, 2)) * np.sqrt(9 / (50 * LENGTH))
    assert (np.abs(runs.mean(axis=(0, 2)) - exact) < 4.5 * error).all()
    correlation = np.corrcoef(runs.swapaxes(0, 1).reshape(len(TEMPERATURES), -1))
    assert 0.6 < correlation[0, 1] < SHARED  # a monotonic map of Gaussian variables only lowers it


@pytest.mark.parametrize("answer", ANSWERS)
def test_errors_of_coupled_runs_are_their_scatter(answer: str) -> None:
    ratio = error_over_scatter(experiments().coupled)[ANSWERS.index(answer)]

    assert ratio == pytest.approx(1, abs=BOUND)


def test_errors_of_the_peak_of_coupled_runs_are_their_scatter() -> None:
    made = experiments()
    ratio = np.sqrt(np.mean(made.peak_error**2, axis=0)) / made.peak_value.std(axis=0, ddof=1)

    np.testing.assert_allclose(ratio, 1, atol=BOUND)


@pytest.mark.parametrize(
    ("answer", "ratio"),
    [("mean energy", 0.72), ("heat capacity", 1.51), ("free-energy difference", 0.61)],
)
def test_ignoring_the_exchange_gives_wrong_errors(answer: str, ratio: float) -> None:
    """Negative control.  Expected ratios: those of an independent prototype on runs with such a driver."""
    found = error_over_scatter(experiments().apart)[ANSWERS.index(answer)]

    assert found == pytest.approx(ratio, rel=BOUND)
    assert found != pytest.approx(1, abs=BOUND)


@pytest.mark.parametrize("answer", ANSWERS)
def test_coupled_resamples_scatter_as_the_answers_do(answer: str) -> None:
    """Less what blocks cut off at their ends and the subtracted mean, ``(1 - g / 2 l)(1 - l / N)`` of the variance."""
    made = experiments()
    ratio = error_over_scatter(made.resampled_coupled)[ANSWERS.index(answer)]

    assert ratio / made.deficit == pytest.approx(1, abs=BOUND)


@pytest.mark.parametrize("answer", ANSWERS)
def test_resampling_coupled_runs_apart_gives_wrong_spreads(answer: str) -> None:
    """Negative control: the same bound fails."""
    made = experiments()
    ratio = error_over_scatter(made.resampled_apart)[ANSWERS.index(answer)]

    assert ratio / made.deficit != pytest.approx(1, abs=BOUND)


def test_a_study_that_says_exchange_gets_coupled_errors_and_coupled_resamples() -> None:
    runs = driven_runs(np.random.default_rng(2))
    asked = 1 / np.array(ASKED[:1])
    kept_apart, coupled = (
        rw.combine(runs, temperatures=TEMPERATURES, discard=0, exchange=exchange)
        for exchange in (False, True)
    )
    (one,) = evaluate(kept_apart, [MeanEnergy()], asked)
    (other,) = evaluate(coupled, [MeanEnergy()], asked)
    together = np.sum(one.blocks, axis=0)

    assert one.variance.total[0] == variance(one.blocks).total[0]
    assert other.variance.total[0] == pytest.approx(variance([together]).total[0], rel=1e-12)
    assert other.variance.shares.sum() == pytest.approx(1)
    drawn = rw.draw_resamples(coupled, 5).multiplicities
    np.testing.assert_array_equal(drawn[0], drawn[3])
    drawn = rw.draw_resamples(kept_apart, 5).multiplicities
    assert (drawn[0] != drawn[3]).any()
