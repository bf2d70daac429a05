"""Compressed files, told by their first bytes and unpacked as far as is asked.

A few bytes can unpack to terabytes.  What is unpacked is never held as a whole, so such a file costs time, not memory;
a cap on the expansion, from a size on that no honest file of ours reaches by chance, saves the time as well.
"""

from __future__ import annotations

import bz2
import gzip
import io
import lzma
from collections.abc import Callable, Mapping
from typing import Any, Protocol, cast

__all__ = ["COMPRESSED_MAGICS", "ExpansionError", "unpacked"]

USUAL_EXPANSION = 100  # rows of numbers shrink 2 to 20 times, rows that repeat the same few numbers further
SMALL = 1 << 28  # bytes unpacked before the expansion is looked at

_AT_ONCE = 1 << 18
_LARGEST_DICTIONARY = 1 << 28  # bytes; xz files may ask for 4 GiB, the strongest usual setting for 64 MiB


class ExpansionError(Exception):
    """A file unpacks to much more than its size."""


class _Stream(Protocol):
    """What decompressors of the standard library offer."""

    @property
    def eof(self) -> bool: ...

    @property
    def needs_input(self) -> bool: ...

    @property
    def unused_data(self) -> bytes: ...

    def decompress(self, data: bytes, max_length: int, /) -> bytes: ...


class _Streams(io.RawIOBase):
    """One or several compressed streams in a row, as one stream of bytes."""

    def __init__(self, source: io.BufferedIOBase, begin: Callable[[], _Stream]) -> None:
        self._source = source
        self._begin = begin
        self._stream = begin()

    def readable(self) -> bool:
        return True

    def readinto(self, buffer: bytearray | memoryview) -> int:  # type: ignore[override]  # narrower than Buffer
        while True:
            data = b""
            if self._stream.eof:
                data = self._stream.unused_data or self._source.read(_AT_ONCE)
                if not data:
                    return 0
                self._stream = self._begin()
            elif self._stream.needs_input:
                data = self._source.read(_AT_ONCE)
                if not data:
                    raise EOFError
            found = self._stream.decompress(data, len(buffer))
            if found:
                buffer[: len(found)] = found
                return len(found)


class _Capped(io.RawIOBase):
    """Unpacked bytes, as long as they are not too many for the packed ones read so far."""

    def __init__(self, stream: io.RawIOBase, packed: Callable[[], int], most: int) -> None:
        self._stream = stream
        self._packed = packed
        self._most = most
        self._size = 0

    def readable(self) -> bool:
        return True

    def readinto(self, buffer: bytearray | memoryview) -> int:  # type: ignore[override]  # narrower than Buffer
        count = self._stream.readinto(buffer) or 0
        self._size += count
        if self._size > max(SMALL, self._most * self._packed()):
            raise ExpansionError(f"more than {self._size} bytes from {self._packed()}")
        return count


def _gzip(source: io.BufferedIOBase) -> io.RawIOBase:
    return cast(io.RawIOBase, gzip.GzipFile(fileobj=source))


def _bzip2(source: io.BufferedIOBase) -> io.RawIOBase:
    return _Streams(source, bz2.BZ2Decompressor)


def _xz(source: io.BufferedIOBase) -> io.RawIOBase:
    return _Streams(source, lambda: lzma.LZMADecompressor(memlimit=_LARGEST_DICTIONARY))


COMPRESSED_MAGICS: Mapping[bytes, Callable[[io.BufferedIOBase], io.RawIOBase]] = {
    b"\x1f\x8b": _gzip,
    b"BZh": _bzip2,
    b"\xfd7zXZ\x00": _xz,
}


def unpacked(
    source: io.BufferedReader[Any], packed: Callable[[], int], largest_expansion: int | None
) -> io.BufferedReader[Any]:
    """Unpack a stream, if it is compressed.

    Parameters
    ----------
    source : io.BufferedReader
        At its beginning.
    packed : callable
        Tells how many bytes were read of the file.
    largest_expansion : int or None
        Bytes unpacked from one byte at most, once there are many.

    Raises
    ------
    EOFError, OSError, zlib.error, lzma.LZMAError
        On reading: the file is cut short or damaged.
    ExpansionError
        On reading: it unpacks to too much.
    """
    start = source.peek(max(map(len, COMPRESSED_MAGICS)))
    for magic, unpack in COMPRESSED_MAGICS.items():
        if start.startswith(magic):
            most = USUAL_EXPANSION if largest_expansion is None else largest_expansion
            return io.BufferedReader(_Capped(unpack(source), packed, most), buffer_size=_AT_ONCE)
    return source
