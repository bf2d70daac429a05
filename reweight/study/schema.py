"""The study file's keys: what each may hold, and what it means.

One model a table of the TOML.  What a single value may be is said in ``values.py``, how a failed check is put
into words in ``problems.py``.  Values keep the units of the study file.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from pathlib import Path, PurePath
from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, PrivateAttr, model_validator

from reweight import units
from reweight.study.values import (
    CommentPrefixes,
    Delimiter,
    Discard,
    Encoding,
    EnergyUnit,
    FileNames,
    FiniteNumber,
    Header,
    Line,
    Moments,
    Name,
    Normalisation,
    NotNegativeNumber,
    NumberOfStates,
    PositiveInteger,
    PositiveNumber,
    Pressure,
    RunName,
    SingleColumn,
    SummedColumns,
    Temperature,
    TimeUnit,
    TotalOrPer,
    Unit,
    VolumeUnit,
    base_and_power,
    listed,
    pressure_and_unit,
)

__all__ = ["Columns", "Conditions", "Format", "Observable", "Replica", "Run", "Study", "System"]


class _Table(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, strict=True)


class System(_Table):
    """``[system]``: what was simulated."""

    count: PositiveInteger | None = None
    per: Name = "particle"
    energies_are: TotalOrPer = "total"
    volumes_are: TotalOrPer = "total"
    length: PositiveNumber | None = None
    dimension: PositiveInteger | None = None
    states: NumberOfStates | None = None
    ground_degeneracy: PositiveInteger | None = None

    @property
    def log_states(self) -> float | None:
        """Natural logarithm of the declared number of states; None if none is declared."""
        if self.states is None:
            return None
        base, power = base_and_power(self.states)
        return power * math.log(base)

    @property
    def energy_multiplier(self) -> int:
        """Number by which the files' energies are multiplied to have the energy of the whole system."""
        return 1 if self.energies_are == "total" or self.count is None else self.count

    @property
    def volume_multiplier(self) -> int:
        """Number by which the files' volumes are multiplied to have the volume of the whole system."""
        return 1 if self.volumes_are == "total" or self.count is None else self.count


class Conditions(_Table):
    """``[conditions]``: how it was simulated."""

    pressure: Pressure | None = None
    degrees_of_freedom: Annotated[int, Field(ge=0)] = 0
    exchange: bool = False


class Format(_Table):
    """``[format]``: what the look of a file cannot tell; None means that it is told by the file.

    The last four keys are caps on what a file may declare or need; they are there to be raised.
    """

    delimiter: Delimiter | None = None
    decimal: Literal[".", ","] | None = None
    thousands: Literal[",", ".", "'", " "] | None = None
    comment: CommentPrefixes | None = None
    header: bool | None = None
    encoding: Encoding | None = None
    table: Header | None = None
    largest_line: PositiveInteger = 1_000_000  # bytes; a row of 10,000 columns has 250,000
    most_columns: PositiveInteger = 10_000
    largest_expansion: PositiveInteger | None = None
    largest_chunk: PositiveInteger = (
        1 << 28
    )  # bytes; a NetCDF file can declare one of terabytes, to be allocated


class Columns(_Table):
    """``[columns]``: which columns hold what; several energies are summed."""

    energy: SummedColumns | None = None
    time: SingleColumn | None = None
    time_unit: TimeUnit | None = None
    volume: SingleColumn | None = None
    volume_unit: VolumeUnit | None = None
    temperature: SingleColumn | None = None


class Observable(_Table):
    """``[observables.NAME]``: a quantity recorded beside the energy."""

    column: SummedColumns
    unit: Unit = "1"
    normalisation: Normalisation = Field(default="plain", alias="is")
    moments: Moments = (1,)
    absolute: bool = False
    above: FiniteNumber | None = None
    bins: Annotated[tuple[float, ...], BeforeValidator(listed)] | None = None


class _Sampled(_Table):
    """What all tables with files have."""

    name: RunName
    files: FileNames
    discard: Discard = "auto"

    @model_validator(mode="before")
    @classmethod
    def _name_after_first_file(cls, values: Any) -> Any:
        if not isinstance(values, Mapping) or "name" in values:
            return values
        files = listed(values.get("files"))
        if not isinstance(files, tuple) or not files or not isinstance(files[0], str):
            return {**values, "name": "unnamed"}  # the missing files are the problem to be reported
        unpacked = files[0].removesuffix(".gz").removesuffix(".bz2").removesuffix(".xz")
        return {**values, "name": PurePath(unpacked).stem or "unnamed"}


