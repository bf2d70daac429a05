"""From files to what their studies should say."""

from __future__ import annotations

import os
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from reweight import units
from reweight.drafting.energies import (
    column_key,
    guess_energy_column,
    guess_kind,
    guess_unit_and_share,
    is_counter,
)
from reweight.drafting.guess import Guess, certain, doubtful, likely
from reweight.drafting.look import ColumnLook, FileLook, look_at
from reweight.drafting.runs import DraftRun, draft_runs, is_scan, points_of, usable_clock
from reweight.drafting.systems import System, guess_count, guess_length, parted, size_of
from reweight.drafting.temperatures import setting_columns
from reweight.drafting.words import Role, time_unit_of
from reweight.errors import DataFileError
from reweight.reading.source import refusal

__all__ = ["Draft", "Offer", "draft_studies"]

_COLD = 200.0  # a temperature below it may be kelvin or degrees Celsius, and the study refuses to choose
_PRESSURE = re.compile(
    r"\b(?:P|pressure|ref[_ ]?p)\s*[=:]\s*([0-9.]+(?:[eE][+-]?[0-9]+)?)\s*(bar|atm|Pa|kPa|MPa|GPa)\b"
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Offer:
    """A column that may become an observable.

    Attributes
    ----------
    name : str
        As the study would call it.
    column : str or int
    unit : str
    """

    name: str
    column: str | int
    unit: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Draft:
    """What one study should say.

    Attributes
    ----------
    label : str
        Tells the study from the others; empty if there is one only.
    keys : mapping
        Path of a key, such as ``columns.energy``, to what it should hold.
    runs : tuple of DraftRun
    offers : tuple of Offer
    unplaced : tuple of FileLook
        Files that are in no run: neither their numbers nor their temperature can be read.
    """

    label: str
    keys: Mapping[str, Guess]
    runs: tuple[DraftRun, ...]
    offers: tuple[Offer, ...] = ()
    unplaced: tuple[FileLook, ...] = field(default=())

    @property
    def open_keys(self) -> tuple[str, ...]:
        """Paths of the keys somebody has to fill in; runs are counted from 1."""
        keys = [key for key, guess in self.keys.items() if guess.open]
        places = {"run": 0, "replica": 0}
        for run in self.runs:
            places[run.table] += 1
            if run.guess is not None and run.guess.open:
                keys.append(f"{run.table}[{places[run.table]}].{run.key}")
        return tuple(keys)


def draft_studies(files: Sequence[Path]) -> list[Draft]:
    """Look at data files and draft the study, or the studies, that describe them.

    Parameters
    ----------
    files : sequence of pathlib.Path

    Returns
    -------
    list of Draft
        One a system: files with the same columns and the same size.

    Raises
    ------
    DataFileError
        A file is not there, or none can be read.
    """
    missing = [path for path in files if not os.path.lexists(path)]
    if missing:
        raise refusal(
            missing[0], f"data file must be there; {len(missing)} of {len(files)} are not. Correct the name."
        )
    looks = [look_at(path) for path in dict.fromkeys(files)]
    readable = [look for look in looks if look.columns]
    unreadable = [look for look in looks if not look.columns]
    if not readable:
        first = unreadable[0]
        others = len(unreadable) - 1
        more = f" ({others} more file{'s' if others > 1 else ''} cannot be read either)" if others else ""
        raise DataFileError(f"{first.trouble}{more}", path=str(first.path))
    systems = parted(readable)
    homes = [_home(look, systems) for look in unreadable]
    return [
        _draft(system, [look for look, home in zip(unreadable, homes, strict=True) if home == place])
        for place, system in enumerate(systems)
    ]


def _home(look: FileLook, systems: Sequence[System]) -> int:
    """Place of the system whose size an unreadable file has in its name; the first if none has."""
    same = [place for place, system in enumerate(systems) if size_of(system.looks[0]) == size_of(look)]
    return same[0] if same else 0


def _draft(system: System, unreadable: Sequence[FileLook]) -> Draft:
    looks = system.looks
    model = max(looks, key=lambda look: len(look.columns))  # in a damaged file a column may be missing
    runs = draft_runs(looks, unreadable)
    energy, column = guess_energy_column(model)
    if not model.named and energy.open:
        energy = doubtful(energy.candidates, "the columns have no names; counted from 1")
    taken = {look.path for run in runs for look in run.looks}
    keys: dict[str, Guess] = {}
    energies = _candidate_columns(model, energy, column)
    counted = guess_count(looks)
    columns = [
        each
        for look in looks
        for each in look.columns
        if each.heading.name in {one.heading.name for one in energies}
    ]
    points = points_of(runs, column.heading.name) if column is not None else []
    unit, share = guess_unit_and_share(looks, columns, points, counted[0] if counted else None)
    keys["energy_unit"] = unit
    temperature_unit = _temperature_unit(unit, runs)
    if temperature_unit is not None:
        keys["temperature_unit"] = temperature_unit
    keys["energy_kind"] = guess_kind(looks, column)
    keys |= _system(share, counted, guess_length(looks))
    keys |= _format(model)
    keys["columns.energy"] = energy
    keys |= _clock(looks)
    keys |= _scan(looks)
    keys |= _constant_pressure(looks)
    return Draft(
        label=system.label,
        keys=keys,
        runs=tuple(runs),
        offers=tuple(_offers(model, energies)),
        unplaced=tuple(look for look in unreadable if look.path not in taken),
    )


def _candidate_columns(look: FileLook, energy: Guess, column: ColumnLook | None) -> list[ColumnLook]:
    if column is not None:
        return [column]
    return [each for each in look.columns if column_key(look, each) in energy.candidates]


def _temperature_unit(energy_unit: Guess, runs: Sequence[DraftRun]) -> Guess | None:
    """Guess the unit of temperatures; None if the unit of energies decides it."""
    if energy_unit.value == units.REDUCED:
        return None
    said = {run.temperature_unit for run in runs} - {""}
    if len(said) > 1:
        return doubtful(tuple(sorted(said)), "the files say both")
    if said:
        return certain(said.pop(), "the files say so")
    values = [run.guess.value for run in runs if run.guess is not None and run.key == "temperature"]
    numbers = [value for value in values if isinstance(value, float)]
    if numbers and min(numbers) >= _COLD:
        return likely("K", "no unit is stated; the values are those of kelvin")
    if energy_unit.open or not numbers:
        return None
    return doubtful(("K", "degC"), "no unit is stated")


def _system(share: Guess, counted: tuple[Guess, str] | None, length: Guess | None) -> dict[str, Guess]:
    keys: dict[str, Guess] = {}
    per = "" if share.value in (None, "total") else str(share.value).removeprefix("per ")
    if counted is not None:
        keys["system.count"] = counted[0]
        keys["system.per"] = likely(per or counted[1], "as it is called there")
    elif per:
        keys["system.count"] = doubtful((), f"energies are per {per}, and nothing tells of how many")
        keys["system.per"] = likely(per, "as it is called in the heading")
    keys["system.energies_are"] = share
    if length is not None:
        keys["system.length"] = length
    return keys


def _format(look: FileLook) -> dict[str, Guess]:
    keys: dict[str, Guess] = {}
    if look.format.decimal is not None:
        keys["format.decimal"] = certain(look.format.decimal, "only so do all columns hold numbers")
    if look.format.table is not None:
        keys["format.table"] = likely(
            look.format.table, "a log: the rows under this line have as many numbers"
        )
    return keys


def _clock(looks: Sequence[FileLook]) -> dict[str, Guess]:
    sound = [look for look in looks if not look.trouble] or looks
    clocks = [usable_clock(look) for look in sound]
    first = clocks[0]
    if first is not None and all(clock is not None for clock in clocks):
        unit = time_unit_of(first.heading)
        assert unit is not None  # that makes a clock usable
        return {
            "columns.time": certain(column_key(sound[0], first), "by its name"),
            "columns.time_unit": certain(unit, "by its heading"),
        }
    for look in looks:
        for column in look.columns:
            if column.heading.role is Role.CLOCK and column.goes_back and column.last > column.first:
                why = f"times go back in {look.path.name!r}: a restart, whose rows replace earlier ones"
                return {
                    "columns.time": likely(column_key(look, column), "by its name"),
                    "columns.time_unit": doubtful(("ps", *units.COUNTED_TIMES), why),
                }
    return {}


def _scan(looks: Sequence[FileLook]) -> dict[str, Guess]:
    if not is_scan(looks):
        return {}
    found = next((look, setting_columns(look)) for look in looks if setting_columns(look))
    look, columns = found
    values = f"{len(columns[0].distinct)} values, each many times"
    candidates = tuple(column_key(look, column) for column in columns)
    if len(columns) > 1:
        return {"columns.temperature": doubtful(candidates, values)}
    return {"columns.temperature": certain(candidates[0], values)}


def _constant_pressure(looks: Sequence[FileLook]) -> dict[str, Guess]:
    """Keys that make the enthalpy, if the volume fluctuates."""
    look = max(looks, key=lambda each: len(each.columns))
    volumes = [
        column for column in look.columns if column.heading.role is Role.VOLUME and not column.constant
    ]
    if len(volumes) != 1:
        return {}
    unit = volumes[0].heading.unit
    said = {
        f"{found[1]} {found[2]}"
        for each in looks
        for remark in each.remarks
        if (found := _PRESSURE.search(remark))
    }
    why = "the volume fluctuates: constant pressure"
    return {
        "columns.volume": certain(column_key(look, volumes[0]), "by its name"),
        "columns.volume_unit": certain(unit, "by its heading")
        if unit
        else doubtful(("nm^3", "angstrom^3", units.REDUCED), "no unit is stated"),
        "conditions.pressure": likely(said.pop(), "a line of remarks")
        if len(said) == 1
        else doubtful(tuple(sorted(said)), f'{why}; write it like "1 bar"'),
    }


def _offers(look: FileLook, energies: Sequence[ColumnLook]) -> list[Offer]:
    """Columns that may become observables: those whose names say nothing else."""
    taken: set[str] = {"energy", ""}
    offers = []
    for column in look.columns:
        if (
            column.heading.role is not Role.OTHER
            or column in energies
            or column.constant
            or is_counter(column)
        ):
            continue
        name = re.sub(r"\W+", "_", column.heading.name, flags=re.ASCII).strip("_").lower()
        name = f"column_{column.position}" if not look.named or not name or name[0].isdigit() else name
        if name in taken:
            name = f"{name}_{column.position}"
        taken.add(name)
        offers.append(Offer(name=name, column=column_key(look, column), unit=column.heading.unit))
    return offers
