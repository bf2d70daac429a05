"""The combined object: everything needed to answer, check and publish without the raw files.

A run is kept as its tally; what was decided about it (transient, inefficiency, whether it is used) stands beside the
tally and can be changed without reading a file again.
"""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reweight import units
from reweight.clock import Clock
from reweight.errors import InputError, NotInFileError
from reweight.estimate import Estimate
from reweight.quantities.catalogue import available, named
from reweight.quantities.ensemble import Ensemble
from reweight.quantities.quantity import Quantity
from reweight.reading import ReplicaRecord
from reweight.series.correlation import Inefficiency
from reweight.series.time_scales import TimeScales, time_scales
from reweight.study.values import base_and_power
from reweight.tally.nodes import COUNT, Column
from reweight.tally.run_tally import RunTally
from reweight.tally.thinned import Thinned

__all__ = ["Decision", "DensityOfStates", "Description", "LeftOut", "ObservableDescription", "RunRecord"]


@dataclass(frozen=True, kw_only=True)
class ObservableDescription:
    """What a recorded column beside the energy is.

    Attributes
    ----------
    name, unit : str
    normalisation : str
        ``"total"``, ``"per site"`` or ``"plain"``.
    moments : tuple of int
        Powers that were tallied.
    absolute : bool
        The absolute value was tallied, too.
    above : float or None
        Samples above this were counted, too.
    """

    name: str
    unit: str = "1"
    normalisation: str = "plain"
    moments: tuple[int, ...] = (1,)
    absolute: bool = False
    above: float | None = None

    def columns(self) -> tuple[Column, ...]:
        """Tallied columns this observable needs."""
        columns = [Column(self.name, power) for power in sorted({1, *self.moments})]
        if self.absolute:
            columns.append(Column(self.name, 1, absolute=True))
        if self.above is not None:
            columns.append(Column(self.name, above=self.above))
        return tuple(columns)


@dataclass(frozen=True, kw_only=True)
class Description:
    """What was simulated, in which units, and how runs are weighted.

    ``pressure`` (``"1 bar"``) says that the runs were at constant pressure and that their energies are enthalpies;
    ``degrees_of_freedom`` counts the classical momenta that they leave out.  ``exchange`` says that the runs are the
    temperatures of one replica exchange: coupled, of equal length, and with one common start.
    """

    title: str = ""
    energy_unit: str = units.REDUCED
    temperature_unit: str = units.REDUCED
    energy_kind: str = "potential"
    count: int | None = None
    per: str = "particle"
    length: float | None = None
    dimension: int | None = None
    states: str | None = None
    ground_degeneracy: int | None = None
    weighting: str = "independent"
    resolution: float | None = None
    exchange: bool = False
    pressure: str | None = None
    degrees_of_freedom: int = 0
    observables: tuple[ObservableDescription, ...] = ()

    @property
    def boltzmann_constant(self) -> float:
        """k_B in the energy unit per kelvin; 1 in reduced units."""
        return units.boltzmann_constant(self.energy_unit, self.temperature_unit)

    @property
    def ensemble(self) -> Ensemble:
        """What was held in the runs."""
        return Ensemble(
            constant_pressure=self.pressure is not None, degrees_of_freedom=self.degrees_of_freedom
        )

    @property
    def columns(self) -> tuple[Column, ...]:
        """All tallied columns: the plain count, then the moments of the observables."""
        return (COUNT, *(column for each in self.observables for column in each.columns()))

    def inverse_temperature(self, temperature: ArrayLike) -> NDArray[np.float64]:
        """Inverse temperatures in 1 / energy unit; infinite temperatures give 0.

        Raises
        ------
        InputError
            A temperature is not positive, or not a number.
        """
        given = np.asarray(temperature, dtype=np.float64)
        absolute = given + units.to_kelvin(0.0, self.temperature_unit)
        bad = ~(absolute > 0)
        if bad.any():
            unit = f" {self.temperature_label}".rstrip()
            raise InputError(
                f"temperature must be greater than absolute zero; got {np.atleast_1d(given)[np.atleast_1d(bad)][0]:g}"
                f"{unit} ({int(bad.sum())} of {given.size} values)."
            )
        with np.errstate(divide="ignore"):
            return np.asarray(1 / (self.boltzmann_constant * absolute))

    def temperature(self, beta: ArrayLike) -> NDArray[np.float64]:
        """Temperatures in the study's unit; infinite for an inverse temperature of 0."""
        with np.errstate(divide="ignore"):
            absolute = 1 / (self.boltzmann_constant * np.asarray(beta, dtype=np.float64))
        return np.asarray(absolute - units.to_kelvin(0.0, self.temperature_unit))

    @property
    def temperature_label(self) -> str:
        """Unit of temperatures as written on screen; empty in reduced units."""
        return "" if self.temperature_unit == units.REDUCED else self.temperature_unit

    @property
    def log_states(self) -> float | None:
        """Natural logarithm of the declared number of states; None if none is declared."""
        if self.states is None:
            return None
        base, power = base_and_power(self.states)
        return power * math.log(base)

    @property
    def normalisations(self) -> dict[str, str]:
        """What each recorded observable is: ``"total"``, ``"per site"`` or ``"plain"``."""
        return {each.name: each.normalisation for each in self.observables}

    def as_dict(self) -> dict[str, Any]:
        """Plain data, for a file."""
        return dataclasses.asdict(self)

    @classmethod
    def from_dict(cls, data: Mapping[str, Any]) -> Description:
        """Inverse of :meth:`as_dict`."""
        observables = tuple(
            ObservableDescription(**{**each, "moments": tuple(each["moments"])})
            for each in data["observables"]
        )
        return cls(**{**data, "observables": observables})


