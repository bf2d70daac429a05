"""Standard errors against outside references: other people's code, and the scatter of repeated experiments.

* scipy.stats.bootstrap (SciPy's own resampling of single independent samples);
* pymbar's asymptotic errors (Shirts & Chodera, J. Chem. Phys. 129, 124105 (2008)) for independent samples;
* the scatter of 1000 repetitions;
* the two ways of this package, linear response and resampling, against each other.

Seeds are fixed; every bound states how rarely it would be passed by chance.
"""

from __future__ import annotations

import logging

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import bootstrap

import reweight as rw
from reweight.answers.evaluate import evaluate, moments_at
from reweight.datasets.exact import lattice_log_degeneracies
from reweight.datasets.sampling import draw_gamma, draw_levels
from reweight.quantities.energy import MeanEnergy
from reweight.quantities.free_energy import FreeEnergy
from reweight.quantities.heat_capacity import HeatCapacity
from reweight.uncertainty.resampling import resample, resampled_values

Array = NDArray[np.float64]

LATTICE_TEMPERATURES = [2.0, 2.25, 2.5, 2.9]


def lattice_runs(length: int, coefficient: float, rng: np.random.Generator) -> rw.DensityOfStates:
    """Four runs of the 8 x 8 lattice from its exact distribution."""
    levels, log_counts = lattice_log_degeneracies(8)
    runs = {
        f"{t}": draw_levels(levels, log_counts, t, length, rng, coefficient=coefficient)
        for t in LATTICE_TEMPERATURES
    }
    return rw.combine(runs, temperatures=LATTICE_TEMPERATURES, discard=0, workers=1)


def test_blocks_of_one_sample_scatter_as_in_scipy() -> None:
    """Mean and heat capacity of one run of 100 rows, each a leaf, 10,000 resamples in either code.

    A standard deviation of 10,000 nearly normal values is known to 1 / sqrt(20,000) = 0.71 %, a ratio to 1 %; 4 % is passed
    once in 16,000.
    """
    rng = np.random.default_rng(41)
    energies = rng.gamma(20.0, 1.5, 100)
    combined = rw.combine({"run": energies}, temperatures=[1.5], discard=0)
    assert combined.runs[0].leaf_rows.size == 100

    resamples = resample(combined.estimate, np.array([0.2]), 10_000, seed=42)
    np.testing.assert_array_equal(resamples.block_lengths, 1)
    found = resampled_values(
        resamples, [MeanEnergy(), HeatCapacity()], moments_at(combined, np.array([1 / 1.5]))
    )

    for ours, statistic in zip(found, (np.mean, lambda x, axis: np.var(x, axis=axis) / 1.5**2), strict=True):
        theirs = bootstrap(
            (energies,), statistic, n_resamples=10_000, method="percentile", rng=np.random.default_rng(43)
        )
        assert np.std(ours) == pytest.approx(theirs.standard_error, rel=0.04)


def test_errors_of_independent_samples_are_those_of_pymbar() -> None:
    """Free-energy differences and mean energies of eight runs, averaged over 60 sets, within 3 %.

    The mean over one set scatters by 6 % (measured), that over 60 by 0.8 %: 3 % is passed once in 5000.  With 20 sets it
    would be once in 30.
    """
    logging.getLogger("pymbar").setLevel(logging.ERROR)
    import pymbar

    temperatures = np.geomspace(1.0, 1.8, 8)
    beta, length = 1 / temperatures, 1000
    rng = np.random.default_rng(44)
    steps, means = [], []
    for _ in range(60):
        energies = [draw_gamma(40.0, t, length, rng) for t in temperatures]
        combined = rw.combine(
            {f"{t}": run for t, run in zip(temperatures, energies, strict=True)},
            temperatures=temperatures,
            discard=0,
            weighting="samples",
            workers=1,
        )
        step, mean = evaluate(combined, [FreeEnergy(), MeanEnergy()], beta[1:], reference=float(beta[0]))
        pooled = np.concatenate(energies)
        # The solver is named because others warn of options they do not know.
        theirs = pymbar.MBAR(
            np.outer(beta, pooled),
            np.full(8, length),
            solver_protocol=({"method": "adaptive", "options": {"min_sc_iter": 0}},),
        )
        their_steps = theirs.compute_free_energy_differences()["dDelta_f"][0, 1:]
        steps.append(step.variance.standard_error / their_steps)
        their_means = theirs.compute_expectations(pooled)["sigma"][1:]
        means.append(mean.variance.standard_error / their_means)

    assert np.mean(steps) == pytest.approx(1, abs=0.03)
    assert np.mean(means) == pytest.approx(1, abs=0.03)


