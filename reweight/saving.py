"""The combined file: NetCDF with one group a run, opened again bit for bit.

Layout (``schema_version`` 1): attributes ``description``, ``study``, ``left_out``, ``replicas`` and ``provenance`` at
the root, the free energies on ``run``; a group a run with its tally (kept rows, leaves, thinned series) and what was
decided about it.
Structured attributes are JSON.  No dates, so equal inputs give equal files.

All netCDF calls of a process are made under one lock: netCDF-C is not thread safe.
"""

from __future__ import annotations

import dataclasses
import json
import os
from collections.abc import Iterable
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reweight.clock import Clock
from reweight.combining import weighted
from reweight.density_of_states import Decision, DensityOfStates, Description, LeftOut, RunRecord
from reweight.errors import CombinedFileError
from reweight.estimate import Estimate
from reweight.files import replacing
from reweight.memory import keep_freed_memory
from reweight.multistate import solution_at
from reweight.reading import ReplicaRecord
from reweight.reading.netcdf import NETCDF_LOCK
from reweight.series.correlation import Inefficiency
from reweight.tally.assemble import assemble
from reweight.tally.leaves import LeafSums
from reweight.tally.levels import Spacing
from reweight.tally.nodes import FIRST_ROWS, Nodes
from reweight.tally.run_tally import RunTally
from reweight.tally.thinned import Thinned

__all__ = ["SCHEMA_VERSION", "open_combined", "save"]

CONVENTIONS = "reweight combined file"
SCHEMA_VERSION = 1
MOST_INFLATION = 2000  # deflate expands at most about 1000:1; a file that declares more is not ours


def save(
    combined: DensityOfStates,
    path: str | os.PathLike[str],
    *,
    force: bool = False,
    inputs: Iterable[str | os.PathLike[str]] = (),
) -> None:
    """Write a combined file; it appears complete or not at all.

    Parameters
    ----------
    combined : DensityOfStates
    path : path
        By custom ending in ``.nc``.
    force : bool
        Replace an existing file.
    inputs : iterable of path
        Files that are never replaced.

    Raises
    ------
    OutputError
        The file exists, or cannot be written.
    """
    import netCDF4

    with (
        replacing(path, force=force, inputs=inputs) as beside,
        NETCDF_LOCK,
        netCDF4.Dataset(beside, "w", format="NETCDF4") as file,
    ):
        _write(file, combined)


def _write(file: Any, combined: DensityOfStates) -> None:
    file.setncatts(
        {
            "Conventions": CONVENTIONS,
            "schema_version": np.int32(SCHEMA_VERSION),
            "title": combined.description.title,
            "description": _json(combined.description.as_dict()),
            "study": combined.study_text,
            "left_out": _json([dataclasses.asdict(each) for each in combined.left_out]),
            "provenance": _json(combined.provenance),
            "replicas": _json(None if combined.replicas is None else dataclasses.asdict(combined.replicas)),
            "solver": _json(
                {
                    "iterations": combined.estimate.solution.iterations,
                    "residual": combined.estimate.solution.residual,
                }
            ),
        }
    )
    _variable(file, "free_energy", ("run",), combined.estimate.solution.free_energies)
    for number, run in enumerate(combined.runs):
        group = file.createGroup(f"run_{number:04d}")
        tally = run.tally
        group.setncatts(
            {
                "run_name": run.name,
                "beta": run.beta,
                "files": _json(list(run.files)),
                "decision": _json(dataclasses.asdict(run.decision)),
                "nodes": _json(dataclasses.asdict(tally.nodes)),
            }
        )
        if run.clock is not None:
            group.setncatts({"time_step": run.clock.step, "time_unit": run.clock.unit})
        _variable(group, "kept_rows", ("row", "column"), tally.tail)
        if not _are_first_rows(tally):
            _variable(group, "first_energies", ("first_row",), run.first_energies)
        if tally.leaves is not None and tally.thinned is not None:
            _variable(group, "keys", ("key",), tally.leaves.keys)
            # Counts of levels shrink tenfold; other sums hardly, and would take longer to pack than to compute.
            _variable(
                group,
                "sums",
                ("tallied", "leaf", "order", "key"),
                tally.leaves.sums,
                packed=tally.nodes.discrete,
            )
            _variable(group, "leaf_rows", ("leaf",), tally.leaves.rows)
            group.thinned_group = np.int64(tally.thinned.group)
            _variable(group, "thinned_origin", ("column",), tally.thinned.origin)
            _variable(group, "thinned_sums", ("group", "column"), tally.thinned.sums)
            _variable(group, "thinned_squares", ("group", "column"), tally.thinned.squares)


def _are_first_rows(tally: RunTally) -> bool:
    """Whether the rows kept are the run's first, as they were read."""
    return tally.leaves is None and tally.nodes.spacing is None


def _json(data: object) -> str:
    return json.dumps(data, sort_keys=True, ensure_ascii=False)


def _variable(
    group: Any, name: str, dimensions: tuple[str, ...], values: NDArray[Any], *, packed: bool = False
) -> None:
    for dimension, size in zip(dimensions, values.shape, strict=True):
        if dimension not in group.dimensions:
            group.createDimension(dimension, size)
    packing: dict[str, Any] = {"zlib": True, "complevel": 1, "shuffle": True} if packed else {}
    variable = group.createVariable(name, values.dtype.str[1:], dimensions, fill_value=False, **packing)
    variable[...] = values


