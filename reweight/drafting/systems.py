"""Which files belong to one system: the same columns in the same units, and the same size."""

from __future__ import annotations

import os
import re
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from reweight.drafting.guess import Guess, certain, likely
from reweight.drafting.look import FileLook
from reweight.study import Format

__all__ = ["System", "columns_of", "guess_count", "guess_length", "parted", "size_of"]

Columns = tuple[tuple[str, str], ...]

_SIZE = re.compile(r"(?<![A-Za-z0-9])(L|N)[=_-]?([0-9]{1,9})(?![0-9A-Za-z])")
_NOUNS = "atom|site|spin|particle|molecule|bead|monomer|residue"
_COUNT_BEFORE = re.compile(rf"\b([0-9]{{1,12}})[ -]({_NOUNS})s?\b", re.IGNORECASE)
_COUNT_AFTER = re.compile(rf"\b(?:n_?|number of )?({_NOUNS})s?\s*[=:]\s*([0-9]{{1,12}})\b", re.IGNORECASE)
_COUNT_LETTER = re.compile(r"\bN\s*[=:]\s*([0-9]{1,12})\b")
_LENGTH = re.compile(r"\bL\s*[=:]\s*([0-9]{1,9})\b")
_FOLDERS = 2


@dataclass(frozen=True, slots=True, kw_only=True)
class System:
    """Files that go into one study.

    Attributes
    ----------
    label : str
        Tells it from the others in a name; empty if there is only one.
    looks : tuple of FileLook
    """

    label: str
    looks: tuple[FileLook, ...]


def parted(looks: Sequence[FileLook]) -> list[System]:
    """Part files by their columns and by the sizes in their names and remarks, in the order of their first files."""
    groups: dict[tuple[tuple[str, int], Columns, Format], list[FileLook]] = {}
    for look in looks:
        groups.setdefault((size_of(look), columns_of(look), look.format), []).append(look)
    labels = [_label(size, group) for (size, _, _), group in groups.items()]
    if len(groups) == 1:
        labels = [""]
    return [
        System(
            label=label if labels.count(label) == 1 else f"{label}-{labels[: place + 1].count(label)}",
            looks=tuple(group),
        )
        for place, (label, group) in enumerate(zip(labels, groups.values(), strict=True))
    ]


def columns_of(look: FileLook) -> Columns:
    """Names and units of the columns in any order, or how many there are if they have no names."""
    if not look.named:
        return (("", str(len(look.names))),)
    return tuple(sorted((heading.name, heading.unit) for heading in look.headings))


def guess_count(looks: Sequence[FileLook]) -> tuple[Guess, str] | None:
    """Guess the number of atoms or sites, and what they are called; None if nothing tells it."""
    found: dict[int, tuple[Guess, str]] = {}
    for look in looks:
        for name, text in look.attributes.items():
            word = re.fullmatch(rf"n_?({_NOUNS})s|count", name.lower())
            if word is not None and re.fullmatch(r"[1-9][0-9]{0,11}", text):
                found[int(text)] = certain(int(text), f"attribute {name!r}"), word[1] or "particle"
        for remark in look.remarks:
            for pattern, number, noun in ((_COUNT_BEFORE, 1, 2), (_COUNT_AFTER, 2, 1), (_COUNT_LETTER, 1, 0)):
                seen = pattern.search(remark)
                if seen is not None and int(seen[number]) > 0:
                    per = seen[noun].lower() if noun else "particle"
                    found.setdefault(int(seen[number]), (likely(int(seen[number]), "a line of remarks"), per))
        letter, size = size_of(look)
        if letter == "N" and size > 0:
            found.setdefault(size, (likely(size, "a name"), "particle"))
    return next(iter(found.values())) if len(found) == 1 else None


def guess_length(looks: Sequence[FileLook]) -> Guess | None:
    """Guess the edge length of a lattice or box; None if nothing tells it."""
    sizes = {size_of(look) for look in looks}
    (letter, size) = sizes.pop()
    return (
        likely(size, "L in a name or a line of remarks") if not sizes and letter == "L" and size > 0 else None
    )


def size_of(look: FileLook) -> tuple[str, int]:
    """Size in the name of a file, of its folders, or in a line of remarks: a letter and a number, or "" and 0."""
    parts = Path(os.path.abspath(look.path)).parts
    for name in parts[-1 : -2 - _FOLDERS : -1]:
        found = _SIZE.search(name)
        if found is not None:
            return found[1], int(found[2])
    for remark in look.remarks:
        for letter, pattern in (("L", _LENGTH), ("N", _COUNT_LETTER)):
            seen = pattern.search(remark)
            if seen is not None:
                return letter, int(seen[1])
    return "", 0


def _label(size: tuple[str, int], group: Sequence[FileLook]) -> str:
    letter, number = size
    if letter:
        return f"{letter}{number}"
    folder = re.sub(r"[^A-Za-z0-9._-]+", "-", Path(os.path.abspath(group[0].path)).parent.name).strip("-.")
    return folder or "system"
