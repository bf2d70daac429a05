"""One-line densities of states against closed forms and printed tables.

Sources (bibliographic data from memory): Kittel and Kroemer, Thermal Physics (1980), for independent spins; the Schottky
peak condition r exp(-x) = (x - 2) / (x + 2), C = x**2 / 4 - 1; E. Ising, Z. Phys. 31, 253 (1925), for the ring.
Figures without a closed form in the test were computed in 40-digit arithmetic, the joint counts also by a transfer matrix.
"""

import numpy as np
import pytest

from reweight.datasets import exact_models
from reweight.datasets.exact import canonical, canonical_mean, heat_capacity_peak

# degeneracy ratio: T / gap at the peak, height
SCHOTTKY_PEAKS = {
    0.5: (0.448872475173, 0.240777924478),
    1.0: (0.416778279800, 0.439228839891),
    2.0: (0.376696361781, 0.761802237690),
    10.0: (0.280171028658, 2.184883562215),
}
# levels: <E> at T = 1, C at T = 1, T of the maximum, maximum
LADDERS = {
    3: (0.424789617396, 0.424404544689, 0.531723271, 0.637203484132),
    16: (0.581974906306, 0.920644785197, 1.707805645, 0.964418392281),
}
# spins, T: ln Z / N, u, c
RINGS = {
    (8, 0.5): (2.087813012479, -0.995339457142, 0.073998540432),
    (32, 1.0): (1.126933139299, -0.761684642328, 0.421383086947),
}
# states, T: ln Z / N, u, c
Q_STATES = {
    (3, 1.0): (2.127167090588, -1.702420726892, 1.528088581412),
    (10, 1.0): (2.628066057850, -0.520108623797, 0.753579604996),
    (10, 2.0): (2.428485747087, -0.311511419604, 0.069186060839),
}
# spins, T: ln Z / N, u, c, <abs m>, <m**2>, <m**4>
CURIE_WEISS = {
    (16, 0.8): (
        0.803560591124,
        -0.226116296766,
        0.626432482202,
        0.611058942956,
        0.452232593531,
        0.304743515804,
    ),
    (256, 1.0): (
        0.699779880212,
        -0.036070195627,
        0.374140560034,
        0.226984334180,
        0.072140391254,
        0.011050182301,
    ),
}
# T: <abs m>, <m**2>, <m**4> of the 4 x 4 lattice
MAGNETIZATION = {
    1.5: (0.986173297816, 0.975302493142, 0.958942519597),
    2.5: (0.764712393222, 0.654825756937, 0.538318766756),
    5.0: (0.342765627554, 0.175199478093, 0.072943894000),
}
TABLE = {"rel": 0, "abs": 1e-12}  # printed to 12 decimals


@pytest.mark.parametrize(("ratio", "peak"), SCHOTTKY_PEAKS.items())
def test_two_level_systems_peak_where_the_textbook_condition_says(ratio, peak):
    temperature, height = heat_capacity_peak(
        *exact_models.two_level_system(degeneracy_ratio=ratio), 0.15, 1.0
    )

    assert temperature == pytest.approx(peak[0], rel=0, abs=1e-10)
    assert height == pytest.approx(peak[1], **TABLE)


@pytest.mark.parametrize("temperature", [0.5, 1.0, 2.0, 5.0])
def test_independent_spins_add_up(temperature):
    """Closed forms: ln Z = N ln(2 cosh(1 / T)), <E> = -N tanh(1 / T), C = N / (T cosh(1 / T))**2."""
    answer = canonical(*exact_models.independent_spin_levels(100), temperature)

    assert answer.log_partition[0] == pytest.approx(100 * np.log(2 * np.cosh(1 / temperature)), rel=1e-12)
    assert answer.mean_energy[0] == pytest.approx(-100 * np.tanh(1 / temperature), rel=1e-12)
    assert answer.heat_capacity[0] == pytest.approx(
        100 / (temperature * np.cosh(1 / temperature)) ** 2, rel=1e-11
    )


@pytest.mark.parametrize(("level_count", "expected"), LADDERS.items())
def test_ladders_agree_with_the_difference_of_two_oscillators(level_count, expected):
    levels = exact_models.ladder_levels(level_count)
    answer = canonical(*levels, 1.0)
    temperature, height = heat_capacity_peak(*levels, 0.3, 3.0)

    assert answer.mean_energy[0] == pytest.approx(expected[0], **TABLE)
    assert answer.heat_capacity[0] == pytest.approx(expected[1], **TABLE)
    assert temperature == pytest.approx(expected[2], rel=0, abs=1e-9)  # printed to 9 decimals
    assert height == pytest.approx(expected[3], **TABLE)


