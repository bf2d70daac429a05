"""Runs: for people as one labelled tree, for the machine as streams of rows.

The tree is an :class:`xarray.DataTree`; its root says what was simulated, each child is a run with dimension ``sample``,
variables ``energy`` and the observables, and a scalar coordinate ``temperature``.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reweight.clock import Clock
from reweight.errors import InputError
from reweight.labels import energy_unit_label, temperature_attributes
from reweight.reading import FileLedger, Timekeeper, run_chunks
from reweight.study import Run, Study
from reweight.units import REDUCED, canonical_unit

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["Source", "as_tree", "file_sources", "read_runs", "tree_sources"]

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
        Returns the ledger entries, complete once the chunks are exhausted.
    clock : callable
        Returns the time between rows, known once the chunks are exhausted; None if there is no clock.
    """

    name: str
    beta: float
    chunks: Callable[[], Iterator[Array]]
    discard: int | str = "auto"
    files: Callable[[], tuple[dict[str, Any], ...]] = field(default=tuple)
    clock: Callable[[], Clock | None] = lambda: None


def file_sources(study: Study) -> list[Source]:
    """One source a run in use; files are opened when their chunks are asked for."""
    return [_file_source(study, run) for run in study.used_runs]


def _file_source(study: Study, run: Run) -> Source:
    ledgers: list[FileLedger] = []
    timekeepers: list[Timekeeper] = []

    def chunks() -> Iterator[Array]:
        ledgers.clear()
        timekeepers[:] = [Timekeeper()]
        return run_chunks(study, run, ledgers, timekeepers[0])

    return Source(
        name=run.name,
        beta=run.beta(study),
        chunks=chunks,
        discard=run.discard,
        files=lambda: tuple(dataclasses.asdict(ledger) for ledger in ledgers),
        clock=lambda: timekeepers[0].clock(study.columns.time_unit),
    )


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
    for run in study.used_runs:
        ledgers: list[FileLedger] = []
        timekeeper = Timekeeper()
        rows = np.concatenate(list(run_chunks(study, run, ledgers, timekeeper)))
        columns = {"energy": rows[:, 0]}
        columns |= {name: rows[:, 1 + place] for place, name in enumerate(study.observables)}
        child = _child(
            columns, run.temperature, run.inverse_temperature, study.energy_unit, study.temperature_unit
        )
        for name, observable in study.observables.items():
            child[name].attrs = {
                "units": canonical_unit(observable.unit),
                "long_name": name,
                "normalisation": observable.normalisation,
            }
        child.attrs = {
            "source": ", ".join(run.files),
            "sha256": ", ".join(ledger.sha256 for ledger in ledgers),
        }
        if (clock := timekeeper.clock(study.columns.time_unit)) is not None:
            child.attrs |= {"time_step": clock.step, "time_unit": clock.unit}
        children[run.name] = child
    tree = xr.DataTree(children={name: xr.DataTree(child) for name, child in children.items()})
    tree.attrs = {
        "title": study.title,
        "energy_unit": study.energy_unit,
        "temperature_unit": study.temperature_unit,
    }
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
