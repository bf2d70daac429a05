"""Units: the Boltzmann constant in the unit of the energies, and the spelling of units in files.

Energies may be given per particle (eV, hartree, J), per amount of substance (kJ/mol), as wave numbers
(cm^-1), as temperatures (K, meaning E / k_B), or in reduced units with k_B = 1.  The one number that turns
any of them into physics is k_B in that unit; a conversion between two of them is a ratio of two such numbers.

A unit is read here as a product of powers of names and only the names are looked up, so no expression is ever
evaluated.  Output spelling is that of UDUNITS: ``kJ mol-1``.
"""

from __future__ import annotations

import difflib
import re
from functools import cache
from typing import TYPE_CHECKING

import scipy.constants

from reweight.errors import InputError

if TYPE_CHECKING:
    import pint

__all__ = [
    "REDUCED",
    "TEMPERATURE_UNITS",
    "boltzmann_constant",
    "canonical_unit",
    "energy_factor",
    "per_kelvin",
    "pressure_volume_factor",
    "time_factor",
    "to_kelvin",
]

REDUCED = "reduced"
TEMPERATURE_UNITS = ("K", "degC", REDUCED)

COUNTED_TIMES = ("step", "sweep", REDUCED)  # clocks of simulations that know no seconds

_EXAMPLES = ("kJ/mol", "kcal/mol", "eV", "meV", "hartree", "J", "cm^-1", "K", REDUCED)
_PRESSURES = ("bar", "MPa", "atm", REDUCED)
_VOLUMES = ("nm^3", "angstrom^3", "cm^3/mol", REDUCED)
_FACTOR = re.compile(r"([A-Za-zµμ_Å°%]+)(?:\^?([+-]?[0-9]{1,2}))?")
_SEPARATOR = re.compile(r"\s*([*/·])\s*|\s+")


def boltzmann_constant(energy_unit: str, temperature_unit: str) -> float:
    """Boltzmann constant in an energy unit.

    Parameters
    ----------
    energy_unit : str
        Any energy per particle or per amount of substance, a wave number, ``"K"`` for energies given as
        E / k_B, or ``"reduced"``.
    temperature_unit : {"K", "degC", "reduced"}
        Unit in which temperatures are given; ``"reduced"`` if and only if the energy unit is.

    Returns
    -------
    float
        k_B in `energy_unit` per kelvin; 1 in reduced units.

    Raises
    ------
    InputError
        A unit is unknown or is no energy, or only one of the two is ``"reduced"``.

    Notes
    -----
    k_B, N_A and h c are exact by definition of the SI (2019); only the hartree is measured (CODATA).

    Examples
    --------
    >>> round(boltzmann_constant("kJ/mol", "K") * 300.0, 8)
    2.49433879
    """
    if temperature_unit not in TEMPERATURE_UNITS:
        raise InputError(
            f"temperature unit must be one of {', '.join(TEMPERATURE_UNITS)}; got {temperature_unit!r}."
        )
    if (energy_unit == REDUCED) != (temperature_unit == REDUCED):
        raise InputError(
            f"energy unit and temperature unit must be {REDUCED!r} both or neither; "
            f"got {energy_unit!r} and {temperature_unit!r}."
        )
    return _boltzmann_constant(energy_unit)


@cache
def _boltzmann_constant(energy_unit: str) -> float:
    if energy_unit == REDUCED:
        return 1.0
    quantity = _quantity(energy_unit)
    constant = _constant_in(quantity)
    if constant is None:
        raise InputError(
            f"energy unit must be an energy; got {energy_unit!r}, which has the dimension "
            f"{quantity.dimensionality}. Use a unit like {', '.join(_EXAMPLES)}."
        )
    return constant


