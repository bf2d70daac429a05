"""The square lattice of two-state sites by heat-bath sampling at several temperatures.

E = -(sum over neighbouring pairs of s s'), s = +1 or -1, periodic both ways, no field.  Sites of one colour of the
checkerboard do not see each other and are renewed together: a site turns up with probability
1 / (1 + exp(-2 h / T)), h the sum of its four neighbours, which is the chance that h exceeds a logistic deviate
of scale T / 2.  Every run starts with all sites up.  The runs at different temperatures share the array
operations and nothing else.

Exact answers to compare with: `exact.lattice_log_degeneracies`.
Source of the update: R. J. Glauber, J. Math. Phys. 4, 294 (1963) (from memory).

Units: k_B = 1 and J = 1.  Shape letters: R runs, N stored rows.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = ["LatticeSeries", "simulate_square_lattice"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LatticeSeries:
    """Stored rows of all runs.

    Attributes
    ----------
    steps : numpy.ndarray, shape (N,)
        Sweeps made before each row; a sweep renews every site once.
    energy, magnetization : numpy.ndarray of int, shape (R, N)
        Of the whole lattice.
    """

    steps: NDArray[np.int64]
    energy: NDArray[np.int64]
    magnetization: NDArray[np.int64]


def simulate_square_lattice(
    length: int, temperatures: ArrayLike, row_count: int, interval: int, rng: np.random.Generator
) -> LatticeSeries:
    """Sample the lattice at several temperatures, each run independent of the others.

    Parameters
    ----------
    length : int
        Sites along one side; even, at least 4.
    temperatures : array_like, shape (R,)
        In units of J / k_B.
    row_count : int
        Rows to store, N; the first is the state after one interval.
    interval : int
        Sweeps from one stored row to the next.
    rng : numpy.random.Generator

    Returns
    -------
    LatticeSeries

    Raises
    ------
    ValueError
        The length is odd or below 4: the colours of the checkerboard would not close around the torus.
    """
    if length < 4 or length % 2:
        raise ValueError(
            f"length must be even and at least 4; got {length}. Take a neighbouring even number."
        )
    scales = 0.5 * np.asarray(temperatures, dtype=np.float64)
    sites = np.arange(length**2).reshape(length, length)
    neighbours = np.stack([np.roll(sites, shift, axis) for axis in (0, 1) for shift in (1, -1)]).reshape(
        4, -1
    )
    colour = np.add.outer(np.arange(length), np.arange(length)).ravel() % 2
    halves = [np.flatnonzero(colour == parity) for parity in (0, 1)]
    neighbours_of_half = [neighbours[:, half] for half in halves]
    spins = np.ones((length**2, scales.size), dtype=np.int8)
    energy = np.empty((scales.size, row_count), dtype=np.int64)
    magnetization = np.empty((scales.size, row_count), dtype=np.int64)
    for row in range(row_count):
        limits = rng.logistic(0.0, scales, (interval, 2, length**2 // 2, scales.size))
        for sweep in range(interval):
            for parity, half in enumerate(halves):
                first, second, third, fourth = neighbours_of_half[parity]
                fields = spins[first] + spins[second] + spins[third] + spins[fourth]
                spins[half] = np.where(fields > limits[sweep, parity], np.int8(1), np.int8(-1))
        # one neighbour down and one to the right: every pair once
        energy[:, row] = -np.sum(
            spins * (spins[neighbours[0]] + spins[neighbours[2]]), axis=0, dtype=np.int64
        )
        magnetization[:, row] = np.sum(spins, axis=0, dtype=np.int64)
    return LatticeSeries(
        steps=interval * np.arange(1, row_count + 1), energy=energy, magnetization=magnetization
    )
