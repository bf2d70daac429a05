"""Bytes of a text file as blocks of whole lines: hashed, unpacked and read ahead while the block before is parsed."""

from __future__ import annotations

import codecs
import gzip
import hashlib
import io
import lzma
import zlib
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from pathlib import Path
from typing import Any, NamedTuple, Protocol

from reweight.errors import DataFileError
from reweight.reading.compressed import ExpansionError, unpacked
from reweight.reading.known import KnownPart
from reweight.reading.source import refusal
from reweight.study import Format

__all__ = ["BLOCK_SIZE", "OLD_LINE_ENDS", "Block", "LineStream", "blocks", "opened"]

BLOCK_SIZE = 1 << 22  # bytes; from 2 to 8 MB the speed is the same, below it falls

# Marks with which a file says its encoding itself; the longer ones first, since one begins like another.
_UNICODE_MARKS = {
    codecs.BOM_UTF32_LE: "utf-32",
    codecs.BOM_UTF32_BE: "utf-32",
    codecs.BOM_UTF16_LE: "utf-16",
    codecs.BOM_UTF16_BE: "utf-16",
    codecs.BOM_UTF8: "utf-8",
}

OLD_LINE_ENDS = (
    "Its lines seem to end with carriage returns alone, as on very old Macs: convert it, for instance with "
    "tr '\\r' '\\n' < OLD > NEW."
)


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

    def __init__(self, path: Path, known: KnownPart | None) -> None:
        self._file = io.FileIO(path)
        self._hash = hashlib.sha256() if known is None else known.digest.copy()
        self.size = 0 if known is None else self._file.seek(known.ledger.size)

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

    def __init__(self, path: Path, stream: _Bytes, source: _Hashing, longest: int) -> None:
        self._path = path
        self._stream = stream
        self._source = source
        self._longest = longest

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
        with self.faults():
            data = self._stream.read(size) if size else b""
            if not data.endswith(b"\n"):
                rest = self._stream.readline(self._longest + 1)
                if len(rest) > self._longest:
                    advice = OLD_LINE_ENDS if b"\r" in rest else "Is it a text file with rows of numbers?"
                    raise refusal(
                        self._path,
                        f"lines must not be longer than {self._longest} bytes. {advice} If its lines are meant to be "
                        "this long, raise largest_line under [format] in the study.",
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
    def faults(self) -> Iterator[None]:
        """Put what goes wrong while the file is read into words."""
        try:
            yield
        except EOFError as error:
            raise refusal(
                self._path, "compressed file must be complete; it ends too early. Copy it again."
            ) from error
        except ExpansionError as error:
            raise refusal(
                self._path,
                f"compressed file must not unpack to many times its size; got {error}. If it is meant to, raise "
                "largest_expansion (bytes from one byte) under [format] in the study.",
            ) from error
        except (gzip.BadGzipFile, zlib.error, lzma.LZMAError) as error:
            raise self._damaged(error) from error
        except UnicodeError as error:
            raise refusal(
                self._path, f"text must be in the encoding given under [format]; got: {error}."
            ) from error
        except DataFileError:
            raise
        except OSError as error:
            if error.errno is None:  # from a decompressor, not from the system
                raise self._damaged(error) from error
            raise refusal(
                self._path, f"data file must be readable; the system says: {error.strerror or error}."
            ) from error

    def _damaged(self, error: Exception) -> DataFileError:
        return refusal(self._path, f"compressed file must be undamaged; got: {error}. Copy it again.")


@contextmanager
def opened(path: Path, declared: Format, known: KnownPart | None = None) -> Iterator[LineStream]:
    """Open a text file, compressed or not, at its first line.

    Parameters
    ----------
    path : pathlib.Path
    declared : Format
        Its encoding counts, if it is not UTF-8 and no mark at the beginning of the file says it; and its caps.
    known : KnownPart, optional
        Of a plain text file: it is opened at the first line after this part.
    """
    with _Hashing(path, known) as source:
        stream: io.BufferedReader[Any] = io.BufferedReader(source, buffer_size=1 << 18)
        encoding = declared.encoding or "utf-8"
        with LineStream(path, stream, source, declared.largest_line).faults():
            if known is None:
                stream = unpacked(stream, lambda: source.size, declared.largest_expansion)
                encoding = _marked_encoding(stream) or encoding
        plain = codecs.lookup(encoding).name in {"utf-8", "ascii"}
        readable: _Bytes = stream if plain else _Transcoded(stream, encoding)
        yield LineStream(path, readable, source, declared.largest_line)


def _marked_encoding(stream: io.BufferedReader[Any]) -> str | None:
    """Encoding a file says itself; the mark is skipped where it says nothing about the order of bytes."""
    start = stream.peek(max(map(len, _UNICODE_MARKS)))
    for mark, encoding in _UNICODE_MARKS.items():
        if start.startswith(mark):
            if encoding == "utf-8":
                stream.read(len(mark))
            return encoding
    return None


def blocks(lines: LineStream, *, size: int, first_line: int) -> Iterator[Block]:
    """Read the rest of a file in blocks of about so many bytes, one block ahead of the consumer."""
    line = first_line
    with ThreadPoolExecutor(max_workers=1) as ahead:
        following = ahead.submit(lines.read, size, line)
        while data := following.result():
            if data.startswith(
                codecs.BOM_UTF8
            ):  # the parser would take it for the beginning of a file, and drop it
                raise refusal(
                    lines._path,
                    "a byte-order mark must stand at the beginning of a file only; got one in its midst. Two files were "
                    "put together: name them both instead.",
                    line=line,
                )
            block = Block(data, line, data.count(b"\n"))
            line += block.line_ends
            following = ahead.submit(lines.read, size, line)
            yield block
