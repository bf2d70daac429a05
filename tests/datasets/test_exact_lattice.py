"""Exact integers of the square lattice against enumeration, printed integers and closed-form averages.

Sources (figures copied; bibliographic data from memory): Kaufman, Phys. Rev. 76, 1232 (1949); Beale, Phys. Rev. Lett.
76, 78 (1996); OEIS A364781 (states of zero energy); Ferdinand and Fisher, Phys. Rev. 185, 832 (1969) for the peaks.
The averages were computed independently of the integers, from the product formula in 40-digit arithmetic.
"""

import math

import numpy as np
import pytest

from reweight.datasets.exact import (
    canonical,
    heat_capacity_peak,
    lattice_degeneracies,
    lattice_log_degeneracies,
)

# all levels from -2N upwards, by enumeration of 65,536 states
FOUR_BY_FOUR = (2, 0, 32, 64, 424, 1728, 6688, 13568, 20524)
# OEIS A364781
ZERO_ENERGY_STATES = {4: 20524, 6: 13172279424, 8: 2627978003957146636}
# exact-integer transfer matrix (8), Kaufman products on a circle with big floats (16, 32): energy -> ln g
LOGARITHMS = {
    8: {-112: 8.449342524508, -64: 28.266152815390, -32: 38.460415225814, 0: 42.412746404601},
    16: {-488: 15.681679668125, -384: 66.061861366808, -128: 159.394261716028, 0: 174.796325119839},
    32: {-2028: 15.255080247943, -1536: 271.459976828866, -512: 645.225499506356, 0: 706.438370303202},
}
# L, T: ln Z / N, <E> / N, C / N
AVERAGES = {
    (4, 2.0): (1.069085444921, -1.755380288777, 0.605532657210),
    (8, 1.0): (2.011178708397, -1.997160204111, 0.023379564752),
    (8, 2.4): (0.905696271169, -1.337219927920, 1.184149055375),
    (16, 2.3): (0.923754563730, -1.406067925600, 1.544920987597),
    (16, 5.0): (0.734530812328, -0.428228838712, 0.097652199902),
    (32, 2.2): (0.951016424480, -1.546586281108, 1.401073600516),
}
# L: temperature of the largest heat capacity, C / N there
PEAKS = {
    4: (2.438950313868, 0.816461161408),
    8: (2.361979627086, 1.191838819796),
    16: (2.317506580852, 1.552204360025),
    32: (2.293929640316, 1.904506078284),
}


@pytest.mark.parametrize("length", [4, 6, 8, 12, 16, 32])
def test_sum_rules_of_even_lattices_hold_exactly(length):
    """Total, mirror, lowest counts and the second moment at infinite temperature, all in integers."""
    site_count = length**2
    degeneracies = lattice_degeneracies(length)
    energies = [4 * level - 2 * site_count for level in range(site_count + 1)]

    assert sum(degeneracies) == 2**site_count
    assert degeneracies == degeneracies[::-1]
    assert degeneracies[:4] == (2, 0, 2 * site_count, 4 * site_count)
    second = sum(degeneracy * energy**2 for degeneracy, energy in zip(degeneracies, energies, strict=True))
    assert second == 2 * site_count * 2**site_count
    if length >= 6:  # below, loops around the torus add to these
        assert degeneracies[4:6] == (site_count**2 + 9 * site_count, 4 * site_count**2 + 24 * site_count)
        fourth = sum(
            degeneracy * energy**4 for degeneracy, energy in zip(degeneracies, energies, strict=True)
        )
        assert fourth == (12 * site_count**2 + 20 * site_count) * 2**site_count


@pytest.mark.parametrize("length", [5, 7])
def test_odd_lattices_count_every_state_and_stop_at_their_frustrated_level(length):
    """Odd rings cannot alternate: each of the 2 L lines keeps a satisfied bond, so E <= 2 N - 4 L."""
    degeneracies = lattice_degeneracies(length)
    highest = (4 * length**2 - 4 * length) // 4

    assert sum(degeneracies) == 2 ** (length**2)
    assert degeneracies[highest] > 0
    assert not any(degeneracies[highest + 1 :])


def test_the_smallest_odd_lattice_agrees_with_enumeration():
    """512 states, one by one."""
    spins = 1 - 2 * ((np.arange(512)[:, None] >> np.arange(9)) & 1).reshape(-1, 3, 3)
    energies = -(spins * np.roll(spins, 1, axis=1) + spins * np.roll(spins, 1, axis=2)).sum(axis=(1, 2))
    counted = np.bincount((energies + 18) // 4, minlength=10)

    assert lattice_degeneracies(3) == tuple(counted.tolist())


def test_four_by_four_is_the_enumerated_list():
    assert lattice_degeneracies(4)[:9] == FOUR_BY_FOUR


@pytest.mark.parametrize(("length", "states"), ZERO_ENERGY_STATES.items())
def test_states_of_zero_energy_agree_with_the_published_integers(length, states):
    assert lattice_degeneracies(length)[length**2 // 2] == states


@pytest.mark.parametrize("length", LOGARITHMS)
def test_logarithms_agree_to_their_last_printed_digit(length):
    """Printed to 12 decimals, so to half a unit there and a rounding."""
    energies, logarithms = lattice_log_degeneracies(length)
    found = dict(zip(energies.tolist(), logarithms.tolist(), strict=True))

    for energy, expected in LOGARITHMS[length].items():
        assert found[energy] == pytest.approx(expected, rel=0, abs=6e-13)
    assert -2.0 * length**2 + 4.0 not in found  # the empty first level is left out


@pytest.mark.parametrize(("length", "temperature"), AVERAGES)
def test_averages_agree_with_the_product_formula(length, temperature):
    """To the 12 printed decimals; the heat capacity loses one more digit in double precision."""
    answer = canonical(*lattice_log_degeneracies(length), temperature)
    log_partition, energy, heat_capacity = AVERAGES[length, temperature]

    assert answer.log_partition[0] / length**2 == pytest.approx(log_partition, rel=0, abs=1e-12)
    assert answer.mean_energy[0] / length**2 == pytest.approx(energy, rel=0, abs=2e-12)
    assert answer.heat_capacity[0] / length**2 == pytest.approx(heat_capacity, rel=0, abs=5e-12)


@pytest.mark.parametrize("length", PEAKS)
def test_peaks_of_the_heat_capacity_agree(length):
    temperature, height = heat_capacity_peak(*lattice_log_degeneracies(length), 2.2, 2.6)

    assert temperature == pytest.approx(PEAKS[length][0], rel=0, abs=1e-10)
    assert height / length**2 == pytest.approx(PEAKS[length][1], rel=0, abs=5e-12)


def test_infinite_temperature_weighs_all_states_alike():
    answer = canonical(*lattice_log_degeneracies(8), math.inf)

    assert answer.log_partition[0] == pytest.approx(64 * math.log(2), rel=1e-14)
    assert answer.mean_energy[0] == pytest.approx(0.0, abs=1e-10)
    assert answer.heat_capacity[0] == 0.0


def test_a_lattice_with_double_bonds_is_refused():
    with pytest.raises(ValueError, match="length must be at least 3 sites; got 2"):
        lattice_degeneracies(2)
