"""What became of every row of a file, and which bytes it was."""

from __future__ import annotations

from dataclasses import dataclass

__all__ = ["FileLedger"]


@dataclass(slots=True)
class FileLedger:
    """Account of one data file; readers and the steps after them fill it in.

    Attributes
    ----------
    path : str
        The file as named in the study.
    rows_read : int
        Rows in the file; the sum of the next four.
    kept, transient, replaced, dropped : int
        Rows that count, that belong to the discarded beginning of the run, that a restart wrote again, and that
        were left out for another reason.
    why_dropped : str
        The reason, if there is one.
    first_energy, last_energy : float or None
        Energy of the whole system in the first and last row, in the study's energy unit; None without rows.
    first_time, last_time : float or None
        Times of those rows as they stand in the file, if the study names a column of times.
    lines : int
        Line ends of a text file.
    blank_lines : int
        Lines of a text file with nothing in them.
    repeated_headers : int
        Headers written again inside the file, as by a simulation that was started again.
    skipped_lines : int
        Lines of a log that belong to no table of the declared header.
    size : int
        Bytes of the file.
    sha256 : str
        Hash of those bytes; empty until the file has been read to its end.
    """

    path: str
    rows_read: int = 0
    kept: int = 0
    transient: int = 0
    replaced: int = 0
    dropped: int = 0
    why_dropped: str = ""
    first_energy: float | None = None
    last_energy: float | None = None
    first_time: float | None = None
    last_time: float | None = None
    lines: int = 0
    blank_lines: int = 0
    repeated_headers: int = 0
    skipped_lines: int = 0
    size: int = 0
    sha256: str = ""

    @property
    def balanced(self) -> bool:
        """Whether every row read is accounted for."""
        return self.rows_read == self.kept + self.transient + self.replaced + self.dropped
