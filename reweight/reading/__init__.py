"""Reading data files: streamed, checked number by number, and accounted for.

A reader turns one file into a table of columns (``readers.py``); the columns of a run's files become energies and
observables (``records.py``), sorted by temperature where a column says it (``sorting.py``, ``regrouping.py``).
"""

from reweight.reading.columns import resolve_columns
from reweight.reading.known import KnownPart, UnknownError, known_part
from reweight.reading.ledger import FileLedger
from reweight.reading.readers import READERS, open_table
from reweight.reading.records import rewritten, run_chunks
from reweight.reading.regrouping import regrouped
from reweight.reading.sorting import SortedRows, sorted_by_temperature
from reweight.reading.source import Table
from reweight.reading.times import Timekeeper
from reweight.reading.walks import ReplicaRecord

__all__ = [
    "READERS",
    "FileLedger",
    "KnownPart",
    "ReplicaRecord",
    "SortedRows",
    "Table",
    "Timekeeper",
    "UnknownError",
    "known_part",
    "open_table",
    "regrouped",
    "resolve_columns",
    "rewritten",
    "run_chunks",
    "sorted_by_temperature",
]
