"""What a single value of a study file may be, as annotated types for the models in ``schema.py``.

Each check raises a ``ValueError`` whose text continues the name of the key: ``must be ...; got ...``.
"""

from __future__ import annotations

import codecs
import math
import re
from typing import Annotated, Literal

from pydantic import AfterValidator, BeforeValidator, Field, PlainValidator

from reweight import units
from reweight.errors import InputError

__all__ = [
    "COLD",
    "CommentPrefixes",
    "Delimiter",
    "Discard",
    "Encoding",
    "EnergyUnit",
    "FileNames",
    "FiniteNumber",
    "Header",
    "Moments",
    "Name",
    "Normalisation",
    "NotNegativeNumber",
    "NumberOfStates",
    "PositiveInteger",
    "PositiveNumber",
    "Pressure",
    "RunName",
    "SingleColumn",
    "SummedColumns",
    "Temperature",
    "TimeUnit",
    "TotalOrPer",
    "Unit",
    "VolumeUnit",
    "amount_and_unit",
    "base_and_power",
    "listed",
    "pressure_and_unit",
]

ColumnList = tuple[str | int, ...]

COLD = (
    200.0  # below, either scale is usual; above, kelvin is what a file without a unit means (common practice)
)
_LARGEST_MOMENT = 8
_AMOUNT = re.compile(r"\s*([0-9]+(?:\.[0-9]*)?)\s*(%|[A-Za-zµμ]+)\s*")
_PRESSURE = re.compile(r"\s*([+-]?[0-9]+(?:\.[0-9]*)?(?:[eE][+-]?[0-9]{1,3})?)\s*([^\s0-9].*?)\s*")


def _columns(value: object) -> ColumnList:
    """Check a column, or a list of columns to be summed."""
    entries = value if isinstance(value, list) else [value]
    for entry in entries:
        named = isinstance(entry, str) and bool(entry.strip())
        placed = isinstance(entry, int) and not isinstance(entry, bool) and entry >= 1
        if not (named or placed):
            raise ValueError(f"must be a column's name or its position counted from 1; got {entry!r}")
    if not entries or len(set(entries)) < len(entries):
        raise ValueError(f"must list each column to be summed once; got {value!r}")
    return tuple(entries)


def _single_column(value: object) -> ColumnList:
    """Check a column that is not summed."""
    if isinstance(value, list):
        raise ValueError(f"must be one column; got {value!r}")
    return _columns(value)


def listed(value: object) -> object:
    """Make a tuple of a list and let a single text stand for a list of one."""
    if isinstance(value, str):
        return (value,)
    return tuple(value) if isinstance(value, list) else value


def _plain_name(value: str) -> str:
    if not value.strip() or value != value.strip() or not value.isprintable():
        raise ValueError(f"must be a printable text that neither begins nor ends with a blank; got {value!r}")
    return value


def _one_line(value: str) -> str:
    if not value.isprintable():
        raise ValueError(f"must be one line of printable text; got {value!r}")
    return value


def _header(value: str) -> str:
    """Check the header of a table in a log; how many blanks or tabs are between its words does not matter."""
    return _plain_name(" ".join(value.split()))


def _run_name(value: str) -> str:
    if "/" in value or value in {".", ".."}:
        raise ValueError(f"must do without '/' (it becomes the name of a group); got {value!r}")
    return _plain_name(value)


def _energy_unit(value: str) -> str:
    try:
        units.boltzmann_constant(value, units.REDUCED if value == units.REDUCED else "K")
    except InputError as error:
        raise ValueError(str(error).removeprefix("energy unit ")) from None
    return value


def _any_unit(value: str) -> str:
    try:
        units.canonical_unit(value)
    except InputError as error:
        raise ValueError(str(error).removeprefix("unit ")) from None
    return value


def _time_unit(value: str) -> str:
    try:
        units.time_factor(value, value)
    except InputError as error:
        raise ValueError(str(error).removeprefix("unit of time ")) from None
    return value


def _volume_unit(value: str) -> str:
    reduced = value == units.REDUCED
    return _pressure_volume(value, "volume", value, units.REDUCED if reduced else "bar", reduced=reduced)


def _pressure(value: str) -> str:
    if _PRESSURE.fullmatch(value) is None:
        raise ValueError(f'must be a number and a unit, like "1 bar" or "0.5 reduced"; got {value!r}')
    unit = pressure_and_unit(value)[1]
    reduced = unit == units.REDUCED
    return _pressure_volume(value, "pressure", units.REDUCED if reduced else "nm^3", unit, reduced=reduced)


def _pressure_volume(value: str, what: str, volume_unit: str, pressure_unit: str, *, reduced: bool) -> str:
    try:
        units.pressure_volume_factor(pressure_unit, volume_unit, units.REDUCED if reduced else "J")
    except InputError as error:
        raise ValueError(str(error).removeprefix(f"unit of {what} ")) from None
    return value


def pressure_and_unit(text: str) -> tuple[float, str]:
    """Split ``"1 bar"`` into number and unit."""
    found = _PRESSURE.fullmatch(text)
    assert found is not None  # checked when it was given
    return float(found[1]), found[2]


def number_of_states(value: str) -> str:
    """Check a number of states written as base^power."""
    # Two short whole numbers, so nothing has to be evaluated and no power of them is ever formed.
    if re.fullmatch(r"\s*[0-9]{1,18}\s*\^\s*[0-9]{1,18}\s*", value) is None or min(base_and_power(value)) < 1:
        raise ValueError(f'must be a number of states written "base^power", like "2^256"; got {value!r}')
    return value


