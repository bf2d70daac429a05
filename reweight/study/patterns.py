"""Names of data files with ``*``, ``?`` or ``[...]``: the files they stand for, in the order a person would give them."""

from __future__ import annotations

import glob
import os
import re
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

__all__ = ["expanded", "natural_order"]

_MAGIC = re.compile(r"[*?[]")


def expanded(values: Mapping[str, Any], folder: Path) -> tuple[dict[str, Any], dict[str, tuple[str, ...]]]:
    """Put files in the place of patterns.

    A name that is there as it is written is a name, whatever characters it has.  A pattern that nothing matches stays in
    its place, with no files in the second value.

    Parameters
    ----------
    values : mapping
        Of a study file.
    folder : pathlib.Path
        Folder to which names are relative.

    Returns
    -------
    values : dict
        The same with files in place of patterns.
    matched : dict
        Patterns as written, and the files they stand for.
    """
    matched: dict[str, tuple[str, ...]] = {}
    found = dict(values)
    for table in ("run", "replica"):
        if isinstance(entries := values.get(table), list):
            found[table] = [_with_files(entry, folder, matched) for entry in entries]
    return found, matched


def _with_files(entry: Any, folder: Path, matched: dict[str, tuple[str, ...]]) -> Any:
    if not isinstance(entry, Mapping):
        return entry
    names = [entry.get("files")] if isinstance(entry.get("files"), str) else entry.get("files")
    if not isinstance(names, list) or not all(isinstance(each, str) for each in names):
        return entry  # refused as any other wrong value
    return {**entry, "files": [file for name in names for file in _files(name, folder, matched)]}


def _files(name: str, folder: Path, matched: dict[str, tuple[str, ...]]) -> Iterator[str]:
    if not _MAGIC.search(name) or "\0" in name or os.path.lexists(folder / name):
        yield name
        return
    files = tuple(sorted(glob.glob(name, root_dir=folder), key=natural_order))
    matched[name] = files
    yield from files or (name,)


def natural_order(name: str) -> list[tuple[int, str]]:
    """Key for sorting: whole numbers in names count as numbers.

    Examples
    --------
    >>> sorted(["run10", "run9", "Run2"], key=natural_order)
    ['Run2', 'run9', 'run10']
    """
    parts = re.split(r"([0-9]+)", name.casefold())
    return [(int(part), "") if place % 2 else (-1, part) for place, part in enumerate(parts)] + [(-1, name)]
