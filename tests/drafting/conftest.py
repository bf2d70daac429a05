"""Folders of data files: energies of thirty quadratic degrees of freedom in kJ/mol, drawn exactly."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
import scipy.constants

from reweight.datasets.sampling import draw_gamma

GAS_CONSTANT = scipy.constants.R / 1000  # kJ/mol/K
TEMPERATURES = (300.0, 320.0, 340.0, 360.0)

WriteRuns = Callable[..., list[Path]]


@pytest.fixture
def energies() -> Callable[[float], np.ndarray]:
    """Two thousand energies at a temperature in kelvin, in kJ/mol."""
    rng = np.random.default_rng(20240713)
    return lambda temperature: draw_gamma(15.0, GAS_CONSTANT * temperature, 2000, rng, coefficient=0.5)


@pytest.fixture
def write_runs(tmp_path: Path, energies) -> WriteRuns:
    """Write one file a temperature: a clock and the energies, which a factor may spoil."""

    def write(header: str, *, name: str = "{:.0f}K.dat", factor: float = 1.0, remark: str = "") -> list[Path]:
        paths = []
        for temperature in TEMPERATURES:
            path = tmp_path / name.format(temperature)
            path.parent.mkdir(exist_ok=True)
            values = energies(temperature) * factor
            table = np.column_stack([0.5 * np.arange(values.size), values])
            np.savetxt(path, table, fmt=["%.1f", "%.9g"], header=f"{remark}\n{header}" if remark else header)
            paths.append(path)
        return paths

    return write
