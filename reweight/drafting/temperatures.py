"""The temperature of a file: from a column, an attribute, a line of remarks, or the name of the file or its folder."""

from __future__ import annotations

import os
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

from reweight.drafting.consistency import HOTTEST_REDUCED
from reweight.drafting.guess import Guess, certain, doubtful, likely
from reweight.drafting.look import ColumnLook, FileLook
from reweight.drafting.words import Role

__all__ = ["TemperatureGuess", "guess_temperature", "setting_columns"]

_NUMBER = r"([0-9]{1,12}(?:\.[0-9]{0,18})?(?:[eE][+-]?[0-9]{1,2})?)(?![0-9])"
_ASSIGNED = r"\s*[=:_-]?\s*"
_TEMPERATURE_WORD = r"(?:temperature|temp|ref[_ ]?t|t[_ ]?ref|target[_ ]?t(?:emperature)?)"
_KELVIN = r"\s*\[?(K|kelvin|degC|°C|C)?\b"
_IN_REMARKS = (
    (
        "temperature",
        re.compile(rf"\b{_TEMPERATURE_WORD}\s*[\[(]?(K|degC|°C)?[\])]?\s*[=:]?\s*{_NUMBER}{_KELVIN}", re.I),
    ),
    ("temperature", re.compile(rf"\bT\s*[\[(]?(K|degC|°C)?[\])]?\s*[=:]\s*{_NUMBER}{_KELVIN}")),
    ("beta", re.compile(rf"\b(?:beta|inverse[ _]temperature)()\s*[=:]?\s*{_NUMBER}()", re.I)),
)
_START = r"(?<![A-Za-z0-9])"
_IN_NAMES = (
    ("temperature", re.compile(r"(?<![0-9.])()([0-9]+(?:\.[0-9]+)?)[ _-]?(K|degC)(?![A-Za-z0-9])")),
    (
        "temperature",
        re.compile(rf"{_START}(?:T|temp|temperature|Temp)()[=_-]?([0-9]+(?:\.[0-9]+)?)()(?![A-Za-z0-9])"),
    ),
    ("beta", re.compile(rf"{_START}(?:beta|Beta)()[=_-]?([0-9]+(?:\.[0-9]+)?)()(?![A-Za-z0-9])")),
)
_BARE_NUMBER = re.compile(r"(?<![0-9A-Za-z.])(?:[0-9]+\.[0-9]+|[0-9]{3,4})(?![0-9A-Za-z.])")
_SUFFIXES = re.compile(r"(?:\.[A-Za-z][A-Za-z0-9]*)+$")
_FOLDERS = 2  # above the file, whose names may tell
_FEWEST_REPEATS = 10  # rows a set temperature lasts on average; a thermostat's value hardly comes twice
_INSTANTANEOUS_SLACK = 0.05  # relative; the mean of a thermostat's value against what is said elsewhere


@dataclass(frozen=True, slots=True, kw_only=True)
class TemperatureGuess:
    """What is known of one file's temperature.

    Attributes
    ----------
    key : str
        ``"temperature"`` or ``"beta"``.
    guess : Guess
    unit : str
        ``"K"``, ``"degC"`` or empty if nothing tells it.
    """

    key: str
    guess: Guess
    unit: str


@dataclass(frozen=True, slots=True, kw_only=True)
class _Clue:
    key: str
    text: str
    unit: str
    where: str
    firm: bool  # whether the file itself states it, as opposed to a line or a name made for people

    @property
    def value(self) -> float:
        return float(self.text)

    @property
    def rounding(self) -> float:
        """Half of the last digit that is printed."""
        mantissa, _, power = self.text.lower().partition("e")
        decimals = len(mantissa.partition(".")[2]) - int(power or 0)
        return 0.5 * 10.0**-decimals


def setting_columns(look: FileLook) -> list[ColumnLook]:
    """Columns of temperatures that take a few values, each again and again: a file of several runs, or a replica."""
    return [
        column
        for column in look.columns
        if column.heading.role in (Role.TEMPERATURE, Role.BETA)
        and 1 < len(column.distinct) <= column.rows / _FEWEST_REPEATS
        and not _printed_without_digits(column)
    ]


def _printed_without_digits(column: ColumnLook) -> bool:
    """Whether few values mean only that a fluctuating temperature is printed in whole kelvin."""
    nearest = min(after - before for before, after in pairwise(column.distinct))
    return column.whole and nearest <= 1 and column.distinct[0] > HOTTEST_REDUCED


