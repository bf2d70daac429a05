"""Systems whose density of states fits on one line, as lists of levels and counts.

Units: k_B = 1, and the coupling or level spacing is 1 unless it is an argument.  Feed the pairs
(energies, log_degeneracies) to `exact.canonical` and `sampling.draw_levels`.  Shape letter: L levels, T temperatures.

Sources (from memory): independent spins and two levels: C. Kittel and H. Kroemer, Thermal Physics, 2nd ed.
(1980), ch. 1-3; Schottky peak: E. S. R. Gopal, Specific Heats at Low Temperatures (1966); ring: E. Ising,
Z. Phys. 31, 253 (1925); Gaussian density of states: B. Derrida, Phys. Rev. B 24, 2613 (1981).
"""

from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import gammaln

from reweight.datasets.exact import Canonical

__all__ = [
    "FOUR_BY_FOUR_STATES",
    "JointLevels",
    "curie_weiss_levels",
    "gamma_canonical",
    "gaussian_canonical",
    "independent_spin_levels",
    "ladder_levels",
    "lattice_joint_levels",
    "q_state_levels",
    "ring_levels",
    "two_level_system",
]

Levels = tuple[NDArray[np.float64], NDArray[np.float64]]

# Configurations of the q-state lattice of 4 x 4 sites (E = -number of equal neighbours) with k = 0..32 equal
# neighbours: row-by-row integer recursion; the one for q = 2 reproduces the two-state lattice, sums are q**16.
FOUR_BY_FOUR_STATES: dict[int, tuple[int, ...]] = {
    3: (
        *(2970, 8640, 25920, 84096, 264048, 612096, 1359936, 2459136, 4002312, 5400576, 6512352),
        *(6485184, 5635008, 4195968, 2785536, 1593792, 893316, 390720, 202464, 66048, 45792, 9216),
        *(8160, 1152, 1800, 192, 192, 0, 96, 0, 0, 0, 3),
    ),
    10: (
        *(355148098691850, 1209404096801280, 2083353317303040, 2342380535723520, 1901291183955360),
        *(1177037575165440, 579025320045120, 235108891699200, 82033882089480, 25427302433280),
        *(7207605397440, 1920178759680, 496317048480, 123995289600, 30897388800, 8038333440),
        *(2046888540, 519436800, 146142720, 38085120, 9275040, 2880000, 918720, 138240, 82440),
        *(23040, 2880, 0, 1440, 0, 0, 0, 10),
    ),
}


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class JointLevels:
    """Counts of states by energy and an observable, one entry a pair that occurs.

    Attributes
    ----------
    energies, observable, log_degeneracies : numpy.ndarray, shape (L,)
        Sorted by energy, then by observable.
    """

    energies: NDArray[np.float64]
    observable: NDArray[np.float64]
    log_degeneracies: NDArray[np.float64]


def two_level_system(gap: float = 1.0, degeneracy_ratio: float = 1.0) -> Levels:
    """One system with levels 0 and ``gap``, the upper ``degeneracy_ratio`` times as numerous.

    Its heat capacity peaks where x = gap / T solves r exp(-x) = (x - 2) / (x + 2), at height x**2 / 4 - 1.
    """
    return np.array([0.0, gap]), np.array([0.0, np.log(degeneracy_ratio)])


def independent_spin_levels(count: int, energy: float = 1.0) -> Levels:
    """Levels of ``count`` independent two-state spins of energy ``-energy`` or ``+energy``: binomial counts."""
    excited = np.arange(count + 1.0)
    return energy * (2.0 * excited - count), _log_binomial(count, excited)


def ladder_levels(level_count: int) -> Levels:
    """One system with equally spaced levels 0, 1 .. ``level_count`` - 1, one state each."""
    return np.arange(float(level_count)), np.zeros(level_count)


def ring_levels(count: int) -> Levels:
    """Levels of a ring of ``count`` two-state spins, at least 3, coupled to their neighbours with J = 1.

    An even number 2 k of broken bonds, chosen in any way, fixes the ring up to a global flip.
    """
    broken = np.arange(0.0, count + 1.0, 2.0)
    return 2.0 * broken - count, np.log(2.0) + _log_binomial(count, broken)


def q_state_levels(states: int) -> Levels:
    """Levels of the 4 x 4 lattice with ``states`` states a site, E = -(number of equal neighbouring pairs).

    Parameters
    ----------
    states : int
        One of the keys of `FOUR_BY_FOUR_STATES`.  With 10 states both phases of a first-order transition
        are present at T = 0.76.
    """
    counts = FOUR_BY_FOUR_STATES[states]
    occupied = [equal for equal in reversed(range(len(counts))) if counts[equal]]
    return -np.array(occupied, dtype=np.float64), np.log([float(counts[equal]) for equal in occupied])


def curie_weiss_levels(count: int) -> JointLevels:
    """Energies and abs(M) of ``count`` fully connected spins, E = -M**2 / (2 count); critical at T = 1.

    The constant self term, -1/2 in all, is included in E.
    """
    magnetization = np.arange(float(count), -1.0, -2.0)
    log_counts = _log_binomial(count, (count - magnetization) / 2.0) + np.log(2.0) * (magnetization > 0)
    return JointLevels(
        energies=-(magnetization**2) / (2.0 * count), observable=magnetization, log_degeneracies=log_counts
    )


@cache
def lattice_joint_levels() -> JointLevels:
    """Energies and abs(M) of the two-state lattice of 4 x 4 sites, by enumeration of its 65,536 states."""
    states = np.arange(2**16)
    spins = (2 * ((states[:, None] >> np.arange(16)) & 1) - 1).reshape(-1, 4, 4)
    bonds = spins * np.roll(spins, 1, axis=1) + spins * np.roll(spins, 1, axis=2)
    energies = -bonds.sum(axis=(1, 2))
    magnetization = np.abs(spins.sum(axis=(1, 2)))
    pairs, counts = np.unique(np.stack([energies, magnetization]), axis=1, return_counts=True)
    return JointLevels(
        energies=pairs[0].astype(float), observable=pairs[1].astype(float), log_degeneracies=np.log(counts)
    )


def gamma_canonical(shape: float, temperatures: ArrayLike) -> Canonical:
    """2 ``shape`` classical quadratic degrees of freedom: Z = T**shape with g(E) = E**(shape - 1) / Gamma(shape).

    Source: equipartition, any text on statistical mechanics.
    """
    asked = np.atleast_1d(np.asarray(temperatures, dtype=np.float64))
    return Canonical(
        temperatures=asked,
        log_partition=shape * np.log(asked),
        mean_energy=shape * asked,
        heat_capacity=np.full_like(asked, shape),
    )


def gaussian_canonical(width: float, temperatures: ArrayLike) -> Canonical:
    """Gaussian density of states of unit total: ln Z = (width / T)**2 / 2, energies always of that width."""
    asked = np.atleast_1d(np.asarray(temperatures, dtype=np.float64))
    return Canonical(
        temperatures=asked,
        log_partition=0.5 * (width / asked) ** 2,
        mean_energy=-(width**2) / asked,
        heat_capacity=(width / asked) ** 2,
    )


def _log_binomial(total: int, chosen: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.asarray(gammaln(total + 1.0) - gammaln(chosen + 1.0) - gammaln(total - chosen + 1.0))
