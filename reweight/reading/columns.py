"""From what a study calls a column to its position in a table."""

from __future__ import annotations

import difflib
import re
from collections.abc import Sequence

from reweight.errors import DataFileError
from reweight.reading.source import Table, refusal

__all__ = ["resolve_columns"]

_SHOWN = 40  # names listed in a message


def resolve_columns(table: Table, wanted: Sequence[str | int], what: str) -> tuple[int, ...]:
    """Find columns in a table.

    Parameters
    ----------
    table : Table
    wanted : sequence of str or int
        Names, with or without the unit in brackets that follows them in the file, or positions counted from 1.
    what : str
        Key of the study that asks, for the message.

    Returns
    -------
    tuple of int
        Positions counted from 0.

    Raises
    ------
    DataFileError
        There is no such column, or several columns have the name.
    """
    return tuple(_position(table, each, what) for each in wanted)


def _position(table: Table, wanted: str | int, what: str) -> int:
    names = table.names
    if isinstance(wanted, int):
        if wanted > len(names):
            raise _missing(table, f"{what} must be one of the {len(names)} columns; got {wanted}.")
        return wanted - 1
    for candidates in (names, tuple(_without_unit(name) for name in names)):
        found = [place for place, name in enumerate(candidates) if name == wanted]
        if len(found) > 1:
            places = ", ".join(str(place + 1) for place in found)
            raise _missing(
                table,
                f"{what} must name one column; got {wanted!r}, the name of columns {places}. Use a position.",
            )
        if found:
            return found[0]
    near = difflib.get_close_matches(wanted, names, n=1)
    hint = f" Did you mean {near[0]!r}?" if near else ""
    raise _missing(table, f"{what} must be a column of the file; got {wanted!r}.{hint}")


def _without_unit(name: str) -> str:
    return re.sub(r"\s*(?:\[[^\]]*\]|\([^)]*\))$", "", name)


def _missing(table: Table, text: str) -> DataFileError:
    shown = ", ".join(f"{place}: {name!r}" for place, name in enumerate(table.names[:_SHOWN], start=1))
    more = ", ..." if len(table.names) > _SHOWN else ""
    return refusal(table.path, f"{text} Columns are {shown}{more}.")
