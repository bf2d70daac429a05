"""What the words in headers, comments and names of files usually mean.

Names and units are common practice among simulation codes; no source.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum

from reweight import units
from reweight.errors import InputError

__all__ = ["Heading", "Role", "energy_unit_of", "is_reduced", "read_heading", "time_unit_of"]


class Role(StrEnum):
    """What a column holds, as far as its name tells."""

    POTENTIAL = "potential energy"
    TOTAL = "total energy"
    ENERGY = "energy"
    KINETIC = "kinetic energy"
    TEMPERATURE = "temperature"
    BETA = "inverse temperature"
    CLOCK = "time"
    VOLUME = "volume"
    PRESSURE = "pressure"
    REPLICA = "replica"
    OTHER = "other"


# Names without blanks, signs and capitals.
_ROLES: Mapping[Role, str] = {
    Role.POTENTIAL: "potential potentialenergy potenergy poteng pot epot pe energypotential u upot "
    "configurational configurationalenergy",
    Role.TOTAL: "total totalenergy toteng etot etotal energytotal",
    Role.ENERGY: "energy energies e ener",
    Role.KINETIC: "kinetic kineticenergy kineng ekin ke energykinetic",
    Role.TEMPERATURE: "temperature temp tinst ttarget targettemperature",
    Role.BETA: "beta inversetemperature",
    Role.CLOCK: "time step steps timestep sweep sweeps mcs iteration frame cycle cycles mdstep sample index",
    Role.VOLUME: "volume vol",
    Role.PRESSURE: "pressure press",
    Role.REPLICA: "replica walker",
}
_LETTERS = {"T": Role.TEMPERATURE, "t": Role.CLOCK, "V": Role.VOLUME, "P": Role.PRESSURE}
_COUNTED = {"sweep": ("sweep", "sweeps", "mcs"), "step": ("step", "steps", "timestep", "mdstep", "iteration")}
_REDUCED = frozenset({"reduced", "1", "lj", "eps", "epsilon", "ε", "dimensionless", "k_b=1"})
_UNIT = re.compile(r"\s*(?:\[([^\]]*)\]|\(([^)]*)\))\s*$")
_PER = re.compile(
    r"\s*(?:/|_per_|\bper\b)\s*(atom|site|spin|particle|molecule|bead|monomer|residue|N)s?$", re.IGNORECASE
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Heading:
    """The name of a column, taken apart.

    Attributes
    ----------
    name : str
        As in the file, without the unit.
    unit : str
        What stands in brackets behind it or in its attribute, without the "per atom"; empty if nothing does.
    per : str
        What the number is counted by: ``"atom"``; empty if nothing is said.
    role : Role
    """

    name: str
    unit: str
    per: str
    role: Role


def read_heading(name: str, attribute: str = "") -> Heading:
    """Take the name of a column, and its ``units`` attribute, apart."""
    bare, unit = name, attribute.strip()
    bracket = _UNIT.search(name)
    if bracket is not None and bracket.start() > 0:
        bare = name[: bracket.start()]
        unit = unit or (bracket[1] or bracket[2] or "").strip()
    per = ""
    for text in (unit, bare):
        found = _PER.search(text)
        if found is not None and not per:
            per = "particle" if found[1] == "N" else found[1].lower()
    word = _PER.sub("", bare)
    return Heading(name=bare, unit=_PER.sub("", unit), per=per, role=_role(word))


def _role(word: str) -> Role:
    last = word.rsplit("/", 1)[-1].strip()  # the path of a variable in its groups
    if last in _LETTERS:
        return _LETTERS[last]
    plain = re.sub(r"[^a-z0-9]", "", last.lower())
    return next((role for role, words in _ROLES.items() if plain in words.split()), Role.OTHER)


def is_reduced(unit: str) -> bool:
    """Whether a text says that k_B = 1."""
    return unit.lower().replace(" ", "") in _REDUCED


def energy_unit_of(unit: str) -> str | None:
    """Unit as a study writes it; None if the text is no unit of energy."""
    if is_reduced(unit):
        return units.REDUCED
    for spelling in (unit, unit.replace("Kcal", "kcal").replace("KJ", "kJ")):
        try:
            units.boltzmann_constant(spelling, "K")
        except InputError:
            continue
        return spelling
    return None


def time_unit_of(heading: Heading) -> str | None:
    """Unit of a clock; None if nothing tells it."""
    try:
        units.time_factor(heading.unit, heading.unit)
    except InputError:
        word = heading.name.lower().replace(" ", "").replace("_", "")
        return next((unit for unit, words in _COUNTED.items() if word in words and not heading.unit), None)
    return heading.unit