@pytest.mark.parametrize(("spins", "temperature"), RINGS)
def test_rings_agree_with_the_transfer_matrix(spins, temperature):
    answer = canonical(*exact_models.ring_levels(spins), temperature)

    assert (
        answer.log_partition[0] / spins,
        answer.mean_energy[0] / spins,
        answer.heat_capacity[0] / spins,
    ) == (pytest.approx(RINGS[spins, temperature], **TABLE))


@pytest.mark.parametrize("states", [3, 10])
def test_states_of_the_q_state_lattice_are_all_counted(states):
    assert sum(exact_models.FOUR_BY_FOUR_STATES[states]) == states**16


@pytest.mark.parametrize(("states", "temperature"), Q_STATES)
def test_q_state_lattices_agree_with_the_table(states, temperature):
    answer = canonical(*exact_models.q_state_levels(states), temperature)

    assert (answer.log_partition[0] / 16, answer.mean_energy[0] / 16, answer.heat_capacity[0] / 16) == (
        pytest.approx(Q_STATES[states, temperature], **TABLE)
    )


def test_the_first_order_case_peaks_where_the_table_says():
    temperature, height = heat_capacity_peak(*exact_models.q_state_levels(10), 0.6, 0.9)

    assert temperature == pytest.approx(0.760053498925, rel=0, abs=1e-10)
    assert height / 16 == pytest.approx(7.855882504246, rel=0, abs=1e-11)


@pytest.mark.parametrize(("spins", "temperature"), CURIE_WEISS)
def test_fully_connected_spins_agree_with_their_sum(spins, temperature):
    """From the joint counts: energies and moments of the magnetization alike."""
    joint = exact_models.curie_weiss_levels(spins)
    answer = canonical(joint.energies, joint.log_degeneracies, temperature)
    magnetization = joint.observable / spins
    moments = [
        canonical_mean(joint.energies, joint.log_degeneracies, magnetization**power, temperature)[0]
        for power in (1, 2, 4)
    ]

    assert (
        answer.log_partition[0] / spins,
        answer.mean_energy[0] / spins,
        answer.heat_capacity[0] / spins,
        *moments,
    ) == pytest.approx(CURIE_WEISS[spins, temperature], **TABLE)


@pytest.mark.parametrize(("temperature", "expected"), MAGNETIZATION.items())
def test_magnetization_of_the_enumerated_lattice_agrees_with_the_transfer_matrix(temperature, expected):
    joint = exact_models.lattice_joint_levels()
    moments = [
        canonical_mean(joint.energies, joint.log_degeneracies, (joint.observable / 16) ** power, temperature)[
            0
        ]
        for power in (1, 2, 4)
    ]

    assert moments == pytest.approx(expected, **TABLE)


def test_joint_counts_of_the_lattice_are_the_enumerated_ones():
    """E = -8 and E = 20 of the printed table, where both signs of M are counted together except at M = 0."""
    joint = exact_models.lattice_joint_levels()
    counts = {
        (energy, magnetization): round(np.exp(log_count))
        for energy, magnetization, log_count in zip(
            joint.energies, joint.observable, joint.log_degeneracies, strict=True
        )
    }

    row = {0: 768, 2: 624, 4: 704, 6: 688, 8: 736, 10: 208}
    assert {m: n for (e, m), n in counts.items() if e == -8} == {
        m: n * (2 if m else 1) for m, n in row.items()
    }
    assert {m: n for (e, m), n in counts.items() if e == 20} == {0: 64}
    assert sum(counts.values()) == 2**16


@pytest.mark.parametrize("answer_of", [exact_models.gamma_canonical, exact_models.gaussian_canonical])
def test_closed_forms_obey_the_thermodynamic_derivatives(answer_of):
    """<E> = T**2 d ln Z / dT and C = d<E> / dT, by central differences of step 1e-4 (error about 1e-8)."""
    step = 1e-4
    below, here, above = (answer_of(3.0, 2.0 + shift) for shift in (-step, 0.0, step))

    slope = 4.0 * (above.log_partition - below.log_partition) / (2 * step)
    assert here.mean_energy == pytest.approx(slope, rel=1e-6)
    assert here.heat_capacity == pytest.approx((above.mean_energy - below.mean_energy) / (2 * step), rel=1e-6)
