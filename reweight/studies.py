"""The front door: from a study file, or from runs in memory, to the combined object."""

from __future__ import annotations

import math
import numbers
import os
from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING, Any

from numpy.typing import ArrayLike

from reweight.clock import Clock
from reweight.combining import WORKERS, Progress, combine_sources
from reweight.continuing import known_runs
from reweight.density_of_states import DensityOfStates, Description, LeftOut, ObservableDescription
from reweight.errors import InputError
from reweight.runs import as_tree, file_sources, tree_sources
from reweight.saving import open_combined
from reweight.study import Study, load_study
from reweight.study.values import discarded_start, number_of_states
from reweight.units import REDUCED, time_factor
from reweight.version import VERSION

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["combine", "combine_study"]


def combine(
    runs: str | os.PathLike[str] | Study | xr.DataTree | xr.DataArray | Mapping[str, Any],
    *,
    temperatures: ArrayLike | None = None,
    energy_unit: str | None = None,
    temperature_unit: str | None = None,
    count: int | None = None,
    per: str = "particle",
    states: str | None = None,
    ground_degeneracy: int | None = None,
    title: str = "",
    weighting: str = "independent",
    discard: int | str = "auto",
    exchange: bool = False,
    time_step: float | None = None,
    time_unit: str | None = None,
    observables: Mapping[str, Mapping[str, Any]] | None = None,
    workers: int | None = None,
    progress: Progress | None = None,
    continued: str | os.PathLike[str] | DensityOfStates | None = None,
    tell: Callable[[str], None] | None = None,
) -> DensityOfStates:
    """Combine canonical runs into one estimate of the density of states.

    Parameters
    ----------
    runs : path, Study, xarray.DataTree, xarray.DataArray, or mapping
        A study file says everything itself.  Runs in memory: a tree or an array (temperature, sample), or a mapping
        from run names to energies, shape (N,), or to mappings of columns (``energy`` and observables).
    temperatures : array_like, shape (K,), optional
        Of runs given as a mapping; in `temperature_unit`.
    energy_unit, temperature_unit : str, optional
        Of runs in memory; ``"reduced"`` (k_B = 1) by default.
    count : int, optional
        Number of particles or sites, for answers per count.
    per, title : str
    states : str, optional
        Total number of states, such as ``"2^256"``; makes the density of states absolute if beta = 0 is in reach.
    ground_degeneracy : int, optional
        Degeneracy of the ground level; does the same if that level is visited often enough.
    weighting : {"independent", "samples"}
        Weight samples by statistical inefficiency, or all alike.
    discard : int or str
        Start of every run to leave out: ``"auto"``, rows, a percentage such as ``"10 %"``, or a time such as
        ``"20 ns"`` if the time between samples is known.
    exchange : bool
        The runs are the temperatures of one replica exchange, recorded at the same times.
    time_step : float, optional
        Time between samples, in `time_unit`: a unit of time, ``"step"``, ``"sweep"`` or ``"reduced"`` (the default).
    time_unit : str, optional
    observables : mapping, optional
        What the columns beside the energy are: name to ``unit``, ``is``, ``moments``, ``absolute``, ``above`` as in a
        study file.
        By default every further column is taken as a plain observable.
    workers : int, optional
        Runs read at the same time; one by default, since more mostly wait for one another.  The result does not depend
        on it.
    progress : callable, optional
        Called with a run's name and the number of rows just tallied.
    continued : path or DensityOfStates, optional
        An earlier combined file of the study: of files that have only grown, only what is new is read.  The result has
        the same bits as without it.
    tell : callable, optional
        Called with a sentence for everything that is read again although it was known.

    Returns
    -------
    DensityOfStates

    Raises
    ------
    InputError
        Something about the runs cannot be used; subclasses say what.
    DisconnectedError
        Neighbouring groups of runs share no energies.

    Examples
    --------
    >>> import numpy as np, reweight as rw
    >>> rng = np.random.default_rng(1)
    >>> rw.combine({"cold": rng.gamma(30.0, 1.0, 2000), "hot": rng.gamma(30.0, 1.2, 2000)}, temperatures=[1.0, 1.2])
    <DensityOfStates: 2 runs, ... samples, 1 to 1.2 (reduced units, k_B = 1)>
    """
    given = (temperatures, energy_unit, temperature_unit, count, states, ground_degeneracy, observables)
    clock = (time_step, time_unit)
    changed = (per, title, weighting, discard, exchange) != ("particle", "", "independent", "auto", False)
    if isinstance(runs, (str, os.PathLike, Study)):
        if changed or any(each is not None for each in (*given, *clock)):
            raise InputError(
                "a study file says temperatures, units, weighting and all the rest itself; nothing but workers, "
                "progress, continued and tell may be given beside it. Change the study."
            )
        study = runs if isinstance(runs, Study) else load_study(runs)
        return combine_study(
            study,
            workers=workers or WORKERS,
            progress=progress,
            continued=continued,
            tell=tell or (lambda _: None),
        )
    if continued is not None:
        raise InputError(
            "continued must go with a study file, whose files can be compared with those read before; got runs in "
            "memory. Combine them all without it."
        )
    tree = as_tree(
        runs,
        temperatures=temperatures,
        energy_unit=energy_unit or REDUCED,
        temperature_unit=temperature_unit or (REDUCED if energy_unit in (None, REDUCED) else "K"),
    )
    description = Description(
        title=title or tree.attrs.get("title", ""),
        energy_unit=energy_unit or tree.attrs.get("energy_unit", REDUCED),
        energy_kind=tree.attrs.get("energy_kind", "potential"),
        temperature_unit=temperature_unit
        or tree.attrs.get("temperature_unit", REDUCED if energy_unit in (None, REDUCED) else "K"),
        count=count if count is not None else tree.attrs.get("count"),
        per=tree.attrs.get("per", per),
        states=None if states is None else _number_of_states(states),
        ground_degeneracy=ground_degeneracy,
        weighting=_one_of("weighting", weighting, ("independent", "samples")),
        exchange=exchange,
        pressure=tree.attrs.get("pressure"),
        degrees_of_freedom=tree.attrs.get("degrees_of_freedom", 0),
        observables=_described(tree, observables),
    )
    beta = {name: _beta(description, child) for name, child in tree.children.items()}
    names = tuple(each.name for each in description.observables)
    return combine_sources(
        tree_sources(tree, beta, names, _discarded(discard), _clock(time_step, time_unit)),
        description,
        provenance={"version": VERSION},
        workers=workers or WORKERS,
        progress=progress,
    )


