"""Reading against the libraries underneath, and memory that does not grow: ``python reading_speed.py [REPETITIONS]``.

Text: one file of 200 MB with a step, an energy and an observable a row, read by the C parser of pandas as a whole, and as
``combine`` reads it: in blocks, every field checked, hashed.  NetCDF: one file of 200 MB, read by netCDF4 as a whole, and as
``combine`` reads it, in slices, every number checked, with and without the hash that is taken beside it.  A hash takes
several times as long as a read from memory, so the speed asked for is that of the reading without it.

Memory: ``combine`` on 10 and on 100 million rows from NetCDF, each in a process of its own.
"""

from __future__ import annotations

import functools
import subprocess
import sys
import tempfile
from pathlib import Path
from unittest import mock

import netCDF4
import numpy as np
import pandas
from side_by_side import Taken, medians, say, say_rows, say_target, table_rows

from reweight.files import hash_file
from reweight.memory import keep_freed_memory
from reweight.reading import FileLedger, open_table
from reweight.study import Format

SIZE = 200_000_000  # bytes
AT_ONCE = 1_000_000  # rows
RUNS = 4
FEW, MANY = 10_000_000, 100_000_000  # rows of a study

TARGET = 0.6  # of the speed of the bare library
MOST_GROWTH = 50.0  # MB

# The high-water mark in /proc is that of this process; the one of getrusage begins with the parent's.
COMBINING = """
import re, sys
from pathlib import Path
import reweight as rw
combined = rw.combine(sys.argv[1])
rows = sum(run.rows for run in combined.runs)
print(rows, int(re.search(r"VmHWM:\\s*(\\d+) kB", Path("/proc/self/status").read_text())[1]) / 1000)
"""


def write_text(path: Path, delimiter: str) -> None:
    """Rows until the file has its size."""
    rng = np.random.default_rng(20261201)
    step = 0
    with path.open("wb") as stream:
        stream.write(delimiter.join(["step", "potential", "order"]).encode() + b"\n")
        while stream.tell() < SIZE:
            rows = AT_ONCE // 10
            np.savetxt(
                stream,
                np.column_stack(
                    [np.arange(step, step + rows), -2500 + 40 * rng.normal(size=rows), rng.random(rows)]
                ),
                fmt=["%d", "%.6f", "%.8f"],
                delimiter=delimiter,
            )
            step += rows


def write_netcdf(path: Path, rows: int, temperature: float, seed: int) -> None:
    """Gamma-distributed energies, never held as a whole."""
    rng = np.random.default_rng(seed)
    with netCDF4.Dataset(path, "w") as file:
        file.createDimension("sample", rows)
        energy = file.createVariable("energy", "f8", ("sample",), fill_value=False)
        for start in range(0, rows, AT_ONCE):
            energy[start : start + AT_ONCE] = rng.gamma(100.0, temperature, min(AT_ONCE, rows - start))


def write_study(folder: Path, rows: int) -> Path:
    """Four runs with so many rows in all."""
    lines = ['schema = 1\nenergy_unit = "reduced"\n']
    for number in range(RUNS):
        temperature = 1 + 0.1 * number
        write_netcdf(folder / f"{number}.nc", rows // RUNS, temperature, number)
        lines.append(f'[[run]]\nname = "{number}"\ntemperature = {temperature}\nfiles = "{number}.nc"\n')
    (folder / "study.toml").write_text("".join(lines))
    return folder / "study.toml"


def as_combine_reads(path: Path, columns: tuple[int, ...]) -> int:
    """Every row, each chunk dropped."""
    ledger = FileLedger(path.name)
    return sum(len(rows) for rows in open_table(path, Format()).chunks(columns, ledger))


def bare_netcdf(path: Path) -> int:
    """Every value, and nothing else."""
    with netCDF4.Dataset(path) as file:
        variable = file["energy"]
        variable.set_auto_mask(False)
        return len(variable[:])


def without_hash(path: Path) -> int:
    """Read NetCDF as combine does, but for the hash."""
    with mock.patch("reweight.reading.netcdf.hash_file", return_value=""):
        return as_combine_reads(path, (0,))


def say_speed(title: str, bare: str, ours: str, taken: dict[str, Taken]) -> None:
    """Write the times, and the speed of our reading over that of the library."""
    say_rows(title, table_rows(taken, taken[bare], "bare reads"))
    say_target("speed of our reading over the bare one", taken[bare].wall / taken[ours].wall, TARGET)
    say_target("the same in processor time", taken[bare].processor / taken[ours].processor, TARGET)


def memory_of_combine(rows: int) -> float:
    """Peak resident size in MB of a process that combines so many rows."""
    with tempfile.TemporaryDirectory() as place:
        study = write_study(Path(place), rows)
        done = subprocess.run(
            [sys.executable, "-c", COMBINING, study], check=True, capture_output=True, text=True
        )
    read, megabytes = done.stdout.split()
    if int(read) != rows:
        raise SystemExit(f"{read} of {rows} rows were read")
    return float(megabytes)


def main(repetitions: int) -> None:
    """Time and print."""
    with tempfile.TemporaryDirectory() as place:
        path = Path(place) / "data"
        for delimiter, name, separator in ((" ", "blanks", r"\s+"), (",", "commas", ",")):
            write_text(path, delimiter)
            taken = medians(
                {
                    "pandas, C parser": functools.partial(pandas.read_csv, path, sep=separator, engine="c"),
                    "hash": functools.partial(hash_file, path),
                    "as combine reads": functools.partial(as_combine_reads, path, (1, 2)),
                },
                repetitions,
            )
            title = f"{path.stat().st_size / 1e6:.0f} MB of text, columns separated by {name}"
            say_speed(title, "pandas, C parser", "as combine reads", taken)
        write_netcdf(path, SIZE // 8, 1.0, 0)
        keep_freed_memory()
        taken = medians(
            {
                "netCDF4": functools.partial(bare_netcdf, path),
                "hash": functools.partial(hash_file, path),
                "as combine reads": functools.partial(as_combine_reads, path, (0,)),
                "the same without the hash": functools.partial(without_hash, path),
            },
            repetitions,
        )
        say_speed(
            f"{path.stat().st_size / 1e6:.0f} MB of NetCDF", "netCDF4", "the same without the hash", taken
        )
    few, many = (memory_of_combine(rows) for rows in (FEW, MANY))
    say(f"\npeak memory of combine: {few:.0f} MB with {FEW:,} rows, {many:.0f} MB with {MANY:,}")
    say_target("growth in MB", many - few, MOST_GROWTH, at_most=True)


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 5)
