"""Remake the shipped studies: ``python -m reweight.datasets.make FOLDER``.

This takes a quarter of an hour, nearly all of it for the chain.  The same seeds give the same bytes, and fewer rows
give the first rows of the same files, because the random numbers are drawn row by row.  Seeds and settings stand in
`BEAD_CHAIN` and `SQUARE_LATTICE` and nowhere else.
"""

import argparse
import hashlib
import json
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reweight.datasets.bead_chain import BeadChain, simulate_bead_chain
from reweight.datasets.square_lattice import simulate_square_lattice

__all__ = [
    "BEAD_CHAIN",
    "SQUARE_LATTICE",
    "Setting",
    "main",
    "make_bead_chain",
    "make_square_lattice",
    "write_manifest",
]

CHAIN = BeadChain()
LATTICE_LENGTH = 16


@dataclass(frozen=True, slots=True, kw_only=True)
class Setting:
    """How one study is simulated and described.

    Attributes
    ----------
    folder : str
        Inside the folder that is written.
    temperatures : tuple of float
        K, or reduced.
    run_name, file_name : str
        Formats of the temperature.
    row_count, interval, seed : int
        Rows a file, steps from row to row, seed of the one generator of the study.
    header : str
        First line of each file, without the comment sign.
    units : dict of str to str
        Of the columns; "1" where there is none.
    origin : str
        What was simulated, in one sentence.
    study : str
        The study file up to its runs.
    """

    folder: str
    temperatures: tuple[float, ...]
    run_name: str
    file_name: str
    row_count: int
    interval: int
    seed: int
    header: str
    units: dict[str, str]
    origin: str
    study: str


BEAD_CHAIN = Setting(
    folder="bead_chain",
    temperatures=(245.0, 265.0, 285.0, 310.0, 340.0, 380.0, 430.0, 490.0),
    run_name="{:.0f}K",
    file_name="chain_{:.0f}K.dat",
    row_count=10_000,
    interval=900,
    seed=20240917,
    header="step  potential[kJ/mol]  radius_of_gyration[nm]",
    units={"step": "trials", "potential": "kJ/mol", "radius_of_gyration": "nm"},
    origin=(
        f"Metropolis sampling of one chain of {CHAIN.bead_count} beads with rigid bonds, bending stiffness and a"
        " truncated pair attraction; eight independent runs from a stretched start."
    ),
    study=f"""\
schema = 1
title = "Collapse of a {CHAIN.bead_count}-bead chain in a poor solvent"
energy_unit = "kJ/mol"
temperature_unit = "K"
energy_kind = "potential"

[system]
count = {CHAIN.bead_count}
per = "bead"

[columns]
energy = "potential"

[observables.radius_of_gyration]
column = "radius_of_gyration"
unit = "nm"
is = "plain"
moments = [1, 2]
""",
)

SQUARE_LATTICE = Setting(
    folder="square_lattice",
    temperatures=(2.0, 2.15, 2.3, 2.45, 2.65, 3.0),
    run_name="T={:.2f}",
    file_name="lattice_{:.2f}.dat",
    row_count=20_000,
    interval=4,
    seed=20240918,
    header="step  energy  magnetization",
    units={"step": "sweeps", "energy": "J", "magnetization": "1"},
    origin=(
        f"Heat-bath sampling of the periodic {LATTICE_LENGTH} x {LATTICE_LENGTH} square lattice of two-state sites"
        " without field, E = -(sum over neighbouring pairs of s s'); six independent runs from an ordered start."
    ),
    study=f"""\
schema = 1
title = "Ordering of the {LATTICE_LENGTH} x {LATTICE_LENGTH} lattice of two-state sites"
energy_unit = "reduced"
temperature_unit = "reduced"
energy_kind = "potential"

[system]
count = {LATTICE_LENGTH**2}
per = "site"
length = {LATTICE_LENGTH}
dimension = 2
states = "2^{LATTICE_LENGTH**2}"

[columns]
energy = "energy"

[observables.magnetization]
column = "magnetization"
unit = "1"
is = "total"
moments = [1, 2, 4]
absolute = true
""",
)


