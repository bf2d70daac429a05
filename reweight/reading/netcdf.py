"""Columns in NetCDF files, read in slices.

A column is a numeric variable with one dimension; in a group it is called ``group/variable``.  NetCDF-C is not thread
safe, so every call into it holds one lock.
"""

from __future__ import annotations

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

_ROWS_AT_A_TIME = 1 << 16
_LARGEST_STORED_CHUNK = 1 << 28  # bytes; a file can declare one of terabytes, which would be allocated
_LARGEST_EXPANSION = 1100  # deflate shrinks at most 1032 times; more is a length that was only declared


class NetcdfTable:
    """Numeric variables with one dimension, of one NetCDF file.

    Parameters
    ----------
    path : pathlib.Path
    declared : Format
        Says nothing about such files; accepted like by every reader.

    Raises
    ------
    DataFileError
        The file cannot be opened or has no column.
    """

    def __init__(self, path: Path, declared: Format) -> None:
        self.path = path
        if not is_complete(path):
            raise refusal(path, "file must be as long as its header says; its end is missing. Copy it again.")
        with _Opened(path) as dataset, NETCDF_LOCK:
            self._names = tuple(_columns(dataset))
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
                rows = self._common_length(names, variables)
                self._refuse_promises(names, variables, size)
            for start in range(0, rows, _ROWS_AT_A_TIME):
                stop = min(start + _ROWS_AT_A_TIME, rows)
                chunk = np.empty((stop - start, len(names)))
                for place, (name, variable) in enumerate(zip(names, variables, strict=True)):
                    chunk[:, place] = self._slice(name, variable, start, stop)
                ledger.rows_read += len(chunk)
                yield chunk
            ledger.sha256 = digest.result()
        ledger.size = size

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
            if isinstance(stored, list) and stored[0] * variable.dtype.itemsize > _LARGEST_STORED_CHUNK:
                raise refusal(
                    self.path,
                    f"variable {name!r} must be stored in chunks of at most {_LARGEST_STORED_CHUNK >> 20} MiB; "
                    f"got {stored[0]} rows a chunk. Write it again with smaller chunks.",
                )
            declared = variable.shape[0] * variable.dtype.itemsize
            if declared > _LARGEST_EXPANSION * size:
                raise refusal(
                    self.path,
                    f"variable {name!r} must fit the file; it declares {declared} bytes, the file has {size}. "
                    "The file is incomplete or damaged.",
                )

    def _slice(self, name: str, variable: Any, start: int, stop: int) -> NDArray[np.float64]:
        try:
            with NETCDF_LOCK:
                values = np.ma.asarray(variable[start:stop])
        except (OSError, RuntimeError) as error:
            raise refusal(
                self.path,
                f"variable {name!r} must be readable; NetCDF says: {error}.",
                line=start + 1,
                unit="row",
            ) from error
        numbers = np.asarray(values.data, dtype=np.float64)
        bad = ~np.isfinite(numbers)
        if np.ma.is_masked(values):
            bad |= np.ma.getmaskarray(values)
        if bad.any():
            index = int(np.argmax(bad))
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

        try:
            with NETCDF_LOCK:
                self._dataset = netCDF4.Dataset(self._path, "r")
        except (OSError, RuntimeError) as error:
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
