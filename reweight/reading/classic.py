"""Whether a NetCDF file in one of the classic formats is as long as its header says.

NetCDF-C reads zeros, or what its buffer held before, where the end of such a file is missing, and says nothing.
(HDF5, the other format, knows its own length.)

Layout of the header: "NetCDF Classic and 64-bit Offset File Formats" and its extension CDF-5, in the NetCDF
User's Guide, Unidata; from memory, and checked in the tests against files that the library wrote.
"""

from __future__ import annotations

import math
import struct
from pathlib import Path
from typing import BinaryIO

__all__ = ["is_complete"]

_ITEM_SIZES = {1: 1, 2: 1, 3: 2, 4: 4, 5: 4, 6: 8, 7: 1, 8: 2, 9: 4, 10: 8, 11: 8}  # bytes, by type
_LARGEST_RANK = 1024


def is_complete(path: Path) -> bool:
    """Tell whether the last number the header promises is in the file; True if it is not a classic file."""
    with path.open("rb") as stream:
        magic = stream.read(4)
        if magic[:3] != b"CDF":
            return True
        try:
            return _Header(stream, version=magic[3]).promised_size() <= path.stat().st_size
        except (struct.error, LookupError, OverflowError, ValueError, OSError):
            return False


class _Header:
    def __init__(self, stream: BinaryIO, *, version: int) -> None:
        self._stream = stream
        self._count = ">Q" if version == 5 else ">I"
        self._offset = ">I" if version == 1 else ">Q"

    def promised_size(self) -> int:
        """Bytes up to and including the last number."""
        records = self._number(self._count)
        lengths = [self._dimension() for _ in range(self._list())]
        self._skip_attributes()
        end = 0
        record_variables = []
        for _ in range(self._list()):
            self._skip_padded(self._number(self._count))
            rank = self._number(self._count)
            if rank > _LARGEST_RANK:
                raise OverflowError
            shape = [lengths[index] for index in self._numbers(rank)]
            self._skip_attributes()
            item = _ITEM_SIZES[self._number(">I")]
            self._number(self._count)  # the stored size is capped for large variables
            begin = self._number(self._offset)
            if shape[:1] == [0]:  # the unlimited dimension
                record_variables.append((begin, item * math.prod(shape[1:])))
            else:
                end = max(end, begin + item * math.prod(shape))
        # Each record is padded to a multiple of four bytes, unless there is only one variable in it.
        stride = sum(_padded(size) if len(record_variables) > 1 else size for _, size in record_variables)
        if records and record_variables:
            end = max(end, *(begin + (records - 1) * stride + size for begin, size in record_variables))
        return end

    def _number(self, form: str) -> int:
        (number,) = struct.unpack(form, self._stream.read(struct.calcsize(form)))
        return int(number)

    def _numbers(self, count: int) -> list[int]:
        return [self._number(self._count) for _ in range(count)]

    def _list(self) -> int:
        self._number(">I")  # a tag: dimensions, attributes or variables
        return self._number(self._count)

    def _dimension(self) -> int:
        self._skip_padded(self._number(self._count))
        return self._number(self._count)

    def _skip_attributes(self) -> None:
        for _ in range(self._list()):
            self._skip_padded(self._number(self._count))
            item = _ITEM_SIZES[self._number(">I")]
            self._skip_padded(item * self._number(self._count))

    def _skip_padded(self, size: int) -> None:
        self._stream.seek(_padded(size), 1)


def _padded(size: int) -> int:
    return -(-size // 4) * 4