def _constant_in(quantity: pint.Quantity[float]) -> float | None:
    """k_B in a unit of energy per kelvin; None if it is no energy in any sense."""
    meanings = {  # what k_B becomes for each kind of unit in which people write energies
        "[energy]": (scipy.constants.k, "J/K"),
        "[energy] / [substance]": (scipy.constants.k * scipy.constants.N_A, "J/mol/K"),
        "1 / [length]": (scipy.constants.k / (scipy.constants.h * scipy.constants.c), "1/m/K"),
        "[temperature]": (1.0, "K/K"),
    }
    for dimension, (constant, unit) in meanings.items():
        if quantity.check(dimension):
            return float(constant / (1.0 * quantity / _registry().kelvin).to(unit).magnitude)
    return None


def energy_factor(from_unit: str, to_unit: str) -> float:
    """Convert energies: the number by which values in one unit are multiplied to have them in another.

    Parameters
    ----------
    from_unit, to_unit : str
        Energy units as in :func:`boltzmann_constant`; per particle and per amount of substance may be mixed.

    Returns
    -------
    float
        Value in `to_unit` of one `from_unit`.

    Raises
    ------
    InputError
        A unit is unknown or no energy, or exactly one of them is ``"reduced"``.
    """
    if (from_unit == REDUCED) != (to_unit == REDUCED):
        raise InputError(
            f"{REDUCED} energies must stay {REDUCED}, their size in other units is unknown; "
            f"got {from_unit!r} to {to_unit!r}."
        )
    return _boltzmann_constant(to_unit) / _boltzmann_constant(from_unit)


def pressure_volume_factor(pressure_unit: str, volume_unit: str, energy_unit: str) -> float:
    """Energy that is one unit of pressure times one unit of volume.

    Parameters
    ----------
    pressure_unit : str
        Such as ``"bar"``; ``"reduced"`` if and only if the other two are.
    volume_unit : str
        Such as ``"nm^3"``, or a molar one such as ``"cm^3/mol"``.
    energy_unit : str
        As in :func:`boltzmann_constant`.

    Returns
    -------
    float
        In `energy_unit`.

    Raises
    ------
    InputError
        A unit is unknown or is no pressure or volume, or only some of them are ``"reduced"``.

    Examples
    --------
    >>> round(pressure_volume_factor("bar", "nm^3", "kJ/mol"), 9)
    0.060221408
    """
    _refuse_mixed({"pressure": pressure_unit, "volume": volume_unit, "energy": energy_unit})
    if energy_unit == REDUCED:
        return 1.0
    pressure = _quantity(pressure_unit, "unit of pressure", _PRESSURES)
    volume = _quantity(volume_unit, "unit of volume", _VOLUMES)
    for what, unit, quantity, dimensions, examples in (
        ("pressure", pressure_unit, pressure, ("[pressure]",), _PRESSURES),
        ("volume", volume_unit, volume, ("[volume]", "[volume] / [substance]"), _VOLUMES),
    ):
        if not any(quantity.check(dimension) for dimension in dimensions):
            raise InputError(
                f"unit of {what} must be a {what}; got {unit!r}, which has the dimension {quantity.dimensionality}. "
                f"Use a unit like {', '.join(examples)}."
            )
    constant = _constant_in(pressure * volume)
    assert constant is not None  # a pressure times a volume is an energy
    return _boltzmann_constant(energy_unit) / constant


def _refuse_mixed(given: dict[str, str]) -> None:
    reduced = [unit == REDUCED for unit in given.values()]
    if any(reduced) and not all(reduced):
        found = ", ".join(f"{what} in {unit!r}" for what, unit in given.items())
        raise InputError(f"units of {', '.join(given)} must be {REDUCED!r} all or none; got {found}.")


