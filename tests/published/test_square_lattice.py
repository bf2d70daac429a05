"""Square lattices of two-state sites, drawn from their exact density of states, against published exact values.

Tables: E and C per site and the peak of C of the L x L torus in zero field, from Kaufman's product formula; k_B = J = 1.
Sources: L. Onsager, Phys. Rev. 65, 117 (1944); B. Kaufman, Phys. Rev. 76, 1232 (1949); A. E. Ferdinand and M. E. Fisher,
Phys. Rev. 185, 832 (1969) (citations from memory); the figures were printed from 40-digit arithmetic and agree with
enumeration (L = 4), an integer transfer matrix (L = 8), and the exact integers of P. D. Beale, Phys. Rev. Lett. 76, 78
(1996) (L = 32).

Every comparison is passed by a sound program with a probability of about 0.9999 (4 standard errors, Student's t with
a hundred or more degrees of freedom); seeds are fixed.
"""

import functools

import numpy as np
import pytest

import reweight as rw
from reweight.datasets.exact import lattice_log_degeneracies
from reweight.datasets.sampling import draw_levels

CRITICAL_TEMPERATURE = 2.269185314213022  # 2 / ln(1 + sqrt 2)

# L: {T: (E per site, C per site)}
EXACT = {
    8: {
        2.0: (-1.745683170293, 0.714122602855),
        2.2: (-1.568041763060, 1.058400728824),
        CRITICAL_TEMPERATURE: (-1.491589107440, 1.145559239894),
        2.3: (-1.455873591733, 1.170956769710),
        2.4: (-1.337219927920, 1.184149055375),
        2.5: (-1.222320643251, 1.100475889362),
        3.0: (-0.841315427852, 0.483966471436),
    },
    16: {
        2.2: (-1.550105997850, 1.290535514070),
        CRITICAL_TEMPERATURE: (-1.453064852813, 1.498704959400),
        2.3: (-1.406067925600, 1.544920987597),
        2.4: (-1.255043197971, 1.408170078782),
        2.5: (-1.131317984411, 1.064976882853),
    },
    32: {
        2.2: (-1.546586281108, 1.401073600516),
        CRITICAL_TEMPERATURE: (-1.433658466146, 1.846767590040),
        2.3: (-1.375465805187, 1.900816613345),
        2.4: (-1.212601253956, 1.283587886549),
        2.5: (-1.107291660978, 0.885812501066),
    },
}

# L: (T, C per site) at the maximum of C
EXACT_PEAK = {
    8: (2.361979627086, 1.191838819796),
    16: (2.317506580852, 1.552204360025),
    32: (2.293929640316, 1.904506078284),
}

# None of these is among the temperatures of the tables.
SIMULATED = {
    8: (1.85, 2.1, 2.35, 2.6, 2.85, 3.15),
    16: (2.1, 2.22, 2.33, 2.45, 2.58, 2.75),
    32: (2.16, 2.225, 2.28, 2.34, 2.43, 2.54),
}
ROWS = 40_000
AUTOREGRESSION = 0.9  # about one row in 19 is independent

# Largest standard errors at which the comparisons still mean something; that of C is relative.  Per site, errors shrink
# as 1 / L: a large lattice averages over itself.
MOST_ENERGY_ERROR = {8: 0.006, 16: 0.003, 32: 0.002}
MOST_PEAK_TEMPERATURE_ERROR = {8: 0.008, 16: 0.005, 32: 0.004}
MOST_HEAT_CAPACITY_ERROR = 0.015


@functools.cache
def combined_lattice(length: int) -> rw.DensityOfStates:
    energies, log_degeneracies = lattice_log_degeneracies(length)
    rng = np.random.default_rng(20_240_000 + length)
    runs = {
        f"T={temperature}": draw_levels(
            energies, log_degeneracies, temperature, ROWS, rng, coefficient=AUTOREGRESSION
        )
        for temperature in SIMULATED[length]
    }
    return rw.combine(runs, temperatures=SIMULATED[length], count=length**2)


@pytest.mark.parametrize("length", [8, 16, 32])
def test_energy_and_heat_capacity_agree_at_unsimulated_temperatures(length: int) -> None:
    temperatures = list(EXACT[length])
    energy, heat_capacity = np.array(list(EXACT[length].values())).T

    answers = rw.curve(combined_lattice(length), temperatures, per_count=True)

    energy_error = answers.mean_energy_standard_error.to_numpy()
    assert np.all(np.abs(answers.mean_energy - energy) < 4 * energy_error)
    assert np.all((energy_error > 0) & (energy_error < MOST_ENERGY_ERROR[length]))
    heat_capacity_error = answers.heat_capacity_standard_error.to_numpy()
    assert np.all(np.abs(answers.heat_capacity - heat_capacity) < 4 * heat_capacity_error)
    assert np.all(
        (heat_capacity_error > 0) & (heat_capacity_error < MOST_HEAT_CAPACITY_ERROR * heat_capacity)
    )


@pytest.mark.parametrize("length", [8, 16, 32])
def test_the_peak_of_the_heat_capacity_is_where_and_as_high_as_published(length: int) -> None:
    temperature, height = EXACT_PEAK[length]

    peak, *others = rw.peaks(combined_lattice(length), per_count=True)

    assert peak.stands_out
    assert peak.within_reach
    assert not any(other.stands_out for other in others)
    assert abs(peak.temperature - temperature) < 4 * peak.temperature_standard_error
    assert 0 < peak.temperature_standard_error < MOST_PEAK_TEMPERATURE_ERROR[length]
    assert abs(peak.height - height) < 4 * peak.height_standard_error
    assert 0 < peak.height_standard_error < MOST_HEAT_CAPACITY_ERROR * height


@pytest.mark.parametrize("length", [8, 16, 32])
def test_a_run_with_a_wrong_temperature_is_caught_by_these_comparisons(length: int) -> None:
    """Negative control: one label off by 3 % must spoil the agreement, or the comparisons prove nothing."""
    energies, log_degeneracies = lattice_log_degeneracies(length)
    rng = np.random.default_rng(20_240_000 + length)
    labelled = list(SIMULATED[length])
    runs = {
        f"T={t}": draw_levels(energies, log_degeneracies, t, ROWS, rng, coefficient=AUTOREGRESSION)
        for t in labelled
    }
    labelled[2] *= 1.03
    temperatures = list(EXACT[length])
    energy = np.array([each for each, _ in EXACT[length].values()])

    answers = rw.curve(
        rw.combine(runs, temperatures=labelled, count=length**2),
        temperatures,
        per_count=True,
        beyond_reach=True,
    )

    assert np.any(np.abs(answers.mean_energy - energy) > 4 * answers.mean_energy_standard_error)
