"""Writing outputs so that the old file or the whole new one is there, never a part.

An output is written beside its final name, forced to disk and renamed.  A name is refused before any work
starts if it could cost data: an existing file (unless asked for), anything that is no plain file, an input.
"""

from __future__ import annotations

import errno
import hashlib
import os
import secrets
import shutil
import signal
import stat
import threading
from collections.abc import Collection, Iterable, Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

from reweight.errors import OutputError

__all__ = [
    "hash_file",
    "interrupts_wait",
    "new_folder",
    "refuse_contents",
    "refuse_target",
    "replacing",
    "write_text",
]

_NO_ROOM = {errno.ENOSPC, errno.EDQUOT, errno.EFBIG}


@contextmanager
def interrupts_wait() -> Iterator[None]:
    """Let Ctrl-C wait until the block ends.

    For short calls into libraries that hold locks: xarray's writer, interrupted between taking a lock and noting that
    it has it, waits for itself forever.
    """
    ignored = signal.getsignal(signal.SIGINT) == signal.SIG_IGN
    if ignored or threading.current_thread() is not threading.main_thread():
        yield  # interrupts reach the main thread only
        return
    waiting: list[int] = []
    before = signal.signal(signal.SIGINT, lambda number, frame: waiting.append(number))
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)
    if waiting:
        raise KeyboardInterrupt


@contextmanager
def replacing(
    path: str | os.PathLike[str], *, force: bool = False, inputs: Iterable[str | os.PathLike[str]] = ()
) -> Iterator[Path]:
    """Write a file completely or not at all.

    Parameters
    ----------
    path : path
        Final name of the output.
    force : bool, default False
        Replace an existing plain file.
    inputs : iterable of path
        Files that are never replaced, not even with `force`.

    Yields
    ------
    pathlib.Path
        Empty file in the same folder with the same suffix, to be written by the caller.  It takes the final
        name when the block ends without an exception and is removed otherwise.

    Raises
    ------
    OutputError
        The name cannot be written or must not be replaced, or the disk is full.
    """
    target = Path(path)
    protected = tuple(inputs)
    refuse_target(target, force=force, inputs=protected)
    beside = target.with_name(f".reweight-{secrets.token_hex(6)}{target.suffix}")
    try:
        with _writing(target):
            # The mode leaves it to the umask who may read the output, as for any file the user writes.
            os.close(os.open(beside, os.O_CREAT | os.O_EXCL | os.O_WRONLY, 0o666))
        yield beside
        with _writing(target):
            _force_to_disk(beside)
        refuse_target(target, force=force, inputs=protected)  # something may have appeared meanwhile
        with _writing(target):
            os.replace(beside, target)
    except BaseException as error:
        # What the system refuses to do for a name that is too long, it refuses here, too.
        with suppress(OSError):
            beside.unlink()
        if _lacks_room(error):
            raise OutputError(_not_writable(target, error)) from error
        raise
    _force_to_disk(target.parent)


@contextmanager
def new_folder(path: str | os.PathLike[str]) -> Iterator[Path]:
    """Make a folder with all that is in it, or none.

    Parameters
    ----------
    path : path
        Final name; nothing of that name exists, missing folders above it are made.

    Yields
    ------
    pathlib.Path
        Empty folder beside it, to be filled by the caller.  It takes the final name when the block ends without an
        exception and is removed otherwise.

    Raises
    ------
    OutputError
        The name exists or cannot be made, or the disk is full.
    """
    target = Path(path)
    if os.path.lexists(target):
        raise OutputError(f"output must be a new folder; {str(target)!r} exists. Choose another name.")
    beside = target.with_name(f".reweight-{secrets.token_hex(6)}")
    try:
        with _writing(target):
            beside.mkdir(parents=True)
        yield beside
        with _writing(target):
            os.rename(beside, target)
    except BaseException as error:
        shutil.rmtree(beside, ignore_errors=True)
        if _lacks_room(error):
            raise OutputError(_not_writable(target, error)) from error
        raise


