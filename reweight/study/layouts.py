"""What must go together when the temperature of a row stands in a column: runs of several temperatures, and replicas.

Yields places in the study and what is wrong there; ``problems.py`` makes sentences of them.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from reweight.study.questions import Location
from reweight.study.schema import Study

__all__ = ["disagreeing_layouts", "unmatched"]

_FEWEST_REPLICAS = 2


def unmatched(study: Study) -> Iterator[tuple[Location, str]]:
    """Find patterns that no file matches."""
    for table, entries in (("run", study.runs), ("replica", study.replicas)):
        for index, entry in enumerate(entries):
            for file in entry.files:
                if study.matched.get(file) == ():
                    yield (
                        (table, index, "files"),
                        f"must match at least one file; no name in {str(study.folder)!r} is like {file!r}",
                    )


def disagreeing_layouts(study: Study) -> Iterator[tuple[Location, str]]:
    """Find values that do not go together in the layout of the files."""
    if not study.runs and not study.replicas:
        yield ("run",), "must be given"
    column = study.columns.temperature
    if study.replicas:
        yield from _replicas(study)
    elif column is not None:
        for index, run in enumerate(study.runs):
            if run.temperature is not None or run.inverse_temperature is not None:
                key = "temperature" if run.temperature is not None else "beta"
                yield (
                    ("run", index, key),
                    f"must not be given beside columns.temperature = {column[0]!r}, which says it for every row. If that "
                    "column is the thermostat's instantaneous value, which fluctuates, remove columns.temperature",
                )


def _replicas(study: Study) -> Iterator[tuple[Location, str]]:
    if study.runs:
        yield ("run",), "must not be given beside [[replica]]: a file is read as a run or as a replica"
    if len(study.replicas) < _FEWEST_REPLICAS:
        yield (
            ("replica",),
            "must be several that exchange temperatures; got one. A single file with several temperatures is a [[run]] "
            "without temperature",
        )
    if study.columns.temperature is None:
        yield ("columns", "temperature"), "must be given, because replicas change their temperature"
    discards: Mapping[str, str | int] = {each.name: each.discard for each in study.replicas}
    if len(set(discards.values())) > 1:
        found = ", ".join(f"{discard!r} ({name!r})" for name, discard in discards.items())
        yield (
            ("replica", 0, "discard"),
            f"must be the same for all replicas, which have one start; got {found}",
        )
    if "exchange" in study.conditions.model_fields_set and not study.conditions.exchange:
        yield ("conditions", "exchange"), "must not be false with replicas; got false. Remove it"
