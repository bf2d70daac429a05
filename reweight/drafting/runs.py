"""From files to runs: temperatures, parts that continue each other, replicas, and files that cannot be read."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import takewhile
from pathlib import Path

from reweight.drafting.consistency import Point
from reweight.drafting.guess import Guess
from reweight.drafting.look import ColumnLook, FileLook
from reweight.drafting.systems import columns_of
from reweight.drafting.temperatures import TemperatureGuess, guess_temperature, setting_columns
from reweight.drafting.words import Role, time_unit_of
from reweight.study.patterns import natural_order

__all__ = ["DraftRun", "draft_runs", "is_scan", "points_of", "usable_clock"]

_SUFFIX = re.compile(r"(?:\.[A-Za-z][A-Za-z0-9]*)?(?:\.(?:gz|bz2|xz))?$")
_PART = re.compile(
    r"[._ -]+(?:part|segment|restart)?$"
)  # what is left between a name and the number of a part


@dataclass(frozen=True, slots=True, kw_only=True)
class DraftRun:
    """One entry of the study.

    Attributes
    ----------
    table : str
        ``"run"`` or ``"replica"``.
    name : str
        Unique in its study.
    key : str
        ``"temperature"`` or ``"beta"``.
    guess : Guess or None
        The temperature; None if a column of the files says it.
    temperature_unit : str
    files : tuple of pathlib.Path
        In time order.
    looks : tuple of FileLook
    note : str
        What is worth a comment; empty if nothing is.
    left_out : str
        Why the run is not used; empty if it is.
    """

    table: str
    name: str
    key: str
    guess: Guess | None
    temperature_unit: str
    looks: tuple[FileLook, ...]
    note: str = ""
    left_out: str = ""

    @property
    def files(self) -> tuple[Path, ...]:
        """Its files, in time order."""
        return tuple(look.path for look in self.looks)


def is_scan(looks: Sequence[FileLook]) -> bool:
    """Whether the rows of some file have several temperatures, which a column says."""
    return any(setting_columns(look) for look in looks)


def draft_runs(looks: Sequence[FileLook], unreadable: Sequence[FileLook]) -> list[DraftRun]:
    """Make runs of files, coldest first; those that cannot be read come last.

    Parameters
    ----------
    looks : sequence of FileLook
        Files of one system.
    unreadable : sequence of FileLook
        Files of which not one number was read.
    """
    names: set[str] = set()
    ordered = sorted(looks, key=lambda look: natural_order(str(look.path)))
    if is_scan(looks):
        # a replica comes back to temperatures it has left; files of a cooling run do not
        table = "replica" if len(ordered) > 1 and any(map(_comes_back, ordered)) else "run"
        found = [_entry(table, [look], None, names) for look in ordered]
    else:
        guesses = [(guess_temperature(look), look) for look in ordered]
        found = [_entry("run", group, guess, names) for guess, group in _continued(guesses)]
        found.sort(key=_coldness)
    for look in unreadable:
        guess = guess_temperature(look)
        if columns_of(look) == columns_of(looks[0]):
            # a damaged file of this system: combine names the line, and whoever drafted decides
            found.append(_entry("run", [look], guess, names))
        elif not guess.guess.open:
            found.append(_entry("run", [look], guess, names, left_out=look.trouble))
    return found


def _comes_back(look: FileLook) -> bool:
    return any(column.changes >= len(column.distinct) for column in setting_columns(look))


def _coldness(run: DraftRun) -> tuple[int, float]:
    if run.guess is None or not isinstance(run.guess.value, float):
        return 1, 0.0
    return 0, run.guess.value if run.key == "temperature" else -run.guess.value


def _entry(
    table: str,
    looks: Sequence[FileLook],
    guess: TemperatureGuess | None,
    taken: set[str],
    *,
    left_out: str = "",
) -> DraftRun:
    stems = [_SUFFIX.sub("", look.path.name, count=1) for look in looks]
    shared = "".join(
        each[0] for each in takewhile(lambda each: len(set(each)) == 1, zip(*stems, strict=False))
    )
    stem = (_PART.sub("", shared) if len(stems) > 1 else "") or stems[0]
    base = "".join(each if each.isprintable() else "_" for each in stem).strip() or table
    name, number = base, 1
    while name in taken:
        number += 1
        name = f"{base}-{number}"
    taken.add(name)
    note = "files follow each other in time" if len(looks) > 1 else ""
    return DraftRun(
        table=table,
        name=name,
        key="temperature" if guess is None else guess.key,
        guess=None if guess is None else guess.guess,
        temperature_unit="" if guess is None else guess.unit,
        looks=tuple(looks),
        note=note,
        left_out=left_out,
    )


def _continued(
    guesses: Sequence[tuple[TemperatureGuess, FileLook]],
) -> list[tuple[TemperatureGuess, list[FileLook]]]:
    """Put files of one temperature together that follow each other in time; all others stay apart."""
    found: list[tuple[TemperatureGuess, list[FileLook]]] = []
    by_start = sorted(guesses, key=lambda pair: _start(pair[1]))
    for guess, look in by_start:
        clock = usable_clock(look)
        for other, group in found:
            before = usable_clock(group[-1])
            same = not guess.guess.open and (guess.key, guess.guess.value) == (other.key, other.guess.value)
            if same and clock is not None and before is not None and _follows(before, clock):
                group.append(look)
                break
        else:
            found.append((guess, [look]))
    return found


def _start(look: FileLook) -> float:
    clock = usable_clock(look)
    return 0.0 if clock is None else clock.first


def _follows(before: ColumnLook, after: ColumnLook) -> bool:
    step = (before.last - before.first) / max(before.rows - 1, 1)
    return before.first < after.first <= before.last + 1.5 * step and after.last > before.last


def usable_clock(look: FileLook) -> ColumnLook | None:
    """Column of times of a file, if its unit is known."""
    for column in look.columns:
        if column.heading.role is Role.CLOCK and column.last > column.first and time_unit_of(column.heading):
            return column
    return None


def points_of(runs: Sequence[DraftRun], name: str) -> list[Point]:
    """Energies by temperature, from the column of a name, for what their fluctuations can tell."""
    return [
        Point(
            key=run.key,
            value=float(run.guess.value),
            temperature_unit=run.temperature_unit,
            mean=column.mean,
            variance=column.variance,
        )
        for run in runs
        if run.guess is not None and isinstance(run.guess.value, float) and not run.left_out
        for column in run.looks[-1].columns
        if column.heading.name == name
    ]
