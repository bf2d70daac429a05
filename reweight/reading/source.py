"""What every reader offers, and the checks that come before any format matters."""

from __future__ import annotations

import os
import stat
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from reweight.errors import DataFileError
from reweight.notation import printable
from reweight.reading.ledger import FileLedger

__all__ = ["Table", "first_bytes", "refusal"]


class Table(Protocol):
    """Columns of numbers in one file, read from the beginning as often as asked and never held as a whole."""

    @property
    def path(self) -> Path:
        """The file."""
        ...

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the columns; ``"1"``, ``"2"``, ... if the file has none."""
        ...

    def chunks(self, columns: Sequence[int], ledger: FileLedger) -> Iterator[NDArray[np.float64]]:
        """Read columns from the first row to the last.

        Parameters
        ----------
        columns : sequence of int, length k
            Positions counted from 0, in the order wanted.
        ledger : FileLedger
            Gets the number of rows, the size and the hash.

        Yields
        ------
        numpy.ndarray, shape (rows, k)
            Finite numbers; at least one row.

        Raises
        ------
        DataFileError
            The file cannot be read without changing a number.
        """
        ...

    def section_starts(self, column: int) -> list[float]:
        """First number of a column in each section of the file, found without reading the numbers between.

        A text file has as many sections as headers; any other file is one.  While :meth:`chunks` runs, the ledger's
        ``repeated_headers`` is the number of the section, counted from 0, that the rows just yielded are of.
        """
        ...


def refusal(path: Path, text: str, *, line: int | None = None, unit: str = "line") -> DataFileError:
    """Make the error for a file, or for a line (or row, counted from 1) of it."""
    place = printable(str(path)) if line is None else f"{printable(str(path))}, {unit} {line}"
    return DataFileError(f"{place}: {text}", path=str(path), line=line)


def first_bytes(path: Path, count: int) -> bytes:
    """Read the beginning of a plain file.

    Raises
    ------
    DataFileError
        There is no such file, it is a folder or a device, or it may not be read.
    """
    try:
        mode = os.stat(path).st_mode
        if not stat.S_ISREG(mode):
            kind = "a folder" if stat.S_ISDIR(mode) else "a pipe or a device"
            raise refusal(path, f"data must be in a plain file; got {kind}. Name a file.")
        with path.open("rb") as stream:
            return stream.read(count)
    except (OSError, ValueError) as error:
        if isinstance(error, DataFileError):
            raise
        said = error.strerror if isinstance(error, OSError) else error
        raise refusal(path, f"data file must be readable; the system says: {said}.") from error