def open_combined(path: str | os.PathLike[str]) -> DensityOfStates:
    """Open a combined file; it answers bit for bit as when it was saved.

    Raises
    ------
    CombinedFileError
        The file is missing, damaged, no combined file, or of a newer version.
    """
    import netCDF4

    keep_freed_memory()
    name = os.fspath(path)
    if not Path(path).is_file():
        raise CombinedFileError(
            f"a combined file must exist; got {name!r}, which is not a file. Make one with: reweight combine STUDY.toml"
        )
    with NETCDF_LOCK:
        try:
            file = netCDF4.Dataset(path, "r")
        except OSError:
            raise CombinedFileError(
                f"{name!r} must be a combined file written by reweight; it is no readable NetCDF file. "
                "If it is a study (TOML), run: reweight combine STUDY.toml"
            ) from None
        with file:
            file.set_auto_mask(False)
            try:
                _check_header(file, name)
                return _read(file, 1000 + MOST_INFLATION * Path(path).stat().st_size)
            except (KeyError, AttributeError, IndexError, TypeError, ValueError, RuntimeError) as error:
                raise CombinedFileError(
                    f"{name!r} must be an undamaged combined file; a part is missing or unreadable ({error}). "
                    "Combine the study again."
                ) from error


def _check_header(file: Any, name: str) -> None:
    if getattr(file, "Conventions", None) != CONVENTIONS:
        raise CombinedFileError(
            f"{name!r} must be a combined file written by reweight; it is another kind of NetCDF file. "
            "If it holds raw energies, name it in a study file and run: reweight combine"
        )
    version = int(file.schema_version)
    if version > SCHEMA_VERSION:
        raise CombinedFileError(
            f"{name!r} has schema version {version}; this program reads up to {SCHEMA_VERSION}. Update reweight."
        )


def _read(file: Any, most_bytes: int) -> DensityOfStates:
    description = Description.from_dict(json.loads(file.description))
    free = _values(file, "free_energy", most_bytes)
    solver = json.loads(file.solver)
    observables = [each.name for each in description.observables]
    loaded = []
    for number in range(free.size):
        group = file.groups[f"run_{number:04d}"]
        nodes = json.loads(group.nodes)
        spacing = Spacing(**nodes.pop("spacing")) if nodes["spacing"] else nodes.pop("spacing")
        leaves = thinned = None
        if "sums" in group.variables:
            leaves = LeafSums(*(_values(group, part, most_bytes) for part in ("keys", "sums", "leaf_rows")))
            thinned = Thinned(
                int(group.thinned_group),
                *(_values(group, f"thinned_{part}", most_bytes) for part in ("origin", "sums", "squares")),
            )
        tally = RunTally.restored(
            Nodes(spacing=spacing, **nodes),
            description.columns,
            observables,
            tail=_values(group, "kept_rows", most_bytes),
            leaves=leaves,
            thinned=thinned,
        )
        loaded.append((group, tally, *tally.complete()))
    records = [
        RunRecord(
            name=group.run_name,
            beta=float(group.beta),
            tally=tally,
            decision=_decision(json.loads(group.decision)),
            leaf_rows=leaves.rows,
            thinned=thinned,
            files=tuple(json.loads(group.files)),
            clock=_clock(group),
            first_energies=_first_energies(group, tally, most_bytes),
        )
        for group, tally, leaves, thinned in loaded
    ]

    def solved(per_run: Any, counts: Any, beta: Any, energies: Any) -> Any:
        return solution_at(free, counts, beta, energies, **solver)

    assembly = assemble([record.tally for record in records], [leaves for _, _, leaves, _ in loaded])
    estimate: Estimate = weighted(description, records, assembly, solved)
    return DensityOfStates(
        description=description,
        runs=tuple(records),
        estimate=estimate,
        left_out=tuple(LeftOut(**each) for each in json.loads(file.left_out)),
        replicas=_replicas(json.loads(getattr(file, "replicas", "null"))),
        study_text=file.study,
        provenance=json.loads(file.provenance),
    )


def _first_energies(group: Any, tally: RunTally, most_bytes: int) -> NDArray[np.float64]:
    if _are_first_rows(tally):
        return tally.tail[:FIRST_ROWS, 0]
    if "first_energies" not in group.variables:  # the first files did not keep them
        return np.empty(0)
    return _values(group, "first_energies", most_bytes)


def _decision(data: dict[str, Any]) -> Decision:
    return Decision(**{**data, "inefficiency": Inefficiency(**data["inefficiency"])})


def _replicas(data: dict[str, Any] | None) -> ReplicaRecord | None:
    return None if data is None else ReplicaRecord.from_dict(data)


def _clock(group: Any) -> Clock | None:
    if "time_step" not in group.ncattrs():
        return None
    return Clock(step=float(group.time_step), unit=str(group.time_unit))


def _values(group: Any, name: str, most_bytes: int) -> NDArray[Any]:
    variable = group.variables[name]
    if variable.size * 8 > most_bytes:
        raise ValueError(f"{name} declares {variable.size} numbers, more than a file of this size can hold")
    return np.asarray(variable[...])
