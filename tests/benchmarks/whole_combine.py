"""The whole of ``combine`` from NetCDF, itemised, against a bare read: ``python whole_combine.py [REPETITIONS]``.

32 files of 1,000,000 energies.  Items are timed one after the other on one thread; the whole is the product as it is:
a file is hashed while it is read.
"""

from __future__ import annotations

import sys
import tempfile
from pathlib import Path

import netCDF4
import numpy as np
from gamma_study import energies, leaves_of, nodes_for, solved, temperatures
from side_by_side import medians, say_rows, say_target, table_rows

import reweight as rw
from reweight.deciding import decide
from reweight.files import hash_file
from reweight.series.transient import transient_length

RUNS, ROWS = 32, 1_000_000


def write_inputs(folder: Path) -> Path:
    """One NetCDF file a run, and a study that names them."""
    lines = ['schema = 1\nenergy_unit = "reduced"\n[columns]\nenergy = "energy"\n']
    samples = energies(RUNS, ROWS)
    for number, (temperature, run) in enumerate(zip(temperatures(RUNS), samples, strict=True)):
        with netCDF4.Dataset(folder / f"{number}.nc", "w") as file:
            file.createDimension("sample", ROWS)
            file.createVariable("energy", "f8", ("sample",), fill_value=False)[:] = run
        lines.append(
            f'[[run]]\nname = "{number}"\ntemperature = {float(temperature)!r}\nfiles = "{number}.nc"\n'
        )
    (folder / "study.toml").write_text("".join(lines))
    return folder / "study.toml"


def bare_read(folder: Path) -> float:
    """Read every value, and nothing else."""
    total = 0.0
    for number in range(RUNS):
        with netCDF4.Dataset(folder / f"{number}.nc") as file:
            variable = file["energy"]
            variable.set_auto_mask(False)
            total += float(variable[:][0])
    return total


def main(repetitions: int) -> None:
    """Time and print."""
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place)
        study = write_inputs(folder)
        samples = energies(RUNS, ROWS)
        nodes = nodes_for(samples)
        tallied = [leaves_of(run, nodes) for run in samples]
        names = [str(number) for number in range(RUNS)]
        series = [tally.complete()[1].means()[:, 0] for tally, _ in tallied]
        combined = rw.combine(study)
        target = folder / "combined.out"
        taken = medians(
            {
                "bare read": lambda: bare_read(folder),
                "hash": lambda: [hash_file(folder / f"{number}.nc") for number in range(RUNS)],
                "tally": lambda: [leaves_of(run, nodes) for run in samples],
                "transients": lambda: [transient_length(each) for each in series],
                "transients and inefficiencies": lambda: decide(
                    [t for t, _ in tallied], ["auto"] * RUNS, names
                ),
                "solve": lambda: solved(tallied),
                "write": lambda: rw.save(combined, target, force=True),
                "whole combine and save": lambda: rw.save(rw.combine(study), target, force=True),
            },
            repetitions,
        )
    say_rows(
        f"{RUNS} runs x {ROWS:,} energies from NetCDF", table_rows(taken, taken["bare read"], "bare reads")
    )
    say_target(
        "whole over bare read",
        taken["whole combine and save"].wall / taken["bare read"].wall,
        25.0,
        at_most=True,
    )


if __name__ == "__main__":
    np.seterr(all="raise", under="ignore")
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 3)
