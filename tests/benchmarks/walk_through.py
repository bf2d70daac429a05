"""From a messy folder to checked runs, step by step and timed: 24 files, draft, edit of the named lines, combine.

    python tests/benchmarks/walk_through.py [ROWS]

The files hold energies of thirty quadratic degrees of freedom at eight temperatures, drawn exactly, in several formats:
restarts that overlap, banners, gzip, commas, Windows line ends, NetCDF, an empty file, notes, a file whose name and
remarks disagree about the temperature, one that tells none, and no unit of energy anywhere.  The commands are the installed
ones.  The time a person takes to answer is not in the table; what has to be answered is printed.
"""

from __future__ import annotations

import gzip
import json
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import TypeVar

import netCDF4
import numpy as np
import scipy.constants
from side_by_side import say, say_rows, say_target

from reweight.datasets.sampling import draw_gamma

GAS_CONSTANT = scipy.constants.R / 1000  # kJ/mol/K
SHAPE = 15.0  # half the degrees of freedom: <E> = SHAPE k_B T
TEMPERATURES = (300, 318, 337, 357, 378, 400, 424, 449)
STEP = 0.5  # ps
ASKED = 370.0  # K, where the answer is compared with the exact one
LARGEST_DEVIATION = 4.0  # standard errors; false alarms: 6e-5
FILES = 24
SECONDS = 60.0  # leaves a person one of two minutes

Result = TypeVar("Result")

ANSWERS = {
    ("", "energy_unit"): '"kJ/mol"',
    ("odd_337K", "temperature"): "337.0",
    ("last", "temperature"): "424.0",
}


def main() -> int:
    """Walk through; 1 if the answer is wrong."""
    rows = int(sys.argv[1]) if len(sys.argv) > 1 else 20_000
    seconds: dict[str, float] = {}
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        files = timed(seconds, "make the folder", lambda: make(folder, rows))
        say(f"{len(files)} files, {sum(path.stat().st_size for path in files) / 1e6:.1f} MB\n")
        say(timed(seconds, "draft", lambda: reweight(folder, "draft", *(str(path.name) for path in files))))
        study = folder / "study.toml"
        for line in timed(seconds, "edit (by script)", lambda: answer(study)):
            say(f"  edited: {line}")
        say("")
        say(timed(seconds, "combine", lambda: reweight(folder, "combine", "study.toml")))
        said = timed(
            seconds, "ask", lambda: reweight(folder, "curve", "study.nc", "--at", str(ASKED), "--json")
        )
    curve = json.loads(said)
    (energy,), (error,) = curve["mean_energy"], curve["mean_energy_standard_error"]
    exact = SHAPE * GAS_CONSTANT * ASKED
    deviation = abs(energy - exact) / error
    say(
        f"mean energy at {ASKED:g} K: {energy:.4f} +- {error:.4f} kJ/mol; exact {exact:.4f}; {deviation:.1f} errors off\n"
    )
    table = [("step", "seconds"), *((step, f"{taken:.2f}") for step, taken in seconds.items())]
    say_rows(f"a folder of {len(files)} files", table)
    total = sum(seconds.values()) - seconds["make the folder"]
    say_target("seconds from folder to answer, without a person's answers", total, SECONDS, at_most=True)
    return int(len(files) != FILES or deviation > LARGEST_DEVIATION)


def timed(seconds: dict[str, float], step: str, work: Callable[[], Result]) -> Result:
    """Do it and note how long it took."""
    start = time.perf_counter()
    result = work()
    seconds[step] = time.perf_counter() - start
    return result


def reweight(folder: Path, *arguments: str) -> str:
    """Run the installed command and return what it printed."""
    command = Path(sys.executable).with_name("reweight")
    done = subprocess.run([command, *arguments], cwd=folder, capture_output=True, text=True, check=False)
    if done.returncode:
        raise SystemExit(f"reweight {arguments[0]} ended with {done.returncode}: {done.stderr}")
    return done.stdout


def answer(study: Path) -> list[str]:
    """Fill in every value that begins with a question mark, as its author would."""
    lines, edited, run = [], [], ""
    for line in study.read_text("utf-8").splitlines():
        key, _, value = line.partition(" = ")
        if key == "name":
            run = json.loads(value)
        if value.startswith('"?'):
            line = f"{key} = {ANSWERS[run, key]}"
            edited.append(f"{run} {line}".strip())
        lines.append(line)
    study.write_text("\n".join(lines) + "\n", "utf-8")
    return edited


def make(folder: Path, rows: int) -> list[Path]:
    """Write the folder."""
    rng = np.random.default_rng(20240802)

    def drawn(temperature: float, first: int = 0) -> np.ndarray:
        energies = draw_gamma(SHAPE, GAS_CONSTANT * temperature, rows, rng, coefficient=0.8)
        return np.column_stack([STEP * (first + np.arange(rows)), energies])

    for temperature in TEMPERATURES:
        table = drawn(temperature)
        half, overlap = rows // 2, rows // 100
        write(folder / f"run_{temperature}K.part1.dat", table[: half + overlap], remark="started")
        write(folder / f"run_{temperature}K.part2.dat", table[half:], remark="continued from a checkpoint")
    write(folder / "again_300K.csv", drawn(300), delimiter=",")
    write(folder / "again_337K_windows.dat", drawn(337), newline="\r\n")
    plain = folder / "again_378K.dat"
    write(plain, drawn(378))
    (folder / "again_378K.dat.gz").write_bytes(gzip.compress(plain.read_bytes(), 1))
    plain.unlink()
    write_netcdf(folder / "again_424.nc", drawn(424), 424.0)
    write(folder / "odd_337K.dat", drawn(337), remark="temperature = 400 K")
    write(folder / "last.dat", drawn(424))
    (folder / "run_500K.dat").write_bytes(b"")
    (folder / "notes.txt").write_text("Ask again\nwhy the run at 500 K\nnever wrote anything.\n")
    return sorted(folder.iterdir())


def write(
    path: Path, table: np.ndarray, *, remark: str = "", delimiter: str = " ", newline: str = "\n"
) -> None:
    """Write a text file: a banner, a header without a unit of energy, rows."""
    header = f"simulation of thirty degrees of freedom\n{remark}\ntime[ps]{delimiter}potential"
    np.savetxt(path, table, fmt=["%.1f", "%.6f"], header=header, delimiter=delimiter, newline=newline)


def write_netcdf(path: Path, table: np.ndarray, temperature: float) -> None:
    """Write the same as NetCDF, with its temperature as an attribute."""
    with netCDF4.Dataset(path, "w") as dataset:
        dataset.temperature = temperature
        dataset.createDimension("sample", len(table))
        for name, column in zip(("time", "potential"), table.T, strict=True):
            variable = dataset.createVariable(name, "f8", ("sample",))
            variable[:] = column
        dataset["time"].units = "ps"


if __name__ == "__main__":
    sys.exit(main())
