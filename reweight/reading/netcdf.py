"""Columns in NetCDF files, read in slices.

A column is a numeric variable with one dimension; in a group it is called ``group/variable``.  NetCDF-C is not thread
safe, so every call into it holds one lock.
"""

from __future__ import annotations

import os
import threading
from collections.abc import Iterator, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reweight.files import hash_file
from reweight.reading.classic import is_complete
from reweight.reading.ledger import FileLedger
from reweight.reading.source import refusal
from reweight.study import Format

__all__ = ["NETCDF_LOCK", "NETCDF_MAGICS", "NetcdfTable"]

NETCDF_LOCK = threading.Lock()
NETCDF_MAGICS = (b"CDF\x01", b"CDF\x02", b"CDF\x05", b"\x89HDF")

# HDF5 keeps a file that it could not open, and takes another of the same place on the disk for it: that reads as zeros.
_DAMAGED: set[tuple[int, int]] = set()

_ROWS_AT_A_TIME = 1 << 18  # a quarter as many take twice as long
_LARGEST_EXPANSION = 1100  # deflate shrinks at most 1032 times; more is a length that was only declared


class NetcdfTable:
    """Numeric variables with one dimension, of one NetCDF file.

    Parameters
    ----------
    path : pathlib.Path
    declared : Format
        Its caps.

    Raises
    ------
    DataFileError
        The file cannot be opened or has no column.
    """

    def __init__(self, path: Path, declared: Format) -> None:
        self.path = path
        self._declared = declared
        if not is_complete(path):
            raise refusal(path, "file must be as long as its header says; its end is missing. Copy it again.")
        with _Opened(path) as dataset, NETCDF_LOCK:
            self._names = tuple(_columns(dataset))
        if len(self._names) > declared.most_columns:
            raise refusal(
                path,
                f"file must have at most {declared.most_columns} numeric variables with one dimension; got "
                f"{len(self._names)}. If it is meant to have as many, raise most_columns under [format] in the study.",
            )
        if not self._names:
            raise refusal(path, "file must hold a numeric variable with one dimension; it has none.")

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the columns."""
        return self._names

    def chunks(self, columns: Sequence[int], ledger: FileLedger) -> Iterator[NDArray[np.float64]]:
        """Read columns from the first row to the last; see :class:`reweight.reading.source.Table`."""
        names = [self._names[column] for column in columns]
        size = self.path.stat().st_size
        with ThreadPoolExecutor(max_workers=1) as beside, _Opened(self.path) as dataset:
            digest = beside.submit(hash_file, self.path)
            with NETCDF_LOCK:
                every = _columns(dataset)
                variables = [every[name] for name in names]
                for variable in variables:
                    variable.set_always_mask(False)  # plain arrays where nothing is missing
                rows = self._common_length(names, variables)
                self._refuse_promises(names, variables, size)
            for start in range(0, rows, _ROWS_AT_A_TIME):
                stop = min(start + _ROWS_AT_A_TIME, rows)
                numbers = [
                    self._slice(name, variable, start, stop)
                    for name, variable in zip(names, variables, strict=True)
                ]
                # A single column, the most frequent case, need not be copied.
                chunk = numbers[0][:, np.newaxis] if len(numbers) == 1 else np.stack(numbers, axis=1)
                ledger.rows_read += len(chunk)
                yield chunk
            ledger.sha256 = digest.result()
        ledger.size = size

    def section_starts(self, column: int) -> list[float]:
        """First number of a column; see :class:`reweight.reading.source.Table`."""
        name = self._names[column]
        with _Opened(self.path) as dataset:
            with NETCDF_LOCK:
                variable = _columns(dataset)[name]
                self._common_length([name], [variable])
                self._refuse_promises([name], [variable], self.path.stat().st_size)
            return [float(self._slice(name, variable, 0, 1)[0])]

    def _common_length(self, names: Sequence[str], variables: Sequence[Any]) -> int:
        dimensions = {variable.get_dims()[0].name: len(variable.get_dims()[0]) for variable in variables}
        if len(dimensions) > 1 or len({variable.shape for variable in variables}) > 1:
            found = ", ".join(
                f"{name}({variable.dimensions[0]} = {variable.shape[0]})"
                for name, variable in zip(names, variables, strict=True)
            )
            raise refusal(self.path, f"columns must share one dimension; got {found}.")
        (rows,) = variables[0].shape
        if rows == 0:
            raise refusal(self.path, f"data file must hold rows of numbers; {names[0]!r} has none.")
        return int(rows)

    def _refuse_promises(self, names: Sequence[str], variables: Sequence[Any], size: int) -> None:
        for name, variable in zip(names, variables, strict=True):
            stored = variable.chunking()  # None in the classic formats
            if (
                isinstance(stored, list)
                and stored[0] * variable.dtype.itemsize > self._declared.largest_chunk
            ):
                raise refusal(
                    self.path,
                    f"variable {name!r} must be stored in chunks of at most {self._declared.largest_chunk / 2**20:g} MiB; "
                    f"got {stored[0]} rows a chunk. Write it again with smaller chunks, or raise largest_chunk (bytes) "
                    "under [format] in the study.",
                )
            declared = variable.shape[0] * variable.dtype.itemsize
            if declared > (self._declared.largest_expansion or _LARGEST_EXPANSION) * size:
                raise refusal(
                    self.path,
                    f"variable {name!r} must fit the file; it declares {declared} bytes, the file has {size}. "
                    "The file is incomplete or damaged. If it was packed this well, raise largest_expansion (bytes from "
                    "one byte) under [format] in the study.",
                )

    def _slice(self, name: str, variable: Any, start: int, stop: int) -> NDArray[np.float64]:
        try:
            with NETCDF_LOCK:
                values = variable[start:stop]
        except (OSError, RuntimeError) as error:
            raise refusal(
                self.path,
                f"variable {name!r} must be readable; NetCDF says: {error}.",
                line=start + 1,
                unit="row",
            ) from error
        with np.errstate(invalid="ignore"):  # a damaged float can be a signalling NaN; refused just below
            missing = np.ma.is_masked(values)
            numbers = np.asarray(np.ma.getdata(values), dtype=np.float64)
        finite = np.isfinite(numbers)
        if missing or not finite.all():
            index = int(np.argmax(~finite | np.ma.getmaskarray(values)))
            found = "a missing value" if np.ma.getmaskarray(values)[index] else str(numbers[index])
            raise refusal(
                self.path,
                f"variable {name!r} must hold finite numbers; got {found} (index {start + index} counted from 0).",
                line=start + index + 1,
                unit="row",
            )
        return numbers


class _Opened:
    """A dataset, opened and closed while no other thread is inside NetCDF-C."""

    def __init__(self, path: Path) -> None:
        self._path = path

    def __enter__(self) -> Any:
        import netCDF4

        place = os.stat(self._path)
        identity = (place.st_dev, place.st_ino)
        if identity in _DAMAGED:
            raise refusal(
                self._path,
                "file must be undamaged when it is first opened; it was not, and the HDF5 library would mix what it "
                "remembers with what is there now. Start the program again, or copy the file under a new name.",
            )
        try:
            with NETCDF_LOCK:
                self._dataset = netCDF4.Dataset(self._path, "r")
        except (OSError, RuntimeError, UnicodeDecodeError) as error:
            _DAMAGED.add(identity)
            raise refusal(
                self._path, f"file must be a complete NetCDF file; NetCDF says: {error}. Copy it again."
            ) from error
        return self._dataset

    def __exit__(self, *exception: object) -> None:
        with NETCDF_LOCK:
            self._dataset.close()


def _columns(group: Any, prefix: str = "") -> Mapping[str, Any]:
    found = {
        f"{prefix}{name}": variable
        for name, variable in group.variables.items()
        if len(variable.dimensions) == 1
        and isinstance(variable.dtype, np.dtype)
        and variable.dtype.kind in "iuf"
    }
    for name, inner in group.groups.items():
        found.update(_columns(inner, f"{prefix}{name}/"))
    return found
