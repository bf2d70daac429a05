"""The numbers of a file, read as it looks or with the one declaration that makes them all readable."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from reweight.errors import DataFileError
from reweight.reading import FileLedger, Table, open_table
from reweight.reading.blocks import opened
from reweight.reading.netcdf import NETCDF_MAGICS
from reweight.reading.source import first_bytes
from reweight.study import Format

__all__ = ["Numbers", "read_somehow"]

Numbers = tuple[NDArray[np.float64], str]

LARGEST_LOOK = 1 << 20  # rows; what a draft says of longer files is said of their first rows
LARGEST_AREA = 1 << 24  # numbers held at a time
_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eEdD][+-]?[0-9]+)?")
_LINES_OF_A_LOG = 2000  # in which its table must begin
_ROWS_OF_A_TABLE = 3  # that must follow a line of words for it to be a header


def read_somehow(path: Path) -> tuple[Table, Format, list[Numbers]]:
    """Read the first rows of all columns.

    Returns
    -------
    table : Table
    declared : Format
        What has to be declared to read it; nothing if it is read as it looks.
    numbers : list of (numpy.ndarray, str), one a column
        Numbers, shape (rows,), and what stopped the reading; no numbers for a column of words.

    Raises
    ------
    DataFileError
        The file cannot be opened as a table.
    """
    first_bytes(path, 1)  # a pipe must not be opened: nothing may ever come
    try:
        table = open_table(path, Format())
        numbers = _all_numbers(table)
        if all(values.size for values, _ in numbers):
            return table, Format(), numbers
    except DataFileError:
        table, numbers = None, []
    for declared in _declarations(path, words_are_columns=any(values.size for values, _ in numbers)):
        try:
            other = open_table(path, declared)
            found = _all_numbers(other)
        except DataFileError:
            continue
        if all(values.size for values, _ in found):
            return other, declared, found
    if table is None:
        table = open_table(path, Format())  # says why not
    return table, Format(), numbers


def _declarations(path: Path, *, words_are_columns: bool) -> list[Format]:
    """Formats worth a try when a text file does not hold numbers in all columns as it looks."""
    if first_bytes(path, 4).startswith(NETCDF_MAGICS):
        return []
    try:
        header = "" if words_are_columns else _header_of_a_log(path)
    except DataFileError:  # no text; what it is instead is said by the reader
        return []
    return [Format(decimal=","), *([Format(table=header)] if header else [])]


def _header_of_a_log(path: Path) -> str:
    """Find a line of words, after other lines, with as many words as the rows below it have numbers; empty if none is.

    A file that begins with its header is no log: what disturbs its rows is damage, and must not be passed over.
    """
    before: list[str] = []
    with opened(path, Format()) as lines:
        for line in range(1, _LINES_OF_A_LOG + 1):
            data = lines.read(0, line)
            if not data:
                return ""
            text = " ".join(data.decode("utf-8", errors="replace").split())
            if not text or text.startswith(("#", ";", "!", "%", "@", "&", "//")):
                continue
            before.append(text)
            rows = before[-_ROWS_OF_A_TABLE:]
            if len(before) > _ROWS_OF_A_TABLE and all(map(_is_row, rows)):
                header = before[-_ROWS_OF_A_TABLE - 1]
                return header if len(before) > _ROWS_OF_A_TABLE + 1 and _heads(header, rows) else ""
    return ""


def _fields(line: str) -> list[str]:
    return re.split(r"[,;]? ", line)


def _is_row(line: str) -> bool:
    return all(_NUMBER.fullmatch(field) for field in _fields(line))


def _heads(header: str, rows: list[str]) -> bool:
    words = _fields(header)
    return not any(_NUMBER.fullmatch(word) for word in words) and all(
        len(_fields(row)) == len(words) for row in rows
    )


def _all_numbers(table: Table) -> list[Numbers]:
    """Numbers of all columns: read together, or one by one if some hold words or one is damaged in the first rows."""
    places = list(range(len(table.names)))
    together, fault = _read(table, places)
    if together.size:
        return [(together[:, place], fault) for place in places]
    ends = [_numbers(table, place) for place in (0, -1 % len(places))]
    if all(fault == of_one for _, of_one in ends):
        return [(np.empty(0), fault)] * len(places)  # the file as a whole, whatever is read of it
    return [_numbers(table, place) for place in places]


def _numbers(table: Table, place: int) -> Numbers:
    values, fault = _read(table, [place])
    return values.reshape(-1), fault


def _read(table: Table, places: list[int]) -> Numbers:
    """Read the first rows of columns, and what stopped the reading before there were enough."""
    parts, rows, most = [], 0, min(LARGEST_LOOK, LARGEST_AREA // max(len(places), 1))
    try:
        for chunk in table.chunks(places, FileLedger(str(table.path))):
            parts.append(chunk[: most - rows])
            rows += len(parts[-1])
            if rows >= most:
                break
    except DataFileError as error:
        return (np.concatenate(parts) if parts else np.empty((0, len(places)))), str(error)
    return (np.concatenate(parts) if parts else np.empty((0, len(places)))), ""