def combine_study(
    study: Study,
    *,
    connected: bool = True,
    workers: int = WORKERS,
    progress: Progress | None = None,
    continued: str | os.PathLike[str] | DensityOfStates | None = None,
    tell: Callable[[str], None] = lambda _: None,
) -> DensityOfStates:
    """Combine the runs of a study; `connected` as in :func:`reweight.combining.combine_sources`."""
    if isinstance(continued, (str, os.PathLike)):
        continued = open_combined(continued)
    system = study.system
    description = Description(
        title=study.title,
        energy_unit=study.energy_unit,
        temperature_unit=study.temperature_unit,
        energy_kind=study.energy_kind,
        count=system.count,
        per=system.per,
        length=system.length,
        dimension=system.dimension,
        states=system.states,
        ground_degeneracy=system.ground_degeneracy,
        weighting=study.weighting,
        resolution=study.resolution,
        exchange=study.exchange,
        pressure=study.conditions.pressure,
        degrees_of_freedom=study.conditions.degrees_of_freedom,
        observables=tuple(
            ObservableDescription(
                name=name,
                unit=each.unit,
                normalisation=each.normalisation,
                moments=each.moments,
                absolute=each.absolute,
                above=each.above,
            )
            for name, each in study.observables.items()
        ),
    )
    return combine_sources(
        file_sources(study),
        description,
        left_out=[
            LeftOut(
                name=run.name,
                beta=run.beta(study) if study.columns.temperature is None else None,
                reason=run.reason,
            )
            for run in study.runs
            if not run.use
        ],
        study_text=study.text,
        provenance={"version": VERSION},
        connected=connected,
        workers=workers,
        progress=progress,
        known={} if continued is None else known_runs(study, continued, tell),
        tell=tell,
    )


def _discarded(discard: int | str) -> int | str:
    try:
        return discarded_start(discard)
    except ValueError as error:
        raise InputError(f"discard {error}") from None


def _clock(step: float | None, unit: str | None) -> Clock | None:
    if step is None:
        if unit is not None:
            raise InputError(f"time_unit must go with time_step; got {unit!r} alone. Pass time_step, too.")
        return None
    if not (math.isfinite(step) and step > 0):
        raise InputError(f"time_step must be finite and greater than 0; got {step}.")
    unit = REDUCED if unit is None else unit
    time_factor(unit, unit)  # refuses what is no time
    return Clock(step=float(step), unit=unit)


def _number_of_states(text: str) -> str:
    try:
        return number_of_states(text)
    except ValueError as error:
        raise InputError(f"states {error}") from None


def _one_of(name: str, value: str, allowed: tuple[str, ...]) -> str:
    if value not in allowed:
        raise InputError(f"{name} must be one of {', '.join(allowed)}; got {value!r}.")
    return value


def _threshold(name: str, value: object) -> float | None:
    if value is None:
        return None
    if isinstance(value, bool) or not isinstance(value, numbers.Real) or not math.isfinite(value):
        raise InputError(f"above must be a finite number (observable {name!r}); got {value!r}.")
    return float(value)


def _beta(description: Description, child: xr.DataTree) -> float:
    if "inverse_temperature" in child.coords:
        return float(child.coords["inverse_temperature"])
    if "temperature" not in child.coords:
        raise InputError(f"every run must have a scalar coordinate temperature; run {child.name!r} has none.")
    return float(description.inverse_temperature(float(child.coords["temperature"])))


def _described(
    tree: xr.DataTree, observables: Mapping[str, Mapping[str, Any]] | None
) -> tuple[ObservableDescription, ...]:
    first = next(iter(tree.children.values()))
    if observables is None:
        observables = {str(name): {} for name in first.data_vars if name != "energy"}
    described = []
    for name, keys in observables.items():
        unknown = set(keys) - {"unit", "is", "moments", "absolute", "above"}
        if unknown:
            raise InputError(
                f"observable {name!r} must be described by unit, is, moments, absolute, above; got {unknown.pop()!r}."
            )
        attributes = first[name].attrs if name in first.data_vars else {}
        described.append(
            ObservableDescription(
                name=name,
                unit=keys.get("unit", attributes.get("units", "1")),
                normalisation=_one_of(
                    "is",
                    keys.get("is", attributes.get("normalisation", "plain")),
                    ("total", "per site", "plain"),
                ),
                moments=tuple(keys.get("moments", (1,))),
                absolute=bool(keys.get("absolute", False)),
                above=_threshold(name, keys.get("above")),
            )
        )
    return tuple(described)
