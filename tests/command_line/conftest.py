"""The command line in process: arguments in, exit status and both streams out."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

import reweight as rw
from reweight.cli.application import main
from reweight.datasets.exact import lattice_log_degeneracies
from reweight.datasets.sampling import draw_gamma, draw_levels

HOSTILE_NAMES = ("=2+3", "+1", "-1", "@cmd", 'quote" , comma', "<script>alert(1)", "Ωμέγα", "<b>&amp;")


@dataclass(frozen=True)
class Outcome:
    """What a command did."""

    status: int
    stdout: str
    stderr: str


Reweight = Callable[..., Outcome]


@pytest.fixture
def reweight(capsys: pytest.CaptureFixture[str]) -> Reweight:
    def run(*arguments: object) -> Outcome:
        capsys.readouterr()
        with pytest.raises(SystemExit) as ended:
            main([str(each) for each in arguments])
        captured = capsys.readouterr()
        return Outcome(int(ended.value.code or 0), captured.out, captured.err)

    return run


STUDY = """\
schema = 1
title = "Twenty oscillators"
energy_unit = "kJ/mol"

[system]
count = 20
per = "oscillator"

[columns]
energy = "potential"

[[run]]
name = "cold"
temperature = 300.0
files = ["cold.dat"]

[[run]]
name = "hot"
temperature = 330.0
files = ["hot.dat"]
"""


@pytest.fixture
def study(tmp_path: Path) -> Path:
    """A sound study of two runs: Gamma-distributed energies, shape 30, in kJ/mol."""
    rng = np.random.default_rng(41)
    for name, temperature in (("cold", 300.0), ("hot", 330.0)):
        energies = draw_gamma(30.0, 8.31446261815324e-3 * temperature, 4000, rng, coefficient=0.5)
        table = np.column_stack([np.arange(4000), energies])
        np.savetxt(tmp_path / f"{name}.dat", table, fmt=["%d", "%.8f"], header="step potential[kJ/mol]")
    path = tmp_path / "study.toml"
    path.write_text(STUDY)
    return path


@pytest.fixture
def combined(study: Path, reweight: Reweight) -> Path:
    assert reweight("combine", study).status == 0
    return study.with_suffix(".nc")


@pytest.fixture(scope="session")
def lattice_file(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A combined file of the 8 x 8 lattice up to infinite temperature, its runs named to break things."""
    levels, log_degeneracies = lattice_log_degeneracies(8)
    temperatures = [1.7, 2.0, 2.2, 2.4, 2.8, 3.5, 6.0, math.inf]
    rng = np.random.default_rng(51)
    runs = {
        name: draw_levels(levels, log_degeneracies, t, 4000, rng)
        for name, t in zip(HOSTILE_NAMES, temperatures, strict=True)
    }
    combined = rw.combine(
        runs,
        temperatures=temperatures,
        count=64,
        per="site",
        states="2^64",
        title="=1+1 <script>alert('title')</script>",
    )
    path = tmp_path_factory.mktemp("lattice") / "lattice.nc"
    rw.save(combined, path)
    return path


@pytest.fixture
def hostile_names() -> tuple[str, ...]:
    """Names of the lattice's runs."""
    return HOSTILE_NAMES
