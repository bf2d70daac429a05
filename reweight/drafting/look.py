"""What one data file shows: columns with their units and a summary of their numbers, remarks, attributes."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from reweight.drafting.numbers import read_somehow
from reweight.drafting.remarks import attributes_of, remarks_of
from reweight.drafting.words import Heading, Role, read_heading
from reweight.errors import ReweightError
from reweight.study import Format

__all__ = ["ColumnLook", "FileLook", "look_at"]

MOST_SETTINGS = 256  # distinct values up to which a column may hold set values


@dataclass(frozen=True, slots=True, kw_only=True)
class ColumnLook:
    """A column of numbers.

    Attributes
    ----------
    heading : Heading
    position : int
        Counted from 1.
    rows : int
        How many were looked at.
    first, last : float
    mean, variance : float
        Of the second half of the rows, where a transient is less likely.
    distinct : tuple of float
        All values in ascending order, if they are few; empty otherwise.
    changes : int
        How often a value differs from the one before.
    whole : bool
        Whether all are whole numbers.
    goes_back : bool
        Whether any value is not above the one before.
    """

    heading: Heading
    position: int
    rows: int
    first: float
    last: float
    mean: float
    variance: float
    distinct: tuple[float, ...]
    changes: int
    whole: bool
    goes_back: bool

    @property
    def constant(self) -> bool:
        """Whether all values are the same."""
        return len(self.distinct) == 1


@dataclass(frozen=True, slots=True, kw_only=True)
class FileLook:
    """A file.

    Attributes
    ----------
    path : pathlib.Path
    names : tuple of str
        Of all columns, as the reader calls them; empty if the file cannot be read at all.
    named : bool
        Whether the file names its columns.
    headings : tuple of Heading
        Of all columns.
    columns : tuple of ColumnLook
        Those that hold numbers.
    format : Format
        What has to be declared to read it.
    remarks : tuple of str
        Lines that are no rows, from the beginning of a text file.
    attributes : mapping
        Attributes of a NetCDF file.
    trouble : str
        Why the file cannot be read, or not to its end; empty if nothing was found.
    """

    path: Path
    names: tuple[str, ...] = ()
    headings: tuple[Heading, ...] = ()
    columns: tuple[ColumnLook, ...] = ()
    format: Format = field(default_factory=Format)
    remarks: tuple[str, ...] = ()
    attributes: Mapping[str, str] = field(default_factory=dict)
    trouble: str = ""

    @property
    def named(self) -> bool:
        """Whether the file names its columns."""
        return self.names != tuple(str(place + 1) for place in range(len(self.names)))

    @property
    def rows(self) -> int:
        """Rows looked at."""
        return max((column.rows for column in self.columns), default=0)


def look_at(path: Path) -> FileLook:
    """Look at a file; one that cannot be read says why instead of raising."""
    try:
        table, declared, numbers = read_somehow(path)
        attributes, units = attributes_of(path)
        remarks = () if attributes or units else remarks_of(path)
    except ReweightError as error:
        return FileLook(path=path, trouble=str(error))
    headings = tuple(read_heading(name, units.get(name, "")) for name in table.names)
    columns = [
        _summary(values, heading, place)
        for place, (heading, (values, _)) in enumerate(zip(headings, numbers, strict=True))
        if values.size
    ]
    faults = [
        fault
        for heading, (values, fault) in zip(headings, numbers, strict=True)
        if fault and (values.size or not columns or heading.role is not Role.OTHER)
    ]
    return FileLook(
        path=path,
        names=table.names,
        headings=headings,
        columns=tuple(columns),
        format=declared,
        remarks=remarks,
        attributes=attributes,
        trouble=faults[0] if faults else "",
    )


def _summary(values: NDArray[np.float64], heading: Heading, place: int) -> ColumnLook:
    settled = values[values.size // 2 :]
    with np.errstate(
        over="ignore", invalid="ignore"
    ):  # absurd magnitudes tell nothing, and nothing is said of them
        center = float(np.mean(settled))
        variance = float(np.mean((settled - center) ** 2))
        changed = np.diff(values)
    distinct = np.unique(values)
    return ColumnLook(
        heading=heading,
        position=place + 1,
        rows=values.size,
        first=float(values[0]),
        last=float(values[-1]),
        mean=center,
        variance=variance,
        distinct=tuple(distinct.tolist()) if distinct.size <= MOST_SETTINGS else (),
        changes=int(np.count_nonzero(changed)),
        whole=bool(np.all(values == np.rint(values))),
        goes_back=bool(np.any(changed <= 0)),
    )