def write_text(
    path: str | os.PathLike[str],
    text: str,
    *,
    force: bool = False,
    inputs: Iterable[str | os.PathLike[str]] = (),
) -> None:
    """Write a text file in UTF-8 completely or not at all; arguments and errors as in :func:`replacing`."""
    with replacing(path, force=force, inputs=inputs) as beside:
        beside.write_bytes(text.encode("utf-8"))


def hash_file(path: str | os.PathLike[str]) -> str:
    """SHA-256 of a file's bytes, as 64 hexadecimal digits."""
    with open(path, "rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


def refuse_target(target: Path, *, force: bool, inputs: Iterable[str | os.PathLike[str]]) -> None:
    """Refuse a name that must not become an output; for long work, before it starts.

    Raises
    ------
    OutputError
        As from :func:`replacing`.
    """
    if not target.name:
        raise OutputError(f"output must be a file name; got {str(target)!r}.")
    if not target.parent.is_dir():
        raise OutputError(
            f"output {str(target)!r} must lie in an existing folder; got {str(target.parent)!r}. "
            "Create the folder first."
        )
    try:
        mode = os.lstat(target).st_mode
    except FileNotFoundError:
        return
    except OSError as error:
        raise OutputError(_not_writable(target, error)) from error
    if not stat.S_ISREG(mode):
        raise OutputError(
            f"output {str(target)!r} must be a plain file or a new name; got {_kind(mode)}. "
            "Choose another name."
        )
    for each in inputs:
        if os.path.exists(each) and os.path.samefile(target, each):
            raise OutputError(
                f"output {str(target)!r} must not replace an input; it is the input {os.fspath(each)!r}. "
                "Choose another name."
            )
    if not force:
        raise OutputError(
            f"output {str(target)!r} must be a new name; a file of that name exists. "
            "Choose another name, or ask to replace it (--force, force=True)."
        )


def refuse_contents(target: Path, contents: Collection[tuple[int, str]]) -> None:
    """Refuse to replace a file that holds the same bytes as one of those an answer rests on, wherever it lies.

    Parameters
    ----------
    target : pathlib.Path
    contents : collection of (int, str)
        Size in bytes and SHA-256 of each of them.

    Raises
    ------
    OutputError
        As said.
    """
    if not target.is_file() or target.stat().st_size not in {size for size, _ in contents}:
        return
    if (target.stat().st_size, hash_file(target)) in contents:
        raise OutputError(
            f"output {str(target)!r} must not replace an input; it holds the bytes of one. Choose another name."
        )


def _kind(mode: int) -> str:
    kinds = (
        (stat.S_ISDIR, "a folder"),
        (stat.S_ISLNK, "a symbolic link"),
        (stat.S_ISFIFO, "a pipe"),
        (stat.S_ISSOCK, "a socket"),
    )
    return next((name for matches, name in kinds if matches(mode)), "a device")


@contextmanager
def _writing(target: Path) -> Iterator[None]:
    try:
        yield
    except OSError as error:
        raise OutputError(_not_writable(target, error)) from error


def _lacks_room(error: BaseException) -> bool:
    """Whether it says that the disk is full; NetCDF-C says no more than that writing failed."""
    if isinstance(error, OSError):
        return error.errno in _NO_ROOM
    return isinstance(error, RuntimeError) and str(error).startswith("NetCDF: ")


def _not_writable(target: Path, error: BaseException) -> str:
    said = (isinstance(error, OSError) and error.strerror) or error
    if _lacks_room(error):
        return (
            f"output {str(target)!r} needs more room than is left ({said}); nothing was written. "
            "Free some space, or write to another disk."
        )
    return (
        f"output {str(target)!r} must be writable; the system says: {said}. "
        "Choose another name or folder, or change the permissions."
    )


def _force_to_disk(path: Path) -> None:
    descriptor = os.open(path, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)
