"""Everything wrong with a study file, in the words of its author: which key, what was found, what to write.

The checks of one value are in the models; here are the checks that need several keys, the list of keys that
are reserved for later, and the one place where a problem becomes a sentence.
"""

from __future__ import annotations

import difflib
import math
import posixpath
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from pydantic import BaseModel
from pydantic_core import ErrorDetails

from reweight import units
from reweight.errors import InputError
from reweight.study.layouts import disagreeing_layouts, unmatched
from reweight.study.questions import Location, open_questions
from reweight.study.schema import Columns, Conditions, Format, Observable, Replica, Run, Study, System
from reweight.study.values import COLD, amount_and_unit

__all__ = ["Problem", "disagreements", "not_built_yet", "translated", "unanswered"]

# Keys that belong to the study file but that nothing uses yet, with the value that asks for nothing.  Whoever
# builds a feature deletes its row.
_NOT_BUILT_YET: tuple[tuple[str, object], ...] = (
    ("observables.*.bins", None),
    ("report", None),
)

_MODELS: Mapping[tuple[str, ...], type[BaseModel]] = {
    (): Study,
    ("run",): Run,
    ("replica",): Replica,
    ("system",): System,
    ("conditions",): Conditions,
    ("format",): Format,
    ("columns",): Columns,
    ("observables", "*"): Observable,
}

