"""Combined objects that several tests of the answers ask, each made once."""

from __future__ import annotations

import numpy as np
import pytest

import reweight as rw
from reweight.datasets.exact import lattice_log_degeneracies
from reweight.datasets.exact_models import lattice_joint_levels
from reweight.datasets.sampling import draw_gamma, draw_joint, draw_levels

GAS_CONSTANT = 8.31446261815324e-3  # kJ/(mol K), exact by definition (SI 2019)


@pytest.fixture(scope="session")
def lattice() -> rw.DensityOfStates:
    """The 8 x 8 lattice of two-state sites from below its transition to infinite temperature; correlated draws."""
    levels, log_degeneracies = lattice_log_degeneracies(8)
    temperatures = [2.0, 2.4, 3.0, 5.0, np.inf]
    rng = np.random.default_rng(20240811)
    runs = {
        f"T={t:g}": draw_levels(levels, log_degeneracies, t, 20_000, rng, coefficient=0.5)
        for t in temperatures
    }
    return rw.combine(runs, temperatures=temperatures, states="2^64", count=64, per="site", title="lattice")


@pytest.fixture(scope="session")
def oscillators() -> rw.DensityOfStates:
    """Gamma-distributed energies in kJ/mol (shape 30, E = 30 R T), with an observable that follows the energy."""
    rng = np.random.default_rng(20240812)
    temperatures = [280.0, 310.0, 345.0]
    runs = {}
    for temperature in temperatures:
        energy = draw_gamma(30.0, GAS_CONSTANT * temperature, 6000, rng, coefficient=0.6)
        runs[f"{temperature:g} K"] = {"energy": energy, "size": np.sqrt(energy) + rng.standard_normal(6000)}
    return rw.combine(
        runs,
        temperatures=temperatures,
        energy_unit="kJ/mol",
        count=20,
        per="oscillator",
        observables={"size": {"unit": "nm", "is": "total"}},
    )


@pytest.fixture(scope="session")
def small_lattice() -> rw.DensityOfStates:
    """The 4 x 4 lattice with abs(m) = abs(M) / 16, drawn from the joint counts of all 65,536 states."""
    joint = lattice_joint_levels()
    rng = np.random.default_rng(20240813)
    temperatures = [1.8, 2.2, 2.8, 3.6]
    runs = {}
    for temperature in temperatures:
        energy, magnetization = draw_joint(joint, temperature, 20_000, rng, coefficient=0.5)
        runs[f"T={temperature}"] = {"energy": energy, "absm": magnetization / 16}
    return rw.combine(
        runs, temperatures=temperatures, count=16, per="site", observables={"absm": {"is": "per site"}}
    )
