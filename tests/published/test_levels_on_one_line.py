"""Systems whose levels fit on one line: two levels, an oscillator ladder, a ring of spins, the 4 x 4 ten-state lattice.

Drawn from their exact distributions and compared, at temperatures that were not simulated, with published values
(k_B = 1).  Each comparison is passed by a sound program with a probability of about 0.9999 (4 standard errors, Student's
t with a hundred or more degrees of freedom); seeds are fixed.  Volumes and pages are cited from memory.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pytest

import reweight as rw
from reweight.datasets.exact_models import (
    Levels,
    ladder_levels,
    q_state_levels,
    ring_levels,
    two_level_system,
)
from reweight.datasets.sampling import draw_levels

ROWS = 60_000
AUTOREGRESSION = 0.8  # about one row in 9 is independent


@dataclass(frozen=True, kw_only=True)
class System:
    """A system, the temperatures it is simulated at, and what is published about it."""

    levels: Levels
    simulated: Sequence[float]
    peak_temperature: float
    peak_height: float
    most_temperature_error: float
    most_relative_height_error: float
    at: float | None = None
    energy: float = np.nan
    heat_capacity: float = np.nan

    def combined(self, seed: int) -> rw.DensityOfStates:
        """Combine correlated runs at the simulated temperatures."""
        rng = np.random.default_rng(seed)
        runs = {
            f"T={t}": draw_levels(*self.levels, t, ROWS, rng, coefficient=AUTOREGRESSION)
            for t in self.simulated
        }
        return rw.combine(runs, temperatures=self.simulated)


SYSTEMS = {
    # Known as the Schottky anomaly: with x = gap / T and equal degeneracies the maximum lies at x tanh(x / 2) = 2 and is
    # x**2 / 4 - 1 high.  E. S. R. Gopal, Specific Heats at Low Temperatures (1966); C. Kittel, Introduction to Solid
    # State Physics.  Energy and C at T = 1: ladder formula below with M = 2.
    "two levels": System(
        levels=two_level_system(),
        simulated=(0.25, 0.35, 0.5, 0.7, 1.3),
        peak_temperature=0.416778279800,
        peak_height=0.439228839891,
        most_temperature_error=0.002,
        most_relative_height_error=0.015,
        at=1.0,
        energy=0.268941421370,
        heat_capacity=0.196611933241,
    ),
    # Upper level twice as numerous: r exp(-x) = (x - 2) / (x + 2).  Same sources.
    "two levels, 1 : 2": System(
        levels=two_level_system(degeneracy_ratio=2.0),
        simulated=(0.22, 0.3, 0.42, 0.6),
        peak_temperature=0.376696361781,
        peak_height=0.761802237690,
        most_temperature_error=0.002,
        most_relative_height_error=0.015,
    ),
    # M equally spaced levels: C = x**2 e**x / (e**x - 1)**2 - (M x)**2 e**(M x) / (e**(M x) - 1)**2, x = 1 / T; for many
    # levels the oscillator of A. Einstein, Ann. Phys. 22, 180 (1907).
    "ladder of 4": System(
        levels=ladder_levels(4),
        simulated=(0.4, 0.55, 0.8, 1.3),
        peak_temperature=0.638615262,
        peak_height=0.743472078687,
        most_temperature_error=0.006,
        most_relative_height_error=0.01,
        at=1.0,
        energy=0.507347265414,
        heat_capacity=0.616586274856,
    ),
    "ladder of 8": System(
        levels=ladder_levels(8),
        simulated=(0.6, 0.85, 1.2, 1.9),
        peak_temperature=1.024884759,
        peak_height=0.899460689277,
        most_temperature_error=0.02,
        most_relative_height_error=0.01,
        at=1.0,
        energy=0.579292105263,
        heat_capacity=0.899189574268,
    ),
    # q = 10, 4 x 4 torus, E = -(equal neighbours): exact integers by a row-by-row recursion (its q = 2 is the enumerated
    # two-state lattice).  Both phases of a first-order transition are sampled at the peak.
    "ten states": System(
        levels=q_state_levels(10),
        simulated=(0.66, 0.72, 0.76, 0.8, 0.9, 1.1),
        peak_temperature=0.760053498925,
        peak_height=16 * 7.855882504246,
        most_temperature_error=0.003,
        most_relative_height_error=0.01,
        at=1.0,
        energy=16 * -0.520108623797,
        heat_capacity=16 * 0.753579604996,
    ),
}


@pytest.mark.parametrize("name", SYSTEMS)
def test_the_peak_is_where_and_as_high_as_published(name: str) -> None:
    system = SYSTEMS[name]

    peak, *others = rw.peaks(system.combined(20_260_101))

    assert peak.stands_out
    assert not any(other.stands_out for other in others)
    assert abs(peak.temperature - system.peak_temperature) < 4 * peak.temperature_standard_error
    assert 0 < peak.temperature_standard_error < system.most_temperature_error
    assert abs(peak.height - system.peak_height) < 4 * peak.height_standard_error
    assert 0 < peak.height_standard_error < system.most_relative_height_error * system.peak_height


@pytest.mark.parametrize("name", [name for name, system in SYSTEMS.items() if system.at is not None])
def test_energy_and_heat_capacity_agree_at_an_unsimulated_temperature(name: str) -> None:
    system = SYSTEMS[name]
    assert system.at is not None

    answer = rw.curve(system.combined(20_260_102), system.at).isel(temperature=0)

    energy_error = float(answer.mean_energy_standard_error)
    assert abs(float(answer.mean_energy) - system.energy) < 4 * energy_error
    assert 0 < energy_error < 0.02 * abs(system.energy)
    heat_capacity_error = float(answer.heat_capacity_standard_error)
    assert abs(float(answer.heat_capacity) - system.heat_capacity) < 4 * heat_capacity_error
    assert 0 < heat_capacity_error < 0.03 * system.heat_capacity


# Ring of N spins, J = 1: (E per spin, C per spin) at T = 1.  E. Ising, Z. Phys. 31, 253 (1925); transfer matrix: H. A.
# Kramers and G. H. Wannier, Phys. Rev. 60, 252 (1941).
RING_AT_ONE = {16: (-0.768569224173, 0.466266666448), 32: (-0.761684642328, 0.421383086947)}


@pytest.mark.parametrize("count", RING_AT_ONE)
def test_a_ring_of_spins_agrees_between_its_simulated_temperatures(count: int) -> None:
    energy, heat_capacity = RING_AT_ONE[count]
    temperatures = [0.7, 0.85, 1.2, 1.6]
    rng = np.random.default_rng(20_260_103)
    runs = {
        f"T={t}": draw_levels(*ring_levels(count), t, ROWS, rng, coefficient=AUTOREGRESSION)
        for t in temperatures
    }

    answer = rw.curve(rw.combine(runs, temperatures=temperatures, count=count), 1.0, per_count=True).isel(
        temperature=0
    )

    assert abs(float(answer.mean_energy) - energy) < 4 * float(answer.mean_energy_standard_error)
    assert 0 < float(answer.mean_energy_standard_error) < 0.01 * abs(energy)
    assert abs(float(answer.heat_capacity) - heat_capacity) < 4 * float(answer.heat_capacity_standard_error)
    assert 0 < float(answer.heat_capacity_standard_error) < 0.02 * heat_capacity
