"""A large study: size on disk, memory, and the cost of curves: ``python large_study.py [REPETITIONS]``.

24 temperatures from 300 to 420 K, heat capacity 500 kJ/(mol K), 83,000 frames a run, energy and three observables with
two moments each.  Told are the size of the combined file against the raw columns, the peak memory for four times as many
frames against that for one, and the time of curves of all four at 100 temperatures, errors included, against opening
the file.
"""

from __future__ import annotations

import os
import resource
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from side_by_side import medians, say, say_rows, say_target, table_rows

import reweight as rw
from reweight.combining import combine_sources
from reweight.density_of_states import DensityOfStates, Description, ObservableDescription
from reweight.runs import Source

RUNS, FRAMES, CHUNK = 24, 83_000, 16_384
GAS_CONSTANT = 8.31446261815324e-3  # kJ/(mol K)
SHAPE = 500.0 / GAS_CONSTANT  # of the Gamma-distributed energies: C = SHAPE R
TEMPERATURES = np.geomspace(300.0, 420.0, RUNS)
OBSERVABLES = tuple(ObservableDescription(name=name, moments=(1, 2)) for name in ("a", "b", "c"))
DESCRIPTION = Description(energy_unit="kJ/mol", temperature_unit="K", observables=OBSERVABLES)

Array = NDArray[np.float64]


def chunks(number: int, frames: int) -> Iterator[Array]:
    """Frames of one run, made as they are asked for, so that they take no memory."""
    rng = np.random.default_rng([2026, number])
    temperature = TEMPERATURES[number]
    for start in range(0, frames, CHUNK):
        count = min(CHUNK, frames - start)
        rows = rng.standard_normal((count, 4))
        energy = GAS_CONSTANT * temperature * rng.standard_gamma(SHAPE, count)
        rows[:, 1] += energy / 1000
        rows[:, 2] += np.tanh((energy - 170_000) / 5000)
        rows[:, 0] = energy
        yield rows


def study(frames: int) -> DensityOfStates:
    """Combine streams of so many frames a run."""
    beta = DESCRIPTION.inverse_temperature(TEMPERATURES)
    sources = [
        Source(
            name=f"{TEMPERATURES[i]:.1f} K",
            beta=float(beta[i]),
            chunks=lambda i=i: chunks(i, frames),
            discard=0,
        )
        for i in range(RUNS)
    ]
    return combine_sources(sources, DESCRIPTION)


def peak_memory(frames: int) -> float:
    """Megabytes at most held by a fresh process that combines so many frames a run."""
    code = (
        "import resource, sys; from large_study import study; study(int(sys.argv[1])); "
        "print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, str(frames)],
        cwd=Path(__file__).parent,
        capture_output=True,
        text=True,
        check=True,
    )
    return float(done.stdout)


def main(repetitions: int) -> None:
    """Measure and print."""
    combined = study(FRAMES)
    quantities = ["energy", "a.mean", "b.mean", "c.mean"]
    grid = np.linspace(305.0, 415.0, 100)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "large.nc"
        rw.save(combined, path)
        raw = RUNS * FRAMES * 4 * 8
        size = os.path.getsize(path)
        say(f"combined file {size / 1e6:.1f} MB, raw columns {raw / 1e6:.1f} MB")
        say_target("size of the combined file over the raw columns", size / raw, 2.0, at_most=True)
        taken = medians(
            {
                "open": lambda: rw.open_combined(path),
                "four curves with errors": lambda: rw.curve(combined, grid, of=quantities, beyond_reach=True),
            },
            repetitions,
        )
    say_rows(
        f"{len(quantities)} curves at {grid.size} temperatures", table_rows(taken, taken["open"], "openings")
    )
    say_target(
        "curves over opening", taken["four curves with errors"].wall / taken["open"].wall, 10.0, at_most=True
    )
    once, fourfold = peak_memory(FRAMES), peak_memory(4 * FRAMES)
    say(f"\npeak memory {once:.0f} MB for {FRAMES:,} frames a run, {fourfold:.0f} MB for {4 * FRAMES:,}")
    say_target("memory for four times the frames", fourfold / once, 1.2, at_most=True)
    say(f"this process held at most {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:.0f} MB")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 5)
