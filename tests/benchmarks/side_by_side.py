"""Several jobs timed side by side in one run, so that a change of the machine's load meets all of them."""

from __future__ import annotations

import statistics
import sys
import time
from collections.abc import Callable, Mapping
from typing import NamedTuple

__all__ = ["Taken", "medians", "milliseconds", "say", "say_rows", "say_target", "table_rows"]


SHORT = 0.2  # seconds


class Taken(NamedTuple):
    """Median times of a job in seconds: on the clock, and of all processors it used."""

    wall: float
    processor: float


def medians(jobs: Mapping[str, Callable[[], object]], repetitions: int) -> dict[str, Taken]:
    """Time every job, over rounds in which each runs once, or as often as fits into a fifth of a second.

    A job of milliseconds would otherwise meet memory and caches as the long one before it left them.

    On a machine that is busy with other things the processor time is the fairer measure: a long job is interrupted, a
    short one is not.
    """
    taken: dict[str, list[tuple[float, float]]] = {name: [] for name in jobs}
    for _ in range(repetitions):
        for name, job in jobs.items():
            began = time.perf_counter()
            while True:
                wall, processor = time.perf_counter(), time.process_time()
                job()
                taken[name].append((time.perf_counter() - wall, time.process_time() - processor))
                if time.perf_counter() - began > SHORT:
                    break
    return {
        name: Taken(*(statistics.median(each) for each in zip(*times, strict=True)))
        for name, times in taken.items()
    }


def table_rows(taken: Mapping[str, Taken], unit: Taken, unit_name: str) -> list[tuple[str, ...]]:
    """Times and their ratios to one of them, with a head."""
    head = ("job", "wall time", f"in {unit_name}", "processor time", f"in {unit_name}")
    return [
        head,
        *(
            (
                name,
                milliseconds(each.wall),
                f"{each.wall / unit.wall:.3g}",
                milliseconds(each.processor),
                f"{each.processor / unit.processor:.3g}",
            )
            for name, each in taken.items()
        ),
    ]


def milliseconds(seconds: float) -> str:
    """Time as shown in the tables."""
    return f"{1000 * seconds:.3g} ms"


def say(text: str) -> None:
    """Write a line to the standard output."""
    sys.stdout.write(f"{text}\n")


def say_rows(title: str, rows: list[tuple[str, ...]]) -> None:
    """Write rows as a table; the first is its head."""
    say(f"\n{title}\n")
    for number, row in enumerate(rows):
        say("| " + " | ".join(row) + " |")
        if number == 0:
            say("|" + "---|" * len(row))


def say_target(name: str, ratio: float, target: float, *, at_most: bool = False) -> None:
    """Write a ratio beside what it should be."""
    met = ratio <= target if at_most else ratio >= target
    bound = "at most" if at_most else "at least"
    say(f"{name}: {ratio:.3g} (target: {bound} {target:g}) -> {'met' if met else 'MISSED'}")
