"""Classical quadratic degrees of freedom: the energy is Gamma distributed, and everything is known in closed form.

n degrees of freedom, a = n / 2: ``<E> = a T``, ``C = a`` at every temperature (equipartition), and
``ln Z(T2) - ln Z(T1) = a ln(T2 / T1)``; k_B = 1.  Source: any text on statistical mechanics, e.g. R. K. Pathria.
The energies are continuous: these runs go through panels, those of lattices through levels.

Each comparison is passed by a sound program with a probability of about 0.9999 (4 standard errors, Student's t with a
hundred or more degrees of freedom); seeds are fixed.
"""

import functools

import numpy as np

import reweight as rw
from reweight.datasets.sampling import draw_gamma

DEGREES_OF_FREEDOM = 120
SHAPE = DEGREES_OF_FREEDOM / 2
SIMULATED = (1.0, 1.15, 1.32, 1.52, 1.75)
ROWS = 40_000
UNSIMULATED = np.array([1.07, 1.23, 1.42, 1.63])


@functools.cache
def combined_runs() -> rw.DensityOfStates:
    rng = np.random.default_rng(20_260_201)
    runs = {f"T={t}": draw_gamma(SHAPE, t, ROWS, rng, coefficient=0.9) for t in SIMULATED}
    return rw.combine(runs, temperatures=SIMULATED)


def test_the_energy_is_linear_and_the_heat_capacity_flat() -> None:
    answers = rw.curve(combined_runs(), UNSIMULATED)

    assert not combined_runs().estimate.assembly.discrete
    energy_error = answers.mean_energy_standard_error.to_numpy()
    assert np.all(np.abs(answers.mean_energy - SHAPE * UNSIMULATED) < 4 * energy_error)
    assert np.all((energy_error > 0) & (energy_error < 0.003 * SHAPE * UNSIMULATED))
    heat_capacity_error = answers.heat_capacity_standard_error.to_numpy()
    assert np.all(np.abs(answers.heat_capacity - SHAPE) < 4 * heat_capacity_error)
    assert np.all((heat_capacity_error > 0) & (heat_capacity_error < 0.03 * SHAPE))


def test_free_energies_differ_by_half_the_degrees_of_freedom_times_the_log_of_the_temperatures() -> None:
    estimate = combined_runs().estimate
    temperatures = np.array(SIMULATED)

    # relative to the reference energy, as the solver keeps them
    free = estimate.solution.free_energies + estimate.assembly.reference / temperatures

    expected = -SHAPE * np.log(temperatures / temperatures[0])
    # Delta f between neighbours is known to about 1 / sqrt(shared independent samples), here a few hundred at least.
    error = np.cumsum(1 / np.sqrt(estimate.sharing))
    assert np.all(np.abs((free - free[0] - expected)[1:]) < 4 * error)
    assert error.max() < 0.2


def test_no_peak_is_said_to_stand_out_of_a_flat_heat_capacity() -> None:
    assert not any(peak.stands_out for peak in rw.peaks(combined_runs()))


def test_noise_seldom_draws_a_peak_that_stands_out() -> None:
    """At three standard errors of prominence about 1 % of flat curves do; 3 of 20 would happen once in 1000 times."""
    rng = np.random.default_rng(20_260_202)
    false_alarms = 0
    for _ in range(20):
        runs = {f"T={t}": draw_gamma(SHAPE, t, 2_000, rng) for t in SIMULATED[:3]}
        found = rw.peaks(rw.combine(runs, temperatures=SIMULATED[:3]))
        false_alarms += any(peak.stands_out for peak in found)

    assert false_alarms < 3
