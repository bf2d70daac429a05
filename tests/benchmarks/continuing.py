"""A study whose files grew by 1 %, continued and from scratch: ``python continuing.py [REPETITIONS]``.

8 text files of 1,000,000 rows each, step and energy.  Every time is of the whole: open the old combined file, read, decide,
solve, save.
"""

from __future__ import annotations

import io
import sys
import tempfile
from pathlib import Path

import numpy as np
import pandas as pd
from gamma_study import energies, temperatures
from side_by_side import medians, say, say_rows, say_target, table_rows

import reweight as rw
from reweight.files import hash_file

RUNS, ROWS = 8, 1_000_000


def write_inputs(folder: Path) -> tuple[Path, list[bytes]]:
    """One text file a run, and a study that names them; returned are the study and what the files grow by."""
    study = ['schema = 1\nenergy_unit = "reduced"\n[columns]\nenergy = 2\n']
    grown = []
    samples = energies(RUNS, ROWS + ROWS // 100)
    for number, (temperature, run) in enumerate(zip(temperatures(RUNS), samples, strict=True)):
        text = io.StringIO()
        pd.DataFrame({"step": np.arange(run.size), "energy": run}).to_csv(
            text, sep=" ", header=False, index=False, float_format="%.8f"
        )
        lines = text.getvalue().encode().splitlines(keepends=True)
        (folder / f"{number}.dat").write_bytes(b"".join(lines[:ROWS]))
        grown.append(b"".join(lines[ROWS:]))
        study.append(
            f'[[run]]\nname = "{number}"\ntemperature = {float(temperature)!r}\nfiles = "{number}.dat"\n'
        )
    (folder / "study.toml").write_text("".join(study))
    return folder / "study.toml", grown


def main(repetitions: int) -> None:
    """Time and print."""
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place)
        study, grown = write_inputs(folder)
        old, target, continued = (folder / name for name in ("old.nc", "scratch.nc", "continued.nc"))
        rw.save(rw.combine(study), old)
        for number, addition in enumerate(grown):
            with (folder / f"{number}.dat").open("ab") as stream:
                stream.write(addition)
        size = sum(path.stat().st_size for path in folder.glob("*.dat"))
        told: list[str] = []
        taken = medians(
            {
                "from scratch": lambda: rw.save(rw.combine(study), target, force=True),
                "continued": lambda: rw.save(
                    rw.combine(study, continued=old, tell=told.append), continued, force=True
                ),
                "hash alone": lambda: [hash_file(path) for path in folder.glob("*.dat")],
                "open alone": lambda: rw.open_combined(old),
            },
            repetitions,
        )
        same = target.read_bytes() == continued.read_bytes()
    say_rows(
        f"{RUNS} text files, {size / 1e6:.0f} MB, grown by 1 %",
        table_rows(taken, taken["continued"], "continued"),
    )
    say(f"\nread again: {told or 'nothing'}; the same bytes: {same}")
    say_target("from scratch over continued", taken["from scratch"].wall / taken["continued"].wall, 5.0)


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 3)