_EXPECTATIONS = {
    "missing": "must be given",
    "string_type": "must be a text in quotes",
    "int_type": "must be a whole number",
    "float_type": "must be a number",
    "bool_type": "must be true or false",
    "literal_error": "must be {expected}",
    "greater_than": "must be greater than {gt}",
    "greater_than_equal": "must be at least {ge}",
    "too_short": "must not be empty",
    "tuple_type": "must be a list",
    "dict_type": "must be a table",
    "model_type": "must be a table",
}


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing to be corrected.

    Attributes
    ----------
    key : str
        Path of the key, such as ``run[2].temperature``; runs and list entries are counted from 1.
    sentence : str
        The path, the run's name if it has one, what was expected and what was found.
    """

    key: str
    sentence: str


def not_built_yet(values: Mapping[str, Any]) -> Iterator[Problem]:
    """Find keys that this version knows but cannot use."""
    for pattern, harmless in _NOT_BUILT_YET:
        for location, found in _matches(values, pattern.split(".")):
            if not (found == harmless and type(found) is type(harmless)):
                yield _problem(location, "is known but this version cannot use it yet; remove it", values)


def unanswered(values: Mapping[str, Any]) -> Iterator[Problem]:
    """Find what a draft left to be filled in."""
    for location, candidates in open_questions(values):
        found = (
            f"the candidates are {' or '.join(map(repr, candidates))}" if candidates else "nothing told it"
        )
        yield _problem(location, f"must be filled in, in place of the question mark; {found}", values)


def translated(details: Sequence[ErrorDetails], values: Mapping[str, Any]) -> Iterator[Problem]:
    """Put the failed checks of the models into words; what is merely unanswered is no failure of its own."""
    unanswered_keys = {location for location, _ in open_questions(values)}
    for detail in details:
        location = detail["loc"]
        if location in unanswered_keys:
            continue
        kind = detail["type"]
        context = detail.get("ctx", {})
        if kind == "extra_forbidden":
            text = f"is no key of a study file.{_suggestion(location)}"
        elif kind == "value_error":
            text = str(context["error"])
        elif kind == "missing":
            text = _EXPECTATIONS[kind]
        else:
            expectation = _EXPECTATIONS.get(kind, detail["msg"]).format(**context)
            text = f"{expectation}; got {_shortened(detail['input'])}"
        yield _problem(location, text, values)


def disagreements(study: Study, values: Mapping[str, Any]) -> Iterator[Problem]:
    """Find values that are fine alone but not together."""
    if (study.energy_unit == units.REDUCED) != (study.temperature_unit == units.REDUCED):
        text = (
            f'must be "reduced" together with energy_unit or not at all; got {study.temperature_unit!r} '
            f"with energy_unit = {study.energy_unit!r}"
        )
        yield _problem(("temperature_unit",), text, values)
        return
    meanings = {"energies_are": study.system.energies_are, "volumes_are": study.system.volumes_are}
    for key, meaning in meanings.items():
        if meaning != "total" and study.system.count is None:
            text = f"must be given, because {key} = {meaning!r} is multiplied by it"
            yield _problem(("system", "count"), text, values)
    layouts = (*disagreeing_layouts(study), *unmatched(study))
    for location, text in (*_signs(study.format), *_pressure(study), *layouts):
        yield _problem(location, text, values)
    yield from _ambiguous_temperature(study, values)
    for name in study.observables:
        if not (name.isidentifier() and name.isascii()) or name == "energy":
            text = 'must be named with letters, digits and "_", not beginning with a digit, and not "energy"'
            yield _problem(("observables", name), text, values)
    clock = {"time": study.columns.time, "time_unit": study.columns.time_unit}
    for missing, given in (("time", "time_unit"), ("time_unit", "time")):
        if clock[missing] is None and clock[given] is not None:
            yield _problem(("columns", missing), f"must be given, because columns.{given} is", values)
    if study.runs and not study.used_runs:
        yield _problem(("run",), "must have at least one run with use = true; all are left out", values)
    for index, run in enumerate(study.runs):
        for key, text in (*_run_disagreements(run, study), *_discard_disagreements(run.discard, study)):
            yield _problem(("run", index, key), text, values)
    for index, replica in enumerate(study.replicas):
        for key, text in _discard_disagreements(replica.discard, study):
            yield _problem(("replica", index, key), text, values)
    yield from _repetitions("run", study.runs, values)
    yield from _repetitions("replica", study.replicas, values)


def _repetitions(
    table: str, entries: Sequence[Run | Replica], values: Mapping[str, Any]
) -> Iterator[Problem]:
    first_with_name: dict[str, int] = {}
    first_with_file: dict[str, int] = {}
    for index, entry in enumerate(entries):
        if first_with_name.setdefault(entry.name, index) != index:
            text = (
                f"must be unique; got {entry.name!r}, as for {table}[{first_with_name[entry.name] + 1}] "
                f"(a {table} without a name is called after its first file)"
            )
            yield _problem((table, index, "name"), text, values)
        for file in entry.files:
            same = posixpath.normpath(file)
            if same in first_with_file:
                other = first_with_file[same] + 1
                text = f"must not be read twice; got {file!r}, listed in {table}[{other}] already"
                yield _problem((table, index, "files"), text, values)
            first_with_file.setdefault(same, index)


def _signs(declared: Format) -> Iterator[tuple[Location, str]]:
    """Find signs in numbers that stand for two things."""
    signs = {
        "decimal": declared.decimal or ("," if declared.thousands == "." else "."),
        "thousands": declared.thousands,
        "delimiter": declared.delimiter,
    }
    for key, other in (("delimiter", "decimal"), ("thousands", "decimal"), ("delimiter", "thousands")):
        if signs[key] is not None and signs[key] == signs[other]:
            yield ("format", key), f"must differ from format.{other}; both are {signs[key]!r}"


def _pressure(study: Study) -> Iterator[tuple[Location, str]]:
    """Find what does not go together at constant pressure, or with declared degrees of freedom."""
    conditions, columns = study.conditions, study.columns
    needed = {
        ("conditions", "pressure"): conditions.pressure,
        ("columns", "volume"): columns.volume,
        ("columns", "volume_unit"): columns.volume_unit,
    }
    missing = [location for location, value in needed.items() if value is None]
    given = [".".join(location) for location, value in needed.items() if value is not None]
    if missing and given:
        for location in missing:
            yield (
                location,
                f"must be given, because {' and '.join(given)} {'is' if len(given) == 1 else 'are'}: pressure, volume "
                "and its unit together make the enthalpy; for runs at constant volume give none of them",
            )
    elif not missing:
        try:
            _ = study.pressure_energy
        except InputError as error:
            yield ("conditions", "pressure"), f"cannot be used: {error}"
        if study.system.states is not None:
            yield (
                ("system", "states"),
                "must not be given with a pressure: at constant pressure the states of every volume count, and their "
                "number is not finite",
            )
    if conditions.degrees_of_freedom and study.energy_kind == "total":
        yield (
            ("conditions", "degrees_of_freedom"),
            'must not be given with energy_kind = "total": total energies fluctuate with their kinetic part already, '
            f"which would count twice; got {conditions.degrees_of_freedom}",
        )


def _ambiguous_temperature(study: Study, values: Mapping[str, Any]) -> Iterator[Problem]:
    if study.temperature_unit_is_certain:
        return
    cold = [run.temperature for run in study.runs if run.temperature is not None and run.temperature < COLD]
    if cold:
        text = (
            f"must be given, because temperatures below {COLD:g} may be kelvin or degrees Celsius; got {min(cold):g}. "
            'Write temperature_unit = "K" or "degC"'
        )
        yield _problem(("temperature_unit",), text, values)


def _run_disagreements(run: Run, study: Study) -> Iterator[tuple[str, str]]:
    temperatures = (run.temperature, run.inverse_temperature)
    if temperatures == (None, None) and study.columns.temperature is not None:
        pass  # the rows say it
    elif (run.temperature is None) == (run.inverse_temperature is None):
        found = "neither" if run.temperature is None else "both"
        yield "temperature", f"must be given, or beta instead, but not both; got {found}"
    elif run.temperature is not None:
        if not units.to_kelvin(run.temperature, study.temperature_unit) > 0:
            zero = " (-273.15 degC)" if study.temperature_unit == "degC" else ""
            yield "temperature", f"must lie above absolute zero{zero}; got {run.temperature}"
        elif not math.isfinite(run.beta(study)):
            yield "temperature", f"must be large enough for 1 / (k_B T) to be a number; got {run.temperature}"
    if not run.use and not run.reason.strip():
        yield "reason", "must say why the run is left out, because use = false; it is printed and archived"


def _discard_disagreements(discard: str | int, study: Study) -> Iterator[tuple[str, str]]:
    if isinstance(discard, str) and discard != "auto":
        _, unit = amount_and_unit(discard)
        clock = study.columns.time_unit
        if unit != "%" and clock is None:
            yield (
                "discard",
                f"as a time ({discard!r}) needs a clock: name the column of times and its unit under [columns], "
                'time = "t" and time_unit = "ps", or give rows (500) or a percentage ("10 %")',
            )
        elif unit != "%" and clock is not None:
            try:
                units.time_factor(unit, clock)
            except InputError as error:
                yield "discard", f"must be a time of the study's clock; got {discard!r}: {error}"


def _matches(values: Any, pattern: Sequence[str], above: Location = ()) -> Iterator[tuple[Location, Any]]:
    if not pattern:
        yield above, values
    elif isinstance(values, Mapping):
        for key in values if pattern[0] == "*" else [pattern[0]]:
            if key in values:
                yield from _matches(values[key], pattern[1:], (*above, key))


def _problem(location: Location, text: str, values: Mapping[str, Any]) -> Problem:
    key = ""
    for part in location:
        if isinstance(part, int):
            key += f"[{part + 1}]"
        elif part != "[key]":
            key += f".{part}" if key else part
    end = "" if text.endswith((".", "?")) else "."
    return Problem(key, f"{key}{_named(location, values)} {text}{end}")


def _named(location: Location, values: Mapping[str, Any]) -> str:
    match location:
        case (("run" | "replica") as table, int(index), *_):
            run = values[table][index]
            name = run.get("name") if isinstance(run, Mapping) else None
            return f" (run {name!r})" if isinstance(name, str) and name else ""
    return ""


def _suggestion(location: Location) -> str:
    section = tuple(part for part in location[:-1] if isinstance(part, str))
    if section[:1] == ("observables",):
        section = ("observables", "*")
    known = sorted(field.alias or name for name, field in _MODELS[section].model_fields.items())
    near = difflib.get_close_matches(str(location[-1]), known, n=1)
    elsewhere = [
        ".".join((*other, str(location[-1])))
        for other, model in _MODELS.items()
        if other != section
        and location[-1] in {field.alias or name for name, field in model.model_fields.items()}
    ]
    if elsewhere:
        return f" Did you mean {elsewhere[0].replace('*', 'NAME')}?"
    if near:
        return f" Did you mean {near[0]!r}?"
    return f" Known here: {', '.join(known)}"


def _shortened(value: object) -> str:
    text = repr(value)
    return text if len(text) <= 80 else f"{text[:77]}..."
