"""What an earlier combined file holds of a study's runs, so that only what is new need be read.

A run is known if its files begin with the bytes that were read for the earlier file; its name, temperature and discarded
start may have changed.  Whatever else the study says about rows must be as it was.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reweight.density_of_states import DensityOfStates, RunRecord
from reweight.errors import InputError, StudyError
from reweight.reading import KnownPart, UnknownError, known_part, rewritten
from reweight.runs import Source, file_source
from reweight.study import Run, Study, parse_study
from reweight.tally.nodes import Nodes, suitable_nodes
from reweight.tally.run_tally import RunTally
from reweight.version import VERSION

__all__ = ["KnownRun", "known_runs"]

HASHED_AT_A_TIME = 2  # hashing leaves the interpreter's lock alone

# Keys that do not change the rows.  What a new key does is not known here, so it counts as changing them.
STUDY_KEYS = {"title", "report", "weighting", "resolution", "energy_kind", "runs"}
TABLE_KEYS = {
    "system": {"per", "length", "dimension", "states", "ground_degeneracy"},
    "conditions": {"exchange", "degrees_of_freedom"},
    "format": {"largest_line", "most_columns", "largest_expansion", "largest_chunk"},
    "columns": {"time_unit"},
}
RUN_KEYS = {"name", "temperature", "inverse_temperature", "files", "discard", "use", "reason"}


@dataclass(frozen=True, kw_only=True)
class KnownRun:
    """What an earlier combined file holds of a run.

    Attributes
    ----------
    first_energies : numpy.ndarray, shape (at most FIRST_ROWS,)
        Of its first rows.
    nodes : Nodes
        Those that all tallies of the earlier file began with.
    tally : RunTally
        Of all its rows.
    rest : Source
        The rows after those.
    """

    first_energies: NDArray[np.float64]
    nodes: Nodes
    tally: RunTally
    rest: Source


def known_runs(
    study: Study, earlier: DensityOfStates, tell: Callable[[str], None] = lambda _: None
) -> dict[str, KnownRun]:
    """Runs of a study of which an earlier combined file holds the beginning or all.

    Parameters
    ----------
    study : Study
    earlier : DensityOfStates
        Made from a study file.
    tell : callable, optional
        Called with a sentence for every run that must be read again from its start.

    Returns
    -------
    dict
        By the run's name in the study.

    Raises
    ------
    InputError
        The earlier file was not made from a study file.
    """
    if not earlier.study_text:
        raise InputError(
            "a combined file to be continued must be made from a study file; got one made from runs in memory. "
            "Combine the study without it."
        )
    if study.columns.temperature is not None:
        tell(
            "files that hold several temperatures are read as a whole: every file is read again from its start"
        )
        return {}
    before, reason = _earlier_study(study, earlier)
    if before is None:
        tell(f"{reason}: every file is read again from its start")
        return {}
    nodes = suitable_nodes(
        [record.first_energies for record in earlier.runs],
        np.array([record.beta for record in earlier.runs]),
        earlier.description.resolution,
    )
    before_by_name = {run.name: run for run in before.runs}
    matches = [(run, _match(run, earlier)) for run in study.used_runs]

    def recognised(run: Run, record: RunRecord) -> KnownRun | str:
        same = before_by_name.get(record.name)
        if same is None or _without(run, RUN_KEYS) != _without(same, RUN_KEYS):
            return "the study says other things about it"
        try:
            parts = _known_parts(study, run, record)
        except UnknownError as error:
            return str(error)
        return KnownRun(
            first_energies=record.first_energies,
            nodes=nodes,
            tally=record.tally,
            rest=file_source(study, run, parts),
        )

    known = {}
    with ThreadPoolExecutor(max_workers=HASHED_AT_A_TIME) as pool:
        begun = [(run, pool.submit(recognised, run, record)) for run, record in matches if record is not None]
        for run, future in begun:
            found = future.result()
            if isinstance(found, str):
                tell(f"run {run.name!r} is read again from its start: {found}")
            else:
                known[run.name] = found
    return known


def _earlier_study(study: Study, earlier: DensityOfStates) -> tuple[Study | None, str]:
    """Return the study of the earlier file, or the reason why nothing of that file can be used."""
    version = earlier.provenance.get("version")
    if version != VERSION:
        return None, f"the earlier file was made by another version of reweight ({version}, now {VERSION})"
    if any(record.first_energies.size == 0 for record in earlier.runs):
        return None, "the earlier file does not hold the first energies of its runs"
    try:
        before = parse_study(earlier.study_text, folder=study.folder)
    except StudyError:
        return None, "the study in the earlier file cannot be read"
    changed = _changed_keys(_without(before, STUDY_KEYS), _without(study, STUDY_KEYS))
    if changed:
        return None, f"the study says something else than before ({', '.join(changed)})"
    return before, ""


def _without(table: Study | Run, keys: set[str]) -> dict[str, Any]:
    return table.model_dump(exclude=keys)


def _changed_keys(before: Mapping[str, Any], now: Mapping[str, Any]) -> list[str]:
    """Paths of the keys that may change the rows and differ."""
    changed = []
    for key in now:
        if isinstance(now[key], Mapping) and isinstance(before[key], Mapping):
            names = {*before[key], *now[key]} - TABLE_KEYS.get(key, set())
            changed += [
                f"{key}.{name}" for name in sorted(names) if before[key].get(name) != now[key].get(name)
            ]
            if not changed and list(before[key]) != list(now[key]):
                changed.append(f"order of {key}")
        elif before[key] != now[key]:
            changed.append(key)
    return changed


def _match(run: Run, earlier: DensityOfStates) -> RunRecord | None:
    """Record of the same first file, or else of the same name."""
    records = [record for record in earlier.runs if record.files]
    same_file = (record for record in records if record.files[0].get("path") == run.files[0])
    same_name = (record for record in records if record.name == run.name)
    return next(same_file, None) or next(same_name, None)


def _known_parts(study: Study, run: Run, record: RunRecord) -> list[KnownPart]:
    if len(run.files) < len(record.files):
        raise UnknownError(f"it has {len(run.files)} files now and had {len(record.files)}")
    parts: list[KnownPart] = []
    for file, entry in zip(run.files, record.files, strict=False):
        if parts and parts[-1].grown:
            raise UnknownError(f"{parts[-1].ledger.path} has grown before {file}, which was read after it")
        parts.append(
            known_part(study.data_path(file), {**entry, "path": file}, encoding=study.format.encoding)
        )
    if study.format.table is not None and any(part.grown for part in parts):
        raise UnknownError("a log has grown, and what its rows belong to is told from its start")
    if rewritten(study, run.files, parts):
        raise UnknownError("rows that were read before have been written again by a restart")
    return parts