def time_factor(from_unit: str, to_unit: str) -> float:
    """Convert times: the number by which values in one unit are multiplied to have them in another.

    Parameters
    ----------
    from_unit, to_unit : str
        Units of time such as ``"ps"``, or the same one of ``"step"``, ``"sweep"`` and ``"reduced"``.

    Raises
    ------
    InputError
        A unit is unknown or no time, or one is counted and the other is not the same.

    Examples
    --------
    >>> round(time_factor("ns", "ps"), 6), time_factor("sweep", "sweep")
    (1000.0, 1.0)
    """
    if from_unit in COUNTED_TIMES or to_unit in COUNTED_TIMES:
        if from_unit != to_unit:
            raise InputError(
                f"a time in {from_unit!r} must be convertible to {to_unit!r}; it is not. Give it in {to_unit!r}."
            )
        return 1.0
    given, wanted = (
        _quantity(unit, "unit of time", ("ps", "ns", *COUNTED_TIMES)) for unit in (from_unit, to_unit)
    )
    for unit, quantity in ((from_unit, given), (to_unit, wanted)):
        if not quantity.check("[time]"):
            raise InputError(
                f"unit of time must be a time, or one of {', '.join(COUNTED_TIMES)}; got {unit!r}, which has the "
                f"dimension {quantity.dimensionality}."
            )
    return float((given / wanted).to("dimensionless").magnitude)


def to_kelvin(value: float, temperature_unit: str) -> float:
    """Temperature above absolute zero: kelvin for ``"K"`` and ``"degC"``, unchanged in reduced units."""
    return value + scipy.constants.zero_Celsius if temperature_unit == "degC" else value


def canonical_unit(unit: str) -> str:
    """UDUNITS spelling of a unit, as the ``units`` attribute of a file wants it.

    Raises
    ------
    InputError
        The text is not a product of powers of unit names.

    Examples
    --------
    >>> canonical_unit("kJ/mol"), canonical_unit("reduced"), canonical_unit("1/cm")
    ('kJ mol-1', '1', 'cm-1')
    """
    return _spell({} if unit == REDUCED else _powers(unit))


def per_kelvin(unit: str) -> str:
    """UDUNITS spelling of a unit divided by kelvin; ``"1"`` (reduced units) stays ``"1"``.

    Examples
    --------
    >>> per_kelvin("kJ mol-1"), per_kelvin("K"), per_kelvin("1")
    ('kJ mol-1 K-1', '1', '1')
    """
    powers = {} if unit == REDUCED else _powers(unit)
    if powers:
        powers["K"] = powers.get("K", 0) - 1
    return _spell(powers)


def _powers(unit: str) -> dict[str, int]:
    """Names and powers of a unit: ``"kJ/mol"`` is ``{"kJ": 1, "mol": -1}``; ``"1"`` is the empty product."""
    powers: dict[str, int] = {}
    parts = _SEPARATOR.split(unit.strip().replace("**", "^"))
    for place, (separator, part) in enumerate(zip([None, *parts[1::2]], parts[::2], strict=True)):
        if part == "1" and place == 0:
            continue
        factor = _FACTOR.fullmatch(part)
        if factor is None:
            raise InputError(
                f"unit must be a product of powers of unit names; got {unit!r}. "
                f"Write it like {', '.join(_EXAMPLES)}."
            )
        sign = -1 if separator == "/" else 1
        powers[factor[1]] = powers.get(factor[1], 0) + sign * int(factor[2] or 1)
    return powers


def _spell(powers: dict[str, int]) -> str:
    return " ".join(f"{name}{'' if power == 1 else power}" for name, power in powers.items() if power) or "1"


@cache
def _registry() -> pint.UnitRegistry[float]:
    import pint  # takes 0.1 to 0.6 s, so only when a unit must be looked up

    return pint.UnitRegistry(cache_folder=None)


def _quantity(
    unit: str, what: str = "energy unit", examples: tuple[str, ...] = _EXAMPLES
) -> pint.Quantity[float]:
    """One of a unit, from its names and powers alone."""
    import pint

    registry = _registry()
    quantity = registry.Quantity(1.0)
    for name, power in _powers(unit).items():
        try:
            quantity = quantity * registry.Quantity(1.0, registry.get_name(name)) ** power
        except (pint.errors.UndefinedUnitError, pint.errors.OffsetUnitCalculusError):
            near = difflib.get_close_matches(name.lower(), examples, n=1, cutoff=0.7)
            hint = f" Did you mean {near[0]!r}?" if near else ""
            raise InputError(
                f"{what} must be made of known units; got {unit!r}, in which {name!r} is not one.{hint} "
                f"Use a unit like {', '.join(examples)}."
            ) from None
    return quantity
