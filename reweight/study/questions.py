"""What a draft leaves open: a value that begins with a question mark, with the candidates behind it.

``energy_unit = "? kJ/mol | kcal/mol"`` is refused by the name of its key until somebody has written the answer, and the
refusal repeats the candidates.  One mechanism for every key, whatever type its value has.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any

__all__ = ["Location", "candidates_of", "open_questions", "question"]

Location = tuple[str | int, ...]

_MARK = "?"
_BETWEEN = " | "
_DEEPEST = 4  # observables.NAME.column; a study that nests deeper is refused elsewhere
_FREE_TEXTS = frozenset({"title", "name", "files", "reason", "report"})  # may begin with any character


def question(candidates: Sequence[object]) -> str:
    """Write a value that is to be filled in.

    Examples
    --------
    >>> question(["kJ/mol", "eV"]), question([])
    ('? kJ/mol | eV', '?')
    """
    return f"{_MARK} {_BETWEEN.join(str(each) for each in candidates)}".rstrip()


def candidates_of(value: object) -> tuple[str, ...] | None:
    """Candidates of a value that is left open; None if it is not.

    Examples
    --------
    >>> candidates_of("? kJ/mol | eV"), candidates_of("?"), candidates_of("eV")
    (('kJ/mol', 'eV'), (), None)
    """
    if not isinstance(value, str) or not value.startswith(_MARK):
        return None
    return tuple(each.strip() for each in value[len(_MARK) :].split(_BETWEEN.strip()) if each.strip())


def open_questions(values: Any, above: Location = ()) -> Iterator[tuple[Location, tuple[str, ...]]]:
    """Find every value of a study that is left open, with its candidates."""
    if len(above) > _DEEPEST:
        return
    if isinstance(values, Mapping):
        for key, value in values.items():
            if key not in _FREE_TEXTS:
                yield from open_questions(value, (*above, key))
    elif isinstance(values, list):
        for index, value in enumerate(values):
            yield from open_questions(value, (*above, index))
    else:
        candidates = candidates_of(values)
        if candidates is not None:
            yield above, candidates
