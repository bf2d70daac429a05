"""Runs: for people as one labelled tree, for the machine as streams of rows.

The tree is an :class:`xarray.DataTree`; its root says what was simulated, each child is a run with dimension ``sample``,
variables ``energy`` and the observables, and a scalar coordinate ``temperature``.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reweight.clock import Clock
from reweight.errors import InputError
from reweight.labels import energy_unit_label, temperature_attributes
from reweight.reading import (
    FileLedger,
    KnownPart,
    ReplicaRecord,
    SortedRows,
    Timekeeper,
    regrouped,
    run_chunks,
    sorted_by_temperature,
)
from reweight.study import Run, Study
from reweight.units import REDUCED, canonical_unit

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["Source", "as_tree", "file_source", "file_sources", "read_runs", "tree_sources"]

Array = NDArray[np.float64]


@dataclass(frozen=True, kw_only=True)
class Source:
    """Where the rows of one run come from.

    Attributes
    ----------
    name : str
    beta : float
        Inverse temperature, 1 / energy unit.
    chunks : callable
        Returns an iterator over arrays (rows, 1 + observables), every number finite.
    discard : int or str
        ``"auto"``, rows, a percentage such as ``"10 %"``, or a time such as ``"20 ns"``.
    files : callable
        Returns the ledger entries, given how many of the first rows are not used; complete once the chunks are exhausted.
    clock : callable
        Returns the time between rows, known once the chunks are exhausted; None if there is no clock.
    temperature : float or None
        In the study's unit, if the study or a file says it.
    replicas : ReplicaRecord or None
        Of the exchange this run is a temperature of, if its files follow replicas.
    """

    name: str
    beta: float
    chunks: Callable[[], Iterator[Array]]
    discard: int | str = "auto"
    files: Callable[[int], tuple[dict[str, Any], ...]] = lambda _: ()
    clock: Callable[[], Clock | None] = lambda: None
    temperature: float | None = None
    replicas: ReplicaRecord | None = None


def file_sources(study: Study) -> list[Source]:
    """One source a run in use; files are opened when their chunks are asked for.

    Files whose rows are sorted by temperature are read at once: only they tell how many runs there are.

    Raises
    ------
    DataFileError, StudyError
        Such a file cannot be read without changing a number, or holds no ladder of temperatures.
    """
    if study.replicas:
        found, record = regrouped(study)
        return [_sorted_source(study, rows, study.replicas[0].discard, "", record) for rows in found]
    if study.columns.temperature is not None:
        prefixes = {run.name: f"{run.name}, " if len(study.runs) > 1 else "" for run in study.used_runs}
        return [
            _sorted_source(study, rows, run.discard, prefixes[run.name], None)
            for run in study.used_runs
            for rows in sorted_by_temperature(study, run)
        ]
    return [file_source(study, run) for run in study.used_runs]


def _sorted_source(
    study: Study, rows: SortedRows, discard: int | str, prefix: str, record: ReplicaRecord | None
) -> Source:
    unit = "" if study.temperature_unit == REDUCED else f" {study.temperature_unit}"
    return Source(
        name=f"{prefix}{np.format_float_positional(rows.temperature, trim='-')}{unit}",
        beta=study.beta(rows.temperature),
        chunks=rows.spool.chunks,
        discard=discard,
        files=rows.files,
        clock=lambda: rows.clock(study.columns.time_unit),
        temperature=rows.temperature,
        replicas=record,
    )


def file_source(study: Study, run: Run, known: Sequence[KnownPart] = ()) -> Source:
    """Source of a run, or of the rows after those in the known parts of its first files."""
    ledgers: list[FileLedger] = []
    timekeepers: list[Timekeeper] = []

    def chunks() -> Iterator[Array]:
        ledgers.clear()
        timekeepers[:] = [_timekeeper(known)]
        return run_chunks(study, run, ledgers, timekeepers[0], known)

    return Source(
        name=run.name,
        beta=run.beta(study),
        chunks=chunks,
        discard=run.discard,
        files=lambda transient: _accounted(ledgers, transient),
        clock=lambda: timekeepers[0].clock(study.columns.time_unit),
        temperature=run.temperature,
    )


def _accounted(ledgers: Sequence[FileLedger], transient: int) -> tuple[dict[str, Any], ...]:
    """Ledger entries with the transient taken from the first rows kept."""
    entries = []
    for ledger in ledgers:
        here = min(transient, ledger.kept)
        transient -= here
        entries.append({**dataclasses.asdict(ledger), "kept": ledger.kept - here, "transient": here})
    return tuple(entries)


def _timekeeper(known: Sequence[KnownPart]) -> Timekeeper:
    """One that has seen the times of the rows known."""
    if not known or known[0].ledger.first_time is None or known[-1].ledger.last_time is None:
        return Timekeeper()
    rows = sum(part.ledger.kept for part in known)
    return Timekeeper.resumed(known[0].ledger.first_time, known[-1].ledger.last_time, rows)


def read_runs(study: Study) -> xr.DataTree:
    """Read the runs in use into memory, with labels.

    Parameters
    ----------
    study : Study
        From :func:`reweight.load_study`.

    Returns
    -------
    xarray.DataTree
        One child a run.

    Raises
    ------
    DataFileError, StudyError
        A file cannot be read without changing a number.
    """
    import xarray as xr

    children = {}
    for source in file_sources(study):
        rows = np.concatenate(list(source.chunks()))
        columns = {"energy": rows[:, 0]}
        columns |= {name: rows[:, 1 + place] for place, name in enumerate(study.observables)}
        inverse_temperature = source.beta if source.temperature is None else None
        child = _child(
            columns, source.temperature, inverse_temperature, study.energy_unit, study.temperature_unit
        )
        if study.conditions.pressure is not None:
            child["energy"].attrs["long_name"] = "enthalpy"
        for name, observable in study.observables.items():
            child[name].attrs = {
                "units": canonical_unit(observable.unit),
                "long_name": name,
                "normalisation": observable.normalisation,
            }
        files = source.files(0)
        child.attrs = {
            "source": ", ".join(entry["path"] for entry in files),
            "sha256": ", ".join(entry["sha256"] for entry in files),
        }
        if (clock := source.clock()) is not None:
            child.attrs |= {"time_step": clock.step, "time_unit": clock.unit}
        children[source.name] = child
    tree = xr.DataTree(children={name: xr.DataTree(child) for name, child in children.items()})
    tree.attrs = {
        "title": study.title,
        "energy_unit": study.energy_unit,
        "temperature_unit": study.temperature_unit,
        "energy_kind": study.energy_kind,
    }
    if study.conditions.pressure is not None:
        tree.attrs["pressure"] = study.conditions.pressure
    if study.conditions.degrees_of_freedom:
        tree.attrs["degrees_of_freedom"] = study.conditions.degrees_of_freedom
    if study.system.count is not None:
        tree.attrs |= {"count": study.system.count, "per": study.system.per}
    return tree


def as_tree(
    runs: xr.DataTree | xr.DataArray | Mapping[str, ArrayLike | Mapping[str, ArrayLike]],
    *,
    temperatures: ArrayLike | None,
    energy_unit: str,
    temperature_unit: str,
) -> xr.DataTree:
    """Bring runs held in memory into the labelled form.

    Parameters
    ----------
    runs : xarray.DataTree, xarray.DataArray (temperature, sample), or mapping
        A mapping goes from run names to energies, shape (N,), or to mappings from column names (``energy`` and
        observables) to arrays.
    temperatures : array_like, shape (K,), optional
        Needed for a mapping; otherwise taken from the coordinates.

    Raises
    ------
    InputError
        The form is none of these, or temperatures are missing or do not match the runs.
    """
    import xarray as xr

    if isinstance(runs, xr.DataTree):
        if temperatures is not None:
            raise InputError("a tree of runs says its temperatures itself; they must not be given again.")
        if not runs.children:
            raise InputError("a tree of runs must have one child a run; got none.")
        return runs
    if isinstance(runs, xr.DataArray):
        if set(runs.dims) != {"temperature", "sample"}:
            raise InputError(
                f"an array of runs must have the dimensions temperature and sample; got {', '.join(map(str, runs.dims))}. "
                "Rename them, or pass a mapping from run names to energies."
            )
        if temperatures is None:
            if "temperature" not in runs.coords:
                raise InputError(
                    "an array of runs must have a coordinate temperature, or temperatures must be given."
                )
            temperatures = runs["temperature"].to_numpy()
        rows = runs.transpose("temperature", "sample").to_numpy()
        names = [f"run {number}" for number in range(1, len(rows) + 1)]
        runs = dict(zip(names, rows, strict=True))
    if not isinstance(runs, Mapping):
        raise TypeError(
            "runs must be a study file, a DataTree, a DataArray (temperature, sample) or a mapping from run names to "
            f"energies; got {type(runs).__name__}."
        )
    if not runs:
        raise InputError("a mapping of runs must have at least one run; got none.")
    given = np.atleast_1d(np.asarray([] if temperatures is None else temperatures, dtype=float))
    if given.size != len(runs):
        raise InputError(
            f"temperatures must name one temperature a run; got {given.size} for {len(runs)} runs. "
            "Pass temperatures=[...] in the order of the runs."
        )
    children = {}
    for (name, columns), temperature in zip(runs.items(), given, strict=True):
        if not isinstance(name, str) or not name or "/" in name:
            raise InputError(f"run names must be non-empty texts without '/'; got {name!r}.")
        series = columns if isinstance(columns, Mapping) else {"energy": columns}
        arrays = {each: np.asarray(values, dtype=float) for each, values in series.items()}
        _check(name, arrays)
        children[name] = _child(arrays, float(temperature), None, energy_unit, temperature_unit)
    return xr.DataTree(children={name: xr.DataTree(child) for name, child in children.items()})


def _child(
    columns: Mapping[str, Array],
    temperature: float | None,
    inverse_temperature: float | None,
    energy_unit: str,
    temperature_unit: str,
) -> xr.Dataset:
    import xarray as xr

    child = xr.Dataset({name: ("sample", values) for name, values in columns.items()})
    child["energy"].attrs = {"units": energy_unit_label(energy_unit), "long_name": "energy"}
    if temperature is not None:
        child = child.assign_coords(temperature=((), temperature, temperature_attributes(temperature_unit)))
    if inverse_temperature is not None:
        child = child.assign_coords(inverse_temperature=((), inverse_temperature))
    return child


def _check(name: str, columns: Mapping[str, Array]) -> None:
    if "energy" not in columns:
        raise InputError(f"every run must have a column energy; got {', '.join(columns)} (run {name!r}).")
    length = columns["energy"].shape
    for column, values in columns.items():
        if values.ndim != 1 or values.shape != length:
            raise InputError(
                f"every column must have the shape (samples,) of the energy; got {values.shape} for {column!r} "
                f"(run {name!r})."
            )
        bad = np.flatnonzero(~np.isfinite(values))
        if bad.size:
            raise InputError(
                f"{column} must be finite; got {values[bad[0]]} (run {name!r}, row {bad[0] + 1}; {bad.size} of "
                f"{values.size} rows). Remove those rows knowingly; they are not skipped for you."
            )


def tree_sources(
    tree: xr.DataTree,
    beta: Mapping[str, float],
    observables: tuple[str, ...],
    discard: int | str,
    clock: Clock | None = None,
) -> list[Source]:
    """One source a child of a tree; a child's attributes ``time_step`` and ``time_unit`` are its own clock.

    Raises
    ------
    InputError
        A child lacks the energy or an observable, or holds numbers that are not finite.
    """
    sources = []
    for name, child in tree.children.items():
        columns = {
            str(each): np.asarray(child[str(each)].to_numpy(), dtype=float) for each in child.data_vars
        }
        _check(name, columns)
        missing = [each for each in observables if each not in columns]
        if missing:
            raise InputError(f"every run must have the same observables; run {name!r} lacks {missing[0]!r}.")
        rows = np.stack([columns[each] for each in ("energy", *observables)], axis=1)
        sources.append(
            Source(
                name=name,
                beta=beta[name],
                chunks=_one_chunk(rows),
                discard=discard,
                clock=_always(_own_clock(child, clock)),
            )
        )
    return sources


def _own_clock(child: xr.DataTree, clock: Clock | None) -> Clock | None:
    if "time_step" not in child.attrs:
        return clock
    return Clock(step=float(child.attrs["time_step"]), unit=str(child.attrs.get("time_unit", REDUCED)))


def _always(clock: Clock | None) -> Callable[[], Clock | None]:
    return lambda: clock


def _one_chunk(rows: Array) -> Callable[[], Iterator[Array]]:
    return lambda: iter([rows])
