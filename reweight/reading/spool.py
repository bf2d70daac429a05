"""Rows of one temperature, set aside while the files that hold them among others are read."""

from __future__ import annotations

import tempfile
import weakref
from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from reweight.errors import InputError

__all__ = ["Spool"]

Array = NDArray[np.float64]

_IN_MEMORY = (
    1 << 22
)  # bytes; more go to a temporary file without a name, which is gone however the program ends
_ROWS_AT_A_TIME = 1 << 16


class Spool:
    """Rows in the order in which they came, and from which file each came.

    Parameters
    ----------
    width : int
        Numbers a row.
    """

    def __init__(self, width: int) -> None:
        self._width = width
        self._file = tempfile.SpooledTemporaryFile(max_size=_IN_MEMORY)  # noqa: SIM115 - open while this object lives
        weakref.finalize(self, self._file.close)
        self.rows = 0

    def add(self, rows: Array, file: int | NDArray[np.intp]) -> None:
        """Append rows of the file with this number, or of these files, one a row.

        Raises
        ------
        InputError
            There is no room for temporary data.
        """
        stored = np.column_stack([rows, np.broadcast_to(file, len(rows))])
        try:
            self._file.write(stored.tobytes())
        except OSError as error:
            raise InputError(
                f"rows sorted by temperature must be set aside in a temporary file; the system says: {error.strerror}. "
                f"Free some room in {tempfile.gettempdir()!r}, or set the environment variable TMPDIR to another folder."
            ) from error
        self.rows += len(rows)

    def chunks(self) -> Iterator[Array]:
        """Rows from the first to the last."""
        for stored in self._stored(self.rows):
            yield stored[:, :-1]

    def rows_of_files(self, first: int, files: int) -> NDArray[np.int64]:
        """How many of the first so many rows came from each file, shape (files,)."""
        counts = np.zeros(files, dtype=np.int64)
        for stored in self._stored(first):
            counts += np.bincount(stored[:, -1].astype(np.intp), minlength=files)
        return counts

    def _stored(self, rows: int) -> Iterator[Array]:
        size = 8 * (self._width + 1)
        for start in range(0, rows, _ROWS_AT_A_TIME):
            self._file.seek(start * size)
            data = bytearray(self._file.read(min(_ROWS_AT_A_TIME, rows - start) * size))
            yield np.frombuffer(data).reshape(-1, self._width + 1)
