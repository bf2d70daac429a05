"""Short runs of the simulators against enumeration and quadrature.

Standard errors come from 40 averages that are independent: blocks far longer than the correlation time for the lattice,
runs side by side for the chain.  Bounds are 4 of them (with 39 degrees of freedom about 1 false alarm in 4,000 a
comparison), seeds are fixed.
"""

import numpy as np
import pytest

from reweight.datasets.bead_chain import GAS_CONSTANT, BeadChain, simulate_bead_chain
from reweight.datasets.exact import canonical, canonical_mean
from reweight.datasets.exact_models import lattice_joint_levels
from reweight.datasets.square_lattice import simulate_square_lattice

PARTS = 40


def assert_mean(values, expected, relative_error):
    """Mean within 4 standard errors, which must be small enough to count."""
    parts = values.reshape(PARTS, -1).mean(axis=1)
    standard_error = parts.std(ddof=1) / np.sqrt(PARTS)
    assert abs(parts.mean() - expected) < 4 * standard_error
    assert standard_error < relative_error * abs(expected)


def test_the_lattice_samples_its_enumerated_states():
    """Energy, energy squared and abs(M) of the 4 x 4 lattice; the first 100 rows are discarded."""
    temperatures = [1.8, 2.5, 4.0]
    series = simulate_square_lattice(4, temperatures, 8100, 2, np.random.default_rng(11))
    joint = lattice_joint_levels()
    answer = canonical(joint.energies, joint.log_degeneracies, temperatures)
    square = answer.heat_capacity * np.square(temperatures) + answer.mean_energy**2
    magnetization = canonical_mean(joint.energies, joint.log_degeneracies, joint.observable, temperatures)

    for run in range(3):
        assert_mean(series.energy[run, 100:], answer.mean_energy[run], 0.02)
        assert_mean(series.energy[run, 100:] ** 2, square[run], 0.03)
        assert_mean(np.abs(series.magnetization[run, 100:]), magnetization[run], 0.02)


def test_lattice_rows_are_consistent_with_each_other():
    """Levels are 4 apart, M is even, rows are an interval apart."""
    series = simulate_square_lattice(6, [2.0, 3.0], 50, 3, np.random.default_rng(12))

    assert series.steps.tolist() == list(range(3, 153, 3))
    assert np.all((series.energy + 72) % 4 == 0)
    assert np.all(series.magnetization % 2 == 0)
    assert series.energy.min() >= -72


@pytest.mark.parametrize("length", [2, 5])
def test_a_lattice_without_a_closing_checkerboard_is_refused(length):
    with pytest.raises(ValueError, match="length must be even and at least 4"):
        simulate_square_lattice(length, [2.0], 1, 1, np.random.default_rng(13))


def four_bead_means(chain, temperature):
    """Exact <E> and <E**2> of four beads: quadrature over two bond angles and the torsion between them.

    With rigid bonds the sampled measure is uniform in both cosines and in the torsion.  200 Gauss-Legendre points a
    cosine and 200 equally spaced torsions are far finer than the statistical errors need.
    """
    nodes, weights = np.polynomial.legendre.leggauss(200)
    torsion = (np.arange(200) + 0.5) * np.pi / 200
    first, second, third = np.meshgrid(nodes, nodes, torsion, indexing="ij")
    sines = np.sqrt((1 - first**2) * (1 - second**2))
    # bonds b1, b2, b3 with b1.b2 = c1, b2.b3 = c2 and b1.b3 = c1 c2 + s1 s2 cos(torsion)
    end_to_end = 3 + 2 * (first + second + first * second + sines * np.cos(third))
    attraction = ((chain.well_distance / chain.bond_length) ** 2 / np.maximum(end_to_end, 1e-12)) ** 2
    cut = (chain.well_distance / chain.cutoff) ** 4
    shift = cut**2 - 2 * cut
    pair = np.where(attraction > cut, attraction**2 - 2 * attraction - shift, 0.0) * chain.well_depth
    energy = chain.stiffness * (2 - first - second) + pair
    boltzmann = (
        weights[:, None, None] * weights[None, :, None] * np.exp(-energy / (GAS_CONSTANT * temperature))
    )
    return [float(np.sum(boltzmann * energy**power) / np.sum(boltzmann)) for power in (1, 2)]


@pytest.mark.parametrize("temperature", [280.0, 400.0])
def test_four_beads_agree_with_quadrature(temperature):
    """A strong pair attraction, so that bending, attraction and their balance all matter."""
    chain = BeadChain(bead_count=4, stiffness=4.0, well_depth=8.0)
    series = simulate_bead_chain(chain, [temperature] * PARTS, 320, 12, np.random.default_rng(14))
    mean, square = four_bead_means(chain, temperature)

    assert_mean(series.potential[:, 20:], mean, 0.03)
    assert_mean(series.potential[:, 20:] ** 2, square, 0.05)


def test_three_beads_bend_as_the_integral_says():
    """The cosine c has the weight exp(a c), a = stiffness / kT: <1 - c> = 1 / a - 2 / (exp(2 a) - 1)."""
    chain = BeadChain(bead_count=3, stiffness=5.0)
    series = simulate_bead_chain(chain, [300.0] * PARTS, 320, 6, np.random.default_rng(15))
    rate = 5.0 / (GAS_CONSTANT * 300.0)

    assert_mean(series.potential[:, 20:], 5.0 * (1 / rate - 2 / np.expm1(2 * rate)), 0.03)


def test_two_beads_never_change_their_distance():
    """The radius of gyration of a dumbbell is half its length; ten thousand turns must not stretch it."""
    series = simulate_bead_chain(BeadChain(bead_count=2), [300.0], 10, 1000, np.random.default_rng(16))

    assert np.all(series.potential == 0.0)
    assert series.radius_of_gyration == pytest.approx(0.19, rel=1e-10)
