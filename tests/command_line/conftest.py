"""The command line in process: arguments in, exit status and both streams out."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

from reweight.cli.application import main
from reweight.datasets.sampling import draw_gamma


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
