"""From the files of a run, or of a replica, to energies and observables, with times and temperatures if known."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import zip_longest
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from reweight.errors import StudyError
from reweight.reading.columns import resolve_columns
from reweight.reading.known import KnownPart
from reweight.reading.ledger import FileLedger
from reweight.reading.readers import open_table
from reweight.reading.restarts import Restarts
from reweight.reading.source import Table, refusal
from reweight.reading.text import TextTable
from reweight.reading.times import Timekeeper
from reweight.reading.volumes import Volumes, refuse_enthalpy
from reweight.study import Run, Study

__all__ = ["Records", "record_chunks", "rewritten", "run_chunks"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Records:
    """Rows of one file that follow each other.

    Attributes
    ----------
    rows : numpy.ndarray, shape (N, 1 + number of observables)
        Energy of the whole system (at constant pressure its enthalpy) in the study's energy unit, then the observables
        in the study's order and units.  Everything is finite.
    times : numpy.ndarray, shape (N,), or None
        As in the file; None if the study names no column of times.
    temperatures : numpy.ndarray, shape (N,), or None
        As in the file; None if the study names no column of temperatures.
    replaced_temperatures : numpy.ndarray, shape (M,), or None
        Of the rows that followed and were left out, because a restart wrote them again.
    ledger : FileLedger
        Of the file; ``kept`` is left to whoever keeps the rows.
    path : pathlib.Path
    first_row : int
        Number of the first row in the file, counted from 1.
    """

    rows: Array
    times: Array | None
    temperatures: Array | None
    replaced_temperatures: Array | None
    ledger: FileLedger
    path: Path
    first_row: int


def run_chunks(
    study: Study,
    run: Run,
    ledgers: list[FileLedger],
    timekeeper: Timekeeper | None = None,
    known: Sequence[KnownPart] = (),
) -> Iterator[Array]:
    """Read a run at one temperature, its files one after the other.

    Parameters
    ----------
    study : Study
    run : Run
        One of the study's.
    ledgers : list of FileLedger
        Gets one entry a file.
    timekeeper : Timekeeper, optional
        Gets the times, if the study says in which column they are; they are checked in any case.
    known : sequence of KnownPart, optional
        Of the run's first files: their rows are left out, though in the ledger.

    Yields
    ------
    numpy.ndarray, shape (rows, 1 + number of observables)
        See :class:`Records`; without rows that a restart wrote again.

    Raises
    ------
    DataFileError
        A file cannot be read without changing a number, lacks a column, or its times do not rise in equal steps.
    StudyError
        The study does not say which of several columns is the energy.
    """
    timekeeper = timekeeper or Timekeeper()
    for records in record_chunks(study, run.files, ledgers, known):
        if records.times is not None:
            timekeeper.add(records.times, records.path, records.first_row)
        records.ledger.kept += len(records.rows)
        yield records.rows


def record_chunks(
    study: Study,
    files: Sequence[str],
    ledgers: list[FileLedger],
    known: Sequence[KnownPart] = (),
    *,
    restarts: bool = True,
) -> Iterator[Records]:
    """Read files one after the other; arguments and errors as for :func:`run_chunks`.

    Parameters
    ----------
    restarts : bool
        Leave out rows that a later part wrote again; otherwise times may begin anew, for another temperature.
    """
    volumes = None if study.pressure_energy is None else Volumes(study.pressure_energy)
    again = Restarts(_starts(study, files, known) if restarts else [[]] * len(files))
    for place, (file, part) in enumerate(zip_longest(files, known)):
        if part is not None and not part.grown:
            ledgers.append(replace(part.ledger))
            continue
        table = _table(study, file, part)
        sums = _columns_to_sum(study, table)
        time = _single(table, study.columns.time, "columns.time")
        temperature = _single(table, study.columns.temperature, "columns.temperature")
        read = sorted({column for summed in (*sums, time, temperature) for column in summed})
        places = [[read.index(column) for column in summed] for summed in sums]
        ledger = FileLedger(file) if part is None else replace(part.ledger)
        ledgers.append(ledger)
        for chunk in table.chunks(read, ledger):
            rows = np.empty((len(chunk), len(places)))
            with np.errstate(over="ignore", invalid="ignore"):  # refused by name just below
                for quantity, summed in enumerate(places):
                    rows[:, quantity] = sum(chunk[:, column] for column in summed)
                rows[:, 0] *= study.system.energy_multiplier
            if volumes is not None:
                rows = volumes.added(rows, table.path, ledger)
            _refuse_overflow(table.path, rows, ledger)
            first_row = ledger.rows_read - len(chunk) + 1
            times = chunk[:, read.index(time[0])] if time else None
            temperatures = chunk[:, read.index(temperature[0])] if temperature else None
            keep = len(rows)
            if times is not None:
                ledger.first_time = float(times[0]) if ledger.first_time is None else ledger.first_time
                ledger.last_time = float(times[-1])
                keep = again.kept(times, place, ledger.repeated_headers, table.path, first_row)
                ledger.replaced += len(rows) - keep
            if ledger.first_energy is None:
                ledger.first_energy = float(rows[0, 0])
            ledger.last_energy = float(rows[-1, 0])
            if keep or temperatures is not None:
                yield Records(
                    rows=rows[:keep],
                    times=None if times is None else times[:keep],
                    temperatures=None if temperatures is None else temperatures[:keep],
                    replaced_temperatures=None if temperatures is None else temperatures[keep:],
                    ledger=ledger,
                    path=table.path,
                    first_row=first_row,
                )
        again.refuse_replaced(table.path, ledger)
        if volumes is not None and not known and place == len(files) - 1:  # known ones fluctuated
            volumes.refuse_constant(table.path)


def rewritten(study: Study, files: Sequence[str], known: Sequence[KnownPart]) -> bool:
    """Whether what follows the known parts of files replaces rows of these."""
    last = known[-1].ledger  # its last row is kept, and times of kept rows rise
    if last.last_time is None:
        return False
    again = Restarts(_starts(study, files, known))
    return again.limit(len(known) - 1, last.repeated_headers - 1) <= last.last_time


def _starts(study: Study, files: Sequence[str], known: Sequence[KnownPart]) -> list[list[float]]:
    """First times of all sections that may replace others; none of files that are known as a whole."""
    wanted = study.columns.time
    starts: list[list[float]] = []
    for file, part in zip_longest(files, known):
        if wanted is None or (part is not None and not part.grown):
            starts.append([])
            continue
        table = _table(study, file, part)
        starts.append(table.section_starts(_single(table, wanted, "columns.time")[0]))
    return starts


def _table(study: Study, file: str, part: KnownPart | None) -> Table:
    """Rows of a file, or those after its known part."""
    path = study.data_path(file)
    return open_table(path, study.format) if part is None else TextTable(path, study.format, known=part)


def _single(table: Table, wanted: tuple[str | int, ...] | None, what: str) -> tuple[int, ...]:
    return () if wanted is None else resolve_columns(table, wanted, what)


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
    observables = [
        resolve_columns(table, observable.column, f"observables.{name}.column")
        for name, observable in study.observables.items()
    ]
    if study.columns.volume is None:
        return [energy, *observables]
    refuse_enthalpy(table, energy)
    return [energy, *observables, resolve_columns(table, study.columns.volume, "columns.volume")]


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
