"""A short bead chain in a poor solvent, by Metropolis sampling at several temperatures.

A generic model with numbers of our own: beads in free space joined by rigid bonds of length a, with

    stiffness (1 - cos(angle between the two bonds))    at every inner bead,
    well_depth (s**2 - 2 s) - its value at the cutoff   between beads three or more bonds apart,
        s = (well_distance / r)**4, and nothing beyond the cutoff.

On cooling the chain collapses from an open coil into a compact globule, which shows as a peak of the heat
capacity.  Every run starts from a stretched zigzag.

A trial turns some consecutive beads about the line through the two beads that hold them, or, at an end of the
chain, about a line of any direction through the one that does.  Beads, directions and angles are drawn without
regard to the positions, and an angle is as likely as its opposite: every trial is as likely as the one that
undoes it.  Bonds keep their length.

An angle comes as t = tan(angle / 2): its sine and cosine are then fractions of t, and apart from the logarithm in
the acceptance test everything is +, -, *, / and square roots, which do not differ between machines.

The runs at different temperatures share the array operations and nothing else: nothing is exchanged.

Units: kJ/mol, nm, K.  Shape letters: R runs, B beads, N stored rows.
"""

from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import constants

__all__ = ["GAS_CONSTANT", "BeadChain", "ChainSeries", "simulate_bead_chain"]

GAS_CONSTANT = constants.R / 1000.0  # k_B for a mole of chains, kJ/(mol K)
NEXT, LAST = [1, 2, 0], [2, 0, 1]  # the other two axes, in cyclic order


@dataclass(frozen=True, slots=True, kw_only=True)
class BeadChain:
    """What the chain is made of.

    Attributes
    ----------
    bead_count : int
        At least 2.
    bond_length : float
        nm.
    stiffness, well_depth : float
        kJ/mol.
    well_distance, cutoff : float
        nm.
    """

    bead_count: int = 20
    bond_length: float = 0.38
    stiffness: float = 15.0
    well_depth: float = 3.2
    well_distance: float = 0.5
    cutoff: float = 0.9

    def stretched(self, run_count: int) -> NDArray[np.float64]:
        """Positions of the stretched zigzag, shape (3, B, R): bond angles of 60 degrees from straight."""
        positions = np.zeros((3, self.bead_count, run_count))
        beads = np.arange(self.bead_count)[:, None]
        positions[0] = self.bond_length * np.sqrt(0.75) * beads
        positions[1] = self.bond_length * 0.5 * (beads % 2)
        return positions

    def potential_energy(self, positions: NDArray[np.float64]) -> NDArray[np.float64]:
        """Energies in kJ/mol, shape (R,), of positions in nm, shape (3, B, R)."""
        first, second = _distant_pairs(self.bead_count)
        squared_distances = _squared_length(positions.take(first, axis=1) - positions.take(second, axis=1))
        attraction = self._pair_energy(squared_distances).sum(axis=0)
        # two bonds at an angle span a (2 + 2 cos)**0.5
        spans = _squared_length(positions[:, 2:] - positions[:, :-2])
        bending = self.stiffness * (2.0 - 0.5 * spans / self.bond_length**2).sum(axis=0)
        return np.asarray(attraction + bending)

    def _pair_energy(self, squared_distances: NDArray[np.float64]) -> NDArray[np.float64]:
        ratio = self.well_distance**2 / squared_distances
        s_cutoff = (self.well_distance / self.cutoff) ** 4
        # beyond the well s decreases with r: raising it to its value at the cutoff cuts the potential there
        s = np.maximum(ratio * ratio, s_cutoff)
        return self.well_depth * (s * (s - 2.0) - s_cutoff * (s_cutoff - 2.0))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ChainSeries:
    """Stored rows of all runs.

    Attributes
    ----------
    steps : numpy.ndarray, shape (N,)
        Trials made before each row.
    potential : numpy.ndarray, shape (R, N)
        kJ/mol.
    radius_of_gyration : numpy.ndarray, shape (R, N)
        nm.
    """

    steps: NDArray[np.int64]
    potential: NDArray[np.float64]
    radius_of_gyration: NDArray[np.float64]


