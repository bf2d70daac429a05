"""Files that were read before: whether their known part is unchanged, so that only what follows it need be read.

The known part is hashed and compared with the hash in the ledger, not parsed.  Only plain text can be taken up in its
midst: compressed files, NetCDF and encodings of more than one byte a character are known as a whole or not at all.
"""

from __future__ import annotations

import codecs
import hashlib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from reweight.reading.compressed import COMPRESSED_MAGICS
from reweight.reading.ledger import FileLedger

if TYPE_CHECKING:
    from hashlib import _Hash

__all__ = ["KnownPart", "UnknownError", "known_part"]

_BLOCK = 1 << 22  # bytes
_LOOKED_AT = 1 << 16  # bytes
_NO_TEXT = bytes(
    byte for byte in range(32) if byte not in b"\t\n\v\f\r"
)  # NetCDF and UTF-16 have some of these


class UnknownError(Exception):
    """A file, or rows that follow, do not continue what is known; the message says why."""


@dataclass(frozen=True, slots=True)
class KnownPart:
    """Beginning of a file, or all of it, that was read before and is unchanged.

    Attributes
    ----------
    ledger : FileLedger
        Account of its rows, none of them counted as transient.
    digest : hash object
        Of its bytes.
    grown : bool
        More follows.
    """

    ledger: FileLedger
    digest: _Hash
    grown: bool


def known_part(path: Path, entry: Mapping[str, Any], *, encoding: str | None) -> KnownPart:
    """Recognise the part of a file that a ledger entry describes.

    Parameters
    ----------
    path : pathlib.Path
    entry : mapping
        Of an earlier ledger.
    encoding : str or None
        As declared for text files.

    Raises
    ------
    UnknownError
        The file is not what it was, or cannot be taken up where it ended.
    """
    try:
        ledger = FileLedger(**{**entry, "kept": entry["kept"] + entry["transient"], "transient": 0})
    except (KeyError, TypeError) as error:
        raise UnknownError(f"the earlier file does not say what was read of {entry['path']}") from error
    try:
        size = path.stat().st_size
        if size < ledger.size:
            raise UnknownError(f"{ledger.path} is shorter than before")
        grown = size > ledger.size
        plain = not grown or _is_plain_text(path, encoding)
        digest, end = _hashed(path, ledger.size)
    except OSError as error:
        raise UnknownError(f"{ledger.path} cannot be read ({error.strerror or error})") from error
    if digest.hexdigest() != ledger.sha256:
        raise UnknownError(f"{ledger.path} has changed in the part that was read before")
    if not plain:
        raise UnknownError(f"{ledger.path} has grown, and only plain text can be taken up in its midst")
    if grown and end != b"\n":
        raise UnknownError(f"{ledger.path} has grown in the midst of its last line")
    return KnownPart(ledger, digest, grown)


def _is_plain_text(path: Path, encoding: str | None) -> bool:
    if encoding is not None and codecs.lookup(encoding).name not in {"utf-8", "ascii"}:
        return False
    with path.open("rb") as stream:
        first = stream.read(_LOOKED_AT)
    return not first.startswith(tuple(COMPRESSED_MAGICS)) and first.translate(None, _NO_TEXT) == first


def _hashed(path: Path, size: int) -> tuple[_Hash, bytes]:
    """Hash of the first bytes of a file, and the last of them."""
    digest = hashlib.sha256()
    block = memoryview(bytearray(min(size, _BLOCK)))
    left, count = size, 0
    with path.open("rb", buffering=0) as stream:
        while left and (read := stream.readinto(block[:left])):
            count = read
            digest.update(block[:count])
            left -= count
    return digest, bytes(block[count - 1 : count])
