"""Systems, cells and runs of the coverage studies (see coverage.py): where runs stand, what is asked, the exact answers.

Every experiment draws runs from exact canonical distributions: one Gaussian autoregression a run, mapped by rank, so
that n times (1 + phi) / (1 - phi) rows are at least n independent samples.  Runs stand equally spaced in thermodynamic
length about the peak of the heat capacity, at the distance at which the weakest cut between them shares the wanted
number of independent samples on average: four runs, or three or two where four so far apart do not fit between infinite
temperature and the frozen system.  Seeds follow from the cell and were fixed before anything was looked at.

Shape letters: K runs, N rows of a run, L levels.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq
from scipy.special import softmax

from reweight.combining import combine_sources
from reweight.datasets.exact import canonical, canonical_mean, heat_capacity_peak, lattice_log_degeneracies
from reweight.datasets.exact_models import q_state_levels
from reweight.datasets.sampling import correlated_normals, draw_levels
from reweight.density_of_states import DensityOfStates, Description, ObservableDescription
from reweight.runs import Source

Array = NDArray[np.float64]

SEED = 20261204
EXPERIMENTS = 2000
FEWER_EXPERIMENTS = 1000
COEFFICIENTS = (0.9, 0.0, 0.99)
INDEPENDENT = (30, 100, 300, 1000)
SHARED = (100, 10, 3)
CLOSEST = (
    0.45  # runs one standard deviation apart share so much of their samples; nearer ones are never placed
)
MOST_RUNS = 4
LARGEST_GROUND_SHARE = 0.9  # of the coldest run
HOTTEST_LENGTH = 0.3  # thermodynamic length of the hottest run from infinite temperature
NOISE = 0.2  # of the observable, standard deviation
DESCRIPTION = Description(observables=(ObservableDescription(name="order"),))
ANSWERS = (
    "mean energy",
    "heat capacity",
    "observable's mean",
    "ln g difference",
    "peak position",
    "peak height",
)


@dataclass(frozen=True)
class System:
    """Levels E (L,), ln g (L,), the distance between levels, and where the heat capacity peaks."""

    name: str
    energies: Array
    log_counts: Array
    spacing: float
    peak: tuple[float, float]

    @property
    def levels(self) -> tuple[Array, Array]:
        """Both lists."""
        return self.energies, self.log_counts

    def observable(self) -> Array:
        """Mean of the observable on each level: curved in the energy, 1 in the ground state."""
        return np.asarray((self.energies / self.energies[0]) ** 2)


@cache
def systems() -> tuple[System, ...]:
    lattice, phases = lattice_log_degeneracies(8), q_state_levels(10)
    return (
        System("one phase", *lattice, 4.0, heat_capacity_peak(*lattice, 2.0, 2.8)),
        System("two phases", *phases, 1.0, heat_capacity_peak(*phases, 0.6, 0.9)),
    )


@dataclass(frozen=True)
class Cell:
    """A place in the grid: number of the system, AR(1) coefficient, independent samples a run, sharing wanted."""

    system: int
    coefficient: float
    independent: int
    shared: int

    @property
    def key(self) -> tuple[str, ...]:
        """As the table names it."""
        names = [system.name for system in systems()]
        return names[self.system], str(self.coefficient), str(self.independent), str(self.shared)

    @property
    def rows(self) -> int:
        """Length of a run, N."""
        return round(self.independent * (1 + self.coefficient) / (1 - self.coefficient))

    @property
    def experiments(self) -> int:
        """Fewer where runs are very long."""
        return FEWER_EXPERIMENTS if self.rows > 100_000 else EXPERIMENTS


def cells() -> Iterator[Cell]:
    for coefficient in COEFFICIENTS:
        for independent in INDEPENDENT:
            for shared in SHARED:
                for system in (0, 1):
                    yield Cell(system, coefficient, independent, shared)


@cache
def _lengths(system: int) -> tuple[Array, Array]:
    """Inverse temperatures and thermodynamic lengths from infinite temperature."""
    energies, log_counts = systems()[system].levels
    beta = np.linspace(0, 4, 8001)
    shares = softmax(log_counts - beta[:, None] * energies, axis=1)
    mean = shares @ energies
    deviation = np.sqrt(np.maximum(shares @ energies**2 - mean**2, 0))
    steps = (deviation[1:] + deviation[:-1]) / 2 * np.diff(beta)
    allowed = shares[:, 0] <= LARGEST_GROUND_SHARE
    return beta[allowed], np.concatenate([[0], np.cumsum(steps)])[allowed]


def expected_sharing(system: System, beta: Array, independent: int) -> Array:
    """Sharing across each cut if every level is visited as often as it should be, shape (K - 1,)."""
    shares = softmax(system.log_counts - beta[:, None] * system.energies, axis=1)
    visits = independent * shares.sum(axis=0)
    below = np.cumsum(shares / shares.sum(axis=0), axis=0)[:-1]
    return np.asarray((visits * below * (1 - below)).sum(axis=1))


@cache
def ladder(system: int, independent: int, shared: int) -> tuple[float, ...]:
    """Temperatures at which the weakest cut shares what it should, cold to hot."""
    here = systems()[system]
    beta, length = _lengths(system)
    centre = float(np.interp(1 / here.peak[0], beta, length))
    wanted = min(float(shared), CLOSEST * independent)

    def placed(distance: float, count: int) -> Array:
        places = centre + distance * (np.arange(count) - (count - 1) / 2)
        places += max(0.0, HOTTEST_LENGTH - places[0]) - max(0.0, places[-1] - length[-1])
        return np.asarray(np.interp(places, length, beta))

    def excess(distance: float, count: int) -> float:
        return float(expected_sharing(here, placed(distance, count), independent).min()) - wanted

    for count in range(MOST_RUNS, 1, -1):
        largest = (length[-1] - HOTTEST_LENGTH) / (count - 1)
        if excess(largest, count) <= 0 or count == 2:
            distance = brentq(excess, 0.5, largest, args=(count,)) if excess(largest, count) < 0 else largest
            return tuple(1 / placed(distance, count)[::-1])
    raise AssertionError("two runs always fit")


@dataclass(frozen=True)
class Asked:
    """What is asked in a cell, and the exact answers in the order of `ANSWERS`."""

    temperatures: tuple[float, ...]
    temperature: float
    levels: tuple[float, float]
    exact: Array
    sharing: float


def asked(cell: Cell) -> Asked:
    """Means a third of the way across the weakest gap; ln g between the levels most at home in the two runs beside it."""
    system = systems()[cell.system]
    temperatures = ladder(cell.system, cell.independent, cell.shared)
    beta = 1 / np.array(temperatures)[::-1]
    sharing = expected_sharing(system, beta, cell.independent)
    weakest = int(np.argmin(sharing))
    hot, cold = beta[weakest], beta[weakest + 1]
    temperature = float(1 / (hot + (cold - hot) / 3))
    likely = [int(np.argmax(system.log_counts - b * system.energies)) for b in (hot, cold)]
    means = canonical(*system.levels, temperature)
    return Asked(
        temperatures,
        temperature,
        (float(system.energies[likely[0]]), float(system.energies[likely[1]])),
        np.array(
            [
                means.mean_energy[0],
                means.heat_capacity[0],
                canonical_mean(*system.levels, system.observable(), temperature)[0],
                system.log_counts[likely[0]] - system.log_counts[likely[1]],
                *system.peak,
            ]
        ),
        float(sharing.min()),
    )


def draw(cell: Cell, temperatures: tuple[float, ...], rng: np.random.Generator) -> list[Array]:
    """Rows (N, 2) of energy and observable, one array a run."""
    system = systems()[cell.system]
    mean = system.observable()
    runs = []
    for temperature in temperatures:
        energy = draw_levels(*system.levels, temperature, cell.rows, rng, coefficient=cell.coefficient)
        noise = correlated_normals(cell.rows, cell.coefficient, rng)
        runs.append(
            np.stack([energy, mean[np.searchsorted(system.energies, energy)] + NOISE * noise], axis=1)
        )
    return runs


def _source(name: str, beta: float, rows: Array) -> Source:
    return Source(name=name, beta=beta, chunks=lambda: iter([rows]), discard=0)


def combined_runs(temperatures: tuple[float, ...], runs: list[Array]) -> DensityOfStates:
    sources = [_source(f"{t:g}", 1 / t, rows) for t, rows in zip(temperatures, runs, strict=True)]
    return combine_sources(sources, DESCRIPTION)


def generator(cell: Cell, seed: int = SEED) -> np.random.Generator:
    """From the cell's parameters alone."""
    numbers = (cell.system, round(100 * cell.coefficient), cell.independent, cell.shared)
    return np.random.default_rng(np.random.SeedSequence([seed, *numbers]))