def simulate_bead_chain(
    chain: BeadChain, temperatures: ArrayLike, row_count: int, interval: int, rng: np.random.Generator
) -> ChainSeries:
    """Sample the chain at several temperatures, each run independent of the others.

    Parameters
    ----------
    chain : BeadChain
    temperatures : array_like, shape (R,)
        K.
    row_count : int
        Rows to store, N; the first is the state after one interval, still close to the stretched chain.
    interval : int
        Trials from one stored row to the next.
    rng : numpy.random.Generator

    Returns
    -------
    ChainSeries
    """
    thermal_energies = GAS_CONSTANT * np.asarray(temperatures, dtype=np.float64)
    run_count = thermal_energies.size
    positions = chain.stretched(run_count)
    energies = chain.potential_energy(positions)
    potential = np.empty((run_count, row_count))
    radius_of_gyration = np.empty((run_count, row_count))
    for row in range(row_count):
        # mostly few beads, which is all that a dense globule lets through
        lengths = 1 + np.floor((chain.bead_count - 1) * rng.random(interval) ** 2).astype(int)
        starts = rng.integers(0, chain.bead_count + 1 - lengths)
        draws = rng.uniform(-1.0, 1.0, (interval, run_count))
        half_tangents = draws * np.abs(draws)  # mostly small angles, for the same reason; up to 90 degrees
        cosines = (1.0 - half_tangents**2) / (1.0 + half_tangents**2)
        sines = 2.0 * half_tangents / (1.0 + half_tangents**2)
        directions = rng.uniform(-1.0, 1.0, (interval, 3, run_count))
        # u < exp(-dE / kT), written as dE < -kT ln u
        limits = -thermal_energies * np.log(rng.random((interval, run_count)))
        for trial in range(interval):
            start, stop = starts[trial], starts[trial] + lengths[trial]
            turned = _turned(positions, start, stop, cosines[trial], sines[trial], directions[trial])
            turned_energies = chain.potential_energy(turned)
            accepted = turned_energies - energies < limits[trial]
            positions = np.where(accepted, turned, positions)
            energies = np.where(accepted, turned_energies, energies)
        potential[:, row] = energies
        centred = positions - positions.mean(axis=1, keepdims=True)
        radius_of_gyration[:, row] = np.sqrt(_squared_length(centred).mean(axis=0))
    return ChainSeries(
        steps=interval * np.arange(1, row_count + 1),
        potential=potential,
        radius_of_gyration=radius_of_gyration,
    )


@cache
def _distant_pairs(bead_count: int) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Pairs of beads three or more bonds apart."""
    return np.triu_indices(bead_count, 3)


def _turned(
    positions: NDArray[np.float64],
    start: int,
    stop: int,
    cosine: NDArray[np.float64],
    sine: NDArray[np.float64],
    direction: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Positions with the beads start .. stop - 1 turned about their axis (Rodrigues' rotation formula)."""
    bead_count = positions.shape[1]
    anchor = positions[:, start - 1 if start > 0 else stop]
    inner = start > 0 and stop < bead_count
    axis = positions[:, stop] - anchor if inner else direction
    axis = (axis / np.sqrt(_squared_length(axis)))[:, None]
    arms = positions[:, start:stop] - anchor[:, None]
    products = axis * arms
    along = products[0] + products[1] + products[2]
    axis_next, axis_last = axis.take(NEXT, axis=0), axis.take(LAST, axis=0)
    across = axis_next * arms.take(LAST, axis=0) - axis_last * arms.take(NEXT, axis=0)
    turned = positions.copy()
    turned[:, start:stop] = anchor[:, None] + cosine * arms + sine * across + (1.0 - cosine) * along * axis
    return turned


def _squared_length(vectors: NDArray[np.float64]) -> NDArray[np.float64]:
    """Sum of squares over the leading axis of three; written out, so that its order never depends on a library."""
    squares = vectors * vectors
    return np.asarray(squares[0] + squares[1] + squares[2])