@dataclass(frozen=True, kw_only=True, eq=False)
class Decision:
    """What was decided about a run after it was tallied.

    Attributes
    ----------
    discard : int or str
        As asked: ``"auto"``, rows, a percentage, or a time.
    transient : int
        Rows found (or asked) to be left out at the start of this run.
    first_leaf : int
        First leaf used: the transient rounded up to a whole leaf.
    common_start : bool
        The first leaf is that of the run of a replica exchange that starts latest.
    inefficiency : Inefficiency
        Of the energy after the transient.
    weight_inefficiency : float
        The same drawn towards the runs' common value; what samples are divided by.
    """

    discard: int | str
    transient: int
    first_leaf: int
    inefficiency: Inefficiency
    weight_inefficiency: float
    common_start: bool = False


@dataclass(frozen=True, kw_only=True, eq=False)
class RunRecord:
    """One run in use.

    Attributes
    ----------
    name : str
    beta : float
        Inverse temperature, 1 / energy unit.
    tally : RunTally
    decision : Decision
    leaf_rows : numpy.ndarray, shape (B,)
        Rows in each leaf.
    thinned : Thinned
    files : tuple of dict
        Ledger entries: path, sha256, rows read, first and last energy.
    clock : Clock or None
        Time between rows, if it is known.
    first_energies : numpy.ndarray, shape (at most FIRST_ROWS,)
        As they were read; the common nodes of all runs were decided from them.
    """

    name: str
    beta: float
    tally: RunTally
    decision: Decision
    leaf_rows: NDArray[np.int64]
    thinned: Thinned
    files: tuple[dict[str, Any], ...] = ()
    clock: Clock | None = None
    first_energies: NDArray[np.float64] = field(default_factory=lambda: np.empty(0))

    @property
    def rows(self) -> int:
        """Rows read."""
        return self.tally.row_count

    @property
    def transient_rows(self) -> int:
        """Rows left out at the start, after rounding up to whole leaves."""
        return int(self.leaf_rows[: self.decision.first_leaf].sum())

    @property
    def samples(self) -> int:
        """Rows used."""
        return self.rows - self.transient_rows

    @property
    def inefficiency(self) -> Inefficiency:
        """Of the energy: the slower of its two estimates, as far as chance does not explain the difference."""
        return self.time_scales["energy"].slower

    @property
    def independent_samples(self) -> float:
        """Rows used over the statistical inefficiency of the energy."""
        return self.samples / self.inefficiency.value

    @cached_property
    def time_scales(self) -> dict[str, TimeScales]:
        """Statistical inefficiency, estimated twice, of the energy and of each observable, by name."""
        found = {}
        for name in ("energy", *self.tally.observables):
            means, within = self.series(name)
            block = max(1, int(self.leaf_rows[0]) // self.thinned.group)
            found[name] = time_scales(means, within, group=self.thinned.group, block=block)
        return found

    def series(self, name: str) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Means over groups of rows after the transient, and the variances inside the groups, of one column.

        Of an observable that is also tallied without its sign, means without their sign: rare changes of sign, which
        leave energies as they are, would else count as correlation.

        Raises
        ------
        NotInFileError
            There is no such column.
        """
        names = ("energy", *self.tally.observables)
        if name not in names:
            raise NotInFileError(f"series must be one of {', '.join(names)}; got {name!r}.")
        column, first = names.index(name), self.transient_rows // self.thinned.group
        means = self.thinned.means()[first:, column]
        unsigned = any(each.observable == name and each.absolute for each in self.tally.columns)
        return np.abs(means) if unsigned else means, self.thinned.within_variance()[first:, column]


@dataclass(frozen=True, kw_only=True)
class LeftOut:
    """A run the study leaves out, and why."""

    name: str
    beta: float | None  # None if its rows are at several temperatures
    reason: str


@dataclass(frozen=True, kw_only=True, eq=False)
class DensityOfStates:
    """All runs of a study combined into one estimate of the density of states.

    Made by :func:`reweight.combine`, opened again by :func:`reweight.open_combined`; asked by functions such as
    :func:`reweight.curve`.

    Attributes
    ----------
    description : Description
    runs : tuple of RunRecord, length K
        In the order of the study.
    left_out : tuple of LeftOut
    replicas : ReplicaRecord or None
        How the replicas wandered, if the files of a replica exchange followed these.
    estimate : Estimate
        The array side of it.
    study_text : str
        The study file, as it was read; empty for runs given as arrays.
    provenance : dict
        Version and what else is needed to say how it was made.
    """

    description: Description
    runs: tuple[RunRecord, ...]
    estimate: Estimate
    left_out: tuple[LeftOut, ...] = ()
    replicas: ReplicaRecord | None = None
    study_text: str = ""
    provenance: dict[str, str] = field(default_factory=dict)

    @cached_property
    def temperatures(self) -> NDArray[np.float64]:
        """Simulated temperatures, shape (K,), in the study's unit and order."""
        return self.description.temperature(self.estimate.beta)

    @cached_property
    def cold_to_hot(self) -> NDArray[np.int64]:
        """Order of the runs from cold to hot, shape (K,)."""
        return np.argsort(-self.estimate.beta, kind="stable")

    @cached_property
    def sharing(self) -> NDArray[np.float64]:
        """Sharing across the cut above each run but the hottest, cold to hot, in independent samples, shape (K - 1,)."""
        return self.estimate.sharing[::-1]

    def quantities(self, names: Iterable[str]) -> list[Quantity]:
        """Quantities by name, as this object can answer them.

        Raises
        ------
        NotInFileError
            A name is not among those that can be asked.
        """
        description = self.description
        return named(names, description.normalisations, description.columns, description.ensemble)

    @property
    def quantity_names(self) -> tuple[str, ...]:
        """Names of everything that can be asked."""
        return tuple(available(self.description.normalisations, self.description.columns))

    def choices(self) -> list[str]:
        """What somebody decided by hand, in words."""
        description = self.description
        made = []
        if description.pressure is not None:
            made.append(f"constant pressure, {description.pressure}: the energy is the enthalpy")
        if description.degrees_of_freedom:
            made.append(
                f"heat capacity: includes {description.degrees_of_freedom} k_B / 2 from declared degrees of freedom"
            )
        if description.weighting != "independent":
            made.append("weighting: all samples alike, not by statistical inefficiency")
        if description.exchange:
            made.append("replica exchange: one common start, the latest of all runs")
        if description.resolution is not None:
            made.append(f"resolution: {description.resolution:g} {description.energy_unit}")
        made += [
            f"discard: {run.decision.discard} (run {run.name})"
            for run in self.runs
            if run.decision.discard != "auto"
        ]
        made += [f"left out: {each.name} ({each.reason})" for each in self.left_out]
        return made

    def __repr__(self) -> str:
        title = f" {self.description.title!r}" if self.description.title else ""
        samples = sum(run.samples for run in self.runs)
        low, high = (f"{each:g}" for each in (self.temperatures.min(), self.temperatures.max()))
        unit = self.description.temperature_label
        scale = f"{unit}, energies in {self.description.energy_unit}" if unit else "(reduced units, k_B = 1)"
        return f"<DensityOfStates{title}: {len(self.runs)} runs, {samples} samples, {low} to {high} {scale}>"