def guess_temperature(look: FileLook) -> TemperatureGuess:
    """Guess the temperature of a file that holds one run."""
    clues = [*_from_columns(look), *_from_attributes(look), *_from_remarks(look), *_from_names(look)]
    key = clues[0].key if clues else "temperature"
    # a beta beside a temperature can be compared only when the unit of energy is known
    clues = [clue for clue in clues if clue.key == key]
    unit = next((clue.unit for clue in clues if clue.unit), "")
    moving = [
        column
        for column in look.columns
        if column.heading.role is Role.TEMPERATURE
        and not column.constant
        and column not in setting_columns(look)
    ]
    if not clues:
        why = "nothing tells the temperature"
        if moving:
            why = f"column {moving[0].heading.name!r} fluctuates about {moving[0].mean:.5g}; what was set is not said"
        bare = tuple(float(text) for text in _BARE_NUMBER.findall(_SUFFIXES.sub("", look.path.name)))
        if bare:
            why += "; the name of the file has a number"
        return TemperatureGuess(key=key, guess=doubtful(tuple(dict.fromkeys(bare)), why), unit=unit)
    best = clues[0]
    odd = [clue for clue in clues[1:] if not _agree(best, clue)]
    if odd:
        found = _without_repeats([best, *odd])
        why = "; ".join(f"{clue.text} from {clue.where}" for clue in found)
        return TemperatureGuess(key=key, guess=doubtful(tuple(clue.value for clue in found), why), unit=unit)
    for column in moving:
        if key == "temperature" and abs(column.mean - best.value) > _INSTANTANEOUS_SLACK * abs(best.value):
            why = f"{best.text} from {best.where}, but column {column.heading.name!r} is {column.mean:.5g} on average"
            return TemperatureGuess(key=key, guess=doubtful((best.value,), why), unit=unit)
    finest = best if best.firm else min(clues, key=lambda clue: clue.rounding)
    why = " and ".join(dict.fromkeys(clue.where for clue in clues))
    make = certain if best.firm or len({clue.where for clue in clues}) > 1 else likely
    return TemperatureGuess(key=key, guess=make(finest.value, why), unit=unit)


def _agree(one: _Clue, other: _Clue) -> bool:
    slack = max(one.rounding, other.rounding) if not (one.firm and other.firm) else 0.0
    return abs(one.value - other.value) <= slack + 1e-9 * abs(one.value)


def _without_repeats(clues: Sequence[_Clue]) -> list[_Clue]:
    return list({clue.value: clue for clue in reversed(clues)}.values())[::-1]


def _from_columns(look: FileLook) -> Iterator[_Clue]:
    for column in look.columns:
        role = column.heading.role
        if role in (Role.TEMPERATURE, Role.BETA) and column.constant:
            yield _Clue(
                key="beta" if role is Role.BETA else "temperature",
                text=repr(column.first),
                unit=_temperature_unit(column.heading.unit),
                where=f"column {column.heading.name!r}",
                firm=True,
            )


def _from_attributes(look: FileLook) -> Iterator[_Clue]:
    for name, text in look.attributes.items():
        found = re.fullmatch(rf"\s*{_NUMBER}\s*(K|degC)?\s*", text)
        word = name.lower()
        if found is not None and (word in ("temperature", "temp", "beta") or name == "T"):
            yield _Clue(
                key="beta" if word == "beta" else "temperature",
                text=found[1],
                unit=found[2] or "",
                where=f"attribute {name!r}",
                firm=True,
            )


def _from_remarks(look: FileLook) -> Iterator[_Clue]:
    for remark in look.remarks:
        for key, pattern in _IN_REMARKS:
            found = pattern.search(remark)
            if found is not None:
                unit = _temperature_unit(found[1] or found[3] or "")
                yield _Clue(key=key, text=found[2], unit=unit, where="a line of remarks", firm=False)


def _from_names(look: FileLook) -> Iterator[_Clue]:
    parts = Path(os.path.abspath(look.path)).parts
    names = [("the name of the file", _SUFFIXES.sub("", look.path.name))]
    names += [("the name of the folder", part) for part in parts[-2 : -2 - _FOLDERS : -1]]
    for where, name in names:
        clues = [
            _Clue(key=key, text=found[2], unit=_temperature_unit(found[3]), where=where, firm=False)
            for key, pattern in _IN_NAMES
            for found in pattern.finditer(name)
        ]
        if clues:
            yield from clues
            return  # a folder that is named differently is about something larger


def _temperature_unit(text: str) -> str:
    return {"k": "K", "kelvin": "K", "degc": "degC", "°c": "degC", "c": "degC"}.get(text.strip().lower(), "")
