"""Rows sorted by the temperature in one of their columns.

The files are read once.  The rows of every temperature are set aside (``spool.py``), so memory stays flat in whatever order
temperatures come and are asked for.  In the order of the rows nothing changes, so the sorted rows are those of a file
written for that temperature alone.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from reweight import units
from reweight.clock import Clock
from reweight.errors import DataFileError, StudyError
from reweight.reading.ledger import FileLedger
from reweight.reading.records import Records, record_chunks
from reweight.reading.source import refusal
from reweight.reading.spool import Spool
from reweight.reading.times import Timekeeper
from reweight.study import Run, Study
from reweight.study.values import COLD

__all__ = ["NO_LADDER", "SortedRows", "refuse_cold", "sorted_by_temperature"]

_LONGEST_LADDER = 256  # temperatures; each has a file open
_RAREST = 0.05  # of the mean number of rows at a temperature: a fluctuating quantity has rare values, a ladder has none
_FEWEST = 10  # rows at a temperature, on average

NO_LADDER = (
    "A ladder of temperatures has few values, each seen often. If this is the thermostat's instantaneous temperature, which "
    "fluctuates, it is not the temperature of the run: remove columns.temperature and give every run the temperature that "
    "the thermostat was set to."
)


@dataclass(kw_only=True)
class SortedRows:
    """All rows at one temperature.

    Attributes
    ----------
    temperature : float
        In the study's unit.
    spool : Spool
    ledgers : list of FileLedger
        Of all files that were read.
    replaced, dropped : dict of int to int
        Rows at this temperature that were left out, by number of the file.
    timekeeper : Timekeeper
    """

    temperature: float
    spool: Spool
    ledgers: list[FileLedger]
    replaced: dict[int, int] = field(default_factory=dict)
    dropped: dict[int, int] = field(default_factory=dict)
    timekeeper: Timekeeper = field(default_factory=Timekeeper)

    def files(self, transient: int) -> tuple[dict[str, Any], ...]:
        """Ledger entries of the rows at this temperature, the first `transient` of which are not used.

        A file has an entry for every temperature; the sums of these are its account.
        """
        count = len(self.ledgers)
        kept = self.spool.rows_of_files(self.spool.rows, count)
        unused = self.spool.rows_of_files(transient, count)
        entries = []
        for place, ledger in enumerate(self.ledgers):
            replaced, dropped = self.replaced.get(place, 0), self.dropped.get(place, 0)
            if (read := int(kept[place]) + replaced + dropped) == 0:
                continue
            entries.append(
                {
                    **dataclasses.asdict(ledger),
                    "rows_read": read,
                    "kept": int(kept[place] - unused[place]),
                    "transient": int(unused[place]),
                    "replaced": replaced,
                    "dropped": dropped,
                }
            )
        return tuple(entries)

    def clock(self, unit: str | None) -> Clock | None:
        """Time between rows, if there is a column of times."""
        return self.timekeeper.clock(unit)


def sorted_by_temperature(study: Study, run: Run) -> list[SortedRows]:
    """Read a run whose rows are at several temperatures.

    Returns
    -------
    list of SortedRows
        Cold to hot.

    Raises
    ------
    DataFileError
        As for :func:`~reweight.reading.records.run_chunks`; or the temperatures are no ladder.
    """
    ledgers: list[FileLedger] = []
    found: dict[float, SortedRows] = {}
    faults: list[
        DataFileError
    ] = []  # of the times; that temperatures are no ladder explains them, too, and better
    for records in record_chunks(study, run.files, ledgers, restarts=False):
        assert records.temperatures is not None
        values, places = np.unique(records.temperatures, return_inverse=True)
        if len(found | dict.fromkeys(values.tolist())) > _LONGEST_LADDER:
            raise refusal(
                records.path,
                f"columns.temperature must hold at most {_LONGEST_LADDER} temperatures; got more in the first "
                f"{records.ledger.rows_read} rows, from {values[0]:.10g} to {values[-1]:.10g}. {NO_LADDER}",
            )
        for place, value in enumerate(values.tolist()):
            chosen = np.flatnonzero(places == place)
            if value not in found:
                refuse_cold(study, records, value, int(chosen[0]))
                found[value] = SortedRows(
                    temperature=value, spool=Spool(records.rows.shape[1]), ledgers=ledgers
                )
            rows = found[value]
            if records.times is not None and not faults:
                try:
                    rows.timekeeper.add(
                        records.times[chosen], records.path, records.first_row + int(chosen[0])
                    )
                except DataFileError as fault:
                    faults.append(fault)
            rows.spool.add(records.rows[chosen], len(ledgers) - 1)
    _refuse_fluctuating(study, run, [rows for _, rows in sorted(found.items())])
    if faults:
        raise faults[0]
    return [rows for _, rows in sorted(found.items())]


def refuse_cold(study: Study, records: Records, value: float, place: int) -> None:
    """Refuse a temperature that is none, found at this place among the rows."""
    if value < COLD and not study.temperature_unit_is_certain:
        raise StudyError(
            f"temperature_unit must be given, because temperatures below {COLD:g} may be kelvin or degrees Celsius; got "
            f'{value:g} in a row of {records.path}. Write temperature_unit = "K" or "degC".',
            key="temperature_unit",
        )
    if not units.to_kelvin(value, study.temperature_unit) > 0:
        raise refusal(
            records.path,
            f"temperatures must lie above absolute zero; got {value:.10g}.",
            line=records.first_row + place,
            unit="row",
        )


def _refuse_fluctuating(study: Study, run: Run, found: Sequence[SortedRows]) -> None:
    counts = np.array([rows.spool.rows for rows in found])
    rarest = int(counts.argmin())
    if counts[rarest] < _RAREST * counts.mean() or counts.mean() < _FEWEST:
        raise refusal(
            study.data_path(run.files[0]),
            f"columns.temperature must hold a ladder of temperatures; got {counts.size} values in {counts.sum()} rows, "
            f"from {found[0].temperature:.10g} to {found[-1].temperature:.10g}, with {found[rarest].temperature:.10g} in "
            f"only {counts[rarest]} of them. {NO_LADDER}",
        )