def make_bead_chain(folder: Path, *, setting: Setting = BEAD_CHAIN) -> list[dict[str, Any]]:
    """Simulate and write the study of the bead chain.

    Parameters
    ----------
    folder : pathlib.Path
        Gets a folder of its own for the study.
    setting : Setting

    Returns
    -------
    list of dict
        The study's entries in the manifest.
    """
    series = simulate_bead_chain(
        CHAIN, setting.temperatures, setting.row_count, setting.interval, np.random.default_rng(setting.seed)
    )
    tables = [
        np.column_stack([series.steps, potential, radius])
        for potential, radius in zip(series.potential, series.radius_of_gyration, strict=True)
    ]
    return _write_study(folder, setting, tables, number_formats=["%d", "%.4f", "%.5f"])


def make_square_lattice(folder: Path, *, setting: Setting = SQUARE_LATTICE) -> list[dict[str, Any]]:
    """Simulate and write the study of the square lattice; parameters as in `make_bead_chain`."""
    series = simulate_square_lattice(
        LATTICE_LENGTH,
        setting.temperatures,
        setting.row_count,
        setting.interval,
        np.random.default_rng(setting.seed),
    )
    tables = [
        np.column_stack([series.steps, energy, magnetization])
        for energy, magnetization in zip(series.energy, series.magnetization, strict=True)
    ]
    return _write_study(folder, setting, tables, number_formats=["%d", "%d", "%d"])


def write_manifest(folder: Path, entries: list[dict[str, Any]]) -> None:
    """Write ``manifest.json``: each data file with its hash, size, origin, units, script and seed."""
    (folder / "manifest.json").write_text(
        json.dumps(entries, indent=1) + "\n", encoding="utf-8", newline="\n"
    )


def main(arguments: Sequence[str] | None = None) -> None:
    """Remake everything in a folder."""
    parser = argparse.ArgumentParser(prog="python -m reweight.datasets.make", description=__doc__)
    parser.add_argument(
        "folder", type=Path, help="where to write; made if missing, files of these names replaced"
    )
    parser.add_argument("--rows", type=int, help="write only this many rows a file (for a quick look)")
    options = parser.parse_args(arguments)
    changes = {} if options.rows is None else {"row_count": options.rows}
    entries = make_square_lattice(options.folder, setting=replace(SQUARE_LATTICE, **changes))
    entries += make_bead_chain(options.folder, setting=replace(BEAD_CHAIN, **changes))
    write_manifest(options.folder, entries)
    for entry in entries:
        print(f"{entry['sha256']}  {entry['file']}")


def _write_study(
    folder: Path, setting: Setting, tables: list[NDArray[Any]], number_formats: list[str]
) -> list[dict[str, Any]]:
    target = folder / setting.folder
    target.mkdir(parents=True, exist_ok=True)
    entries = []
    study = setting.study
    for temperature, table in zip(setting.temperatures, tables, strict=True):
        name = setting.file_name.format(temperature)
        with (target / name).open("w", encoding="ascii", newline="\n") as stream:
            np.savetxt(stream, table, fmt=number_formats, header=setting.header)
        study += (
            f'\n[[run]]\nname = "{setting.run_name.format(temperature)}"\n'
            f'temperature = {temperature}\nfiles = ["{name}"]\n'
        )
        entries.append(
            {
                "file": f"{setting.folder}/{name}",
                "sha256": hashlib.sha256((target / name).read_bytes()).hexdigest(),
                "rows": len(table),
                "origin": setting.origin,
                "units": setting.units,
                "script": f"{setting.folder}.py",
                "seed": setting.seed,
            }
        )
    (target / "study.toml").write_text(study, encoding="utf-8", newline="\n")
    (target / "README.md").write_text(_readme(setting, entries), encoding="utf-8", newline="\n")
    return entries


def _readme(setting: Setting, entries: list[dict[str, Any]]) -> str:
    columns = "\n".join(f"- `{column}`: {unit}" for column, unit in setting.units.items())
    hashes = "\n".join(f"    {entry['sha256']}  {Path(entry['file']).name}" for entry in entries)
    return f"""\
# {setting.folder.replace("_", " ").capitalize()}

{setting.origin}
Made by `{setting.folder}.py` of this package, for this purpose. `study.toml` describes the runs.

Columns and units, {setting.row_count} rows a file, one every {setting.interval} {setting.units["step"]}
(the start-up is part of the files):

{columns}

To make the files again, byte for byte (seed {setting.seed}):

    python -m reweight.datasets.make FOLDER

SHA-256 of the files:

{hashes}
"""


if __name__ == "__main__":
    main()