class Run(_Sampled):
    """``[[run]]``: samples of one simulation, in one or several files.

    At one temperature; or at several, if a column of the files says at which: then it stands for one run each.
    """

    temperature: Temperature | None = None
    inverse_temperature: NotNegativeNumber | None = Field(default=None, alias="beta")
    use: bool = True
    reason: Line = ""

    def beta(self, study: Study) -> float:
        """Inverse temperature in 1 / energy unit of the study; 0 for an infinite temperature."""
        if self.inverse_temperature is not None:
            return self.inverse_temperature
        assert self.temperature is not None  # parsing made sure that one of the two is given
        return study.beta(self.temperature)


class Replica(_Sampled):
    """``[[replica]]``: samples of one replica, whose temperature changes, in one or several files."""


class Study(_Table):
    """A whole study file; from :func:`reweight.study.load_study` or :func:`reweight.study.parse_study`."""

    schema_version: Literal[1] = Field(alias="schema")
    title: Line = ""
    energy_unit: EnergyUnit
    temperature_unit: Literal["K", "degC", "reduced"]
    energy_kind: Literal["potential", "total"] = "potential"
    weighting: Literal["independent", "samples"] = "independent"
    resolution: PositiveNumber | None = None
    system: System = System()
    conditions: Conditions = Conditions()
    format: Format = Format()
    columns: Columns = Columns()
    observables: dict[str, Observable] = {}
    runs: Annotated[tuple[Run, ...], BeforeValidator(listed)] = Field(default=(), alias="run")
    replicas: Annotated[tuple[Replica, ...], BeforeValidator(listed)] = Field(default=(), alias="replica")
    report: dict[str, Any] = {}

    _text: str = PrivateAttr(default="")
    _folder: Path = PrivateAttr(default=Path())
    _path: Path | None = PrivateAttr(default=None)
    _says_temperature_unit: bool = PrivateAttr(default=True)
    _matched: dict[str, tuple[str, ...]] = PrivateAttr(default_factory=dict)

    @model_validator(mode="before")
    @classmethod
    def _temperature_unit_of_energies(cls, values: Any) -> Any:
        if not isinstance(values, Mapping) or "temperature_unit" in values:
            return values
        reduced = values.get("energy_unit") == units.REDUCED
        return {**values, "temperature_unit": units.REDUCED if reduced else "K"}

    @property
    def text(self) -> str:
        """The TOML it was made from."""
        return self._text

    @property
    def folder(self) -> Path:
        """Folder to which the data files' names are relative."""
        return self._folder

    @property
    def path(self) -> Path | None:
        """The study file; None if the study did not come from a file."""
        return self._path

    @property
    def matched(self) -> Mapping[str, tuple[str, ...]]:
        """Names of files with ``*``, ``?`` or ``[...]`` as written, and the files they stand for, in natural order."""
        return self._matched

    @property
    def temperature_unit_is_certain(self) -> bool:
        """Whether temperatures below the usual cannot be meant in another unit; see ``values.COLD``."""
        return self._says_temperature_unit or self.energy_unit in (units.REDUCED, "K")

    @property
    def exchange(self) -> bool:
        """Whether the runs are the temperatures of one replica exchange; several replicas always are."""
        return self.conditions.exchange or len(self.replicas) > 1

    @property
    def files(self) -> tuple[str, ...]:
        """Every data file, also of runs that are left out."""
        return tuple(file for each in (*self.runs, *self.replicas) for file in each.files)

    @property
    def boltzmann_constant(self) -> float:
        """k_B in the study's energy unit per kelvin; 1 in reduced units."""
        return units.boltzmann_constant(self.energy_unit, self.temperature_unit)

    @property
    def pressure_energy(self) -> float | None:
        """Pressure times one unit of the files' volumes, in the study's energy unit; None without a pressure."""
        if self.conditions.pressure is None or self.columns.volume_unit is None:
            return None
        pressure, unit = pressure_and_unit(self.conditions.pressure)
        one = units.pressure_volume_factor(unit, self.columns.volume_unit, self.energy_unit)
        return pressure * one * self.system.volume_multiplier

    @property
    def used_runs(self) -> tuple[Run, ...]:
        """Runs that are not left out."""
        return tuple(run for run in self.runs if run.use)

    def beta(self, temperature: float) -> float:
        """Inverse temperature in 1 / energy unit at a temperature in the study's unit; 0 if it is infinite."""
        if math.isinf(temperature):
            return 0.0
        return 1.0 / (self.boltzmann_constant * units.to_kelvin(temperature, self.temperature_unit))

    def data_path(self, file: str) -> Path:
        """Where a file named in the study lies."""
        return self.folder / file
