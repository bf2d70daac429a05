"""Bytes of a text file as blocks of whole lines: hashed, unpacked and read ahead while the block before is parsed."""

from __future__ import annotations

import codecs
import gzip
import hashlib
import io
import zlib
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from pathlib import Path
from typing import NamedTuple, Protocol

from reweight.errors import DataFileError
from reweight.reading.source import refusal

__all__ = ["BLOCK_SIZE", "GZIP_MAGIC", "Block", "LineStream", "blocks", "opened"]

BLOCK_SIZE = 1 << 22  # bytes; from 2 to 8 MB the speed is the same, below it falls
GZIP_MAGIC = b"\x1f\x8b"
_LONGEST_LINE = 1_000_000  # bytes
_UNICODE_MARK = codecs.BOM_UTF8


class Block(NamedTuple):
    """Whole lines of a file.

    Attributes
    ----------
    data : bytes
        UTF-8 text that ends with a line end.
    first_line : int
        Number of its first line, counted from 1.
    line_ends : int
        How many there are in it.
    """

    data: bytes
    first_line: int
    line_ends: int


class _Bytes(Protocol):
    def read(self, size: int, /) -> bytes: ...

    def readline(self, size: int, /) -> bytes: ...


class _Hashing(io.RawIOBase):
    """A file that hashes what is read from it."""

    def __init__(self, path: Path) -> None:
        self._file = io.FileIO(path)
        self._hash = hashlib.sha256()
        self.size = 0

    def readable(self) -> bool:
        return True

    def readinto(self, buffer: bytearray | memoryview) -> int:  # type: ignore[override]  # narrower than Buffer
        count = self._file.readinto(buffer)
        self._hash.update(memoryview(buffer)[:count])
        self.size += count
        return count

    def close(self) -> None:
        self._file.close()
        super().close()

    @property
    def sha256(self) -> str:
        return self._hash.hexdigest()


class _Transcoded:
    """A file in another encoding, seen as UTF-8."""

    def __init__(self, stream: io.BufferedIOBase, encoding: str) -> None:
        self._text = io.TextIOWrapper(stream, encoding=encoding, newline="")  # type: ignore[type-var]

    def read(self, size: int, /) -> bytes:
        return self._text.read(size).encode("utf-8")

    def readline(self, size: int, /) -> bytes:
        return self._text.readline(size).encode("utf-8")


class LineStream:
    """The lines of a text file, with every fault of the file as a whole put into words."""

    def __init__(self, path: Path, stream: _Bytes, source: _Hashing) -> None:
        self._path = path
        self._stream = stream
        self._source = source

    @property
    def size(self) -> int:
        """Bytes of the file read so far."""
        return self._source.size

    @property
    def sha256(self) -> str:
        """Hash of the bytes of the file read so far."""
        return self._source.sha256

    def read(self, size: int, line: int) -> bytes:
        """Read at least so many bytes, up to the next line end; empty at the end of the file.

        Parameters
        ----------
        size : int
            Bytes; 0 for a single line.
        line : int
            Number of the line that comes next, for messages.
        """
        with self._faults():
            data = self._stream.read(size) if size else b""
            if not data.endswith(b"\n"):
                rest = self._stream.readline(_LONGEST_LINE + 1)
                if len(rest) > _LONGEST_LINE:
                    raise refusal(
                        self._path,
                        f"lines must not be longer than {_LONGEST_LINE} bytes. Is it a text file with rows of numbers?",
                        line=line + data.count(b"\n"),
                    )
                data += rest
        if b"\0" in data:
            raise refusal(
                self._path,
                "text must not hold NUL bytes; the file is binary, damaged, or in another encoding "
                '(then say so in the study: encoding = "utf-16" under [format]).',
                line=line + data[: data.index(b"\0")].count(b"\n"),
            )
        return data

    @contextmanager
    def _faults(self) -> Iterator[None]:
        try:
            yield
        except EOFError as error:
            raise refusal(
                self._path, "compressed file must be complete; it ends too early. Copy it again."
            ) from error
        except (gzip.BadGzipFile, zlib.error) as error:
            raise refusal(
                self._path, f"compressed file must be undamaged; got: {error}. Copy it again."
            ) from error
        except UnicodeError as error:
            raise refusal(
                self._path, f"text must be in the encoding given under [format]; got: {error}."
            ) from error
        except DataFileError:
            raise
        except OSError as error:
            raise refusal(
                self._path, f"data file must be readable; the system says: {error.strerror or error}."
            ) from error


@contextmanager
def opened(path: Path, encoding: str | None) -> Iterator[LineStream]:
    """Open a text file, compressed or not, at its first line.

    Parameters
    ----------
    path : pathlib.Path
    encoding : str or None
        Encoding if it is not UTF-8; numbers and most of what surrounds them are plain ASCII.
    """
    with _Hashing(path) as source:
        stream = io.BufferedReader(source, buffer_size=1 << 18)
        if stream.peek(2).startswith(GZIP_MAGIC):
            stream = io.BufferedReader(gzip.GzipFile(fileobj=stream), buffer_size=1 << 18)  # type: ignore[arg-type]
        if encoding is not None and codecs.lookup(encoding).name not in {"utf-8", "ascii"}:
            yield LineStream(path, _Transcoded(stream, encoding), source)
        else:
            lines = LineStream(path, stream, source)
            with lines._faults():
                if stream.peek(len(_UNICODE_MARK)).startswith(_UNICODE_MARK):
                    stream.read(len(_UNICODE_MARK))
            yield lines


def blocks(lines: LineStream, *, size: int, first_line: int) -> Iterator[Block]:
    """Read the rest of a file in blocks of about so many bytes, one block ahead of the consumer."""
    line = first_line
    with ThreadPoolExecutor(max_workers=1) as ahead:
        following = ahead.submit(lines.read, size, line)
        while data := following.result():
            block = Block(data, line, data.count(b"\n"))
            line += block.line_ends
            following = ahead.submit(lines.read, size, line)
            yield block