def test_predicted_errors_are_the_scatter_of_repeated_experiments() -> None:
    """E and C between simulated temperatures, and the peak's position and height: 1000 sets of 300 samples a run.

    A scatter of 1000 is known to 1 / sqrt(2000) = 2.2 %, the mean of four ratios, of which height and C go together, to
    about 1.4 %: 5 % is passed once in 2000 (with 500 sets once in 80).  Each by itself may be off by 4 standard errors, 9 %.
    """
    rng = np.random.default_rng(45)
    values, errors = [], []
    for _ in range(1000):
        combined = lattice_runs(300, 0.0, rng)
        found = evaluate(combined, [MeanEnergy(), HeatCapacity()], np.array([1 / 2.12]))
        (peak, *_) = rw.peaks(combined, lowest=2.05, highest=2.8, beyond_reach=True)
        values.append([*(each.value[0] for each in found), peak.temperature, peak.height])
        errors.append(
            [
                *(each.variance.standard_error[0] for each in found),
                peak.temperature_standard_error,
                peak.height_standard_error,
            ]
        )

    ratio = np.sqrt(np.mean(np.square(errors), axis=0)) / np.std(values, axis=0, ddof=1)
    assert ratio.mean() == pytest.approx(1, abs=0.05)
    np.testing.assert_allclose(ratio, 1, atol=0.09)


def spread_over_error(length: int, coefficient: float) -> tuple[float, float]:
    """Spread of resamples over the linear-response error, mean over 50 sets of E and C twice; what is predicted.

    Circular blocks of l samples, of an autoregression of coefficient c, in a run of N: the sum over a block has the share
    ``1 - 2 c (1 - c**l) / ((1 - c**2) l)`` of what it has in a long run (about ``1 - g / 2 l``), and subtracting the run's
    mean takes another ``l / N``.
    """
    rng = np.random.default_rng(46)
    ratios, shares = [], []
    for seed in range(50):
        combined = lattice_runs(length, coefficient, rng)
        resamples = rw.draw_resamples(combined, 400, seed=seed)
        errors = rw.curve(combined, [2.12, 2.4])
        drawn = rw.resampled(combined, resamples, [2.12, 2.4])
        for name in ("mean_energy", "heat_capacity"):
            ratios.append((drawn[name].std("resample", ddof=1) / errors[f"{name}_standard_error"]).mean())
        rows = resamples.block_lengths * [run.leaf_rows[0] for run in combined.runs]
        ends = 2 * coefficient * (1 - coefficient**rows) / ((1 - coefficient**2) * rows)
        shares.append(((1 - ends) * (1 - rows / length)).mean())
    return float(np.mean(ratios)), float(np.sqrt(np.mean(shares)))


# The mean over 50 sets is known to about 0.8 % (measured: its own scatter over the sets): 3 % is passed once in 5000.


@pytest.mark.parametrize(("length", "coefficient"), [(300, 0.0), (1000 * 19, 0.9)])
def test_resampling_agrees_with_linear_response_in_long_runs(length: int, coefficient: float) -> None:
    ratio, _ = spread_over_error(length, coefficient)

    assert ratio == pytest.approx(1, abs=0.03)


@pytest.mark.parametrize(("length", "coefficient"), [(100, 0.0), (100 * 19, 0.9), (300 * 19, 0.9)])
def test_resampling_falls_short_of_linear_response_as_predicted(length: int, coefficient: float) -> None:
    ratio, predicted = spread_over_error(length, coefficient)

    assert predicted < 0.975
    assert ratio == pytest.approx(predicted, abs=0.03)
