"""Energy distributions: against exact ones, against plain counts, and the facts every textbook draws.

Judges: exact integers of the square lattice (datasets/exact.py, Kaufman 1949); Gaussian energies, whose mean is
-s**2 / T and whose width is s at every temperature (B. Derrida, Phys. Rev. B 24, 2613 (1981)).
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.special import ndtr, softmax

import reweight as rw
from reweight.datasets.exact import canonical, lattice_log_degeneracies
from reweight.datasets.exact_models import ladder_levels
from reweight.datasets.sampling import draw_gaussian, draw_levels
from reweight.tally.levels import are_levels


def exact_probabilities(length: int, energies: np.ndarray, temperature: float) -> np.ndarray:
    levels, log_degeneracies = lattice_log_degeneracies(length)
    share = softmax(log_degeneracies - levels / temperature)
    return share[np.searchsorted(levels, energies)]


@pytest.mark.parametrize("beyond", [False, True])
def test_probabilities_of_all_levels_sum_to_one(lattice, beyond) -> None:
    answer = rw.distribution(lattice, [1.9, 2.27, 7.0, math.inf], beyond_reach=beyond)

    np.testing.assert_allclose(answer.probability.sum("energy"), 1.0, rtol=0, atol=1e-12)
    np.testing.assert_allclose(answer.run_histogram.sum("energy"), 1.0, rtol=0, atol=1e-12)


def test_densities_of_all_bins_integrate_to_one(oscillators) -> None:
    answer = rw.distribution(oscillators, [290.0, 330.0])

    width = (answer.energy_upper - answer.energy_lower)[0]
    np.testing.assert_allclose((answer.probability * width).sum("energy"), 1.0, rtol=0, atol=1e-12)
    np.testing.assert_allclose((answer.run_histogram * width).sum("energy"), 1.0, rtol=0, atol=1e-12)
    assert answer.probability.attrs["units"] == "mol kJ-1"
    assert answer.run_histogram.attrs["units"] == "mol kJ-1"


@pytest.mark.parametrize("temperature", [2.2, 3.7, math.inf])
def test_probabilities_agree_with_the_exact_ones_within_their_error(lattice, temperature) -> None:
    """2.2 and 3.7 were not simulated; infinite temperature was."""
    answer = rw.distribution(lattice, temperature).isel(temperature=0)

    exact = exact_probabilities(8, answer.energy.to_numpy(), temperature)
    seen = exact > 1e-3
    error = answer.probability_standard_error.to_numpy()
    assert seen.sum() > 15
    assert np.all(np.abs(answer.probability.to_numpy() - exact)[seen] <= 4 * error[seen])
    assert np.all(error[seen] < 0.2 * exact[seen])
    assert bool(answer.within_reach)


def test_densities_of_continuous_energies_agree_with_the_exact_ones() -> None:
    width, temperatures = 10.0, [8.0, 11.0, 16.0]
    rng = np.random.default_rng(8)
    runs = {str(t): draw_gaussian(width, t, 20_000, rng, coefficient=0.5) for t in temperatures}

    answer = rw.distribution(rw.combine(runs, temperatures=temperatures), 9.5).isel(temperature=0)

    lower, upper = (
        (answer[f"energy_{end}"].to_numpy() + width**2 / 9.5) / width for end in ("lower", "upper")
    )
    exact = (ndtr(upper) - ndtr(lower)) / (answer.energy_upper - answer.energy_lower).to_numpy()
    seen = exact > 1e-3
    error = answer.probability_standard_error.to_numpy()
    assert np.all(np.abs(answer.probability.to_numpy() - exact)[seen] <= 4 * error[seen])
    assert np.all(error[seen] < 0.2 * exact[seen])


def test_distributions_out_of_reach_are_left_empty_unless_asked_for() -> None:
    levels, log_degeneracies = lattice_log_degeneracies(8)
    rng = np.random.default_rng(12)
    runs = {str(t): draw_levels(levels, log_degeneracies, t, 3000, rng) for t in (2.2, 2.6)}
    combined = rw.combine(runs, temperatures=[2.2, 2.6])

    answer = rw.distribution(combined, [2.4, math.inf])
    assert answer.within_reach.to_numpy().tolist() == [True, False]
    for name in ("probability", "probability_standard_error", "probability_interval"):
        assert answer[name][0].notnull().all()
        assert answer[name][1].isnull().all()

    marked = rw.distribution(combined, [2.4, math.inf], beyond_reach=True)
    assert marked.within_reach.to_numpy().tolist() == [True, False]
    assert marked.probability.notnull().all()


def test_run_histograms_are_the_plain_counts_of_the_runs_own_samples() -> None:
    rng = np.random.default_rng(3)
    runs = {"hot": rng.poisson(30, 2000).astype(float), "cold": rng.poisson(20, 1500).astype(float)}
    combined = rw.combine(runs, temperatures=[1.3, 1.0], discard="10 %")

    answer = rw.distribution(combined, 1.1)

    assert answer.run.to_numpy().tolist() == ["cold", "hot"]  # cold to hot, whatever the order of the study
    for place, run in enumerate(combined.runs):
        kept = runs[run.name][run.transient_rows :]
        counts = np.array([np.count_nonzero(kept == level) for level in answer.energy.to_numpy()])
        own = answer.run_histogram.sel(run=run.name).to_numpy()
        np.testing.assert_allclose(own, counts / kept.size, rtol=0, atol=1e-13)
        assert float(answer.run_temperature.sel(run=run.name)) == pytest.approx(combined.temperatures[place])


def test_run_histograms_of_continuous_energies_are_plain_counts_too() -> None:
    rng = np.random.default_rng(4)
    runs = {"cold": rng.gamma(20.0, 1.0, 2000), "hot": rng.gamma(20.0, 1.2, 2000)}
    combined = rw.combine(runs, temperatures=[1.0, 1.2], discard=0)
    assert not are_levels(np.unique(runs["cold"]).size, 2000)

    answer = rw.distribution(combined, 1.1)

    width = float((answer.energy_upper - answer.energy_lower)[0])
    for name, energies in runs.items():
        counts = [
            np.count_nonzero((energies >= low) & (energies < high))
            for low, high in zip(answer.energy_lower.to_numpy(), answer.energy_upper.to_numpy(), strict=True)
        ]
        own = answer.run_histogram.sel(run=name).to_numpy()
        np.testing.assert_allclose(own, np.array(counts) / 2000 / width, rtol=0, atol=1e-12)


def test_only_the_energy_can_be_distributed_so_far(small_lattice) -> None:
    with pytest.raises(rw.InputError, match=r"asked of energy; got 'absm'"):
        rw.distribution(small_lattice, 2.0, of="absm")


def test_a_temperature_that_is_none_is_refused(lattice) -> None:
    with pytest.raises(rw.InputError, match=r"greater than absolute zero; got -1 .*1 of 2 values"):
        rw.distribution(lattice, [2.0, -1.0])


# --- facts of the trade (common practice, no source) --------------------------------------------------------------------


def test_the_hotter_the_closer_the_distribution_comes_to_the_density_of_states(lattice) -> None:
    """P(E; T) ~ g(E) exp(-E / T): the Boltzmann factor fades (common practice, no source)."""
    states = rw.states(lattice)["log_density_of_states"].to_numpy()
    answer = rw.distribution(lattice, [5.0, 20.0, 100.0, math.inf])

    share = softmax(states)
    distances = np.abs(answer.probability.to_numpy() - share).sum(axis=1)
    assert np.all(np.diff(distances) < 0)
    assert distances[0] > 0.5
    assert distances[-1] < 1e-12  # an identity: the same weights, asked twice


def test_the_colder_the_more_only_the_ground_level_remains(lattice) -> None:
    """Common practice, no source."""
    answer = rw.distribution(lattice, [2.2, 1.5, 1.0, 0.3], beyond_reach=True)

    ground = answer.probability.isel(energy=0).to_numpy()
    assert float(answer.energy[0]) == -128.0
    assert np.all(np.diff(ground) > 0)
    assert ground[0] < 0.1
    assert ground[-1] == pytest.approx(1.0, abs=1e-6)


def drawn(levels: np.ndarray, log_degeneracies: np.ndarray, temperatures: list[float]) -> rw.DensityOfStates:
    rng = np.random.default_rng(21)
    runs = {str(t): draw_levels(levels, log_degeneracies, t, 20_000, rng) for t in temperatures}
    return rw.combine(runs, temperatures=temperatures)


def test_where_the_density_of_states_falls_with_the_energy_the_mean_energy_hardly_moves() -> None:
    """A ladder whose degeneracy falls by e**-2 a step: from T = 5 to infinity <E> moves by less than a tenth of a step.

    Common practice, no source; the exact sum over the levels is the judge.
    """
    levels, _ = ladder_levels(10)
    falling = -2.0 * levels
    combined = drawn(levels, falling, [2.0, 5.0, math.inf])

    answer = rw.curve(combined, [5.0, 20.0, math.inf], of="energy")

    exact = canonical(levels, falling, [5.0, 20.0, math.inf]).mean_energy
    off = np.abs(answer.mean_energy.to_numpy() - exact)
    assert np.all(off <= 4 * answer.mean_energy_standard_error.to_numpy())
    assert 0 < float(answer.mean_energy[-1] - answer.mean_energy[0]) < 0.1


def test_a_uniform_ladder_has_an_energy_linear_in_temperature_until_its_top_is_felt() -> None:
    """<E> = T - 1/2 well above the spacing and well below the top, half the top at the end.

    Source of the plateau C = k_B of a quantised oscillator: any text on statistical mechanics; the bend at the top:
    common practice, no source.
    """
    levels, flat = ladder_levels(60)
    combined = drawn(levels, flat, [3.0, 6.0, 12.0, 40.0, math.inf])

    cool = rw.curve(combined, [3.0, 4.0, 5.0, 6.0], of="energy")
    slope, intercept = np.polyfit(cool.temperature, cool.mean_energy, 1)
    assert slope == pytest.approx(1.0, abs=0.03)
    assert intercept == pytest.approx(-0.5, abs=0.12)

    hot = rw.curve(combined, [40.0, math.inf], of="energy")
    assert float(hot.mean_energy[0]) < 0.6 * 39.5  # far below the line
    assert abs(float(hot.mean_energy[1]) - 29.5) < 4 * float(hot.mean_energy_standard_error[1])
