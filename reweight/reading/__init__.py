"""Reading data files: streamed, checked number by number, and accounted for.

A reader turns one file into a table of columns; which reader a file gets is decided by its first bytes, never by its
name.  A new format is one new reader and one row in ``READERS``.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from reweight.errors import StudyError
from reweight.reading.columns import resolve_columns
from reweight.reading.ledger import FileLedger
from reweight.reading.netcdf import NETCDF_MAGICS, NetcdfTable
from reweight.reading.source import Table, first_bytes, refusal
from reweight.reading.text import TextTable
from reweight.reading.times import Timekeeper
from reweight.study import Format, Run, Study

__all__ = ["READERS", "FileLedger", "Table", "Timekeeper", "open_table", "resolve_columns", "run_chunks"]

READERS: Mapping[str, Callable[[Path, Format], Table]] = {
    "netcdf": NetcdfTable,
    "text": TextTable,
}


def open_table(path: Path, declared: Format) -> Table:
    """Open a data file with the reader for its content.

    Parameters
    ----------
    path : pathlib.Path
        A plain file.
    declared : Format
        What the study says about its text files.

    Returns
    -------
    Table

    Raises
    ------
    DataFileError
        The file cannot be read or holds no rows of numbers.
    """
    return READERS[_content(path)](path, declared)


def run_chunks(
    study: Study, run: Run, ledgers: list[FileLedger], timekeeper: Timekeeper | None = None
) -> Iterator[NDArray[np.float64]]:
    """Read a run, its files one after the other.

    Parameters
    ----------
    study : Study
    run : Run
        One of the study's.
    ledgers : list of FileLedger
        Gets one entry a file.
    timekeeper : Timekeeper, optional
        Gets the times, if the study says in which column they are; they are checked in any case.

    Yields
    ------
    numpy.ndarray, shape (rows, 1 + number of observables)
        Energy of the whole system in the study's energy unit, then the observables in the study's order and units.
        Everything is finite.

    Raises
    ------
    DataFileError
        A file cannot be read without changing a number, lacks a column, or its times do not rise in equal steps.
    StudyError
        The study does not say which of several columns is the energy.
    """
    timekeeper = timekeeper or Timekeeper()
    for file in run.files:
        table = open_table(study.data_path(file), study.format)
        sums = _columns_to_sum(study, table)
        time = (
            () if study.columns.time is None else resolve_columns(table, study.columns.time, "columns.time")
        )
        read = sorted({column for summed in (*sums, time) for column in summed})
        places = [[read.index(column) for column in summed] for summed in sums]
        ledger = FileLedger(file)
        ledgers.append(ledger)
        for chunk in table.chunks(read, ledger):
            rows = np.empty((len(chunk), len(places)))
            with np.errstate(over="ignore", invalid="ignore"):  # refused by name just below
                for quantity, summed in enumerate(places):
                    rows[:, quantity] = sum(chunk[:, column] for column in summed)
                rows[:, 0] *= study.system.energy_multiplier
            _refuse_overflow(table.path, rows, ledger)
            if time:
                timekeeper.add(chunk[:, read.index(time[0])], table.path, ledger.rows_read - len(chunk) + 1)
            if ledger.first_energy is None:
                ledger.first_energy = float(rows[0, 0])
            ledger.last_energy = float(rows[-1, 0])
            ledger.kept += len(rows)
            yield rows


def _content(path: Path) -> str:
    return "netcdf" if first_bytes(path, 4).startswith(NETCDF_MAGICS) else "text"


def _columns_to_sum(study: Study, table: Table) -> list[tuple[int, ...]]:
    wanted = study.columns.energy
    if wanted is None:
        if len(table.names) > 1:
            raise StudyError(
                f"columns.energy must say which column is the energy; {table.path} has {len(table.names)}: "
                f"{', '.join(table.names[:40])}.",
                key="columns.energy",
            )
        wanted = (1,)
    energy = resolve_columns(table, wanted, "columns.energy")
    return [energy] + [
        resolve_columns(table, observable.column, f"observables.{name}.column")
        for name, observable in study.observables.items()
    ]


def _refuse_overflow(path: Path, rows: NDArray[np.float64], ledger: FileLedger) -> None:
    finite = np.isfinite(rows).all(axis=1)
    if not finite.all():
        row = ledger.rows_read - len(rows) + int(np.argmin(finite)) + 1
        raise refusal(
            path,
            "the sum of columns and its multiple for the whole system must stay finite.",
            line=row,
            unit="row",
        )