def base_and_power(states: str) -> tuple[int, int]:
    """Split ``"2^256"`` into its two numbers."""
    base, power = states.split("^")
    return int(base), int(power)


def _total_or_per(value: str) -> str:
    if value != "total" and not re.fullmatch(r"per \S.*", value):
        raise ValueError(f'must be "total" or "per " and a name, like "per atom"; got {value!r}')
    return value


def _normalisation(value: object) -> object:
    return "per site" if isinstance(value, str) and re.fullmatch(r"per \S.*", value) else value


def discarded_start(value: object) -> str | int:
    """Check the beginning of a run that is left out: ``"auto"``, a number of rows, a percentage or a time."""
    if isinstance(value, int) and not isinstance(value, bool) and value >= 0:
        return value
    text = value if isinstance(value, str) else ""
    if text == "auto":
        return text
    if _AMOUNT.fullmatch(text):
        amount, unit = amount_and_unit(text)
        if unit == "%" and amount < 100:
            return text
        if unit != "%":
            _time_unit(unit)
            return text
    raise ValueError(
        'must be "auto", a number of rows, a percentage below 100 like "10 %" or a time like "20 ns"; '
        f"got {value!r}"
    )


def amount_and_unit(text: str) -> tuple[float, str]:
    """Split ``"10 %"`` or ``"20 ns"`` into number and unit."""
    found = _AMOUNT.fullmatch(text)
    assert found is not None  # checked when it was given
    return float(found[1]), found[2]


def _moments(value: object) -> tuple[int, ...]:
    entries = value if isinstance(value, list) else []
    if not entries or not all(type(each) is int and 1 <= each <= _LARGEST_MOMENT for each in entries):
        raise ValueError(f"must be a list of whole numbers from 1 to {_LARGEST_MOMENT}; got {value!r}")
    return tuple(sorted(set(entries)))


def _encoding(value: str) -> str:
    try:
        codecs.lookup(value)
    except LookupError:
        raise ValueError(f'must be a known encoding like "utf-8" or "latin-1"; got {value!r}') from None
    return value


def _comment_prefixes(value: tuple[str, ...]) -> tuple[str, ...]:
    if not value or not all(each.strip() for each in value):
        raise ValueError(f'must hold what begins a comment line, like "#"; got {list(value)!r}')
    return value


def _file_names(value: tuple[str, ...]) -> tuple[str, ...]:
    if not value or not all(each.strip() and "\0" not in each for each in value):
        raise ValueError(f"must hold names of files; got {list(value)!r}")
    return value


def _delimiter(value: str) -> str:
    single = {"tab": "\t", "blanks": " "}.get(value, value)
    if len(single) != 1 or single.isalnum() or single in '+-."\n\r':
        raise ValueError(f'must be "blanks", "tab" or one character like ","; got {value!r}')
    return single


def _number_or_infinite(value: float) -> float:
    if math.isnan(value) or value == -math.inf:
        raise ValueError(f"must be a number; got {value}")
    return value


def _finite(value: float) -> float:
    if not math.isfinite(value):
        raise ValueError(f"must be finite; got {value}")
    return value


def _finite_and_not_negative(value: float) -> float:
    if not (math.isfinite(value) and value >= 0):
        raise ValueError(f"must be finite and not negative; got {value}")
    return value


def _finite_and_positive(value: float) -> float:
    if not (math.isfinite(value) and value > 0):
        raise ValueError(f"must be finite and greater than 0; got {value}")
    return value


Name = Annotated[str, AfterValidator(_plain_name)]
Header = Annotated[str, AfterValidator(_header)]
Line = Annotated[str, AfterValidator(_one_line)]
RunName = Annotated[str, AfterValidator(_run_name)]
Unit = Annotated[str, AfterValidator(_any_unit)]
TimeUnit = Annotated[str, AfterValidator(_time_unit)]
VolumeUnit = Annotated[str, AfterValidator(_volume_unit)]
Pressure = Annotated[str, AfterValidator(_pressure)]
EnergyUnit = Annotated[str, AfterValidator(_energy_unit)]
PositiveInteger = Annotated[int, Field(gt=0)]
FiniteNumber = Annotated[float, AfterValidator(_finite)]
PositiveNumber = Annotated[float, AfterValidator(_finite_and_positive)]
NotNegativeNumber = Annotated[float, AfterValidator(_finite_and_not_negative)]
Temperature = Annotated[float, AfterValidator(_number_or_infinite)]
SingleColumn = Annotated[ColumnList, PlainValidator(_single_column)]
SummedColumns = Annotated[ColumnList, PlainValidator(_columns)]
_TextList = Annotated[tuple[str, ...], BeforeValidator(listed)]
TotalOrPer = Annotated[str, AfterValidator(_total_or_per)]
Normalisation = Annotated[Literal["total", "per site", "plain"], BeforeValidator(_normalisation)]
CommentPrefixes = Annotated[_TextList, AfterValidator(_comment_prefixes)]
FileNames = Annotated[_TextList, AfterValidator(_file_names)]
NumberOfStates = Annotated[str, AfterValidator(number_of_states)]
Moments = Annotated[tuple[int, ...], PlainValidator(_moments)]
Discard = Annotated[str | int, PlainValidator(discarded_start)]
Encoding = Annotated[str, AfterValidator(_encoding)]
Delimiter = Annotated[str, AfterValidator(_delimiter)]
