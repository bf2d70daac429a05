"""Files that follow a replica from temperature to temperature: their rows, taken at equal times, sorted by temperature."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator, Sequence

import numpy as np
from numpy.typing import NDArray

from reweight.errors import DataFileError
from reweight.reading.ledger import FileLedger
from reweight.reading.records import Records, record_chunks
from reweight.reading.sorting import NO_LADDER, SortedRows, refuse_cold
from reweight.reading.source import refusal
from reweight.reading.spool import Spool
from reweight.reading.times import Timekeeper
from reweight.reading.walks import ReplicaRecord, Walks
from reweight.study import Study

__all__ = ["regrouped"]

Array = NDArray[np.float64]

_SAME_TIME = 1e-9  # relative


def regrouped(study: Study) -> tuple[list[SortedRows], ReplicaRecord]:
    """Read the replicas of an exchange, row by row at the same time, and sort their rows by temperature.

    Returns
    -------
    list of SortedRows
        Cold to hot, all of the same length.
    ReplicaRecord

    Raises
    ------
    DataFileError
        A temperature is missing in a row, replicas do not go together in time, or the temperatures are no ladder.
    """
    ledgers: list[FileLedger] = []
    queues = [_Queue(study, replica.files, ledgers) for replica in study.replicas]
    for queue in queues:
        queue.fill()
    # A file that is empty or missing was refused by its reader, so every replica has a first row.
    ladder = _ladder(study, queues)
    sorted_rows = [
        SortedRows(temperature=value, spool=Spool(queues[0].records.rows.shape[1]), ledgers=ledgers)
        for value in ladder.tolist()
    ]
    walks = Walks(np.array([study.beta(value) for value in ladder.tolist()]))
    timekeeper = Timekeeper()
    while all(queue.fill() for queue in queues):
        length = min(queue.left for queue in queues)
        taken = [queue.take(length) for queue in queues]
        _refuse_other_times(taken)
        places = _places(ladder, taken)
        if taken[0].times is not None:
            timekeeper.add(taken[0].times, taken[0].path, taken[0].first_row)
        replicas = np.argsort(places, axis=1)
        rows = np.stack([records.rows for records in taken], axis=1)  # (N, K, columns)
        rows = np.take_along_axis(rows, replicas[:, :, None], axis=1)
        walks.add(places, replicas, rows[:, :, 0])
        files = np.array([queue.file for queue in queues])
        for place, into in enumerate(sorted_rows):
            into.spool.add(rows[:, place], files[replicas[:, place]])
    _account_for_the_rest(queues, sorted_rows, ladder)
    for into in sorted_rows:
        into.timekeeper = timekeeper
    names = tuple(replica.name for replica in study.replicas)
    return sorted_rows, walks.record(names, ladder)


class _Queue:
    """Rows of one replica that were read and not yet taken."""

    def __init__(self, study: Study, files: Sequence[str], ledgers: list[FileLedger]) -> None:
        self._own: list[FileLedger] = []
        self._all = ledgers
        self._stream = record_chunks(study, files, self._own)
        self._numbers: dict[int, int] = {}
        self.replaced: list[tuple[int, Array, NDArray[np.intp]]] = []  # file, temperatures, rows at each
        self.records: Records
        self.left = 0

    @property
    def file(self) -> int:
        """Number among all files of the one that the rows taken last are of."""
        return self._numbers[id(self.records.ledger)]

    def fill(self) -> bool:
        """Have rows, if there are more; False at the end of the replica."""
        while self.left == 0:
            following = next(self._stream, None)
            if following is None:
                return False
            if id(following.ledger) not in self._numbers:
                self._numbers[id(following.ledger)] = len(self._all)
                self._all.append(following.ledger)
            self.records, self.left = following, len(following.rows)
            if following.replaced_temperatures is not None and following.replaced_temperatures.size:
                self.replaced.append(
                    (self.file, *np.unique(following.replaced_temperatures, return_counts=True))
                )
        return True

    def take(self, length: int) -> Records:
        """The next rows, no more than are left."""
        records = self.records
        start = len(records.rows) - self.left
        part = slice(start, start + length)
        self.left -= length
        return dataclasses.replace(
            records,
            rows=records.rows[part],
            times=None if records.times is None else records.times[part],
            temperatures=None if records.temperatures is None else records.temperatures[part],
            first_row=records.first_row + start,
        )

    def rest(self) -> Iterator[Records]:
        """All rows left, in pieces."""
        while self.fill():
            yield self.take(self.left)


def _temperatures(taken: Sequence[Records]) -> Array:
    return np.column_stack([records.temperatures for records in taken if records.temperatures is not None])


def _ladder(study: Study, queues: Sequence[_Queue]) -> Array:
    first = np.array([_temperatures([queue.records])[0, 0] for queue in queues])
    ladder = np.unique(first)
    for queue, value in zip(queues, first.tolist(), strict=True):
        refuse_cold(study, queue.records, value, 0)
    if ladder.size < first.size:
        twice = next(value for value in ladder if (first == value).sum() > 1)
        holders = [
            queue.records.path.name for queue, value in zip(queues, first, strict=True) if value == twice
        ]
        raise refusal(
            queues[0].records.path,
            f"every temperature must be held by one replica; got {twice:.10g} in {', '.join(holders)}. List the files of "
            "one replica in one [[replica]], and runs that do not exchange as [[run]].",
            line=1,
            unit="row",
        )
    return ladder


def _places(ladder: Array, taken: Sequence[Records]) -> NDArray[np.intp]:
    """Place on the ladder of every replica in every row, shape (N, K)."""
    temperatures = _temperatures(taken)
    places = np.minimum(np.searchsorted(ladder, temperatures), ladder.size - 1)
    strange = ladder[places] != temperatures
    if strange.any():
        row, replica = map(int, np.argwhere(strange)[0])
        shown = ", ".join(f"{value:.10g}" for value in ladder[:8]) + (", ..." if ladder.size > 8 else "")
        raise refusal(
            taken[replica].path,
            f"columns.temperature must be one of the ladder that the first rows show ({shown}); got "
            f"{temperatures[row, replica]:.10g}, one of {np.unique(temperatures).size} values in {temperatures.size} rows. "
            f"{NO_LADDER}",
            line=taken[replica].first_row + row,
            unit="row",
        )
    gaps = np.sort(places, axis=1) != np.arange(ladder.size)
    if gaps.any():
        row = int(np.argwhere(gaps)[0, 0])
        missing = ladder[np.setdiff1d(np.arange(ladder.size), places[row])[0]]
        counts = np.bincount(places[row], minlength=ladder.size)
        holders = [
            f"{records.path.name} (row {records.first_row + row})"
            for records, place in zip(taken, places[row], strict=True)
            if counts[place] > 1
        ]
        raise _gap(
            taken,
            row,
            f"every temperature must be held by one replica at any time; got none at {missing:.10g} and several in "
            f"{', '.join(holders)}",
        )
    return places


def _gap(taken: Sequence[Records], row: int, text: str) -> DataFileError:
    return refusal(
        taken[0].path,
        f"{text}. A replica may lack rows: correct its file"
        + (", or name the column of times under [columns]." if taken[0].times is None else "."),
        line=taken[0].first_row + row,
        unit="row",
    )


def _refuse_other_times(taken: Sequence[Records]) -> None:
    if taken[0].times is None:
        return
    times = np.column_stack([records.times for records in taken if records.times is not None])
    other = ~np.isclose(times, times[:, :1], rtol=_SAME_TIME, atol=0.0)
    if other.any():
        row, replica = map(int, np.argwhere(other)[0])
        raise _gap(
            taken,
            row,
            f"replicas must be recorded at the same times; got {times[row, 0]:.10g} here and {times[row, replica]:.10g} in "
            f"{taken[replica].path.name} (row {taken[replica].first_row + row})",
        )


def _account_for_the_rest(queues: Sequence[_Queue], sorted_rows: list[SortedRows], ladder: Array) -> None:
    """Count rows that were replaced, and rows beyond the end of the shortest replica, which are dropped.

    Raises
    ------
    DataFileError
        Replicas without a clock are not equally long, so that nobody knows which rows are of equal time.
    """
    for queue in queues:
        for records in queue.rest():
            if records.times is None:
                raise refusal(
                    records.path,
                    "replicas must have the same number of rows; this one goes on where another ends. Rows of equal number "
                    "must be of equal time: cut the files, or name the column of times under [columns].",
                    line=records.first_row,
                    unit="row",
                )
            assert records.temperatures is not None
            records.ledger.why_dropped = "later than the end of the shortest replica"
            at, counts = np.unique(records.temperatures, return_counts=True)
            _count(at, counts, ladder, queue.file, [rows.dropped for rows in sorted_rows])
        for file, at, counts in queue.replaced:
            _count(at, counts, ladder, file, [rows.replaced for rows in sorted_rows])


def _count(
    temperatures: Array, counts: NDArray[np.intp], ladder: Array, file: int, into: list[dict[int, int]]
) -> None:
    for temperature, count in zip(temperatures, counts.tolist(), strict=True):
        nearest = into[int(np.abs(ladder - temperature).argmin())]
        nearest[file] = nearest.get(file, 0) + count
