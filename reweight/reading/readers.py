"""Which reader a file gets: told by its first bytes, never by its name.

A new format is one new reader and one row in ``READERS``.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from pathlib import Path

from reweight.reading.netcdf import NETCDF_MAGICS, NetcdfTable
from reweight.reading.source import Table, first_bytes
from reweight.reading.text import TextTable
from reweight.study import Format

__all__ = ["READERS", "open_table"]

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


def _content(path: Path) -> str:
    return "netcdf" if first_bytes(path, 4).startswith(NETCDF_MAGICS) else "text"
